"""Drag on a small sphere in air: Stokes with slip, its inverse, the unsteady terms, finite Reynolds number."""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike, NDArray

Values = NDArray[np.float64]

# Kim, Mulholland, Kukuck and Pui, J. Res. NIST 110 (2005) 31; goes with the mean free path in `air`
SLIP_A = 1.165
SLIP_B = 0.483
SLIP_C = 0.997

SLIP_RELATIVE_U = 0.03
"""Relative standard uncertainty of C - 1: the sets of Davies (1945) and of Allen and Raabe (1985) lie within 6 %."""

NEWTON_STEPS = 7


def slip_correction(diameter: ArrayLike, mean_free_path: ArrayLike, slip_factor: ArrayLike = 1.0) -> Values:
    """Factor by which drag falls below Stokes' law as the gas slips at the surface.

    C = 1 + f Kn (A + B exp(-C' / Kn)),  Kn = 2 lambda / d

    Parameters
    ----------
    diameter : array_like
        Diameter of the sphere [m].
    mean_free_path : array_like
        Mean free path of the gas [m], in the convention of `air.mean_free_path`.
    slip_factor : array_like
        Factor f on C - 1 [1], which carries the uncertainty of the coefficients.

    Returns
    -------
    ndarray
        Slip correction [1], above one.

    Notes
    -----
    Coefficients 1.165, 0.483, 0.997: Kim, Mulholland, Kukuck and Pui, J. Res. NIST 110 (2005) 31, measured on
    polystyrene spheres of 20 to 270 nm at Kn 0.5 to 83 (from memory); the form has the right limits on both sides.
    """
    knudsen = 2.0 * np.asarray(mean_free_path, dtype=np.float64) / np.asarray(diameter, dtype=np.float64)
    slip = knudsen * (SLIP_A + SLIP_B * np.exp(-np.minimum(SLIP_C / knudsen, 700.0)))
    return (1.0 + np.asarray(slip_factor, dtype=np.float64) * slip)[()]


def drag_rate(
    diameter: ArrayLike,
    density: ArrayLike,
    shape_factor: ArrayLike,
    viscosity: ArrayLike,
    mean_free_path: ArrayLike,
    slip_factor: ArrayLike = 1.0,
) -> Values:
    """Steady drag force per mass and speed.

    gamma = 18 eta chi / (rho d^2 C(d))

    Parameters
    ----------
    diameter : array_like
        Volume-equivalent diameter [m].
    density : array_like
        Particle density [kg/m3].
    shape_factor : array_like
        Dynamic shape factor [1].
    viscosity : array_like
        Viscosity of the air [Pa s].
    mean_free_path : array_like
        Mean free path of the air [m].
    slip_factor : array_like
        As in `slip_correction` [1].

    Returns
    -------
    ndarray
        Drag rate [1/s].

    Notes
    -----
    Stokes' law with slip; Hinds, Aerosol Technology, chapter 3.
    """
    d = np.asarray(diameter, dtype=np.float64)
    stokes = 18.0 * np.asarray(viscosity, dtype=np.float64) * np.asarray(shape_factor, dtype=np.float64)
    return (stokes / (np.asarray(density, dtype=np.float64) * d * d * slip_correction(d, mean_free_path, slip_factor)))[
        ()
    ]


def diameter_from_drag_rate(
    gamma: ArrayLike,
    density: ArrayLike,
    shape_factor: ArrayLike,
    viscosity: ArrayLike,
    mean_free_path: ArrayLike,
    slip_factor: ArrayLike = 1.0,
) -> Values:
    """Diameter at which `drag_rate` gives the drag rate stated.

    y^2 + y f (A + B exp(-C' y)) = 18 eta chi / (rho gamma (2 lambda)^2),  y = d / (2 lambda)

    Parameters
    ----------
    gamma : array_like
        Drag rate [1/s], positive.
    density, shape_factor, viscosity, mean_free_path, slip_factor : array_like
        As in `drag_rate`.

    Returns
    -------
    ndarray
        Volume-equivalent diameter [m].

    Notes
    -----
    The left side rises with y throughout. Newton's steps start from the root with the exponential left out, which is
    exact in both limits, and all elements take the same number of steps, so the result is smooth in every argument.
    """
    path = 2.0 * np.asarray(mean_free_path, dtype=np.float64)
    stokes = 18.0 * np.asarray(viscosity, dtype=np.float64) * np.asarray(shape_factor, dtype=np.float64)
    root = np.sqrt(stokes / (np.asarray(density, dtype=np.float64) * np.asarray(gamma, dtype=np.float64))) / path
    target = root * root
    factor = np.asarray(slip_factor, dtype=np.float64)
    large, small = SLIP_A * factor, SLIP_B * factor
    y = 2.0 * target / (large + np.sqrt(large**2 + 4.0 * target))
    for _ in range(NEWTON_STEPS):
        gas = small * np.exp(-np.minimum(SLIP_C * y, 700.0))
        excess = y * (y + large + gas) - target
        y = y - excess / (2.0 * y + large + gas * (1.0 - SLIP_C * y))
    return (y * path)[()]


def added_mass(air_density: ArrayLike, density: ArrayLike) -> Values:
    """Added mass of an accelerated sphere over its own mass.

    rho_air / (2 rho)

    Parameters
    ----------
    air_density : array_like
        Density of the air [kg/m3].
    density : array_like
        Particle density [kg/m3].

    Returns
    -------
    ndarray
        Ratio [1]; argument `added_mass` in `motion`.

    Notes
    -----
    Landau and Lifshitz, Fluid Mechanics, section 24.
    """
    return (np.asarray(air_density, dtype=np.float64) / (2.0 * np.asarray(density, dtype=np.float64)))[()]


def history(diameter: ArrayLike, angular_frequency: ArrayLike, air_density: ArrayLike, viscosity: ArrayLike) -> Values:
    """Radius over the depth to which the air follows an oscillation: size of Basset's history force.

    (d / 2) sqrt(Omega rho_air / eta)

    Parameters
    ----------
    diameter : array_like
        Diameter [m].
    angular_frequency : array_like
        Angular frequency of the drive [rad/s].
    air_density : array_like
        Density of the air [kg/m3].
    viscosity : array_like
        Viscosity of the air [Pa s].

    Returns
    -------
    ndarray
        Ratio [1]; argument `history` in `motion`.

    Notes
    -----
    Landau and Lifshitz, Fluid Mechanics, section 24. At a motion of frequency nu in units of Omega the drag is
    multiplied by 1 + history sqrt(i nu).
    """
    rate = np.asarray(angular_frequency, dtype=np.float64) * np.asarray(air_density, dtype=np.float64)
    return (0.5 * np.asarray(diameter, dtype=np.float64) * np.sqrt(rate / np.asarray(viscosity, dtype=np.float64)))[()]


def reynolds(speed: ArrayLike, diameter: ArrayLike, air_density: ArrayLike, viscosity: ArrayLike) -> Values:
    """Reynolds number of a sphere moving through air.

    Re = rho_air |v| d / eta

    Parameters
    ----------
    speed : array_like
        Speed [m/s].
    diameter : array_like
        Diameter [m].
    air_density : array_like
        Density of the air [kg/m3].
    viscosity : array_like
        Viscosity of the air [Pa s].

    Returns
    -------
    ndarray
        Reynolds number [1].
    """
    momentum = np.abs(np.asarray(speed, dtype=np.float64)) * np.asarray(air_density, dtype=np.float64)
    return (momentum * np.asarray(diameter, dtype=np.float64) / np.asarray(viscosity, dtype=np.float64))[()]


def schiller_naumann(reynolds_number: ArrayLike) -> Values:
    """Factor by which drag exceeds Stokes' law at finite Reynolds number.

    f = 1 + 0.15 Re^0.687

    Parameters
    ----------
    reynolds_number : array_like
        Reynolds number [1], not negative, below 800.

    Returns
    -------
    ndarray
        Drag over Stokes' drag [1].

    Notes
    -----
    Schiller and Naumann (1933), as in Clift, Grace and Weber, Bubbles, Drops and Particles (1978).
    """
    return (1.0 + 0.15 * np.asarray(reynolds_number, dtype=np.float64) ** 0.687)[()]
