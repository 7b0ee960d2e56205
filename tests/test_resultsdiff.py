"""What tells two results folders apart: moves in u, what appeared or vanished, words, and what did it."""

from __future__ import annotations

import csv
import json
import math
import shutil
from collections.abc import Callable
from pathlib import Path
from typing import Any

import pytest
from finished import finish

from reduction.command import main
from reduction.diffwords import difference_text
from reduction.errors import ResultsError
from reduction.resultsdiff import difference


@pytest.fixture
def pair(finished_run: tuple[Path, Path], tmp_path: Path) -> tuple[Path, Path]:
    """Two copies of one results folder, the second to be changed."""
    return finished_run[1], shutil.copytree(finished_run[1], tmp_path / "b")


def rewrite(path: Path, change: Callable[[dict[str, str]], Any], keep: Callable[[dict[str, str]], bool] = bool) -> None:
    """Change every row of a table, and keep only some."""
    with open(path, encoding="utf-8", newline="") as handle:
        rows = list(csv.DictReader(handle))
    for row in rows:
        change(row)
    with open(path, "w", encoding="utf-8", newline="") as handle:
        writer = csv.DictWriter(handle, rows[0], lineterminator="\n")
        writer.writeheader()
        writer.writerows(row for row in rows if keep(row))


def statement(results: Path, **parts: Any) -> None:
    """Change parts of run.json."""
    run = json.loads((results / "run.json").read_text())
    for name, value in parts.items():
        run[name] = run[name] | value if isinstance(value, dict) else value
    (results / "run.json").write_text(json.dumps(run))


def first(row: dict[str, str]) -> bool:
    return (row["session"], row["particle"]) == ("s001", "p01")


def test_same_results_end_with_0(pair: tuple[Path, Path], capsys: pytest.CaptureFixture[str]) -> None:
    assert main(["diff", *map(str, pair)]) == 0
    assert "are the same, file for file" in capsys.readouterr().out


def test_move_is_told_in_u_of_a_and_ends_with_1(pair: tuple[Path, Path], capsys: pytest.CaptureFixture[str]) -> None:
    def change(row: dict[str, str]) -> None:
        if first(row):
            row["mass_kg"] = repr(float(row["mass_kg"]) - 2.5 * float(row["u_mass_kg"]))
            row["charge_e"] = repr(float(row["charge_e"]) + 0.5 * float(row["u_charge_e"]))

    rewrite(pair[1] / "particles.csv", change)
    assert main(["diff", *map(str, pair)]) == 1
    told = capsys.readouterr().out.splitlines()
    found = difference(*pair)
    assert [(move.key, move.quantity, round(move.by, 6)) for move in found.moves] == [
        (("s001", "p01"), "mass [kg]", -2.5),
        (("s001", "p01"), "charge [e]", 0.5),
    ]
    table = [line.split() for line in told if "particles.csv" in line]
    assert [row[0] for row in table[:2]] == ["mass", "charge"]  # the largest move first
    assert any(line.startswith("  s001 p01") and line.endswith("-2.5 u") for line in told)
    assert "  the same files, settings, versions and program" in told
    assert "  s001: nothing; compare the processors, and verify both folders" in told


def test_u_that_changes_alone_is_told(pair: tuple[Path, Path]) -> None:
    def change(row: dict[str, str]) -> None:
        if first(row):
            row["u_mass_kg"] = repr(1.5 * float(row["u_mass_kg"]))

    rewrite(pair[1] / "particles.csv", change)
    (move,) = difference(*pair).moves
    assert (move.by, round(move.u_change, 9)) == (0.0, 0.5)
    assert "u only" in difference_text(difference(*pair), *pair)


def test_number_without_u_is_said_to_have_none(pair: tuple[Path, Path]) -> None:
    def change(row: dict[str, str]) -> None:
        row["mean"], row["u_mean"] = repr(2.0 * float(row["mean"])), ""

    shutil.copytree(pair[1], a := pair[1].with_name("a"))
    rewrite(a / "comparison.csv", lambda row: row.update(u_mean=""))
    rewrite(pair[1] / "comparison.csv", change)
    moves = [move for move in difference(a, pair[1]).moves if move.file == "comparison.csv"]
    assert moves
    assert all(math.isinf(move.by) for move in moves)
    assert "no u in A" in difference_text(difference(a, pair[1]), a, pair[1])


def test_particles_and_numbers_that_come_or_go_and_words_that_change_are_named(pair: tuple[Path, Path]) -> None:
    def change(row: dict[str, str]) -> None:
        if first(row):
            row.update(status="not_determined", charge_e="", flags="no_density")

    rewrite(pair[1] / "particles.csv", change, keep=lambda row: (row["session"], row["particle"]) != ("s002", "p02"))
    found = difference(*pair)
    assert found.vanished == (("particles.csv", ("s002", "p02"), ""), ("particles.csv", ("s001", "p01"), "charge [e]"))
    text = difference_text(found, *pair)
    assert "Only in A:\n  s002 p02\n  s001 p01, charge [e]" in text
    assert "s001 p01, status: ok -> not_determined" in text
    assert "flags: none -> no_density" in text or "-> no_density" in text
    back = difference(pair[1], pair[0])
    assert back.appeared == found.vanished


def test_session_is_told_what_it_depends_on_of_what_changed(pair: tuple[Path, Path]) -> None:
    run = json.loads((pair[0] / "run.json").read_text())
    trap = run["sessions"]["s001"]["trap"]
    with open(pair[0] / "particles.csv", encoding="utf-8", newline="") as handle:
        (species,) = {row["species"] for row in csv.DictReader(handle) if row["session"] == "s001"}
    inputs = {
        "sessions/s001/balance.csv": "1",
        "sessions/s002/balance.csv": "1",
        f"traps/{trap}.yaml": "1",
        "traps/another.yaml": "1",
        f"species/{species}.yaml": "1",
        "species/another.yaml": "1",
    }
    statement(pair[1], inputs=inputs, versions={"numpy": "9.9"}, settings={"seed": 2})
    rewrite(pair[1] / "particles.csv", lambda row: first(row) and row.update(mass_kg=repr(2 * float(row["mass_kg"]))))
    found = difference(*pair)
    assert found.by_session == {
        "s001": (
            "file edited sessions/s001/balance.csv",
            f"file edited species/{species}.yaml",
            f"file edited traps/{trap}.yaml",
            "setting seed: 1 -> 2",
            f"version of numpy: {run['versions']['numpy']} -> 9.9",
        )
    }
    assert "new file traps/another.yaml" in found.causes
    statement(pair[1], settings={"adjust": "campaign"})
    assert len(difference(*pair).by_session["s001"]) == len(difference(*pair).causes)


def test_real_edit_moves_what_it_should_and_is_named(finished_run: tuple[Path, Path], tmp_path: Path) -> None:
    campaign = shutil.copytree(finished_run[0], tmp_path / "campaign")
    path = campaign / "sessions" / "s002" / "balance.csv"
    head, *rows = [line for line in path.read_text().splitlines() if not line.startswith("#")]
    column = head.split(",").index("balance_voltage_V")
    moved = [
        ",".join(f"{float(c) * 1.01:.4f}" if i == column else c for i, c in enumerate(row.split(","))) for row in rows
    ]
    path.write_text("\n".join([head, *moved, ""]))
    found = difference(finished_run[1], finish(campaign, tmp_path / "results"))
    assert found.causes == ("file edited sessions/s002/balance.csv",)
    assert found.by_session == {"s002": ("file edited sessions/s002/balance.csv",)}
    particles = {move.key for move in found.moves if move.file == "particles.csv"}
    assert particles == {("s002", "p01"), ("s002", "p02")}
    assert "sessions/s002.pdf" in found.files
    assert "sessions/s001.pdf" not in found.files


def test_long_lists_are_cut_unless_all_is_asked_for(
    pair: tuple[Path, Path], capsys: pytest.CaptureFixture[str]
) -> None:
    def change(row: dict[str, str]) -> None:
        for name in ("mass_kg", "charge_e", "diameter_um"):
            row[name] = repr(float(row[name]) * 1.001)

    rewrite(pair[1] / "particles.csv", change)
    main(["diff", *map(str, pair)])
    assert "and 6 more, each by no more than" in capsys.readouterr().out
    main(["diff", "--all", *map(str, pair)])
    told = capsys.readouterr().out
    assert "more" not in told
    assert len([line for line in told.splitlines() if line.startswith("  s00") and line.endswith(" u")]) == 18


def test_no_results_folder_ends_with_2_and_one_message(
    pair: tuple[Path, Path], tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    file = tmp_path / "file"
    file.write_text("x")
    for other in (tmp_path / "nowhere", tmp_path, file):
        assert main(["diff", str(pair[0]), str(other)]) == 2
        error = capsys.readouterr().err
        assert error == f"{other}: there is no finished run in this folder. Expected a results folder with run.json.\n"


@pytest.mark.parametrize("spoilt", [b"x,y\n1,2\n", b"input,unit\n\xff\xfe,1\n"])
def test_table_that_is_none_is_told(pair: tuple[Path, Path], spoilt: bytes) -> None:
    (pair[1] / "inputs.csv").write_bytes(spoilt)
    with pytest.raises(ResultsError, match="is not the table a run writes"):
        difference(*pair)


def test_table_without_rows_has_lost_them_all(pair: tuple[Path, Path]) -> None:
    (pair[1] / "inputs.csv").write_text("input,unit\n")
    with open(pair[0] / "inputs.csv", encoding="utf-8", newline="") as handle:
        names = {(row["input"],) for row in csv.DictReader(handle)}
    assert {key for file, key, _ in difference(*pair).vanished if file == "inputs.csv"} == names
