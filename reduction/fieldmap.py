"""What the dimensions of the electrodes make of the trap constants, and where the field departs from the linear one.

First order in logarithms about the drawing: D = D0 exp(sum_k S_k (x_k - x0_k)), A likewise, x the dimensions.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.floating[Any]]
CORRECTION_U = 0.1  # of the shift corrected for: what first order leaves out, as integrating the motion shows
LEAST_STIFFNESS = 0.3  # of the linear field's, below which a shift is no longer of first order


@dataclass(frozen=True)
class FieldMap:
    """Trap constants as functions of the dimensions, and the field on the axis about the drive's centre.

    `drive` and `dc` are the coefficients c_1, c_2 ... of the relative fields on the axis at height z from the centre:
    the drive's A z (1 + c_1 z + c_2 z^2 ...), that of dc D (1 + c_1 z + c_2 z^2 ...), c_n in [1/m^n].
    """

    roles: tuple[str, ...]  # of the dimensions among the shared inputs
    drawn: tuple[float, ...]  # dimensions as drawn [m]
    dc_field: float  # D0 [1/m]
    ac_gradient: float  # A0 [1/m2]
    dc_slopes: tuple[float, ...]  # d ln D / dx [1/m]
    ac_slopes: tuple[float, ...]  # d ln A / dx [1/m]
    drive: tuple[float, ...] = ()
    dc: tuple[float, ...] = ()

    def constants(self, values: Mapping[str, Array]) -> tuple[Array, Array]:
        """D [1/m] and A [1/m2] at the values of the dimensions and of the solution's factor, arrays alike."""
        moved = [values[role] - drawn for role, drawn in zip(self.roles, self.drawn, strict=True)]
        found = []
        for drawn, slopes in ((self.dc_field, self.dc_slopes), (self.ac_gradient, self.ac_slopes)):
            total = np.zeros(np.shape(values["field_solution"]))
            for slope, one in zip(slopes, moved, strict=True):
                total = total + slope * one
            found.append(drawn * np.exp(np.clip(total, -2.0, 2.0)) * values["field_solution"])
            # clipped, so that a wild trial step stays a field
        return found[0], found[1]


def polynomial(coefficients: tuple[float, ...], z: Array) -> tuple[Array, Array]:
    """Value and slope of c_1 z + c_2 z^2 ... at z."""
    value, slope = np.zeros(np.shape(z)), np.zeros(np.shape(z))
    for power, one in enumerate(coefficients, 1):
        value = value + one * z**power
        slope = slope + power * one * z ** (power - 1)
    return value, slope


def height_shift(linear: Array, lift: Array, drive: tuple[float, ...], dc: tuple[float, ...]) -> Array:
    """How far the true mean height lies from that in the linear field, to first order in the departure [m].

    In a field e(z) = z (1 + c_1 z + ...) the drive's mean force goes as e e', that of dc as 1 + d(z), so that the
    height z answers  F(z) = e e' - z_lin - W d(z) = 0;  one step of Newton's from z_lin is -F / F'.

    Parameters
    ----------
    linear : ndarray
        Mean height from the centre in the linear field, z_lin [m].
    lift : ndarray
        W = s D U / (Omega^2 K): the height that the force of dc alone would make [m].
    drive, dc : tuple of float
        Coefficients of the relative fields, as in `FieldMap`.

    Returns
    -------
    ndarray
        Shift [m]. Where the departure takes more than 70 % of the stiffness it is given for that much.

    Notes
    -----
    Source of the mean force: Landau and Lifshitz, Mechanics, section 30; drag divides it by 1 + b^2 whatever the field.
    """
    step = 1e-6
    ahead, here, behind = (shift_at(linear + side * step, lift, drive, dc) for side in (1.0, 0.0, -1.0))
    stiffness = 1.0 - (ahead - behind) / (2.0 * step)
    return np.asarray(here / np.maximum(stiffness, LEAST_STIFFNESS))


def shift_at(height: Array, lift: Array, drive: tuple[float, ...], dc: tuple[float, ...]) -> Array:
    """How far a mean height in the true field lies from that in the linear one, z - z_lin = z - e e' + W d(z) [m].

    The same as `height_shift` the other way: from the height in the true field, without anything left out.
    """
    return np.asarray(height - _force(height, drive) + lift * polynomial(dc, height)[0])


def _force(z: Array, drive: tuple[float, ...]) -> Array:
    """Mean force of the drive over its linear stiffness, e e' [m]."""
    c, c_slope = polynomial(drive, z)
    return np.asarray(z * (1.0 + c) * (1.0 + c + z * c_slope))
