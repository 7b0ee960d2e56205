"""Drawings of traps that tests share, in metres; all dimensions invented."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from reduction.conductors import Arc, Carries, Conductor, Electrodes, Point, circle, polyline

MM = 1e-3


def mm(*points: Point) -> list[Point]:
    return [(r * MM, z * MM) for r, z in points]


def block(name: str, carries: Carries, r0: float, r1: float, z0: float, z1: float) -> Conductor:
    """A ring of rectangular section, in mm."""
    return Conductor(name, carries, polyline(mm((r0, z0), (r1, z0), (r1, z1), (r0, z1)), closed=True), True)


def can(radius: float, height: float, carries: Carries = "ground") -> Conductor:
    """A can from -height to height, in mm."""
    points = mm((0.0, -height), (radius, -height), (radius, height), (0.0, height))
    return Conductor("can", carries, polyline(points, closed=False), False)


def sphere(name: str, carries: Carries, radius: float, z: float) -> Conductor:
    """A sphere on the axis [m]."""
    return Conductor(name, carries, (Arc((0.0, z - radius), (0.0, z + radius), (0.0, z)),), False)


def ring_and_plates(x: Sequence[float] | np.ndarray) -> Electrodes:
    """Wire ring, two plates with holes, a can; ten dimensions [m]: `NOMINAL` says which."""
    ring, wire, hole_above, plate, above, thick, hole_below, below, height, radius = (float(one) / MM for one in x)
    return Electrodes(
        (
            Conductor("ring", "drive", circle((ring * MM, 0.0), wire * MM), True),
            block("upper plate", "dc_above", hole_above, plate, above, above + thick),
            block("lower plate", "dc_below", hole_below, plate, -below - thick, -below),
            can(radius, height),
        )
    )


#: ring radius, wire radius, upper hole, plate radius, upper plate height, thickness, lower hole, lower plate depth, can
NOMINAL = MM * np.array([6.0, 0.75, 0.5, 10.0, 4.0, 1.5, 0.5, 4.2, 20.0, 25.0])
TOLERANCES = MM * np.array([0.02, 0.01, 0.02, 0.05, 0.03, 0.01, 0.02, 0.03, 0.1, 0.1])
