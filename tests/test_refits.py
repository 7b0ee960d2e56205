"""Refits of simulated readings against first order, alone and together, and their verdicts."""

from __future__ import annotations

import math
from dataclasses import replace

import numpy as np
import pytest
from test_adjustment import solved
from test_montecarlo import campaign, smaller

from reduction.adjustment import adjust_alone, adjust_together
from reduction.budget import results_of
from reduction.errors import InputError, ReductionError
from reduction.montecarlo import known_results
from reduction.refits import Trials, refits_alone, refits_together
from reduction.validation import refit, report_text


@pytest.fixture(scope="module")
def light(tmp_path_factory):
    return solved(campaign(tmp_path_factory.mktemp("light")), "s001")


@pytest.mark.parametrize("regime", ["room_air_light", "room_air_dense", "low_pressure"])
def test_refitted_trials_spread_about_the_truth_as_the_first_order_says(tmp_path, regime):
    reduced = solved(campaign(tmp_path, regime), "s001")
    model = smaller(reduced.alone.model, reduced.alone.theta, 0.2)
    results = results_of(adjust_alone(model, reduced.alone.theta), alone=True)
    trials = Trials(model.setting, "s001", [reduced.prepared.names[0]], {}, 500, 1)
    logs = refits_alone(results.adjusted, 0, trials)
    known = known_results(results)[0]
    u = np.sqrt(results.variance[0])
    assert np.isfinite(logs[:, known]).all()
    assert logs.mean(axis=0)[known] / u[known] == pytest.approx(0.0, abs=4.5 / math.sqrt(500))
    assert logs.std(axis=0)[known] / u[known] == pytest.approx(1.0, abs=4.5 / math.sqrt(1000))


@pytest.mark.parametrize("source", ["dc_voltage", "shape_factor_spread"])
def test_refits_hold_the_noise_of_the_dc_voltage_and_the_spread_of_the_shape_factor(light, source):
    model = smaller(light.alone.model, light.alone.theta, 0.2)
    model = replace(model, setting=smaller(model, light.alone.theta, 0.2).setting)  # the inputs are not to dominate
    quiet = replace(model.logs["height"], u=0.25 * model.logs["height"].u)
    model = replace(model, logs={**model.logs, "height": quiet})
    first = results_of(adjust_alone(model, light.alone.theta), alone=True)
    if source == "dc_voltage":
        # small against the span of voltages at one drive: beyond, noise in the abscissa biases any least squares
        height = replace(quiet, u_voltage=np.full(len(quiet), 0.05))
        model = replace(model, logs={**model.logs, "height": height})
    else:
        model = replace(model, setting=replace(model.setting, shape_spread=np.full(model.particles, 0.03)))
    results = results_of(adjust_alone(model, light.alone.theta), alone=True)
    column = {"dc_voltage": 1, "shape_factor_spread": 3}[source]
    assert results.variance[0, column] > 2.0 * first.variance[0, column]
    logs = refits_alone(results.adjusted, 0, Trials(model.setting, "s001", [light.prepared.names[0]], {}, 500, 1))
    logs, u = logs[np.isfinite(logs[:, 0])], np.sqrt(results.variance[0])
    assert len(logs) > 400  # readings this exact leave some trials at the limit of rounding
    assert logs.mean(axis=0) / u == pytest.approx(0.0, abs=4.5 / math.sqrt(500))
    assert logs.std(axis=0) / u == pytest.approx(1.0, abs=4.5 / math.sqrt(1000))


def test_refits_do_not_depend_on_the_batches(light, monkeypatch):
    trials = Trials(light.alone.model.setting, "s001", [light.prepared.names[1]], {}, 60, 1)
    whole = refits_alone(light.alone, 1, trials)
    monkeypatch.setattr("reduction.refits.BATCH", 7)
    assert refits_alone(light.alone, 1, trials) == pytest.approx(whole, abs=1e-9)


def test_refit_of_a_session_of_one_particle_is_that_of_the_particle_alone(light):
    part = light.alone.model.subset(np.array([0]))
    single = adjust_alone(part, light.alone.theta[[0]])
    session = adjust_together([part], [light.alone.theta[[0]]])[0]
    trials = Trials(part.setting, "s001", [light.prepared.names[0]], {}, 20, 1)
    u = np.sqrt(results_of(single, alone=True).variance[0])
    difference = refits_together(session, 0, trials) - refits_alone(single, 0, trials)
    assert np.abs(difference / u).max() < 1e-2  # both settle to 1e-6 u, at adjusted values settled apart


def test_impossible_draws_are_left_out_and_the_others_kept(light):
    inputs = tuple(
        replace(one, quantity=replace(one.quantity, u=0.6 * one.quantity.estimate, shape="normal", dof=np.inf))
        if one.role.startswith("density:")
        else one
        for one in light.alone.model.setting.inputs
    )
    model = replace(light.alone.model, setting=replace(light.alone.model.setting, inputs=inputs))
    trials = Trials(model.setting, "s001", [light.prepared.names[0]], {}, 100, 1)
    adjusted = replace(light.alone, model=model)
    column = [one.role for one in (inputs[place] for place in model.setting.uncertain)].index(
        next(one.role for one in inputs if one.role.startswith("density:"))
    )
    impossible = 1.0 + 0.6 * (adjusted.xi[0, column] + trials.inputs[:, column]) <= 0.0
    logs = refits_alone(adjusted, 0, trials)
    assert 0 < impossible.sum() < 20
    assert np.isnan(logs[impossible, 3]).all()
    assert np.isfinite(logs[~impossible, 3]).mean() > 0.9


def test_refit_of_a_campaign_on_disk_reports_and_judges(tmp_path):
    folder = campaign(tmp_path)
    path = folder / "campaign.yaml"
    path.write_text(path.read_text() + "\nadjust: particle\n")
    found = refit(folder, "s001", "p01", 1000, 1)
    assert [one.result for one in found] == ["charge_to_mass", "drag_rate", "mass", "charge"]
    for one in found:
        assert one.trials + one.unsettled == 1000
        assert one.sd == pytest.approx(one.u, rel=0.15)
        assert one.comparison.verdict in ("passes", "undecided")
        assert one.refit_low < one.value < one.refit_high
    text = report_text(found)
    assert "Session s001, particle p01: 1000 sets of simulated readings, each fitted and adjusted alone." in text
    assert "mass [kg]: " in text
    assert refit(folder, "s001", "p01", 1000, 1) == found


def test_refit_of_what_is_not_there_says_so(tmp_path):
    folder = campaign(tmp_path)
    with pytest.raises(ReductionError, match="no session s01 to be reduced. Did you mean s001"):
        refit(folder, "s01", "p01", 500, 1)
    with pytest.raises(ReductionError, match="no particle p91"):
        refit(folder, "s001", "p91", 500, 1)
    with pytest.raises(ReductionError, match="5 trials: expected at least 200"):
        refit(folder, "s001", "p01", 5, 1)
    (folder / "sessions" / "s001" / "balance.csv").write_text("particle\n")
    with pytest.raises(InputError, match="balance.csv"):
        refit(folder, "s001", "p01", 500, 1)
