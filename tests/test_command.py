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

from reduction.command import main

ROOT = Path(__file__).resolve().parent.parent
COMMANDS = ["check", "run", "new", "session", "simulate", "explain"]


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
    [["weigh"], ["check"], ["run", "a"], ["run", "a", "b", "--cores", "0"], ["run", "a", "b", "--quiet", "--verbose"]],
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


def test_simulated_campaign_passes_the_check(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    folder = tmp_path / "sim"
    asked = ["simulate", str(folder), "--sessions", "2", "--particles", "2", "--materials", "PTFE,glass", "--seed", "5"]
    assert main(asked) == 0
    assert (tmp_path / "sim.truth.csv").is_file()
    assert main(["check", str(folder)]) == 0
    assert "2 sessions" in capsys.readouterr().out


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
