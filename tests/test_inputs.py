"""Names and scopes of the inputs that readings share."""

from __future__ import annotations

import math

import pytest
from small_campaign import FILES, SESSION, changed, check

from reduction.inputs import shared_inputs, species_of

SECOND = {"sessions/s002/" + name.rpartition("/")[2]: FILES[name] for name in FILES if name.startswith("sessions/s001")}


def inputs_of(root, files=None, session="s001"):
    campaign, _, faults = check(root, files)
    assert not list(faults), "\n".join(map(str, faults))
    one = campaign.sessions[session]
    return {item.name: item for item in shared_inputs(campaign, one, species_of(campaign, one, [one.species]))}


def test_a_name_says_what_shares_an_input(tmp_path):
    found = inputs_of(tmp_path)
    assert {name.rpartition("/")[0] for name in found} == {
        "trap/ring-a",
        "species/bead",
        "session/s001",
        "instrument/supply-2",
        "instrument/camera-1",
        "campaign/",
    }
    for name in (
        "trap/ring-a/dc_field_per_volt_per_m",
        "trap/ring-a/ac_gradient_per_volt_per_m2",
        "session/s001/stray_field_V_per_m",  # drawn anew each session though it stands in the trap's file
        "species/bead/shape_factor",
        "species/bead/density_kg_per_m3",
        "species/bead/diameter_um",
        "instrument/supply-2/gain_dc_voltage",
        "instrument/supply-2/offset_dc_voltage_V",
        "instrument/camera-1/gain_height",
        "session/s001/gain_drive_voltage",
        "session/s001/temperature_degC",
        "session/s001/pressure_hPa",
        "session/s001/relative_humidity_percent",
        "session/s001/gravity_m_per_s2",
        "campaign//viscosity_formula",
        "campaign//slip_formula",
        "campaign//air_density_formula",
    ):
        scope, owner, _ = name.split("/")
        assert (found[name].scope, found[name].owner) == (scope, owner)


def test_estimates_read_back_in_the_unit_of_their_key(tmp_path):
    found = inputs_of(tmp_path)
    for name, written, u, unit in (
        ("trap/ring-a/dc_field_per_volt_per_m", 61.3, 0.9, "1/m"),
        ("session/s001/temperature_degC", 21.3, 0.2, "degC"),
        ("session/s001/pressure_hPa", 1003.2, 0.5, "hPa"),
        ("session/s001/relative_humidity_percent", 41.0, 3.0, "percent"),
        ("species/bead/diameter_um", 20.3, 0.2, "um"),
        ("species/bead/density_kg_per_m3", 1050.0, 10 / math.sqrt(3), "kg/m3"),  # half width of a rectangle
        ("instrument/supply-2/offset_dc_voltage_V", 0.0, 0.3, "V"),
    ):
        one = found[name]
        assert (one.written, one.written_u) == (pytest.approx(written, abs=1e-9), pytest.approx(u)), name
        assert one.unit == unit
    assert found["species/bead/density_kg_per_m3"].quantity.shape == "rectangular"


def test_two_sessions_share_trap_species_instruments_and_formulas(tmp_path):
    one, other = inputs_of(tmp_path, SECOND), inputs_of(tmp_path, SECOND, "s002")
    common = set(one) & set(other)
    assert {name.split("/")[0] for name in common} == {"trap", "species", "instrument", "campaign"}
    assert {name.split("/")[0] for name in set(one) ^ set(other)} == {"session"}
    assert "instrument/supply-2/gain_dc_voltage" in common


def test_an_air_station_carries_its_three_readings(tmp_path):
    files = changed("campaign.yaml", "height: camera-1}", "height: camera-1, air: station-1}")
    found = inputs_of(tmp_path, files)
    for key in ("temperature_degC", "pressure_hPa", "relative_humidity_percent"):
        assert f"instrument/station-1/{key}" in found
        assert f"session/s001/{key}" not in found


def test_latitude_and_elevation_bring_the_formula_of_normal_gravity(tmp_path):
    site = changed(
        "campaign.yaml", "site: {gravity_m_per_s2: 9.8067(2)}", "site: {latitude_deg: 52.0(1), elevation_m: 20(5)}"
    )
    found = inputs_of(tmp_path, site)
    latitude = found["session/s001/latitude_deg"]
    assert latitude.quantity.estimate == pytest.approx(math.radians(52.0))
    assert (latitude.written, latitude.written_u) == (pytest.approx(52.0), pytest.approx(0.1))
    assert "campaign//normal_gravity_formula" in found
    assert not any(name.endswith("gravity_m_per_s2") for name in found)


def test_air_outside_the_range_of_its_formula_has_an_error_of_its_own(tmp_path):
    cold = changed("campaign.yaml", "temperature_degC: 21.3(2)", "temperature_degC: 2.0(2)")
    found = inputs_of(tmp_path, cold)
    assert "campaign//air_density_formula" not in found
    inside = inputs_of(tmp_path / "inside")["campaign//air_density_formula"]
    assert found["session/s001/air_density_formula"].quantity.u > inside.quantity.u > 0.0


def test_the_lot_is_an_input_only_where_it_is_used(tmp_path):
    lot = "species/bead/diameter_um"
    title = FILES["campaign.yaml"]
    assert lot not in inputs_of(tmp_path / "a", {"campaign.yaml": "lot: unused\n" + title})
    assert lot not in inputs_of(tmp_path / "b", changed("species/bead.yaml", "diameter_spread_um: 0.4\n", ""))
    assert lot in inputs_of(tmp_path / "c")


def test_no_density_no_input_of_that_name(tmp_path):
    density = "density_kg_per_m3: {value: 1050, half_width: 10, shape: rectangular}\n"
    assert not any("density_kg" in name for name in inputs_of(tmp_path, changed("species/bead.yaml", density, "")))


def test_a_bare_number_is_exact(tmp_path):
    found = inputs_of(tmp_path, changed(SESSION, "species: bead\n", "species: bead\ngain: {drive_voltage: 1.25}\n"))
    one = found["session/s001/gain_drive_voltage"]
    assert one.quantity.exact
    assert one.written == 1.25
    assert found["session/s001/gain_drive_frequency"].quantity.exact  # not given: 1


def test_names_are_unique_and_sorted(tmp_path):
    names = list(inputs_of(tmp_path))
    assert names == sorted(set(names))
