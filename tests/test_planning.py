"""How many sessions a difference takes."""

from __future__ import annotations

import math

import numpy as np
import pytest
from scipy import optimize, stats

from reduction.planning import Components, PlanningError, plan_sessions, power_of, simulated_cells


def welch_power(difference: float, sessions: int, sd: float) -> float:
    """Power of a two-sided t-test of two equal groups of session means, by the noncentral t."""
    freedom = 2 * sessions - 2
    shift = difference / (sd * math.sqrt(2 / sessions))
    edge = stats.t.ppf(0.975, freedom)
    return float(stats.nct.sf(edge, freedom, shift) + stats.nct.cdf(-edge, freedom, shift))


def test_power_is_that_of_students_test_on_session_means() -> None:
    # between sessions alone: session means are normal with equal spread; Welch costs a little beside the pooled test
    found = power_of(Components(1.0, 1e-6), 1.6, 8, 5, 0.05, 3000, seed=2)
    exact = welch_power(1.6, 8, 1.0)
    assert exact - 0.04 < found < exact + 3 * math.sqrt(exact * (1 - exact) / 3000)


def test_power_published_for_sixteen_in_each_group() -> None:
    # Cohen, Statistical Power Analysis (1988), Table 2.4.1 (from memory): effect 0.8, level 0.05, power 0.80: n = 26
    assert optimize.brentq(lambda n: welch_power(0.8, n, 1.0) - 0.8, 5, 60) == pytest.approx(25.5, abs=0.6)
    plan = plan_sessions(Components(1.0, 1e-6), 0.8, trials=1500, particles=2, seed=3)
    assert abs(plan.sessions - 26) <= 2
    assert plan.power[plan.sessions] >= 0.8


def test_a_larger_difference_takes_fewer_sessions_and_more_particles_help_little() -> None:
    components = Components(1.0, 1.0)
    small, large = (plan_sessions(components, d, trials=400).sessions for d in (1.5, 4.0))
    assert small > large >= 2
    many = plan_sessions(components, 1.5, trials=400, particles=200).sessions
    assert small - many <= 2  # the session is the unit


def test_an_error_of_one_group_alone_has_no_number_of_sessions() -> None:
    plan = plan_sessions(Components(0.1, 0.1, u_shared=1.0), 1.0, most=32, trials=200)
    assert plan.sessions == 0
    assert "No number of sessions up to 32" in plan.sentences()[0]


def test_no_difference_is_found_at_the_level() -> None:
    share = power_of(Components(1.0, 1.0), 0.0, 6, 10, 0.05, 3000, seed=1)
    assert 0.02 < share < 0.05 + 3 * math.sqrt(0.05 * 0.95 / 3000)


def test_simulated_cells_have_the_variance_of_their_components() -> None:
    rng = np.random.default_rng(1)
    components = Components(1.0, 2.0, 0.5, 0.7, 0.3)
    drawn = np.array([simulated_cells(rng, components, 5.0, 2, 4).mean for _ in range(20_000)])
    inside = 1.0 + (4.0 + 0.25) / 4 + 0.49
    wanted = np.diag([inside] * 4) + 0.09 * np.kron(np.eye(2), np.ones((2, 2)))
    assert np.cov(drawn.T) == pytest.approx(wanted, abs=0.1)
    assert drawn.mean(axis=0) == pytest.approx([5.0, 5.0, 0.0, 0.0], abs=0.05)


def test_same_seed_same_plan() -> None:
    plans = [plan_sessions(Components(1.0, 1.0), 2.0, trials=200, seed=5).record() for _ in range(2)]
    assert plans[0] == plans[1]
    assert plans[0]["power"]


@pytest.mark.parametrize(
    ("change", "said"),
    [
        ({"difference": 0.0}, "difference: found 0"),
        ({"power": 1.2}, "power: found 1.2"),
        ({"particles": 0}, "particles: found 0"),
        ({"most": 1}, "most sessions: found 1"),
        ({"trials": 5}, "trials: found 5"),
    ],
)
def test_senseless_wishes_are_refused(change: dict[str, float], said: str) -> None:
    wishes = {"difference": 1.0, **change}
    with pytest.raises(PlanningError, match=said):
        plan_sessions(Components(1.0, 1.0), **wishes)  # type: ignore[arg-type]


def test_negative_spread_is_refused() -> None:
    with pytest.raises(PlanningError, match="between_sessions: found -1"):
        Components(-1.0, 1.0)
