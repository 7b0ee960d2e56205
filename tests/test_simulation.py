"""A simulated campaign: its truth, its physics held against independent solutions, its files."""

from __future__ import annotations

import csv
import math
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest
from scipy.integrate import solve_ivp
from scipy.optimize import minimize_scalar

from reduction import motion
from reduction.check import check_campaign
from reduction.errors import ResultsError
from reduction.simulation import (
    EXAMPLE_SEED,
    PLANS,
    REGIMES,
    Habits,
    Plan,
    example_plan,
    simulate_campaign,
    simulate_session,
)
from reduction.simulationplan import RESEARCH, Visit
from reduction.simulationreadings import LOST_B, LOST_H
from reduction.simulationtruth import TrueInputs, stream

HERE = Path(__file__).resolve().parent
EXAMPLE = HERE.parent / "data_example"
REFERENCE = HERE / "reference"


def rows_of(path):
    text = path.read_text(encoding="utf-8-sig")
    return list(csv.DictReader(line for line in text.splitlines() if not line.startswith("#")))


def files_of(folder):
    return {path.relative_to(folder).as_posix(): path.read_bytes() for path in folder.rglob("*") if path.is_file()}


def truth_of(folder):
    rows = rows_of(folder.with_name(folder.name + ".truth.csv"))
    particles = {(row["session"], row["particle"]): row for row in rows}
    inputs = {
        (row["input"], row["session"]): float(row["true_value"])
        for row in rows_of(folder.with_name(folder.name + ".truth_inputs.csv"))
    }
    return particles, inputs


class Bench:
    """What is true of one session, read back from the truth files and from nothing else."""

    def __init__(self, folder, session, trap, species):
        self.particles, self.inputs = truth_of(folder)
        self.session, self.trap, self.species = session, trap, species

    def __getitem__(self, key):
        scope = {
            "dc_field_per_volt_per_m": f"trap/{self.trap}", "ac_gradient_per_volt_per_m2": f"trap/{self.trap}",
            "density_kg_per_m3": f"species/{self.species}",
        }.get(key, f"session/{self.session}")  # fmt: skip
        return self.inputs[f"{scope}/{key}", ""]

    def particle(self, name, key):
        return float(self.particles[self.session, name][key])


NOISELESS = Habits(scatter=0.0)


def one_session(folder, regime, **changes):
    plan = Plan(regimes=(regime,), materials=("PTFE",), sessions=1, particles=2, **changes)
    simulate_campaign(folder, plan=plan, seed=5)
    return Bench(folder, "s001", f"{REGIMES[regime].trap}-a", REGIMES[regime].species)


def gravity_of(bench, session):
    """Normal gravity at the true latitude and elevation (Somigliana, WGS84; NIMA TR8350.2), as drawn in the formula."""
    s = math.sin(bench["latitude_deg"]) ** 2
    at_sea = 9.7803253359 * (1 + 0.00193185265241 * s) / math.sqrt(1 - 0.00669437999014 * s)
    flattening = 1 / 298.257223563
    slope = 2 * (1 + flattening + 0.00344978650684 - 2 * flattening * s) / 6378137
    free_air = 1 - slope * bench["elevation_m"]
    return at_sea * free_air * bench.inputs["campaign//normal_gravity_formula", ""]


def air_density_of(bench):
    """Density of the air from the ideal gas law of a moist mixture; within 1e-3 of CIPM-2007, ample for buoyancy."""
    temperature, pressure = bench["temperature_degC"], bench["pressure_hPa"]
    saturated = 610.94 * math.exp(17.625 * (temperature - 273.15) / (temperature - 30.11))
    vapour = max(bench["relative_humidity_percent"], 0.0) * saturated
    return (pressure - 0.378 * vapour) * 0.0289647 / (8.31446261815324 * temperature)


def weight_of(bench):
    return gravity_of(bench, bench.session) * (1 - air_density_of(bench) / bench["density_kg_per_m3"])


def motion_of(bench, row, dc_key):
    """Coefficients of z'' + gamma z' + (a cos theta) z = force, per mass, for one row of a log."""
    name = row["particle"]
    s = bench.particle(name, "charge_to_mass_C_per_kg")
    omega = 2 * math.pi * float(row["drive_frequency_Hz"])
    amplitude = float(row["drive_voltage_peak_V"]) * bench["gain_drive_voltage"]
    a = s * bench["ac_gradient_per_volt_per_m2"] * amplitude
    force = 0.0
    if dc_key:
        dc = float(row[dc_key]) * bench["gain_dc_voltage"] + bench["offset_dc_voltage_V"]
        force = s * (bench["dc_field_per_volt_per_m"] * dc + bench["stray_field_V_per_m"]) - weight_of(bench)
    return omega, a, bench.particle(name, "drag_rate_per_s"), force


def monodromy(omega, a, gamma, force):
    """Map over one drive period, (z, z') to (z, z'), and the shift the force makes; integrated with solve_ivp."""

    def slope(t, y):
        z, v = y[:3], y[3:]
        return np.concatenate([v, np.array([0.0, 0.0, force]) - gamma * v - a * math.cos(omega * t) * z])

    start = np.array([1.0, 0.0, 0.0, 0.0, 1.0, 0.0])
    end = solve_ivp(slope, (0.0, 2 * math.pi / omega), start, method="DOP853", rtol=1e-11, atol=1e-14).y[:, -1]
    return np.array([end[:2], end[3:5]]), np.array([end[2], end[5]])


def periodic_heights(omega, a, gamma, force):
    """Heights over one period of the periodic motion under a constant force, from solve_ivp."""
    turn, shift = monodromy(omega, a, gamma, force)
    assert np.abs(np.linalg.eigvals(turn)).max() < 1.0  # the particle is held
    start = np.linalg.solve(np.eye(2) - turn, shift)
    times = np.linspace(0.0, 2 * math.pi / omega, 2049)
    return solve_ivp(
        lambda t, y: [y[1], force - gamma * y[1] - a * math.cos(omega * t) * y[0]],
        (0.0, times[-1]), start, method="DOP853", rtol=1e-10, atol=1e-16, t_eval=times,
    ).y[0]  # fmt: skip


@pytest.mark.parametrize("reading", ["time_average", "streak_middle"])
@pytest.mark.parametrize("regime", ["room_air_light", "room_air_dense"])
def test_heights_are_those_of_an_independent_integration_with_steady_drag(tmp_path, regime, reading):
    bench = one_session(tmp_path / "c", regime, drag="steady", habits=replace(NOISELESS, height_reading=reading))
    log = rows_of(tmp_path / "c/sessions/s001/height.csv")
    for row in (log[0], log[9], log[-1]):
        heights = periodic_heights(*motion_of(bench, row, "dc_voltage_V"))
        shown = heights[:-1].mean() if reading == "time_average" else (heights.max() + heights.min()) / 2
        expected = 1e3 * shown + bench.particle(row["particle"], "height_origin_mm")
        # half a step of the logged dc voltage (0.001 V at most 0.0005 mm here) and of the logged height
        assert float(row["height_mm"]) * bench["gain_height"] == pytest.approx(expected, abs=2e-3)


@pytest.mark.parametrize("regime", ["room_air_dense", "low_pressure"])
def test_ring_down_is_that_of_an_independent_integration_with_steady_drag(tmp_path, regime):
    bench = one_session(tmp_path / "c", regime, drag="steady", habits=NOISELESS)
    log = rows_of(tmp_path / "c/sessions/s001/secular.csv")
    for row in (log[0], log[6], log[-1]):
        turn, _ = monodromy(*motion_of(bench, row, ""))
        assert np.abs(np.linalg.eigvals(turn)).max() < 1.0  # the particle is held
        secular = abs(np.angle(np.linalg.eigvals(turn)[0])) / (2 * math.pi) * float(row["drive_frequency_Hz"])
        assert float(row["secular_frequency_Hz"]) == pytest.approx(secular, abs=0.0051)  # logged to 0.01 Hz


def harmonic_response(bench, row, nu, wide=40):
    """Amplitude at frequency nu (over the drive's) under a unit force, from the whole truncated linear system."""
    omega, a, gamma, _ = motion_of(bench, row, "")
    n = nu + np.arange(-wide, wide + 1)
    diameter = 1e-6 * bench.particle(row["particle"], "diameter_um")
    rho, eta = air_density_of(bench), viscosity_of(bench)
    history = diameter / 2 * np.sqrt(1j * n * omega * rho / eta + 0j)
    history = np.where(n < 0, np.conj(diameter / 2 * np.sqrt(1j * np.abs(n) * omega * rho / eta)), history)
    own = -(n**2) * (1 + rho / (2 * bench["density_kg_per_m3"])) + 1j * n * gamma / omega * (1 + history)
    matrix = np.diag(own) + a / (2 * omega**2) * (np.eye(len(n), k=1) + np.eye(len(n), k=-1))
    force = np.zeros(len(n))
    force[wide] = 1 / omega**2
    return np.linalg.solve(matrix, force)[wide]


def viscosity_of(bench):
    """Sutherland's formula through 1.83245e-5 Pa s at 296.15 K (checked against tables in test_air.py), as drawn."""
    temperature = bench["temperature_degC"]
    formula = 1.83245e-5 * (temperature / 296.15) ** 1.5 * (296.15 + 110.4) / (temperature + 110.4)
    names = [key for key in bench.inputs if key[0] == "campaign//viscosity_formula"]
    return formula * bench.inputs[names[0]]


@pytest.mark.parametrize("regime", ["room_air_light", "room_air_dense"])
def test_heights_with_unsteady_drag_solve_the_linear_system(tmp_path, regime):
    bench = one_session(tmp_path / "c", regime, habits=NOISELESS)
    log = rows_of(tmp_path / "c/sessions/s001/height.csv")
    for row in (log[0], log[9], log[-1]):
        force = motion_of(bench, row, "dc_voltage_V")[3]
        expected = 1e3 * force * harmonic_response(bench, row, 0.0).real
        expected += bench.particle(row["particle"], "height_origin_mm")
        assert float(row["height_mm"]) * bench["gain_height"] == pytest.approx(expected, abs=2e-3)


def test_response_peak_is_the_maximum_of_the_linear_system(tmp_path):
    bench = one_session(tmp_path / "c", "room_air_dense", habits=replace(NOISELESS, secular_reading="response_peak"))
    log = rows_of(tmp_path / "c/sessions/s001/secular.csv")
    for row in (log[2], log[-1]):
        drive = float(row["drive_frequency_Hz"])
        logged = float(row["secular_frequency_Hz"]) / drive
        peak = minimize_scalar(
            lambda nu, row=row: -abs(harmonic_response(bench, row, nu)),
            bounds=(0.8 * logged, 1.2 * logged), method="bounded", options={"xatol": 1e-9},
        )  # fmt: skip
        assert peak.x * drive == pytest.approx(logged * drive, abs=0.0055)  # logged to 0.01 Hz


@pytest.mark.parametrize("regime", sorted(REGIMES))
def test_balance_holds_the_weight(tmp_path, regime):
    bench = one_session(tmp_path / "c", regime, habits=NOISELESS)
    for row in rows_of(tmp_path / "c/sessions/s001/balance.csv"):
        force = motion_of(bench, row, "balance_voltage_V")[3]
        step = 0.1 if regime != "low_pressure" else 0.01  # of the logged voltage
        s = bench.particle(row["particle"], "charge_to_mass_C_per_kg")
        assert abs(force) <= abs(s) * bench["dc_field_per_volt_per_m"] * 0.51 * step + 2e-5


def test_the_drag_rate_is_stokes_with_slip(tmp_path):
    """Slip coefficients of Kim et al. 2005 (J. Res. NIST 110, 31; from memory), mean free path 67.3 nm scaled."""
    for regime in sorted(REGIMES):
        bench = one_session(tmp_path / regime, regime)
        temperature, pressure = bench["temperature_degC"], bench["pressure_hPa"]
        scale = (temperature / 296.15) * (101325 / pressure) * (1 + 110.4 / 296.15) / (1 + 110.4 / temperature)
        diameter = 1e-6 * bench.particle("p01", "diameter_um")
        knudsen = 2 * 67.3e-9 * scale / diameter
        slip = knudsen * (1.165 + 0.483 * math.exp(-0.997 / knudsen)) * bench.inputs["campaign//slip_formula", ""]
        shape = bench.inputs[f"species/{bench.species}/shape_factor", ""]
        rate = 18 * viscosity_of(bench) * shape / (bench["density_kg_per_m3"] * diameter**2 * (1 + slip))
        assert bench.particle("p01", "drag_rate_per_s") == pytest.approx(rate, rel=1e-9)


def test_mass_and_charge_follow_from_diameter_density_and_ratio(tmp_path):
    bench = one_session(tmp_path / "c", "room_air_light")
    diameter = 1e-6 * bench.particle("p01", "diameter_um")
    mass = bench["density_kg_per_m3"] * math.pi * diameter**3 / 6
    assert bench.particle("p01", "mass_kg") == pytest.approx(mass, rel=1e-12)
    charge = mass * bench.particle("p01", "charge_to_mass_C_per_kg")
    assert bench.particle("p01", "charge_C") == pytest.approx(charge, rel=1e-12)
    # e = 1.602176634e-19 C exactly (SI Brochure, 9th edition)
    assert bench.particle("p01", "charge_e") == pytest.approx(charge / 1.602176634e-19, rel=1e-12)


def test_the_drives_at_which_particles_are_lost_are_those_of_the_damped_mathieu_equation():
    """First onset of instability at a = 0 by the drag k = 2 b; recomputed by integration (DOP853), tolerance 1e-6."""
    onset = [0.908046334, 0.909282913, 0.912985634, 0.927693528, 1.026568636, 1.340517799, 1.794346548, 2.366822674,
             3.882810862]  # fmt: skip
    np.testing.assert_allclose(LOST_H, np.array(onset) / 4.0, atol=5e-6)  # the table has five decimals
    for b, h in zip(LOST_B, LOST_H, strict=True):
        growth = [np.abs(np.linalg.eigvals(monodromy(1.0, 2 * one * h, b, 0.0)[0])).max() for one in (0.999, 1.001)]
        assert growth[0] <= 1.0 + 1e-6
        assert growth[1] > 1.0


def charge_of(one, log):
    return one.particles.charge_to_mass[log.particle]


@pytest.mark.parametrize("regime", sorted(REGIMES))
def test_settings_stay_within_what_an_operator_can_reach(regime):
    plan = Plan(regimes=(regime,), sessions=8, particles=6)
    for number in range(plan.sessions):
        one = simulate_session(plan, seed=3, number=number)
        limits = REGIMES[regime]
        for log in one.logs.values():
            assert (log.drive_amplitude > 0.0).all()
            assert (log.drive_amplitude <= limits.drive_voltage_peak_V * 1.001).all()
            state = one.bench.state(log.particle, log.drive_amplitude, log.drive_frequency, charge_of(one, log))
            medium = (state.b, state.added_mass, state.history)
            assert (np.abs(state.h) < motion.stiffness_maximum(*medium)).all()
            assert (np.abs(state.h) < motion.stability_limit(*medium)).all()
        assert (np.abs(one.logs["balance"].reading) < 1000.0).all()
        if "height" in one.logs:
            assert (np.abs(one.logs["height"].reading) < 1e-3 * limits.usable_height_mm).all()
            spans = [np.ptp(one.logs["height"].reading[one.logs["height"].particle == p]) for p in range(6)]
            assert min(spans) > 1e-3 * limits.travel_mm
        # the air limit eps0 x 3 MV/m = 26.6 uC/m2 (CODATA eps0; 3 MV/m is common practice)
        assert (np.abs(one.particles.surface_charge_density) < 8.8541878e-12 * 3e6).all()


def test_small_beads_in_room_air_have_no_secular_oscillation_and_dense_or_rarefied_ones_have(tmp_path):
    for regime, exists in (("room_air_light", False), ("room_air_dense", True), ("low_pressure", True)):
        plan = Plan(regimes=(regime,), sessions=4, particles=5, habits=Habits(logs=("balance", "secular")))
        counts = [len(simulate_session(plan, seed=2, number=number).logs["secular"]) for number in range(4)]
        assert (min(counts) >= 4 * 7) if exists else (max(counts) == 0)


def test_the_same_plan_and_seed_give_the_same_bytes_and_another_seed_other_ones(tmp_path):
    for name, seed in (("a", 4), ("b", 4), ("c", 5)):
        simulate_campaign(tmp_path / name, plan=replace(PLANS["untidy"], particles=2), seed=seed)
    assert files_of(tmp_path / "a") == files_of(tmp_path / "b")
    assert (tmp_path / "a.truth.csv").read_bytes() == (tmp_path / "b.truth.csv").read_bytes()
    assert files_of(tmp_path / "a") != files_of(tmp_path / "c")


def test_a_session_does_not_depend_on_how_many_there_are_nor_a_particle(tmp_path):
    plan = PLANS["all"]
    for name, sessions, particles in (("few", 2, 2), ("many", 5, 2), ("crowd", 2, 4)):
        simulate_campaign(tmp_path / name, plan=replace(plan, sessions=sessions, particles=particles), seed=4)
    few, many, crowd = (files_of(tmp_path / name) for name in ("few", "many", "crowd"))
    assert few == {name: many[name] for name in few}
    for name, data in few.items():
        if name.endswith(".csv"):
            lines = crowd[name].splitlines()
            assert all(line in lines for line in data.splitlines())


def test_true_inputs_scatter_around_the_stated_ones_by_their_u():
    pulls = []
    plan = Plan(regimes=tuple(REGIMES), sessions=3, particles=1)
    for seed in range(150):
        taken = TrueInputs(seed)
        for number in range(3):
            simulate_session(plan, seed=seed, number=number, taken=taken)
        pulls.append({one.name: (one.true - one.estimate) / one.u for one in taken.rows() if one.u})
    names = sorted(pulls[0])
    table = np.array([[one[name] for name in names] for one in pulls])
    count = len(pulls)
    # 5 standard errors of a mean and of a variance over 150 normal draws
    assert np.abs(table.mean(axis=0)).max() < 5 / math.sqrt(count)
    assert np.abs(table.var(axis=0) - 1).max() < 5 * math.sqrt(2 / count)
    correlation = np.corrcoef(table.T) - np.eye(len(names))
    assert np.abs(correlation).max() < 5 / math.sqrt(count)


def test_equal_instrument_names_share_one_error_and_unequal_ones_do_not(tmp_path):
    shared = Habits(instruments={"dc_voltage": "supply-1", "air": "station-1"})
    plan = Plan(sessions=3, particles=1, habits=shared, differing={"s003": Habits()})
    simulate_campaign(tmp_path / "c", plan=plan, seed=6)
    rows = rows_of(tmp_path / "c.truth_inputs.csv")
    gains = [row for row in rows if row["input"].endswith("gain_dc_voltage")]
    assert [row["input"] for row in gains] == ["instrument/supply-1/gain_dc_voltage", "session/s003/gain_dc_voltage"]
    air = [row for row in rows if row["input"] == "instrument/station-1/temperature_degC"]
    errors = [float(row["true_value"]) - float(row["estimate"]) for row in air]
    assert [row["session"] for row in air] == ["s001", "s002"]
    assert errors[0] == pytest.approx(errors[1], abs=1e-9)
    assert errors[0] != 0.0


@pytest.mark.parametrize("scatter", [1.0, 1.6])
def test_readings_scatter_by_their_u_times_the_factor_asked_for(scatter):
    plan = Plan(regimes=tuple(REGIMES), sessions=12, particles=4, habits=Habits(scatter=scatter))
    quiet = replace(plan, habits=replace(plan.habits, scatter=0.0))
    pulls = []
    for number in range(12):
        loud, silent = (simulate_session(one, seed=8, number=number) for one in (plan, quiet))
        pulls += [(loud.logs[log].reading - silent.logs[log].reading) / loud.logs[log].sigma for log in loud.logs]
    pooled = np.concatenate(pulls)
    assert pooled.std() == pytest.approx(scatter, rel=5 / math.sqrt(2 * len(pooled)))
    assert abs(pooled.mean()) < 5 * scatter / math.sqrt(len(pooled))


def test_gross_errors_are_named_in_the_truth_and_stand_far_out(tmp_path):
    plan = Plan(sessions=2, particles=3, habits=Habits(outliers=0.05))
    simulate_campaign(tmp_path / "c", plan=plan, seed=1)
    named = [name for row in rows_of(tmp_path / "c.truth.csv") for name in row["gross_readings"].split(";") if name]
    assert named
    quiet = replace(plan, habits=Habits())
    for number in range(2):
        loud, silent = (simulate_session(one, seed=1, number=number) for one in (plan, quiet))
        for log in loud.logs:
            far = np.abs(loud.logs[log].reading - silent.logs[log].reading) / loud.logs[log].sigma
            wrong = np.array([
                f"{log}:{loud.particles.ids[one]}:{count}" in loud.logs[log].gross
                for one, count in zip(loud.logs[log].particle, loud.logs[log].number, strict=True)
            ])  # fmt: skip
            assert (far[wrong] > 7.5).all()
            assert (far[~wrong] < 1e-6).all()


def test_charge_drift_moves_the_balance_voltage_and_the_ratio_belongs_to_its_mean_time(tmp_path):
    bench = one_session(tmp_path / "c", "room_air_light", habits=replace(NOISELESS, charge_drift_per_s=-2e-5))
    log = [row for row in rows_of(tmp_path / "c/sessions/s001/balance.csv") if row["particle"] == "p01"]
    times = np.array([float(row["time_s"]) for row in log])
    shown = np.array([float(row["balance_voltage_V"]) for row in log])
    true = shown * bench["gain_dc_voltage"] + bench["offset_dc_voltage_V"]
    ratio = weight_of(bench) / (bench["dc_field_per_volt_per_m"] * true + bench["stray_field_V_per_m"])
    slope = np.polyfit(times - times.mean(), np.log(np.abs(ratio)), 1)
    drift = bench.particle("p01", "charge_drift_per_s")
    assert drift < 0.0
    # a step of 0.1 V in some 130 V over 245 s
    assert slope[0] == pytest.approx(drift, abs=3e-6)
    assert math.exp(slope[1]) == pytest.approx(abs(bench.particle("p01", "charge_to_mass_C_per_kg")), rel=3e-4)


def test_both_signs_of_charge_come_up_and_ptfe_leaves_beads_positive():
    """PTFE itself charges strongly negative (common practice, no source), so what touches it ends up positive."""
    plan = Plan(sessions=4, particles=3)
    signs = {}
    for number in range(4):
        ratios = simulate_session(plan, seed=1, number=number).particles.charge_to_mass
        signs[plan.material_of(number)] = set(np.sign(ratios))
    assert signs["PTFE"] == {1.0}
    assert signs["nylon"] == {-1.0}


def test_charges_scatter_around_the_group_that_the_truth_names(tmp_path):
    plan = Plan(materials=("glass",), sessions=40, particles=5)
    simulate_campaign(tmp_path / "c", plan=plan, seed=1)
    (group,) = rows_of(tmp_path / "c.truth_groups.csv")
    assert (group["regime"], group["charged_with"]) == ("room_air_light", "glass")
    rows = rows_of(tmp_path / "c.truth.csv")
    logs = np.log(
        [
            float(row["surface_charge_density_C_per_m2"]) / float(group["surface_charge_density_C_per_m2"])
            for row in rows
        ]
    )
    table = logs.reshape(40, 5)
    between, within = float(group["between_sessions"]), float(group["between_particles"])
    # 4 standard errors each: of the mean, and of the two spreads
    assert abs(table.mean()) < 4 * math.sqrt((between**2 + within**2 / 5) / 40)
    assert table.std(axis=1, ddof=1).mean() == pytest.approx(0.94 * within, rel=4 * 0.36 / math.sqrt(40))  # c4 of 5
    assert table.mean(axis=1).std(ddof=1) == pytest.approx(
        math.sqrt(between**2 + within**2 / 5), rel=4 / math.sqrt(2 * 39)
    )


def test_a_folder_can_be_where_one_stands(tmp_path, monkeypatch):
    (tmp_path / "c").mkdir()
    monkeypatch.chdir(tmp_path / "c")
    truth = simulate_campaign(Path("."), plan=Plan(sessions=1, particles=1), seed=1)
    assert truth == (tmp_path / "c.truth.csv").resolve()
    assert (tmp_path / "c" / "campaign.yaml").is_file()


def test_a_material_of_ones_own_gets_a_charge_of_its_own():
    plan = Plan(materials=("cork", "slate"), sessions=2, particles=2)
    one, two = (simulate_session(plan, seed=1, number=number).particles.charge_to_mass[0] for number in (0, 1))
    assert one != two
    assert simulate_session(plan, seed=1, number=0).particles.charge_to_mass[0] == one


def test_streams_of_different_names_differ_and_of_equal_names_agree():
    assert stream(1, "a", "b").random() == stream(1, "a", "b").random()
    assert stream(1, "a", "b").random() != stream(1, "a", "c").random()
    assert stream(1, "a", "b").random() != stream(2, "a", "b").random()


def test_a_folder_that_holds_something_is_refused(tmp_path):
    (tmp_path / "c").mkdir()
    (tmp_path / "c" / "notes.txt").write_text("mine")
    with pytest.raises(ResultsError, match="Name a new folder"):
        simulate_campaign(tmp_path / "c", plan=Plan(), seed=1)
    assert files_of(tmp_path) == {"c/notes.txt": b"mine"}


@pytest.mark.parametrize(
    ("plan", "words"),
    [
        (Plan(regimes=("room_air",)), "no regime room_air.*low_pressure"),
        (Plan(schedule=(Visit("vacuum", "glass"),)), "no regime vacuum"),
        (Plan(habits=Habits(dialect="pipe")), "no dialect pipe.*semicolon"),
        (Plan(habits=Habits(drive_voltage="mean")), "no drive voltage mean.*rms"),
        (Plan(habits=Habits(logs=("balance", "heights"))), "no log heights.*height"),
        (Plan(habits=Habits(height_reading="middle")), "no height reading middle.*streak_middle"),
        (Plan(habits=Habits(excluded_particles={"p9": "dust"})), "no particle p9.*p01"),
        (Plan(habits=Habits(outlier_readings=("height:q1:3",))), "no particle q1"),
        (Plan(differing={"s099": Habits()}), "no session s099.*s004"),
        (Plan(habits=Habits(outliers=1.5)), "probability"),
        (Plan(habits=Habits(scatter=float("nan"))), "scatter"),
        (Plan(habits=Habits(charge_drift_per_s=0.01)), "found a charge drift of 0.01"),
        (Plan(materials=("glass", " ")), "no name"),
        (Plan(traps=27), "26 traps"),
        (Plan(particles=0), "at least one"),
    ],
)
def test_a_plan_that_asks_for_what_there_is_not_is_refused(tmp_path, plan, words):
    with pytest.raises(ResultsError, match=words):
        simulate_campaign(tmp_path / "c", plan=plan, seed=1)
    assert not (tmp_path / "c").exists()


def test_the_truth_is_beside_the_campaign_and_never_inside(tmp_path):
    truth = simulate_campaign(tmp_path / "c", plan=Plan(sessions=1, particles=1), seed=1)
    assert truth == tmp_path / "c.truth.csv"
    names = ["c", "c.truth.csv", "c.truth_groups.csv", "c.truth_inputs.csv"]
    assert sorted(path.name for path in tmp_path.iterdir()) == names
    exact = rows_of(truth)[0]["charge_to_mass_C_per_kg"].encode()
    assert not any(exact in data for data in files_of(tmp_path / "c").values())


VARIANTS = {
    **PLANS,
    "rms in a spreadsheet": Plan(habits=Habits(dialect="semicolon", drive_voltage="rms", own_diameters=True, lost=1)),
    "tabs": Plan(("room_air_dense",), habits=Habits(dialect="tab", drive_voltage="peak_to_peak", u_in_logs=True)),
    "other units": Plan(habits=Habits(units={"height": "um", "drive_voltage": "kV", "dc_voltage": "kV"})),
    "no times": Plan(regimes=("low_pressure",), habits=Habits(times=False)),
    "nothing stated": Plan(habits=Habits(unstated=("balance_voltage_V", "height_mm"))),
    "height alone": Plan(habits=Habits(logs=("height",))),
    "gravity given": Plan(site={"gravity_m_per_s2": "9.8124(2)"}),
}


@pytest.mark.parametrize("name", sorted(VARIANTS))
def test_what_is_written_has_no_fault(tmp_path, name):
    plan = VARIANTS[name]
    simulate_campaign(tmp_path / "c", plan=replace(plan, sessions=min(plan.sessions, 6), particles=2), seed=1)
    _, _, faults = check_campaign(tmp_path / "c")
    assert [str(fault) for fault in faults] == []


def test_dialects_and_units_hold_the_same_readings(tmp_path):
    spellings = {
        "plain": Habits(),
        "semicolon": Habits(dialect="semicolon", units={"height": "um", "dc_voltage": "mV"}),
        "tab": Habits(dialect="tab", units={"height": "cm"}),
    }
    read = {}
    for name, habits in spellings.items():
        simulate_campaign(tmp_path / name, plan=Plan(sessions=1, particles=2, habits=habits), seed=1)
        _, logs, _ = check_campaign(tmp_path / name)
        read[name] = logs["s001"].tables["height"]
    for name in ("semicolon", "tab"):
        for column in ("height", "dc_voltage", "drive_amplitude", "drive_frequency"):
            np.testing.assert_allclose(read[name][column], read["plain"][column], rtol=1e-12, atol=1e-12)


def test_the_example_is_what_the_generator_makes(tmp_path):
    simulate_campaign(tmp_path / "data_example", plan=example_plan(), seed=EXAMPLE_SEED)
    committed = {name: data for name, data in files_of(EXAMPLE).items() if not name.startswith("course/")}
    assert b"invented" in committed.pop("README.md").lower()
    assert committed.pop("measuring-your-trap.md")  # tells of no data
    assert committed == files_of(tmp_path / "data_example")
    for what in ("truth", "truth_inputs"):
        made = (tmp_path / f"data_example.{what}.csv").read_bytes()
        assert (REFERENCE / f"example_{what}.csv").read_bytes() == made


def test_the_example_shows_one_of_everything():
    campaign, logs, faults = check_campaign(EXAMPLE)
    assert [str(fault) for fault in faults] == []
    assert len(campaign.session_ids) == 8
    assert len({campaign.sessions[one].charged_with for one in campaign.session_ids}) == 4
    truth = rows_of(REFERENCE / "example_truth.csv")
    assert {row["regime"] for row in truth} == set(RESEARCH)
    assert {float(row["charge_e"]) > 0 for row in truth} == {True, False}
    assert sum(bool(row["gross_readings"]) for row in truth) == 2  # one left in, one excluded with a reason
    assert sum(len(one.lost) for one in logs.values() if one.lost is not None) == 2
    used = [name for one in campaign.sessions.values() for name in set(one.instruments.values())]
    assert used.count("supply-1") == 2
    assert all("nvented data" in data.decode("utf-8-sig") for data in files_of(EXAMPLE).values())
