"""The motion against Mathieu's functions, published tables, time integration and truncated linear systems."""

import numpy as np
import pytest
from scipy.integrate import solve_ivp
from scipy.optimize import brentq, minimize_scalar
from scipy.special import mathieu_a, mathieu_b

from reduction import drag, motion
from reduction.recurrence import depth, ladder, medium
from reduction.secular import secular_root

STEADY = [
    (0.02, 0.01),
    (0.1, 0.0),
    (0.1, 0.3),
    (0.2, 0.05),
    (0.35, 0.8),
    (0.5, 1.0),
    (1.2, 2.0),
    (2.4, 3.0),
    (3.0, 6.0),
]
# h, b, added mass, history: a bead, a spore, a light flake, and exaggerated ones
UNSTEADY = [
    (0.10, 0.10, 6e-4, 0.4),
    (0.18, 0.20, 6e-4, 0.3),
    (0.30, 0.60, 1e-3, 0.6),
    (0.60, 1.60, 1e-3, 0.15),
    (1.50, 3.00, 2e-3, 0.1),
    (0.20, 0.15, 5e-2, 2.0),
]


def unsteady_drag(nu, b, added_mass, history):
    swing = 1j * np.asarray(nu, dtype=complex)
    return -(np.asarray(nu) ** 2) * (1 + added_mass) + swing * b * (1 + history * np.sqrt(swing))


def harmonics(nu, h, b, added_mass=0.0, history=0.0, size=25):
    """Coefficients of the motion at nu + n under a unit force at nu, from the truncated linear system."""
    n = np.arange(-size, size + 1)
    matrix = np.diag(unsteady_drag(nu + n, b, added_mass, history))
    matrix += h * (np.eye(2 * size + 1, k=1) + np.eye(2 * size + 1, k=-1))
    return n, np.linalg.solve(matrix, (n == 0).astype(complex))


def determinant(v, h, b, added_mass, history, size=16):
    n = np.arange(-size, size + 1)
    matrix = np.diag(unsteady_drag(v + n, b, added_mass, history))
    matrix += h * (np.eye(2 * size + 1, k=1) + np.eye(2 * size + 1, k=-1))
    return np.linalg.det(matrix / np.maximum(n * n, 1)[:, None])


def integrated(h, b, force, start, span):
    """Time integration of z'' + b z' + 2 h cos(t) z = force with the integrals of z and z exp(-i t)."""

    def rate(t, y):
        z, speed = y[0], y[1]
        return [speed, force - b * speed - 2 * h * np.cos(t) * z, z, z * np.cos(t), z * np.sin(t)]

    return solve_ivp(rate, (0, span), [*start, 0, 0, 0], method="DOP853", rtol=1e-12, atol=1e-14, dense_output=True)


def monodromy(h, b):
    ends = [integrated(h, b, 0.0, start, 2 * np.pi).y[:2, -1] for start in ((1.0, 0.0), (0.0, 1.0))]
    return np.array(ends).T


def periodic_motion(h, b):
    forced = integrated(h, b, 1.0, (0.0, 0.0), 2 * np.pi).y[:2, -1]
    start = np.linalg.solve(np.eye(2) - monodromy(h, b), forced)
    return integrated(h, b, 1.0, start, 2 * np.pi)


# ---- stiffness, micromotion and streak


@pytest.mark.parametrize(("h", "b"), STEADY)
def test_stiffness_and_micromotion_agree_with_time_integration(h, b):
    end = periodic_motion(h, b).y[:, -1]
    mean, first = end[2] / (2 * np.pi), (end[3] - 1j * end[4]) / (2 * np.pi)
    assert motion.stiffness(h, b) * mean == pytest.approx(1.0, abs=1e-9)
    assert motion.micromotion_ratio(h, b) == pytest.approx(first / mean, abs=1e-9)


@pytest.mark.parametrize(("h", "b"), [case for case in STEADY if case[1] > 0])
def test_streak_middle_agrees_with_time_integration(h, b):
    run = periodic_motion(h, b)
    t = np.linspace(0, 2 * np.pi, 4001)
    z = run.sol(t)[0]
    ends = []
    for sign in (1, -1):
        best = t[np.argmax(sign * z)]
        fine = minimize_scalar(lambda x, s=sign: -s * run.sol(x % (2 * np.pi))[0], bounds=(best - 2e-3, best + 2e-3))
        ends.append(-sign * fine.fun)
    mean = run.y[2, -1] / (2 * np.pi)
    assert motion.streak_factor(h, b) == pytest.approx(np.mean(ends) / mean, rel=1e-8)


@pytest.mark.parametrize(("h", "b", "added_mass", "history"), UNSTEADY)
def test_stiffness_and_micromotion_agree_with_the_linear_system(h, b, added_mass, history):
    n, c = harmonics(0.0, h, b, added_mass, history)
    size = n.size // 2
    assert motion.stiffness(h, b, added_mass, history) == pytest.approx(1 / c[size].real, rel=1e-11)
    assert motion.micromotion_ratio(h, b, added_mass, history) == pytest.approx(c[size + 1] / c[size], rel=1e-11)


@pytest.mark.parametrize(("h", "b", "added_mass", "history"), UNSTEADY)
def test_streak_middle_agrees_with_the_linear_system(h, b, added_mass, history):
    n, c = harmonics(0.0, h, b, added_mass, history)
    t = np.linspace(0, 2 * np.pi, 200_001)
    z = np.zeros_like(t)
    for order, value in zip(n, c, strict=True):
        z += np.real(value * np.exp(1j * order * t))
    middle = 0.5 * (z.max() + z.min()) / c[n.size // 2].real
    assert motion.streak_factor(h, b, added_mass, history) == pytest.approx(middle, abs=1e-9)


def test_stiffness_tends_to_the_damped_pseudopotential():
    # 2 h^2 / (1 + b^2): standard averaging result with drag; b is half of k in y'' + k y' + ..., h a quarter of q
    for k, q, ratio in [(0.1, 0.02, 1.000156), (0.1, 0.1, 1.003915), (1.0, 0.1, 1.002671), (4.0, 0.1, 1.000241)]:
        assert abs(motion.stiffness(q / 4, k / 2) / (q**2 / 8 / (1 + k**2 / 4)) - 1.0) < 0.5 * q * q
        assert ratio == pytest.approx(1.0, abs=0.5 * q * q)  # the Floquet product obeys the same bound


def test_sign_of_the_drive_strength_turns_only_the_micromotion():
    h, b = np.array([0.05, 0.2, 0.9]), np.array([0.02, 0.4, 2.0])
    np.testing.assert_array_equal(motion.stiffness(-h, b), motion.stiffness(h, b))
    np.testing.assert_array_equal(motion.streak_factor(-h, b), motion.streak_factor(h, b))
    np.testing.assert_array_equal(motion.micromotion_ratio(-h, b), -motion.micromotion_ratio(h, b))
    np.testing.assert_array_equal(motion.ring_down(-h, b)[0], motion.ring_down(h, b)[0])


def test_continued_fraction_is_as_deep_as_it_need_be():
    rng = np.random.default_rng(5)
    drags = 10 ** rng.uniform(-3, 2, 200)
    for b, top in zip(drags, motion.stiffness_maximum(drags), strict=True):
        m, _ = medium(rng.uniform(0.0, 1.0) * top, b, 1e-3, rng.uniform(0, 1))
        for frequency in (0.0, complex(rng.uniform(0, 0.5), 0.5 * b)):
            short = ladder(frequency, 1, m, levels=depth(m))
            assert abs(short / ladder(frequency, 1, m, levels=3 * depth(m) + 20) - 1) < 1e-13


def test_streak_factor_is_a_few_percent_above_one_in_practice():
    # 1 to 5 % is what reading the middle of a streak as the mean costs at ordinary drives
    for h, b in [(0.2, 0.5), (0.3, 1.0), (0.5, 2.0)]:
        assert 1.01 < motion.streak_factor(h, b) < 1.06


# ---- free motion


# beta(q) at a = 0, computed independently in two ways to 14 digits (Taylor series and continued fraction)
BETA = [
    (0.05, 0.035372626265934),
    (0.1, 0.070849552529944),
    (0.2, 0.14255132653989),
    (0.3, 0.21605913493635),
    (0.4, 0.29256621148091),
    (0.5, 0.37374412186627),
    (0.6, 0.46224946254515),
    (0.7, 0.56306616102938),
    (0.8, 0.68856399209299),
    (0.9, 0.91591126726917),
]


@pytest.mark.parametrize(("q", "beta"), BETA)
def test_frequency_without_drag_is_mathieus(q, beta):
    assert 2.0 * motion.drag_free_frequency(q / 4.0) == pytest.approx(beta, abs=1e-13)


def test_frequency_without_drag_ends_at_the_limit_of_the_first_stable_region():
    # b_1(q) = 0 at q = 0.908046334 (0.908 in every textbook on ion traps)
    limit = brentq(lambda q: mathieu_b(1, q), 0.8, 1.0, xtol=1e-14)
    assert limit == pytest.approx(0.90804633373457759, abs=1e-9)
    assert 4.0 * motion.stability_limit(0.0) == pytest.approx(limit, abs=1e-9)
    assert motion.regime(limit / 4 * (1 - 1e-6), 0.0) == motion.OSCILLATES
    assert motion.regime(limit / 4 * (1 + 1e-6), 0.0) == motion.UNSTABLE
    assert np.isnan(motion.drag_free_frequency(limit / 4 * 1.001))


# Published characteristic values, Abramowitz and Stegun, table 20.1 (from memory, confirmed by independent computation)
CHARACTERISTIC = [(1.0, -0.45513860410741, -0.11024881699210), (5.0, -5.80004602085, -5.79008059864)]


@pytest.mark.parametrize(("q", "a0", "b1"), CHARACTERISTIC)
def test_band_of_oscillation_lies_between_mathieus_characteristic_values(q, a0, b1):
    # with drag a = -b^2: the particle relaxes below a0(q), is locked beyond b1(q)
    assert mathieu_a(0, q) == pytest.approx(a0, abs=1e-9)
    assert mathieu_b(1, q) == pytest.approx(b1, abs=1e-9)
    shift = 1e-6 * (b1 - a0)
    for a, expected in [
        (a0 - shift, motion.RELAXES),
        (a0 + shift, motion.OSCILLATES),
        (b1 - shift, motion.OSCILLATES),
        (b1 + shift, motion.LOCKED),
    ]:
        assert motion.regime(q / 4, np.sqrt(-a)) == expected


@pytest.mark.parametrize("b", [0.05, 0.2, 0.5, 1.0, 1.66, 2.5])
def test_edges_of_the_band_follow_mathieus_characteristic_curves(b):
    low = brentq(lambda q: mathieu_a(0, q) + b * b, 1e-3, 40.0, xtol=1e-14)
    high = brentq(lambda q: mathieu_b(1, q) + b * b, 0.5, 40.0, xtol=1e-14)
    step = 1e-8 * high
    q = np.array([low - step, low + step, high - step, high + step])
    codes = [motion.RELAXES, motion.OSCILLATES, motion.OSCILLATES, motion.LOCKED]
    np.testing.assert_array_equal(motion.regime(q / 4, b), codes)


@pytest.mark.parametrize(
    ("b", "low", "high"),
    # rounded windows of q in which a particle with drag oscillates, worked independently by time integration
    [(0.1, 0.14, 0.92), (0.2, 0.29, 0.94), (0.42, 0.61, 1.05), (0.66, 0.98, 1.26), (1.0, 1.56, 1.71)],
)
def test_window_of_oscillation_narrows_with_drag(b, low, high):
    q = np.arange(0.01, 3.0, 0.001)
    oscillating = q[motion.regime(q / 4, b) == motion.OSCILLATES]
    assert oscillating[0] == pytest.approx(low, abs=0.012)
    assert oscillating[-1] == pytest.approx(high, abs=0.012)


@pytest.mark.parametrize(
    ("k", "q"),
    # first onset of y'' + k y' - 2 q cos(2 tau) y = 0, time integration with bisection to 1e-9; the drag shifts a by
    # -k^2/4 (Hasegawa and Uehara, Appl. Phys. B 61 (1995) 159, from memory)
    [
        (0.05, 0.909282913),
        (0.1, 0.912985634),
        (0.2, 0.927693528),
        (0.5, 1.026568636),
        (1.0, 1.340517799),
        (1.5, 1.794346548),
        (2.0, 2.366822674),
        (3.0, 3.882810862),
    ],
)
def test_stability_limit_with_drag(k, q):
    assert 4.0 * motion.stability_limit(k / 2.0) == pytest.approx(q, abs=2e-9)


@pytest.mark.parametrize("b", [0.3, 1.0, 2.0, 3.0, 5.0])
def test_a_particle_is_lost_beyond_the_stability_limit_and_not_before(b):
    limit = motion.stability_limit(b)
    largest = [np.max(np.abs(np.linalg.eigvals(monodromy(limit * factor, b)))) for factor in (0.999, 1.001)]
    assert largest[0] < 1.0 < largest[1]


@pytest.mark.parametrize(("h", "b"), [(0.05, 0.01), (0.1, 0.1), (0.2, 0.25), (0.24, 0.3), (0.41, 1.0), (0.74, 1.66)])
def test_ring_down_agrees_with_time_integration(h, b):
    half_trace = 0.5 * np.trace(monodromy(h, b)) * np.exp(np.pi * b)
    nu, code = motion.ring_down(h, b)
    assert code == motion.OSCILLATES
    assert nu == pytest.approx(np.arccos(half_trace) / (2 * np.pi), abs=1e-9)


@pytest.mark.parametrize("b", [0.1, 0.42, 1.0, 2.0])
def test_regimes_follow_the_multipliers_of_time_integration(b):
    for h in np.linspace(0.05, 0.95, 7) * motion.stability_limit(b):
        values = np.linalg.eigvals(monodromy(h, b))
        if np.abs(values.imag).max() > 1e-6:
            expected = motion.OSCILLATES
        else:
            expected = motion.RELAXES if values.real[0] > 0 else motion.LOCKED
        if h < motion.stiffness_maximum(b):
            assert motion.regime(h, b) == expected


def continued_root(h, b, added_mass, history):
    """Zero of the truncated determinant, followed from steady drag (by time integration) in small steps."""
    half_trace = 0.5 * np.trace(monodromy(h, b)) * np.exp(np.pi * b)
    v = np.arccos(half_trace) / (2 * np.pi) + 0.5j * b
    for part in np.linspace(0, 1, 13)[1:]:
        case = (h, b, part * added_mass, part * history)
        for _ in range(30):
            slope = (determinant(v + 1e-6, *case) - determinant(v - 1e-6, *case)) / 2e-6
            step = determinant(v, *case) / slope
            v -= step
            if abs(step) < 1e-13:
                break
    return v


@pytest.mark.parametrize(
    ("h", "b", "added_mass", "history"),
    [
        (0.05, 0.02, 6e-4, 0.3),
        (0.10, 0.10, 6e-4, 0.4),
        (0.18, 0.20, 6e-4, 0.3),
        (0.22, 0.05, 6e-4, 0.5),
        (0.42, 1.00, 1e-3, 0.02),
        (0.20, 0.15, 5e-2, 1.0),
    ],
)
def test_ring_down_with_history_agrees_with_the_determinant(h, b, added_mass, history):
    root = continued_root(h, b, added_mass, history)
    nu, code = motion.ring_down(h, b, added_mass, history)
    assert code == motion.OSCILLATES
    assert nu == pytest.approx(root.real, abs=1e-10)
    assert abs(nu - motion.ring_down(h, b)[0]) > 1e-5  # the history force matters


@pytest.mark.parametrize(
    ("h", "b", "history"),
    # steady drag alone would lock the first two and lose the third; the fourth hardly swings
    [
        (0.2412726, 0.2002594, 1.531),
        (0.2498588, 0.3253995, 0.1103),
        (0.2271521, 0.0138120, 1.1719),
        (0.4902387, 1.1734868, 1.41631),
    ],
)
def test_frequency_follows_the_unsteady_determinant_where_steady_drag_misleads(h, b, history):
    root, code = secular_root(medium(h, b, 1e-3, history)[0])
    assert code[0] == motion.OSCILLATES
    near = determinant(root[0] + 1e-3, h, b, 1e-3, history)
    assert abs(determinant(root[0], h, b, 1e-3, history)) < 1e-9 * abs(near)


def test_locking_with_history_begins_where_the_determinant_says():
    # on Re v = 1/2 the determinant is real up to a factor: locked where it changes sign along the line
    b, history = 0.3, 0.4
    y = 1j * np.linspace(0.0, 0.6, 601)
    for h in np.linspace(0.15, 0.26, 45):
        m = medium(np.full(y.size, h), b, 1e-3, history)[0]
        wing = unsteady_drag(0.5 + y, b, 1e-3, history) + ladder(0.5 + y, 1, m, levels=30)
        code = motion.regime(h, b, 1e-3, history)
        if code in (motion.OSCILLATES, motion.LOCKED):
            assert (code == motion.LOCKED) == bool(np.any(np.abs(wing) < h))


def test_history_tends_to_steady_drag():
    h, b = np.meshgrid(np.linspace(0.02, 0.3, 40), np.linspace(0.01, 0.8, 30))
    nu, codes = motion.ring_down(h, b)
    nearly, nearly_codes = motion.ring_down(h, b, 1e-9, 1e-9)
    np.testing.assert_array_equal(nearly_codes, codes)
    np.testing.assert_allclose(nearly, nu, atol=1e-6)
    peak, peak_codes = motion.response_peak(h, b)
    nearly, nearly_codes = motion.response_peak(h, b, 1e-9, 1e-9)
    np.testing.assert_array_equal(nearly_codes, peak_codes)
    np.testing.assert_allclose(nearly, peak, atol=1e-6)


def test_added_mass_alone_is_a_heavier_particle():
    nu, _ = motion.ring_down(0.11, 0.11, 0.1)
    assert nu == pytest.approx(motion.ring_down(0.1, 0.1)[0], rel=1e-13)


def test_overdamped_particles_have_no_frequency_but_a_reason():
    # a 26 um spore of 510 kg/m3 at 50 Hz in room air: drag rate 947 /s, b = 3.0
    gamma = drag.drag_rate(26e-6, 510.0, 1.0, 1.825e-5, 66e-9)
    assert gamma == pytest.approx(947.0, rel=2e-3)
    nu, code = motion.ring_down(0.5, gamma / (100 * np.pi), 1e-3, 0.2)
    assert np.isnan(nu)
    assert code == motion.RELAXES
    assert "relaxes" in motion.REGIME_REASONS[int(code)]
    nu, code = motion.response_peak(0.5, gamma / (100 * np.pi), 1e-3, 0.2)
    assert np.isnan(nu)
    assert code == motion.NO_PEAK


def test_drive_beyond_the_greatest_stiffness_has_its_own_reason():
    b = np.array([2.5, 4.0, 8.0])
    top = motion.stiffness_maximum(b)
    np.testing.assert_array_equal(motion.regime(1.001 * top, b), motion.PAST_MAXIMUM)
    assert not np.any(motion.regime(0.999 * top, b) == motion.PAST_MAXIMUM)


@pytest.mark.parametrize(("b", "added_mass", "history"), [(0.3, 0, 0), (1.0, 1e-3, 0.3), (3.0, 0, 0), (6.0, 2e-3, 0.2)])
def test_stiffness_rises_up_to_its_maximum(b, added_mass, history):
    top = motion.stiffness_maximum(b, added_mass, history)
    stiffness = motion.stiffness(np.linspace(0.0, 1.0, 2000) * top, b, added_mass, history)
    assert np.all(np.diff(stiffness) > 0)
    found = minimize_scalar(
        lambda h: -motion.stiffness(h, b, added_mass, history), bounds=(0.9 * top, 1.1 * top), options={"xatol": 1e-10}
    )
    assert top == pytest.approx(found.x, rel=1e-6)


# ---- forced response


@pytest.mark.parametrize(("h", "b", "added_mass", "history"), UNSTEADY)
@pytest.mark.parametrize("nu", [0.0, 0.013, 0.2, 0.49, 0.8, 2.3])
def test_response_agrees_with_the_linear_system(nu, h, b, added_mass, history):
    n, c = harmonics(nu, h, b, added_mass, history)
    assert motion.response(nu, h, b, added_mass, history) == pytest.approx(c[n.size // 2], rel=1e-10)


PEAKS = [
    (0.03, 0.001, 0.0, 0.0),
    (0.10, 0.10, 0.0, 0.0),
    (0.20, 0.30, 0.0, 0.0),
    (0.10, 0.10, 6e-4, 0.4),
    (0.18, 0.20, 6e-4, 0.3),
    (0.35, 0.45, 1e-3, 0.3),
    (0.20, 0.15, 5e-2, 1.0),
]


@pytest.mark.parametrize("case", PEAKS)
def test_response_peak_is_where_the_linear_system_answers_most(case):
    step = min(1e-4, 0.02 * case[1])

    def slope(nu):
        # derivative of ln |response| to sixth order
        sizes = [np.log(abs(harmonics(nu + k * step, *case)[1][25])) for k in (-3, -2, -1, 1, 2, 3)]
        return np.dot([-1, 9, -45, 45, -9, 1], sizes) / (60 * step)

    nu, code = motion.response_peak(*case)
    assert code == motion.OSCILLATES
    width = 1e-3 * nu
    assert nu == pytest.approx(brentq(slope, nu - width, nu + width, xtol=1e-13), abs=1e-9)
    grid = np.linspace(1e-3, 0.499, 500)
    assert abs(motion.response(nu, *case)) >= np.max(np.abs(motion.response(grid, *case))) * (1 - 1e-12)


@pytest.mark.parametrize(
    ("quality", "peak", "ringing"), [(5.0, 0.990, 0.995), (2.0, 0.935, 0.968), (1.0, 0.707, 0.866)]
)
def test_weak_drive_is_the_damped_oscillator_of_the_textbooks(quality, peak, ringing):
    # sqrt(1 - 1/(2 Q^2)) and sqrt(1 - 1/(4 Q^2)), any textbook on mechanics
    h = 0.002
    natural = np.sqrt(motion.stiffness(h, 0.0))
    b = natural / quality
    assert motion.response_peak(h, b)[0] / natural == pytest.approx(peak, abs=6e-4)
    assert motion.ring_down(h, b)[0] / natural == pytest.approx(ringing, abs=6e-4)


def test_weak_drive_below_critical_quality_has_no_peak():
    # Q below 1 / sqrt 2, any textbook on mechanics
    h = 0.002
    natural = np.sqrt(motion.stiffness(h, 0.0))
    assert motion.response_peak(h, natural / 0.75)[1] == motion.OSCILLATES
    assert motion.response_peak(h, natural / 0.68)[1] == motion.NO_PEAK
    assert motion.ring_down(h, natural / 0.52)[1] == motion.OSCILLATES
    assert motion.ring_down(h, natural / 0.48)[1] == motion.RELAXES


# ---- fit for use in a fit


def smooth(function, x, step=1e-4):
    """Rounding noise of a function: its sixth difference over small steps, which a smooth one does not have."""
    values = function(x * (1 + step * np.arange(-3, 4)))
    return abs(np.dot([1, -6, 15, -20, 15, -6, 1], values)) / 32.0


@pytest.mark.parametrize("case", [(0.1, 0.05, 6e-4, 0.3), (0.18, 0.2, 6e-4, 0.3), (0.1, 0.05, 0.0, 0.0)])
def test_results_are_smooth_to_rounding(case):
    h, b, added_mass, history = case
    for function in (
        lambda x: motion.stiffness(x, b, added_mass, history),
        lambda x: motion.streak_factor(x, b, added_mass, history),
        lambda x: motion.ring_down(x, b, added_mass, history)[0],
        lambda x: motion.response_peak(x, b, added_mass, history)[0],
    ):
        assert smooth(function, h) < 1e-13


def test_one_element_does_not_depend_on_its_company():
    rng = np.random.default_rng(3)
    h, b = rng.uniform(0.02, 0.3, 80), rng.uniform(0.01, 0.6, 80)
    history = np.where(rng.random(80) < 0.5, 0.0, 0.3)
    for function in (motion.stiffness, motion.streak_factor):
        alone = [function(*one) for one in zip(h, b, history * 1e-3, history, strict=True)]
        np.testing.assert_allclose(function(h, b, history * 1e-3, history), alone, rtol=1e-14)
    for function in (motion.ring_down, motion.response_peak):
        alone = np.array([function(*one) for one in zip(h, b, history * 1e-3, history, strict=True)])
        nu, code = function(h, b, history * 1e-3, history)
        np.testing.assert_allclose(nu, alone[:, 0], rtol=1e-12)
        np.testing.assert_array_equal(code, alone[:, 1])


def test_arguments_broadcast_and_numbers_give_numbers():
    assert motion.stiffness(np.full((3, 1), 0.1), np.full(4, 0.2)).shape == (3, 4)
    assert motion.ring_down(np.full((3, 1), 0.1), np.full(4, 0.2))[1].shape == (3, 4)
    assert isinstance(motion.stiffness(0.1, 0.2), float)
    assert motion.stiffness([], []).shape == (0,)
    assert motion.ring_down([], [])[0].shape == (0,)
    assert motion.response_peak([], [], 0.1, 0.1)[0].shape == (0,)


def test_wild_arguments_give_no_warning_and_no_false_frequency():
    h = np.array([0.0, 1e-300, 1e-9, 3.0, 1e3, 1e6, np.inf, np.nan, 0.1, 0.1])
    b = np.array([0.0, 1e-300, 1e6, 1e-9, 1e9, 0.0, 1.0, 1.0, np.inf, np.nan])
    for history in (0.0, 0.3, 50.0):
        nu, codes = motion.ring_down(h, b, 1e-3, history)
        peak, peak_codes = motion.response_peak(h, b, 1e-3, history)
        assert np.all(np.isnan(nu[codes != motion.OSCILLATES]))
        assert np.all(np.isnan(peak[peak_codes != motion.OSCILLATES]))
        assert not np.any(codes[6:] == motion.OSCILLATES)
        motion.stiffness(h, b, 1e-3, history)
        motion.streak_factor(h, b, 1e-3, history)
    assert motion.stiffness(0.0, 0.3) == 0.0
    assert motion.micromotion_ratio(0.0, 0.3) == 0.0


# ---- finite Reynolds number


def test_micromotion_speed_is_that_of_time_integration():
    h, b, omega, displacement = 0.4, 1.0, 2 * np.pi * 60.0, 0.3e-3
    run = periodic_motion(h, b)
    mean = run.y[2, -1] / (2 * np.pi)
    speed = np.max(np.abs(run.sol(np.linspace(0, 2 * np.pi, 2001))[1])) / mean * displacement * omega
    assert motion.micromotion_speed(displacement, omega, h, b) == pytest.approx(speed, rel=0.15)  # one harmonic of all


@pytest.mark.parametrize("displacement", [0.1e-3, 0.3e-3, 1e-3])
def test_shift_by_finite_reynolds_number_agrees_with_time_integration(displacement):
    h, b, omega, d, rho_air, eta = 0.3, 1.0, 2 * np.pi * 60.0, 30e-6, 1.2, 1.81e-5
    force = displacement * motion.stiffness(h, b)

    def rate(t, y):
        excess = drag.schiller_naumann(drag.reynolds(y[1] * omega, d, rho_air, eta))
        return [y[1], force - b * excess * y[1] - 2 * h * np.cos(t) * y[0]]

    settled = solve_ivp(rate, (0, 60 * np.pi), [displacement, 0.0], method="DOP853", rtol=1e-10, atol=1e-14).y[:, -1]
    period = solve_ivp(rate, (0, 2 * np.pi), settled, method="DOP853", rtol=1e-10, atol=1e-14, dense_output=True)
    mean = np.mean(period.sol(np.arange(512) / 512 * 2 * np.pi)[0])
    expected = motion.reynolds_shift(displacement, h, b, omega, d, rho_air, eta)
    assert 0.0 < expected < 0.3
    assert mean / displacement - 1.0 == pytest.approx(expected, rel=0.25)
