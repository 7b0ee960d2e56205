"""Local gravity from latitude and elevation."""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike, NDArray

Values = NDArray[np.float64]

# World Geodetic System 1984 (NIMA TR8350.2)
EQUATOR = 9.7803253359  # m/s2
SOMIGLIANA = 0.00193185265241
ECCENTRICITY_SQUARED = 0.00669437999014
SEMI_MAJOR_AXIS = 6_378_137.0  # m
FLATTENING = 1.0 / 298.257223563
ROTATION = 0.00344978650684  # centrifugal over gravitational acceleration at the equator

RELATIVE_U = 5e-5
"""Relative standard uncertainty of normal gravity as a value for a place: local anomalies reach 1e-4 of g."""


def normal_gravity(latitude: ArrayLike, elevation: ArrayLike) -> Values:
    """Acceleration of free fall on and above the reference ellipsoid.

    g = g_e (1 + k s) / sqrt(1 - e2 s) (1 - (2/a) (1 + f + m - 2 f s) H + 3 H^2 / a^2),  s = sin^2(latitude)

    Parameters
    ----------
    latitude : array_like
        Geodetic latitude [rad], either sign.
    elevation : array_like
        Height above the ellipsoid [m]; height above sea level serves, it differs by less than 110 m (3e-5 of g).

    Returns
    -------
    ndarray
        Normal gravity [m/s2].

    Notes
    -----
    Somigliana's formula with the constants of WGS 84 (NIMA TR8350.2), second order in the height. The local anomaly
    is not in it: `RELATIVE_U`.
    """
    s = np.sin(np.asarray(latitude, dtype=np.float64)) ** 2
    height = np.asarray(elevation, dtype=np.float64) / SEMI_MAJOR_AXIS
    surface = EQUATOR * (1.0 + SOMIGLIANA * s) / np.sqrt(1.0 - ECCENTRICITY_SQUARED * s)
    factor = 1.0 - 2.0 * (1.0 + FLATTENING + ROTATION - 2.0 * FLATTENING * s) * height + 3.0 * height**2
    return (surface * factor)[()]
