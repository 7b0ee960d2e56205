"""Random effects against published interlaboratory and trial data, and against a full covariance worked out by hand."""

from __future__ import annotations

import math

import numpy as np
import pytest

from reduction.randomeffects import (
    Residuals,
    consensus,
    dersimonian_laird,
    fixed,
    paule_mandel,
    residuals,
    restricted_likelihood,
)

# Kacker, Metrologia 41 (2004) 132, nine laboratories; data and values of the R package metafor as statsmodels 0.15
# carries them in its tests.
KACKER = np.array([61.00, 61.40, 62.21, 62.30, 62.34, 62.60, 62.70, 62.84, 65.90])
KACKER_U2 = np.array([0.2025, 1.21, 0.09, 0.2025, 0.3844, 0.5625, 0.0676, 0.0225, 1.8225])

# BCG vaccine against tuberculosis, 13 trials (metafor dat.bcg): cases and not, vaccinated; cases and not, control.
BCG = """4,119,11,128; 6,300,29,274; 3,228,11,209; 62,13536,248,12619; 33,5036,47,5761; 180,1361,372,1079;
8,2537,10,619; 505,87886,499,87892; 29,7470,45,7232; 17,1699,65,1600; 186,50448,141,27197; 5,2493,3,2338;
27,16886,29,17825"""

# DerSimonian and Kacker, Contemp. Clin. Trials 28 (2007) 105, Tables 3 and 4: CLASP and five more trials of aspirin.
CLASP = np.array(
    [[156, 303, 565, 1570, 103, 4659], [74, 303, 477, 1565, 105, 4650], [5, 5, 12, 69, 9, 313], [8, 17, 9, 94, 11, 352]]
)


def bcg() -> tuple[np.ndarray, np.ndarray]:
    a, b, c, d = np.array([[float(x) for x in row.split(",")] for row in BCG.split(";")]).T
    return np.log(a / (a + b) / (c / (c + d))), 1 / a - 1 / (a + b) + 1 / c - 1 / (c + d)


def clasp() -> tuple[np.ndarray, np.ndarray]:
    n1, n2, a, c = CLASP.astype(float)
    return np.log(a * (n2 - c) / (c * (n1 - a))), 1 / a + 1 / (n1 - a) + 1 / c + 1 / (n2 - c)


@pytest.mark.parametrize(
    ("estimator", "mean", "u", "tau_squared"),
    [
        (fixed, 62.5833970939982, 0.107845705498231, 0.0),
        (dersimonian_laird, 62.3901386044504, 0.245749668040304, 0.288049246973751),
        (paule_mandel, 62.4076199113286, 0.338030602684471, 0.705395309224248),
    ],
)
def test_kacker_interlaboratory_means(estimator, mean, u, tau_squared) -> None:  # type: ignore[no-untyped-def]
    found = consensus(KACKER, np.diag(KACKER_U2), estimator)
    assert found.mean == pytest.approx(mean, rel=1e-10)
    assert found.u == pytest.approx(u, rel=1e-8)
    assert found.tau_squared == pytest.approx(tau_squared, rel=1e-8, abs=1e-15)
    assert found.q == pytest.approx(24.801897741835, rel=1e-11)


def test_kacker_published_tau_and_restricted_likelihood() -> None:
    assert math.sqrt(consensus(KACKER, np.diag(KACKER_U2)).tau_squared) == pytest.approx(0.8399, abs=5e-5)
    # Not published: root of the textbook score, sum w^2 (y - mu)^2 = sum w - sum w^2 / sum w, in mpmath with 40 digits.
    found = consensus(KACKER, np.diag(KACKER_U2), restricted_likelihood)
    assert found.tau_squared == pytest.approx(0.29434286686266, rel=1e-10)
    assert found.mean == pytest.approx(62.39006527381100, rel=1e-12)
    assert found.u == pytest.approx(0.24750809124864, rel=1e-10)
    assert found.birge_ratio == pytest.approx(1.760749, abs=5e-7)


@pytest.mark.parametrize(
    ("estimator", "mean", "u", "tau_squared"),
    [
        (fixed, -0.4303, None, 0.0),
        (dersimonian_laird, -0.7141, None, 0.3088),
        (restricted_likelihood, -0.7145, 0.1798, 0.3132),  # printed by metafor's own tests
    ],
)
def test_vaccine_trials_to_the_printed_digits(estimator, mean, u, tau_squared) -> None:  # type: ignore[no-untyped-def]
    y, v = bcg()
    found = consensus(y, np.diag(v), estimator)
    assert found.mean == pytest.approx(mean, abs=5.1e-5)
    assert found.tau_squared == pytest.approx(tau_squared, abs=5.1e-5)
    assert u is None or found.u == pytest.approx(u, abs=5.1e-5)
    assert found.q == pytest.approx(152.2330, abs=5.1e-5)


@pytest.mark.parametrize(
    ("estimator", "mean", "u", "tau_squared"),
    [  # computed independently to these digits, the last in mpmath; the printed ones above are their first four
        (dersimonian_laird, -0.71411722, 0.17874209, 0.3087602629),
        (paule_mandel, -0.71496815, 0.18089219, 0.3180684522),
        (restricted_likelihood, -0.71453234, 0.17978152, 0.3132432581),
    ],
)
def test_vaccine_trials_to_eight_digits(estimator, mean, u, tau_squared) -> None:  # type: ignore[no-untyped-def]
    y, v = bcg()
    found = consensus(y, np.diag(v), estimator)
    assert found.mean == pytest.approx(mean, abs=6e-9)
    assert found.u == pytest.approx(u, abs=6e-9)
    assert found.tau_squared == pytest.approx(tau_squared, abs=6e-11)


@pytest.mark.parametrize(
    ("estimator", "tau", "mean", "u"),
    [
        (paule_mandel, 0.3681, -0.3811, 0.2060),
        (dersimonian_laird, 0.2323, -0.3240, 0.1540),
        (restricted_likelihood, 0.1843, -0.2980, 0.1343),
    ],
)
def test_aspirin_trials_as_published(estimator, tau, mean, u) -> None:  # type: ignore[no-untyped-def]
    y, v = clasp()
    found = consensus(y, np.diag(v), estimator)
    assert math.sqrt(found.tau_squared) == pytest.approx(tau, abs=5.1e-5)
    assert found.mean == pytest.approx(mean, abs=5.1e-5)
    assert found.u == pytest.approx(u, abs=5.1e-5)


def test_heat_of_vaporisation_of_cadmium() -> None:
    # Paule and Mandel, J. Res. NBS 87 (1982) 377, data as the metRology package gives them; the published figures were
    # not at hand: these were computed independently from the data.
    x = np.array([27.044, 26.022, 26.340, 26.787, 26.796])
    found = consensus(x, np.diag([0.003, 0.076, 0.464, 0.003, 0.014]))
    assert found.tau_squared == pytest.approx(0.1052193882, abs=6e-11)
    assert found.mean == pytest.approx(26.71212875, abs=6e-9)
    assert found.u == pytest.approx(0.17113696, abs=6e-9)


def test_two_laboratories() -> None:
    x, s, n = np.array([201.533, 216.55]), np.array([0.154, 0.25]), np.array([6, 2])  # metRology's example
    found = consensus(x, np.diag(s**2 / n))
    assert found.mean == pytest.approx(209.04059, abs=5e-6)
    assert math.sqrt(found.tau_squared) == pytest.approx(10.617794, abs=5e-7)


def test_key_comparison_of_a_chlorinated_biphenyl() -> None:
    # CCQM-K25 PCB105, data as the metRology package gives them; values computed independently.
    y = np.array([10.21, 10.9, 10.94, 10.58, 10.81, 9.62, 10.8])
    u = np.array([0.381, 0.25, 0.13, 0.41, 0.445, 0.196, 0.093])
    found = consensus(y, np.diag(u**2), dersimonian_laird)
    assert found.tau_squared == pytest.approx(0.1978366, abs=5e-8)
    assert found.mean == pytest.approx(10.5570833, abs=5e-8)
    assert found.u == pytest.approx(0.1970732, abs=5e-8)
    assert found.birge_ratio == pytest.approx(2.494559, abs=5e-7)


def test_an_error_common_to_all_does_not_touch_tau_and_adds_to_u() -> None:
    # Exact: 1'V^-1 y weights are those of the diagonal part (Sherman and Morrison), and u^2 grows by the common part.
    common = 0.7**2
    for estimator in (paule_mandel, dersimonian_laird, restricted_likelihood):
        plain = consensus(KACKER, np.diag(KACKER_U2), estimator)
        shared = consensus(KACKER, np.diag(KACKER_U2) + common, estimator)
        assert shared.tau_squared == pytest.approx(plain.tau_squared, rel=1e-8)
        assert shared.mean == pytest.approx(plain.mean, rel=1e-12)
        assert shared.u == pytest.approx(math.sqrt(plain.u**2 + common), rel=1e-10)


def test_restricted_likelihood_with_a_full_covariance_is_that_of_its_definition() -> None:
    rng = np.random.default_rng(5)
    root = rng.normal(size=(12, 3))
    v = root @ root.T * 0.2 + np.diag(rng.uniform(0.2, 0.6, 12))
    design = np.kron(np.eye(2), np.ones((6, 1)))
    y = rng.normal(0, 1.2, 12) + design @ [3.0, -1.0]

    def minus_twice(tau_squared: float) -> float:  # Patterson and Thompson's form, without contrasts
        total = v + tau_squared * np.eye(12)
        inverse = np.linalg.inv(total)
        inner = design.T @ inverse @ design
        r = y - design @ np.linalg.solve(inner, design.T @ inverse @ y)
        return float(np.linalg.slogdet(total)[1] + np.linalg.slogdet(inner)[1] + r @ inverse @ r)

    best = restricted_likelihood(residuals(y, v, design))
    assert best > 0.0
    step = 1e-3 * best
    assert minus_twice(best) < min(minus_twice(best - step), minus_twice(best + step))
    grid = np.linspace(0.0, 20.0, 4001)
    assert best == pytest.approx(grid[np.argmin([minus_twice(t) for t in grid])], abs=0.005)


def test_without_excess_all_estimators_give_the_weighted_mean() -> None:
    y, v = np.array([1.0, 1.01, 0.99]), np.array([0.04, 0.09, 0.01])
    for estimator in (paule_mandel, dersimonian_laird, restricted_likelihood):
        found = consensus(y, np.diag(v), estimator)
        assert found.tau_squared == 0.0
        assert found.mean == pytest.approx(float((y / v).sum() / (1 / v).sum()))


def test_data_without_uncertainty_vary_by_their_own_scatter() -> None:
    found = residuals(np.array([1.0, 2.0, 4.0]), np.zeros((3, 3)))
    assert paule_mandel(found) == pytest.approx(7 / 3)
    assert restricted_likelihood(found) == pytest.approx(7 / 3)
    assert paule_mandel(Residuals(np.zeros(2), np.zeros(2))) == 0.0
