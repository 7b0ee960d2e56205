"""Tables: the columns of the contract, numbers that round-trip, cells no spreadsheet runs, whole files only."""

from __future__ import annotations

import csv
import math
from pathlib import Path

import pandas as pd
import pytest
from hypothesis import given
from hypothesis import strategies as st

from reduction.records import SessionRecord, load
from reduction.tables import COLUMNS, cell_text, neutral, plain, read_table, write_table
from reduction.wholefile import json_text, whole_file, write_whole

# How many columns the contract has for each table and which is the last of them; further ones may follow.
CONTRACT = {
    "particles": (34, "u_charge_drift_per_s"),
    "methods": (15, "degrees_of_freedom"),
    "agreement": (9, "normalized_error"),
    "inputs": (9, "adjusted_u"),
    "components": (7, "unit"),
    "budget": (11, "share"),
    "contrasts": (9, "unit"),
}


@pytest.mark.parametrize("table", CONTRACT)
def test_table_begins_with_the_columns_of_the_contract(table: str) -> None:
    count, last = CONTRACT[table]
    assert COLUMNS[table].index(last) == count - 1
    assert len(COLUMNS[table]) == len(set(COLUMNS[table]))


def test_every_uncertainty_follows_its_number() -> None:
    for names in COLUMNS.values():
        for name in names:
            if name.startswith("u_") and name != "u_reading" and not name.startswith("u_random_"):
                assert name.removeprefix("u_") in names


@given(st.floats(allow_nan=False))
def test_number_reads_back_as_itself(number: float) -> None:
    text = cell_text("mass_kg", number)
    assert float(text) == number
    assert math.copysign(1, float(text)) == math.copysign(1, number)


def test_missing_number_is_an_empty_cell(tmp_path: Path) -> None:
    columns = ("particle", "readings", "mass_kg")
    rows = [
        {"particle": "p1", "readings": 12.0, "mass_kg": math.nan},
        {"particle": "0812", "readings": None, "mass_kg": -1.5e-15},
    ]
    write_table(tmp_path / "t.csv", columns, rows)
    assert (tmp_path / "t.csv").read_bytes() == b"particle,readings,mass_kg\np1,12,\n0812,,-1.5e-15\n"
    frame = read_table(tmp_path / "t.csv")
    assert list(frame["particle"]) == ["p1", "0812"]
    assert math.isnan(frame["mass_kg"][0])
    assert frame["mass_kg"][1] == -1.5e-15
    assert frame["readings"].dtype == "float64"


def test_frame_and_rows_give_the_same_bytes(tmp_path: Path) -> None:
    rows = [dict.fromkeys(COLUMNS["agreement"], 0.1) | {"session": "s", "particle": "1", "method_a": "b"}]
    rows[0] |= {"method_b": "h", "quantity": "q", "unit": "C/kg"}
    write_table(tmp_path / "a.csv", COLUMNS["agreement"], rows)
    write_table(tmp_path / "b.csv", COLUMNS["agreement"], pd.DataFrame(rows)[list(reversed(COLUMNS["agreement"]))])
    assert (tmp_path / "a.csv").read_bytes() == (tmp_path / "b.csv").read_bytes()


@pytest.mark.parametrize("row", [{"a": 1}, {"a": 1, "b": 2, "c": 3}])
def test_rows_with_other_columns_are_refused(tmp_path: Path, row: dict[str, int]) -> None:
    with pytest.raises(ValueError, match="columns do not fit"):
        write_table(tmp_path / "t.csv", ["a", "b"], [row])
    assert list(tmp_path.iterdir()) == []


# What a spreadsheet takes for a formula: = + - @ first, also after a tab or carriage return (OWASP, "CSV Injection").
@pytest.mark.parametrize(
    "text", ["=1+1", "+1+1", "-1+1", "@SUM(A1)", "\t=1", "\r=1", "-cmd|'/c calc'!A0", " =1", "=-5"]
)
def test_text_a_spreadsheet_would_run_is_neutralised(text: str) -> None:
    assert neutral(text) == "'" + text
    assert plain(neutral(text)) == text


@pytest.mark.parametrize("text", ["-1.5", "+3e-7", "-.5", "p1", "a=b", "10-3", "", "'quoted'", "PTFE, old"])
def test_number_and_harmless_text_stay_as_they_are(text: str) -> None:
    assert neutral(text) == text
    assert plain(text) == text


@given(st.text(alphabet=st.sampled_from("=+-@'\t 1.e,\"\na;ü"), max_size=8))
def test_any_text_reads_back_as_itself(text: str) -> None:
    assert plain(neutral(text)) == text


def test_text_with_separators_quotes_and_line_ends_reads_back(tmp_path: Path) -> None:
    texts = ['a,b;c\t"d"', "line\nbreak", "=1", "'=1", "-1", "ümlaut ✓", ""]
    write_table(tmp_path / "t.csv", ["particle", "mass_kg"], [{"particle": text, "mass_kg": -2.0} for text in texts])
    assert list(read_table(tmp_path / "t.csv")["particle"]) == texts
    with open(tmp_path / "t.csv", encoding="utf-8", newline="") as handle:
        assert {row[1] for row in list(csv.reader(handle))[1:]} == {"-2.0"}


def test_file_is_there_whole_or_not_at_all(tmp_path: Path) -> None:
    write_whole(tmp_path / "t.csv", b"before")
    with pytest.raises(TypeError, match="bytes-like"), whole_file(tmp_path / "t.csv") as handle:
        handle.write("no bytes")  # type: ignore[arg-type]
    assert (tmp_path / "t.csv").read_bytes() == b"before"


def test_json_refuses_what_is_not_json() -> None:
    assert json_text({"b": 1, "a": None}) == '{\n "a": null,\n "b": 1\n}\n'
    with pytest.raises(ValueError, match="Out of range float"):
        json_text({"a": math.nan})


def test_record_reads_back_and_may_be_saved_twice(tmp_path: Path) -> None:
    row = dict.fromkeys(COLUMNS["particles"]) | {"session": "s1", "particle": "1", "mass_kg": 1e-12}
    row |= {name: "" for name in ("species", "charged_with", "status", "flags", "methods", "mass_from")}
    record = SessionRecord({"particles": pd.DataFrame([row])}, {"session": "s1", "status": "ok"})
    record.save(tmp_path / "s1")
    record.save(tmp_path / "s1")
    back = load(tmp_path / "s1")
    assert back.session == "s1"
    assert back.facts["status"] == "ok"
    assert back.tables["particles"]["mass_kg"][0] == 1e-12
    assert len(back.tables["readings"]) == 0
    assert list(back.tables["readings"].columns) == list(COLUMNS["readings"])
    assert [path.name for path in tmp_path.iterdir()] == ["s1"]


def test_record_refuses_a_table_it_does_not_know(tmp_path: Path) -> None:
    with pytest.raises(ValueError, match="no record has"):
        SessionRecord({"masses": pd.DataFrame()}, {"session": "s1"}).save(tmp_path / "s1")


def test_only_the_columns_asked_for_are_read(tmp_path):
    frame = pd.DataFrame({"session": ["s1", "s2"], "particle": ["p1", "p2"], "charge_e": [1.5, -2.5]})
    write_table(tmp_path / "some.csv", list(frame.columns), frame)
    found = read_table(tmp_path / "some.csv", columns={"charge_e", "particle"}, only={"session": {"s2"}})
    assert found.to_dict("records") == [{"particle": "p2", "charge_e": -2.5}]
