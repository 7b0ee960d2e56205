"""The command line: what was asked is done or told in one message, with a status; never a traceback."""

from __future__ import annotations

import os
import re
import shlex
import subprocess
import sys
from pathlib import Path

import pytest
from small_campaign import write

from reduction import batches, planning, steps, validation
from reduction.command import main
from reduction.tables import read_table

ROOT = Path(__file__).resolve().parent.parent
COMMANDS = [
    "check", "run", "new", "session", "simulate", "explain", "plan", "trap", "diff", "pack", "gradebook", "verify",
]  # fmt: skip


def test_help_lists_every_command_and_the_cautions(capsys: pytest.CaptureFixture[str]) -> None:
    with pytest.raises(SystemExit) as ended:
        main(["--help"])
    assert ended.value.code == 0
    told = " ".join(capsys.readouterr().out.split())
    assert all(f" {name} " in told for name in COMMANDS)
    assert "Kilovolts can injure or kill" in told
    assert "Local rules and qualified staff come first" in told


@pytest.mark.parametrize("name", COMMANDS)
def test_every_command_has_help(name: str, capsys: pytest.CaptureFixture[str]) -> None:
    with pytest.raises(SystemExit) as ended:
        main([name, "--help"])
    assert ended.value.code == 0
    assert "usage: motescale" in capsys.readouterr().out


@pytest.mark.parametrize(
    "argv",
    [
        ["weigh"],
        ["check"],
        ["plan"],
        ["verify"],
        ["diff", "a"],
        ["pack", "r"],
        ["verify", "--refit", "s001", "c"],
        ["run", "a"],
        ["run", "a", "b", "--cores", "0"],
        ["run", "a", "b", "--quiet", "--verbose"],
    ],
)
def test_command_not_asked_rightly_ends_with_2(argv: list[str], capsys: pytest.CaptureFixture[str]) -> None:
    with pytest.raises(SystemExit) as ended:
        main(argv)
    assert ended.value.code == 2
    assert "usage:" in capsys.readouterr().err


def test_no_command_ends_with_2_and_the_help(capsys: pytest.CaptureFixture[str]) -> None:
    assert main([]) == 2
    assert "COMMAND" in capsys.readouterr().err


def test_version_is_printed(capsys: pytest.CaptureFixture[str]) -> None:
    assert main(["--version"]) == 0
    assert re.fullmatch(r"motescale \S+\n", capsys.readouterr().out)


def test_check_of_the_example_tells_how_its_files_are_read(capsys: pytest.CaptureFixture[str]) -> None:
    assert main(["check", str(ROOT / "data_example")]) == 0
    assert "fit to be reduced" in capsys.readouterr().out


@pytest.mark.parametrize(
    ("argv", "told"),
    [
        (["check", "nowhere"], "no folder nowhere"),
        (["run", "nowhere", "out"], "there is no such folder"),
        (["session", "nowhere", "s1"], "expected a campaign folder"),
        (["explain", "nowhere", "s1", "p1"], "nowhere"),
        (["plan", "nowhere", "--difference", "1"], "nowhere: there is no finished run in this folder"),
        (["plan", "--difference", "1"], "expected RESULTS, or --between-sessions and --between-particles"),
        (["plan", "--difference", "1", "--between-sessions", "1"], "expected RESULTS, or --between-particles"),
        (["plan", "--difference", "1", "--group", "glass"], "expected RESULTS too"),
        (["plan", "--difference", "0", "--between-sessions", "1", "--between-particles", "1"], "other than 0"),
        (["plan", "--difference", "1", "--between-sessions", "-1", "--between-particles", "1"], "between_sessions"),
        (["verify", "--refit", "s001/p01", "nowhere"], "no folder nowhere"),
        (["verify", "c", "--refit", "s1/p1", "--campaign", "c"], "--campaign goes with a results folder"),
        (["verify", "nowhere"], "nowhere: there is no finished run in this folder"),
        (["pack", "nowhere", "out.zip"], "nowhere: there is no finished run in this folder"),
        (["simulate", "sim", "--plan", "room_air_lihgt"], "Did you mean room_air_light?"),
        (["simulate", "sim", "--sessions", "0"], "at least one"),
    ],
)
def test_what_cannot_be_done_ends_with_1_and_one_message(
    argv: list[str], told: str, tmp_path: Path, monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]
) -> None:
    monkeypatch.chdir(tmp_path)
    assert main(argv) == 1
    error = capsys.readouterr().err
    assert told in error
    assert "Traceback" not in error


def test_faults_are_told_with_place_and_advice(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    folder = write(tmp_path / "c")
    (folder / "campaign.yaml").write_text("titel: x\n")
    assert main(["check", str(folder)]) == 1
    error = capsys.readouterr().err
    assert "campaign.yaml\n  line 1, titel: found" in error
    assert "Did you mean title?" in error


def test_new_campaign_and_session_are_written_and_not_overwritten(
    tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    folder = tmp_path / "my campaign"
    assert main(["new", str(folder)]) == 0
    assert main(["session", str(folder), "b2", "--like", "s001"]) == 0
    assert (folder / "sessions" / "b2" / "session.yaml").is_file()
    capsys.readouterr()
    assert main(["new", str(folder)]) == 1
    assert "Traceback" not in capsys.readouterr().err


def test_simulated_course_passes_the_check_and_has_fair_marks_beside_it(
    tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    folder = tmp_path / "course"
    assert main(["simulate", str(folder), "--course", "--sessions", "2", "--particles", "2"]) == 0
    assert "course.truth_marks.csv" in capsys.readouterr().out
    assert main(["check", str(folder)]) == 0
    assert "marking: 12 claims, 4 people" in capsys.readouterr().out
    assert main(["simulate", str(tmp_path / "x"), "--course", "--plan", "all"]) == 1
    assert "found --course with --plan" in capsys.readouterr().err


def test_simulated_campaign_passes_the_check(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    folder = tmp_path / "sim"
    asked = ["simulate", str(folder), "--sessions", "2", "--particles", "2", "--materials", "PTFE,glass", "--seed", "5"]
    assert main(asked) == 0
    assert (tmp_path / "sim.truth.csv").is_file()
    assert main(["check", str(folder)]) == 0
    assert "2 sessions" in capsys.readouterr().out


def test_plan_from_stated_spreads_tells_sessions_power_and_cautions(capsys: pytest.CaptureFixture[str]) -> None:
    asked = ["plan", "--difference", "2.0", "--between-sessions", "1", "--between-particles", "0.001"]
    assert main([*asked, "--trials", "400", "--comparisons", "3"]) == 0
    told = capsys.readouterr().out
    (count,) = re.findall(r"^(\d+) sessions in each group, of 20 particles each", told, re.MULTILINE)
    components = planning.Components(1.0, 0.001)
    direct = planning.plan_sessions(components, 2.0, particles=20, comparisons=3, trials=400, seed=1)
    assert int(count) == direct.sessions
    assert "between sessions: 1 (stated)" in told
    assert "3 pairs of groups tested together" in told
    assert "Kilovolts can injure or kill" in told


@pytest.fixture(scope="module")
def small_results(tmp_path_factory: pytest.TempPathFactory) -> tuple[Path, Path]:
    """A finished run of two materials, two sessions each."""
    folder = tmp_path_factory.mktemp("small")
    asked = ["simulate", str(folder / "c"), "--sessions", "4", "--particles", "3", "--materials", "PTFE,glass"]
    assert main(asked) == 0
    steps.plan(folder / "c", folder / "r")
    for batch in batches.Plan.load(folder / "r").batches:
        steps.reduce(folder / "c", folder / "r", batch)
    steps.tables(folder / "c", folder / "r")
    steps.comparison(folder / "r")
    return folder / "c", folder / "r"


def test_plan_takes_spreads_from_results(small_results: tuple[Path, Path], capsys: pytest.CaptureFixture[str]) -> None:
    results = str(small_results[1])
    asked = ["plan", results, "--difference", "1e-3", "--trials", "200", "--group", "glass"]
    assert main(asked) == 0
    told = capsys.readouterr().out
    assert "Spreads of charge-to-mass ratio in glass, from 2 sessions." in told
    rows = read_table(small_results[1] / "comparison.csv").set_index("group")
    assert f"between sessions: {rows['between_sessions']['glass']:.4g} C/kg (found)" in told
    assert f"between particles of a session: {rows['between_particles']['glass']:.4g} C/kg (found)" in told
    assert "of 3 particles each" in told
    assert main([*asked, "--between-sessions", "1e-4"]) == 0
    assert "between sessions: 0.0001 C/kg (stated)" in capsys.readouterr().out
    assert main(asked[:-2]) == 1
    assert "Say which with --group: PTFE and glass" in capsys.readouterr().err
    assert main([*asked[:-1], "glas"]) == 1
    assert "Did you mean glass?" in capsys.readouterr().err


def test_verify_tells_the_verdicts_of_the_library(
    small_results: tuple[Path, Path], capsys: pytest.CaptureFixture[str]
) -> None:
    campaign = small_results[0]
    status = main(["verify", "--refit", "s001/p01", str(campaign), "--trials", "200", "--seed", "3"])
    told = capsys.readouterr().out
    direct = validation.refit(campaign, "s001", "p01", 200, 3)
    assert told.rstrip() == validation.report_text(direct).rstrip()
    assert status == (3 if any(one.comparison.verdict == "fails" for one in direct) else 0)
    assert main(["verify", "--refit", "s001/p99", str(campaign)]) == 1
    assert "no particle p99" in capsys.readouterr().err


def test_fault_of_the_program_is_told_in_one_line(
    monkeypatch: pytest.MonkeyPatch, tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    def broken(*_: object, **__: object) -> None:
        raise ZeroDivisionError("no charge")

    monkeypatch.setattr("reduction.explain.explain", broken)
    assert main(["explain", str(tmp_path), "s", "p"]) == 1
    error = capsys.readouterr().err
    assert error.startswith("Stopped by ZeroDivisionError: no charge. This is a fault of the program")
    with pytest.raises(ZeroDivisionError, match="no charge"):
        main(["--traceback", "explain", str(tmp_path), "s", "p"])


def test_interruption_ends_with_130(monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]) -> None:
    def interrupted(*_: object, **__: object) -> None:
        raise KeyboardInterrupt

    monkeypatch.setattr("reduction.steps.check", interrupted)
    assert main(["check", "c"]) == 130
    assert "the same command goes on from there" in capsys.readouterr().err


def test_output_cut_off_by_its_reader_is_no_error() -> None:
    command = f"{shlex.quote(sys.executable)} -m reduction.command check data_example | head -c 1"
    ran = subprocess.run(["bash", "-c", command], capture_output=True, text=True, check=False, cwd=ROOT, env=os.environ)
    assert ran.stderr == ""
