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
from reduction.batches import STATE, Plan, campaign_digest, constants_folder, make_plan, record_folder
from reduction.errors import Faults, InputError, ReductionError, ResultsError
from reduction.reasons import reasons
from reduction.records import FACTS, SessionRecord
from reduction.resultfiles import SUMS
from reduction.rundiff import FILES
from reduction.wholefile import read_json, whole_file, write_json

if TYPE_CHECKING:
    from reduction.markingfiles import Scheme
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
    from reduction.check import check_campaign, check_marking, faults_text, report_text

    keep = None if results is None else constants_folder(results)
    found, logs, faults = check_campaign(campaign, keep=keep)
    marking = check_marking(found, logs, faults)
    text = report_text(found, logs, faults, marking)
    if len(faults):
        raise CheckError(text, faults)
    if results is not None:
        faulty = {name: faults_text(listed) for name, listed in found.faulty.items()}
        unmarked = {name: faults_text(listed) for name, listed in marking.faulty.items()} if marking else {}
        verdict = {"faulty": faulty, "unmarked": unmarked, "digest": Plan.load(results).campaign}
        write_json(results / STATE / "verdict.json", verdict)
        left = [f"session {name}: left out for its faults\n{told}" for name, told in sorted(faulty.items())]
        (results / SUMS).unlink(missing_ok=True)  # until the run is finished, the results are no finished run's
        left += [f"bench {name}: not marked for its faults\n{told}" for name, told in sorted(unmarked.items())]
        text = "\n".join([*left, text.splitlines()[-1], *reasons(campaign, results, Plan.load(results))])
    return text


class CheckError(InputError):
    """The campaign has faults; the message is the whole report of the check."""

    def __init__(self, text: str, faults: Faults) -> None:
        super().__init__(faults)
        self.text = text

    def __str__(self) -> str:
        return self.text


def _faulty(campaign: Path, results: Path, made: Plan) -> dict[str, str]:
    """Sessions the check has left out of this run, and why."""
    return dict(_verdict(campaign, results, made)["faulty"])


def _verdict(campaign: Path, results: Path, made: Plan) -> dict[str, dict[str, str]]:
    """What the check found; checked again where no check of these files is noted."""
    path = results / STATE / "verdict.json"
    if not path.is_file() or read_json(path)["digest"] != made.campaign:
        check(campaign, results)
    return {name: value for name, value in read_json(path).items() if name != "digest"}


def reduce(campaign: Path, results: Path, batch: str) -> None:
    """Reduce the sessions of one batch, each to a record; those whose record is there already are passed over."""
    made = Plan.load(results)
    names = made.batches[batch]
    folders = {name: record_folder(results, name, made.sessions[name]) for name in names}
    todo = [name for name in names if not folders[name].is_dir()]
    failed: dict[str, str] = {}
    if todo:
        faulty = _faulty(campaign, results, made)
        settings = _campaign(campaign, todo, results)
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


def _campaign(folder: Path, sessions: Sequence[str], results: Path) -> Campaign:
    from reduction.settings import load_campaign

    return load_campaign(folder, faults=Faults(), only=sessions, keep=constants_folder(results))


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
    edited = _edited(campaign, made, names) if fresh else []
    if edited:
        for folder in fresh:
            shutil.rmtree(folder, ignore_errors=True)
        raise _edited_meanwhile(", ".join(edited))


def _edited(campaign: Path, made: Plan, names: Sequence[str]) -> list[str]:
    now = digests.session_inputs(campaign, names)
    return [name for name in names if now[name] != made.inputs[name]]


def _edited_meanwhile(what: str) -> ResultsError:
    return ResultsError(f"edited while the run was going on: {what}. Start the run again.")


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
        settings = _campaign(campaign, taken, results)
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
    settings, inputs = _campaign(campaign, [], results), digests.input_digests(campaign)
    if campaign_digest(campaign, inputs, made.code) != made.campaign:
        raise _edited_meanwhile(", ".join(_edited(campaign, made, list(folders))) or "files of the campaign")
    gather(list(folders.values()), results)
    write_json(results / "run.json", run_statement(settings, made, results, inputs))
    tell(f"tables: {len(folders)} sessions")


def comparison(results: Path) -> None:
    """Compare the groups of the campaign, with the session as the unit."""
    from reduction.comparisontables import write_comparison

    made = Plan.load(results)
    facts = {name: read_json(folder / FACTS) for name, folder in made.records(results)}
    found = write_comparison(results, facts, read_json(results / "run.json")["settings"])
    tell(f"comparison: {len(found.means.groups)} groups")


def report(results: Path) -> None:
    """Draw the campaign's report, to print and for a screen."""
    from reduction.report import campaign_pages

    made = Plan.load(results)
    records = dict(made.records(results))
    traps = {name: constants_folder(results) / f"{drawing}.json" for name, drawing in made.drawings.items()}
    campaign_pages(results, records, digest=made.campaign, title=made.title, traps=traps)
    tell(f"report: {len(made.sessions)} sessions")


def mark(campaign: Path, results: Path, batch: str) -> None:
    """Mark the benches of one batch, each to a file; those whose file is there already are passed over."""
    made = Plan.load(results)
    names = made.batches[batch]
    files = {name: resultsfolder.marks_file(results, name, made.marks[name]) for name in names}
    todo = [name for name in names if not files[name].is_file()]
    if todo:
        from reduction.markedbench import mark_benches
        from reduction.marking import to_record

        verdict = _verdict(campaign, results, made)
        reasons = verdict["faulty"] | verdict["unmarked"]
        records = {name: record_folder(results, name, made.record_name(name)) for name in todo}
        for marks in mark_benches(_campaign(campaign, todo, results), records, reasons):
            files[marks.session].parent.mkdir(parents=True, exist_ok=True)
            write_json(files[marks.session], to_record(marks))
        _unmarked_where_edited(campaign, made, [files[name] for name in todo])
    write_json(_note(results, "marked", batch), {"digest": made.marks_digest(batch), "sessions": names})
    tell(f"mark {_span(names)}: {len(names)} benches, {len(todo)} of them anew")


def _unmarked_where_edited(campaign: Path, made: Plan, fresh: Sequence[Path]) -> None:
    """Refuse, and forget, marks made while their inputs were being edited."""
    if digests.mark_inputs(campaign, made.sessions) != made.marks:
        for path in fresh:
            path.unlink(missing_ok=True)
        message = "files of marking were edited while the run was going on. Start the run again."
        raise ResultsError(message)


def mark_sheet(campaign: Path, results: Path) -> None:
    """Put the mark sheet together, the benches that are not marked first."""
    from reduction.marking import from_record
    from reduction.markingfiles import read_marking
    from reduction.marksheet import STAFF, write_people, write_sheet

    made = Plan.load(results)
    files = read_marking(campaign, dict.fromkeys(made.sessions), faults=Faults(), leave_out=True)
    if files is None:
        message = "the scheme was edited while the run was going on. Start the run again."
        raise ResultsError(message)
    paths = [resultsfolder.marks_file(results, name, own) for name, own in sorted(made.marks.items())]
    benches = [from_record(read_json(path)) for path in paths]
    unmarked = _verdict(campaign, results, made)["unmarked"]
    unknown = {name: text for name, text in unmarked.items() if name not in made.marks}
    write_sheet(results / STAFF, files.scheme, benches, unknown)
    write_people(results / STAFF, files.register)
    tell(f"mark_sheet: {len(benches)} benches")


def bench_reports(campaign: Path, results: Path, batch: str) -> None:
    """Draw the feedback of the benches of one batch; what is there already is passed over."""
    made = Plan.load(results)
    names = made.batches[batch]
    pages = {name: resultsfolder.bench_page(results, name, made.bench_page_name(name)) for name in names}
    todo = [name for name in names if not pages[name].is_file()]
    if todo:
        from reduction.markingpages import bench_pdf
        from reduction.markrecord import from_record

        shown = _scheme(campaign).show_reduction
        for name in todo:
            LOG.info("bench %s", name)
            marks = from_record(read_json(resultsfolder.marks_file(results, name, made.marks[name])))
            folder = _record_alone(campaign, results, made, name) if shown else None
            folder = folder or record_folder(results, name, made.record_name(name))
            pages[name].parent.mkdir(parents=True, exist_ok=True)
            bench_pdf(marks, folder, pages[name], digest=pages[name].stem, title=made.title, show_reduction=shown)
    note = {"digest": resultsfolder.bench_pages_digest(made, batch), "sessions": names}
    write_json(_note(results, "feedback_drawn", batch), note)
    tell(f"bench_reports {_span(names)}: {len(names)} benches, {len(todo)} of them anew")


def _record_alone(campaign: Path, results: Path, made: Plan, session: str) -> Path | None:
    """Record of a bench adjusted by itself, where that of the campaign is not: no bench may read of the others."""
    if not made.together:
        return None
    folder = record_folder(results, session, made.sessions[session])
    if not folder.is_dir():
        from reduction.markedbench import within_the_bench

        faulty = _faulty(campaign, results, made)
        settings = within_the_bench(_campaign(campaign, [session], results))
        record = _left_out(session, faulty[session]) if session in faulty else _reduced(settings, session)
        folder.parent.mkdir(parents=True, exist_ok=True)
        record.save(folder)
    return folder


def _scheme(campaign: Path) -> Scheme:
    from reduction.markingfiles import read_scheme

    scheme = read_scheme(campaign, faults=Faults())
    if scheme is None:
        message = "the scheme was edited while the run was going on. Start the run again."
        raise ResultsError(message)
    return scheme


def class_summary(campaign: Path, results: Path) -> None:
    """Draw the summary of the class, list who asks for a pseudonym, lay out the feedback of each bench."""
    from reduction.claims import BenchFaults, read_register
    from reduction.markingpages import class_pdf
    from reduction.markrecord import from_record
    from reduction.postedmarks import write_lists
    from reduction.pseudonyms import read_key

    made = Plan.load(results)
    folder = results / resultsfolder.MARKING
    files = {name: resultsfolder.marks_file(results, name, own) for name, own in made.marks.items()}
    benches = {name: from_record(read_json(path)) for name, path in files.items()}
    unmarked = _verdict(campaign, results, made)["unmarked"]
    unknown = {name: text for name, text in unmarked.items() if name not in made.marks}
    for part in ("staff", "bench"):
        (folder / part).mkdir(parents=True, exist_ok=True)
    summary = folder / "staff" / "summary.pdf"
    class_pdf(list(benches.values()), summary, digest=made.campaign, title=made.title, unknown=unknown)
    register = read_register(campaign, made.marks, set(made.marks), BenchFaults()) or {}
    key = read_key(campaign, [row for rows in register.values() for row in rows], faults=Faults())
    write_lists(folder / "staff", key, register, benches)
    for name in benches:
        _copy(resultsfolder.bench_page(results, name, made.bench_page_name(name)), folder / "bench" / f"{name}.pdf")
    tell(f"class_summary: {len(benches)} benches")


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


def provenance(results: Path) -> None:
    """Write what tells how the results came about, and the checksums of every file."""
    from reduction.provenance import write_provenance

    made = Plan.load(results)
    count = write_provenance(results, read_json(results / "run.json"), made.title)
    tell(f"provenance: {count} files")


def _note(results: Path, step: str, batch: str) -> Path:
    path = results / STATE / step / f"{batch}.json"
    path.parent.mkdir(parents=True, exist_ok=True)
    return path


def _span(names: Sequence[str]) -> str:
    return names[0] if len(names) == 1 else f"{names[0]} to {names[-1]}"


def _unwritable(error: OSError) -> str:
    """What a file that cannot be read or written means, and what to do."""
    place = f"{error.filename}: " if error.filename else ""
    return (
        f"{place}{error.strerror or error}. Make room, or allow it, and start the same command again: what is done "
        "stays, and it goes on from there."
    )


STEPS = "plan check reduce adjust session_reports tables comparison report "
STEPS += "mark mark_sheet bench_reports class_summary session_files tidy provenance"


def _arguments(argv: Sequence[str] | None) -> argparse.Namespace:
    parser = argparse.ArgumentParser(prog="python -m reduction.steps", description=__doc__)
    parser.add_argument("step", choices=STEPS.split())
    parser.add_argument("--campaign", type=Path, help="folder that holds campaign.yaml and sessions/")
    parser.add_argument("--results", type=Path, default=Path(), help="folder of the results (here)")
    parser.add_argument("--batch", help="name of the batch of sessions, its first, for reduce, session_reports, mark")
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
    except OSError as error:
        tell(f"{label}: {_unwritable(error)}")
        LOG.error("%s", traceback.format_exc())
        return 1
    except Exception as error:  # noqa: BLE001 - a job ends in one plain line, its log has the rest
        tell(f"{label}: stopped by {type(error).__name__}: {error}. The log of this step in {STATE}/logs says more.")
        LOG.error("%s", traceback.format_exc())
        return 1
    return 0


if __name__ == "__main__":
    sys.exit(main())
