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


class Medium(NamedTuple):
    """Broadcast arguments of the motion, flat."""

    h: Values  # drive strength, made positive: only its square matters
    b: Values  # drag
    added_mass: Values
    history: Values

    def take(self, which: Flags) -> Medium:
        """Return the elements chosen."""
        return Medium(*(np.ascontiguousarray(part[which]) for part in self))

    @property
    def unsteady(self) -> bool:
        """Whether any element feels the history force."""
        return bool(np.any(self.history != 0.0))


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
    return np.asarray(swing * (inertia + m.b * (1.0 + m.history * np.sqrt(swing))))


def inertia_and_drag_slopes(nu: Any, side: int, m: Medium) -> tuple[Complex, Complex, Complex]:
    """D with its first and second derivative by nu; the root is continued from the half plane sign(Re nu) = side."""
    swing = 1j * nu
    mass = 1.0 + m.added_mass
    value = swing * (swing * mass + m.b)
    first = 1j * (2.0 * swing * mass + m.b)
    second = np.broadcast_to(-2.0 * mass, np.shape(first))
    if m.unsteady:
        root = np.exp(0.25j * np.pi * side) * np.sqrt(side * nu)
        basset = m.b * m.history * root
        value = value + swing * basset
        first = first + 1.5j * basset
        second = second - 0.75 * m.b * m.history / root
    return np.asarray(value), np.asarray(first), np.asarray(second, dtype=np.complex128)


def depth(m: Medium) -> int:
    """Number of harmonics after which the continued fraction has settled to double precision.

    Truncation at N shifts r_1 by the product over n <= N of r_n squared, and |r_n| <= h / (|D(n)| - h) as soon as
    |D(n)| >= 2 h (Sleszynski and Pringsheim), with |D| at least the larger of (n - 1/2)^2 and (n - 1/2) b.
    """
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
    for n in range(levels, 0, -1):
        x = squared / (inertia_and_drag(v + side * n, m) + x)
    return x


def wing(v: Any, side: int, m: Medium, *, levels: int) -> tuple[Complex, Complex, Complex]:
    """D(v) + h r_1 on one side, with its first and second derivative by v; v lies on that side or near 0."""
    squared = -(m.h * m.h)
    inverse: Complex = np.zeros(m.h.shape, dtype=np.complex128)
    value = first = second = inverse
    for n in range(levels, -1, -1):
        x = squared * inverse
        first = first * inverse
        second = second * inverse
        own, own_first, own_second = inertia_and_drag_slopes(v + side * n, side, m)
        value = own + x
        first, second = own_first - x * first, own_second + x * (2.0 * first * first - second)
        inverse = 1.0 / value if n else inverse
    return value, first, second
