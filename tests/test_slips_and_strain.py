"""Factor mistakes are recognised and named, never applied; strain says what does not fit."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from reduction.adjustment import adjust_together
from reduction.errors import Faults
from reduction.logs import read_logs
from reduction.preparation import prepare
from reduction.settings import load_campaign
from reduction.simulation import simulate_campaign
from reduction.simulationplan import Plan
from reduction.solution import fit_session
from reduction.strain import odd_one_out, strain_of


@pytest.fixture(scope="module")
def prepared(tmp_path_factory):
    """A session of four dense beads with balance, height and secular logs, ready to be fitted."""
    folder = tmp_path_factory.mktemp("strain") / "campaign"
    simulate_campaign(folder, plan=Plan(regimes=("room_air_dense",), sessions=1, particles=4), seed=2)
    faults = Faults()
    campaign = load_campaign(folder, faults=faults)
    found = prepare(campaign, campaign.sessions["s001"], read_logs(folder, "s001", faults=faults))
    assert not list(faults)
    return found


def changed(prepared, logs, column, factor):
    """The same session with one column of some logs wrong by a factor."""
    new = {
        name: replace(log, **{column: getattr(log, column) * factor}) if name in logs else log
        for name, log in prepared.logs.items()
    }
    return replace(prepared, logs=new)


def test_sound_readings_raise_no_suspicion(prepared):
    assert fit_session(prepared, "stated").slips == []


@pytest.mark.parametrize(
    ("factor", "words"),
    [
        (2**-0.5, "rms value logged as a peak value"),
        (2**0.5, "peak value logged as an rms value"),
        (2.0, "peak-to-peak value logged as a peak value"),
        (0.5, "peak value logged as a peak-to-peak value"),
        (8**0.5, "peak-to-peak value logged as an rms value"),
        (8**-0.5, "rms value logged as a peak-to-peak value"),
    ],
)
def test_wrong_convention_of_the_drive_voltage_is_named_and_not_applied(prepared, factor, words):
    sound = fit_session(prepared, "stated")
    reduced = fit_session(changed(prepared, ("height", "secular"), "amplitude", factor), "stated")
    named = {slip.particle: slip.text for slip in reduced.slips}
    assert len(named) >= 3, "most of four particles should give the slip away"
    assert all(words in text for text in named.values())
    for particle in named:
        assert "factor_suspected" in reduced.flags[particle]
        # the readings stand as logged: the value is not the one that the right convention gives
        u = np.sqrt(sound.alone.covariance[particle, 0, 0])
        assert abs(reduced.alone.theta[particle, 0] - sound.alone.theta[particle, 0]) > 3.0 * u


def test_angular_frequency_in_place_of_frequency_is_named_or_left_out(prepared):
    reduced = fit_session(changed(prepared, ("secular",), "observed", 2.0 * np.pi), "stated")
    named = {slip.particle: slip.text for slip in reduced.slips}
    for particle in range(4):
        assert "angular frequency" in named.get(particle, "") or "no_oscillation" in reduced.flags[particle]


def test_particle_that_strains_most_is_the_one_that_was_spoilt(prepared):
    log = prepared.logs["balance"]
    spoilt = replace(log, observed=np.where(log.particle == 2, log.observed * 1.02, log.observed))
    reduced = fit_session(replace(prepared, logs={**prepared.logs, "balance": spoilt}), "stated")
    adjusted = adjust_together([reduced.alone.model], [reduced.alone.theta])[0]
    odd = odd_one_out([adjusted], [prepared.names])
    strain = strain_of(adjusted, prepared.names, odd)
    assert odd is not None
    assert (odd.particle, odd.name) == (2, prepared.names[2])
    assert strain.p < 1e-3
    rest = np.array([0, 1, 3])
    without = adjust_together([reduced.alone.model.subset(rest)], [reduced.alone.theta[rest]])[0]
    u = np.sqrt(np.einsum("nii->ni", adjusted.covariance[rest]))
    moved = np.abs(without.theta - adjusted.theta[rest])[:, :2] / u[:, :2]
    assert odd.others_move == pytest.approx(moved.max(), rel=1e-2)
    assert any(prepared.names[2] in sentence for sentence in strain.sentences)


def test_pull_follows_an_input_moved_by_so_many_u(prepared):
    def strained(by):
        inputs = tuple(
            replace(one, quantity=replace(one.quantity, estimate=one.quantity.estimate + by * one.quantity.u))
            if one.role == "ac_gradient"
            else one
            for one in prepared.setting.inputs
        )
        reduced = fit_session(replace(prepared, setting=replace(prepared.setting, inputs=inputs)), "stated")
        adjusted = adjust_together([reduced.alone.model], [reduced.alone.theta])[0]
        return adjusted, strain_of(adjusted, prepared.names, None)

    (adjusted, before), (_, after) = strained(0.0), strained(4.0)
    roles = [adjusted.model.setting.inputs[one].role for one in adjusted.model.setting.uncertain]
    place = roles.index("ac_gradient")
    # xi = -(1 - C) shift to first order, over sqrt(1 - C): what the readings know of the input is 1 - C
    expected = -4.0 * np.sqrt(1.0 - adjusted.shared[0][place, place])
    assert after.pulls[place] - before.pulls[place] == pytest.approx(expected, rel=0.05)
    assert abs(expected) > 1.0
    assert after.odd is None
