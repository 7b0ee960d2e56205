"""What stands between the electrodes: smallest gaps, and faults: outlines that touch, cross or lie in metal."""

from __future__ import annotations

import math
from collections.abc import Iterator
from dataclasses import dataclass
from itertools import combinations

import numpy as np
from scipy.spatial import cKDTree

from reduction.conductors import Arc, Array, Conductor, DrawingError, Electrodes, Piece, Point, place

TOUCH = 1e-9  # of the size of the drawing: nearer than this is touching
SAMPLES = 65  # points of a piece, where a nearest pair is looked for


@dataclass(frozen=True)
class Crossing:
    """Two outlines that touch or cross, at `at` (r, z) [m]; equal names: one outline crosses itself."""

    name_a: str
    name_b: str
    at: Point


@dataclass(frozen=True)
class Gap:
    """Smallest distance between two conductors [m], and the nearest points (r, z) [m] of each."""

    name_a: str
    name_b: str
    distance: float
    at_a: Point
    at_b: Point


def crossings(electrodes: Electrodes) -> list[Crossing]:
    """Where outlines touch or cross, each other or themselves; the first place of each pair of conductors."""
    size = max(conductor.size for conductor in electrodes.conductors)
    found: dict[tuple[str, str], Point] = {}
    for one, other in _pairs_and_selves(electrodes):
        for i, piece in enumerate(one.pieces):
            for k, second in enumerate(other.pieces):
                if one is other and k <= i:
                    continue
                joints = _joints(one, i, k) if one is other else []
                for point in _meetings(piece, second, TOUCH * size):
                    if all(math.dist(point, joint) > 1e-6 * size for joint in joints):
                        found.setdefault((one.name, other.name), point)
    return [Crossing(*names, at) for names, at in sorted(found.items())]


def enclosed(electrodes: Electrodes) -> list[tuple[str, str]]:
    """Names of conductors that lie within the metal of another, and of that other."""
    found = []
    for solid in electrodes.conductors:
        if not solid.closed:
            continue
        outline = np.concatenate([np.column_stack(p.points(np.linspace(0, 1, SAMPLES))) for p in solid.pieces])
        found += [
            (other.name, solid.name)
            for other in electrodes.conductors
            if other is not solid and _within(other.pieces[0].start, outline)
        ]
    return sorted(found)


def smallest_gaps(electrodes: Electrodes) -> list[Gap]:
    """The smallest gap of each pair of conductors, in their order."""
    return [gap_between(one, other) for one, other in combinations(electrodes.conductors, 2)]


def require_clear(electrodes: Electrodes) -> None:
    """Refuse a drawing whose outlines touch, cross or lie in metal.

    Raises
    ------
    DrawingError
        Naming the first pair and the place.
    """
    for crossing in crossings(electrodes):
        if crossing.name_a == crossing.name_b:
            raise DrawingError(
                crossing.name_a, f"crosses itself at {place(crossing.at)}: order its points along the outline"
            )
        raise DrawingError(
            crossing.name_a, f"touches {crossing.name_b} at {place(crossing.at)}: leave a gap between them"
        )
    for inner, outer in enclosed(electrodes):
        raise DrawingError(inner, f"lies within the metal of {outer}: draw a hollow conductor open, from axis to axis")


def _pairs_and_selves(electrodes: Electrodes) -> Iterator[tuple[Conductor, Conductor]]:
    yield from combinations(electrodes.conductors, 2)
    yield from ((conductor, conductor) for conductor in electrodes.conductors)


def _joints(conductor: Conductor, i: int, k: int) -> list[Point]:
    """Points that pieces i < k of one outline rightly share."""
    joints = [conductor.pieces[i].end] if k == i + 1 else []
    if conductor.closed and i == 0 and k == len(conductor.pieces) - 1:
        joints.append(conductor.pieces[0].start)
    return joints


def _meetings(one: Piece, other: Piece, near: float) -> list[Point]:
    """Points common to two pieces: where their lines or circles meet, or an end of one lies on the other."""
    if isinstance(one, Arc) and isinstance(other, Arc):
        points = _circles(one, other, near)
    elif isinstance(one, Arc) or isinstance(other, Arc):
        arc, line = (one, other) if isinstance(one, Arc) else (other, one)
        points = _line_and_circle(line, arc, near)  # type: ignore[arg-type]
    else:
        points = _lines(one, other)
    points += [one.start, one.end, other.start, other.end]
    return [p for p in points if max(math.dist(p, _nearest(piece, p)) for piece in (one, other)) <= near]


def _lines(one: Piece, other: Piece) -> list[Point]:
    (ax, ay), (bx, by) = one.start, other.start
    ux, uy, vx, vy = one.end[0] - ax, one.end[1] - ay, other.end[0] - bx, other.end[1] - by
    cross = ux * vy - uy * vx
    if abs(cross) <= 1e-14 * math.hypot(ux, uy) * math.hypot(vx, vy):
        return []
    s = ((bx - ax) * vy - (by - ay) * vx) / cross
    return [(ax + s * ux, ay + s * uy)]


def _line_and_circle(line: Piece, arc: Arc, near: float) -> list[Point]:
    (ax, ay), length = line.start, line.length
    ux, uy = (line.end[0] - ax) / length, (line.end[1] - ay) / length
    along = (arc.centre[0] - ax) * ux + (arc.centre[1] - ay) * uy
    foot = (ax + along * ux, ay + along * uy)
    height = math.dist(foot, arc.centre)
    if height > arc.radius + near:
        return []
    half = math.sqrt(max(0.0, arc.radius**2 - height**2))
    return [(foot[0] + sign * half * ux, foot[1] + sign * half * uy) for sign in (-1.0, 0.0, 1.0)]


def _circles(one: Arc, other: Arc, near: float) -> list[Point]:
    apart = math.dist(one.centre, other.centre)
    if apart <= near or not abs(one.radius - other.radius) - near <= apart <= one.radius + other.radius + near:
        return []
    ux, uy = (other.centre[0] - one.centre[0]) / apart, (other.centre[1] - one.centre[1]) / apart
    along = (one.radius**2 - other.radius**2 + apart**2) / (2.0 * apart)
    half = math.sqrt(max(0.0, one.radius**2 - along**2))
    x, y = one.centre[0] + along * ux, one.centre[1] + along * uy
    return [(x - sign * half * uy, y + sign * half * ux) for sign in (-1.0, 0.0, 1.0)]


def _nearest(piece: Piece, point: Point) -> Point:
    """The point of a piece nearest to a point."""
    if not isinstance(piece, Arc):
        ux, uy = piece.end[0] - piece.start[0], piece.end[1] - piece.start[1]
        s = ((point[0] - piece.start[0]) * ux + (point[1] - piece.start[1]) * uy) / (ux * ux + uy * uy)
        s = min(1.0, max(0.0, s))
        return (piece.start[0] + s * ux, piece.start[1] + s * uy)
    angle = math.atan2(point[1] - piece.centre[1], point[0] - piece.centre[0])
    turned = (angle - piece.begins) * math.copysign(1.0, piece.turn) % (2.0 * math.pi)
    if turned <= abs(piece.turn):
        x, y = math.cos(angle), math.sin(angle)
        return (piece.centre[0] + piece.radius * x, piece.centre[1] + piece.radius * y)
    return min(piece.start, piece.end, key=lambda end: math.dist(end, point))


def gap_between(one: Conductor, other: Conductor) -> Gap:
    """The smallest gap: from the nearest pair of samples on from outline to outline and back until the pair stays."""
    fractions = np.linspace(0.0, 1.0, SAMPLES)
    points = [np.concatenate([np.column_stack(p.points(fractions)) for p in c.pieces]) for c in (one, other)]
    distances, index = (np.asarray(found) for found in cKDTree(points[1]).query(points[0]))
    best: tuple[float, Point, Point] | None = None
    for k in np.argsort(distances, kind="stable")[:8]:
        a, b = _settled(one, other, points[0][k], points[1][index[k]])
        if best is None or math.dist(a, b) < best[0]:
            best = (math.dist(a, b), a, b)
    assert best is not None
    return Gap(one.name, other.name, *best)


def _settled(one: Conductor, other: Conductor, start: Array, end: Array) -> tuple[Point, Point]:
    a, b = (float(start[0]), float(start[1])), (float(end[0]), float(end[1]))
    for _ in range(200):
        before = math.dist(a, b)
        b = min((_nearest(piece, a) for piece in other.pieces), key=lambda point: math.dist(point, a))
        a = min((_nearest(piece, b) for piece in one.pieces), key=lambda point: math.dist(point, b))
        if math.dist(a, b) >= before * (1.0 - 1e-12):
            break
    return a, b


def _within(point: Point, outline: Array) -> bool:
    """Whether a point lies within a closed outline (even-odd rule)."""
    x, y = outline[:, 0], outline[:, 1]
    x2, y2 = np.roll(x, -1), np.roll(y, -1)
    spans = (y > point[1]) != (y2 > point[1])
    at = x[spans] + (point[1] - y[spans]) * (x2 - x)[spans] / (y2 - y)[spans]
    return bool(np.count_nonzero(at > point[0]) % 2)
