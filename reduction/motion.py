"""Motion of one charged particle in an electrodynamic trap, exact for linear drag.

Over m Omega^2, with theta = Omega t:  D(d/dtheta) z + 2 h cos(theta) z = force,  where h = s A V / (2 Omega^2),
b = gamma / Omega and D(nu) = -nu^2 (1 + added_mass) + i nu b (1 + history sqrt(i nu)). Mathieu's q is 4 h. Everything
is vectorised over readings and nothing steps through time.

This is the door to the motion: regimes and limits come from `floquet` and `secular`, frequencies from `secular` and
`resonance`.
"""

from __future__ import annotations

import math

import numpy as np
from numpy.typing import ArrayLike

from reduction import drag
from reduction.floquet import (
    LOCKED,
    NO_PEAK,
    OSCILLATES,
    PAST_MAXIMUM,
    REGIME_REASONS,
    RELAXES,
    UNSTABLE,
    on_branch,
    stability_limit,
    stiffness_maximum,
)
from reduction.recurrence import AT_ONCE, Complex, Medium, Values, depth, inertia_and_drag, ladder, medium, shaped
from reduction.resonance import response_peak
from reduction.secular import drag_free_frequency, regime, ring_down

__all__ = [
    "LOCKED",
    "NO_PEAK",
    "OSCILLATES",
    "PAST_MAXIMUM",
    "REGIME_REASONS",
    "RELAXES",
    "UNSTABLE",
    "drag_free_frequency",
    "micromotion_ratio",
    "micromotion_speed",
    "on_branch",
    "regime",
    "response",
    "response_peak",
    "reynolds_shift",
    "ring_down",
    "stability_limit",
    "stiffness",
    "stiffness_maximum",
    "streak_factor",
]


def stiffness(h: ArrayLike, b: ArrayLike, added_mass: ArrayLike = 0.0, history: ArrayLike = 0.0) -> Values:
    """Stiffness K with which the drive holds the mean height.

    K = 2 h Re r_1;  mean height = z0 + [s (D U + E) - g'] / (Omega^2 K);  K -> 2 h^2 / (1 + b^2) for small h

    Parameters
    ----------
    h : array_like
        Drive strength s A V / (2 Omega^2) [1], either sign.
    b : array_like
        Drag rate over Omega [1].
    added_mass : array_like
        Added mass over mass [1], `drag.added_mass`; 0 for steady drag.
    history : array_like
        Size of the history force [1], `drag.history`; 0 for steady drag.

    Returns
    -------
    ndarray
        Stiffness over m Omega^2 [1].

    Notes
    -----
    Rises with |h| as far as `stiffness_maximum`; meaningless beyond `stability_limit`.

    Examples
    --------
    >>> print(f"{stiffness(0.01, 2.0) / (2 * 0.01**2 / (1 + 2.0**2)):.5f}")
    0.99998
    """
    m, shape = medium(h, b, added_mass, history)
    return shaped(2.0 * _first_rung(m).real, shape)


def micromotion_ratio(h: ArrayLike, b: ArrayLike, added_mass: ArrayLike = 0.0, history: ArrayLike = 0.0) -> Complex:
    """Complex amplitude of the motion at the drive frequency over the mean displacement.

    r_1 = c_1 / c_0;  z(t) = c_0 (1 + 2 Re r_1 exp(i Omega t) + ...)

    Parameters
    ----------
    h, b, added_mass, history : array_like
        As in `stiffness`.

    Returns
    -------
    ndarray of complex
        Ratio [1].
    """
    m, shape = medium(h, b, added_mass, history)
    signed = np.broadcast_to(np.asarray(h, dtype=np.float64), shape).ravel()
    nonzero = np.where(signed == 0.0, 1.0, signed)
    return shaped(np.where(signed == 0.0, 0.0, _first_rung(m) / nonzero), shape)


def _first_rung(m: Medium) -> Complex:
    with np.errstate(all="ignore"):  # far beyond the stable region the fraction has poles
        return ladder(0.0, 1, m, levels=depth(m))


def streak_factor(h: ArrayLike, b: ArrayLike, added_mass: ArrayLike = 0.0, history: ArrayLike = 0.0) -> Values:
    """Displacement of the middle of the streak a driven particle draws, over its mean displacement.

    (max + min) / 2 of z(t) / c_0 = 1 + 2 Re sum_n r_1 ... r_n exp(i n Omega t)

    Parameters
    ----------
    h, b, added_mass, history : array_like
        As in `stiffness`.

    Returns
    -------
    ndarray
        Factor [1], about 1.01 to 1.05 in practice.
    """
    m, shape = medium(h, b, added_mass, history)
    parts = [_streak_middle(m.take(slice(k, k + AT_ONCE // 8))) for k in range(0, m.h.size, AT_ONCE // 8)]
    return shaped(np.concatenate(parts) if parts else m.h, shape)


def _streak_middle(m: Medium) -> Values:
    levels = depth(m)
    with np.errstate(all="ignore"):
        ratio: Complex = np.zeros(m.h.size, dtype=np.complex128)
        ratios = [ratio] * levels
        for n, own in enumerate(inertia_and_drag(np.arange(levels, 0.0, -1.0)[:, None], m), start=1):
            ratio = -m.h / (own + m.h * ratio)
            ratios[levels - n] = ratio
        harmonics: Complex = 2.0 * np.cumprod(ratios, axis=0, dtype=np.complex128)
        harmonics = harmonics[: _worth_keeping(harmonics)]
        return 1.0 + _middle_of_range(harmonics)


def _worth_keeping(harmonics: Complex) -> int:
    size = np.max(np.abs(harmonics), axis=1, initial=0.0, where=np.isfinite(harmonics))
    return max(1, int(np.max(np.nonzero(size > 1e-18)[0], initial=0)) + 1)


def _middle_of_range(harmonics: Complex) -> Values:
    """(max + min) / 2 over the cycle of Re sum_n c_n exp(i n theta), n from 1: best of a grid, sharpened by Newton."""
    count = len(harmonics)
    points = max(32, 1 << (3 * count + 3).bit_length())
    padded = np.zeros((count + 1, harmonics.shape[1]), dtype=np.complex128)
    padded[1:] = harmonics
    coarse = np.fft.irfft(np.conj(padded), n=points, axis=0)
    angle = -2.0 * np.pi / points * np.stack((np.argmax(coarse, axis=0), np.argmin(coarse, axis=0)))
    sides = np.array([[1.0], [-1.0]])
    turning = 1j * np.arange(1.0, count + 1.0)[:, None]
    with_slopes = np.stack((harmonics, turning * harmonics, turning * turning * harmonics), axis=1)[:, :, None]
    for _ in range(3):
        motion = _summed(with_slopes, angle)
        bend = sides * motion[2].real
        angle = angle - np.where(bend < 0.0, sides * motion[1].real / np.where(bend < 0.0, bend, -1.0), 0.0)
    ends = _summed(with_slopes[:, 0], angle).real
    return np.asarray(0.5 * (ends[0] + ends[1]))


def _summed(rows: Complex, angle: Values) -> Complex:
    """Sum of rows times exp(i n angle), n from 1."""
    turn = np.exp(1j * angle)
    total: Complex = rows[-1] * turn
    for row in rows[-2::-1]:
        total = (total + row) * turn
    return total


def response(
    nu: ArrayLike, h: ArrayLike, b: ArrayLike, added_mass: ArrayLike = 0.0, history: ArrayLike = 0.0
) -> Complex:
    """Motion at frequency nu under a weak force at that frequency.

    1 / (D(nu) + h (r+ + r-)),  r+ and r- through D(nu + n) and D(nu - n)

    Parameters
    ----------
    nu : array_like
        Frequency over the drive frequency [1].
    h, b, added_mass, history : array_like
        As in `stiffness`.

    Returns
    -------
    ndarray of complex
        Displacement times m Omega^2 over the force [1]; 1 / K at nu = 0.
    """
    v, *rest = np.broadcast_arrays(*(np.asarray(part, dtype=np.float64) for part in (nu, h, b, added_mass, history)))
    m, shape = medium(*rest)
    flat = np.ascontiguousarray(v).ravel()
    levels = depth(m) + int(np.ceil(np.max(np.abs(flat), initial=0.0)))
    with np.errstate(all="ignore"):
        both = ladder(flat, 1, m, levels=levels) + ladder(flat, -1, m, levels=levels)
        return shaped(1.0 / (inertia_and_drag(flat, m) + both), shape)


def micromotion_speed(
    displacement: ArrayLike,
    angular_frequency: ArrayLike,
    h: ArrayLike,
    b: ArrayLike,
    added_mass: ArrayLike = 0.0,
    history: ArrayLike = 0.0,
) -> Values:
    """Amplitude of the speed with which the drive shakes a displaced particle.

    2 |r_1| Omega |z - z_0|

    Parameters
    ----------
    displacement : array_like
        Mean height above the centre of the drive's field [m].
    angular_frequency : array_like
        Angular frequency of the drive [rad/s].
    h, b, added_mass, history : array_like
        As in `stiffness`.

    Returns
    -------
    ndarray
        Speed amplitude [m/s].
    """
    swing = 2.0 * np.abs(micromotion_ratio(h, b, added_mass, history))
    reach = np.abs(np.asarray(displacement, dtype=np.float64)) * np.asarray(angular_frequency, dtype=np.float64)
    return np.asarray(swing * reach, dtype=np.float64)[()]


# Schiller and Naumann's excess at the speed amplitude, weighted with the power it takes out of a sinusoidal motion
CYCLE_WEIGHT = 2.0 * math.gamma(0.5 * 3.687) / (math.sqrt(math.pi) * math.gamma(0.5 * 2.687 + 1.0))


def reynolds_shift(
    displacement: ArrayLike,
    h: ArrayLike,
    b: ArrayLike,
    angular_frequency: ArrayLike,
    diameter: ArrayLike,
    air_density: ArrayLike,
    viscosity: ArrayLike,
    added_mass: ArrayLike = 0.0,
    history: ArrayLike = 0.0,
) -> Values:
    """Relative change of a displacement by drag beyond Stokes' law.

    K(b) / K(b (1 + delta)) - 1,  delta = 2 <|sin|^2.687> (f(Re) - 1),  Re at the speed amplitude 2 |r_1| Omega |z - z0|

    Parameters
    ----------
    displacement : array_like
        Mean height above the centre of the drive's field [m].
    h, b, added_mass, history : array_like
        As in `stiffness`.
    angular_frequency : array_like
        Angular frequency of the drive [rad/s].
    diameter : array_like
        Particle diameter [m].
    air_density : array_like
        Density of the air [kg/m3].
    viscosity : array_like
        Viscosity of the air [Pa s].

    Returns
    -------
    ndarray
        (true displacement - displacement for linear drag) / (displacement for linear drag) [1], positive as a rule.

    Notes
    -----
    The quasi-steady excess of Schiller and Naumann over one cycle of the micromotion, linearised by the work it does
    (first harmonic balance): an estimate, good to some ten percent of itself while small.
    """
    speed = micromotion_speed(displacement, angular_frequency, h, b, added_mass, history)
    excess = drag.schiller_naumann(drag.reynolds(speed, diameter, air_density, viscosity)) - 1.0
    stronger = np.asarray(b, dtype=np.float64) * (1.0 + CYCLE_WEIGHT * excess)
    linear = stiffness(h, b, added_mass, history)
    safe = np.where(linear > 0.0, linear, np.nan)
    return np.asarray(safe / stiffness(h, stronger, added_mass, history) - 1.0, dtype=np.float64)[()]
