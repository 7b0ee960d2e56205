"""Histograms of charge: bins, bands, what lies between particles, and what was never seen."""

from __future__ import annotations

import math
from pathlib import Path
from typing import Any

import numpy as np
import pandas as pd
import pytest
from scipy import sparse, stats

from reduction import tables
from reduction.comparisonwords import charge_statements
from reduction.histogram import (
    COLUMNS,
    MOST_BINS,
    bins_of,
    counts_in,
    distribution_rows,
    distributions,
    draws_of,
    histogram_rows,
    summary_rows,
)
from reduction.intrinsic import LotFree, fraction_positive, intrinsic, lot_free, lot_means, wilson
from reduction.logs import Logs
from reduction.quantity import Quantity
from reduction.sessionmeans import Sample
from reduction.settings import Air, Session, Site, Trap
from reduction.window import lost_record, window_record

E_CHARGE = 1.602176634e-19


def sample(value: Any, own: Any = 0.0, common: Any = 0.0, session: Any = None) -> Sample:
    """Particles with u of their own and one shared component each."""
    value = np.asarray(value, dtype=float)
    size = len(value)
    shared = sparse.csr_array(np.broadcast_to(np.asarray(common, dtype=float), size).reshape(-1, 1))
    return Sample(
        "e", np.full(size, "s1") if session is None else np.asarray(session), np.array([f"p{k}" for k in range(size)]),
        np.full(size, "a"), value, np.broadcast_to(np.asarray(own, dtype=float) ** 2, size).copy(), shared,
        ("trap/x/d",), ("trap",),
    )  # fmt: skip


def test_bin_width_is_freedman_and_diaconis_where_u_is_small() -> None:
    value = np.random.default_rng(1).normal(1e5, 2e4, 400)
    found = bins_of(value, np.full(400, 10.0))
    assert found.width == pytest.approx(2 * stats.iqr(value) / 400 ** (1 / 3))
    assert np.diff(found.edges) == pytest.approx(np.full(len(found.edges) - 1, found.width))


def test_bins_are_never_finer_than_the_median_u() -> None:
    rng = np.random.default_rng(2)
    value, u = rng.normal(1e5, 2e4, 400), rng.uniform(1e4, 9e4, 400)
    assert np.diff(bins_of(value, u).edges).min() >= np.median(u) * (1 - 1e-12)
    spread = np.exp(rng.normal(10, 3, 300)) * rng.choice([-1, 1], 300)
    for u in (np.full(300, 30.0), np.full(300, 5e4)):
        found = bins_of(spread, u)
        assert found.scale == "symmetric_log"
        assert np.diff(found.edges).min() >= np.median(u) * (1 - 1e-9)


def test_no_bin_mixes_signs_and_none_is_lost() -> None:
    rng = np.random.default_rng(3)
    for value in (rng.normal(0, 1e4, 200), np.exp(rng.normal(10, 3, 200)) * rng.choice([-1, 1], 200), np.array([5.0])):
        found = bins_of(value, np.full(len(value), 1.0))
        assert np.abs(found.edges).min() < 1e-9 or (np.sign(found.edges[0]) == np.sign(found.edges[-1]))
        assert counts_in(found.edges, value).sum() == len(value)
        assert len(found.edges) <= MOST_BINS + 1


def test_heavy_tail_does_not_make_bins_without_end() -> None:
    value = np.concatenate([np.random.default_rng(4).normal(0, 1, 200), [1e6]])
    assert len(bins_of(value, np.full(201, 1e-3)).edges) <= MOST_BINS + 1


def test_counts_agree_with_numpy_and_draws_keep_their_rows() -> None:
    rng = np.random.default_rng(5)
    value, edges = rng.normal(size=(7, 50)), np.linspace(-3, 3, 9)
    assert counts_in(edges, value) == pytest.approx(np.array([np.histogram(row, edges)[0] for row in value]))


def test_draws_have_the_covariance_of_the_components() -> None:
    drawn = draws_of(sample([10.0, 20.0, -5.0], own=[1.0, 2.0, 0.5], common=[1.0, 2.0, -0.5]), seed=3, draws=40_000)
    wanted = np.diag([1.0, 4.0, 0.25]) + np.outer([1.0, 2.0, -0.5], [1.0, 2.0, -0.5])
    assert np.cov(drawn.T) == pytest.approx(wanted, abs=0.12)
    assert drawn.mean(axis=0) == pytest.approx(np.array([10.0, 20.0, -5.0]), abs=0.05)


def test_error_common_to_all_moves_all_counts_together() -> None:
    found = draws_of(sample([1.0] * 20, common=1.0), seed=1, draws=500)
    assert np.ptp(found, axis=1).max() < 1e-12


def test_spread_and_skew_are_those_without_measurement_error() -> None:
    rng = np.random.default_rng(6)
    truth = rng.gamma(4.0, 1.0, 40_000)  # spread 2, skew 1: exact
    u = 0.5 * truth  # grows with the value
    read = truth + u * rng.normal(size=len(truth))
    session = np.array([f"s{k % 50:02d}" for k in range(len(truth))])
    found = intrinsic(LotFree(sample(read, own=0.5 * np.sqrt(np.maximum(read**2 / 1.25, 0.0)), session=session), True))
    # u^2 is read off the blurred value, whose square is 1.25 times too large on average
    assert found.spread == pytest.approx(2.0, abs=0.05)
    assert np.std(read) > 2.8
    plain = intrinsic(LotFree(sample(truth, session=session), True))
    assert plain.spread == pytest.approx(2.0, abs=0.03)
    assert plain.skew == pytest.approx(1.0, abs=0.06)
    grown = intrinsic(LotFree(sample(truth + 0.3 * truth * rng.normal(size=len(truth)), own=0.3 * truth), True))
    assert grown.skew == pytest.approx(1.0, abs=0.12)  # 1.35 more without the errors' own skew taken out
    steady = intrinsic(LotFree(sample(truth + 1.5 * rng.normal(size=len(truth)), own=1.5, session=session), True))
    assert steady.spread == pytest.approx(2.0, abs=0.05)
    assert steady.skew == pytest.approx(1.0, abs=0.12)
    assert abs(steady.spread - 2.0) < 4 * steady.u_spread


def test_shared_error_is_no_spread_between_particles() -> None:
    found = intrinsic(LotFree(sample(np.random.default_rng(7).normal(5, 1, 3000), common=2.0), True))
    assert found.spread == pytest.approx(1.0, abs=0.05)


def particles_and_facts(**mass_entry: Any) -> tuple[pd.DataFrame, dict[str, dict[str, Any]]]:
    particles = pd.DataFrame(
        {"session": ["s1"] * 3, "particle": ["p0", "p1", "p2"], "species": ["bead"] * 3, "flags": [""] * 3,
         "mass_kg": [1e-12] * 3, "charged_with": ["ptfe"] * 3, "status": ["ok"] * 3, "charge_e": [100.0, 110.0, 120.0]}
    )  # fmt: skip
    entry = {"mass_from": "drag", "charge_e": 90.0, "u_charge_e": 30.0, "diameter_um": 19.0, **mass_entry}
    lot = {"mass_from": "diameter", "charge_e": 95.0, "u_charge_e": 30.0, "diameter_um": 20.0}
    facts = {"s1": {"status": "ok", "mass_from": "adjusted", "lot": "prior", "masses": {
        "p0": [entry, lot], "p1": [lot], "p2": [{**lot, "diameter_um": 23.0}]}}}  # fmt: skip
    return particles, facts


def test_spread_never_rests_on_the_lot() -> None:
    particles, facts = particles_and_facts(u_own_charge_e=25.0)
    given = sample([100.0, 110.0, 120.0], own=5.0)
    free = lot_free(given, particles, facts, {"bead": 20.0})
    # p0 by its drag; p1 only by the lot: left out; p2 has an own diameter
    assert free.sample.particle.tolist() == ["p0", "p2"]
    assert free.sample.value.tolist() == [90.0, 95.0]
    assert free.sample.own[0] == 25.0**2
    assert not free.exact  # p2's entry does not say which part of u is its own
    unused = {"s1": {**facts["s1"], "lot": "unused"}}
    assert lot_free(given, particles, unused, {"bead": 20.0}).sample.value.tolist() == given.value.tolist()
    assert lot_free(given, particles, facts, {}).exact
    particles["flags"] = "size_from_lot"
    assert not len(lot_free(given, particles, facts, {}).sample.value)


def test_lots_are_read_from_the_inputs() -> None:
    inputs = pd.DataFrame({"input": ["species/bead/diameter_um", "species/bead/shape_factor"], "estimate": [20.1, 1.0]})
    assert lot_means(inputs) == {"bead": 20.1}


@pytest.mark.parametrize(("positive", "count"), [(81, 263), (15, 148), (0, 20), (1, 29)])
def test_wilson_interval_is_that_of_scipy(positive: int, count: int) -> None:
    wanted = stats.binomtest(positive, count).proportion_ci(0.95, method="wilson")
    assert wilson(positive / count, count, float(stats.norm.ppf(0.975))) == pytest.approx((wanted.low, wanted.high))


def test_wilson_interval_of_newcombe() -> None:
    # Newcombe, Statist. Med. 17 (1998) 857, 81 of 263 (from memory)
    assert wilson(81 / 263, 263, 1.959964) == pytest.approx((0.2553, 0.3662), abs=5e-5)


def test_fraction_positive_counts_sessions_where_sessions_decide_the_sign() -> None:
    session = np.repeat([f"s{k}" for k in range(10)], 20)
    by_session = np.repeat(np.arange(10) % 2 == 0, 20)
    share, low, high = fraction_positive(by_session, session, 0.95)
    assert share == 0.5
    assert (low, high) == pytest.approx(wilson(0.5, 10, float(stats.norm.ppf(0.975))), abs=1e-6)
    mixed = np.tile(np.arange(20) % 2 == 0, 10)
    _, low, high = fraction_positive(mixed, session, 0.95)
    independent = wilson(0.5, 200, float(stats.t.ppf(0.975, 9)))
    assert high - low == pytest.approx(independent[1] - independent[0], rel=0.05)
    _, low, high = fraction_positive(np.ones(200, bool), session, 0.95)
    assert (low, high) == pytest.approx(wilson(1.0, 10, float(stats.norm.ppf(0.975))), abs=1e-6)
    assert math.isnan(fraction_positive(np.ones(20, bool), session[:20], 0.95)[1])


def campaign_tables(
    sessions: int = 3, count: int = 30
) -> tuple[pd.DataFrame, pd.DataFrame, pd.DataFrame, dict[str, Any]]:
    rng = np.random.default_rng(11)
    rows, parts, facts = [], [], {}
    for k in range(sessions):
        session = f"s{k}"
        facts[session] = {"status": "ok", "date": f"2024-03-0{k + 1}", "charged_with": "wool", "masses": {}}
        for n in range(count):
            charge = float(rng.normal(1e5, 3e4))
            rows.append({"session": session, "particle": f"p{n}", "species": "bead", "charged_with": "wool",
                         "status": "ok", "flags": "", "charge_e": charge, "mass_kg": 5e-12})  # fmt: skip
            head = {"session": session, "particle": f"p{n}", "result": "charge", "unit": "C"}
            parts.append(
                {**head, "input": f"particle/{session}/p{n}/1", "scope": "particle", "component": 2e3 * E_CHARGE}
            )
            parts.append({**head, "input": "trap/x/d", "scope": "trap", "component": 0.02 * charge * E_CHARGE})
    inputs = pd.DataFrame({"input": ["trap/x/d"], "estimate": [60.0]})
    return pd.DataFrame(rows), pd.DataFrame(parts), inputs, facts


def test_lost_particles_and_the_window_stand_beside_the_histogram() -> None:
    particles, parts, inputs, facts = campaign_tables()
    lost = {"particle": "x1", "reason": "flew off", "species": "bead", "charged_with": "wool"}
    facts["s1"]["lost"] = [lost, {**lost, "particle": "x2", "species": "dust"}]
    facts["s0"]["window"] = {"positive_C_per_kg": [1e-3, 5e-3], "negative_C_per_kg": None}
    facts["s2"]["window"] = {"positive_C_per_kg": [2e-3, 9e-3], "negative_C_per_kg": None}
    found = distributions(particles, parts, inputs, facts, draws=200)
    said = " ".join(charge_statements(found, facts, "charged_with"))
    assert "wool, bead: lost and not in the histogram: 1 (flew off)" in said
    assert "wool, dust: 1 particle lost" in said
    assert "no session logged a voltage that would have held a negative particle" in said
    (row,) = summary_rows(found)
    assert (row["group"], row["species"], row["particles"], row["lost"]) == ("wool", "bead", 90, 1)
    positive = int((particles["charge_e"] > 0).sum())
    assert row["fraction_positive_least"] == pytest.approx(positive / 91)
    assert row["fraction_positive_most"] == pytest.approx((positive + 1) / 91)
    assert row["window_positive_low_e"] == pytest.approx(1e-3 * 5e-12 / E_CHARGE)
    assert row["window_positive_high_e"] == pytest.approx(9e-3 * 5e-12 / E_CHARGE)
    assert math.isnan(row["window_negative_low_e"])
    assert row["intrinsic_basis"] == "estimate"
    assert row["intrinsic_spread_e"] == pytest.approx(float(np.std(particles["charge_e"], ddof=1)), rel=0.02)


def test_tables_of_a_histogram_add_up() -> None:
    particles, parts, inputs, facts = campaign_tables()
    found = distributions(particles, parts, inputs, facts, draws=200)
    listed = list(histogram_rows(found))
    assert sum(row["count"] for row in listed) == 90
    assert listed[-1]["cumulative_share"] == pytest.approx(1.0)
    assert all(row["count_low"] <= row["count_high"] for row in listed)
    assert any(row["count_low"] < row["count_high"] for row in listed)
    for name, made in (("histogram", listed), ("charge_distribution", list(distribution_rows(found))),
                       ("charge_summary", list(summary_rows(found)))):  # fmt: skip
        assert tables.table_text(COLUMNS[name], made).count("\n") == len(made) + 1
    smeared = [row["share_smeared"] for row in distribution_rows(found)]
    assert smeared == sorted(smeared)


def session(**more: Any) -> Session:
    exact = Quantity(1.0)
    given: dict[str, Any] = {
        "id": "s1", "date": "2024-03-04", "trap": "ring", "species": "bead", "charged_with": "wool",
        "air": Air(Quantity(295.0), Quantity(1e5), Quantity(0.4)), "site": Site(Quantity(9.8), None, None),
        "gain": {"dc_voltage": Quantity(2.0), "drive_voltage": exact, "height": exact},
        "offset": {"dc_voltage": Quantity(1.0)}, "reading": {}, "secular_reading": None, "height_reading": None,
        "operator": "", "instruments": {}, "contacts": None, "attributes": {}, "exclude": "", "notes": "",
    }  # fmt: skip
    return Session(**{**given, **more})


def logs(balance: dict[str, list[Any]], lost: dict[str, list[Any]] | None = None) -> Logs:
    return Logs({"balance": pd.DataFrame(balance)}, {}, {}, None, None if lost is None else pd.DataFrame(lost))


def test_window_is_the_weight_over_the_largest_voltage_and_the_edge_of_stability() -> None:
    trap = Trap("ring", Quantity(50.0), Quantity(1e4), Quantity(0.0), -1, None, "")
    balance = {"drive_amplitude": [800.0, 1000.0], "drive_frequency": [50.0, 50.0], "balance_voltage": [-99.5, 49.5]}
    found = window_record(session(), trap, logs(balance), math.nan)
    # true voltages: -(2 x -99.5 + 1) = 198 and -(2 x 49.5 + 1) = -100; |q/m| = g/(D |U|)
    assert found["dc_V"] == [-100.0, 198.0]
    assert found["positive_C_per_kg"][0] == pytest.approx(9.8 / (50 * 198))
    assert found["negative_C_per_kg"][0] == pytest.approx(9.8 / (50 * 100))
    # first stable region of Mathieu's equation ends at q = 0.908046 = 4 h: h = s A V / (2 Omega^2)
    omega = 2 * math.pi * 50
    assert found["positive_C_per_kg"][1] == pytest.approx(0.908046 / 4 * 2 * omega**2 / (1e4 * 800), rel=1e-6)
    lost = {"particle": ["x"], "reason": ["fell"], "drive_amplitude": [math.nan], "dc_voltage": [-249.5]}
    wider = window_record(session(), trap, logs(balance, lost), math.nan)
    assert wider["positive_C_per_kg"][0] == pytest.approx(9.8 / (50 * 498))
    no_ring = Trap("ring", Quantity(50.0), None, Quantity(0.0), 1, None, "")
    assert window_record(session(), no_ring, logs(balance), math.nan)["positive_C_per_kg"][1] is None


def test_voltage_of_one_sign_holds_particles_of_one_sign() -> None:
    trap = Trap("ring", Quantity(50.0), Quantity(1e4), Quantity(0.0), 1, None, "")
    balance = {"drive_amplitude": [800.0], "drive_frequency": [50.0], "balance_voltage": [100.0]}
    assert window_record(session(), trap, logs(balance), 100.0)["negative_C_per_kg"] is None


def test_drag_widens_the_window() -> None:
    trap = Trap("ring", Quantity(50.0), Quantity(1e4), Quantity(0.0), 1, None, "")
    balance = {"drive_amplitude": [800.0], "drive_frequency": [50.0], "balance_voltage": [100.0]}
    ends = [window_record(session(), trap, logs(balance), drag)["positive_C_per_kg"][1] for drag in (0.0, 400.0)]
    assert ends[1] > 1.5 * ends[0]


def test_lost_particle_keeps_its_own_words() -> None:
    given = logs({}, {"particle": ["x1", "x2"], "reason": ["fell", "fell"], "drive_amplitude": [500.0, math.nan],
                      "dc_voltage": [math.nan, 20.0]})  # fmt: skip
    known = pd.DataFrame({"particle": ["x2"], "species": ["dust"], "charged_with": [""]})
    first, second = lost_record(session(), Logs(given.tables, {}, {}, known, given.lost))
    assert (first["species"], first["charged_with"], first["drive_V"], first["dc_V"]) == ("bead", "wool", 500.0, None)
    assert (second["species"], second["charged_with"]) == ("dust", "wool")
    assert lost_record(session(), logs({})) == []


def test_example_campaign_counts_its_lost_particles(tmp_path: Path) -> None:
    from reduction.errors import Faults
    from reduction.logs import read_logs
    from reduction.settings import load_campaign

    folder = Path(__file__).resolve().parent.parent / "data_example"
    campaign = load_campaign(folder, faults=Faults())
    found = {name: lost_record(one, read_logs(folder, one, faults=Faults())) for name, one in campaign.sessions.items()}
    told = {name: len([line for line in (folder / "sessions" / name / "lost.csv").read_text().splitlines()
                       if line and not line.startswith(("#", "particle"))])
            for name in campaign.sessions if (folder / "sessions" / name / "lost.csv").is_file()}  # fmt: skip
    assert {name: len(listed) for name, listed in found.items() if listed} == told
    assert sum(told.values()) > 0
