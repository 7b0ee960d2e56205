"""Resonance: the frequency at which a weak scanned force moves a trapped particle most."""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike

from reduction.floquet import NO_PEAK, OSCILLATES, PAST_MAXIMUM, UNSTABLE, Codes, held
from reduction.recurrence import (
    Flags,
    Medium,
    Values,
    Wings,
    depth,
    guesses,
    inertia_and_drag,
    ladder,
    medium,
    shaped,
)
from reduction.secular import BLURRED, CLEAR_OF_LOCKING, CLOSE, QUICK, SQUARED, secular_root

# With the history force the response always rises a little from nu = 0, too little for any scan to find.
PEAK_PROMINENCE = 1e-2
OUTSTANDING = 1.25  # times the response to a constant force: a peak without rival
LOST = 1e-4  # of nu^2 at the start: any peak that low would rise by less than 1e-8
PEAK_GRID = 0.5 * np.linspace(0.0, 1.0, 25)[1:] ** 2


def response_peak(
    h: ArrayLike,
    b: ArrayLike,
    added_mass: ArrayLike = 0.0,
    history: ArrayLike = 0.0,
    *,
    near: ArrayLike | None = None,
) -> tuple[Values, Codes]:
    """Frequency at which a weak scanned force moves the particle most, in units of the drive frequency.

    Interior maximum of |response(nu)| over 0 < nu < 1/2

    Parameters
    ----------
    h, b, added_mass, history : array_like
        As in `regime`.
    near : array_like, optional
        Guess of nu [1], such as what was observed; nan for none. It saves time and changes nothing.

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
    nu, codes = _peak(m, guesses(near, shape))
    return shaped(nu, shape), shaped(codes, shape)


def _peak(m: Medium, near: Values | None) -> tuple[Values, Codes]:
    nu = np.full(m.h.shape, np.nan)
    if near is None:
        return _peak_by_root(m)
    codes, stiff = held(m)
    open_ = codes == OSCILLATES
    guessed = open_ & (near > 0.0) & (near < 0.5)
    if guessed.any():
        peak, found = _standing_out(m.take(guessed), near[guessed], stiff[guessed])
        nu[guessed] = np.where(found, peak, np.nan)
        open_[guessed] = ~found
    if open_.any():
        nu[open_], codes[open_] = _peak_by_root(m.take(open_))
    return nu, codes


def _standing_out(m: Medium, near: Values, stiff: Values) -> tuple[Values, Flags]:
    """Peak next to a guess, and whether it is beyond doubt the one: outstanding, and clear of half the drive."""
    peak, lowest = _sharpened(m, near * near, QUICK)
    found = (np.abs(peak - near) < CLOSE * near) & (peak < CLEAR_OF_LOCKING) & (stiff * stiff > OUTSTANDING**2 * lowest)
    return peak, found


def _peak_by_root(m: Medium) -> tuple[Values, Codes]:
    """Peak from the square of the secular root, without drag the two are alike; failing that from a grid."""
    root, regimes = secular_root(m)
    square = np.real(root * root)
    size = np.abs(root) ** 2
    codes = np.where((regimes == UNSTABLE) | (regimes == PAST_MAXIMUM), regimes, NO_PEAK)
    nu = np.full(m.h.shape, np.nan)
    tried = (codes == NO_PEAK) & (square > -0.1 * size) & (square < 0.25)
    start = np.minimum(np.maximum(square, 0.05 * size), 0.24)
    for _ in range(2):
        if tried.any():
            m_tried = m.take(tried)
            peak, lowest = _sharpened(m_tried, start[tried])
            still = np.square(2.0 * ladder(0.0, 1, m_tried, levels=depth(m_tried) + 1).real)
            prominence = PEAK_PROMINENCE * np.minimum(m_tried.history, 1.0)
            found = still > lowest * (1.0 + prominence) ** 2
            nu[tried] = np.where(found, peak, np.nan)
            codes[tried] = np.where(found, OSCILLATES, NO_PEAK)
        tried = (codes == NO_PEAK) & (m.history != 0.0)
        if tried.any():
            start[tried], inside = _best_of_grid(m.take(tried))
            tried[tried] = inside
    return nu, codes


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


def _sharpened(m: Medium, start: Values, most: int = 40) -> tuple[Values, Values]:
    """Minimum of f = |D + h (r+ + r-)|^2 by Newton's method in u = nu^2, in which f is nearly a parabola.

    Returns its nu and f there; f is infinite where the method did not settle.
    """
    nu, least = np.full(start.shape, np.nan), np.full(start.shape, np.inf)
    left, u, lost = np.arange(start.size), start, LOST * start
    both = Wings.of(m, (1, -1), depth(m) + 1)
    with np.errstate(all="ignore"):
        for _ in range(most):
            v = np.sqrt(u)
            (total, other), (first, other_first), (second, other_second) = both.at(np.stack((v, 1.0 - v)))
            share = both.squared / other
            ratio = other_first / other
            total = total + share
            first = first + share * ratio
            second = second + share * (2.0 * ratio * ratio - other_second / other)
            turned = np.conj(total)
            slope = np.real(turned * first)
            bend = np.abs(first) ** 2 + np.real(turned * second)
            slope_u, bend_u = slope / v, (bend - slope / v) / (2.0 * u)
            curved = bend_u > 0.0
            step = np.where(curved, slope_u / np.where(curved, bend_u, 1.0), np.sign(slope_u) * 0.1 * u)
            step = np.minimum(np.maximum(step, -0.5 * (0.25 - u)), 0.5 * u)
            u = u - step
            size = np.abs(step)
            settled = curved & (size < SQUARED * u) & (u < 0.25 - BLURRED)
            ended = left[settled]
            nu[ended], least[ended] = np.sqrt(u[settled]), (np.abs(total) ** 2)[settled]
            going = (size > SQUARED * u) & (u > lost)
            if not going.any():
                break
            if not going.all():
                left, u, lost, both = left[going], u[going], lost[going], both.take(going)
    return nu, least
