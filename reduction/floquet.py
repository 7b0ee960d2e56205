"""What the free particle does: held or lost, oscillating, relaxing or locked to the drive.

With steady drag z = exp(-gamma t / 2) u turns the motion into Mathieu's equation with a = -b^2, q = 4 h in
tau = Omega t / 2. Half the trace of u's monodromy, cos(2 pi nu), tells the regime; it comes from Hill's determinant.
"""

from __future__ import annotations

from functools import cache

import numpy as np
from numpy.typing import ArrayLike, NDArray

from reduction.recurrence import (
    AT_ONCE,
    Complex,
    Flags,
    Medium,
    Values,
    depth,
    equivalent_steady,
    inertia_and_drag,
    ladder,
    medium,
    shaped,
)

Codes = NDArray[np.int64]

OSCILLATES, RELAXES, LOCKED, UNSTABLE, NO_PEAK, PAST_MAXIMUM = range(6)

REGIME_REASONS: dict[int, str] = {
    OSCILLATES: "oscillates",
    RELAXES: "the drag is too strong for the drive: the particle relaxes without oscillating",
    LOCKED: "the free oscillation is locked to half the drive frequency, whatever the charge-to-mass ratio",
    UNSTABLE: "the drive is too strong: the particle is not held",
    NO_PEAK: "the drag is too strong: the forced response has no maximum below half the drive frequency",
    PAST_MAXIMUM: "the drive is beyond that of greatest stiffness, where one height has two solutions",
}

# Above this drag the band of oscillation lies beyond the greatest stiffness, where nothing is read off.
STRONGEST_DRAG = 6.0

MOST_DRAG_SEARCHED = 20.0


def half_trace_share(h: Values, b: Values) -> Values:
    """Where half the trace T of the monodromy stands between 1 and -1, for steady drag.

    (1 - T) / 2 = -(sinh(pi b / 2) / b)^2 Delta = sin^2(pi nu) where the particle oscillates

    Delta is Hill's determinant at a = -b^2 with the middle row times b^2. Its wings follow a two-term recurrence whose
    far end is summed in closed form, so that the slow convergence of the plain determinant costs nothing.

    Parameters
    ----------
    h, b : ndarray
        Drive strength, not negative, and drag [1]; drag up to `STRONGEST_DRAG`.

    Returns
    -------
    ndarray
        In (0, 1) where the particle oscillates, below where it relaxes, above where it is locked or lost [1].

    Notes
    -----
    Whittaker and Watson, A Course of Modern Analysis, section 19.42; Magnus and Winkler, Hill's Equation (from memory).
    """
    squared = h * h
    c = 0.25 * b * b
    last = 32 + int(8.0 * np.sqrt(h.max(initial=0.0)))
    outer = _far_wing(last + 1, squared, c)
    inner = _far_wing(last, squared, c)
    below = (np.arange(1.0, last + 1.0) ** 2)[:, None] + c
    products = squared / (below[1:] * below[:-1])
    for product in products[::-1]:
        inner, outer = inner - product * outer, inner
    delta = inner * (4.0 * c * inner - 8.0 * squared / (1.0 + c) * outer)
    half = 0.5 * np.pi * b
    growth = 0.5 * np.pi * np.where(half > 1e-4, np.sinh(half) / np.where(half > 1e-4, half, 1.0), 1.0 + half**2 / 6.0)
    return np.asarray(-growth * growth * delta)


def _far_wing(first: int, squared: Values, c: Values) -> Values:
    """Wing of Hill's determinant from row `first` on: exp(-sum p_n - 3/2 sum p_n^2), p_n the products of neighbours."""
    alpha = 2.0 * c - 0.5
    beta = (c + 0.25) ** 2
    total = (
        _tail_sum(4, first)
        - alpha * _tail_sum(6, first)
        + (alpha**2 - beta) * _tail_sum(8, first)
        - (alpha**3 - 2.0 * alpha * beta) * _tail_sum(10, first)
        + (alpha**4 - 3.0 * alpha**2 * beta + beta**2) * _tail_sum(12, first)
    )
    return np.asarray(np.exp(-squared * total - 1.5 * squared**2 * _tail_sum(8, first)))


@cache
def _tail_sum(power: int, first: int) -> float:
    """Sum of (n + 1/2)^-power over n >= first, Euler and Maclaurin at midpoints."""
    s, x = power, float(first)
    correction = 7.0 * s * (s + 1) * (s + 2) / 5760.0 * x ** (-s - 3)
    return float(x ** (1 - s) / (s - 1) - s / 24.0 * x ** (-s - 1) + correction)


def half_drive_margin(m: Medium) -> Values:
    """|D(1/2) + h r_1| - |h| at v = 1/2: zero where motion at half the drive frequency neither grows nor decays."""
    return np.asarray(np.abs(inertia_and_drag(0.5, m) + ladder(0.5, 1, m, levels=depth(m))) - m.h)


def stiffness_and_rise(m: Medium) -> tuple[Values, Flags]:
    """K, and whether it grows with h here and its continued fraction has not passed a pole."""
    squared, twice = m.h * m.h, -2.0 * m.h
    x: Complex = np.zeros(m.h.shape, dtype=np.complex128)
    slope = inner = x
    levels = depth(m)
    rows = max(1, AT_ONCE // max(1, m.h.size))
    for top in range(levels, 0, -rows):
        for own in inertia_and_drag(np.arange(top, max(0, top - rows), -1.0)[:, None], m):
            inner = own + x
            inverse = 1.0 / inner
            share = squared * inverse
            slope = (twice + share * slope) * inverse
            x = -share
    return np.asarray(2.0 * x.real), np.asarray((slope.real >= 0.0) & (inner.real < 0.0))


def drive_ceiling(b: Values) -> Values:
    """Drive strength between the first maximum of K and any later rise, for steady drag."""
    return np.asarray(np.maximum(3.5, 1.1 * b))


def on_branch(h: ArrayLike, b: ArrayLike, added_mass: ArrayLike = 0.0, history: ArrayLike = 0.0) -> Flags:
    """Whether the drive is below that of greatest stiffness, on the branch that is read off.

    dK/dh >= 0 and no pole of K passed: what |h| <= `stiffness_maximum` says, without the search

    Parameters
    ----------
    h, b, added_mass, history : array_like
        As in `motion.stiffness` [1].

    Returns
    -------
    ndarray of bool
        True on the branch.
    """
    m, shape = medium(h, b, added_mass, history)
    with np.errstate(all="ignore"):
        bounded, inside = _bounded(m)
        return shaped(bounded & stiffness_and_rise(inside)[1], shape)


def _bounded(m: Medium) -> tuple[Flags, Medium]:
    """Elements below the ceiling of the first maximum of K, and all of them with no drive above it."""
    strength, drag = equivalent_steady(m)
    bounded = np.asarray(strength < drive_ceiling(drag))
    return bounded, m if bounded.all() else m._replace(h=np.where(bounded, m.h, 0.0))


def held(m: Medium) -> tuple[Codes, Values]:
    """UNSTABLE or PAST_MAXIMUM where so, else OSCILLATES, not yet known; and K where it is one of the last two."""
    with np.errstate(all="ignore"):
        bounded, inside = _bounded(m)
        stiff, rises = stiffness_and_rise(inside)
        codes = np.where(bounded & rises, OSCILLATES, PAST_MAXIMUM)
        codes = np.where(bounded & ~(half_drive_margin(inside) > 0.0), UNSTABLE, codes)
    return codes, stiff


def share_if_steady(h: Values, b: Values) -> Values:
    """`half_trace_share` within its reach; -1 above `STRONGEST_DRAG`, where nothing on the branch oscillates."""
    moderate = b <= STRONGEST_DRAG
    if moderate.all():
        return half_trace_share(h, b)
    share = half_trace_share(np.where(moderate, h, 0.0), np.where(moderate, b, STRONGEST_DRAG))
    return np.where(moderate, share, -1.0)


def stiffness_maximum(b: ArrayLike, added_mass: ArrayLike = 0.0, history: ArrayLike = 0.0) -> Values:
    """Drive strength at which K has its first maximum, where the branch that is read off ends.

    Parameters
    ----------
    b : array_like
        Drag rate over Omega [1].
    added_mass, history : array_like
        As in `motion.stiffness` [1].

    Returns
    -------
    ndarray
        Drive strength h [1]; without drag the pole of K, h = 1.895.
    """
    m, shape = medium(1.0, b, added_mass, history)
    scale, drag = equivalent_steady(m)
    low, high = np.zeros(m.h.shape), drive_ceiling(drag) / scale
    with np.errstate(all="ignore"):
        for _ in range(60):
            middle = 0.5 * (low + high)
            rises = stiffness_and_rise(m._replace(h=middle))[1]
            low, high = np.where(rises, middle, low), np.where(rises, high, middle)
    return shaped(low, shape)


def stability_limit(b: ArrayLike, added_mass: ArrayLike = 0.0, history: ArrayLike = 0.0) -> Values:
    """Drive strength at which the particle is lost: end of the first stable region.

    Smallest h with |D(1/2) + h r_1(1/2)| = h, or with K = 0 where that comes first

    Parameters
    ----------
    b : array_like
        Drag rate over Omega [1].
    added_mass, history : array_like
        As in `motion.stiffness` [1].

    Returns
    -------
    ndarray
        Drive strength h [1]; without drag 0.2270, which is Mathieu's q = 0.9080. Nan above b = 20, where nothing is
        held so strongly.

    Notes
    -----
    Hasegawa and Uehara, Appl. Phys. B 61 (1995) 159 (from memory), for steady drag. From b = 2.2 on the drive of
    greatest stiffness, `stiffness_maximum`, comes first.
    """
    m, shape = medium(1.0, b, added_mass, history)
    scale, drag = equivalent_steady(m)
    searched = drag <= MOST_DRAG_SEARCHED
    drag = np.where(searched, drag, 0.0)
    reach = (1.0 + 2.0 * drag + 0.6 * drag**2) / scale
    low, high = np.zeros(m.h.shape), np.full(m.h.shape, np.nan)
    with np.errstate(all="ignore"):
        for k in range(1, 201):
            probe = reach * (k / 200.0)
            high = np.where(np.isnan(high) & ~_held(m._replace(h=probe)), probe, high)
            low = np.where(np.isnan(high), probe, low)
        for _ in range(60):
            middle = 0.5 * (low + high)
            stays = _held(m._replace(h=middle))
            low, high = np.where(stays, middle, low), np.where(stays, high, middle)
    return shaped(np.where(searched & ~np.isnan(high), low, np.nan), shape)


def _held(m: Medium) -> Flags:
    return np.asarray((half_drive_margin(m) > 0.0) & (ladder(0.0, 1, m, levels=depth(m)).real > 0.0))
