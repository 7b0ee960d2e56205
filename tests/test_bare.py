"""The reported numbers against a bare script that shares no line of code with the program.

`tests/benchmarks/bare.py` reads the same campaign by itself and takes its physics, its motion and its least squares
from the published formulas; both should find the same charge-to-mass ratio, drag rate and uncertainties.
"""

from __future__ import annotations

import importlib.util
import sys
from dataclasses import replace
from pathlib import Path
from types import ModuleType
from typing import Any

import numpy as np
import pytest

from reduction import motion
from reduction.errors import Faults
from reduction.logs import read_logs
from reduction.session import reduce_session
from reduction.settings import load_campaign
from reduction.simulation import PLANS, Habits, simulate_campaign


@pytest.fixture(scope="module")
def bare() -> ModuleType:
    path = Path(__file__).parent / "benchmarks" / "bare.py"
    spec = importlib.util.spec_from_file_location("bare", path)
    assert spec is not None
    assert spec.loader is not None
    module = importlib.util.module_from_spec(spec)
    sys.modules["bare"] = module
    spec.loader.exec_module(module)
    return module


def reported(folder: Path) -> dict[tuple[str, str], dict[str, Any]]:
    """Rows of particles.csv of a campaign, by session and particle."""
    faults = Faults()
    campaign = load_campaign(folder, faults=faults)
    rows = {}
    for session in campaign.session_ids:
        record = reduce_session(campaign, session, read_logs(folder, session, faults=faults))
        for row in record.tables["particles"].to_dict("records"):
            rows[session, str(row["particle"])] = row
    assert not list(faults)
    return rows


@pytest.mark.parametrize(
    ("regime", "habits", "drag"),
    [
        ("room_air_light", Habits(), "unsteady"),
        ("room_air_light", Habits(height_reading="streak_middle", u_in_logs=True), "steady"),
        ("room_air_dense", Habits(height_reading="streak_middle", own_diameters=True), "unsteady"),
        ("low_pressure", Habits(), "unsteady"),
    ],
    ids=["light beads", "light beads, streak middle, steady drag", "dense beads, own diameters", "low pressure"],
)
def test_the_program_agrees_with_an_independent_reduction(
    tmp_path: Path, bare: ModuleType, regime: str, habits: Habits, drag: str
) -> None:
    plan = replace(PLANS[regime], sessions=1, particles=3, habits=habits, drag=drag, options={"adjust": "particle"})
    folder = tmp_path / "campaign"
    simulate_campaign(folder, plan=plan, seed=41)
    rows = reported(folder)
    found = {(session, particle): values for session, particle, *values in bare.reduce(folder)}
    assert found.keys() == rows.keys()
    assert len(found) == 3
    for key, (s, u_s, gamma, u_gamma, *_) in found.items():
        row = rows[key]
        assert row["status"] == "ok"
        assert abs(row["charge_to_mass_C_per_kg"] - s) < 0.05 * u_s
        assert abs(row["drag_rate_per_s"] - gamma) < 0.05 * u_gamma
        assert row["u_charge_to_mass_C_per_kg"] == pytest.approx(u_s, rel=0.01)
        assert row["u_drag_rate_per_s"] == pytest.approx(u_gamma, rel=0.01)


def test_both_solve_the_same_motion(bare: ModuleType) -> None:
    """Two ways to one answer: Newton from a product of matrix exponentials here, whatever `motion` does there."""
    h, b, added, history = np.array([0.12, 0.16, 0.2, 0.22]), np.array([0.05, 0.1, 0.2, 0.25]), 2.4e-4, 0.14
    nu, _ = bare.ring_down(h, b, added, history)
    np.testing.assert_allclose(nu, motion.ring_down(h, b, added, history)[0], rtol=1e-9)
    h, b, added, history = np.array([0.1, 0.4, 0.9, 1.6]), np.array([0.3, 1.2, 2.4, 3.5]), 5.7e-4, 0.05
    mean, streak, ratio = bare.displacement(h, b, added, history, streak=True)
    np.testing.assert_allclose(1 / mean, motion.stiffness(h, b, added, history), rtol=1e-10)
    np.testing.assert_allclose(streak, motion.streak_factor(h, b, added, history), rtol=1e-9)
    np.testing.assert_allclose(ratio, np.abs(motion.micromotion_ratio(h, b, added, history)), rtol=1e-10)
