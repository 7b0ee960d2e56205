"""Resonance: the frequency at which a weak scanned force moves a trapped particle most."""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike

from reduction.floquet import NO_PEAK, OSCILLATES, PAST_MAXIMUM, UNSTABLE, Codes
from reduction.recurrence import Flags, Medium, Values, depth, inertia_and_drag, ladder, medium, shaped, wing
from reduction.secular import SQUARED, secular_root

# With the history force the response always rises a little from nu = 0, too little for any scan to find.
PEAK_PROMINENCE = 1e-2
PEAK_GRID = 0.5 * np.linspace(0.0, 1.0, 25)[1:] ** 2


def response_peak(
    h: ArrayLike, b: ArrayLike, added_mass: ArrayLike = 0.0, history: ArrayLike = 0.0
) -> tuple[Values, Codes]:
    """Frequency at which a weak scanned force moves the particle most, in units of the drive frequency.

    Interior maximum of |response(nu)| over 0 < nu < 1/2

    Parameters
    ----------
    h, b, added_mass, history : array_like
        As in `regime`.

    Returns
    -------
    nu : ndarray
        Peak over drive frequency [1]; nan where there is none.
    code : ndarray of int
        OSCILLATES where there is a peak, else NO_PEAK, UNSTABLE or PAST_MAXIMUM.

    Notes
    -----
    With the history force the response always rises a little from nu = 0. A maximum counts then from 1 % (times
    `history` where that is below one) above the response to a constant force.
    """
    m, shape = medium(h, b, added_mass, history)
    root, regimes = secular_root(m)
    square = np.real(root * root)
    size = np.abs(root) ** 2
    codes = np.where((regimes == UNSTABLE) | (regimes == PAST_MAXIMUM), regimes, NO_PEAK)
    nu = np.full(m.h.shape, np.nan)
    tried = (codes == NO_PEAK) & (square > -0.1 * size) & (square < 0.25)
    start = np.minimum(np.maximum(square, 0.05 * size), 0.24)
    for _ in range(2):
        if np.any(tried):
            peak, found = _sharpened(m.take(tried), start[tried])
            nu[tried] = np.where(found, peak, np.nan)
            codes[tried] = np.where(found, OSCILLATES, NO_PEAK)
        tried = (codes == NO_PEAK) & (m.history != 0.0)
        if np.any(tried):
            start[tried], inside = _best_of_grid(m.take(tried))
            tried[tried] = inside
    return shaped(nu, shape), shaped(codes, shape)


def _best_of_grid(m: Medium) -> tuple[Values, Flags]:
    """Square of the grid frequency of greatest response, and whether it lies inside the grid."""
    levels = depth(m) + 1
    with np.errstate(all="ignore"):
        sizes = [
            np.abs(inertia_and_drag(v, m) + ladder(v, 1, m, levels=levels) + ladder(v, -1, m, levels=levels))
            for v in PEAK_GRID
        ]
    best = np.argmin(np.asarray(sizes), axis=0)
    return np.asarray(PEAK_GRID[best] ** 2), np.asarray((best > 0) & (best < PEAK_GRID.size - 1))


def _sharpened(m: Medium, start: Values) -> tuple[Values, Flags]:
    """Minimum of f = |D + h (r+ + r-)|^2 by Newton's method in u = nu^2, in which f is nearly a parabola."""
    levels = depth(m) + 1
    u, step = start, np.zeros_like(start)
    lowest = np.zeros_like(u)
    curved = np.zeros(u.shape, dtype=bool)
    with np.errstate(all="ignore"):
        for _ in range(40):
            v = np.sqrt(u)
            total, first, second = wing(v, 1, m, levels=levels)
            other, other_first, other_second = wing(v - 1.0, -1, m, levels=levels)
            share = -m.h * m.h / other
            ratio = other_first / other
            total = total + share
            first = first - share * ratio
            second = second + share * (2.0 * ratio * ratio - other_second / other)
            slope = np.real(np.conj(total) * first)
            bend = np.abs(first) ** 2 + np.real(np.conj(total) * second)
            slope_u, bend_u = slope / v, (bend - slope / v) / (2.0 * u)
            curved = bend_u > 0.0
            step = np.where(curved, slope_u / np.where(curved, bend_u, 1.0), np.sign(slope_u) * 0.1 * u)
            step = np.clip(step, -0.5 * (0.25 - u), 0.5 * u)
            lowest = np.abs(total) ** 2
            u = u - step
            if not np.any(np.abs(step) > SQUARED * u):
                break
        still = np.square(2.0 * ladder(0.0, 1, m, levels=levels).real)
        prominence = PEAK_PROMINENCE * np.minimum(m.history, 1.0)
        found = curved & (np.abs(step) < SQUARED * u) & (still > lowest * (1.0 + prominence) ** 2)
    return np.sqrt(u), found
