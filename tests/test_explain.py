"""The account of one particle's number: its formulas filled in must give what the tables hold."""

from __future__ import annotations

import csv
import json
import math
import re
import shutil
from collections.abc import Callable
from dataclasses import replace
from pathlib import Path

import pytest

from reduction.errors import Faults, ResultsError
from reduction.explain import explain
from reduction.logs import read_logs
from reduction.session import reduce_session
from reduction.settings import load_campaign
from reduction.simulation import PLANS, Habits, simulate_campaign
from reduction.tables import read_table

SESSIONS = {"s001": "room_air_light", "s002": "room_air_dense"}


@pytest.fixture(scope="module")
def results(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """A results folder of two sessions, put together from their records."""
    place = tmp_path_factory.mktemp("explain")
    plan = replace(
        PLANS["all"], regimes=tuple(SESSIONS.values()), sessions=2, particles=3, options={"adjust": "session"}
    )
    untidy = Habits(
        outlier_readings=("height:p01:4",),
        excluded_readings={"balance:p01:2": "door opened"},
        excluded_particles={"p03": "two stuck together"},
    )
    plan = replace(plan, differing={"s001": untidy, "s002": Habits(height_reading="streak_middle")})
    simulate_campaign(place / "campaign", plan=plan, seed=11)
    faults = Faults()
    campaign = load_campaign(place / "campaign", faults=faults)
    folder = place / "results"
    (folder / "readings").mkdir(parents=True)
    for session in campaign.session_ids:
        record = reduce_session(campaign, session, read_logs(campaign.folder, session, faults=faults))
        saved = folder / ".motescale" / "records" / session / "0f3a"
        saved.parent.mkdir(parents=True)
        record.save(saved)
        for name in ("particles", "methods", "agreement", "budget"):
            text = (saved / f"{name}.csv").read_text(encoding="utf-8")
            path = folder / f"{name}.csv"
            path.write_text((path.read_text(encoding="utf-8") + text.partition("\n")[2]) if path.exists() else text)
        shutil.copy(saved / "readings.csv", folder / "readings" / f"{session}.csv")
    assert not list(faults)
    return folder


def row(results: Path, session: str, particle: str, method: str = "") -> dict[str, str]:
    with (results / ("methods.csv" if method else "particles.csv")).open(encoding="utf-8", newline="") as stream:
        return next(
            one
            for one in csv.DictReader(stream)
            if (one["session"], one["particle"], one.get("method", "")) == (session, particle, method)
        )


def number_after(text: str, pattern: str) -> float:
    found = re.search(pattern + r"\s*([-+]?[\d.]+(?:e[-+]?\d+)?)", text)
    assert found, f"{pattern} not in\n{text}"
    return float(found[1])


def evaluated(text: str, symbol: str, formula: str) -> float:
    """Value of an equation computed from the numbers printed after its formula."""
    found = re.search(re.escape(f"{symbol} = {formula}") + r"\s*= ([^=]+?)\s*=", text)
    assert found, f"{symbol} = {formula} not in\n{text}"
    words = found[1].replace(" (1 - ", " * (1 - ").replace(" x ", " * ").replace("^", "**").replace("pi", repr(math.pi))
    assert re.fullmatch(r"[-+*/()\d.e\s]+", words), words
    return arithmetic(words)


def arithmetic(text: str) -> float:
    """Sums, products and powers of numbers, by recursive descent."""
    tokens = re.findall(r"\d+\.?\d*(?:e[-+]?\d+)?|\*\*|[-+*/()]", text)

    def atom() -> float:
        token = tokens.pop(0)
        if token == "(":
            value = total()
            assert tokens.pop(0) == ")"
            return value
        return -atom() if token == "-" else atom() if token == "+" else float(token)

    def power() -> float:
        value = atom()
        if tokens and tokens[0] == "**":
            tokens.pop(0)
            value = value ** atom()
        return value

    def chain(part: Callable[[], float], more: str, less: str, join: Callable[[float, str, float], float]) -> float:
        value = part()
        while tokens and tokens[0] in (more, less):
            sign = tokens.pop(0)
            value = join(value, sign, part())
        return value

    def product() -> float:
        return chain(power, "*", "/", lambda a, sign, b: a * b if sign == "*" else a / b)

    def total() -> float:
        return chain(product, "+", "-", lambda a, sign, b: a + b if sign == "+" else a - b)

    value = total()
    assert not tokens
    return value


@pytest.mark.parametrize("session", sorted(SESSIONS))
def test_the_formulas_filled_in_give_the_numbers_of_the_table(results: Path, session: str) -> None:
    text, found = explain(results, session, "p02"), row(results, session, "p02")
    diameter = float(found["diameter_um"]) * 1e-6
    gamma = "gamma", "18 eta chi/(rho d^2 C(d))"
    lot, adjusted = text.split("7. From drag to charge")
    alone = float(row(results, session, "p02", "diameter")["drag_rate_per_s"])
    assert evaluated(lot, *gamma) == pytest.approx(alone, rel=1e-4)
    assert evaluated(adjusted, *gamma) == pytest.approx(float(found["drag_rate_per_s"]), rel=1e-4)
    assert "the mean of the lot" in lot
    assert evaluated(text, "m", "rho pi d^3/6") == pytest.approx(float(found["mass_kg"]), rel=1e-4)
    assert evaluated(text, "q", "s m") == pytest.approx(float(found["charge_C"]), rel=1e-4)
    assert evaluated(text, "N", "q/e") == pytest.approx(float(found["charge_e"]), rel=1e-4)
    sigma = float(found["surface_charge_density_C_per_m2"])
    assert evaluated(text, "sigma", "q/(pi d^2)") == pytest.approx(sigma, rel=1e-4)
    balance = float(row(results, session, "p02", "balance")["charge_to_mass_C_per_kg"])
    assert evaluated(text, "s", "g'/(D U + E)") == pytest.approx(balance, rel=1e-4)
    assert number_after(text, r"at d =") == pytest.approx(diameter * 1e6, rel=1e-3)


def test_apparent_gravity_and_scaled_drive_follow_from_the_numbers_printed(results: Path) -> None:
    text = explain(results, "s001", "p02")
    weight = evaluated(text, "g'", "g (1 - rho_air/rho)")
    assert 9.79 < weight < 9.81
    drive = evaluated(text, "h", "s A V/(2 Omega^2)")
    assert drive == pytest.approx(number_after(text, r"s A V/\(2 Omega\^2\) = \S+ x \S+ x \S+ x \S+ ="), rel=1e-4)


def test_each_drive_shows_the_slope_of_the_motion_beside_that_of_the_readings(results: Path) -> None:
    """The exact motion, at the adjusted values, must explain the slope seen: within 4 % here, where noise is small."""
    for session in SESSIONS:
        slopes = re.findall(r"as read: (\S+) mm/V; straight line through the readings: (\S+) mm/V",
                            explain(results, session, "p02"))  # fmt: skip
        assert len(slopes) == 3
        for motion, read in slopes:
            assert float(read) == pytest.approx(float(motion), rel=0.04)


def test_secular_frequencies_stand_beside_what_was_read(results: Path) -> None:
    text = explain(results, "s002", "p02")
    pairs = re.findall(r"= (\S+)\s+Hz;\s+read\s+(\S+)\s+Hz", text)
    assert len(pairs) == 7
    for motion, read in pairs:
        assert float(read) == pytest.approx(float(motion), abs=0.15)


def test_left_out_and_flagged_readings_are_named_with_line_and_reason(results: Path) -> None:
    text = explain(results, "s001", "p01")
    assert re.search(r"line \d+ excluded: door opened", text)
    assert re.search(r"line \d+ flagged: outlier reading", text)
    assert "Flag outlier_reading: " in text


def test_an_excluded_particle_has_no_numbers_and_says_so(results: Path) -> None:
    text = explain(results, "s001", "p03")
    assert "Status: excluded" in text
    assert "two stuck together" in text
    assert "s = not determined" in text
    assert "no mass and no charge" in text
    assert "nan" not in text


def test_every_section_is_there_in_order_within_a_hundred_columns(results: Path) -> None:
    for session in SESSIONS:
        text = explain(results, session, "p01")
        titles = re.findall(r"^(\d)\. (.+)$", text, re.M)
        assert [int(number) for number, _ in titles] == list(range(1, 9))
        assert max(len(line) for line in text.splitlines()) <= 100
        assert text.endswith("\n")
        assert "kilovolts" in text.lower()
        assert "nan" not in text


def test_the_largest_share_of_the_budget_comes_first(results: Path) -> None:
    text = explain(results, "s001", "p02").partition("8. What makes")[2]
    listed = text.partition("charge-to-mass ratio: u that each input causes")[2].partition("diameter: u")[0]
    assert "dc_field_per_volt_per_m" in listed.splitlines()[1]
    shares = [float(share) for share in re.findall(r"(-?[\d.]+) %$", listed, re.M)]
    assert shares[:-1] == sorted(shares[:-1], key=abs, reverse=True)
    assert sum(shares) == pytest.approx(100.0, abs=1.0)


def test_what_limits_a_result_is_said_with_the_share_of_its_table(results: Path) -> None:
    """The trap constants' shares, summed from budget.csv here, are what the sentence says of them."""
    text = " ".join(explain(results, "s001", "p02").split())
    said = re.search(r"Charge-to-mass ratio: the trap constants make up (\d+) % of the variance", text)
    assert said
    with (results / "budget.csv").open(encoding="utf-8", newline="") as stream:
        own = [r for r in csv.DictReader(stream) if (r["session"], r["particle"], r["result"]) ==
               ("s001", "p02", "charge_to_mass") and r["input"].startswith("trap/")]  # fmt: skip
    assert int(said[1]) == round(100 * sum(float(r["share"]) for r in own))


def test_intervals_say_their_coverage_and_where_they_come_from(results: Path, tmp_path: Path) -> None:
    text = " ".join(explain(results, "s001", "p02").split())
    found = row(results, "s001", "p02")
    low = float(found["charge_to_mass_low_C_per_kg"])
    assert number_after(text, "95 % coverage interval") == pytest.approx(low, rel=1e-5)
    assert "95 % coverage, of m and N by Monte Carlo (JCGM 101): joint draws" in text
    shutil.copytree(results, tmp_path / "copy")
    (tmp_path / "copy" / "run.json").write_text('{"settings": {"monte_carlo_trials": 3456}}', encoding="utf-8")
    assert "3456 joint draws" in explain(tmp_path / "copy", "s001", "p02")


def test_strain_of_the_adjustment_is_told_and_how_the_particles_were_adjusted(results: Path) -> None:
    text = " ".join(explain(results, "s001", "p02").split())
    facts = json.loads((results / ".motescale/records/s001/0f3a/session.json").read_text(encoding="utf-8"))
    assert "all particles of the session together (adjust: session)" in text
    assert len(facts["strain"]["sentences"]) > 1
    for sentence in facts["strain"]["sentences"]:
        assert " ".join(sentence.split()) in text


def test_polarity_is_that_of_the_trap(results: Path, tmp_path: Path) -> None:
    """A trap wired the other way round holds the same particle at the opposite reading."""
    shutil.copytree(results, tmp_path / "copy")
    path = tmp_path / "copy/.motescale/records/s001/0f3a/session.json"
    facts = json.loads(path.read_text(encoding="utf-8"))
    sign = f"{facts['dc_polarity']:+d} ("
    other = f"{-facts['dc_polarity']:+d} ("
    path.write_text(json.dumps({**facts, "dc_polarity": -facts["dc_polarity"]}), encoding="utf-8")
    assert f"= {sign}" in explain(results, "s001", "p02")
    assert f"= {other}" in explain(tmp_path / "copy", "s001", "p02")


def test_readings_the_reduction_left_out_are_told_with_the_reason_of_their_method(
    results: Path, tmp_path: Path
) -> None:  # fmt: skip
    shutil.copytree(results, tmp_path / "copy")
    readings, methods = (read_table(results / name) for name in ("readings/s002.csv", "methods.csv"))
    gone = (readings["particle"] == "p02") & (readings["log"] == "secular")
    readings.loc[gone, "status"] = "left_out"
    row_of = (methods["session"] == "s002") & (methods["particle"] == "p02") & (methods["method"] == "secular")
    methods.loc[row_of, ["status", "reason"]] = ["no_oscillation", "the drag is too high"]
    readings.to_csv(tmp_path / "copy/readings/s002.csv", index=False)
    methods.to_csv(tmp_path / "copy/methods.csv", index=False)
    text = " ".join(explain(tmp_path / "copy", "s002", "p02").split())
    assert (
        f"{gone.sum()} readings, 0 used, 0 of these flagged, 0 excluded, {gone.sum()} left out by the reduction" in text
    )
    lines = readings.loc[gone, "line"].astype(int)
    assert f"lines {lines.min()} to {lines.max()} left out: the drag is too high" in text


def test_an_unknown_session_offers_the_nearest(results: Path) -> None:
    with pytest.raises(ResultsError, match="session s01. Did you mean s001"):
        explain(results, "s01", "p01")


def test_an_unknown_particle_offers_the_nearest(results: Path) -> None:
    with pytest.raises(ResultsError, match="session s001 holds no particle p1. Did you mean p01"):
        explain(results, "s001", "p1")


def test_a_folder_without_results_is_said_to_be_one(tmp_path: Path) -> None:
    with pytest.raises(ResultsError, match="expected a results folder"):
        explain(tmp_path, "s001", "p01")


def test_tables_that_no_record_goes_with_are_refused(results: Path, tmp_path: Path) -> None:
    shutil.copytree(results, tmp_path / "copy")
    for path in (tmp_path / "copy").rglob("records/s001/0f3a/particles.csv"):
        path.write_text(path.read_text(encoding="utf-8").replace("ok", "failed"), encoding="utf-8")
    with pytest.raises(ResultsError, match="no record of session s001 goes with particles.csv"):
        explain(tmp_path / "copy", "s001", "p01")
