"""What a drawing of the electrodes makes of a trap: constants, their sensitivities, what a page of it shows."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from dataclasses import asdict, dataclass
from typing import Any

from reduction.fieldmap import FieldMap
from reduction.quantity import Quantity

CHANGE = 0.01  # of the drive's gradient, at the usable height of a trap that states none


@dataclass(frozen=True)
class Outline:
    """One conductor as drawn on a page."""

    name: str
    carries: str
    r: tuple[float, ...]  # [m]
    z: tuple[float, ...]  # [m]
    closed: bool  # off the axis, or ended on it: there is metal within


@dataclass(frozen=True)
class Map:
    """Potentials over the half plane, per volt: `drive[i][j]` and `dc[i][j]` at z[i], r[j]."""

    r: tuple[float, ...]  # [m]
    z: tuple[float, ...]  # [m]
    drive: tuple[tuple[float, ...], ...]
    dc: tuple[tuple[float, ...], ...]


@dataclass(frozen=True)
class Axis:
    """Fields on the axis about the centre over the ideal ones, the drive's E/(A z) and E/D of dc."""

    z: tuple[float, ...]  # from the centre [m]
    drive: tuple[float, ...]
    dc: tuple[float, ...]


@dataclass(frozen=True)
class Dimension:
    """One dimension of a drawing and what it does."""

    name: str
    estimate: float  # [m]
    u: float  # [m]
    shape: str  # of its uncertainty, exact where it has none
    dc_slope: float  # d ln D / dx [1/m]
    ac_slope: float  # d ln A / dx [1/m]
    centre_slope: float  # d centre / dx [1]

    @property
    def parts(self) -> tuple[float, float]:
        """What its u does to D and to A, relative, with sign."""
        return self.dc_slope * self.u, self.ac_slope * self.u


@dataclass(frozen=True)
class TrapConstants:
    """Constants of one drawing; lengths in m, fields per volt."""

    dc_field: float  # D [1/m]
    ac_gradient: float  # A [1/m2]
    solution_u: float  # relative, of the numerical solution, by refinement
    centre: float  # where the drive's field vanishes on the axis [m]
    reach: float  # from the centre to the nearest conductor [m]
    usable_height: float  # [m] either way, where the drive's gradient is off by `CHANGE`
    drive_terms: tuple[float, ...]  # of the relative field at height z: c_1 z + c_2 z^2 ... [1/m^n]
    dc_terms: tuple[float, ...]
    dimensions: tuple[Dimension, ...]
    capacitances: tuple[tuple[float, ...], ...]  # charge on one per volt on another [F], in the order of `outlines`
    outlines: tuple[Outline, ...]
    map: Map
    axis: Axis
    dc_applied: str

    @property
    def field_map(self) -> FieldMap:
        """How D and A follow from the dimensions."""
        return FieldMap(
            tuple(f"dimension:{one.name}" for one in self.dimensions),
            tuple(one.estimate for one in self.dimensions),
            self.dc_field,
            self.ac_gradient,
            tuple(one.dc_slope for one in self.dimensions),
            tuple(one.ac_slope for one in self.dimensions),
            self.drive_terms,
            self.dc_terms,
        )

    @property
    def relative_u(self) -> tuple[float, float]:
        """Relative standard uncertainties of D and A."""
        parts = [one.parts for one in self.dimensions]
        dc, ac = (math.hypot(self.solution_u, *(part[which] for part in parts)) for which in (0, 1))
        return dc, ac

    @property
    def correlation(self) -> float:
        """Correlation of D and A, 0 where either is exact."""
        dc, ac = self.relative_u
        shared = sum(one.parts[0] * one.parts[1] for one in self.dimensions) + self.solution_u**2
        return shared / (dc * ac) if dc and ac else 0.0

    @property
    def centre_u(self) -> float:
        """Standard uncertainty of the centre [m]."""
        return math.hypot(0.0, *(one.centre_slope * one.u for one in self.dimensions))

    def quantities(self) -> tuple[Quantity, Quantity]:
        """D [1/m] and A [1/m2] with their standard uncertainties."""
        dc, ac = self.relative_u
        return Quantity(self.dc_field, self.dc_field * dc), Quantity(self.ac_gradient, self.ac_gradient * ac)

    def without(self, name: str) -> tuple[float, float]:
        """Relative u of D and A, were the dimension known exactly."""
        kept = [one.parts for one in self.dimensions if one.name != name]
        dc, ac = (math.hypot(self.solution_u, *(part[which] for part in kept)) for which in (0, 1))
        return dc, ac

    def to_plain(self) -> dict[str, Any]:
        """Everything as lists and mappings, to be kept."""
        return asdict(self)


def from_plain(value: Mapping[str, Any]) -> TrapConstants:
    """Constants as they were kept."""
    return TrapConstants(
        **{
            **value,
            **{key: tuple(value[key]) for key in ("drive_terms", "dc_terms")},
            "dimensions": tuple(Dimension(**one) for one in value["dimensions"]),
            "capacitances": _rows(value["capacitances"]),
            "outlines": tuple(
                Outline(**{**one, "r": tuple(one["r"]), "z": tuple(one["z"])}) for one in value["outlines"]
            ),
            "map": Map(*(tuple(value["map"][key]) for key in ("r", "z")),
                       *(_rows(value["map"][key]) for key in ("drive", "dc"))),
            "axis": Axis(*(tuple(value["axis"][key]) for key in ("z", "drive", "dc"))),
        }
    )  # fmt: skip


def _rows(table: Sequence[Sequence[float]]) -> tuple[tuple[float, ...], ...]:
    return tuple(tuple(row) for row in table)
