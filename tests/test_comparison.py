"""Group means with the session as the unit, their differences and ratios, and how often they are wrong."""

from __future__ import annotations

import json
import math
from collections.abc import Mapping
from typing import Any

import numpy as np
import pandas as pd
import pytest
from scipy import stats

from reduction import tables
from reduction.comparison import (
    COLUMNS,
    Comparison,
    compare,
    comparison_columns,
    comparison_rows,
    contrast_columns,
    contrast_rows,
    series_rows,
    session_rows,
    trend_rows,
)
from reduction.comparisonwords import summary
from reduction.groupmeans import group_means
from reduction.multiplicity import holm, smallest_p
from reduction.pairs import pairs_of
from reduction.planning import Components, simulated_cells
from reduction.sessionmeans import cells_of, gather

# NIST StRD SiRstv, silicon resistivity by five instruments; certified: between instruments 4 degrees of freedom, sum of
# squares 5.11462616e-2, within 20, 2.16636560e-1 (the data file that scipy ships).
SILICON = [
    [196.3052, 196.1240, 196.1890, 196.2569, 196.3403],
    [196.3042, 196.3825, 196.1669, 196.3257, 196.0422],
    [196.1303, 196.2005, 196.2889, 196.0343, 196.1811],
    [196.2795, 196.1748, 196.1494, 196.1485, 195.9885],
    [196.2119, 196.1051, 196.1850, 196.0052, 196.2090],
]
BETWEEN, WITHIN = 5.11462616e-2 / 4, 2.16636560e-1 / 20


def rows(values: Mapping[str, Mapping[str, list[float]]], **extra: Any) -> pd.DataFrame:
    """particles.csv of groups of sessions of values, charge_to_mass."""
    listed = [
        {
            "session": session, "particle": f"p{k:02d}", "species": "bead", "charged_with": group, "status": "ok",
            "flags": "", "charge_to_mass_C_per_kg": value, "charge_e": value, **extra,
        }
        for group, sessions in values.items() for session, found in sessions.items() for k, value in enumerate(found)
    ]  # fmt: skip
    return pd.DataFrame(listed)


def parts(particles: pd.DataFrame, shared: Mapping[str, Any], own: float = 0.0) -> pd.DataFrame:
    """components.csv: own u, and for each shared name a component, a number or a function of the row."""
    listed = []
    for row in particles.to_dict("records"):
        head = {"session": row["session"], "particle": row["particle"], "result": "charge_to_mass", "unit": "C/kg"}
        name = f"particle/{row['session']}/{row['particle']}/1"
        listed.append({**head, "input": name, "scope": "particle", "component": own})
        for name, component in shared.items():
            found = component(row) if callable(component) else component
            full = name.format(**row)
            listed.append({**head, "input": full, "scope": full.split("/")[0], "component": found})
    columns = ["session", "particle", "result", "input", "scope", "component", "unit"]
    return pd.DataFrame(listed, columns=columns)


def facts(particles: pd.DataFrame, **more: Any) -> dict[str, dict[str, Any]]:
    found = {}
    for session in sorted(set(particles["session"])):
        found[session] = {
            "status": "ok", "date": f"2024-03-{len(found) + 1:02d}", "contacts": 10.0, "attributes": {},
            "air": {"relative_humidity_percent": f"{40 + len(found)}(1)", "temperature_degC": "21.0(2)"}, **more,
        }  # fmt: skip
    return found


def run(
    values: Mapping[str, Mapping[str, list[float]]], shared: Mapping[str, Any] | None = None, **more: Any
) -> Comparison:
    particles = rows(values)
    given = {"trials": 2000, **more}
    return compare(particles, parts(particles, shared or {}, given.pop("own", 0.0)), facts(particles), **given)


def test_components_between_and_within_are_those_of_the_certified_analysis_of_variance() -> None:
    found = run({"silicon": {f"i{k}": row for k, row in enumerate(SILICON, 1)}})
    (one,) = found.means.groups
    assert one.particle_variance == pytest.approx(WITHIN, rel=1e-8)
    assert one.tau_squared == pytest.approx((BETWEEN - WITHIN) / 5, rel=1e-7)
    assert one.correlation_within == pytest.approx((BETWEEN - WITHIN) / (BETWEEN + 4 * WITHIN), rel=1e-7)
    u, freedom, low, high = found.interval(0)
    assert u == pytest.approx(math.sqrt(BETWEEN / 25), rel=1e-8)
    assert freedom == pytest.approx(4)
    assert (high - low) / 2 == pytest.approx(float(stats.t.ppf(0.975, 4)) * u)
    assert one.tau_squared_restricted == pytest.approx(one.tau_squared, rel=1e-6)  # equal sessions: all agree


def test_pairs_of_sessions_of_one_particle_are_welchs_test() -> None:
    a, b = [1.3, 2.9, 2.2, 4.1], [5.1, 4.4, 9.0]
    found = run({"a": {f"s{k}": [v] for k, v in enumerate(a)}, "b": {f"t{k}": [v] for k, v in enumerate(b)}})
    (pair,) = found.pairs
    welch = stats.ttest_ind(a, b, equal_var=False)
    assert pair.p == pytest.approx(welch.pvalue, rel=1e-10)
    assert pair.freedom == pytest.approx(welch.df, rel=1e-10)
    interval = welch.confidence_interval(0.95)
    assert (pair.low, pair.high) == pytest.approx((interval.low, interval.high), rel=1e-10)


def test_holm_as_the_r_package_multtest_adjusts() -> None:
    # raw p and Holm's column of mt.rawp2adjp, as statsmodels carries them in its tests
    p = [0.838541367553, 0.642193923795, 0.680845947633, 0.967833824309, 0.71626938238, 0.177096952723,
         5.23656777208e-05, 0.0202732688798, 0.00028140506198, 0.0149877310796]  # fmt: skip
    wanted = [1, 1, 1, 1, 1, 1, 5.23656777208e-04, 0.1419128821586, 2.53264555782e-03, 0.1199018486368]
    assert holm(np.array(p)).tolist() == pytest.approx(wanted, rel=1e-11)
    p = [0.001, 0.002, 0.003, 0.004, 0.005, 0.05, 0.06, 0.07, 0.08, 0.09]
    wanted = [0.01, 0.018, 0.024, 0.028, 0.03, 0.25, 0.25, 0.25, 0.25, 0.25]
    assert holm(np.array(p)).tolist() == pytest.approx(wanted)


def test_holm_passes_over_what_was_not_tested() -> None:
    adjusted = holm(np.array([0.01, math.nan, 0.04]))
    assert adjusted[[0, 2]].tolist() == pytest.approx([0.02, 0.04])
    assert math.isnan(adjusted[1])


@pytest.mark.parametrize(("sessions", "least"), [(2, 1 / 3), (3, 0.1), (4, 2 / 70), (5, 2 / 252)])
def test_smallest_p_counts_the_exchanges(sessions: int, least: float) -> None:
    assert smallest_p(sessions, sessions) == pytest.approx(least)
    exact = stats.permutation_test(
        (np.zeros(sessions) + np.arange(sessions) * 1e-3, 10 + np.arange(sessions) * 1e-3),
        lambda x, y: np.mean(x) - np.mean(y), n_resamples=np.inf,
    )  # fmt: skip
    assert exact.pvalue == pytest.approx(least)


def test_session_mean_is_unweighted_although_u_grows_with_the_value() -> None:
    found = run({"a": {"s1": [1.0, 3.0], "s2": [2.0, 6.0]}})
    assert found.cells.mean.tolist() == [2.0, 4.0]
    particles = rows({"a": {"s1": [1.0, 3.0], "s2": [2.0, 6.0]}})
    grown = parts(particles, {"trap/x/d": lambda row: 0.2 * row["charge_to_mass_C_per_kg"]})
    heavy = compare(particles, grown, facts(particles), trials=100)
    assert heavy.means.mean.tolist() == found.means.mean.tolist()


def test_what_groups_share_cancels_in_ratio_and_not_in_the_mean() -> None:
    values = {
        "a": {f"s{k}": [v - 0.01, v, v + 0.01] for k, v in enumerate([2.00, 2.02, 1.98, 2.01])},
        "b": {f"t{k}": [v - 0.01, v, v + 0.01] for k, v in enumerate([1.00, 1.01, 0.99, 1.00])},
    }
    scale = {"trap/x/d": lambda row: 0.03 * row["charge_to_mass_C_per_kg"]}  # 3 % in every value alike
    bare, shared = run(values), run(values, scale)
    assert bare.interval(0)[0] < 0.02
    assert shared.interval(0)[0] == pytest.approx(math.hypot(0.06, bare.interval(0)[0]), rel=0.01)
    (plain,), (pair,) = bare.pairs, shared.pairs
    assert pair.u == pytest.approx(math.hypot(0.03, plain.u), rel=0.01)  # 3 % of the difference stay in the difference
    # and nothing in the ratio, but that an error in proportion explains a few 1e-3 of the scatter it is held against
    assert pair.u_ratio == pytest.approx(plain.u_ratio, rel=3e-3)
    assert pair.ratio_low < 2.0 < pair.ratio_high


def test_shared_errors_do_not_shrink_with_more_sessions() -> None:
    rng = np.random.default_rng(2)
    values = {"a": {f"s{k:03d}": rng.normal(10, 0.01, 3).tolist() for k in range(150)}}
    u, freedom, _, _ = run(values, {"campaign//viscosity": 0.3}).interval(0)
    assert u == pytest.approx(0.3, rel=1e-3)
    assert freedom > 1e5
    own, *_ = run(values, {"session/{session}/stray": 0.3}).interval(0)
    assert own == pytest.approx(0.3 / math.sqrt(150), rel=1e-2)


def test_sessions_that_happen_to_agree_do_not_beat_the_scatter_of_their_particles() -> None:
    found = run({"a": {"s1": [1.0, 3.0], "s2": [0.0, 4.0]}})
    pooled = (2.0 + 8.0) / 2  # of a particle
    assert found.interval(0)[0] == pytest.approx(math.sqrt(pooled / 4))


def test_measurement_error_is_taken_out_of_the_spread_between_particles() -> None:
    rng = np.random.default_rng(8)
    values = {"a": {f"s{k:02d}": rng.normal(0, math.hypot(1.0, 0.8), 50).tolist() for k in range(40)}}
    (one,) = run(values, {"session/{session}/x": 0.5}, own=0.8).means.groups
    assert one.particle_variance == pytest.approx(1.0, abs=0.11)  # 2000 particles: u of a variance 1.64 is 0.05


def test_one_session_is_described_and_not_tested() -> None:
    found = run(
        {"a": {"s1": [1.0, 2.0, 3.0]}, "b": {"t1": [4.0, 5.0], "t2": [5.0, 7.0]}, "c": {"u1": [1.0], "u2": [2.0]}}
    )
    first, second, _ = comparison_rows(found)
    assert first["sessions"] == 1
    assert first["mean"] == 2.0
    assert all(math.isnan(first[name]) for name in ("u_mean", "low", "high", "between_sessions", "rank_1", "rank_low"))
    assert "one session" in first["note"]
    assert second["note"] == ""
    by_pair = {(row["group_a"], row["group_b"]): row for row in contrast_rows(found)}
    assert math.isnan(by_pair["a", "b"]["p"])
    assert math.isnan(by_pair["a", "b"]["p_holm"])
    assert by_pair["a", "b"]["smallest_p"] == pytest.approx(2 / 3)
    assert "not tested" in by_pair["a", "b"]["note"]
    assert by_pair["b", "c"]["p"] == by_pair["b", "c"]["p_holm"]  # the only test there is
    said = " ".join(summary(found)["statements"])
    assert "a: one session, described and not tested" in said
    assert "below 0.67" in said


def test_what_has_no_sign_or_no_value_is_left_out_and_counted() -> None:
    particles = rows({"a": {"s1": [1.0, 2.0, 3.0, 4.0], "s2": [1.0, 2.0, 2.5]}})
    particles.loc[3, "flags"] = "outlier_reading;sign_undetermined"
    particles.loc[2, "charge_to_mass_C_per_kg"] = math.nan
    particles.loc[1, "status"] = "excluded"
    given = facts(particles)
    found = compare(particles, parts(particles, {}), given, trials=100)
    (row,) = comparison_rows(found)
    assert row["particles"] == 4
    assert (row["sign_undetermined"], row["not_determined"], row["excluded"]) == (1, 1, 1)
    given["s2"]["status"] = "excluded"
    assert compare(particles, parts(particles, {}), given, trials=100).means.groups[0].particles == 1


def test_groups_by_a_word_of_the_session() -> None:
    particles = rows({"a": {"s1": [1.0, 2.0], "s2": [3.0, 4.0]}})
    given = facts(particles, trap="ring-a")
    given["s1"] |= {"attributes": {"lot": "B7"}, "lot": "prior"}  # the latter an option of the reduction
    given["s2"]["attributes"] = {"lot": "B8"}
    assert compare(particles, parts(particles, {}), given, by="lot", trials=100).cells.group == ("B7", "B8")
    assert compare(particles, parts(particles, {}), given, by="trap", trials=100).cells.group == ("ring-a", "ring-a")
    given["s2"]["attributes"] = {}
    found = compare(particles, parts(particles, {}), given, by="lot", trials=100)
    assert found.sample.left_out == {"": {"no_group": 2}}


def test_charge_is_compared_in_electrons() -> None:
    particles = rows({"a": {"s1": [1e5, 2e5], "s2": [1.5e5, 1e5]}})
    given = parts(particles, {})
    given["result"], given["component"] = "charge", 1.602176634e-15  # 10^4 e of each particle's own
    sample = gather(particles, given, facts(particles), quantity="charge")
    assert sample.unit == "e"
    assert sample.u.tolist() == pytest.approx([1e4] * 4)


def test_sample_covariance_is_the_sum_of_products_over_equal_names() -> None:
    particles = rows({"a": {"s1": [1.0, 2.0], "s2": [3.0]}, "b": {"s2": [4.0]}})
    particles.loc[3, "particle"] = "p07"  # the second particle of s2, of another group
    given = parts(
        particles, {"trap/x/d": lambda row: 0.1 * row["charge_to_mass_C_per_kg"], "session/{session}/e": 0.2}, 0.3
    )
    cells = cells_of(gather(particles, given, facts(particles)))
    assert list(zip(cells.group, cells.session, strict=True)) == [("a", "s1"), ("a", "s2"), ("b", "s2")]
    covariance = np.diag(cells.own) + cells.shared @ cells.shared.T
    wanted = np.diag([0.09 / 2, 0.09, 0.09]) + 0.01 * np.outer([1.5, 3, 4], [1.5, 3, 4])
    wanted += 0.04 * np.array([[1, 0, 0], [0, 1, 1], [0, 1, 1]])
    assert covariance == pytest.approx(wanted)


def test_ratio_interval_holds_every_ratio_that_cannot_be_ruled_out() -> None:
    found = run({"a": {"s1": [4.1], "s2": [3.8], "s3": [4.4]}, "b": {"t1": [2.0], "t2": [2.3], "t3": [2.1]}})
    (pair,) = found.pairs
    for ratio in (pair.ratio_low, pair.ratio_high):
        combination = np.array([1.0, -ratio])
        # Fieller: the end is where the t of mean_a - r mean_b is the t of the interval
        t = abs(combination @ found.means.mean) / math.sqrt(found.means.variance(combination))
        at = np.array([1.0, -pair.ratio])
        assert t == pytest.approx(float(stats.t.ppf(0.975, found.means.freedom(at))), rel=1e-9)
    near_zero = run({"a": {"s1": [4.1], "s2": [3.8]}, "b": {"t1": [-2.0], "t2": [2.3]}})
    assert math.isnan(near_zero.pairs[0].ratio_low)


def test_trend_is_the_least_squares_slope_within_groups() -> None:
    rng = np.random.default_rng(4)
    values = {g: {f"{g}{k}": rng.normal(size=1).tolist() for k in range(6)} for g in "ab"}
    particles = rows(values)
    given = facts(particles)
    humidity = rng.uniform(20, 60, 12)
    for fact, x in zip(given.values(), humidity, strict=True):
        fact["air"]["relative_humidity_percent"] = repr(float(x))
    found = compare(particles, parts(particles, {}), given, trials=100)
    slope = found.trends[0]
    assert slope.covariate == "relative_humidity"
    y = found.cells.mean
    in_group = np.array([[g == "a", g == "b"] for g in found.cells.group], dtype=float)
    scale = np.array([1 / math.sqrt(found.means.groups[g == "b"].tau_squared) for g in found.cells.group])
    design = np.column_stack([in_group, humidity]) * scale[:, None]
    solved, square, _, _ = np.linalg.lstsq(design, y * scale, rcond=None)
    covariance = np.linalg.inv(design.T @ design) * square[0] / 9
    assert slope.slope == pytest.approx(solved[2])
    assert slope.u == pytest.approx(math.sqrt(covariance[2, 2]))
    assert slope.freedom == 9
    assert slope.p == pytest.approx(2 * stats.t.sf(abs(solved[2]) / math.sqrt(covariance[2, 2]), 9))
    contacts = next(one for one in found.trends if one.covariate == "contacts")
    assert "does not vary" in contacts.note
    assert math.isnan(contacts.p)


def species_campaign(signs: Mapping[tuple[str, str], float]) -> Comparison:
    listed = []
    for (species, material), value in signs.items():
        for k in range(3):
            one = rows({material: {f"{species}-{material}-{k}": [value - 0.1, value + 0.02 * k, value + 0.1]}})
            one["species"] = species
            listed.append(one)
    particles = pd.concat(listed, ignore_index=True)
    return compare(particles, parts(particles, {}), facts(particles), trials=100)


def test_triangle_that_runs_in_a_circle_is_named() -> None:
    around = species_campaign({("a", "b"): 1.0, ("b", "c"): 1.0, ("c", "a"): 1.0})
    assert [(one.kind, one.verdict) for one in around.series] == [("triangle", "contradictory")]
    assert "a, b and c run in a circle" in " ".join(summary(around)["statements"])
    in_line = species_campaign({("a", "b"): 1.0, ("b", "c"): 1.0, ("a", "c"): 1.0})
    assert [one.verdict for one in in_line.series] == ["consistent"]
    open_ = species_campaign({("a", "b"): 1.0, ("b", "c"): 0.0, ("a", "c"): 1.0})
    assert [one.verdict for one in open_.series] == ["undecided"]


def test_two_species_that_see_opposite_orders_are_named() -> None:
    signs = {("x", "p"): 1.0, ("x", "q"): 2.0, ("y", "p"): 2.0, ("y", "q"): 1.0}
    assert [row["verdict"] for row in series_rows(species_campaign(signs))] == ["contradictory"]
    signs = {("x", "p"): 1.0, ("x", "q"): 2.0, ("y", "p"): 3.0, ("y", "q"): 5.0}
    assert [row["verdict"] for row in series_rows(species_campaign(signs))] == ["consistent"]


def test_tables_have_their_columns_and_the_summary_is_plain_json() -> None:
    found = run(
        {"a": {"s1": [1.0, 1.1], "s2": [2.0, 2.2]}, "b": {"t1": [4.0, 4.4], "t2": [5.0, 5.1]}}, {"trap/x/d": 0.1}
    )
    assert comparison_columns(found)[:12] == [*tables.COLUMNS["comparison"], "rank_1", "rank_2"]
    text = tables.table_text(comparison_columns(found), comparison_rows(found))
    assert text.count("\n") == 3
    assert tables.table_text(contrast_columns(), contrast_rows(found)).count("\n") == 2
    assert tables.table_text(COLUMNS["trends"], trend_rows(found)).count("\n") == 5
    assert tables.table_text(COLUMNS["session_means"], session_rows(found)).count("\n") == 5
    record = summary(found)
    assert json.loads(json.dumps(record, allow_nan=False)) == record
    for row in comparison_rows(found):
        parts_of_u = [row[name] for name in ("u_from_sessions", "u_from_particles", "u_from_shared")]
        assert math.hypot(*parts_of_u) == pytest.approx(row["u_mean"])
        assert row["low"] < row["mean"] < row["high"]
    assert sum(record["shrink"][0]["shares"].values()) == pytest.approx(1.0)


def test_nothing_to_compare_is_said() -> None:
    particles = rows({"a": {"s1": [math.nan]}})
    found = compare(particles, parts(particles, {}), facts(particles), trials=100)
    assert list(comparison_rows(found)) == []
    assert "nothing is compared" in summary(found)["statements"][0]


def simulated(correlation: float, trials: int, sessions: int, particles: int, **more: float) -> list[Any]:
    rng = np.random.default_rng(19)
    components = Components(math.sqrt(correlation), math.sqrt(1.0 - correlation), **more)
    return [group_means(simulated_cells(rng, components, 0.0, sessions, particles)) for _ in range(trials)]


def test_false_alarms_stay_near_the_level_with_three_sessions_of_twenty() -> None:
    # Nominal 5 %; a test on particles gives 26 to 60 % here (tests/studies/false_alarms.py has the whole table).
    for correlation in (0.1, 0.3, 0.5):
        hits = [pairs_of(means, coverage=0.95)[0].p < 0.05 for means in simulated(correlation, 1500, 3, 20)]
        share, u = float(np.mean(hits)), math.sqrt(0.05 * 0.95 / 1500)
        assert 0.02 < share < 0.05 + 3 * u, correlation


@pytest.mark.parametrize(
    ("sessions", "particles", "more"),
    [(4, 8, {}), (10, 5, {}), (5, 8, {"u_particle": 0.5, "u_session": 0.4}), (6, 8, {"u_shared": 1.0})],
)
def test_interval_of_a_group_mean_covers_the_truth_as_often_as_stated(
    sessions: int, particles: int, more: dict[str, float]
) -> None:
    found = simulated(0.4, 1500, sessions, particles, **more)
    unit = np.array([1.0, 0.0])
    hits = []
    for means in found:
        half = float(stats.t.ppf(0.975, means.freedom(unit))) * math.sqrt(means.variance(unit))
        hits.append(abs(float(means.mean[0])) <= half)
    # known bound: never short of 95 % by more than three standard errors; the floor under the scatter may widen it
    assert 0.95 - 3 * math.sqrt(0.05 * 0.95 / 1500) <= float(np.mean(hits)) <= 0.985


def test_interval_covers_with_sessions_of_very_different_size() -> None:
    rng = np.random.default_rng(31)
    hits = 0
    for _ in range(600):
        values = {
            f"s{k}": (rng.normal(0, 0.6) + rng.normal(0, 1, n)).tolist() for k, n in enumerate([1, 2, 4, 10, 30, 60])
        }
        particles = rows({"a": values})
        means = group_means(cells_of(gather(particles, parts(particles.head(0), {}), facts(particles))))
        unit = np.array([1.0])
        half = float(stats.t.ppf(0.975, means.freedom(unit))) * math.sqrt(means.variance(unit))
        hits += abs(float(means.mean[0])) <= half
    assert 0.95 - 3 * math.sqrt(0.05 * 0.95 / 600) <= hits / 600 <= 0.985


def test_errors_of_sessions_are_not_taken_for_differences_between_them() -> None:
    y = [1.0, 2.0, 4.0, 3.5]
    found = run({"a": {f"s{k}": [v] for k, v in enumerate(y)}}, {"session/{session}/stray": 0.5})
    (one,) = found.means.groups
    # exact: every session mean has the variance tau^2 + 0.25
    assert one.tau_squared == pytest.approx(float(np.var(y, ddof=1)) - 0.25)
    assert found.interval(0)[0] == pytest.approx(float(np.std(y, ddof=1)) / 2)


def test_intervals_of_all_pairs_at_once_are_bonferronis() -> None:
    found = run(
        {name: {f"{name}{k}": [level + v] for k, v in enumerate([0.0, 0.3, 0.1])} for level, name in enumerate("abc")}
    )
    for one in found.pairs:
        half = float(stats.t.ppf(1 - 0.05 / 3 / 2, one.freedom)) * one.u
        assert (one.low_all, one.high_all) == pytest.approx((one.difference - half, one.difference + half))
