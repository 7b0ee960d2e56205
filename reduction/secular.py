"""Secular frequency: that of the free oscillation of a trapped particle as it settles.

The steady problem gives a starting point, the equation with unsteady drag itself the answer, by Newton's or Halley's
method on all elements at once.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike

from reduction.floquet import (
    LOCKED,
    OSCILLATES,
    RELAXES,
    STRONGEST_DRAG,
    Codes,
    drive_ceiling,
    half_trace_share,
    held,
    share_if_steady,
)
from reduction.recurrence import (
    Complex,
    Flags,
    Medium,
    Values,
    Wings,
    depth,
    equivalent_steady,
    guesses,
    medium,
    shaped,
)

# Steps after which the next one is below rounding: third order (Halley), second order (Newton)
CUBED = 1e-6
SQUARED = 1e-8

BLURRED = 1e-7  # rounding tells roots no nearer than this to Re v = 0 or 1/2 from those on it

# What makes a root or a peak found at the first attempt certain: iterations, distance from the guess over the guess,
# swing over fading, and the range of Re v that is clear of both ends
QUICK = 6
CLOSE = 0.5
SWINGING = 0.3
CLEAR_OF_REST, CLEAR_OF_LOCKING = 2e-3, 0.4


def regime(h: ArrayLike, b: ArrayLike, added_mass: ArrayLike = 0.0, history: ArrayLike = 0.0) -> Codes:
    """What the free particle does, as a code of `REGIME_REASONS`.

    UNSTABLE      |D(1/2) + h r_1(1/2)| <= |h|, which for steady drag is half trace <= -cosh(pi b)
    PAST_MAXIMUM  h at or beyond the first maximum of K
    LOCKED        half trace <= -1; with unsteady drag a root of the determinant on Re v = 1/2
    RELAXES       half trace >= 1; with unsteady drag that of both steady problems below, and Re v <= Im v min(2
                  sqrt(history), 1) at the root of the determinant
    OSCILLATES    otherwise

    Parameters
    ----------
    h : array_like
        Drive strength s A V / (2 Omega^2) [1], either sign.
    b : array_like
        Drag rate over Omega [1].
    added_mass : array_like
        Added mass over mass [1], `drag.added_mass`.
    history : array_like
        Size of the history force [1], `drag.history`.

    Returns
    -------
    ndarray of int
        OSCILLATES 0, RELAXES 1, LOCKED 2, UNSTABLE 3, PAST_MAXIMUM 5.

    Notes
    -----
    Mathieu's equation with drag: Hasegawa and Uehara, Appl. Phys. B 61 (1995) 159 (from memory). With the history force
    the slow roots no longer meet on the imaginary axis but pass each other beside it: relaxation has no sharp edge. The
    edge set here is ours and tends to the steady one. A particle oscillates if it would with steady drag alone, or with
    steady drag and mass that agree with the unsteady ones at the drive frequency, or if its swing fades no faster than
    to 0.2 % in a period.
    """
    m, shape = medium(h, b, added_mass, history)
    return shaped(secular_root(m)[1], shape)


def ring_down(
    h: ArrayLike,
    b: ArrayLike,
    added_mass: ArrayLike = 0.0,
    history: ArrayLike = 0.0,
    *,
    near: ArrayLike | None = None,
) -> tuple[Values, Codes]:
    """Secular frequency at which the free particle oscillates as it settles, in units of the drive frequency.

    Real part of the complex v with D(v) + h (r+ + r-) = 0; for steady drag cos(2 pi nu) = half trace

    Parameters
    ----------
    h, b, added_mass, history : array_like
        As in `regime`.
    near : array_like, optional
        Guess of nu [1], such as what was observed; nan for none. It saves time and changes nothing.

    Returns
    -------
    nu : ndarray
        Secular over drive frequency [1], in (0, 1/2); nan where there is none.
    code : ndarray of int
        As in `regime`.
    """
    m, shape = medium(h, b, added_mass, history)
    root, codes = secular_root(m, guesses(near, shape))
    nu = np.where(codes == OSCILLATES, root.real, np.nan)
    return shaped(nu, shape), shaped(codes, shape)


def drag_free_frequency(h: ArrayLike) -> Values:
    """Secular over drive frequency without any drag, beta / 2 of Mathieu's equation at a = 0, q = 4 h.

    Parameters
    ----------
    h : array_like
        Drive strength [1], either sign.

    Returns
    -------
    ndarray
        Frequency ratio [1]; nan beyond the stable region, |h| >= 0.2270.
    """
    return ring_down(h, 0.0)[0]


def secular_root(m: Medium, near: Values | None = None) -> tuple[Complex, Codes]:
    """Complex frequency v of the free motion that decays most slowly, in the strip 0 <= Re v <= 1/2, and regime codes.

    It is nan where the particle is not held, and for relaxing or locked motion that of the equivalent steady problem.
    """
    codes, _ = held(m)
    root = np.full(m.h.shape, complex(np.nan, np.nan))
    open_ = codes == OSCILLATES
    if near is not None:
        guessed = open_ & (m.history != 0.0) & (m.history <= 1.0) & (near > 0.0) & (near < 0.5)
        if guessed.any():
            m_guessed = m.take(guessed)
            start = near[guessed] + 0.5j * equivalent_steady(m_guessed)[1]
            root[guessed], swings = _swinging(m_guessed, start, np.maximum(SWINGING, _least_swing(m_guessed)))
            open_[guessed] = ~swings
    if open_.any():
        root[open_], codes[open_] = _root_by_steady(m.take(open_))
    return root, codes


def _root_by_steady(m: Medium) -> tuple[Complex, Codes]:
    """Root and regime of held particles, from the equivalent steady problem."""
    strength, drag = equivalent_steady(m)
    with np.errstate(all="ignore"):
        share = share_if_steady(strength, drag)
        codes = np.where(share <= 0.0, RELAXES, np.where(share >= 1.0, LOCKED, OSCILLATES))
        inside = np.clip(share, 0.0, 1.0)
        nu = np.arctan2(np.sqrt(inside), np.sqrt(1.0 - inside)) / np.pi
        outside = np.maximum(np.maximum(-share, share - 1.0), 0.0)
        root = np.asarray(nu + 1j * (0.5 * drag - np.arcsinh(np.sqrt(outside)) / np.pi))
    open_ = m.history != 0.0
    likely = open_ & (share > 0.0) & (share < 1.0) & (root.real > SWINGING * root.imag)
    if likely.any():
        quick, swings = _swinging(m.take(likely), root[likely], SWINGING)
        likely[likely] = swings
        root[likely] = quick[swings]
        open_ &= ~likely
    if open_.any():
        root[open_], codes[open_] = root_by_region(m.take(open_), root[open_], share[open_])
    return root, codes


def _swinging(m: Medium, start: Complex, least: Values | float) -> tuple[Complex, Flags]:
    """Root by Halley's method, and whether it is beyond doubt the one, far from any edge of the band of oscillation.

    A motion that swings at least so many times as fast as it fades, well below half the drive frequency, has no other
    root to be taken for, unless `history` is far beyond that of any particle of interest.
    """
    v, found = _root(m, start, depth(m) + 1, most=QUICK)
    close = np.abs(v - start) < CLOSE * np.maximum(start.real, 0.1)
    clear = (v.real > CLEAR_OF_REST) & (v.real < CLEAR_OF_LOCKING)
    return v, found & close & clear & (v.real > least * v.imag) & (v.imag > 0.0)


def root_by_region(m: Medium, start: Complex, share: Values) -> tuple[Complex, Codes]:
    """Root and regime of held particles with unsteady drag, from the root and half trace share of the steady problem.

    Near the edges of the band of oscillation two roots meet, and the search starts from halfway between them.
    """
    root, codes = start.copy(), np.where(share <= 0.0, RELAXES, np.where(share >= 1.0, LOCKED, OSCILLATES))
    with np.errstate(all="ignore"):
        surely = (share > 0.0) | _oscillates_if_steady(m)
        slow = (share < 0.2) & ((share > -2.0) | surely)
        fast = share > 0.8
        plain = ~slow & ~fast & (share > 0.0)
        if plain.any():
            m_plain = m.take(plain)
            root[plain], found = _root(m_plain, root[plain], depth(m_plain) + 1)
            codes[plain] = np.where(found, OSCILLATES, RELAXES)
        if slow.any():
            root[slow], codes[slow] = _root_near_standstill(m.take(slow), root[slow], surely[slow])
        if fast.any():
            root[fast], codes[fast] = _root_near_half_drive(m.take(fast), root[fast])
    return root, codes


def _determinant(v: Complex, both: Wings) -> tuple[Complex, Complex, Complex]:
    """Zero where the free motion has frequency v: product of the wings through 0 and -1 less h^2, with two slopes."""
    (a, c), (a_first, c_first), (a_second, c_second) = both.at(np.stack((v, 1.0 - v)))
    return (
        a * c + both.squared,
        a_first * c - a * c_first,
        a_second * c - 2.0 * a_first * c_first + a * c_second,
    )


def _root(m: Medium, start: Complex, levels: int, most: int = 30) -> tuple[Complex, Flags]:
    """Root of the determinant by Halley's method, and whether it was reached inside the strip."""
    v, reached = start.copy(), np.zeros(start.shape, dtype=bool)
    left, both, now = np.arange(v.size), Wings.of(m, (1, -1), levels), start
    with np.errstate(all="ignore"):
        for _ in range(most):
            value, first, second = _determinant(now, both)
            step = value / (first - 0.5 * value * second / first)
            now = np.asarray(now - step)
            size = np.abs(step)
            v[left], reached[left] = now, size <= CUBED
            going = size > CUBED
            if not going.any():
                break
            if not going.all():
                left, now = left[going], now[going]
                both = both.take(going)
        return v, reached & (v.real > BLURRED) & (v.real < 0.5 - BLURRED) & (v.imag > -CUBED)


def _oscillates_if_steady(m: Medium) -> Flags:
    """Whether steady drag alone would let the particle oscillate."""
    fit = (m.b <= STRONGEST_DRAG) & (m.h < drive_ceiling(m.b))
    return np.asarray(fit & (half_trace_share(np.where(fit, m.h, 0.0), np.where(fit, m.b, 0.0)) > 0.0))


def _root_near_standstill(m: Medium, start: Complex, surely: Flags) -> tuple[Complex, Codes]:
    """Root from halfway between the two slowest, where F' = 0: those of the parabola through F there."""
    levels = depth(m) + 1
    drag = equivalent_steady(m)[1]
    both = Wings.of(m, (1, -1), levels)
    middle: Complex = np.asarray(0.5j * drag, dtype=np.complex128)
    for k in range(9):
        value, first, second = _determinant(middle, both)
        step = first / second
        square = step * step - 2.0 * value / second
        middle = np.asarray(middle - step)
        if k == 8 or not np.any(np.abs(step) > CUBED):
            break
    v, found = _root(m, np.asarray(middle + np.sqrt(square), dtype=np.complex128), levels)
    again = ~found & surely
    if again.any():
        elsewhere: Complex = np.asarray(0.1 + 0.25j * drag[again], dtype=np.complex128)
        v[again], found[again] = _root(m.take(again), elsewhere, levels)
    swings = v.real > _least_swing(m) * v.imag
    oscillates = found & (surely | swings)
    return np.where(oscillates, v, start), np.where(oscillates, OSCILLATES, RELAXES)


def _least_swing(m: Medium) -> Values:
    """Swing over fading from which a particle with unsteady drag is said to oscillate, whatever steady drag says."""
    return np.asarray(np.minimum(2.0 * np.sqrt(m.history), 1.0))


def _root_near_half_drive(m: Medium, start: Complex) -> tuple[Complex, Codes]:
    """Root from halfway between the two that meet at Re v = 1/2, where |D(v) + h r_1|^2 - h^2 is stationary."""
    levels = depth(m) + 1
    one = Wings.of(m, (1,), levels)
    y = start.imag
    for k in range(9):
        slope, bend, gap = _along_half_drive(y, one)
        bent = bend > 0.0
        bend = np.where(bent, bend, 1.0)
        step = np.where(bent, slope / bend, 0.0)
        if k == 8 or not np.any(np.abs(step) > CUBED):
            break
        y = y - step
    gap, y = gap - slope * step, y - step
    locked = (gap <= 0.0) & bent
    away = np.sqrt(np.maximum(gap, 0.0) / bend)
    near = bent & ((away < 0.1) | (start.real >= 0.5))
    v, found = _root(m, np.where(near, 0.5 - np.minimum(away, 0.25) + 1j * y, start), levels)
    oscillates = found & ~locked
    return np.where(oscillates, v, start), np.where(oscillates, OSCILLATES, LOCKED)


def _along_half_drive(y: Values, one: Wings) -> tuple[Values, Values, Values]:
    """Half the slope and half the bend of |D(v) + h r_1|^2 - h^2 along v = 1/2 + i y, and its value."""
    a, first, second = (rows[0] for rows in one.at((0.5 + 1j * y)[None]))
    slope = np.real(1j * np.conj(a) * first)
    bend = np.abs(first) ** 2 - np.real(np.conj(a) * second)
    return np.asarray(slope), np.asarray(bend), np.asarray(np.abs(a) ** 2 + one.squared.real)
