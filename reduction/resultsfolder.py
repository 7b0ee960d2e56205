"""The results folder: one run at a time, one campaign, going on after a kill, nothing left of what is gone."""

from __future__ import annotations

import binascii
import hashlib
import json
import os
import secrets
import shutil
import sys
import time
from base64 import urlsafe_b64decode
from collections.abc import Callable, Iterator
from contextlib import contextmanager, suppress
from importlib import metadata
from pathlib import Path
from typing import IO

from reduction import places
from reduction.batches import STATE, Plan, constants_folder, make_plan, record_folder
from reduction.checksums import set_edited_aside
from reduction.digests import definition_digest, package_digest, session_files
from reduction.errors import ResultsError
from reduction.wholefile import write_json, write_whole

try:
    import fcntl
except ImportError:  # no such lock on this system: two runs at once are then the user's to avoid
    fcntl = None  # type: ignore[assignment]

FOLDERS = ("MOTESCALE_CAMPAIGN", "MOTESCALE_RESULTS")  # tell the jobs of a run where they are to read and write
RUN = "MOTESCALE_RUN"  # tells the jobs which run they belong to
MARKING = "marking"  # folder in the results for marks, by name as in the campaign
PATIENCE = 120.0  # how long to wait for jobs that outlived a killed run [s]


def folder_of(value: object, name: str) -> Path:
    """Path given as a setting of the workflow, absolute; a number is refused, because its spelling is lost."""
    if not isinstance(value, str) or not value:
        message = (
            f"{name}={value}: a path is expected, and this arrives as a number. Write ./ in front: {name}=./{value}"
        )
        raise ResultsError(message)
    return Path(os.path.abspath(os.path.expanduser(value)))


def check_folders(campaign: Path, results: Path) -> None:
    """Refuse a campaign that is not there, and results that would mix with it."""
    if not campaign.is_dir():
        message = (
            f"campaign={campaign}: there is no such folder. Give the folder that holds campaign.yaml and sessions/."
        )
        raise ResultsError(message)
    inside = results.relative_to(campaign).parts[:1] if campaign in results.parents else ()
    if results == campaign or inside in [("sessions",), ("traps",), ("species",), ("marking",)]:
        message = f"results={results}: this folder belongs to the campaign. Give a folder of its own."
        raise ResultsError(message)


def check_code(home: Path) -> None:
    """Refuse to run where the package imported is not the one beside the workflow, or where another copy differs.

    Parameters
    ----------
    home : Path
        Folder that the package belonging to the workflow lies in.
    """
    own = home / "reduction"
    if own.resolve() != places.PACKAGE:
        message = f"the workflow belongs to {own}, but Python imports {places.PACKAGE}. Start it where it is installed."
        raise ResultsError(message)
    try:
        other = Path(str(metadata.distribution("motescale").locate_file("reduction"))).resolve()
    except metadata.PackageNotFoundError:
        return
    if other == own.resolve() or not (other / "__init__.py").is_file():
        return
    if package_digest(other, other / "workflow") != package_digest():
        message = (
            f"the program in {own} and the installed one in {other} differ. Install this one again "
            "(python -m pip install --no-deps --no-build-isolation .) or remove the installed one "
            "(python -m pip uninstall motescale)."
        )
        raise ResultsError(message)


def job_environment(campaign: Path, results: Path, home: Path | None) -> dict[str, str]:
    """Environment of the jobs: whose they are, the package of this workflow, one thread each.

    Parameters
    ----------
    campaign, results : Path
        The folders, which a job on a cluster cannot tell from the command line where they were given relative to
        where the run began.
    home : Path, optional
        Folder of the package in a checkout; None where it is installed and Python finds it by itself.
    """
    found = dict.fromkeys(("OMP_NUM_THREADS", "OPENBLAS_NUM_THREADS", "MKL_NUM_THREADS"), "1")
    found |= {"MPLBACKEND": "Agg", "PYTHONSAFEPATH": "1", "PYTHONHASHSEED": "0"}
    found |= {FOLDERS[0]: str(campaign), FOLDERS[1]: str(results), RUN: _run_id(results)}
    if home is not None:
        before = [part for part in os.environ.get("PYTHONPATH", "").split(os.pathsep) if part not in ("", str(home))]
        found["PYTHONPATH"] = os.pathsep.join([str(home), *before])
    return found


def _run_id(results: Path) -> str:
    with suppress(OSError):
        return (results / STATE / "run.id").read_text(encoding="utf-8").strip()
    return ""


def begin(campaign: Path, results: Path, tell: Callable[[str], object] = sys.stderr.write) -> tuple[IO[str], Plan]:
    """Take the results folder for one run, put right what a killed run left, and settle what is to be done.

    Returns
    -------
    IO, Plan
        The lock, held for as long as it is open; the plan, which is also written down for the jobs.
    """
    check_folders(campaign, results)
    held = take(results)
    try:
        write_whole(results / STATE / "run.id", secrets.token_hex(8).encode())  # jobs that begin from here on know
        wait_for_jobs(results, tell)
        clear_after_kill(results)
        made = make_plan(campaign)
        claim(results, campaign, made)
        made.save(results)
        set_edited_aside(results, tell)
        drop_stale(results, made)
        no_time_to_come(results)
    except OSError as error:
        raise unwritable(results, error) from None
    return held, made


def unwritable(results: Path, error: OSError) -> ResultsError:
    """A results folder that is full or closed, and what to do."""
    why = error.strerror or str(error)
    return ResultsError(
        f"{results}: cannot be written to ({why}). Make room, or allow it, or give a results folder of your own."
    )


def no_time_to_come(results: Path) -> None:
    """Take back time stamps that lie in the future, of results made while a clock was wrong.

    What was made from them since would look older than they are for as long, and be made again by every run. The
    digests say what has to be made; between files all that counts is that none looks newer than it is.
    """
    state = results / STATE
    places = (results, results / "readings", results / "sessions", state, state / "reduced", state / "drawn")
    stamps = {path: path.stat().st_mtime for place in places if place.is_dir() for path in place.iterdir()}
    ahead = [path for path, stamp in stamps.items() if stamp > time.time() and path.is_file()]
    for path in ahead:
        oldest = min(stamps.values())
        os.utime(path, (oldest, oldest))


def make_state(results: Path) -> None:
    """Make the results folder with the place for all that is no result."""
    try:
        (results / STATE / "logs").mkdir(parents=True, exist_ok=True)
    except OSError as error:
        raise unwritable(results, error) from None


def take(results: Path) -> IO[str]:
    """Hold the results folder for the one run that may go on in it; let go when the process ends, however it ends.

    Raises
    ------
    ResultsError
        If another run holds it, or it cannot be written to.
    """
    make_state(results)
    try:
        handle = open(results / STATE / "run.lock", "a+", encoding="utf-8")  # noqa: SIM115 - held until the process ends
    except OSError as error:
        raise unwritable(results, error) from None
    if not _lock(handle, exclusive=True):
        handle.close()
        message = f"{results}: another run is going on in this folder. Wait for it to end, or give another folder."
        raise ResultsError(message)
    return handle


def _lock(handle: IO[str], *, exclusive: bool, wait: bool = False) -> bool:
    if fcntl is None:
        return True
    kind = fcntl.LOCK_EX if exclusive else fcntl.LOCK_SH
    try:
        fcntl.flock(handle, kind if wait else kind | fcntl.LOCK_NB)
    except BlockingIOError:
        return False
    except OSError:
        return True  # a file system without locks
    return True


def join(results: Path) -> IO[str]:
    """Mark a job as going on for as long as what is returned is open, so that a later run waits for its end.

    Raises
    ------
    ResultsError
        If the run it belongs to is over and another has begun: it was queued on a cluster when its run was killed.
    """
    make_state(results)
    handle = open(results / STATE / "jobs.lock", "a+", encoding="utf-8")  # noqa: SIM115 - held until the job ends
    _lock(handle, exclusive=False, wait=True)
    if os.environ.get(RUN) not in (None, "", _run_id(results)):
        handle.close()
        message = "the run this job belongs to is over and another has begun. Nothing was done."
        raise ResultsError(message)
    return handle


@contextmanager
def job(results: Path) -> Iterator[None]:
    """Mark a job as going on (see `join`) while it lasts."""
    with join(results):
        yield


def wait_for_jobs(results: Path, tell: Callable[[str], object], patience: float = PATIENCE) -> None:
    """Wait until no job of an earlier, killed run writes into the folder any more."""
    told = False
    deadline = time.monotonic() + patience
    with open(results / STATE / "jobs.lock", "a+", encoding="utf-8") as handle:
        while not _lock(handle, exclusive=True):
            if time.monotonic() > deadline:
                message = f"{results}: a job of a run that was killed is still at work here. Wait for it to end."
                raise ResultsError(message)
            if not told:
                tell("waiting for a job of an earlier run that was killed\n")
                told = True
            time.sleep(0.2)


def clear_after_kill(results: Path) -> None:
    """Take away what a killed run left: its lock, and the files it was about to write, each marked as incomplete.

    Files only ever appear by rename, so those that are there are whole; but nobody has noted what they were made from.
    """
    marks = results / ".snakemake" / "incomplete"
    for path in sorted(marks.rglob("*")) if marks.is_dir() else []:
        if path.is_file() and path.name != "migration_underway":
            name = "".join(part.removeprefix("@") for part in path.relative_to(marks).parts)
            with suppress(binascii.Error, UnicodeDecodeError, OSError, ValueError):
                target = results / urlsafe_b64decode(name).decode()
                if results in Path(os.path.normpath(target)).parents and not target.is_dir():
                    target.unlink(missing_ok=True)
            path.unlink(missing_ok=True)
    shutil.rmtree(results / ".snakemake" / "locks", ignore_errors=True)


def claim(results: Path, campaign: Path, plan: Plan) -> None:
    """Remember whose results these are; refuse those of another campaign.

    The same campaign is one in the same place, or one that shares a session with the last run, file for file.
    """
    place = hashlib.sha256(os.fsencode(os.path.realpath(campaign))).hexdigest()
    path = results / STATE / "campaign.json"
    sessions = set(session_files(campaign, plan.sessions).values())
    with suppress(OSError, ValueError):
        known = json.loads(path.read_text(encoding="utf-8"))
        if known["place"] != place and not set(known["sessions"]) & sessions:
            message = (
                f"{results}: these are results of another campaign. Give another results folder, or remove this one "
                "if they are no longer wanted."
            )
            raise ResultsError(message)
    write_json(path, {"place": place, "sessions": sorted(sessions)})


def drop_stale(results: Path, plan: Plan) -> None:
    """Drop the notes on finished batches whose records or pages are gone or that were made for other inputs."""
    state = results / STATE
    for batch, names in plan.batches.items():
        reduced = all(record_folder(results, name, plan.sessions[name]).is_dir() for name in names)
        _drop(state / "reduced" / f"{batch}.json", reduced, plan.batch_digest(batch))
        drawn = all(page(results, name, plan.page_name(name)).is_file() for name in names)
        _drop(state / "drawn" / f"{batch}.json", drawn, pages_digest(plan, batch))
        if plan.marks:
            marked = all(marks_file(results, name, plan.marks[name]).is_file() for name in names)
            _drop(state / "marked" / f"{batch}.json", marked, plan.marks_digest(batch))
            drawn = all(bench_page(results, name, plan.bench_page_name(name)).is_file() for name in names)
            _drop(state / "feedback_drawn" / f"{batch}.json", drawn, bench_pages_digest(plan, batch))
    if plan.together:
        adjusted = all(folder.is_dir() for _, folder in plan.records(results))
        _drop(state / "adjusted.json", adjusted, plan.adjusted)


def finished_sessions(results: Path, plan: Plan, step: str) -> int:
    """Count the sessions whose batch has been through a step (`reduced` or `drawn`)."""
    folder = results / STATE / step
    return sum(len(names) for batch, names in plan.batches.items() if (folder / f"{batch}.json").is_file())


def _drop(note: Path, complete: bool, expected: str) -> None:
    with suppress(OSError, ValueError, KeyError):
        if complete and json.loads(note.read_text(encoding="utf-8"))["digest"] == expected:
            return
    note.unlink(missing_ok=True)


def page(results: Path, session: str, name: str) -> Path:
    """File of one session's report among the pages that are kept."""
    return results / STATE / "pages" / session / f"{name}.pdf"


def provenance_digest(plan: Plan) -> str:
    """Digest of all that the files of the last step depend on, the definition of the workflow included."""
    return digest_of([plan.campaign, definition_digest()])


def marks_file(results: Path, session: str, name: str) -> Path:
    """File of one bench's marks among those that are kept."""
    return results / STATE / "marks" / session / f"{name}.json"


def bench_page(results: Path, session: str, name: str) -> Path:
    """File of one bench's feedback among the pages that are kept."""
    return results / STATE / "feedback" / session / f"{name}.pdf"


def bench_pages_digest(plan: Plan, batch: str) -> str:
    """Digest of all that the feedback of one batch depends on."""
    return digest_of([plan.bench_page_name(name) for name in plan.batches[batch]])


def pages_digest(plan: Plan, batch: str) -> str:
    """Digest of all that the pages of one batch depend on."""
    return digest_of([plan.page_name(name) for name in plan.batches[batch]])


def digest_of(names: list[str]) -> str:
    """Digest of a list of digests."""
    return hashlib.sha256("\n".join(names).encode()).hexdigest()


def _parts(results: Path) -> list[Path]:
    """Files and folders that a killed job had begun; no job but the one that tidies is at work then."""
    places = [results, results / "readings", results / "sessions", results / STATE, *(results / STATE).glob("*/")]
    return sorted(path for place in places for path in place.glob(".*.part"))


def tidy(results: Path, plan: Plan) -> None:
    """Remove the files of sessions no longer there, and records and pages that nothing refers to any more."""
    state = results / STATE
    for folder, suffix in (("sessions", ".pdf"), ("readings", ".csv")):
        for path in sorted((results / folder).glob(f"*{suffix}")):
            if path.stem not in plan.sessions:
                path.unlink()
    kept = {record_folder(results, name, own) for name, own in plan.sessions.items()}
    kept |= {folder for _, folder in plan.records(results)}
    for path in sorted((state / "records").glob("*/*")):
        if path not in kept:
            shutil.rmtree(path)
    pages = {page(results, name, plan.page_name(name)) for name in plan.sessions}
    for path in sorted((state / "pages").glob("*/*")):
        if path not in pages:
            path.unlink()
    marks = {marks_file(results, name, own) for name, own in plan.marks.items()}
    for path in sorted((state / "marks").glob("*/*")):
        if path not in marks:
            path.unlink()
    feedback = {bench_page(results, name, plan.bench_page_name(name)) for name in plan.marks}
    for path in sorted((state / "feedback").glob("*/*")):
        if path not in feedback:
            path.unlink()
    for path in sorted((results / MARKING / "bench").glob("*")):
        if path.suffix != ".pdf" or path.stem not in plan.marks:
            path.unlink()
    if not plan.marks:
        shutil.rmtree(results / MARKING, ignore_errors=True)
    for part in ("reduced", "drawn", "marked", "feedback_drawn"):
        for path in sorted((state / part).glob("*")):
            if path.stem not in plan.batches or (part in ("marked", "feedback_drawn") and not plan.marks):
                path.unlink()
    for path in sorted(constants_folder(results).glob("*")):
        if path.is_dir():  # what a killed job was writing
            shutil.rmtree(path, ignore_errors=True)
        elif path.stem not in plan.drawings.values():
            path.unlink()
    for part in ("records", "pages", "marks", "feedback"):
        for path in sorted((state / part).glob("*")):
            with suppress(OSError):
                path.rmdir()  # only where it is empty
    for path in _parts(results):
        shutil.rmtree(path) if path.is_dir() else path.unlink(missing_ok=True)
