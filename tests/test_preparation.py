"""From logs to the readings that enter: exclusions, elapsed times, stated uncertainties."""

from __future__ import annotations

import math

import numpy as np
from small_campaign import BALANCE, FILES, HEIGHT, SESSION, changed, check

from reduction.preparation import prepare

PARTICLES = "sessions/s001/particles.csv"
SECULAR = "sessions/s001/secular.csv"
STATED = FILES[SESSION] + "reading: {balance_voltage_V: 0.3, height_mm: 0.006, dc_voltage_V: 0.02}\n"


def balance_with(head, *cells):
    """Give balance.csv one more column."""
    lines = FILES[BALANCE].splitlines()
    return "\n".join(f"{line},{cell}" for line, cell in zip(lines, (head, *cells), strict=True)) + "\n"


def prepared(root, files=None):
    campaign, logs, faults = check(root, {SESSION: STATED} | (files or {}))
    assert not list(faults), "\n".join(map(str, faults))
    return prepare(campaign, campaign.sessions["s001"], logs["s001"])


def test_readings_are_sorted_by_particle_and_know_their_row(tmp_path):
    mixed = """\
particle,drive_voltage_peak_V,drive_frequency_Hz,balance_voltage_V
p02,420,50,-88.1
p01,400,50,120.5
p02,410,50,-88.3
p01,420,50,120.8
"""
    found = prepared(tmp_path, {BALANCE: mixed})
    log = found.logs["balance"]
    assert found.names == ("p01", "p02")
    assert log.particle.tolist() == [0, 0, 1, 1]
    assert log.observed.tolist() == [120.5, 120.8, -88.1, -88.3]
    assert log.row.tolist() == [1, 3, 0, 2]
    np.testing.assert_allclose(log.omega, 2 * math.pi * 50)


def test_excluded_readings_and_particles_stay_out_with_their_reasons(tmp_path):
    balance = balance_with("exclude", "", "draught", "")
    found = prepared(tmp_path, {BALANCE: balance, PARTICLES: "particle,exclude\np02,two stuck together\n"})
    assert found.names == ("p01",)
    assert found.excluded == {"p02": "two stuck together"}
    assert found.left_out == (("balance", 3, "p01", "draught"),)
    assert found.logs["balance"].observed.tolist() == [120.5]


def test_a_reading_of_an_excluded_particle_keeps_its_own_reason_too(tmp_path):
    balance = balance_with("exclude", "", "", "draught")
    found = prepared(tmp_path, {BALANCE: balance, PARTICLES: "particle,exclude\np02,two stuck together\n"})
    assert found.left_out == (("balance", 4, "p02", "draught"),)


def test_time_runs_from_each_particles_mean_balance_time(tmp_path):
    height = """\
particle,drive_voltage_peak_V,drive_frequency_Hz,dc_voltage_V,height_mm,time_s
p01,400,50,100,-0.413,130
p01,400,50,140,0.402,
p02,400,50,100,-0.413,130
"""
    found = prepared(tmp_path, {HEIGHT: height})
    assert found.logs["balance"].elapsed.tolist() == [-30.0, 30.0, 0.0]  # p01 at 0 and 60 s, p02 at 120 s
    assert found.logs["height"].elapsed.tolist() == [100.0, 0.0, 10.0]  # without a time: as if there were no drift


def test_an_excluded_balance_reading_does_not_shift_the_mean_time(tmp_path):
    balance = balance_with("exclude", "", "draught", "")
    assert prepared(tmp_path, {BALANCE: balance}).logs["balance"].elapsed.tolist() == [0.0, 0.0]


def test_times_of_which_one_is_missing_are_not_used(tmp_path):
    balance = FILES[BALANCE].replace("120.8,60", "120.8,")
    assert prepared(tmp_path, {BALANCE: balance}).logs["balance"].elapsed.tolist() == [0.0, 0.0, 0.0]


def test_u_of_a_row_goes_before_u_of_the_session(tmp_path):
    balance = balance_with("u_balance_voltage_mV", "", "500", "")
    found = prepared(tmp_path, {BALANCE: balance})
    np.testing.assert_allclose(found.logs["balance"].u, [0.3, 0.5, 0.3])
    assert not found.unstated["balance"].any()
    np.testing.assert_allclose(found.logs["height"].u, 6e-6)
    np.testing.assert_allclose(found.logs["height"].u_voltage, 0.02)


def test_readings_without_any_u_are_marked(tmp_path):
    balance = balance_with("u_balance_voltage_V", "", "0.5", "")
    found = prepared(tmp_path, {SESSION: FILES[SESSION], BALANCE: balance})
    assert found.unstated["balance"].tolist() == [True, False, True]
    assert found.unstated["height"].all()
    assert found.unstated["secular"].all()


def test_the_noise_of_the_voltage_is_not_counted_twice_where_the_scatter_holds_it(tmp_path):
    only_voltage = FILES[SESSION] + "reading: {dc_voltage_V: 0.02}\n"
    assert prepared(tmp_path, {SESSION: only_voltage}).logs["height"].u_voltage.tolist() == [0.0, 0.0]


def test_own_diameter_before_the_lots(tmp_path):
    found = prepared(tmp_path, {PARTICLES: "particle,diameter_um,u_diameter_um\np01,21.2,0.3\n"})
    log = found.logs["diameter"]
    assert log.lot.tolist() == [False, True]
    np.testing.assert_allclose(log.observed, [21.2e-6, 0.0])
    np.testing.assert_allclose(log.u, [0.3e-6, 0.4 / 20.3])  # of the reading, and the lot's spread in the logarithm


def test_a_lot_unused_leaves_only_own_diameters(tmp_path):
    files = {
        "campaign.yaml": "lot: unused\n" + FILES["campaign.yaml"],
        PARTICLES: "particle,diameter_um,u_diameter_um\np01,21.2,0.3\n",
    }
    assert prepared(tmp_path, files).logs["diameter"].particle.tolist() == [0]


def test_an_own_diameter_without_u_counts_as_exact(tmp_path):
    log = prepared(tmp_path, {PARTICLES: "particle,diameter_um\np01,21.2\n"}).logs["diameter"]
    own = log.particle == 0
    assert not log.lot[own].any()
    np.testing.assert_allclose(log.observed[own], 21.2e-6)
    assert log.u[own] < 1e-5 * log.observed[own]


def test_species_and_material_of_a_particle_go_before_the_sessions(tmp_path):
    files = {
        "species/bead2.yaml": changed("species/bead.yaml", "1050", "2480")["species/bead.yaml"],
        PARTICLES: "particle,species,charged_with\np02,bead2,wool\n",
    }
    found = prepared(tmp_path, files)
    assert found.species == ("bead", "bead2")
    assert found.charged_with == ("nylon", "wool")
    density = {one.name: one.quantity.estimate for one in found.setting.inputs if "density_kg" in one.name}
    assert density == {"species/bead/density_kg_per_m3": 1050.0, "species/bead2/density_kg_per_m3": 2480.0}


def test_a_session_may_have_one_log_only(tmp_path):
    found = prepared(tmp_path, {HEIGHT: None, SECULAR: None})
    assert set(found.logs) == {"balance", "diameter"}
