"""What a session's report says, before it is set: the answers of its first page, its tables, its odd records."""

from __future__ import annotations

import json
import math
import re
from collections.abc import Callable
from pathlib import Path
from typing import Any

import pytest
from fake_record import write_record

from reduction import glance, limits, sessionbudget, sessionreport
from reduction.flags import FLAGS
from reduction.sheets import rows_of
from reduction.tables import COLUMNS, read_table, write_table
from reduction.typeset import MINUS, NONE

Change = Callable[[dict[str, Any]], dict[str, Any] | None]
NUMBERS = [name for name in COLUMNS["particles"] if re.search(r"_(per_\w+|um|kg|C|e)$", name)]


def changed(folder: Path, table: str, change: Change) -> None:
    """Write one table of a record anew, each row as `change` returns it, dropped where that is None."""
    frame = read_table(folder / f"{table}.csv")
    rows = [new for row in rows_of(frame) if (new := change(row)) is not None]
    empty = [{k: None if isinstance(v, float) and math.isnan(v) else v for k, v in row.items()} for row in rows]
    write_table(folder / f"{table}.csv", frame.columns.tolist(), empty)


def facts_changed(folder: Path, **new: object) -> None:
    path = folder / "session.json"
    path.write_text(json.dumps({**json.loads(path.read_text(encoding="utf-8")), **new}), encoding="utf-8")


def said(folder: Path) -> dict[str, Any]:
    return sessionreport.content(folder, digest="0" * 64)[0]


def answer(doc: dict[str, Any], question: str) -> str:
    return " ".join(next(words for asked, words in doc["glance"] if asked == question)).replace("\u00a0", " ")


def column(sheet: dict[str, Any], head: str) -> list[str]:
    at = next(k for k, name in enumerate(sheet["head"]) if name.replace("\n", " ").startswith(head))
    return [row[at] for row in sheet["rows"]]


def test_shares_by_group_are_the_sums_of_the_budget(tmp_path: Path) -> None:
    """All shares of the made-up budget are the squares of its weights, the same for every particle."""
    folder = write_record(tmp_path)
    budget = rows_of(read_table(folder / "budget.csv"))
    groups, _ = limits.shares_of(budget, "charge")
    own = [r for r in budget if r["particle"] == "p01" and r["result"] == "charge"]
    trap = sum(r["share"] for r in own if r["input"].startswith("trap/"))
    assert groups["trap"] == pytest.approx(trap, rel=1e-12)
    assert sum(groups.values()) == pytest.approx(1.0, rel=1e-12)
    told = answer(said(folder), "What limits it")
    assert f"the trap constants make up {100 * trap:.0f} % of the variance" in told


@pytest.mark.parametrize(
    ("name", "group"),
    [
        ("trap/a/dc_field_per_volt_per_m", "trap"),
        ("instrument/supply-2/gain_dc_voltage", "gains"),
        ("session/s1/offset_dc_voltage_V", "gains"),
        ("session/s1/stray_field_V_per_m", "stray"),
        ("instrument/station/temperature_degC", "air"),
        ("session/s1/finite_reynolds", "formulas"),
        ("campaign//slip_formula", "formulas"),
        ("species/x/density_kg_per_m3", "species"),
        ("species/x/diameter_um", "diameter"),
        ("particle/s1/p1/diameter", "diameter"),
        ("particle/s1/p1/height", "own"),
        ("other particles' readings", "others"),
    ],
)
def test_every_input_belongs_to_one_group(name: str, group: str) -> None:
    assert limits.group_of(name) == group


def test_a_result_limited_by_shared_inputs_says_that_more_readings_would_not_help(tmp_path: Path) -> None:
    folder = write_record(tmp_path)

    def without_readings(row: dict[str, Any]) -> dict[str, Any]:
        return {**row, "share": 0.01 if row["input"].startswith("particle/") else row["share"]}

    assert "more readings would hardly narrow it" not in answer(said(folder), "What limits it")
    changed(folder, "budget", without_readings)
    assert answer(said(folder), "What limits it").count("more readings would hardly narrow it") == 2


@pytest.mark.parametrize(("p", "careful"), [(0.2, False), (0.002, True)])
def test_a_strained_adjustment_is_to_be_read_with_care(tmp_path: Path, p: float, careful: bool) -> None:
    folder = write_record(tmp_path, secular=False)
    changed(folder, "agreement", lambda row: {**row, "normalized_error": 0.3})
    changed(folder, "particles", lambda row: {**row, "flags": ""})
    strain = json.loads((folder / "session.json").read_text(encoding="utf-8"))["strain"]
    facts_changed(folder, strain={**strain, "p": p})
    told = answer(said(folder), "Can I trust it?")
    assert told.startswith("Read it with care" if careful else "It fits together")
    assert f"chi-square is 131.4 for 118 degrees of freedom (p = {p:.2g})" in told
    assert "Without p01, which fits least well, no other result would move by more than 0.21" in told


@pytest.mark.parametrize(
    ("errors", "alarming"),
    [
        ([0.9] * 12, False),
        ([1.2, 1.1] + [0.3] * 8, False),  # P(2 or more of 10) = 0.07
        ([1.2, 1.1, 1.1] + [0.3] * 7, True),  # P(3 or more of 10) = 0.009
        ([1.28], False),  # 2.56 u: p = 0.0105
        ([1.3], True),  # 2.6 u: p = 0.0093
        ([1.3] + [0.3] * 9, False),  # ten times that
    ],
)
def test_disagreement_alarms_where_chance_makes_it_less_than_once_in_a_hundred(
    errors: list[float], alarming: bool
) -> None:
    """Binomial and normal probabilities, computed apart with a table of the normal distribution."""
    assert glance._beyond_chance(errors) is alarming


def test_a_pull_beyond_two_is_named_and_one_beyond_chance_warned_of(tmp_path: Path) -> None:
    folder = write_record(tmp_path)
    for pull, warned in ((-2.2, False), (-3.1, True)):
        changed(folder, "inputs", lambda row, pull=pull: {**row, "pull": pull if "dc_field" in row["input"] else 0.1})
        doc = said(folder)
        assert f"dc field per volt of trap ring-a ({MINUS}{-pull:.1f})" in " ".join(doc["fits"])
        assert ("further than chance allows" in answer(doc, "Can I trust it?")) is warned
        assert column(doc["inputs"], "Pull").count(f"{MINUS}{-pull:.2f}") == 1


def test_methods_show_the_residuals_of_the_record_and_keep_each_particle_together(tmp_path: Path) -> None:
    folder = write_record(tmp_path, particles=3)
    table = said(folder)["methods"]
    rows = rows_of(read_table(folder / "methods.csv"))
    assert column(table, "Residual") == [
        NONE if math.isnan(r["normalized_residual"]) else f"{r['normalized_residual']:+.2f}".replace("-", MINUS)
        for r in rows
    ]
    assert table["spans"] == [5, 5]


def test_small_inputs_are_gathered_in_a_row_that_keeps_the_sum(tmp_path: Path) -> None:
    folder = write_record(tmp_path)

    def shrink(row: dict[str, Any]) -> dict[str, Any]:
        small = "viscosity" in row["input"] or "gain_dc" in row["input"]
        return {**row, "share": 0.0006, "component": 1e-20} if small else row

    changed(folder, "budget", shrink)
    table = said(folder)["example"]["tables"][0]["table"]
    assert table["rows"][-1][0] == "2 further inputs together"
    assert table["rows"][-1][-1] == "0.1"
    assert not [row for row in table["rows"] if "viscosity" in row[0]]


@pytest.mark.parametrize(("particles", "beside"), [(5, True), (11, True), (12, False)])
def test_shares_stand_side_by_side_for_few_particles_and_as_ranges_for_many(
    tmp_path: Path, particles: int, beside: bool
) -> None:
    folder = write_record(tmp_path, particles=particles)  # one of them excluded
    tables = said(folder)["shares"]
    heads = " ".join(" ".join(one["table"]["head"]) for one in tables)
    assert ("p01" in heads) is beside
    assert ("median" in heads) is not beside
    assert sum(len(one["table"]["rows"]) for one in tables) <= 14


def test_a_particle_that_is_not_determined_has_its_reason_and_no_number(tmp_path: Path) -> None:
    folder = write_record(tmp_path, particles=4)

    def undetermined(row: dict[str, Any]) -> dict[str, Any]:
        return {**row, **dict.fromkeys(NUMBERS), "status": "not_determined"} if row["particle"] == "p02" else row

    def reason(row: dict[str, Any]) -> dict[str, Any]:
        mine = row["particle"] == "p02" and row["method"] == "adjusted"
        return {**row, "status": "not_determined", "reason": "one drive voltage only"} if mine else row

    changed(folder, "particles", undetermined)
    changed(folder, "methods", reason)
    doc = said(folder)
    assert ["not determined: one drive voltage only", "p02"] in doc["remarks"]["rows"]
    row = next(row for row in doc["particles"]["rows"] if row[0] == "p02")
    assert row[1:] == ["not determined", *[NONE] * 5]
    assert "4 particles: 2 measured, 1 not determined and 1 excluded." in answer(doc, "What came out")


def test_readings_the_reduction_left_out_are_listed_with_their_method_s_reason(tmp_path: Path) -> None:
    folder = write_record(tmp_path, secular=True)

    def gone(row: dict[str, Any]) -> dict[str, Any]:
        mine = row["particle"] == "p02" and row["log"] == "secular"
        return {**row, "status": "left_out", "flags": "no_oscillation"} if mine else row

    def why(row: dict[str, Any]) -> dict[str, Any]:
        mine = row["particle"] == "p02" and row["method"] == "secular"
        return {**row, "status": "no_oscillation", "reason": "the drag is too high"} if mine else row

    changed(folder, "readings", gone)
    changed(folder, "methods", why)
    doc = said(folder)
    assert ["secular.csv", "8 to 13", "p02", "6 readings: no secular oscillation exists: the drag is too high"] in (
        doc["left_out"]["rows"]
    )
    assert "3 entries were left out" in answer(doc, "Left out, flagged")
    assert "6 left out" in doc["figures"][1]["caption"]


def test_without_density_there_is_no_mass_and_drag_is_what_the_budget_shows(tmp_path: Path) -> None:
    folder = write_record(tmp_path)
    lost = [name for name in NUMBERS if not name.startswith(("charge_to_mass", "u_charge_to_mass", "drag", "u_drag"))]
    changed(folder, "particles", lambda row: {**row, **dict.fromkeys(lost), "flags": "no_density"})
    changed(folder, "budget", lambda row: row if row["result"] in ("charge_to_mass", "drag_rate") else None)
    doc = said(folder)
    assert [name.partition("\n")[0] for name in doc["sizes"]["head"]] == ["Particle", "χ² / d.o.f.", "Effective"]
    assert not [name for name in doc["particles"]["head"] if name.startswith("Charge")]
    assert "mass" not in doc["sizes_words"]
    assert [one["title"] for one in doc["example"]["tables"]] == ["Charge-to-mass ratio", "Drag rate"]
    assert "Drag rate, standard uncertainty" in answer(doc, "What limits it")
    assert FLAGS["no_density"] in [row[0] for row in doc["remarks"]["rows"]]


def test_sizes_without_a_sign_are_marked_wherever_they_stand(tmp_path: Path) -> None:
    folder = write_record(tmp_path, sign=1, particles=3)
    changed(folder, "particles", lambda row: {**row, "flags": "sign_undetermined" if row["status"] == "ok" else ""})
    doc = said(folder)
    for sheet, head in (("particles", "q/m"), ("particles", "Charge"), ("sizes", "Charge"), ("methods", "q/m")):
        assert all(cell.startswith("±") for cell in column(doc[sheet], head) if cell != NONE), head
    assert "sign not determined" in answer(doc, "What came out")
    assert "q/m = ±" in doc["figures"][0]["words"]


def test_a_drifting_charge_is_tabled_per_second_and_per_hour(tmp_path: Path) -> None:
    folder = write_record(tmp_path)
    assert said(folder)["drift"] is None

    def drifting(row: dict[str, Any]) -> dict[str, Any]:
        mine = row["particle"] == "p02"
        return {**row, "charge_drift_per_s": -2.5e-5, "u_charge_drift_per_s": 0.4e-5} if mine else row

    changed(folder, "particles", drifting)
    table = said(folder)["drift"]
    assert table["rows"] == [["p02", f"{MINUS}25.0(40)", f"{MINUS}9.0(14)"]]
    assert "10⁻⁶ s⁻¹" in table["head"][1]


def test_particles_adjusted_alone_have_no_adjusted_inputs_and_say_so(tmp_path: Path) -> None:
    folder = write_record(tmp_path)
    facts_changed(folder, strain=None, adjust="particle")
    blank = dict.fromkeys(("adjusted_estimate", "adjusted_u", "pull"))
    changed(folder, "inputs", lambda row: {**row, **blank})
    doc = said(folder)
    assert doc["inputs"]["head"] == ["Input", "Shared by", "Unit", "Stated", "u", "Shape"]
    assert doc["fits"] == [glance.ADJUSTED["particle"]]
    assert "chi-square of each particle is as expected" in answer(doc, "Can I trust it?")


def test_latitude_is_told_in_degrees(tmp_path: Path) -> None:
    folder = write_record(tmp_path)
    facts_changed(folder, site={"latitude_rad": "0.89361(35)", "elevation_m": "35.0(50)"})
    site = dict(map(tuple, said(folder)["facts"]))["Site"]
    assert site == "elevation 35.0(50) m, latitude 51.200(20) deg"


def test_every_result_has_a_row_of_limits(tmp_path: Path) -> None:
    folder = write_record(tmp_path)
    rows = said(folder)["limits"]["rows"]
    assert [row[0] for row in rows] == [sessionbudget.title(name) for name in limits.VALUES]
    assert rows[0][1].replace("\u00a0", " ") == "1.4 %"  # u of every particle of the made-up record is 0.014 of q/m
