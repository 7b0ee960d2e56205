"""Marks within a run: what they depend on, what is made again when, and that nothing stays of what is gone."""

from __future__ import annotations

import shutil
import subprocess
import sys
from pathlib import Path

import pandas as pd
import pytest
from edited import simulated, truth_of
from marked import HEAD, SCHEME, claim, write_marking

from reduction import digests, steps
from reduction.batches import STATE, Plan, make_plan
from reduction.errors import ReductionError
from reduction.resultsfolder import drop_stale, marks_file, tidy
from reduction.tables import read_table
from reduction.wholefile import read_json

OPTIONS = {"when_a_session_fails": "leave_out", "monte_carlo_trials": "200"}


@pytest.fixture(scope="module")
def course(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """Three benches of one bead each: the first claims well, the second with a wrong sign, the third too."""
    root = tmp_path_factory.mktemp("course")
    folder = root / "course"
    for place, seed in enumerate((5, 6, 7)):
        made = simulated(root / f"one{place}", "room_air_light", seed=seed, options=OPTIONS)
        if place:
            shutil.copytree(made / "sessions" / "s001", folder / "sessions" / f"b{place}")
        else:
            shutil.copytree(made, folder)
            (folder / "sessions" / "s001").rename(folder / "sessions" / "b0")
    rows = []
    for place in range(3):
        true = truth_of(root / f"one{place}").loc["p01", "charge_to_mass_C_per_kg"]
        rows.append(claim("charge_to_mass", true * (-1) ** place, session=f"b{place}", u=abs(true) * 0.014, digits=4))
    people = "session,name,email\n" + "".join(f"b{place},Person {place},p{place}@uni.example\n" for place in range(3))
    write_marking(folder, {"claims.csv": HEAD + "".join(rows), "register.csv": people})
    return folder


@pytest.fixture
def bench(course: Path, tmp_path: Path) -> Path:
    shutil.copytree(course, tmp_path / "course")
    return tmp_path / "course"


def run(campaign: Path, results: Path) -> Plan:
    """Run the steps that marks take, without the workflow."""
    results.mkdir(exist_ok=True)
    plan = steps.plan(campaign, results)
    drop_stale(results, plan)
    steps.check(campaign, results)
    for batch in plan.batches:
        steps.reduce(campaign, results, batch)
        steps.mark(campaign, results, batch)
    steps.mark_sheet(campaign, results)
    return plan


def marks(results: Path, plan: Plan) -> dict[str, bytes]:
    """Bytes of each bench's marks, under the name they are kept by."""
    paths = [marks_file(results, session, name) for session, name in plan.marks.items()]
    return {f"{path.parent.name}/{path.name}": path.read_bytes() for path in paths}


def sheet(results: Path) -> pd.DataFrame:
    return read_table(results / "marking" / "staff" / "marks.csv").set_index("session")


def test_the_mark_sheet_has_the_columns_of_the_contract(bench: Path, tmp_path: Path) -> None:
    run(bench, tmp_path / "r")
    table = sheet(tmp_path / "r")
    wanted = ["readings", "value", "uncertainty", "rounding", "sign", "marks", "total", "hints"]
    assert list(table.columns[: len(wanted)]) == wanted
    assert list(table.index) == ["b0", "b1", "b2"]
    assert list(table["sign"]) == [2.0, 0.0, 2.0]
    assert list(table["total"]) == [20.0] * 3
    assert (table["marks"] == table[wanted[:5]].sum(axis=1)).all()
    assert "sign the other way round" in table.at["b1", "hints"]
    people = read_table(tmp_path / "r" / "marking" / "staff" / "register.csv")
    assert list(people["email"]) == [f"p{place}@uni.example" for place in range(3)]


def test_one_bench_more_leaves_the_marks_of_the_others_byte_for_byte(bench: Path, tmp_path: Path) -> None:
    before = marks(tmp_path / "r", run(bench, tmp_path / "r"))
    shutil.copytree(bench / "sessions" / "b0", bench / "sessions" / "a9")
    path = bench / "marking" / "claims.csv"
    rows = path.read_text().splitlines(keepends=True)
    new = claim("charge_to_mass", 1e-3, session="a9", u=1e-4)
    path.write_text("".join([rows[0], "# one more\n", new, *reversed(rows[1:])]))
    with (bench / "marking" / "register.csv").open("a") as people:
        people.write("a9,Person 9,p9@uni.example\n")
    plan = run(bench, tmp_path / "r")
    after = marks(tmp_path / "r", plan)
    assert len(after) == 4
    assert {name: after[name] for name in before} == before
    fresh = tmp_path / "fresh"
    assert marks(fresh, run(bench, fresh)) == after  # and they are not merely left over


def test_marks_depend_on_their_own_rows_the_scheme_and_the_campaign(bench: Path) -> None:
    def named() -> dict[str, str]:
        return make_plan(bench).marks

    def edited(name: str, old: str, new: str) -> set[str]:
        path, before = bench / name, named()
        text = path.read_text()
        assert old in text
        path.write_text(text.replace(old, new, 1))
        after = named()
        return {session for session in before if before[session] != after[session]}

    everyone = {"b0", "b1", "b2"}
    sessions = make_plan(bench).sessions
    assert edited("marking/claims.csv", "b1,p01", "b1,p02") == {"b1"}
    assert edited("marking/register.csv", "p2@uni", "q2@uni") == {"b2"}
    assert edited("marking/register.csv", "q2@uni", "p0@uni") == {"b0", "b2"}  # shared with another: neither is marked
    assert edited("marking/scheme.yaml", "marks: 8", "marks: 7") == everyone
    assert edited("sessions/b2/balance.csv", "p01", "p07") == {"b2"}
    (bench / "sessions" / "b1" / "claims.csv").write_text(HEAD)
    assert make_plan(bench).sessions["b1"] == sessions["b1"]
    (bench / "marking" / "overrides.csv").write_text("session,criterion,marks,reason,by\nb0,sign,1,a,b\n")
    assert edited("marking/overrides.csv", "b0,sign", "b1,sign") == {"b0", "b1"}


def test_claims_and_marks_by_hand_make_no_session_be_reduced_again(bench: Path, tmp_path: Path) -> None:
    results = tmp_path / "r"
    first = run(bench, results)
    (bench / "marking" / "overrides.csv").write_text(
        "session,criterion,marks,reason,by\nb1,sign,1.5,sketch was right,A. Tutor\n"
    )
    second = run(bench, results)
    assert second.sessions == first.sessions
    assert second.campaign != first.campaign  # it is an input of the run
    assert "marking/overrides.csv" in digests.input_digests(bench)
    table = sheet(results)
    assert table.at["b1", "sign"] == 1.5
    assert table.at["b1", "overridden"] == "sign: 0 to 1.5 by A. Tutor, sketch was right"


def test_a_bad_bench_is_listed_first_and_the_others_are_marked(bench: Path, tmp_path: Path) -> None:
    path = bench / "marking" / "claims.csv"
    path.write_text(path.read_text().replace("b1,p01", "b1,p77") + claim("mass", 1e-12, session="nobody"))
    (bench / "sessions" / "b2" / "balance.csv").write_text("particle\n")
    plan = run(bench, tmp_path / "r")
    table = sheet(tmp_path / "r")
    assert list(table.index) == ["nobody", "b1", "b2", "b0"]
    assert list(table["status"]) == ["not_marked", "not_marked", "not_marked", "marked"]
    assert "line 3, particle: found p77" in table.at["b1", "look_at"]
    assert "sessions/b2/balance.csv" in table.at["b2", "look_at"]
    assert table["marks"].isna().tolist() == [True, True, True, False]
    verdict = read_json(tmp_path / "r" / STATE / "verdict.json")
    assert sorted(verdict["unmarked"]) == ["b1", "nobody"]
    path.write_text(path.read_text().replace("b1,p77", "b1,p01"))
    again = run(bench, tmp_path / "r")
    assert again.marks["b0"] == plan.marks["b0"]
    assert sheet(tmp_path / "r").at["b1", "status"] == "marked"


def test_without_leave_out_a_bad_claim_stops_the_run(bench: Path, tmp_path: Path) -> None:
    text = (bench / "campaign.yaml").read_text().replace("when_a_session_fails: leave_out\n", "")
    (bench / "campaign.yaml").write_text(text)
    path = bench / "marking" / "claims.csv"
    path.write_text(path.read_text().replace("b1,p01", "b1,p77"))
    with pytest.raises(ReductionError, match="found p77"):
        run(bench, tmp_path / "r")


def test_nothing_stays_where_the_campaign_is_no_longer_marked(bench: Path, tmp_path: Path) -> None:
    results = tmp_path / "r"
    run(bench, results)
    shutil.rmtree(bench / "sessions" / "b2")
    path = bench / "marking" / "claims.csv"
    path.write_text("".join(row for row in path.read_text().splitlines(keepends=True) if not row.startswith("b2")))
    people = bench / "marking" / "register.csv"
    people.write_text("".join(row for row in people.read_text().splitlines(keepends=True) if not row.startswith("b2")))
    plan = run(bench, results)
    tidy(results, plan)
    assert sorted(one.name for one in (results / STATE / "marks").iterdir()) == ["b0", "b1"]
    assert list(sheet(results).index) == ["b0", "b1"]
    shutil.rmtree(bench / "marking")
    plan = steps.plan(bench, results)
    tidy(results, plan)
    assert plan.marks == {}
    assert not (results / "marking").exists()
    assert marks_folder(results) == []
    assert list((results / STATE / "marked").iterdir()) == []


def test_marks_made_while_their_files_were_edited_are_forgotten(
    bench: Path, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    results = tmp_path / "r"
    results.mkdir()
    plan = steps.plan(bench, results)
    steps.check(bench, results)
    (batch,) = plan.batches
    steps.reduce(bench, results, batch)
    path = bench / "marking" / "scheme.yaml"
    path.write_text(SCHEME.replace("marks: 8", "marks: 6").replace("marks: 4, b", "marks: 6, b"))
    with pytest.raises(ReductionError, match="edited while the run was going on"):
        steps.mark(bench, results, batch)
    assert not [one for one in marks_folder(results) if one.suffix == ".json"]


def marks_folder(results: Path) -> list[Path]:
    return list((results / STATE / "marks").rglob("*"))


def test_a_formula_in_a_name_cannot_reach_a_spreadsheet(bench: Path, tmp_path: Path) -> None:
    text = "session,criterion,marks,reason,by\nb1,sign,1,-2+3 cmd,A. Tutor\n"
    (bench / "marking" / "overrides.csv").write_text(text)
    people = bench / "marking" / "register.csv"
    people.write_text(people.read_text().replace("Person 1", "+Person 1"))
    run(bench, tmp_path / "r")
    staff = tmp_path / "r" / "marking" / "staff"
    for path in staff.iterdir():
        assert not any(
            cell.startswith(("=", "+", "@")) for row in path.read_text().splitlines() for cell in row.split(",")
        )
    assert "'+Person 1" in (staff / "register.csv").read_text()


@pytest.mark.workflow
def test_the_workflow_marks_a_campaign_and_stops_when_told(bench: Path, tmp_path: Path) -> None:
    results = tmp_path / "r"

    def whole_run() -> str:
        command = [sys.executable, "-m", "reduction.command", "run", str(bench), str(results), "--cores", "2"]
        ran = subprocess.run(command, capture_output=True, text=True, check=False)
        assert ran.returncode == 0, ran.stdout + ran.stderr
        return ran.stdout

    assert "mark b0 to b2: 3 benches, 3 of them anew" in whole_run()
    expected = tmp_path / "steps"
    plan = run(bench, expected)
    assert marks(results, plan) == marks(expected, plan)
    for name in ("marks.csv", "judged.csv", "register.csv"):
        own, other = (folder / "marking" / "staff" / name for folder in (results, expected))
        assert own.read_bytes() == other.read_bytes()
    assert "marking/claims.csv" in read_json(results / "run.json")["inputs"]
    (bench / "marking" / "overrides.csv").write_text("session,criterion,marks,reason,by\nb1,sign,1,a,b\n")
    said = whole_run()
    assert "mark b0 to b2: 3 benches, 1 of them anew" in said
    assert "sessions reduced" not in said
    shutil.rmtree(bench / "marking")
    assert "mark b0" not in whole_run()
    assert not (results / "marking").exists()


def test_a_session_that_is_excluded_is_not_marked_and_says_why(bench: Path, tmp_path: Path) -> None:
    with (bench / "sessions" / "b1" / "session.yaml").open("a") as file:
        file.write("exclude: lamp failed\n")
    run(bench, tmp_path / "r")
    table = sheet(tmp_path / "r")
    assert (table.at["b1", "status"], table.at["b1", "look_at"]) == (
        "not_marked",
        "the session is excluded: lamp failed",
    )
