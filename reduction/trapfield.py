"""The field of solved electrodes: D, A, the centre, the terms beyond, capacitances, and how far the ideal reaches.

About the centre zc, where the drive's field vanishes on the axis, the axial fields per volt are, with x = (z - zc)/l
and l the `reach`, the distance from the centre to the nearest conductor,

    dc:     E_z = D (1 + d1 x + d2 x^2 + ...)          d1 quadrupole, d2 hexapole, d3 octopole ...
    drive:  E_z = A (z - zc) (1 + a1 x + a2 x^2 + ...)  a1 hexapole, a2 octopole, a3 decapole ...

D is positive for the positive U of `conductors.Electrodes`. A is given positive: its sign is the phase of the drive,
half a period, which no reading knows.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from scipy.constants import epsilon_0
from scipy.optimize import brentq
from scipy.special import eval_legendre

from reduction.boundary import Boundary, axial_field, axial_gradient
from reduction.conductors import Array, Electrodes
from reduction.meridian import Mesh

TERMS = 8  # beyond D and A
NEAR = 0.15  # of the reach, within which the terms say all: what they leave out is its ninth power
PARTS = 3  # of a panel, where terms are summed


@dataclass(frozen=True)
class AxisField:
    """On the axis, per volt of drive amplitude and per volt of dc: potential [1], axial field [1/m], at z [m]."""

    z: Array
    drive_potential: Array
    drive_field: Array
    dc_potential: Array
    dc_field: Array


@dataclass(frozen=True)
class Departures:
    """Relative changes against the centre, at heights above it: what the constants miss there [1].

    `drive_gradient` of dE_z/dz, `drive_field` of E_z over the height, both of the drive; `dc_field` of E_z of the dc.
    """

    drive_gradient: Array
    drive_field: Array
    dc_field: Array


@dataclass(frozen=True)
class TrapField:
    """A solved trap.

    Attributes
    ----------
    electrodes : Electrodes
        What was solved.
    dc_field_per_volt, ac_gradient_per_volt : float
        D [1/m] and A [1/m2], at the centre.
    ac_sign : float
        Sign of the drive's gradient in phase with its voltage: 1, or -1 where the drive is on the plates' side [1].
    centre : float
        Where the drive's field vanishes on the axis [m].
    reach : float
        Distance from the centre to the nearest conductor [m].
    drive_terms, dc_terms : tuple of float
        a1, a2, ... and d1, d2, ... [1], see the top of the module.
    capacitances : array
        Charge on conductor i per volt on conductor j, all others at zero [F], in the order of `names`.
    numerical_u : float
        Relative error of D and A, from refinement.
    numerical_u_centre : float
        Error of the centre [m], likewise.
    numerical_u_capacitance : float
        Error of the capacitances over the largest, likewise.
    mesh, boundary, charges
        How the outlines are cut, the panels; per volt on each conductor, the charges of their nodes over 4 pi eps0 [m].
    """

    electrodes: Electrodes
    dc_field_per_volt: float
    ac_gradient_per_volt: float
    ac_sign: float
    centre: float
    reach: float
    drive_terms: tuple[float, ...]
    dc_terms: tuple[float, ...]
    capacitances: Array
    numerical_u: float
    numerical_u_centre: float
    numerical_u_capacitance: float
    mesh: Mesh
    boundary: Boundary
    charges: Array

    @property
    def names(self) -> tuple[str, ...]:
        """Names of the conductors, in the order of `capacitances`."""
        return tuple(conductor.name for conductor in self.electrodes.conductors)

    def axis(self, z: Array) -> AxisField:
        """Potentials and fields on the axis at z [m]."""
        z = np.atleast_1d(np.asarray(z, float))
        shares = np.column_stack([self.electrodes.drive_shares, self.electrodes.dc_shares])
        q, zero = self.charges @ shares, np.zeros_like(z)
        potential = self.boundary.rows(zero, z) @ q
        field = self.boundary.rows(zero, z, of=axial_field) @ q
        return AxisField(z, potential[:, 0], field[:, 0], potential[:, 1], field[:, 1])

    def potential(self, r: Array, z: Array) -> tuple[Array, Array]:
        """Potential per volt of drive and per volt of dc [1] at (r, z) [m], any shape; within metal its own voltage."""
        r, z = np.broadcast_arrays(np.abs(np.asarray(r, float)), np.asarray(z, float))
        shares = np.column_stack([self.electrodes.drive_shares, self.electrodes.dc_shares])
        q, some = self.charges @ shares, range(0, r.size, 1000)  # points at a time, for the sake of memory
        parts = [self.boundary.rows(r.ravel()[k : k + 1000], z.ravel()[k : k + 1000]) @ q for k in some]
        both = np.concatenate(parts)
        return both[:, 0].reshape(r.shape), both[:, 1].reshape(r.shape)


def terms_about(boundary: Boundary, charges: Array, centre: float, count: int) -> Array:
    """Coefficients c_k of E_z = sum c_k (z - centre)^k [1/m^(k+1)] per column of charges, shape (count, columns).

    1/|x - x'| is the sum of |x|^l P_l(cos theta') / R'^(l+1): c_k = -(k+1) sum q P_(k+1)(cos theta') / R'^(k+2).
    """
    r, z, q = boundary.finer(charges, PARTS)
    away = np.hypot(r, z - centre)
    cosine = (z - centre) / away
    return np.array([-(k + 1) * (eval_legendre(k + 1, cosine) / away ** (k + 2)) @ q for k in range(count)])


def capacitances_of(boundary: Boundary, charges: Array, count: int) -> Array:
    """Charge on each conductor per volt on each [F], shape (count, count)."""
    own = np.repeat(boundary.panels.conductor, boundary.order)
    return 4.0 * np.pi * epsilon_0 * np.array([charges[own == k].sum(axis=0) for k in range(count)])


def departures(field: TrapField, z: Array) -> Departures:
    """Relative changes of the drive's gradient and field and of the dc field at z above the centre [m].

    Near the centre from the terms, where the field itself would be a small difference; elsewhere from the field.

    Parameters
    ----------
    field : TrapField
        A solved trap.
    z : array
        Heights above the centre [m], in free space.
    """
    z = np.atleast_1d(np.asarray(z, float))
    order = np.arange(1, TERMS + 1)
    powers = (z[:, None] / field.reach) ** order
    drive, dc = np.array(field.drive_terms), np.array(field.dc_terms)
    changes = np.array([powers @ (drive * (order + 1.0)), powers @ drive, powers @ dc])
    away = np.flatnonzero(np.abs(z) > NEAR * field.reach)
    if len(away):
        shares = np.column_stack([field.electrodes.drive_shares, field.electrodes.dc_shares])
        q, r, at = field.charges @ shares, np.zeros(len(away)), field.centre + z[away]
        fields = field.boundary.rows(r, at, of=axial_field) @ q
        gradients = field.boundary.rows(r, at, of=axial_gradient) @ q[:, 0]
        a = field.ac_sign * field.ac_gradient_per_volt
        changes[0, away] = gradients / a - 1.0
        changes[1, away] = fields[:, 0] / (a * z[away]) - 1.0
        changes[2, away] = fields[:, 1] / field.dc_field_per_volt - 1.0
    return Departures(*changes)


def usable_height(field: TrapField, change: float = 0.01) -> float:
    """Height [m] up and down from the centre within which the drive's gradient changes by at most `change`.

    At most the reach.
    """

    def excess(height: Array) -> Array:
        both = departures(field, np.concatenate([height, -height])).drive_gradient
        worst: Array = np.abs(both).reshape(2, -1).max(axis=0) - change
        return worst

    z = np.linspace(0.0, field.reach, 201)[:-1]
    beyond = np.flatnonzero(excess(z) > 0.0)
    if not len(beyond):
        return field.reach
    k = int(beyond[0])
    return float(brentq(lambda height: float(excess(np.array([height]))[0]), z[k - 1], z[k], xtol=1e-9 * field.reach))
