"""Air: density (CIPM-2007), viscosity and mean free path, with how far each can be trusted."""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike, NDArray

Values = NDArray[np.float64]

CIPM_TEMPERATURE = (288.15, 300.15)  # K
CIPM_PRESSURE = (60_000.0, 110_000.0)  # Pa
CIPM_RELATIVE_U = 22e-6

# The gas that the slip coefficients in `drag` were measured in: viscosity and mean free path belong together.
REFERENCE_TEMPERATURE = 296.15  # K
REFERENCE_PRESSURE = 101_325.0  # Pa
REFERENCE_VISCOSITY = 1.83245e-5  # Pa s
REFERENCE_MEAN_FREE_PATH = 67.3e-9  # m
SUTHERLAND = 110.4  # K

VISCOSITY_TEMPERATURE = (250.0, 350.0)  # K, where the stated uncertainty is smallest
VISCOSITY_RELATIVE_U = 0.002


def saturation_vapour_pressure(temperature: ArrayLike) -> Values:
    """Pressure of water vapour over water at saturation.

    p_sv = exp(A T^2 + B T + C + D / T)

    Parameters
    ----------
    temperature : array_like
        Air temperature [K].

    Returns
    -------
    ndarray
        Saturation vapour pressure [Pa].

    Notes
    -----
    Picard, Davis, Glaeser and Fujii, Metrologia 45 (2008) 149.
    """
    t = np.asarray(temperature, dtype=np.float64)
    exponent = 1.2378847e-5 * t * t - 1.9121316e-2 * t + 33.93711047 - 6.3431645e3 / t
    return np.exp(np.maximum(exponent, -700.0))[()]


def density(temperature: ArrayLike, pressure: ArrayLike, relative_humidity: ArrayLike) -> Values:
    """Density of moist air at 400 ppm of carbon dioxide.

    rho = 3.483740e-3 p / (Z T) (1 - 0.3780 x_v),  x_v = h f p_sv / p

    Parameters
    ----------
    temperature : array_like
        Air temperature [K].
    pressure : array_like
        Air pressure [Pa].
    relative_humidity : array_like
        Relative humidity [1], 0 to 1.

    Returns
    -------
    ndarray
        Density [kg/m3].

    Notes
    -----
    CIPM-2007 (Picard et al., Metrologia 45 (2008) 149) in its range, 15 to 27 degC and 600 to 1100 hPa. Beyond it
    the compressibility Z and the enhancement f are those of the nearest edge in temperature and of the upper edge
    in pressure, both without a step: at low pressure Z tends to 1 by itself, which leaves the moist ideal gas. Vapour
    can make up no more than all of the gas, so x_v ends at 1. `density_relative_u` says what that is worth.
    """
    t = np.asarray(temperature, dtype=np.float64)
    p = np.asarray(pressure, dtype=np.float64)
    edge = np.clip(t, *CIPM_TEMPERATURE)
    celsius = edge - 273.15
    capped = np.minimum(p, CIPM_PRESSURE[1])
    enhancement = 1.00062 + 3.14e-8 * capped + 5.6e-7 * celsius**2
    humidity = np.asarray(relative_humidity, dtype=np.float64)
    vapour = np.minimum(humidity * enhancement * saturation_vapour_pressure(t), p) / p
    ratio = capped / edge
    compressibility = (
        1.0
        - ratio
        * (
            1.58123e-6
            - 2.9331e-8 * celsius
            + 1.1043e-10 * celsius**2
            + (5.707e-6 - 2.051e-8 * celsius) * vapour
            + (1.9898e-4 - 2.376e-6 * celsius) * vapour**2
        )
        + ratio**2 * (1.83e-11 - 0.765e-8 * vapour**2)
    )
    return (3.483740e-3 * p / (compressibility * t) * (1.0 - 0.3780 * vapour))[()]


def density_relative_u(temperature: ArrayLike, pressure: ArrayLike) -> Values:
    """Relative standard uncertainty of the density formula, without that of its inputs.

    Parameters
    ----------
    temperature : array_like
        Air temperature [K].
    pressure : array_like
        Air pressure [Pa].

    Returns
    -------
    ndarray
        Relative standard uncertainty [1]: 22e-6 in the range of CIPM-2007 (Picard et al. 2008); 1e-3 between 250 and
        350 K up to 2000 hPa; 2e-2 elsewhere.

    Notes
    -----
    The wider figures are our own bounds, from comparison with the equation of state of dry air (Lemmon et al. 2000)
    and from what saturation over ice or hot water can add.
    """
    t, p = np.broadcast_arrays(np.asarray(temperature, dtype=np.float64), np.asarray(pressure, dtype=np.float64))
    inside = (t >= CIPM_TEMPERATURE[0]) & (t <= CIPM_TEMPERATURE[1])
    inside &= (p >= CIPM_PRESSURE[0]) & (p <= CIPM_PRESSURE[1])
    near = (t >= 250.0) & (t <= 350.0) & (p <= 200_000.0)
    return np.where(inside, CIPM_RELATIVE_U, np.where(near, 1e-3, 2e-2))[()]


def viscosity(temperature: ArrayLike) -> Values:
    """Dynamic viscosity of air.

    eta = eta_r (T / T_r)^(3/2) (T_r + S) / (T + S),  eta_r = 1.83245e-5 Pa s at T_r = 296.15 K, S = 110.4 K

    Parameters
    ----------
    temperature : array_like
        Air temperature [K].

    Returns
    -------
    ndarray
        Viscosity [Pa s].

    Notes
    -----
    The base of aerosol science, the one the slip coefficients in `drag` rest on (Kim, Mulholland, Kukuck and Pui,
    J. Res. NIST 110 (2005) 31). It lies 0.15 % below the reference equation of Lemmon and Jacobsen, Int. J.
    Thermophys. 25 (2004) 21, and 0.26 % above the U.S. Standard Atmosphere 1976: `viscosity_relative_u` covers both.
    Humidity and pressure, below 0.1 % in a room, are left out.
    """
    t = np.asarray(temperature, dtype=np.float64)
    reduced = t / REFERENCE_TEMPERATURE
    sutherland = (REFERENCE_TEMPERATURE + SUTHERLAND) / (t + SUTHERLAND)
    return (REFERENCE_VISCOSITY * reduced * np.sqrt(reduced) * sutherland)[()]


def viscosity_relative_u(temperature: ArrayLike) -> Values:
    """Relative standard uncertainty of the viscosity formula.

    Parameters
    ----------
    temperature : array_like
        Air temperature [K].

    Returns
    -------
    ndarray
        Relative standard uncertainty [1]: 0.2 % from 250 to 350 K, growing beyond by 2.5 % for each factor e in
        temperature; from 100 to 1000 K that covers Lemmon and Jacobsen (2004). Below 100 K air hardly is a gas and
        the figure is a guess.
    """
    t = np.asarray(temperature, dtype=np.float64)
    low, high = VISCOSITY_TEMPERATURE
    beyond = np.maximum(np.maximum(np.log(low / t), np.log(t / high)), 0.0)
    return (VISCOSITY_RELATIVE_U + 0.025 * beyond)[()]


def mean_free_path(temperature: ArrayLike, pressure: ArrayLike) -> Values:
    """Mean free path of air molecules, in the convention the slip coefficients in `drag` were fitted with.

    lambda = lambda_r (p_r / p) (T / T_r) (1 + S / T_r) / (1 + S / T),  lambda_r = 67.3 nm at 101325 Pa and 296.15 K

    Parameters
    ----------
    temperature : array_like
        Air temperature [K].
    pressure : array_like
        Air pressure [Pa].

    Returns
    -------
    ndarray
        Mean free path [m].

    Notes
    -----
    Willeke, J. Aerosol Sci. 7 (1976) 381 (from memory); reference value of Kim et al., J. Res. NIST 110 (2005) 31.
    """
    t = np.asarray(temperature, dtype=np.float64)
    p = np.asarray(pressure, dtype=np.float64)
    scale = (t / REFERENCE_TEMPERATURE) * (1.0 + SUTHERLAND / REFERENCE_TEMPERATURE) / (1.0 + SUTHERLAND / t)
    return (REFERENCE_MEAN_FREE_PATH * (REFERENCE_PRESSURE / p) * scale)[()]
