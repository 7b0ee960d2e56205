"""A whole simulated course marked: fair marks, mistakes named, and benches that are told nothing but their own."""

from __future__ import annotations

import csv
import getpass
import re
import shutil
import socket
import subprocess
import sys
from pathlib import Path

import pytest
from leaks import all_bytes, digit_runs, read_text, told
from test_report import needs_poppler, text_of

from reduction import benchreport, resultsfolder, steps
from reduction.batches import Plan, record_folder
from reduction.marking import from_record
from reduction.simulationcourse import CRITERIA, MISTAKES, simulate_course
from reduction.tables import read_table
from reduction.typeset import MINUS
from reduction.wholefile import read_json

ALL = list(MISTAKES)
NAMED = {
    "rms_as_peak": {"rms_as_peak"},
    "peak_to_peak_as_peak": {"peak_to_peak_as_peak"},
    "peak_to_peak_as_rms": {"peak_to_peak_as_rms"},
    "hertz_as_radians": {"secular_angular", "drive_angular", "several_fit"},
    "power_of_ten": {"power_of_ten"},
    "wrong_sign": {"sign"},
    "diameter_for_radius": {"radius"},
    "drag_free": {"drag_free"},
    "nominal_mains": {"mains_frequency"},
    "k_two_as_one": {"expanded_as_standard"},
    "huge_uncertainty": {"uncertainty_large"},
    "tiny_uncertainty": {"uncertainty_small", "scatter_only"},
    "bad_rounding": {"digits"},
}
"""What the program calls each planted mistake."""


def rows_of(path: Path) -> list[dict[str, str]]:
    return list(csv.DictReader(line for line in path.read_text(encoding="utf-8").splitlines() if line[:1] != "#"))


def session_of(mistake: str) -> str:
    return f"bench-{ALL.index(mistake) + 1:03d}"


def marked(campaign: Path, results: Path) -> Plan:
    """Reduce and mark a campaign step by step, without the session reports."""
    made = steps.plan(campaign, results)
    steps.check(campaign, results)
    if made.together:
        steps.adjust(campaign, results)
    for batch in made.batches:
        if not made.together:
            steps.reduce(campaign, results, batch)
        steps.mark(campaign, results, batch)
        steps.bench_reports(campaign, results, batch)
    steps.mark_sheet(campaign, results)
    steps.class_summary(campaign, results)
    return made


def pages_of(results: Path) -> dict[str, bytes]:
    return {path.stem: path.read_bytes() for path in sorted((results / "marking" / "bench").glob("*.pdf"))}


@pytest.fixture(scope="module")
def course(tmp_path_factory: pytest.TempPathFactory) -> tuple[Path, Path, Plan]:
    base = tmp_path_factory.mktemp("course")
    simulate_course(base / "course", mistakes=ALL, seed=4, particles=3)
    return base / "course", base / "results", marked(base / "course", base / "results")


@pytest.fixture(scope="module")
def sheet(course: tuple[Path, Path, Plan]) -> dict[str, dict[str, str]]:
    return {row["session"]: row for row in rows_of(course[1] / "marking" / "staff" / "marks.csv")}


@pytest.mark.parametrize("mistake", [name for name in ALL if not MISTAKES[name].left_out])
def test_every_bench_gets_fair_marks(mistake: str, course: tuple[Path, Path, Plan]) -> None:
    campaign, results, made = course
    session = session_of(mistake)
    marks = from_record(read_json(resultsfolder.marks_file(results, session, made.marks[session])))
    given = {one.criterion: one.automatic for one in marks.criteria}
    fair = [row for row in rows_of(campaign.with_name("course.truth_marks.csv")) if row["session"] == session]
    assert {row["criterion"] for row in fair} == set(given) == set(CRITERIA)
    for row in fair:
        assert float(row["marks_low"]) <= given[row["criterion"]] <= float(row["marks_high"]), row["criterion"]


@pytest.mark.parametrize("mistake", sorted(NAMED))
def test_the_planted_mistake_is_named(mistake: str, sheet: dict[str, dict[str, str]]) -> None:
    codes = set(sheet[session_of(mistake)]["hint_codes"].split(";"))
    assert codes & NAMED[mistake]


@pytest.mark.parametrize("mistake", ["none", "excuses"])
def test_a_right_bench_is_told_of_no_mistake(mistake: str, sheet: dict[str, dict[str, str]]) -> None:
    assert sheet[session_of(mistake)]["hint_codes"] == ""


def test_one_bad_bench_stops_nobody_elses_marks_and_comes_first(
    course: tuple[Path, Path, Plan], sheet: dict[str, dict[str, str]]
) -> None:
    assert next(iter(sheet)) == session_of("unreadable")
    assert sheet[session_of("unreadable")]["marks"] == ""
    assert all(row["marks"] for session, row in sheet.items() if session != session_of("unreadable"))


@needs_poppler
def test_the_summary_begins_with_the_bench_that_is_not_marked(course: tuple[Path, Path, Plan]) -> None:
    text = text_of(course[1] / "marking" / "staff" / "summary.pdf")
    assert text.index("settle these first") < text.index(session_of("unreadable")) < text.index("at a glance")
    assert "claims.csv" in text
    assert "the leads were swapped" in text
    people = rows_of(course[0] / "marking" / "register.csv")
    assert not [row["name"] for row in people if row["name"] in text]


@needs_poppler
def test_the_bench_that_is_not_marked_reads_what_to_put_right(course: tuple[Path, Path, Plan]) -> None:
    text = text_of(course[1] / "marking" / "bench" / f"{session_of('unreadable')}.pdf")
    assert "has not been marked yet" in text
    assert "claims.csv, line" in text
    assert "about" in text
    assert "sessions/" not in text


def secrets_of(course: tuple[Path, Path, Plan], session: str) -> set[str]:
    """Everything in words that no file of this bench may hold."""
    campaign, results, made = course
    found = {str(campaign), str(results), campaign.parent.name, str(Path.home()) + "/", socket.gethostname()}
    found |= {f"/{getpass.getuser()}/", f"({getpass.getuser()})"}
    for row in rows_of(campaign / "marking" / "register.csv"):
        found |= {row["name"], row["name"].split()[-1], row["email"], row["id_number"]}
    for row in rows_of(campaign / "marking" / "overrides.csv"):
        found |= {row["reason"], row["by"], row["reason"].split(";")[0]}
    for row in rows_of(results / "marking" / "staff" / "pseudonyms.csv"):
        found.add(row["pseudonym"])
    found |= {line for line in (campaign / "marking" / "pseudonym.key").read_text().split() if len(line) > 20}
    found |= {"marking/", "scheme.yaml", "register.csv", "claim_tolerance", "none_beyond", "ratio_between"}
    return found | (set(made.marks) - {session})


@needs_poppler
def test_no_bench_file_tells_of_people_other_benches_paths_or_the_scheme(course: tuple[Path, Path, Plan]) -> None:
    _, results, made = course
    checked = 0
    for session in made.marks:
        page = results / "marking" / "bench" / f"{session}.pdf"
        text, raw = read_text(page), all_bytes(page)
        for secret in secrets_of(course, session):
            assert secret not in text, (session, secret)
            assert len(secret) < 4 or secret.encode() not in raw, (session, secret)
            checked += 1
    assert checked > 1000


def numbers_of(course: tuple[Path, Path, Plan], session: str) -> list[float]:
    """Every number of the program's own about one bench: results, their uncertainties and ends, each method's."""
    _, results, made = course
    folder = record_folder(results, session, made.record_name(session))
    particles = read_table(folder / "particles.csv").select_dtypes("number")
    skipped = ("readings", "degrees_of_freedom", "effective_degrees_of_freedom", "chi_square")
    values = [float(one) for name in particles if name not in skipped for one in particles[name].dropna()]
    methods = read_table(folder / "methods.csv")
    for name in ("charge_to_mass_C_per_kg", "u_charge_to_mass_C_per_kg", "drag_rate_per_s", "u_drag_rate_per_s"):
        values += methods[name].dropna().tolist()
    return [one for one in values if one]


@needs_poppler
def test_no_bench_file_tells_a_number_of_the_programs_own(course: tuple[Path, Path, Plan]) -> None:
    campaign, results, made = course
    checked = 0
    for session in made.marks:
        values = numbers_of(course, session)
        own = set()
        for path in (campaign / "sessions" / session).iterdir():
            own |= digit_runs(path.read_text(encoding="utf-8"))
        marks = from_record(read_json(resultsfolder.marks_file(results, session, made.marks[session])))
        folder = record_folder(results, session, made.record_name(session))
        doc = benchreport.content(marks, folder, digest="0" * 64)
        figures = doc.pop("figures")
        own |= digit_runs(doc["setup"])  # the air as the bench states it
        # axes of the bench's own readings: that nothing else is drawn, tests/test_benchreport.py tells
        axes = [text for one in figures for text in re.findall(r"<text[^>]*>([^<]*)</text>", one["svg"])]
        assert len(axes) > 30
        own |= digit_runs(" ".join(axes).replace(MINUS, "-"))
        own |= digit_runs(" ".join([doc["marks"], doc["total"], *(one["marks"] for one in doc["criteria"])]))
        text = read_text(results / "marking" / "bench" / f"{session}.pdf")
        assert told(values, str(doc), own) == {}, session  # in any rounding to three digits or more
        assert told(values, text, own) == {}, session
        checked += len(values)
    assert checked > 1000


@needs_poppler
def test_shown_the_reduction_a_bench_sees_its_own_numbers_and_nobody_elses(
    course: tuple[Path, Path, Plan], tmp_path: Path
) -> None:
    few = copied(course[0], tmp_path / "few", [session_of(one) for one in ("none", "rms_as_peak", "drag_free")])
    edit(few / "marking" / "scheme.yaml", "show_reduction: no", "show_reduction: yes")
    edit(few / "campaign.yaml", "mass_from: diameter", "mass_from: diameter\nadjust: campaign")
    made = marked(few, tmp_path / "results")
    for session in made.marks:
        page = tmp_path / "results" / "marking" / "bench" / f"{session}.pdf"
        text = read_text(page)
        alone = read_table(record_folder(tmp_path / "results", session, made.sessions[session]) / "particles.csv")
        ratios = alone["charge_to_mass_C_per_kg"].tolist()
        assert set(told(ratios, text)) == set(ratios)
        for other in set(made.marks) - {session}:
            assert other not in text
            assert other.encode() not in all_bytes(page)
        for row in rows_of(few / "marking" / "register.csv"):
            assert row["name"] not in text


def copied(campaign: Path, folder: Path, kept: list[str]) -> Path:
    """The course with some of its benches only."""
    shutil.copytree(campaign, folder)
    for path in (folder / "sessions").iterdir():
        if path.name not in kept:
            shutil.rmtree(path)
    for name in ("register", "overrides"):
        path = folder / "marking" / f"{name}.csv"
        lines = path.read_text(encoding="utf-8").splitlines(keepends=True)
        rest = [line for line in lines[2:] if line.split(",")[0] in kept]
        path.write_text("".join([*lines[:2], *rest]), encoding="utf-8")
        if not rest:
            path.unlink()
    return folder


def edit(path: Path, old: str, new: str) -> None:
    text = path.read_text(encoding="utf-8")
    assert old in text
    path.write_text(text.replace(old, new), encoding="utf-8")


def test_a_bench_more_leaves_the_others_files_as_they_were(course: tuple[Path, Path, Plan], tmp_path: Path) -> None:
    kept = [session_of(one) for one in ("none", "rms_as_peak", "wrong_sign", "unreadable")]
    few = copied(course[0], tmp_path / "elsewhere" / "few", kept)
    made = marked(few, tmp_path / "results")
    after = pages_of(course[1])
    assert pages_of(tmp_path / "results") == {session: after[session] for session in sorted(made.marks)}
    rows = {row["session"]: row for row in rows_of(tmp_path / "results" / "marking" / "staff" / "marks.csv")}
    every = {row["session"]: row for row in rows_of(course[1] / "marking" / "staff" / "marks.csv")}
    assert rows == {session: every[session] for session in rows}


def test_marks_and_feedback_follow_the_benchs_own_claims_only(course: tuple[Path, Path, Plan], tmp_path: Path) -> None:
    kept = [session_of(one) for one in ("none", "rms_as_peak")]
    few = copied(course[0], tmp_path / "few", kept)
    marked(few, tmp_path / "results")
    before = pages_of(tmp_path / "results")
    claims = few / "sessions" / kept[1] / "claims.csv"
    claims.write_text("".join(claims.read_text(encoding="utf-8").splitlines(keepends=True)[:-3]), encoding="utf-8")
    marked(few, tmp_path / "results")
    after = pages_of(tmp_path / "results")
    assert after[kept[0]] == before[kept[0]]
    assert after[kept[1]] != before[kept[1]]


@pytest.mark.workflow
def test_the_workflow_marks_a_course_and_the_same_files_come_out(
    course: tuple[Path, Path, Plan], tmp_path: Path
) -> None:
    kept = [session_of(one) for one in ("none", "unreadable")]
    few, results = copied(course[0], tmp_path / "few", kept), tmp_path / "results"
    command = [sys.executable, "-m", "reduction.command", "run", str(few), str(results), "--quiet"]
    subprocess.run(command, check=True)
    every = pages_of(course[1])
    assert pages_of(results) == {session: every[session] for session in kept}
    staff = sorted(path.name for path in (results / "marking" / "staff").iterdir())
    expected = ["judged.csv", "marks.csv", "posted_marks.csv", "pseudonyms.csv", "register.csv", "summary.pdf"]
    assert staff == expected


def test_people_who_ask_are_posted_under_pseudonyms_only(
    course: tuple[Path, Path, Plan], sheet: dict[str, dict[str, str]]
) -> None:
    staff = course[1] / "marking" / "staff"
    people, posted = rows_of(staff / "pseudonyms.csv"), rows_of(staff / "posted_marks.csv")
    asking = [row for row in rows_of(course[0] / "marking" / "register.csv") if row["pseudonym"]]
    assert sorted(row["name"] for row in people) == sorted(row["name"] for row in asking)
    assert list(posted[0]) == ["pseudonym", "marks", "total"]
    assert [row["pseudonym"] for row in posted] == sorted(row["pseudonym"] for row in people)
    by_alias = {row["pseudonym"]: row["marks"] for row in posted}
    assert all(by_alias[row["pseudonym"]] == sheet[row["session"]]["marks"] for row in people)


def test_a_missing_key_stops_the_run_and_says_how_to_make_one(course: tuple[Path, Path, Plan], tmp_path: Path) -> None:
    few = copied(course[0], tmp_path / "few", [session_of("rms_as_peak")])
    (few / "marking" / "pseudonym.key").unlink()
    steps.plan(few, tmp_path / "results")
    with pytest.raises(steps.CheckError, match=r"secrets\.token_hex"):
        steps.check(few, tmp_path / "results")


def test_files_of_benches_that_are_gone_go_with_the_last_step(course: tuple[Path, Path, Plan], tmp_path: Path) -> None:
    kept = [session_of(one) for one in ("none", "rms_as_peak")]
    few = copied(course[0], tmp_path / "few", kept)
    results = tmp_path / "results"
    marked(few, results)
    shutil.rmtree(few / "sessions" / kept[1])
    (few / "marking" / "register.csv").unlink()
    resultsfolder.tidy(results, marked(few, results))
    assert sorted(pages_of(results)) == kept[:1]
    assert [path.name for path in (results / ".motescale" / "feedback").iterdir()] == kept[:1]
    assert sorted(path.name for path in (results / "marking").iterdir()) == ["bench", "staff"]
    shutil.rmtree(few / "marking")
    made = steps.plan(few, results)
    resultsfolder.tidy(results, made)
    assert not (results / "marking").exists()
