"""The data package beside the results: valid by the library of its makers, every table in it, nothing personal.

Data Package and Table Schema are those of Frictionless Data; `frictionless` is their own library, and is asked whether
every row of every table has the types, keys, sizes and digests the package states.
"""

from __future__ import annotations

import json
import shutil
from pathlib import Path

import pytest

from reduction.datapackage import FILE, READINGS
from reduction.resultfiles import every_file

frictionless = pytest.importorskip("frictionless", reason="frictionless, of the extra `test`, is not installed")


def faults(results: Path) -> list[list[object]]:
    """What the library finds wrong with the package or a row of it."""
    report = frictionless.validate(str(results / FILE))
    return list(report.flatten(["name", "type", "fieldName", "message"]))


def test_package_and_every_row_are_valid_by_the_library(finished_run: tuple[Path, Path]) -> None:
    results = finished_run[1]
    assert faults(results) == []
    package = frictionless.Package(str(results / FILE))
    paths = sorted(resource.path for resource in package.resources)
    assert paths == [name for name in every_file(results) if name.endswith(".csv")]
    particles = package.get_resource("particles")
    rows = particles.read_rows()
    assert len(rows) == 6
    assert all(isinstance(row["session"], str) and float(row["u_charge_e"]) > 0.0 for row in rows)


@pytest.mark.parametrize(
    ("name", "old", "new", "kind"),
    [
        ("particles.csv", "\ns001,p01,", "\ns001,p02,", "primary-key"),
        ("methods.csv", "\ns001,p01,", "\ns001,p77,", "foreign-key"),
        ("methods.csv", ",ok,,", ",ok,,x", "type-error"),
        ("agreement.csv", "\n", "\n\n", "blank-row"),
    ],
)
def test_library_finds_what_is_spoilt(
    finished_run: tuple[Path, Path], tmp_path: Path, name: str, old: str, new: str, kind: str
) -> None:
    results = shutil.copytree(finished_run[1], tmp_path / "results")
    text = (results / name).read_text()
    assert old in text
    (results / name).write_text(text.replace(old, new, 1))
    found = {row[1] for row in faults(results)}
    assert kind in found
    assert found & {"hash-count", "byte-count"}  # the package states both


def test_package_names_no_place_person_or_time(finished_run: tuple[Path, Path]) -> None:
    campaign, results = finished_run
    for name in (FILE, READINGS):
        text = (results / name).read_text()
        assert str(campaign) not in text
        assert str(results.parent) not in text
        assert "created" not in json.loads(text)


def test_package_states_unit_and_uncertainty(finished_run: tuple[Path, Path]) -> None:
    package = json.loads((finished_run[1] / FILE).read_text())
    (particles,) = [one for one in package["resources"] if one["name"] == "particles"]
    fields = {one["name"]: one for one in particles["schema"]["fields"]}
    assert fields["mass_kg"] == {"name": "mass_kg", "type": "number", "description": "Mass.", "unit": "kg"}
    assert fields["u_mass_kg"]["uncertaintyOf"] == "mass_kg"
    assert [one["schema"] for one in package["resources"] if one["path"].startswith("readings/")] == 3 * [READINGS]
