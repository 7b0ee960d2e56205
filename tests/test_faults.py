"""What goes wrong around a run: killed at any moment, a full disk, a folder that cannot be written to, another run, a
clock set back, an edit in between. Each ends in a plain message, and the same plain command then gives the same bytes.

Everything here runs on stand-ins for the physics (see standin.py). The contract is the project's own.
"""

from __future__ import annotations

import os
import random
import shutil
import signal
import subprocess
import sys
import time
from collections.abc import Callable
from pathlib import Path

import pytest
from cluster import descendants
from standin import Bench, campaign, checkout, contents

pytestmark = [
    pytest.mark.workflow,
    pytest.mark.skipif(sys.platform != "linux", reason="processes and mounts are those of Linux"),
]
SESSIONS = 6


@pytest.fixture(scope="module")
def undisturbed(tmp_path_factory: pytest.TempPathFactory) -> Bench:
    """A run that nothing disturbed; not to be changed."""
    folder = tmp_path_factory.mktemp("undisturbed")
    bench = Bench(checkout(folder / "program"), campaign(folder / "campaign", SESSIONS), folder / "results")
    ran = bench.run()
    assert ran.returncode == 0, ran.stderr
    return bench


@pytest.fixture(scope="module")
def expected(undisturbed: Bench) -> dict[str, bytes]:
    return contents(undisturbed.results)


@pytest.fixture
def bench(undisturbed: Bench, tmp_path: Path) -> Bench:
    """The same campaign and program, with no results yet."""
    return Bench(
        undisturbed.program, shutil.copytree(undisturbed.campaign, tmp_path / "campaign"), tmp_path / "results"
    )


def plainly_told(ran: subprocess.CompletedProcess[str], *words: str) -> None:
    """Check that a run failed and said why, without a traceback."""
    told = ran.stdout + ran.stderr
    assert ran.returncode == 1, told
    assert "Traceback" not in told
    for word in words:
        assert word in told


def goes_on(bench: Bench, expected: dict[str, bytes]) -> None:
    """Check that the same plain command gives the same bytes, and leaves nothing half done."""
    ran = bench.run()
    assert ran.returncode == 0, ran.stdout + ran.stderr
    assert contents(bench.results) == expected
    assert not list(bench.results.rglob("*.part"))
    assert "Nothing to be done" in bench.run("--dry-run").stdout


def kill_workflow(going: subprocess.Popen[str]) -> None:
    going.kill()


def kill_everything(going: subprocess.Popen[str]) -> None:
    os.killpg(going.pid, signal.SIGKILL)


def kill_a_job(going: subprocess.Popen[str]) -> None:
    """Kill one job, as where a machine runs out of memory; the first to be seen."""
    while going.poll() is None:
        for pid in descendants(going.pid):
            try:
                command = Path(f"/proc/{pid}/cmdline").read_bytes()
            except OSError:
                continue
            if b"\0-m\0reduction.steps\0" in command:
                os.kill(pid, signal.SIGKILL)
                return
        time.sleep(0.01)


@pytest.mark.parametrize("kill", [kill_a_job, kill_workflow, kill_everything])
def test_killed_again_and_again_at_random_moments(
    bench: Bench, expected: dict[str, bytes], kill: Callable[[subprocess.Popen[str]], None]
) -> None:
    moments = random.Random(kill.__name__)
    for _ in range(4):
        going = bench.start(STANDIN_SECONDS="0.2")
        time.sleep(moments.uniform(0.5, 7))
        kill(going)
        out, _ = going.communicate(timeout=120)
        assert "Traceback" not in out
        assert expected.items() >= contents(bench.results).items()  # each file is whole, or not there yet
    goes_on(bench, expected)


def test_killed_job_is_told(bench: Bench, expected: dict[str, bytes]) -> None:
    going = bench.start(STANDIN_SECONDS="2")
    bench.wait_for("reduce")
    kill_a_job(going)
    out, _ = going.communicate(timeout=120)
    assert going.returncode == 1
    assert "reduce --batch s01: ended by signal 9" in out
    assert "start the same command again" in out
    goes_on(bench, expected)


def mounted(bench: Bench, script: str, command: list[str]) -> subprocess.CompletedProcess[str]:
    """Run a shell script that may mount, seen by nobody else; $1 is the results folder, the rest a command."""
    own = ["--mount"] if os.geteuid() == 0 else ["--mount", "--map-root-user"]
    unshare = ["unshare", *own, "sh", "-c"]
    tried = subprocess.run([*unshare, "mount -t tmpfs tmpfs /mnt"], capture_output=True, text=True, check=False)
    if tried.returncode:
        pytest.skip(f"this user may not mount: {tried.stderr.strip()}")
    bench.results.mkdir(exist_ok=True)
    where = {"PYTHONPATH": str(bench.program), "PYTHONSAFEPATH": "1"}
    return bench.finish([*unshare, script, "sh", str(bench.results), *command], **where)


def commands(bench: Bench) -> dict[str, list[str]]:
    """The two ways to begin a run."""
    command = [sys.executable, "-m", "reduction.command", "run", str(bench.campaign), str(bench.results)]
    return {"plain": bench.plain(), "command": command}


@pytest.mark.parametrize(("how", "size"), [("plain", 4), ("command", 8), ("plain", 96), ("command", 240)])
def test_full_disk_is_told_and_room_made_later_is_enough(
    bench: Bench, expected: dict[str, bytes], how: str, size: int
) -> None:
    """Full at one place after the other: a file system of so many kilobytes, then a larger one."""
    kept = bench.results.with_name("kept")
    script = f"""
    results=$1; shift
    mount -t tmpfs -o size={size}k tmpfs "$results"
    "$@"; echo "first run: $?"
    mount -o remount,size=100m "$results"
    "$@" > second.txt 2>&1; echo "second run: $?"
    cp -r "$results" "{kept}"
    """
    ran = mounted(bench, script, commands(bench)[how])
    told = ran.stdout + ran.stderr
    assert "first run: 1" in told
    assert "second run: 0" in told
    assert "No space left on device" in told
    assert "Make room" in told
    assert "Traceback" not in told
    assert contents(kept) == expected


def test_results_that_cannot_be_written_to_are_told(bench: Bench, expected: dict[str, bytes]) -> None:
    assert bench.run().returncode == 0
    log = bench.campaign / "sessions" / "s03" / "balance.csv"
    before = log.read_text()
    log.write_text(before + "1,another\n")
    for command in commands(bench).values():
        ran = mounted(bench, 'mount --bind "$1" "$1"; mount -o remount,bind,ro "$1"; shift; "$@"', command)
        plainly_told(ran, "cannot be written to", "Read-only file system")
        assert contents(bench.results) == expected
    log.write_text(before)
    goes_on(bench, expected)


def test_two_runs_at_once_leave_one_to_finish(bench: Bench, expected: dict[str, bytes]) -> None:
    going = bench.start(STANDIN_SECONDS="1")
    bench.wait_for("reduce")
    for command in commands(bench).values():
        ran = subprocess.run(
            command, capture_output=True, text=True, check=False, cwd=bench.campaign.parent,
            env=bench.environment | {"PYTHONPATH": str(bench.program), "PYTHONSAFEPATH": "1"},
        )  # fmt: skip
        plainly_told(ran, "another run is going on in this folder")
    out, _ = going.communicate(timeout=120)
    assert going.returncode == 0, out
    assert contents(bench.results) == expected
    goes_on(bench, expected)


def shift(folder: Path, seconds: float) -> None:
    """Move the time stamps of all files in a folder."""
    for path in folder.rglob("*"):
        if path.is_file():
            stamp = path.stat().st_mtime + seconds
            os.utime(path, (stamp, stamp))


@pytest.mark.parametrize(("campaign_shift", "results_shift"), [(0, 1e6), (1e6, 0), (-1e8, 1e6)])
def test_clock_set_back_redoes_what_was_edited_and_nothing_again(
    bench: Bench, expected: dict[str, bytes], campaign_shift: float, results_shift: float
) -> None:
    """Results of a time to come, inputs of a time to come, inputs of long ago."""
    assert bench.run().returncode == 0
    log = bench.campaign / "sessions" / "s03" / "balance.csv"
    before = log.read_text()
    for text in (before + "1,another\n", before):
        shift(bench.results, results_shift)
        log.write_text(text)
        shift(bench.campaign, campaign_shift)
        ran = bench.run()
        assert ran.returncode == 0, ran.stdout + ran.stderr
        assert bench.done in ([], ["draw s03", "reduce s03"])  # the second time the records are still there
        assert "Nothing to be done" in bench.run("--dry-run").stdout
    assert contents(bench.results) == expected


@pytest.mark.parametrize("name", ["sessions/s01/balance.csv", "campaign.yaml", "species/glass.yaml"])
def test_input_edited_after_it_was_read_is_told(bench: Bench, expected: dict[str, bytes], name: str) -> None:
    """Tables and run.json must not speak of different files; glass.yaml belongs to no session."""
    path = bench.campaign / name
    before = path.read_text()
    going = bench.start(STANDIN_SECONDS="1.5")
    bench.wait_for("reduce s06")
    path.write_text(before + {"sessions": "1,1\n", "campaign": "leave_out: {s02: odd}\n"}.get(name[:8], "# edited\n"))
    out, _ = going.communicate(timeout=120)
    assert going.returncode == 1, out
    assert "edited while the run was going on" in out
    assert "Start the run again" in out
    path.write_text(before)
    goes_on(bench, expected)
