"""Mass, charge and surface charge density from charge-to-mass ratio and size, and what is plausible for them."""

from __future__ import annotations

from typing import Any

import numpy as np
from numpy.typing import NDArray
from scipy import constants

Array = NDArray[np.floating[Any]]
ELEMENTARY_CHARGE = constants.e  # C, exact
AIR_BREAKDOWN_FIELD = 3e6  # V/m, uniform field over centimetres; small spheres exceed it
AIR_LIMIT = constants.epsilon_0 * AIR_BREAKDOWN_FIELD  # C/m2


def sphere_mass(diameter: Array | float, density: Array | float) -> Array:
    """Mass of a sphere, pi/6 rho d^3 [kg], of volume-equivalent diameter [m] and density [kg/m3]."""
    return np.asarray(np.pi / 6.0 * np.asarray(density) * np.asarray(diameter) ** 3)


def surface_charge_density(charge: Array | float, diameter: Array | float) -> Array:
    """Charge over surface, q / (pi d^2) [C/m2], of charge [C] and diameter [m]."""
    return np.asarray(np.asarray(charge) / (np.pi * np.asarray(diameter) ** 2))


def electrons(charge: Array | float) -> Array:
    """Charge in elementary charges, q / e [1], signed."""
    return np.asarray(np.asarray(charge) / ELEMENTARY_CHARGE)


def air_limit_ratio(density: Array | float) -> Array:
    """Surface charge density [C/m2] over eps0 x 3 MV/m [1]; above 1 deserves a note, not a rejection."""
    return np.asarray(np.abs(np.asarray(density)) / AIR_LIMIT)
