"""From a session's record and claims to its marks: always against a reduction adjusted within the bench alone."""

from __future__ import annotations

from collections.abc import Callable, Iterator, Mapping, Sequence
from dataclasses import replace
from functools import cache, cached_property
from pathlib import Path

from reduction.benchreference import ParticleReference, references_of
from reduction.errors import Faults, InputError
from reduction.logs import Logs, read_logs
from reduction.marking import BenchMarks, Recomputed, mark_bench, not_marked
from reduction.markingfiles import MarkingFiles, read_marking
from reduction.mistakes import Mistake, diameter_at, mistakes_of
from reduction.preparation import prepare
from reduction.records import SessionRecord, load
from reduction.session import reduce_session
from reduction.settings import Campaign
from reduction.solution import Reduced, fit_session

ALONE = "session"  # how a bench is adjusted, whatever the campaign says: other benches must have no say in its marks


def within_the_bench(campaign: Campaign) -> Campaign:
    """The campaign with every bench adjusted by itself."""
    return replace(campaign, options=replace(campaign.options, adjust=ALONE))


def marks_of(
    campaign: Campaign, session: str, files: MarkingFiles, record: SessionRecord | None, logs: Callable[[], Logs]
) -> BenchMarks:
    """Marks of one bench.

    Parameters
    ----------
    campaign : Campaign
        Checked settings.
    session : str
        The bench.
    files : MarkingFiles
        Checked files of marking.
    record : SessionRecord or None
        Its reduction, where the campaign adjusts each session by itself; else it is reduced here once more.
    logs : callable
        Reads its logs.
    """
    own = within_the_bench(campaign)
    if record is None or campaign.options.adjust != ALONE:
        record = reduce_session(own, session, logs())
    references = references_of(record)
    steps = _WrongSteps(own, session, references, logs)
    recomputed = Recomputed(steps.mistakes, steps.diameter)
    claims, overrides = files.claims.get(session, ()), files.overrides.get(session, ())
    return mark_bench(session, files.scheme, claims, overrides, references, recomputed)


def mark_benches(campaign: Campaign, records: Mapping[str, Path], reasons: Mapping[str, str]) -> Iterator[BenchMarks]:
    """Marks of some benches of a campaign, from the records of their reduction.

    Parameters
    ----------
    campaign : Campaign
        Checked settings of these benches at least.
    records : mapping
        Bench to the folder of its record.
    reasons : mapping
        Why a bench is not marked, by bench.

    Raises
    ------
    InputError
        If the scheme has faults.
    """
    faults = Faults()
    files = read_marking(campaign.folder, dict.fromkeys(records), faults=faults, leave_out=True)
    if files is None:
        raise InputError(faults)
    for session, folder in sorted(records.items()):
        record = load(folder)
        reason = reasons.get(session) or _why_not(record)
        if reason:
            yield not_marked(session, files.scheme, reason)
            continue
        logs = cache(lambda session=session: read_logs(campaign.folder, session, faults=Faults()))
        yield marks_of(campaign, session, files, record, logs)


def _why_not(record: SessionRecord) -> str:
    """Why a session that is not reduced is not marked; "" where it is."""
    if record.facts["status"] == "excluded":
        return f"the session is excluded: {record.facts['reason']}"
    return str(record.facts["reason"]) if record.facts["status"] == "left_out" else ""


class _WrongSteps:
    """Wrong steps of the particles of one bench, worked out where asked for."""

    def __init__(
        self, campaign: Campaign, session: str, references: dict[str, ParticleReference], logs: Callable[[], Logs]
    ) -> None:
        self._campaign, self._session, self._references, self._logs = campaign, session, references, logs
        self._found: dict[str, Sequence[Mistake]] = {}

    @cached_property
    def _reduced(self) -> Reduced:
        session = self._campaign.sessions[self._session]
        return fit_session(prepare(self._campaign, session, self._logs()), self._campaign.options.scatter)

    def mistakes(self, particle: str) -> Sequence[Mistake]:
        """Wrong steps of one particle."""
        if particle not in self._found:
            index = self._reduced.prepared.names.index(particle)
            self._found[particle] = mistakes_of(self._reduced, index, self._references[particle])
        return self._found[particle]

    def diameter(self, particle: str, drag_rate: float) -> float:
        """Diameter [m] that goes with a drag rate [1/s]."""
        index = self._reduced.prepared.names.index(particle)
        return diameter_at(self._reduced, index, self._references[particle], drag_rate)
