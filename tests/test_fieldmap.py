"""Trap constants as functions of dimensions; heights in a field that is not linear, against the motion integrated."""

import numpy as np
import pytest
from scipy.integrate import solve_ivp
from scipy.optimize import fsolve

from reduction import motion
from reduction.fieldmap import CORRECTION_U, FieldMap, height_shift

OMEGA, GRAVITY, GRADIENT = 2 * np.pi * 50.0, 9.81, 1.31e4


def periodic_mean(s, volts, gamma, lift, rest, drive, dc):
    """Mean height of the periodic motion in the field of the terms, integrated over one period (own Newton search)."""

    def relative(terms, z):
        return 1.0 + sum(one * z**power for power, one in enumerate(terms, 1))

    def motion_of(t, y):
        z, speed, _ = y
        driven = s * GRADIENT * volts * np.cos(OMEGA * t) * z * relative(drive, z)
        return [speed, -gamma * speed - driven + lift * relative(dc, z) + rest, z]

    period = 2 * np.pi / OMEGA

    def after(z, speed):
        return solve_ivp(motion_of, (0, period), [z, speed, 0], rtol=1e-10, atol=1e-14, method="DOP853").y[:, -1]

    def left_over(scaled):
        z, speed = scaled[0] * 1e-3, scaled[1] * 1e-1
        end = after(z, speed)
        return [(end[0] - z) * 1e3, (end[1] - speed) * 1e1]

    stiffness = float(np.squeeze(motion.stiffness(s * GRADIENT * volts / (2 * OMEGA**2), gamma / OMEGA, 0.0, 0.0)))
    linear = (lift + rest) / (OMEGA**2 * stiffness)
    z, speed = fsolve(left_over, [linear * 1e3, 0.0], xtol=1e-11)
    return after(z * 1e-3, speed * 1e-1)[2] / period, linear, lift / (OMEGA**2 * stiffness)


@pytest.mark.parametrize(
    ("s", "volts", "gamma", "within"),
    [(6.5e-4, 3200.0, 733.0, 0.02), (6.5e-4, 2400.0, 733.0, 0.02), (6e-4, 1200.0, 60.0, 0.04),
     (1.2e-3, 3000.0, 200.0, 0.2)],
    ids=["light bead", "weakly held", "dense bead", "close to the end of the stable region"],
)  # fmt: skip
@pytest.mark.parametrize("up", [0.3e-3, 0.75e-3])
@pytest.mark.parametrize(
    ("drive", "dc"), [((0.0, -9400.0), ()), ((), (0.0, 1400.0)), ((20.0, -9400.0), (-10.0, 1400.0))],
    ids=["drive", "dc", "both, and odd terms"],
)  # fmt: skip
def test_shift_is_that_of_the_motion_integrated_in_the_true_field(s, volts, gamma, within, up, drive, dc):
    h, b = s * GRADIENT * volts / (2 * OMEGA**2), gamma / OMEGA
    lift = GRAVITY + up * OMEGA**2 * float(np.squeeze(motion.stiffness(h, b, 0.0, 0.0)))
    mean, linear, alone = periodic_mean(s, volts, gamma, lift, -GRAVITY, drive, dc)
    shift = float(height_shift(np.array([linear]), np.array([alone]), drive, dc)[0])
    assert linear == pytest.approx(up, rel=1e-9)
    assert abs(shift) > 1e-7
    assert shift == pytest.approx(mean - linear, rel=within)
    assert within <= 2 * CORRECTION_U  # which the uncertainty of the correction allows for


def test_no_departure_no_shift():
    z = np.linspace(-1e-3, 1e-3, 5)
    assert (height_shift(z, np.full(5, 0.02), (), ()) == 0.0).all()
    np.testing.assert_allclose(height_shift(z, np.full(5, 0.02), (0.0, 0.0), (0.0,)), 0.0, atol=1e-18)


def test_a_gradient_of_the_dc_field_is_a_change_of_stiffness():
    # s D U (1 + g z) beside a linear drive: z (1 - W g) = z_lin, exactly.
    z, lift, g = np.array([2e-4]), np.array([0.015]), 12.0
    np.testing.assert_allclose(z + height_shift(z, lift, (), (g,)), z / (1.0 - lift * g), rtol=1e-6)


def test_a_field_that_takes_the_stiffness_away_gives_a_bounded_shift():
    shift = height_shift(np.array([3e-4]), np.array([0.02]), (), (60.0,))
    assert np.isfinite(shift).all()
    assert abs(shift[0]) < 2e-3


def test_constants_are_the_drawn_ones_at_the_dimensions_drawn_and_follow_their_slopes():
    made = FieldMap(("dimension:a", "dimension:b"), (5e-3, 0.0), 60.0, 1.3e4, (-100.0, 3.0), (-250.0, 0.0))
    at = {"dimension:a": np.array([[5e-3]]), "dimension:b": np.array([[0.0]]), "field_solution": np.ones((1, 1))}
    assert [float(one[0, 0]) for one in made.constants(at)] == [60.0, 1.3e4]
    moved = at | {"dimension:a": np.array([[5.1e-3]]), "field_solution": np.array([[1.001]])}
    dc, ac = (float(one[0, 0]) for one in made.constants(moved))
    assert dc == pytest.approx(60.0 * np.exp(-0.01) * 1.001, rel=1e-12)
    assert ac == pytest.approx(1.3e4 * np.exp(-0.025) * 1.001, rel=1e-12)
