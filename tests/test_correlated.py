"""Results read back with their correlations."""

from __future__ import annotations

import numpy as np
import pandas as pd
import pytest
from uncertainties import covariance_matrix, ufloat

from reduction.correlated import read_results
from reduction.errors import Faults
from reduction.logs import read_logs
from reduction.propagation import covariance
from reduction.session import reduce_session
from reduction.settings import load_campaign
from reduction.simulation import simulate_campaign
from reduction.simulationplan import Plan
from reduction.tables import COLUMNS, write_table


@pytest.fixture(scope="module")
def results(tmp_path_factory):
    """Tables of two sessions that share a trap and a species, as the results folder holds them."""
    folder = tmp_path_factory.mktemp("correlated")
    simulate_campaign(folder / "campaign", plan=Plan(sessions=2, particles=2), seed=11)
    faults = Faults()
    campaign = load_campaign(folder / "campaign", faults=faults)
    tables = {"particles": [], "components": []}
    for session in campaign.session_ids:
        record = reduce_session(campaign, session, read_logs(campaign.folder, session, faults=faults))
        for name, found in tables.items():
            found.append(record.tables[name])
    assert not list(faults)
    for name, found in tables.items():
        write_table(folder / f"{name}.csv", COLUMNS[name], pd.concat(found))
    return folder


def test_uncertainty_read_back_is_the_one_reported(results):
    rows = pd.read_csv(results / "particles.csv")
    numbers = read_results(results)
    assert len(numbers) == 4 * 6
    for row in rows.to_dict("records"):
        charge = numbers[row["session"], row["particle"], "charge"]
        assert charge.n == pytest.approx(row["charge_C"], rel=1e-12)
        assert charge.s == pytest.approx(row["u_charge_C"], rel=1e-6)


def test_recipe_of_the_readme_gives_the_same_covariance(results):
    rows = pd.read_csv(results / "components.csv", dtype={"session": str, "particle": str})
    table = rows.pivot_table(
        index=["session", "particle", "result"], columns="input", values="component", fill_value=0.0
    )
    expected = table @ table.T
    numbers = read_results(results)
    found = covariance([numbers[key] for key in table.index])
    u = np.sqrt(np.diag(expected))
    assert found / np.outer(u, u) == pytest.approx(expected.to_numpy() / np.outer(u, u), abs=1e-9)


def test_what_two_sessions_share_cancels_in_a_ratio(results):
    numbers = read_results(results)
    a, b = numbers["s001", "p01", "charge_to_mass"], numbers["s002", "p01", "charge_to_mass"]
    apart = np.hypot(a.s / a.n, b.s / b.n)
    ratio = a / b
    assert abs(ratio.s / ratio.n) < 0.8 * apart  # the trap's constants are the larger part of both


def test_covariance_equals_that_of_the_library_on_a_small_case():
    x, y = ufloat(1e-14, 3e-16), ufloat(250.0, 0.4)
    numbers = [x * y, x / y, y**2]
    expected = np.array(covariance_matrix(numbers))
    scale = np.sqrt(np.outer(np.diag(expected), np.diag(expected)))
    assert covariance(numbers) / scale == pytest.approx(expected / scale, abs=1e-12)
