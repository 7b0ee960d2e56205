"""Known truth comes back, with uncertainties that say how far off it may be."""

from __future__ import annotations

import math

import numpy as np
import pandas as pd
import pytest
from edited import Edited, particle, simulated, truth_of
from scipy import stats

P = 1e-4  # of a false alarm, were the seeds drawn anew
SEEDS = {"room_air_light": 40, "room_air_dense": 20, "low_pressure": 20}
WAYS = (  # in turn over the seeds
    ("session", "time_average", "ring_down"),
    ("particle", "streak_middle", "response_peak"),
    ("session", "streak_middle", "response_peak"),
    ("particle", "time_average", "ring_down"),
)
INTERVALS = {
    "charge_to_mass_C_per_kg": ("charge_to_mass_low_C_per_kg", "charge_to_mass_high_C_per_kg"),
    "mass_kg": ("mass_low_kg", "mass_high_kg"),
    "charge_e": ("charge_low_e", "charge_high_e"),
}


def reduced(folder, regime, seed):
    """Particles of one simulated session beside their truth, and how its methods agree."""
    adjust, height_reading, secular_reading = WAYS[seed % len(WAYS)]
    # alone, particles tell no more by being many
    count = 2 if adjust == "session" else 1
    simulated(
        folder, regime, seed=1000 + seed, particles=count, options={"adjust": adjust},
        height_reading=height_reading, secular_reading=secular_reading,
    )  # fmt: skip
    record, truth = Edited(folder).reduce(), truth_of(folder)
    rows = record.tables["particles"].set_index("particle")
    rows = rows.join(truth.add_prefix("true_")[[f"true_{one}" for one in (*INTERVALS, "drag_rate_per_s")]])
    # those of one session share its inputs: one of them stands for the session
    rows["independent"] = np.arange(len(rows)) == seed % count
    agreement = record.tables["agreement"].merge(rows[["independent"]], left_on="particle", right_index=True)
    return rows.assign(seed=seed, adjust=adjust, regime=regime), agreement


@pytest.fixture(scope="module", params=SEEDS)
def found(request, tmp_path_factory):
    root = tmp_path_factory.mktemp(request.param)
    parts = [reduced(root / f"seed{seed}", request.param, seed) for seed in range(SEEDS[request.param])]
    return tuple(pd.concat(part) for part in zip(*parts, strict=True))


@pytest.fixture(scope="module")
def particles(found):
    return found[0]


def pulls(rows, column):
    """Logarithm of estimate over truth in units of its uncertainty, one particle a session."""
    rows = rows[rows["independent"]]
    relative = rows[f"u_{column}"] / rows[column].abs()
    return (np.log(rows[column] / rows[f"true_{column}"]) / relative).to_numpy(float)


def unit_normal(values):
    """Assert mean 0 and standard deviation 1 within what so many values may show."""
    count = len(values)
    assert abs(values.mean()) < stats.norm.isf(P / 2) / math.sqrt(count)
    square = float(((values - values.mean()) ** 2).sum())
    assert stats.chi2.ppf(P / 2, count - 1) < square < stats.chi2.isf(P / 2, count - 1)
    # both at once, sharper against a scatter too large
    assert float((values**2).sum()) < stats.chi2.isf(P, count)


def test_every_particle_is_determined(particles):
    assert (particles["status"] == "ok").all()
    assert particles["u_charge_e"].notna().all()


@pytest.mark.parametrize("column", ["charge_to_mass_C_per_kg", "drag_rate_per_s", "charge_e"])
def test_pulls_are_unit_normal(particles, column):
    unit_normal(pulls(particles, column))


@pytest.mark.parametrize("adjust", ["session", "particle"])
def test_pulls_are_unit_normal_however_adjusted(particles, adjust):
    unit_normal(pulls(particles[particles["adjust"] == adjust], "charge_e"))


@pytest.mark.parametrize("column", INTERVALS)
def test_intervals_hold_the_truth_as_often_as_they_say(particles, column):
    rows = particles[particles["independent"]]
    low, high = INTERVALS[column]
    held = int(((rows[low] <= rows[f"true_{column}"]) & (rows[f"true_{column}"] <= rows[high])).sum())
    assert held >= stats.binom.ppf(P, len(rows), 0.95)


def test_the_sign_is_found(particles):
    assert (np.sign(particles["charge_e"]) == np.sign(particles["true_charge_e"])).all()


def test_chi_square_of_particles_alone_is_what_its_degrees_of_freedom_allow(particles):
    total, dof = particles["chi_square"].sum(), particles["degrees_of_freedom"].sum()
    assert stats.chi2.ppf(P / 2, dof) < total < stats.chi2.isf(P / 2, dof)
    tail = stats.chi2.sf(particles["chi_square"].astype(float), particles["degrees_of_freedom"].astype(float))
    assert stats.kstest(tail, "uniform").pvalue > P


def test_methods_agree_within_what_they_do_not_share(found):
    agreement = found[1]
    pairs = agreement[agreement["independent"] & (agreement["quantity"] == "charge_to_mass")]
    assert len(pairs)
    # E_n is the difference over twice its u
    for _, rows in pairs.groupby(["method_a", "method_b"]):
        unit_normal(2.0 * rows["normalized_error"].to_numpy(float))


def test_a_balance_and_a_height_share_most_of_what_they_do_not_know(found):
    particles, agreement = found
    if "height" not in set(agreement["method_b"]):
        assert set(particles["regime"]) == {"low_pressure"}  # no heights are read there
        return
    rows = agreement[(agreement["method_a"] == "balance") & (agreement["method_b"] == "height")]
    rows = rows[rows["quantity"] == "charge_to_mass"]
    assert rows["u_difference"].median() < 0.3 * particles["u_charge_to_mass_C_per_kg"].median()


# --- without noise, the true inputs written into the files


def true_apparatus(folder):
    """State the true inputs of a simulated campaign exactly; those of formulas no file can hold."""
    table = pd.read_csv(folder.with_name(f"{folder.name}.truth_inputs.csv"), comment="#")
    true = {
        name.rpartition("/")[2]: float(value) for name, value in zip(table["input"], table["true_value"], strict=True)
    }
    campaign = Edited(folder)
    campaign.trap(**{
        key: true[key] for key in ("dc_field_per_volt_per_m", "ac_gradient_per_volt_per_m2", "stray_field_V_per_m")
    })  # fmt: skip
    campaign.species(density_kg_per_m3=true["density_kg_per_m3"], shape_factor=true["shape_factor"])
    campaign.session(
        gain={kind: true[f"gain_{kind}"] for kind in ("dc_voltage", "drive_voltage", "height")},
        offset={"dc_voltage_V": true["offset_dc_voltage_V"]},
        air={
            "temperature_degC": true["temperature_degC"] - 273.15,
            "pressure_hPa": true["pressure_hPa"] / 100.0,
            "relative_humidity_percent": true["relative_humidity_percent"] * 100.0,
        },
    )
    return campaign.campaign(lot="unused")


@pytest.mark.parametrize(
    ("key", "kind", "other"),
    [
        ("height_reading", "time_average", "streak_middle"),
        ("height_reading", "streak_middle", "time_average"),
        ("secular_reading", "ring_down", "response_peak"),
        ("secular_reading", "response_peak", "ring_down"),
    ],
)
def test_each_kind_of_reading_is_taken_for_what_it_is(tmp_path, key, kind, other):
    folder = simulated(tmp_path / "exact", "room_air_dense", seed=3, scatter=0.0, **{key: kind})
    campaign, truth = true_apparatus(folder), truth_of(folder).loc["p01"]
    right, wrong = particle(campaign.reduce()), particle(campaign.session(**{key: other}).reduce())
    for column in ("charge_to_mass_C_per_kg", "drag_rate_per_s"):
        assert right[column] == pytest.approx(truth[column], rel=1e-3)
    # readings are written down in steps of a fifth of their u, which alone makes a chi-square of 0.003 each
    assert right["chi_square"] < 0.01 * right["readings"]
    assert wrong["chi_square"] > 20 * right["chi_square"]
