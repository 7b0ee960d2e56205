"""Examples of the GUM and of JCGM 101 through the package's own propagation, draws and comparison.

Sources: JCGM 100:2008 (GUM) annexes G and H; JCGM 101:2008 clause 9. Inputs and printed results from memory and checked
by recomputation; the exact ends are closed-form or numerical integrals, the tolerance of each Monte Carlo figure is a
few times what its number of trials leaves.
"""

from __future__ import annotations

import math

import numpy as np
import pytest
import uncertainties
from scipy import integrate, optimize, stats
from uncertainties import umath

from reduction.fits import least_squares
from reduction.propagation import combined, covariance, coverage_factor, welch_satterthwaite
from reduction.quantity import Quantity
from reduction.shapes import draws, ends_u, shortest_ends, symmetric_ends
from reduction.validation import compare, numerical_tolerance

TRIALS = 400_000


def drawn(name, estimate, u, shape="normal", dof=math.inf, trials=TRIALS):
    quantity = Quantity(estimate, u, shape, dof)
    return estimate + u * draws(quantity, seed=1, name=name, trials=trials)


def rectangular(name, low, high, trials=TRIALS):
    return drawn(name, (low + high) / 2.0, (high - low) / math.sqrt(12.0), "rectangular", trials=trials)


def slopes(function, point):
    point = np.asarray(point, dtype=float)
    found = []
    for index, value in enumerate(point):
        step = 1e-5 * (abs(value) or 1.0)
        move = np.zeros(len(point))
        move[index] = step
        found.append((function(*(point + move)) - function(*(point - move))) / (2.0 * step))
    return np.array(found)


# --- GUM annex H ------------------------------------------------------------------------------------------------------


END_GAUGE = np.array(  # nm: standard, difference (repeatability, two comparator effects), expansion and temperature
    [25.0, 5.8, 3.9, 6.7, 50_000_623 * 1e-6 / math.sqrt(3) * 0.1, 50_000_623 * 11.5e-6 * 0.05 / math.sqrt(3)]
)
END_GAUGE_DOF = np.array([18.0, 24.0, 5.0, 8.0, 50.0, 2.0])


def test_end_gauge_uncertainty_degrees_of_freedom_and_expanded_uncertainty():
    # H.1: u 32 nm, nu_eff 16, k 2.92, U99 93 nm; recomputed 31.664, 16.75, 92.48
    u = combined(END_GAUGE)
    assert u == pytest.approx(31.664, abs=1e-3)
    dof = welch_satterthwaite(END_GAUGE, END_GAUGE_DOF)
    assert dof == pytest.approx(16.75, abs=0.01)
    factor = coverage_factor(math.floor(dof), 0.99)
    assert factor == pytest.approx(2.92078, abs=1e-5)
    assert factor * u == pytest.approx(92.48, abs=0.01)


def test_end_gauge_second_order_terms_raise_u_to_34_nm():
    # H.1.7: the product of two inputs of estimate near 0 contributes l u(a) u(b)
    length = 50_000_623.0
    temperature = math.hypot(0.2, 0.5 / math.sqrt(2.0))  # K, mean of the bath and its cycling
    of_expansion = length * 1e-6 / math.sqrt(3.0) * temperature
    of_gradient = length * 2e-6 / math.sqrt(3.0) * 0.05 / math.sqrt(3.0)
    assert combined([*END_GAUGE, of_expansion, of_gradient]) == pytest.approx(33.81, abs=0.01)


VOLTAGE = np.array([5.007, 4.994, 5.005, 4.990, 4.999])
CURRENT = np.array([19.663, 19.639, 19.640, 19.685, 19.678]) * 1e-3
PHASE = np.array([1.0456, 1.0438, 1.0468, 1.0428, 1.0433])
IMPEDANCE = {
    "R": lambda v, i, phi: v / i * np.cos(phi),
    "X": lambda v, i, phi: v / i * np.sin(phi),
    "Z": lambda v, i, phi: v / i + 0.0 * phi,
}


def impedance_inputs():
    rows = np.stack([VOLTAGE, CURRENT, PHASE])
    return rows.mean(axis=1), np.cov(rows) / rows.shape[1]


@pytest.mark.parametrize(
    ("name", "value", "u", "u_uncorrelated"),
    [("R", 127.73217, 0.071071, 0.19454), ("X", 219.84651, 0.295582, 0.20091), ("Z", 254.25970, 0.236336, 0.20408)],
)
def test_impedance_with_correlated_readings(name, value, u, u_uncorrelated):
    # H.2: 127.732(71), 219.847(295), 254.260(236); wrong without the correlations, table H.5: 0.195, 0.201, 0.204
    means, spread = impedance_inputs()
    function = IMPEDANCE[name]
    assert function(*means) == pytest.approx(value, abs=1e-5)
    own = np.sqrt(np.diag(spread))
    components = slopes(function, means) * own
    assert combined(components, spread / np.outer(own, own)) == pytest.approx(u, abs=2e-6)
    wrong = combined(components)
    assert wrong == pytest.approx(u_uncorrelated, abs=1e-5)
    assert abs(wrong / u - 1.0) > 0.1


def test_correlations_of_the_impedance_by_products_of_components():
    # H.2, table H.4: r(R,X) -0.588, r(R,Z) -0.485, r(X,Z) 0.993
    means, spread = impedance_inputs()
    v, i, phi = uncertainties.correlated_values(means, spread)
    cos, sin = umath.cos(phi), umath.sin(phi)
    found = covariance([v / i * cos, v / i * sin, v / i])
    u = np.sqrt(np.diag(found))
    r = found / np.outer(u, u)
    assert (r[0, 1], r[0, 2], r[1, 2]) == pytest.approx((-0.58843, -0.48526, 0.99251), abs=2e-5)
    assert u == pytest.approx((0.071071, 0.295582, 0.236336), abs=2e-6)


TEMPERATURE = np.array([21.521, 22.012, 22.512, 23.003, 23.507, 23.999, 24.513, 25.002, 25.503, 26.010, 26.511])
CORRECTION = -np.array([0.171, 0.169, 0.166, 0.159, 0.164, 0.165, 0.156, 0.157, 0.159, 0.161, 0.160])


def test_thermometer_line_with_u_from_its_scatter():
    # H.3: y1 -0.1712(29), y2 0.00218(67), r -0.930, s 0.0035, b(30) -0.1494(41) with 9 degrees of freedom
    def residual(values):
        return CORRECTION - values[0] - values[1] * (TEMPERATURE - 20.0)

    fit = least_squares(residual, {"y1": -0.17, "y2": 0.002})
    scatter = fit.chi_square / fit.dof
    u = np.sqrt(np.diag(fit.covariance) * scatter)
    r = fit.covariance[0, 1] * scatter / u.prod()
    assert fit.dof == 9
    assert fit.values == pytest.approx((-0.17120379, 0.00218270), abs=1e-8)
    assert math.sqrt(scatter) == pytest.approx(0.00349756, abs=1e-8)
    assert u == pytest.approx((0.0028776, 0.00066794), abs=1e-7)
    assert r == pytest.approx(-0.9304296, abs=1e-6)
    assert fit.values @ (1.0, 10.0) == pytest.approx(-0.14937681, abs=1e-7)
    assert combined(u * (1.0, 10.0), [[1.0, r], [r, 1.0]]) == pytest.approx(0.00413860, abs=1e-7)


def test_effective_degrees_of_freedom_of_a_product():
    # G.4.1: relative u 0.25, 0.57, 0.82 % from 10, 5, 15 readings: 1.03 %, 19.0, t95 2.09; counting readings gives 21.7
    components = np.array([0.25, 0.57, 0.82])
    assert combined(components) == pytest.approx(1.0295, abs=1e-4)
    assert welch_satterthwaite(components, [9.0, 4.0, 14.0]) == pytest.approx(18.9987, abs=1e-3)
    assert coverage_factor(19.0, 0.95) == pytest.approx(2.093, abs=1e-3)
    assert welch_satterthwaite(components, [10.0, 5.0, 15.0]) == pytest.approx(21.7, abs=0.05)
    assert welch_satterthwaite(components, [math.inf] * 3) == math.inf
    assert coverage_factor(math.inf, 0.95) == pytest.approx(1.959964, abs=1e-6)


# --- JCGM 101 clause 9 ------------------------------------------------------------------------------------------------


def test_sum_of_four_normals():
    # 9.2.2: 0, 2.0, +-3.92; exact 2 * 1.959964
    total = sum(drawn(f"X{k}", 0.0, 1.0) for k in range(4))
    assert total.std(ddof=1) == pytest.approx(2.0, abs=0.01)
    assert symmetric_ends(total, 0.95) == pytest.approx((-3.919928, 3.919928), abs=0.04)


def test_sum_of_four_rectangulars():
    # 9.2.3: +-3.88 where first order gives +-3.92; exact 2 sqrt(3) (2 - (3/5)^(1/4))
    exact = 2.0 * math.sqrt(3.0) * (2.0 - 0.6**0.25)
    assert exact == pytest.approx(3.879406741, abs=1e-9)
    total = sum(rectangular(f"X{k}", -math.sqrt(3.0), math.sqrt(3.0)) for k in range(4))
    assert total.std(ddof=1) == pytest.approx(2.0, abs=0.01)
    low, high = symmetric_ends(total, 0.95)
    assert (low, high) == pytest.approx((-exact, exact), abs=0.025)
    assert compare((-3.919928, 3.919928), (-exact, exact), 2.0).verdict == "passes"  # delta 0.05
    assert compare((-3.919928, 3.919928), (-exact, exact), 2.0).tolerance == pytest.approx(0.05)


def test_sum_with_one_rectangular_that_dominates():
    # 9.2.4: u 10.1; first order +-19.9, Monte Carlo +-17.0; exact from the convolution of the trapezia
    parts = [(-math.sqrt(3.0), math.sqrt(3.0))] * 3 + [(-10.0 * math.sqrt(3.0), 10.0 * math.sqrt(3.0))]
    total = sum(rectangular(f"X{k}", *part) for k, part in enumerate(parts))
    wide = 10.0 * math.sqrt(3.0)

    def above(y):  # P(sum of three > y - the wide one), averaged over the wide one; sum of three as Irwin-Hall
        def tail(x):
            t = (y - x) / (2.0 * math.sqrt(3.0)) + 1.5
            t = np.clip(t, 0.0, 3.0)
            below = sum((-1) ** k * math.comb(3, k) * np.maximum(t - k, 0.0) ** 3 for k in range(4)) / 6.0
            return 1.0 - below

        edges = np.linspace(-wide, wide, 401)
        return sum(integrate.fixed_quad(tail, a, b, n=5)[0] for a, b in zip(edges, edges[1:], strict=False)) / (
            2.0 * wide
        )

    exact = optimize.brentq(lambda y: above(y) - 0.025, 10.0, 20.0)
    assert exact == pytest.approx(17.015814, abs=1e-4)
    assert total.std(ddof=1) == pytest.approx(math.sqrt(103.0), abs=0.04)
    assert symmetric_ends(total, 0.95) == pytest.approx((-exact, exact), abs=0.05)
    first_order = 1.959964 * math.sqrt(103.0)
    assert first_order == pytest.approx(19.8915, abs=1e-3)
    assert compare((-first_order, first_order), (-exact, exact), math.sqrt(103.0)).verdict == "fails"


def mass(weights, small, air, weight_density, reference_density):
    """Difference from 100 g of a weight calibrated in air, in mg (the model of 9.3)."""
    return (weights + small) * (1.0 + (air - 1.2) * (1.0 / weight_density - 1.0 / reference_density)) - 1e5


MASS_ESTIMATES = (100_000.0, 1.234, 1.2, 8000.0, 8000.0)
MASS_U = (0.050, 0.020, 0.2 / math.sqrt(12.0), 2000.0 / math.sqrt(12.0), 100.0 / math.sqrt(12.0))


def test_mass_calibration_fails_first_order_and_passes_higher_order():
    # 9.3: first order u 0.0539, [1.1285, 1.3395]; higher order 0.0750, [1.0870, 1.3810]; Monte Carlo 0.0754 and
    # [1.0834, 1.3825], in the shortest form
    sample = mass(
        drawn("m_R", *(MASS_ESTIMATES[0], MASS_U[0])),
        drawn("dm_R", *(MASS_ESTIMATES[1], MASS_U[1])),
        rectangular("air", 1.10, 1.30),
        rectangular("weight", 7000.0, 9000.0),
        rectangular("reference", 7950.0, 8050.0),
    )
    u = combined(slopes(mass, MASS_ESTIMATES) * MASS_U)
    assert u == pytest.approx(0.053852, abs=2e-6)
    assert sample.mean() == pytest.approx(1.2341, abs=0.0005)
    assert sample.std(ddof=1) == pytest.approx(0.0754797, abs=0.0004)
    monte_carlo = shortest_ends(sample, 0.95)
    assert monte_carlo == pytest.approx((1.0834, 1.3825), abs=0.003)  # the minimum is flat
    # higher order, GUM 5.1.2: the air's density times either of the other two, whose first-order slopes are 0
    step = np.array(MASS_U)

    def mixed(i, j):
        total = 0.0
        for a in (1.0, -1.0):
            for b in (1.0, -1.0):
                point = np.array(MASS_ESTIMATES)
                point[i] += a * 1e-2 * step[i]
                point[j] += b * 1e-2 * step[j]
                total += a * b * mass(*point)
        return total / (4.0 * 1e-4)

    higher = combined([u, mixed(2, 3), mixed(2, 4)])
    assert higher == pytest.approx(0.074963, abs=2e-5)
    first, second = ((1.234 - 1.959964 * one, 1.234 + 1.959964 * one) for one in (u, higher))
    assert first == pytest.approx((1.12845, 1.33955), abs=1e-4)
    assert second == pytest.approx((1.08708, 1.38092), abs=1e-4)
    assert numerical_tolerance(0.0754, digits=1) == pytest.approx(0.005)
    failing = compare(first, monte_carlo, 0.0754, digits=1)
    assert not failing.passes
    assert (failing.low_difference, failing.high_difference) == pytest.approx((0.045, -0.043), abs=0.003)
    assert compare(second, monte_carlo, 0.0754, digits=1).passes


@pytest.mark.parametrize(
    ("x1", "r", "mean", "sd", "low", "high"),
    [  # 1e-6; printed 50, 50, [0, 150] / 150, 112, [0, 367] / 2551, 502, [1590, 3543]; with r 0.9 67, 121, 505
        (0.000, 0.0, 50.0, 50.0, 0.0, 149.9),
        (0.010, 0.0, 150.0, 111.803, 0.0, 366.3),
        (0.050, 0.0, 2550.0, 502.494, 1594.0, 3549.0),
        (0.000, 0.9, 50.0, 67.268, 0.0, 185.1),
        (0.010, 0.9, 150.0, 120.520, 12.5, 396.7),
        (0.050, 0.9, 2550.0, 504.505, 1624.0, 3555.0),
    ],
)
def test_comparison_loss_near_zero(x1, r, mean, sd, low, high):
    # 9.4: X1^2 + X2^2, u 0.005 each, x2 = 0; first order gives u 0 at x1 = 0; mean and sd exact, intervals shortest
    first = drawn("X1", 0.0, 1.0)
    second = r * first + math.sqrt(1.0 - r**2) * drawn("X2", 0.0, 1.0)
    loss = 1e6 * ((x1 + 0.005 * first) ** 2 + (0.005 * second) ** 2)
    assert loss.mean() == pytest.approx(mean, abs=4.0 * sd / math.sqrt(TRIALS))
    assert loss.std(ddof=1) == pytest.approx(sd, rel=0.006)
    assert shortest_ends(loss, 0.95) == pytest.approx((low, high), abs=max(0.03 * sd, 1.5))
    if x1 == 0.0 and r == 0.0:
        assert shortest_ends(loss, 0.95)[1] == pytest.approx(-50.0 * math.log(0.05), abs=1.0)  # exponential


def trapezoid(name, half_width, inexact, trials=TRIALS):
    """Rectangular draws whose half width is itself known within `inexact` (curvilinear trapezoid, 6.4.3)."""
    first = rectangular(f"{name}/limit", 0.0, 1.0, trials)
    second = rectangular(f"{name}/place", 0.0, 1.0, trials)
    lower = -half_width - inexact + 2.0 * inexact * first
    return lower + (-lower - lower) * second


def test_gauge_block():
    # 9.5: 838 nm, first order 32 [745, 931], Monte Carlo 36 [745, 932] at 99 %; exact sd 35.82
    standard = drawn("L_s", 50_000_623.0, 25.0, dof=18)
    difference = drawn("D", 215.0, 6.0, dof=24) + drawn("d1", 0.0, 4.0, dof=5) + drawn("d2", 0.0, 7.0, dof=8)
    expansion = rectangular("alpha", 9.5e-6, 13.5e-6)
    temperature = drawn("theta", -0.1, 0.2) + drawn("cycle", 0.0, 0.5 / math.sqrt(2.0), "arcsine")
    between = trapezoid("dalpha", 1e-6, 0.1e-6)
    gradient = trapezoid("dtheta", 0.050, 0.025)
    length = standard + difference - standard * (between * (temperature) + expansion * gradient) - 5e7
    assert length.mean() == pytest.approx(838.0, abs=0.3)
    assert length.std(ddof=1) == pytest.approx(35.82, abs=0.25)
    assert shortest_ends(length, 0.99) == pytest.approx((744.7, 932.3), abs=2.5)


# --- the pieces -------------------------------------------------------------------------------------------------------


def test_numerical_tolerance_of_printed_uncertainties():
    # JCGM 101, 7.9.2, examples 1 and 2: 0.00035 g with two digits, 2 K with one
    assert numerical_tolerance(0.00035) == pytest.approx(0.000005)
    assert numerical_tolerance(2.0, digits=1) == pytest.approx(0.5)
    assert numerical_tolerance(0.0996) == pytest.approx(0.005)  # written 0.10
    assert numerical_tolerance(0.0994) == pytest.approx(0.0005)
    with pytest.raises(ValueError, match="expected 1 or 2"):
        numerical_tolerance(1.0, digits=3)


def test_verdict_stays_open_while_the_trials_could_turn_it():
    assert compare((0.0, 1.0), (0.03, 1.0), 1.0, u_ends=(0.001, 0.001)).verdict == "passes"
    assert compare((0.0, 1.0), (0.03, 1.0), 1.0, u_ends=(0.02, 0.001)).verdict == "undecided"
    assert compare((0.0, 1.0), (0.03, 1.2), 1.0, u_ends=(0.02, 0.001)).verdict == "fails"


def test_ends_of_small_samples_are_the_order_statistics_of_the_guide():
    # JCGM 101, 7.7.2: q = p M, r = (M - q) / 2; with M = 100, p = 0.95: r = 3 of (M - q + 1) / 2, q = 95
    sample = np.arange(1.0, 101.0)[::-1]
    assert symmetric_ends(sample, 0.95) == (3.0, 98.0)
    skewed = np.concatenate([np.arange(50.0), 1000.0 + 100.0 * np.arange(50.0)])
    assert shortest_ends(skewed, 0.50) == (0.0, 1000.0)
    assert np.isnan(symmetric_ends(np.zeros(0), 0.95)).all()
    assert np.isnan(shortest_ends(np.zeros(0), 0.95)).all()


def test_uncertainty_of_the_ends_is_that_of_a_quantile():
    # sqrt(p (1 - p) / M) / density at the quantile, for a normal sample; 20 samples say how well
    count, tail = 4000, 0.025
    expected = math.sqrt(tail * (1.0 - tail) / count) / stats.norm.pdf(stats.norm.ppf(tail))
    found = [ends_u(draws(Quantity(0.0, 1.0), seed=seed, name="x", trials=count), 0.95) for seed in range(40)]
    assert np.mean(found, axis=0) == pytest.approx((expected, expected), rel=0.12)


def test_covariance_by_components_is_that_of_the_library():
    a, b, c = (uncertainties.ufloat(value, u) for value, u in ((2e-4, 3e-6), (1.2e-12, 5e-14), (301.0, 0.4)))
    quantities = [a * b, a * b**2 / c, c * a, b / c]
    expected = np.array(uncertainties.covariance_matrix(quantities))
    u = np.sqrt(np.diag(expected))
    assert covariance(quantities) / np.outer(u, u) == pytest.approx(expected / np.outer(u, u), abs=1e-12)
