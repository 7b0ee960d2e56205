"""The three-term recurrence between the harmonics of a driven particle, as continued fractions.

A motion sum_n c_n exp(i (v + n) theta), theta = Omega t, obeys

    D(v + n) c_n + h (c_(n-1) + c_(n+1)) = force_n

and its ratios r_n = c_n / c_(n-1) away from the force are r_n = -h / (D(v + n) + h r_(n+1)). What is evaluated here is
h r_1, from a depth beyond which nothing reaches double precision back to the first harmonic.
"""

from __future__ import annotations

from typing import Any, NamedTuple, TypeVar

import numpy as np
from numpy.typing import ArrayLike, NDArray

Complex = NDArray[np.complex128]
Values = NDArray[np.float64]
Flags = NDArray[np.bool_]

DEEPEST = 2000
NEGLIGIBLE = 1e-20
BOUNDED_CLOSELY = 48  # harmonics up to which one bound serves all elements
AT_ONCE = 8192  # numbers in one array operation: enough to forget the cost of a call, few enough for the cache


class Medium(NamedTuple):
    """Broadcast arguments of the motion, flat."""

    h: Values  # drive strength, made positive: only its square matters
    b: Values  # drag
    added_mass: Values
    history: Values

    def take(self, which: Flags | slice) -> Medium:
        """Return the elements chosen."""
        return Medium(*(part[which] for part in self))

    @property
    def unsteady(self) -> bool:
        """Whether any element feels the history force."""
        return bool(self.history.any())


def medium(
    h: ArrayLike, b: ArrayLike, added_mass: ArrayLike = 0.0, history: ArrayLike = 0.0
) -> tuple[Medium, tuple[int, ...]]:
    """Broadcast arguments flat, with the shape to give back."""
    parts = np.broadcast_arrays(*(np.asarray(part, dtype=np.float64) for part in (h, b, added_mass, history)))
    flat = [np.ascontiguousarray(part).ravel() for part in parts]
    return Medium(np.abs(flat[0]), *flat[1:]), parts[0].shape


Kind = TypeVar("Kind", bound=np.generic)


def shaped(flat: NDArray[Kind], shape: tuple[int, ...]) -> NDArray[Kind]:
    """Give flat results the shape of the arguments; numbers come back as numbers."""
    result: NDArray[Kind] = flat.reshape(shape)[()]
    return result


def guesses(near: ArrayLike | None, shape: tuple[int, ...]) -> Values | None:
    """Guesses flat like the arguments they belong to."""
    return None if near is None else np.broadcast_to(np.asarray(near, dtype=np.float64), shape).ravel()


def equivalent_steady(m: Medium) -> tuple[Values, Values]:
    """Drive strength and drag of the steady problem that agrees at the drive frequency, D(1) alike but for a factor."""
    carried = m.b * m.history / np.sqrt(2.0)
    mass = 1.0 + m.added_mass + carried
    return m.h / mass, (m.b + carried) / mass


def inertia_and_drag(nu: Any, m: Medium) -> Complex:
    """Inertia and drag at frequency nu over m Omega^2, per displacement.

    D(nu) = -nu^2 (1 + added_mass) + i nu b (1 + history sqrt(i nu)), principal root
    """
    swing = 1j * nu
    inertia = swing * (1.0 + m.added_mass)
    if not m.unsteady:
        return np.asarray(swing * (inertia + m.b))
    return np.asarray(swing * (inertia + m.b + (m.b * m.history) * np.sqrt(swing)))


def depth(m: Medium) -> int:
    """Number of harmonics after which the continued fraction has settled to double precision.

    Truncation at N shifts r_1 by the product over n <= N of r_n squared, and |r_n| <= h / (|D(n)| - h) as soon as
    |D(n)| >= 2 h (Sleszynski and Pringsheim), with |D| at least the larger of (n - 1/2)^2 and (n - 1/2) b.
    """
    strongest, least = float(m.h.max(initial=0.0)), float(m.b.min(initial=np.inf))
    if np.isfinite(strongest) and not np.isnan(least):
        left, drag = float(strongest > 0.0), least if np.isfinite(least) else 0.0
        for n in range(1, BOUNDED_CLOSELY):
            own = max((n - 0.5) ** 2, (n - 0.5) * drag)
            if own > 2.0 * strongest:
                left *= (strongest / (own - strongest)) ** 2
            if left <= NEGLIGIBLE:
                return n + 1
    return _depth_of_each(m)


def _depth_of_each(m: Medium) -> int:
    left = np.where(np.isfinite(m.h) & (m.h > 0.0), 1.0, 0.0)
    size = np.where(left > 0.0, m.h, 1.0)
    drag = np.where(np.isfinite(m.b), m.b, 0.0)
    for n in range(1, DEEPEST):
        own = np.maximum((n - 0.5) ** 2, (n - 0.5) * drag)
        ratio = size / np.maximum(own - size, size)  # exactly 1 until |D(n)| >= 2 h
        left = left * np.where(ratio < 1.0, ratio * ratio, 1.0)
        if not np.any(left > NEGLIGIBLE):
            return n + 1
    return DEEPEST


def ladder(v: Any, side: int, m: Medium, *, levels: int) -> Complex:
    """Continued fraction h r_1 through D(v + side), D(v + 2 side), ...; `side` is 1 or -1."""
    squared = -(m.h * m.h)
    x: Complex = np.zeros(m.h.shape, dtype=np.complex128)
    rows = max(1, AT_ONCE // max(1, m.h.size))
    for top in range(levels, 0, -rows):
        orders = np.arange(top, max(0, top - rows), -1.0)[:, None]
        for own in inertia_and_drag(v + side * orders, m):
            x = squared / (own + x)
    return x


class Wings(NamedTuple):
    """What the continued fractions on either side of a frequency need, worked once for many frequencies.

    On the side that starts at t and goes up by one, |nu| = t, t + 1, ... and D = t (inertia t + drag + basset sqrt(t)),
    with the root continued from the half plane of that side.
    """

    squared: Complex  # -h^2
    inertia: Values
    drag: Complex
    basset: Complex | None
    orders: Values

    @classmethod
    def of(cls, m: Medium, sides: tuple[int, ...], levels: int) -> Wings:
        """Prepare the sides asked for, each 1 or -1."""
        turn: Complex = 1j * np.asarray(sides, dtype=np.complex128)[:, None]
        basset = turn * np.sqrt(turn) * (m.b * m.history) if m.unsteady else None
        orders = np.arange(levels + 1.0)[:, None, None]
        return cls((-(m.h * m.h)).astype(np.complex128), -1.0 - m.added_mass, turn * m.b, basset, orders)

    def take(self, which: Flags | slice) -> Wings:
        """Return the elements chosen."""
        basset = None if self.basset is None else self.basset[:, which]
        return Wings(self.squared[which], self.inertia[which], self.drag[:, which], basset, self.orders)

    def at(self, start: NDArray[Any]) -> tuple[Complex, Complex, Complex]:
        """D(t) + h r_1 on each side, with its first and second derivative by t; `start` is t, a row for each side."""
        columns = max(16, AT_ONCE // (self.orders.size * len(start)))
        if start.shape[1] <= columns:
            return self._at(start)
        edges = range(0, start.shape[1], columns)
        parts = [self.take(slice(k, k + columns))._at(start[:, k : k + columns]) for k in edges]
        value, first, second = (np.concatenate(column, axis=1) for column in zip(*parts, strict=True))
        return value, first, second

    def _at(self, start: NDArray[Any]) -> tuple[Complex, Complex, Complex]:
        t = self.orders + start
        falling = self.inertia * t
        whole, first = falling + self.drag, 2.0 * falling + self.drag
        second: Any = 2.0 * self.inertia
        if self.basset is None:
            second = np.full(first.shape, second, dtype=np.complex128)
        else:
            root = np.sqrt(t)
            basset = self.basset * root
            whole, first, second = whole + basset, first + 1.5 * basset, second + 0.75 * self.basset / root
        owns, firsts = list(whole * t), list(first)
        value = owns.pop()
        below = [value]
        for own in reversed(owns):
            value = own + self.squared / value
            below.append(value)
        if not owns:
            return value, first[0], second[0]
        inverse = 1.0 / np.asarray(below[-2::-1])
        weights = inverse * inverse * -self.squared
        slope = firsts.pop()
        slopes = [slope]
        for own, weight in zip(reversed(firsts), weights[::-1], strict=True):
            slope = own + weight * slope
            slopes.append(slope)
        bent = np.asarray(slopes[-2::-1])
        second[:-1] -= 2.0 * weights * inverse * bent * bent
        bend = second[-1]
        for own, weight in zip(second[-2::-1], weights[::-1], strict=True):
            bend = own + weight * bend
        return value, slope, bend
