"""The electrodes of a trap as they are drawn: outlines in (r, z) whose coordinates are sums of named dimensions."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from typing import cast

import numpy as np

from reduction.conductors import Applied, Arc, Array, Carries, Conductor, Electrodes, Line
from reduction.quantity import Quantity

MIRROR = "mirror image of "
_MIRRORED = {"dc_above": "dc_below", "dc_below": "dc_above"}


@dataclass(frozen=True)
class Coordinate:
    """A sum: a length [m], and named dimensions, each so many times."""

    constant: float = 0.0
    terms: tuple[tuple[str, int], ...] = ()  # dimension and how often it is added, sorted

    def at(self, values: Mapping[str, float]) -> float:
        """Coordinate [m] with the dimensions at these values."""
        return self.constant + sum(times * values[name] for name, times in self.terms)

    def __neg__(self) -> Coordinate:
        return Coordinate(-self.constant, tuple((name, -times) for name, times in self.terms))

    def __add__(self, other: Coordinate) -> Coordinate:
        total = dict(self.terms)
        for name, times in other.terms:
            total[name] = total.get(name, 0) + times
        kept = tuple(sorted((name, times) for name, times in total.items() if times))
        return Coordinate(self.constant + other.constant, kept)

    @property
    def on_axis(self) -> bool:
        """Whether it is 0 whatever the dimensions."""
        return self.constant == 0.0 and not self.terms


@dataclass(frozen=True)
class Point:
    """A point of an outline."""

    r: Coordinate
    z: Coordinate

    def at(self, values: Mapping[str, float]) -> tuple[float, float]:
        """Radius and height [m]."""
        return self.r.at(values), self.z.at(values)

    @property
    def mirrored(self) -> Point:
        """The same below the middle plane."""
        return Point(self.r, -self.z)


@dataclass(frozen=True)
class Step:
    """The way to the next point of an outline: straight, or along an arc about a centre."""

    end: Point
    centre: Point | None = None
    anticlockwise: bool = True  # with r to the right and z up

    @property
    def mirrored(self) -> Step:
        """The same below the middle plane."""
        return Step(self.end.mirrored, self.centre.mirrored if self.centre else None, not self.anticlockwise)


@dataclass(frozen=True)
class Shape:
    """One conductor as drawn; an outline that is not closed begins and ends on the axis."""

    name: str
    carries: str  # drive, dc_above, dc_below or ground
    start: Point
    steps: tuple[Step, ...]
    line: int  # in the file

    @property
    def closed(self) -> bool:
        """Whether the outline comes back to where it began."""
        return self.steps[-1].end == self.start

    @property
    def mirrored(self) -> Shape:
        """Its image below the middle plane: dc above becomes dc below, drive and ground stay what they are."""
        carries = _MIRRORED.get(self.carries, self.carries)
        steps = tuple(step.mirrored for step in self.steps)
        return Shape(MIRROR + self.name, carries, self.start.mirrored, steps, self.line)

    def points(self) -> Iterator[Point]:
        """Every point written: ends and centres."""
        yield self.start
        for step in self.steps:
            yield step.end
            if step.centre:
                yield step.centre

    def at(self, values: Mapping[str, float]) -> Conductor:
        """The conductor with the dimensions at these values."""
        pieces: list[Line | Arc] = []
        start = self.start.at(values)
        for step in self.steps:
            end = step.end.at(values)
            if step.centre is None:
                pieces.append(Line(start, end))
            else:
                pieces.append(Arc(start, end, step.centre.at(values), step.anticlockwise))
            start = end
        return Conductor(self.name, cast(Carries, self.carries), tuple(pieces), self.closed)


@dataclass(frozen=True)
class Drawing:
    """The electrodes of one trap."""

    dimensions: Mapping[str, Quantity]  # [m], sorted by name
    shapes: tuple[Shape, ...]
    dc_applied: str  # both_plates or one_plate
    departure: str  # component or corrected
    line: int = 0  # in the file

    @property
    def names(self) -> tuple[str, ...]:
        """Names of the dimensions, in the order of every array over them."""
        return tuple(self.dimensions)

    def electrodes(self, values: Array) -> Electrodes:
        """The conductors with the dimensions at these values [m], in the order of `names`."""
        named = dict(zip(self.names, (float(one) for one in values), strict=True))
        return Electrodes(tuple(shape.at(named) for shape in self.shapes), cast(Applied, self.dc_applied))

    @property
    def nominal(self) -> Array:
        """Estimates of the dimensions [m]."""
        return np.array([one.estimate for one in self.dimensions.values()], float)

    @property
    def u(self) -> Array:
        """Their standard uncertainties [m]."""
        return np.array([one.u for one in self.dimensions.values()], float)
