"""The stated intervals hold the truth as often as they say, and are as narrow as the data allow.

Every campaign is simulated with a truth of its own (per trap, species, session and particle) and reduced as a user's.
Particles of one campaign share inputs: one of each stands for it where independence counts, and the errors of all of
them are held against the covariance in components.csv. `tests/studies/coverage.py` is the longer study.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
import pandas as pd
import pytest
from scipy import stats
from studies.coverage import COARSE, INTERVALS, SHAPES, Case, held, independent, pulls

from reduction.simulation import Habits
from reduction.simulationplan import REGIMES

P = 1e-4  # of a false alarm, were the seeds drawn anew
MAIN = ("charge_to_mass_C_per_kg", "charge_e")
CAMPAIGNS = 30
COMPARED = 4  # campaigns of each regime that are reduced a second time, each particle alone


@dataclass(frozen=True)
class Found:
    """Particles of many campaigns beside their truth, and of some of them as reduced alone."""

    rows: pd.DataFrame
    compared: tuple[pd.DataFrame, pd.DataFrame]  # the same particles, session and particle


@pytest.fixture(scope="module", params=REGIMES)
def found(request, tmp_path_factory):
    root, parts, alone = tmp_path_factory.mktemp(request.param), [], []
    case = Case("session", request.param, particles=3)
    for seed in range(CAMPAIGNS):
        ways = ("session", "particle") if seed < COMPARED else ("session",)
        first, *second = case.reduced(root / f"seed{seed}", seed, ways)
        parts.append(first)
        alone += second
    return Found(pd.concat(parts), (pd.concat(parts[:COMPARED]), pd.concat(alone)))


def gathered(root, case, count, first=0):
    return pd.concat([case.reduced(root / f"seed{seed}", seed)[0] for seed in range(first, first + count)])


def all_determined(rows):
    assert (rows["status"] == "ok").all()
    assert rows["u_charge_e"].notna().all()


def holds_often_enough(rows, column, coverage=0.95):
    """Assert that so few misses would be found with probability P at most; more than all can't be held."""
    one = independent(rows)
    count, hit = len(one), int(held(one, column).sum())
    assert hit >= stats.binom.ppf(P, count, coverage), f"{hit} of {count}"
    assert hit <= stats.binom.isf(P, count, coverage), f"{hit} of {count}"


def chi_square_like(square, count):
    assert stats.chi2.ppf(P / 2, count) < square < stats.chi2.isf(P / 2, count), f"{square:.1f} of {count}"


def unit_normal(values):
    values, count = np.asarray(values, float), len(values)
    assert abs(values.mean()) < stats.norm.isf(P / 2) / math.sqrt(count)
    chi_square_like(float(((values - values.mean()) ** 2).sum()), count - 1)


def errors_as_correlated_as_stated(rows):
    """Errors of charge-to-mass and charge of all particles, whitened with the covariance in components.csv."""
    chi_square_like(rows["joint"].sum(), rows["joint_dof"].sum())


def relative(rows, column):
    return (rows[f"u_{column}"] / rows[column].abs()).to_numpy(float)


def test_every_particle_is_determined(found):
    all_determined(found.rows)
    assert len(found.rows) == 3 * CAMPAIGNS


@pytest.mark.parametrize("column", INTERVALS)
def test_intervals_of_a_session_hold_the_truth_as_often_as_they_say(found, column):
    holds_often_enough(found.rows, column)


@pytest.mark.parametrize("column", [*MAIN, "drag_rate_per_s"])
def test_errors_are_as_large_as_their_uncertainties(found, column):
    unit_normal(pulls(independent(found.rows), column))


def test_errors_are_as_correlated_as_the_components_say(found):
    errors_as_correlated_as_stated(found.rows)


@pytest.mark.parametrize("column", MAIN)
def test_a_session_together_is_no_less_certain_than_each_particle_alone(found, column):
    together, alone = (relative(rows, column) for rows in found.compared)
    assert np.median(together) <= np.median(alone)
    # both are linearised, each at its own estimates, so single ones may differ by a little
    assert (together <= 1.02 * alone).all()


@pytest.mark.parametrize("column", MAIN)
def test_intervals_of_particles_alone_hold_as_often(found, column):
    holds_often_enough(found.compared[1], column)
    errors_as_correlated_as_stated(found.compared[1])


# How much eight beads tell of one another depends on what their readings leave open: with the frequencies read to
# 0.03 Hz, a two-hundredth of the width of the resonance, each bead knows most by itself, and charge narrows by a tenth.
@pytest.mark.parametrize(
    ("stated", "options", "narrower"),
    [(COARSE, {"lot": "unused"}, 0.2), (COARSE, {}, 0.15), ({}, {}, 0.07)],
    ids=["0.1 Hz, no lot", "0.1 Hz, lot", "0.03 Hz, lot"],
)
def test_eight_dense_beads_with_secular_frequencies_narrow_the_charge(tmp_path, stated, options, narrower):
    case = Case("session of 8", "room_air_dense", particles=8, options=options, stated=stated)
    parts = [case.reduced(tmp_path / f"seed{seed}", 300 + seed, ("session", "particle")) for seed in range(2)]
    together, alone = (pd.concat(one) for one in zip(*parts, strict=True))
    assert len(together) == 16
    all_determined(together)
    all_determined(alone)
    ratio = np.median(relative(together, "charge_e")) / np.median(relative(alone, "charge_e"))
    assert ratio <= 1.0 - narrower
    # the trap's constants, which beads of one trap can't pin, dominate charge-to-mass
    ratio = np.median(relative(together, MAIN[0])) / np.median(relative(alone, MAIN[0]))
    assert 0.9 < ratio <= 1.0


# --- uncertainty from the scatter of few readings

EXACT = {
    "dc_field_per_volt_per_m": "61.3", "ac_gradient_per_volt_per_m2": "1.310e4", "stray_field_V_per_m": "0",
    "density_kg_per_m3": "1050", "shape_factor": "1", "u_offset_V": 1e-6,
}  # fmt: skip


QUICK = {"monte_carlo_trials": "500"}  # no draw is used below: charge-to-mass takes its interval from Student's t


def t_is_needed(rows):
    """Intervals of charge-to-mass hold as often as they say, and with the normal factor they would not."""
    assert rows["effective_degrees_of_freedom"].median() < 2.5
    holds_often_enough(rows, MAIN[0])
    own, dof = pulls(rows, MAIN[0]).astype(float), rows["effective_degrees_of_freedom"].astype(float)
    assert stats.kstest(stats.t.cdf(own, dof), "uniform").pvalue > P
    assert int((own.abs() < stats.norm.ppf(0.975)).sum()) < stats.binom.ppf(P, len(rows), 0.95)


def test_intervals_from_the_scatter_of_few_readings_hold_by_students_t(tmp_path):
    habits = Habits(logs=("balance",), unstated=("balance_voltage_V",), balance_readings=3)
    stated = EXACT | {"reading": {**REGIMES["room_air_light"].reading, "balance_voltage_V": 10.0}}
    case = Case("few", "room_air_light", particles=1, options=QUICK, habits=habits, stated=stated)
    t_is_needed(gathered(tmp_path, case, 120))


@pytest.mark.parametrize("regime", ["room_air_light", "low_pressure"])
def test_intervals_with_all_reading_uncertainties_from_scatter_hold(tmp_path, regime):
    habits = Habits(unstated=("balance_voltage_V", "height_mm", "secular_frequency_Hz"), balance_readings=4)
    rows = gathered(tmp_path, Case("scatter", regime, particles=2, habits=habits), 20)
    all_determined(rows)
    assert rows["flags"].str.contains("u_from_scatter").all()
    for column in MAIN:
        holds_often_enough(rows, column)
        unit_normal(pulls(independent(rows), column))


# --- other adjustments, other shapes


def test_intervals_of_a_whole_campaign_adjusted_together_hold(tmp_path):
    case = Case("campaign", "room_air_light", sessions=3, particles=2, options={"adjust": "campaign"})
    rows = gathered(tmp_path, case, 12)
    all_determined(rows)
    assert len(rows) == 12 * 6
    for column in MAIN:
        holds_often_enough(rows, column)
        unit_normal(pulls(independent(rows), column))
    errors_as_correlated_as_stated(rows)


def test_intervals_hold_where_inputs_are_rectangular_arcsine_triangular_or_t(tmp_path):
    rows = gathered(tmp_path, Case("shapes", "room_air_light", particles=2, stated=SHAPES), 25)
    all_determined(rows)
    one = independent(rows)
    for column in INTERVALS:
        # bounded inputs have no tails, so normal intervals of what they dominate hold more than they say
        assert int(held(one, column).sum()) >= stats.binom.ppf(P, len(one), 0.95)
    for column in MAIN:
        square = float((pulls(one, column) ** 2).sum())
        assert square < stats.chi2.isf(P, len(one))


def test_intervals_hold_where_a_stated_t_of_few_degrees_of_freedom_dominates(tmp_path):
    stated = EXACT | {"dc_field_per_volt_per_m": "{value: 61.3, u: 0.9, dof: 2}"}
    case = Case("t", "room_air_light", particles=1, options=QUICK, habits=Habits(logs=("balance",)), stated=stated)
    t_is_needed(gathered(tmp_path, case, 120))


def test_inflating_mends_understated_uncertainties(tmp_path):
    inflate = Case("inflate", "room_air_dense", particles=1, options={"scatter": "inflate"}, habits=Habits(scatter=2.0))
    rows = gathered(tmp_path / "inflate", inflate, 25)
    assert rows["flags"].str.contains("inflated").all()
    for column in (*MAIN, "drag_rate_per_s"):
        holds_often_enough(rows, column)
        unit_normal(pulls(rows, column))
    # the same particles read as well as is stated: their drag is half as uncertain
    usual = gathered(tmp_path / "usual", Case("stated", "room_air_dense", particles=1), 5)
    ratio = relative(rows[:5], "drag_rate_per_s") / relative(usual, "drag_rate_per_s")
    assert 1.5 < np.median(ratio) < 2.5
