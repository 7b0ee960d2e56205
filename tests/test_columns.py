"""What the columns mean: none without a word, units as in the names, each u tied to what it is the u of."""

from __future__ import annotations

import csv
import math
from pathlib import Path

import pytest

from reduction import columns, comparison, groupbudget, histogram
from reduction.resultfiles import every_file
from reduction.tables import COLUMNS, TEXT
from reduction.trapfigures import AXIS_COLUMNS
from reduction.units import UNITS

ALL = {name for names in COLUMNS.values() for name in names}
ALL |= {name for table in (comparison.COLUMNS, histogram.COLUMNS) for names in table.values() for name in names}
ALL |= set(groupbudget.COLUMNS)


def test_every_column_of_every_table_has_a_meaning(finished_run: tuple[Path, Path]) -> None:
    written = set()
    for name in every_file(finished_run[1]):
        if name.endswith(".csv"):
            with open(finished_run[1] / name, encoding="utf-8", newline="") as handle:
                written |= set(next(csv.reader(handle)))
    assert sorted(name for name in written | ALL if not columns.about(name)) == []
    drawn = {"trap", *AXIS_COLUMNS}  # of traps given by their electrodes
    assert sorted(set(columns._ABOUT) - written - ALL - drawn) == []  # and no meaning without a column


@pytest.mark.parametrize(
    ("name", "unit"),
    [
        ("charge_to_mass_low_C_per_kg", "C/kg"),
        ("u_diameter_um", "um"),
        ("u_charge_e", "elementary charges"),
        ("surface_charge_density_C_per_m2", "C/m2"),
        ("relative_humidity_percent", "%"),
        ("drag_rate_per_s", "1/s"),
        ("drive_voltage_peak_V", "V"),
        ("chi_square", ""),
        ("particles", ""),
        ("normalized_error", ""),
        ("mean", ""),
        ("fraction_positive_high", ""),
    ],
)
def test_unit_is_that_of_the_name(name: str, unit: str) -> None:
    assert columns.unit(name) == unit


def test_no_word_of_a_name_is_taken_for_a_unit() -> None:
    for name in sorted(ALL - TEXT):
        unit = columns.unit(name)
        spelled = {spelling: plain for plain, spelling in columns._SPELLED.items()}.get(unit, unit)
        assert not unit or name.endswith(f"_{spelled}"), name
        assert not unit or spelled in {*UNITS, "e"}, name


def test_u_is_tied_to_its_number_and_counts_are_whole() -> None:
    fields = {field["name"]: field for field in columns.schema("particles", COLUMNS["particles"])["fields"]}
    assert fields["u_charge_e"]["uncertaintyOf"] == "charge_e"
    assert fields["readings"]["type"] == "integer"
    assert fields["degrees_of_freedom"]["type"] == "number"  # of a mean it is seldom whole
    assert fields["session"]["type"] == "string"
    tied = [field for field in fields.values() if "uncertaintyOf" in field]
    assert len(tied) == sum(name.startswith("u_") for name in fields)


def test_keys_tell_rows_apart(finished_run: tuple[Path, Path]) -> None:
    for table, key in columns.KEYS.items():
        for path in finished_run[1].glob("readings/*.csv" if table == "readings" else f"{table}.csv"):
            with open(path, encoding="utf-8", newline="") as handle:
                rows = [tuple(row[name] for name in key) for row in csv.DictReader(handle)]
            assert rows or table == "series"
            assert len(rows) == len(set(rows)), table


def test_share_of_u_is_what_the_meaning_says(finished_run: tuple[Path, Path]) -> None:
    with open(finished_run[1] / "budget.csv", encoding="utf-8", newline="") as handle:
        rows = [row for row in csv.DictReader(handle) if row["session"] == "s001" and row["result"] == "charge"]
    squares = {row["particle"]: 0.0 for row in rows}
    for row in rows:
        squares[row["particle"]] += float(row["component"]) ** 2
    for row in rows:
        assert math.isclose(float(row["share"]), float(row["component"]) ** 2 / squares[row["particle"]], rel_tol=1e-6)
