"""Run the workflow from the command line: the same Snakefile, one line for each thing done, and what moved."""

from __future__ import annotations

import os
import re
import signal
import subprocess
import sys
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path
from types import FrameType
from typing import IO

from reduction import places
from reduction.batches import STATE, Plan
from reduction.resultsfolder import check_folders, finished_sessions, folder_of, make_state, unwritable
from reduction.rundiff import difference_text, read_state
from reduction.wholefile import write_whole

LOG = f"{STATE}/logs/workflow.log"
_STEP = re.compile(r"(reduce|session_reports) .*: \d+ sessions?, \d+ of them anew")
_NOTES = {"reduce": ("reduced", "sessions reduced"), "session_reports": ("drawn", "session reports drawn")}
_SOME_JOB = "At least one job did not complete successfully."  # whose own message has been passed on
_GRACE = 10.0  # how long a workflow that was told to stop may take [s]


def run(campaign: Path, results: Path, *, cores: int | None = None, loudness: str = "normal") -> int:
    """Run the workflow on a campaign.

    Parameters
    ----------
    campaign, results : Path
        The folders.
    cores : int, optional
        Processor cores; all where none is given.
    loudness : str
        `quiet` (errors), `normal` (one line for each batch and step, and what moved) or `verbose` (all that is said).

    Returns
    -------
    int
        0 if all was done.
    """
    shown = results
    campaign, results = folder_of(str(campaign), "campaign"), folder_of(str(results), "results")
    check_folders(campaign, results)
    make_state(results)
    before = read_state(results / STATE / "last")
    if _workflow(campaign, results, "all" if cores is None else str(cores), loudness):
        return 1
    if loudness != "quiet":
        _say(difference_text(before, read_state(results / STATE / "last")))
        _say(f"Results: {shown / 'report.pdf'}, with the tables beside it.")
    return 0


def _workflow(campaign: Path, results: Path, cores: str, loudness: str) -> int:
    command = [sys.executable, "-m", "snakemake", "--snakefile", str(places.snakefile()), "--cores", cores]
    command += ["--nocolor", "--config", f"campaign={campaign}", f"results={results}"]
    # A profile set in the environment is for plain runs; this command means the same to everybody.
    environment = {name: value for name, value in os.environ.items() if not name.startswith("SNAKEMAKE_")}
    environment["PYTHONSAFEPATH"] = "1"  # no module is taken from the results folder
    verbose = loudness == "verbose"
    with _log(results) as log, _terminable():
        process = subprocess.Popen(
            command,
            cwd=results,
            env=environment,
            stdin=subprocess.DEVNULL,
            stdout=subprocess.PIPE,
            stderr=subprocess.STDOUT if verbose else log,
            text=True,
            encoding="utf-8",
            errors="replace",
        )
        try:
            told = _follow(process, results, log, loudness)
            status = process.wait()
        except BaseException:
            _stop(process)
            raise
    if status:
        if not verbose:
            sys.stderr.write("".join(f"{line}\n" for line in (told if loudness == "quiet" else [])))
            sys.stderr.write(_reason(results / LOG) or _no_room(results))
        sys.stderr.write(f"Not finished. What is done stays; logs are in {results / STATE / 'logs'}\n")
    return status


def _log(results: Path) -> IO[str]:
    try:
        return open(results / LOG, "w", encoding="utf-8")
    except OSError as error:
        raise unwritable(results, error) from None


def _follow(process: subprocess.Popen[str], results: Path, log: IO[str], loudness: str) -> list[str]:
    """Pass on what the steps say until the workflow ends; returns it too."""
    told = []
    made: Plan | None = None
    for line in process.stdout or ():
        text = line.rstrip("\n")
        if loudness == "verbose":
            log.write(line)
            _say(text)
            continue
        told.append(text)
        if loudness == "normal":
            if step := _STEP.match(text):
                made = made or Plan.load(results)
                folder, words = _NOTES[step[1]]
                text = f"{step[1]}: {finished_sessions(results, made, folder)} of {len(made.sessions)} {words}"
            _say(text)
    return told


@contextmanager
def _terminable() -> Iterator[None]:
    """Take a request to end like an interruption, so that the workflow is not left running."""

    def interrupt(number: int, frame: FrameType | None) -> None:
        raise KeyboardInterrupt

    before = signal.signal(signal.SIGTERM, interrupt)
    try:
        yield
    finally:
        signal.signal(signal.SIGTERM, before)


def _stop(process: subprocess.Popen[str]) -> None:
    """End the workflow; a terminal has told it already, anything else has not."""
    try:
        process.wait(1.0)
    except subprocess.TimeoutExpired:
        process.send_signal(signal.SIGINT)
        try:
            process.wait(_GRACE)
        except subprocess.TimeoutExpired:
            process.kill()


def _no_room(results: Path) -> str:
    """What keeps the results folder from being written to, where the log could not say it for the same reason."""
    trial = results / STATE / "logs" / "trial"
    try:
        write_whole(trial, bytes(2**16))
        trial.unlink()
    except OSError as error:
        return f"{unwritable(results, error)}\n"
    return ""


def _reason(log: Path) -> str:
    """Error the workflow itself ended with, as far as its steps have not said it."""
    text = log.read_text(encoding="utf-8", errors="replace")
    found = re.search(r"^WorkflowError[^\n]*\n(.*)", text, re.MULTILINE | re.DOTALL)
    lines = found[1].splitlines() if found else []
    said = "\n".join(line for line in lines if not re.match(r'\s*File ".*", line \d+', line)).strip()
    return "" if said in ("", _SOME_JOB) else said + "\n"


def _say(text: str) -> None:
    sys.stdout.write(text + "\n")
    sys.stdout.flush()
