"""`motescale trap`: constants and budget in words, the page, and faults of the file; the numbers drawn."""

from __future__ import annotations

import json
import shutil
import subprocess
from pathlib import Path

import numpy as np
import pytest
from drawn import TEXT, changed, drawing_of

from reduction import figurestyle, trapfigures, trapreport, trapsolution
from reduction.command import main
from reduction.report import trap_pdf
from reduction.trapconstants import from_plain
from reduction.trapsolution import computed
from reduction.trapwords import couplings, measure_better, ranked, share


@pytest.fixture(scope="module")
def found(tmp_path_factory):
    return computed(drawing_of(tmp_path_factory.mktemp("drawing")))


@pytest.fixture
def quick(monkeypatch, found):
    """The constants of the usual drawing in place of computing them."""
    monkeypatch.setattr(trapsolution, "computed", lambda drawing: found)


@pytest.fixture
def file(tmp_path) -> Path:
    (tmp_path / "ring-a.yaml").write_text(TEXT + "source: caliper of an invented bench\n")
    return tmp_path / "ring-a.yaml"


def test_it_prints_constants_budget_and_what_to_measure_better(file, quick, found, capsys):
    assert main(["trap", str(file)]) == 0
    told = capsys.readouterr().out
    assert "trap ring-a (caliper of an invented bench)" in told
    assert "D = 61.2" in told
    assert "A = 1.30" in told
    assert "Measure plate_height better" in told or "Measure ring_radius better" in told
    assert "Taken as exact, so that no uncertainty of theirs is counted: plate_radius." in told
    assert "usable height" in told
    assert "capacitances, pF" in told
    assert "Kilovolts can injure or kill" in told
    rows = {line.split()[0]: line.split() for line in told.splitlines() if line.startswith("  ") and "normal" in line}
    assert rows["plate_height"][1:4] == ["8", "0.05", "normal"]


def test_shares_of_each_constant_sum_to_one(found):
    for which in (0, 1):
        assert sum(share(found, one)[which] for one in found.dimensions) == pytest.approx(1.0, abs=1e-6)
    first = ranked(found)[0]
    assert measure_better(found)[0].startswith(f"Measure {first.name} better: ")


def test_capacitances_hold_the_charge_balance_of_a_closed_can(found):
    """Within a closed can the charges on all conductors and on the can sum to none: nothing couples to far ground."""
    assert all(b for _, b, _ in couplings(found))
    assert all(farad > 0.0 for _, _, farad in couplings(found))
    names = [one.name for one in found.outlines]
    matrix = np.array(found.capacitances)
    inner = [k for k, name in enumerate(names) if name != "can"]
    np.testing.assert_allclose(matrix[inner].sum(axis=1), 0.0, atol=1e-6 * np.abs(matrix).max())
    np.testing.assert_allclose(matrix, matrix.T, atol=1e-6 * np.abs(matrix).max())  # reciprocity


def test_its_page_is_a_pdf_that_says_the_same(file, quick, tmp_path, capsys):
    page = tmp_path / "page.pdf"
    assert main(["trap", str(file), "--page", str(page)]) == 0
    assert page.read_bytes().startswith(b"%PDF")
    if shutil.which("pdftotext") is None:
        pytest.skip("pdftotext is not installed")
    text = subprocess.run(["pdftotext", "-layout", page, "-"], capture_output=True, text=True, check=True).stdout
    for part in ("Trap ring-a", "What makes the constants uncertain", "plate height", "Departure from the linear field",
                 "High voltage", "caliper of an invented bench"):  # fmt: skip
        assert part in text


def test_same_drawing_same_bytes_of_the_page(found, tmp_path):
    for name in ("one.pdf", "two.pdf"):
        trap_pdf("ring-a", found, tmp_path / name, digest="abc")
    assert (tmp_path / "one.pdf").read_bytes() == (tmp_path / "two.pdf").read_bytes()


def test_constants_of_a_results_folder_are_used_and_added_to(file, quick, monkeypatch, tmp_path, capsys):
    results = tmp_path / "results"
    assert main(["trap", str(file), "--results", str(results)]) == 1
    assert "no run.json" in capsys.readouterr().err
    results.mkdir()
    (results / "run.json").write_text("{}")
    assert main(["trap", str(file), "--results", str(results)]) == 0
    (path,) = (results / ".motescale" / "traps").iterdir()
    assert json.loads(path.read_text())["dc_applied"] == "both_plates"
    told = capsys.readouterr().out
    monkeypatch.delattr(trapsolution, "computed")
    assert main(["trap", str(file), "--results", str(results)]) == 0
    assert capsys.readouterr().out == told


@pytest.mark.parametrize(
    ("text", "told"),
    [
        ("dc_field_per_volt_per_m: 61.3(9)\nstray_field_V_per_m: 0\ndc_polarity: 1\n", "Draw the electrodes"),
        (changed(("8.00(5)", "0.5")), "touching or crossing"),
        (changed(("carries: drive", "carries: dc")), "line 13"),
        ("electrodes: [", "not YAML"),
        ("", "found nothing"),
    ],
)
def test_what_is_no_drawing_is_told_with_status_1_and_no_number(tmp_path, capsys, text, told):
    (tmp_path / "ring-a.yaml").write_text(text)
    assert main(["trap", str(tmp_path / "ring-a.yaml"), "--page", str(tmp_path / "page.pdf")]) == 1
    out = capsys.readouterr()
    assert told in out.err
    assert out.out == ""
    assert not (tmp_path / "page.pdf").exists()


def test_a_file_that_is_not_there_is_told(tmp_path, capsys):
    assert main(["trap", str(tmp_path / "none.yaml")]) == 1
    assert "none.yaml" in capsys.readouterr().err


def test_numbers_drawn_are_those_of_the_constants(found):
    with figurestyle.styled():
        axis, drawn = trapfigures.along_axis("ring-a", found), trapfigures.electrodes("ring-a", found)
    z, drive, dc = np.array(axis.rows, float).T
    np.testing.assert_allclose(z, 1e3 * np.array(found.axis.z))
    np.testing.assert_allclose(dc, 100 * (np.array(found.axis.dc) - 1), atol=1e-12)
    middle = np.abs(z).argmin()
    assert abs(drive[middle]) < 1e-6
    ring = np.array([row[2:] for row in drawn.rows if row[0] == "ring"], float)
    np.testing.assert_allclose(np.hypot(ring[:, 0] - 11.3, ring[:, 1]), 1.0, rtol=1e-9)
    for name in ("ring (drive)", "plate (dc above)", "mirror image of plate (dc below)", "can (ground)"):
        assert name in drawn.alt


def test_map_holds_the_voltages_of_the_conductors_and_of_the_centre(found):
    """On metal its own voltage; about the middle plane of a symmetric trap dc is odd."""
    r, z = 1e3 * np.array(found.map.r), 1e3 * np.array(found.map.z)
    drive, dc = np.array(found.map.drive), np.array(found.map.dc)
    plate = (np.abs(z - 9.0)[:, None] < 0.9) & (np.abs(r - 7.0)[None] < 5.0)
    np.testing.assert_allclose(drive[plate], 0.0, atol=1e-4)
    np.testing.assert_allclose(dc[plate], -0.5, atol=1e-4)
    np.testing.assert_allclose(dc, -dc[::-1], atol=5e-3)  # the can is not quite symmetric


def test_the_page_of_any_name_and_of_no_uncertainty_can_be_set(found, tmp_path):
    bare = from_plain({**found.to_plain(), "dimensions": [
        {**one, "u": 0.0, "shape": "exact"} for one in found.to_plain()["dimensions"]
    ]})  # fmt: skip
    trap_pdf("#let x = 1; $q$ <b>", bare, tmp_path / "page.pdf", digest="abc", source="_*#\\ 100 %")
    content = trapreport.content("a", from_plain({**bare.to_plain(), "dimensions": []}))
    assert content["budget"] is None
    assert "No dimension carries an uncertainty" in content["better"][0]
