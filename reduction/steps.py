"""The steps of a run as plain functions; `python -m reduction.steps NAME ...` runs one as a job."""

from __future__ import annotations

import argparse
import logging
import shutil
import sys
import traceback
from collections.abc import Sequence
from pathlib import Path
from typing import TYPE_CHECKING

from reduction import digests, resultsfolder
from reduction.batches import STATE, Plan, make_plan, record_folder
from reduction.errors import Faults, InputError, ReductionError, ResultsError
from reduction.records import FACTS, SessionRecord
from reduction.rundiff import FILES
from reduction.wholefile import read_json, whole_file, write_json

if TYPE_CHECKING:
    from reduction.settings import Campaign

LOG = logging.getLogger(__name__)


def tell(text: str) -> None:
    """Say on standard output how far a run is, one line at once."""
    sys.stdout.write(text + "\n")
    sys.stdout.flush()


def plan(campaign: Path, results: Path) -> Plan:
    """Settle what is to be done and write it down for the other steps."""
    made = make_plan(campaign)
    (results / STATE).mkdir(parents=True, exist_ok=True)
    made.save(results)
    return made


def check(campaign: Path, results: Path | None = None) -> str:
    """Check a whole campaign; the text to print where it is fit to be reduced, in short where a run begins.

    Raises
    ------
    InputError
        If anything stops the campaign from being reduced; its message lists every fault.
    """
    from reduction.check import check_campaign, faults_text, report_text

    found, logs, faults = check_campaign(campaign)
    text = report_text(found, logs, faults)
    if len(faults):
        raise CheckError(text, faults)
    if results is not None:
        faulty = {name: faults_text(listed) for name, listed in found.faulty.items()}
        write_json(results / STATE / "verdict.json", {"faulty": faulty, "digest": Plan.load(results).campaign})
        left = [f"session {name}: left out for its faults\n{told}" for name, told in sorted(faulty.items())]
        text = "\n".join([*left, text.splitlines()[-1]])
    return text


class CheckError(InputError):
    """The campaign has faults; the message is the whole report of the check."""

    def __init__(self, text: str, faults: Faults) -> None:
        super().__init__(faults)
        self.text = text

    def __str__(self) -> str:
        return self.text


def _faulty(campaign: Path, results: Path, made: Plan) -> dict[str, str]:
    """Sessions the check has left out of this run, and why; checked again where no check of these files is noted."""
    path = results / STATE / "verdict.json"
    if not path.is_file() or read_json(path)["digest"] != made.campaign:
        check(campaign, results)
    return dict(read_json(path)["faulty"])


def reduce(campaign: Path, results: Path, batch: str) -> None:
    """Reduce the sessions of one batch, each to a record; those whose record is there already are passed over."""
    made = Plan.load(results)
    names = made.batches[batch]
    folders = {name: record_folder(results, name, made.sessions[name]) for name in names}
    todo = [name for name in names if not folders[name].is_dir()]
    failed: dict[str, str] = {}
    if todo:
        faulty = _faulty(campaign, results, made)
        settings = _campaign(campaign, todo)
        for name in todo:
            LOG.info("session %s", name)
            try:
                record = _left_out(name, faulty[name]) if name in faulty else _reduced(settings, name)
            except ReductionError as error:
                failed[name] = str(error)
                continue
            folders[name].parent.mkdir(parents=True, exist_ok=True)
            record.save(folders[name])
        _unchanged(campaign, made, names, [folders[name] for name in todo])
    if failed:
        raise ResultsError("\n".join(f"session {name}: {text}" for name, text in failed.items()))
    write_json(_note(results, "reduced", batch), {"digest": made.batch_digest(batch), "sessions": names})
    tell(f"reduce {_span(names)}: {len(names)} sessions, {len(todo)} of them anew")


def _campaign(folder: Path, sessions: Sequence[str]) -> Campaign:
    from reduction.settings import load_campaign

    return load_campaign(folder, faults=Faults(), only=sessions)


def _reduced(settings: Campaign, session: str) -> SessionRecord:
    from reduction.logs import read_logs
    from reduction.session import reduce_session

    faults = Faults()
    logs = read_logs(settings.folder, settings.sessions[session], faults=faults)
    if len(faults):
        raise InputError(faults)
    try:
        return reduce_session(settings, session, logs)
    except ReductionError as error:
        if settings.options.when_a_session_fails != "leave_out":
            raise
        return _left_out(session, str(error))


def _left_out(session: str, reason: str) -> SessionRecord:
    return SessionRecord(facts={"session": session, "status": "left_out", "reason": reason})


def _unchanged(campaign: Path, made: Plan, names: Sequence[str], fresh: Sequence[Path]) -> None:
    """Refuse, and forget, records made while their inputs were being edited."""
    now = digests.session_inputs(campaign, names) if fresh else made.inputs
    edited = [name for name in names if now[name] != made.inputs[name]]
    if edited:
        for folder in fresh:
            shutil.rmtree(folder, ignore_errors=True)
        message = f"edited while the run was going on: {', '.join(edited)}. Start the run again."
        raise ResultsError(message)


def adjust(campaign: Path, results: Path) -> None:
    """Reduce all sessions of a campaign together, each to a record of its own."""
    from reduction.logs import read_logs
    from reduction.session import reduce_campaign

    made = Plan.load(results)
    folders = dict(made.records(results))
    fresh = [folder for folder in folders.values() if not folder.is_dir()]
    if fresh:
        faulty = _faulty(campaign, results, made)
        taken = [name for name in folders if name not in faulty]
        settings = _campaign(campaign, taken)
        logs = {name: read_logs(campaign, settings.sessions[name], faults=Faults()) for name in taken}
        records = reduce_campaign(settings, logs)
        records |= {name: _left_out(name, text) for name, text in faulty.items()}
        for name, folder in folders.items():
            folder.parent.mkdir(parents=True, exist_ok=True)
            records[name].save(folder)
        _unchanged(campaign, made, list(folders), list(folders.values()))
    write_json(results / STATE / "adjusted.json", {"digest": made.adjusted, "sessions": sorted(folders)})
    tell(f"adjust: {len(folders)} sessions together")


def session_reports(results: Path, batch: str) -> None:
    """Draw the reports of the sessions of one batch; those that are there already are passed over."""
    made = Plan.load(results)
    names = made.batches[batch]
    todo = [name for name in names if not resultsfolder.page(results, name, made.page_name(name)).is_file()]
    for name in todo:
        _draw(results, made, name)
    note = {"digest": resultsfolder.pages_digest(made, batch), "sessions": names}
    write_json(_note(results, "drawn", batch), note)
    tell(f"session_reports {_span(names)}: {len(names)} sessions, {len(todo)} of them anew")


def _draw(results: Path, made: Plan, session: str) -> None:
    from reduction.report import failed_session_pdf, session_pdf

    name = made.record_name(session)
    folder = record_folder(results, session, name)
    page = resultsfolder.page(results, session, made.page_name(session))
    page.parent.mkdir(parents=True, exist_ok=True)
    LOG.info("session %s", session)
    facts = read_json(folder / FACTS)
    if facts["status"] == "left_out":
        failed_session_pdf(session, str(facts["reason"]), page, digest=name)
    else:
        session_pdf(folder, page, digest=name, title=made.title)


def tables(campaign: Path, results: Path) -> None:
    """Put the campaign's tables together from the records, and state what they were made from."""
    from reduction.assembly import gather, run_statement

    made = Plan.load(results)
    folders = dict(made.records(results))
    gather(list(folders.values()), results)
    settings = _campaign(campaign, [])
    write_json(results / "run.json", run_statement(settings, made, results))
    tell(f"tables: {len(folders)} sessions")


def comparison(results: Path) -> None:
    """Compare the groups of the campaign, with the session as the unit."""
    from reduction.comparisontables import write_comparison

    made = Plan.load(results)
    facts = {name: read_json(folder / FACTS) for name, folder in made.records(results)}
    found = write_comparison(results, facts, read_json(results / "run.json")["settings"])
    tell(f"comparison: {len(found.means.groups)} groups")


def report(results: Path) -> None:
    """Draw the campaign's report."""
    from reduction.report import campaign_pdf

    made = Plan.load(results)
    records = dict(made.records(results))
    campaign_pdf(results, records, results / "report.pdf", digest=made.campaign, title=made.title)
    tell(f"report: {len(made.sessions)} sessions")


def session_files(results: Path) -> None:
    """Lay each session's readings and report beside the campaign's."""
    made = Plan.load(results)
    for folder in ("readings", "sessions"):
        (results / folder).mkdir(exist_ok=True)
    for name, record in made.records(results):
        page = resultsfolder.page(results, name, made.page_name(name))
        _copy(record / "readings.csv", results / "readings" / f"{name}.csv")
        _copy(page, results / "sessions" / f"{name}.pdf")
    tell(f"session_files: {len(made.sessions)} sessions")


def _copy(source: Path, target: Path) -> None:
    with whole_file(target) as out, open(source, "rb") as handle:
        shutil.copyfileobj(handle, out)


def tidy(results: Path) -> None:
    """Remove what is of sessions no longer there, and keep what the next run is compared with."""
    resultsfolder.tidy(results, Plan.load(results))
    last = results / STATE / "last"
    last.mkdir(exist_ok=True)
    for name in FILES:
        _copy(results / name, last / name)
    write_json(results / STATE / "tidied.json", {"digest": Plan.load(results).campaign})
    tell("tidy: done")


def _note(results: Path, step: str, batch: str) -> Path:
    path = results / STATE / step / f"{batch}.json"
    path.parent.mkdir(parents=True, exist_ok=True)
    return path


def _span(names: Sequence[str]) -> str:
    return names[0] if len(names) == 1 else f"{names[0]} to {names[-1]}"


STEPS = "plan check reduce adjust session_reports tables comparison report session_files tidy"


def _arguments(argv: Sequence[str] | None) -> argparse.Namespace:
    parser = argparse.ArgumentParser(prog="python -m reduction.steps", description=__doc__)
    parser.add_argument("step", choices=STEPS.split())
    parser.add_argument("--campaign", type=Path, help="folder that holds campaign.yaml and sessions/")
    parser.add_argument("--results", type=Path, default=Path(), help="folder of the results (here)")
    parser.add_argument("--batch", help="name of the batch of sessions, its first, for reduce and session_reports")
    return parser.parse_args(argv)


def main(argv: Sequence[str] | None = None) -> int:
    """Run one step as a job; 0 where it is done, 1 with a message where it cannot be."""
    asked = _arguments(argv)
    given = {name: value for name in ("campaign", "results", "batch") if (value := getattr(asked, name)) is not None}
    logging.basicConfig(level=logging.INFO, stream=sys.stderr, format="%(levelname)s %(name)s: %(message)s")
    label = f"{asked.step} {asked.batch}" if asked.batch else asked.step
    try:
        if asked.step != "plan" and Plan.load(asked.results).code != digests.code_digest():
            message = "the program or its libraries changed since the run began. Start the run again."
            raise ResultsError(message)
        step = globals()[asked.step]
        wanted = step.__annotations__
        with resultsfolder.job(asked.results):
            said = step(**{name: value for name, value in given.items() if name in wanted})
        if isinstance(said, str):
            tell(said)
    except ReductionError as error:
        tell(f"{label}: {error}")
        LOG.error("%s", error)
        return 1
    except Exception as error:  # noqa: BLE001 - a job ends in one plain line, its log has the rest
        tell(f"{label}: stopped by {type(error).__name__}: {error}. The log of this step in {STATE}/logs says more.")
        LOG.error("%s", traceback.format_exc())
        return 1
    return 0


if __name__ == "__main__":
    sys.exit(main())
