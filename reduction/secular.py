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
    PAST_MAXIMUM,
    RELAXES,
    STRONGEST_DRAG,
    UNSTABLE,
    Codes,
    classified,
    drive_ceiling,
    half_trace_share,
)
from reduction.recurrence import (
    Complex,
    Flags,
    Medium,
    Values,
    depth,
    equivalent_steady,
    medium,
    shaped,
    wing,
)

# Steps after which the next one is below rounding: third order (Halley), second order (Newton)
CUBED = 1e-6
SQUARED = 1e-8


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
    h: ArrayLike, b: ArrayLike, added_mass: ArrayLike = 0.0, history: ArrayLike = 0.0
) -> tuple[Values, Codes]:
    """Secular frequency at which the free particle oscillates as it settles, in units of the drive frequency.

    Real part of the complex v with D(v) + h (r+ + r-) = 0; for steady drag cos(2 pi nu) = half trace

    Parameters
    ----------
    h, b, added_mass, history : array_like
        As in `regime`.

    Returns
    -------
    nu : ndarray
        Secular over drive frequency [1], in (0, 1/2); nan where there is none.
    code : ndarray of int
        As in `regime`.
    """
    m, shape = medium(h, b, added_mass, history)
    root, codes = secular_root(m)
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


def secular_root(m: Medium) -> tuple[Complex, Codes]:
    """Complex frequency v of the free motion that decays most slowly, in the strip 0 <= Re v <= 1/2, and regime codes.

    It is nan where the particle is not held, and for relaxing or locked motion that of the equivalent steady problem.
    """
    with np.errstate(all="ignore"):
        codes, share = classified(m)
        inside = np.clip(share, 0.0, 1.0)
        nu = np.arctan2(np.sqrt(inside), np.sqrt(1.0 - inside)) / np.pi
        outside = np.maximum(np.maximum(-share, share - 1.0), 0.0)
        root = nu + 1j * (0.5 * equivalent_steady(m)[1] - np.arcsinh(np.sqrt(outside)) / np.pi)
        kept = (codes != UNSTABLE) & (codes != PAST_MAXIMUM)
        root[~kept] = np.nan
        differs = kept & (m.history != 0.0)
        surely = (share > 0.0) | (differs & _oscillates_if_steady(m))
        slow = differs & (share < 0.2) & ((share > -2.0) | surely)
        fast = differs & (share > 0.8)
        plain = differs & ~slow & ~fast & (share > 0.0)
        if np.any(plain):
            m_plain = m.take(plain)
            root[plain], found = _root(m_plain, root[plain], depth(m_plain) + 1)
            codes[plain] = np.where(found, OSCILLATES, RELAXES)
        if np.any(slow):
            root[slow], codes[slow] = _root_near_standstill(m.take(slow), root[slow], surely[slow])
        if np.any(fast):
            root[fast], codes[fast] = _root_near_half_drive(m.take(fast), root[fast])
    return root, codes


def _determinant(v: Complex, m: Medium, levels: int) -> tuple[Complex, Complex, Complex]:
    """Zero where the free motion has frequency v: product of the wings through 0 and -1 less h^2, with two slopes."""
    a, a_first, a_second = wing(v, 1, m, levels=levels)
    c, c_first, c_second = wing(v - 1.0, -1, m, levels=levels)
    return (
        a * c - m.h * m.h,
        a_first * c + a * c_first,
        a_second * c + 2.0 * a_first * c_first + a * c_second,
    )


def _root(m: Medium, start: Complex, levels: int) -> tuple[Complex, Flags]:
    """Root of the determinant by Halley's method, and whether it was reached inside the strip."""
    v = start.copy()
    reached = np.zeros(v.shape, dtype=bool)
    left, rest, now = np.arange(v.size), m, start
    for _ in range(30):
        value, first, second = _determinant(now, rest, levels)
        step = value / (first - 0.5 * value * second / first)
        now = np.asarray(now - step)
        going = np.abs(step) > CUBED
        v[left], reached[left] = now, np.abs(step) <= CUBED
        if not np.any(going):
            break
        left, rest, now = left[going], rest.take(going), now[going]
    return v, reached & (v.real > 0.0) & (v.real < 0.5) & (v.imag > -CUBED)


def _oscillates_if_steady(m: Medium) -> Flags:
    """Whether steady drag alone would let the particle oscillate."""
    fit = (m.b <= STRONGEST_DRAG) & (m.h < drive_ceiling(m.b))
    return np.asarray(fit & (half_trace_share(np.where(fit, m.h, 0.0), np.where(fit, m.b, 0.0)) > 0.0))


def _root_near_standstill(m: Medium, start: Complex, surely: Flags) -> tuple[Complex, Codes]:
    """Root from halfway between the two slowest, (v - v_m)^2 = -2 F / F'' where F' = 0."""
    levels = depth(m) + 1
    drag = equivalent_steady(m)[1]
    middle: Complex = np.asarray(0.5j * drag, dtype=np.complex128)
    for _ in range(8):
        _, first, second = _determinant(middle, m, levels)
        step = first / second
        middle = np.asarray(middle - step)
        if not np.any(np.abs(step) > SQUARED):
            break
    value, _, second = _determinant(middle, m, levels)
    square = -2.0 * value / second
    v, found = _root(m, np.asarray(middle + np.sqrt(square), dtype=np.complex128), levels)
    again = ~found & surely
    if np.any(again):
        elsewhere: Complex = np.asarray(0.1 + 0.25j * drag[again], dtype=np.complex128)
        v[again], found[again] = _root(m.take(again), elsewhere, levels)
    swings = v.real > np.minimum(2.0 * np.sqrt(m.history), 1.0) * v.imag
    oscillates = found & (surely | swings)
    return np.where(oscillates, v, start), np.where(oscillates, OSCILLATES, RELAXES)


def _root_near_half_drive(m: Medium, start: Complex) -> tuple[Complex, Codes]:
    """Root from halfway between the two that meet at Re v = 1/2, where |D(v) + h r_1|^2 - h^2 is stationary."""
    levels = depth(m) + 1
    y = start.imag
    for _ in range(8):
        slope, bend, _ = _along_half_drive(y, m, levels)
        step = np.where(bend > 0.0, slope / np.where(bend > 0.0, bend, 1.0), 0.0)
        y = y - step
        if not np.any(np.abs(step) > SQUARED):
            break
    _, bend, gap = _along_half_drive(y, m, levels)
    locked = (gap <= 0.0) & (bend > 0.0)
    away = np.sqrt(np.maximum(gap, 0.0) / np.where(bend > 0.0, bend, 1.0))
    near = (bend > 0.0) & ((away < 0.1) | (start.real >= 0.5))
    v, found = _root(m, np.where(near, 0.5 - np.minimum(away, 0.25) + 1j * y, start), levels)
    oscillates = found & ~locked
    return np.where(oscillates, v, start), np.where(oscillates, OSCILLATES, LOCKED)


def _along_half_drive(y: Values, m: Medium, levels: int) -> tuple[Values, Values, Values]:
    """Half the slope and half the bend of |D(v) + h r_1|^2 - h^2 along v = 1/2 + i y, and its value."""
    a, first, second = wing(0.5 + 1j * y, 1, m, levels=levels)
    slope = np.real(1j * np.conj(a) * first)
    bend = np.abs(first) ** 2 - np.real(np.conj(a) * second)
    return np.asarray(slope), np.asarray(bend), np.asarray(np.abs(a) ** 2 - m.h * m.h)
