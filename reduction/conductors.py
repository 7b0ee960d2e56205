"""What the electrodes of a trap look like: axisymmetric conductors as lines and arcs in the half plane r >= 0.

Geometry only, in metres: radius r from the axis of the trap, height z along it, up positive. A `Conductor` is one
outline in one of three forms: closed and off the axis (a ring, a wire, a plate with a hole), open with both ends on the
axis (a rod, a sphere, a can, a plate without a hole), or a thin sheet with one or two free edges. `Electrodes` are
conductors with how dc is applied; `clearances` measures what stands between them.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Any, Literal

import numpy as np
from numpy.typing import NDArray

from reduction.errors import ReductionError

Array = NDArray[np.floating[Any]]
Indices = NDArray[np.intp]
Flags = NDArray[np.bool_]
Point = tuple[float, float]
Carries = Literal["drive", "dc_above", "dc_below", "ground"]
Applied = Literal["both_plates", "one_plate"]
CARRIES: tuple[Carries, ...] = ("drive", "dc_above", "dc_below", "ground")
APPLIED: tuple[Applied, ...] = ("both_plates", "one_plate")
JOIN = 1e-9  # of the size of an outline: ends closer than this meet, radii smaller than this are on the axis


class DrawingError(ReductionError, ValueError):
    """A drawing that no conductor can have; `conductor` names it."""

    def __init__(self, conductor: str, what: str) -> None:
        self.conductor = conductor
        super().__init__(f"{conductor}: {what}" if conductor else what)


@dataclass(frozen=True)
class Line:
    """A straight piece of an outline, from `start` to `end`, each (r, z) [m]."""

    start: Point
    end: Point

    @property
    def length(self) -> float:
        """Length [m]."""
        return math.dist(self.start, self.end)

    def points(self, s: Array) -> tuple[Array, Array]:
        """Radius and height [m] at fractions s of the length."""
        r = self.start[0] + s * (self.end[0] - self.start[0])
        return r, self.start[1] + s * (self.end[1] - self.start[1])

    def heading(self, s: float) -> float:
        """Direction of travel at fraction s [rad], from the r axis towards the z axis."""
        return math.atan2(self.end[1] - self.start[1], self.end[0] - self.start[0])


@dataclass(frozen=True)
class Arc:
    """A circular piece of an outline, from `start` to `end` about `centre`, each (r, z) [m].

    `anticlockwise` as seen with r to the right and z up. Equal start and end make the full circle.
    """

    start: Point
    end: Point
    centre: Point
    anticlockwise: bool = True

    @property
    def radius(self) -> float:
        """Radius of curvature [m]."""
        return math.dist(self.start, self.centre)

    @property
    def begins(self) -> float:
        """Angle of the start as seen from the centre [rad]."""
        return math.atan2(self.start[1] - self.centre[1], self.start[0] - self.centre[0])

    @property
    def turn(self) -> float:
        """Angle swept [rad], anticlockwise positive, at most a full circle."""
        ends = math.atan2(self.end[1] - self.centre[1], self.end[0] - self.centre[0])
        turn = (ends - self.begins) % (2.0 * math.pi)
        if math.dist(self.start, self.end) <= JOIN * self.radius:
            turn = 2.0 * math.pi
        elif not self.anticlockwise:
            turn -= 2.0 * math.pi
        return turn if self.anticlockwise else -abs(turn)

    @property
    def length(self) -> float:
        """Length [m]."""
        return self.radius * abs(self.turn)

    def points(self, s: Array) -> tuple[Array, Array]:
        """Radius and height [m] at fractions s of the length."""
        angle = self.begins + s * self.turn
        return self.centre[0] + self.radius * np.cos(angle), self.centre[1] + self.radius * np.sin(angle)

    def heading(self, s: float) -> float:
        """Direction of travel at fraction s [rad], from the r axis towards the z axis."""
        return self.begins + s * self.turn + math.copysign(0.5 * math.pi, self.turn)


Piece = Line | Arc


def circle(centre: Point, radius: float) -> tuple[Piece, ...]:
    """Outline of a round wire, as the pieces of a closed conductor."""
    start = (centre[0] + radius, centre[1])
    return (Arc(start, start, centre),)


def polyline(points: tuple[Point, ...] | list[Point], *, closed: bool) -> tuple[Piece, ...]:
    """Straight pieces through `points`; closed: back to the first."""
    ends = [*points[1:], points[0]] if closed else points[1:]
    return tuple(Line(start, end) for start, end in zip(points, ends, strict=False))


@dataclass(frozen=True)
class Conductor:
    """One conductor: its outline in travel order, and what it carries.

    Attributes
    ----------
    name : str
        As the user calls it.
    carries : str
        One of `CARRIES`.
    pieces : tuple of Line or Arc
        Each begins where the one before ends.
    closed : bool
        Whether the last piece ends where the first begins: an outline off the axis. Otherwise an end on the axis
        closes there, and an end off the axis is the free edge of a thin sheet.

    Raises
    ------
    DrawingError
        Where the pieces make no outline.
    """

    name: str
    carries: Carries
    pieces: tuple[Piece, ...]
    closed: bool

    def __post_init__(self) -> None:
        if self.carries not in CARRIES:
            raise DrawingError(self.name, f"carries {self.carries!r}, expected one of {', '.join(CARRIES)}")
        if not self.pieces:
            raise DrawingError(self.name, "has no outline")
        if any(not math.isfinite(value) for piece in self.pieces for value in (*piece.start, *piece.end)):
            raise DrawingError(self.name, "has a point that is not finite")
        near = JOIN * self.size
        for piece in self.pieces:
            if piece.length <= near:
                raise DrawingError(self.name, f"has a piece of no length at {place(piece.start)}")
            if isinstance(piece, Arc) and abs(math.dist(piece.end, piece.centre) - piece.radius) > 1e-6 * piece.radius:
                raise DrawingError(self.name, f"has an arc whose ends lie at two radii, at {place(piece.start)}")
            if piece.points(np.linspace(0.0, 1.0, 65))[0].min() < -near:
                raise DrawingError(self.name, f"reaches across the axis (r < 0) near {place(piece.start)}")
            if isinstance(piece, Line) and self.on_axis(piece.start) and self.on_axis(piece.end):
                advice = "leave it out, an open outline closes at the axis; of a thick can draw the inner side alone"
                raise DrawingError(self.name, f"has a piece along the axis at {place(piece.start)}; {advice}")
        if self.closed and any(self.on_axis(piece.start) for piece in self.pieces):
            raise DrawingError(self.name, "is called closed, but meets the axis: begin and end it there, open")
        if any(self.on_axis(piece.start) for piece in self.pieces[1:]):
            raise DrawingError(self.name, "meets the axis between its ends: draw one conductor for each part")
        for before, after in zip(self.pieces, self.pieces[1:], strict=False):
            if math.dist(before.end, after.start) > 1e-6 * self.size:
                raise DrawingError(self.name, f"has a break between {place(before.end)} and {place(after.start)}")
        if self.closed and math.dist(self.pieces[-1].end, self.pieces[0].start) > 1e-6 * self.size:
            raise DrawingError(self.name, "is called closed, but its last piece does not end where the first begins")

    @property
    def size(self) -> float:
        """Largest distance of the ends of its pieces from the origin or from each other [m]."""
        ends = np.array([point for piece in self.pieces for point in (piece.start, piece.end)])
        arcs = [piece.radius for piece in self.pieces if isinstance(piece, Arc)]
        return float(max(np.abs(ends).max(), *arcs, 0.0) if arcs else np.abs(ends).max())

    def on_axis(self, point: Point) -> bool:
        """Whether a point of the outline lies on the axis."""
        return abs(point[0]) <= JOIN * self.size


@dataclass(frozen=True)
class Electrodes:
    """The conductors of a trap and how its dc voltage U is applied.

    U counts as positive when it lifts a positive charge, so that D is positive; the trap file's `dc_polarity` turns
    readings of the supply into that U.

    both_plates
        "dc_below" carries +U/2, "dc_above" -U/2.
    one_plate
        "dc_above" carries -U and "dc_below" is grounded; without "dc_above", "dc_below" carries +U.

    For the drive "drive" carries its voltage and all else is at zero.
    """

    conductors: tuple[Conductor, ...]
    dc_applied: Applied = "both_plates"

    def __post_init__(self) -> None:
        carried = {conductor.carries for conductor in self.conductors}
        if self.dc_applied not in APPLIED:
            raise DrawingError("", f"dc applied {self.dc_applied!r}, expected one of {', '.join(APPLIED)}")
        if len({conductor.name for conductor in self.conductors}) < len(self.conductors):
            raise DrawingError("", "two conductors have one name")
        if "drive" not in carried:
            raise DrawingError("", "no conductor carries the drive")
        needed = {"dc_above", "dc_below"}
        if (self.dc_applied == "both_plates" and needed - carried) or not needed & carried:
            raise DrawingError(
                "", f"dc applied to {self.dc_applied}, but no conductor carries {sorted(needed - carried)[0]}"
            )

    @property
    def drive_shares(self) -> Array:
        """Voltage of each conductor per volt of drive [1]."""
        return np.array([1.0 if conductor.carries == "drive" else 0.0 for conductor in self.conductors])

    @property
    def dc_shares(self) -> Array:
        """Voltage of each conductor per volt of dc [1]."""
        shares = {"dc_above": -0.5, "dc_below": 0.5}
        if self.dc_applied == "one_plate":
            above = any(conductor.carries == "dc_above" for conductor in self.conductors)
            shares = {"dc_above": -1.0} if above else {"dc_below": 1.0}
        return np.array([shares.get(conductor.carries, 0.0) for conductor in self.conductors])


def place(point: Point) -> str:
    """A point of the drawing as the messages say it, in mm."""
    return f"r = {1e3 * point[0]:.4g} mm, z = {1e3 * point[1]:.4g} mm"
