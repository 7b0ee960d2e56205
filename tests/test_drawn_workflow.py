"""A run on a campaign whose trap is drawn: solved once, kept by the drawing, told in the report, the same bytes."""

from __future__ import annotations

import json
import shutil
import subprocess
from pathlib import Path

import pytest
from drawn import draw
from edited import Edited, copied
from finished import finish

from reduction import steps, trapsolution
from reduction.batches import STATE, Plan
from reduction.errors import InputError
from reduction.tables import read_table
from reduction.trapsolution import computed

pytestmark = pytest.mark.workflow


@pytest.fixture
def solved(monkeypatch):
    """Count of the drawings solved, each only once whatever the test asks."""
    calls: list[str] = []
    known: dict[str, object] = {}

    def once(drawing):
        key = repr(drawing)
        calls.append(key)
        if key not in known:
            known[key] = computed(drawing)
        return known[key]

    monkeypatch.setattr(trapsolution, "computed", once)
    return calls


@pytest.fixture
def made(light, tmp_path) -> Edited:
    campaign = copied(light, tmp_path / "campaign")
    draw(trap_file(campaign))
    return campaign


def trap_file(made: Edited) -> Path:
    (path,) = (made.folder / "traps").glob("*.yaml")
    return path


def kept(results: Path) -> list[Path]:
    return sorted((results / STATE / "traps").iterdir())


def contents(results: Path) -> dict[str, bytes]:
    """Every file of the results that is a result."""
    files = (path for path in sorted(results.rglob("*")) if path.is_file())
    named = {path.relative_to(results).as_posix(): path for path in files}
    return {name: path.read_bytes() for name, path in named.items() if not name.startswith(STATE)}


def test_a_drawing_is_solved_once_and_kept_by_its_digest(made, solved, tmp_path):
    results = tmp_path / "results"
    finish(made.folder, results)
    assert len(solved) == 1
    (path,) = kept(results)
    assert path.stem == Plan.load(results).drawings["lantern-a"]
    made.session(notes="another word")
    trap_file(made).write_text(trap_file(made).read_text() + "# measured on a dull Sunday\n")
    finish(made.folder, results)
    assert len(solved) == 1
    trap_file(made).write_text(trap_file(made).read_text().replace("8.00(5)", "8.00(6)"))
    finish(made.folder, results)
    assert len(solved) == 2
    (results / STATE / "traps" / ".tmp-killed").mkdir()
    steps.tidy(results)
    (again,) = kept(results)
    assert again != path
    inputs = (results / "inputs.csv").read_text()
    assert "trap/lantern-a/plate_height" in inputs
    statement = json.loads((results / "run.json").read_text())
    assert "traps/lantern-a.yaml" in statement["inputs"]


def test_the_same_bytes_whether_solved_or_kept(made, solved, tmp_path):
    finish(made.folder, tmp_path / "one")
    finish(made.folder, tmp_path / "two")
    assert len(solved) == 2
    shutil.rmtree(tmp_path / "two" / STATE / "records")
    finish(made.folder, tmp_path / "two")
    assert len(solved) == 2
    assert contents(tmp_path / "one") == contents(tmp_path / "two")
    assert kept(tmp_path / "one")[0].read_bytes() == kept(tmp_path / "two")[0].read_bytes()


def test_the_reports_carry_the_drawing(made, solved, tmp_path):
    if shutil.which("pdftotext") is None:
        pytest.skip("pdftotext is not installed")
    results = tmp_path / "results"
    finish(made.folder, results)

    def text(path: Path) -> str:
        ran = subprocess.run(["pdftotext", "-layout", path, "-"], capture_output=True, text=True, check=True)
        return " ".join(ran.stdout.split())

    report = text(results / "report.pdf")
    for part in (
        "Trap lantern-a from the drawing of its electrodes",
        "plate height",
        "Departure of lantern-a from the linear field",
    ):
        assert part in report
    page = (results / "report.html").read_text(encoding="utf-8")
    assert "Trap lantern-a from the drawing of its electrodes" in page
    assert "Numbers drawn: ." not in page
    assert "figures/field_on_axis.csv" in page
    drawn = read_table(results / "figures" / "field_on_axis.csv")
    assert set(drawn["trap"]) == {"lantern-a"}
    centre = drawn.iloc[drawn["height_mm"].abs().argmin()]
    assert abs(centre["drive_field_off_percent"]) < abs(drawn["drive_field_off_percent"]).max() / 10
    session = text(results / "sessions" / "s001.pdf")
    assert "The field’s departure" in session or "The field's departure" in session
    assert "plate height" in session


def test_a_drawing_that_cannot_be_computed_stops_the_run_and_touches_nothing(made, solved, tmp_path):
    results = tmp_path / "results"
    finish(made.folder, results)
    before = contents(results)
    trap_file(made).write_text(trap_file(made).read_text().replace("8.00(5)", "0.50(5)"))
    steps.plan(made.folder, results)
    with pytest.raises(InputError, match="touching or crossing"):
        steps.check(made.folder, results)
    assert contents(results) == before
    assert len(solved) == 1
