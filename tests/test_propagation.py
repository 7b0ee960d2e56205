"""The budget of our own measurement equations against independent libraries for uncertain numbers."""

from __future__ import annotations

import pytest
import small_campaign
import uncertainties
from test_adjustment import solved
from test_montecarlo import alone, campaign, together

from reduction import air, budget
from reduction.budget import RESULTS
from reduction.preparation import prepare
from reduction.solution import fit_session

CHARGE = RESULTS.index("charge")


def balance_only(place):
    """One particle, one balance reading, every input of its equation uncertain."""
    read, logs, faults = small_campaign.check(
        place,
        {
            "sessions/s001/secular.csv": None,
            "sessions/s001/height.csv": None,
            "sessions/s001/balance.csv": "particle,drive_voltage_peak_V,drive_frequency_Hz,balance_voltage_V,"
            "u_balance_voltage_V\np01,400,50,-120.5,0.4\n",
        },
    )
    assert not list(faults)
    return fit_session(prepare(read, read.sessions["s001"], logs["s001"]), "stated")


def test_budget_of_the_balance_equals_that_of_another_library(tmp_path):
    GTC = pytest.importorskip("GTC")
    reduced = balance_only(tmp_path)
    results = alone(reduced)
    value = {one.role: one.quantity for one in reduced.alone.model.setting.inputs}
    names = {one.role: one.name for one in reduced.alone.model.setting.inputs}
    x = {role: GTC.ureal(one.estimate, one.u, label=names[role]) for role, one in value.items()}
    reading = GTC.ureal(-120.5, 0.4, label="reading")
    species = reduced.prepared.species[0]
    # density of the air by its own slopes in temperature, pressure and humidity
    point = [value[role].estimate for role in ("temperature", "pressure", "humidity")]
    rho_air = float(air.density(*point)) * x["air_density_formula"]
    for index, role in enumerate(("temperature", "pressure", "humidity")):
        step = 1e-6 * point[index]
        up, down = list(point), list(point)
        up[index], down[index] = point[index] + step, point[index] - step
        slope = float(air.density(*up) - air.density(*down)) / (2.0 * step)
        rho_air = rho_air + slope * (x[role] - point[index])
    weight = x["gravity"] * (1.0 - rho_air / x[f"density:{species}"])
    true = reduced.alone.model.setting.polarity * (x["gain_dc_voltage"] * reading + x["offset_dc_voltage"])
    s = weight / (x["dc_field"] * true + x["stray_field"])
    assert results.value[0, 0] == pytest.approx(GTC.value(s), rel=1e-9)
    assert results.u[0, 0] == pytest.approx(GTC.uncertainty(s), rel=1e-9)
    compared = 0
    for place, one in enumerate(results.adjusted.group):
        expected = abs(GTC.component(s, x[one.role])) / GTC.uncertainty(s)
        found = abs(results.by_input[0, 0, place] * results.value[0, 0]) / results.u[0, 0]
        assert found == pytest.approx(expected, abs=1e-9), one.name
        compared += expected > 1e-6
    assert compared >= 6


def test_charge_carried_by_the_uncertainties_library_has_the_covariance_of_the_components(tmp_path):
    light = solved(campaign(tmp_path), "s001")
    results, names = together(light), light.prepared.names
    variables: dict[str, uncertainties.UFloat] = {}
    quantity = {}
    for row in budget.component_rows(results, "s001", list(names)):
        variable = variables.setdefault(str(row["input"]), uncertainties.ufloat(0.0, 1.0))
        key = (row["particle"], row["result"])
        place = names.index(row["particle"]), RESULTS.index(str(row["result"]))
        quantity[key] = quantity.get(key, results.value[place]) + row["component"] * variable
    for place, name in enumerate(names):
        charge = quantity[name, "charge_to_mass"] * quantity[name, "mass"]
        assert charge.std_dev == pytest.approx(results.u[place, CHARGE], rel=1e-6)
        difference = charge - quantity[name, "charge"]
        assert difference.std_dev < 1e-3 * results.u[place, CHARGE]
