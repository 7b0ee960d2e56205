"""What a run has to do: the sessions, what each depends on, and the batches they go through in; light."""

from __future__ import annotations

import json
from collections.abc import Iterator, Mapping
from dataclasses import asdict, dataclass, field
from functools import cached_property
from pathlib import Path

from reduction import digests
from reduction.benchrows import KEY
from reduction.errors import ResultsError
from reduction.wholefile import write_json

STATE = ".motescale"  # folder in the results for all that is no result itself
SMALLEST, MEAN, LARGEST = 5, 10, 16
"""Sessions in a batch: few enough to use several cores, many enough that the two seconds a process takes to begin are
little beside its work. Neither cores nor the number of sessions have a say."""


def batches_of(names: list[str]) -> dict[str, list[str]]:
    """Divide sorted session ids into batches, each called by its first.

    Where a batch ends depends on the ids around that place alone, so that a session more or less changes its own batch
    and seldom a neighbour, wherever it stands in the order.
    """
    found: dict[str, list[str]] = {}
    batch: list[str] = []
    for name in names:
        batch.append(name)
        ends = int(digests.digest(name)[:8], 16) % (MEAN - SMALLEST + 1) == 0
        if (ends and len(batch) >= SMALLEST) or len(batch) == LARGEST:
            found[batch[0]] = batch
            batch = []
    if batch:
        found[batch[0]] = batch
    return found


@dataclass(frozen=True)
class Plan:
    """The sessions of one campaign and the digests that say whether anything is to be done."""

    sessions: dict[str, str]  # each session to be reduced, and the digest that names its record
    inputs: dict[str, str]  # the same sessions, and the digest of their input files and settings alone
    campaign: str  # digest of everything the check, the campaign-wide tables and the report depend on
    code: str  # digest of the package and the libraries
    together: bool = False  # whether the sessions are adjusted together
    title: str = ""
    drawings: dict[str, str] = field(default_factory=dict)  # each trap with drawn electrodes: digest of the drawing
    marks: dict[str, str] = field(default_factory=dict)  # each bench and the digest that names its marks, if marked

    @cached_property
    def batches(self) -> dict[str, list[str]]:
        """Sessions of each batch, by its name."""
        return batches_of(sorted(self.sessions))

    def batch_digest(self, batch: str) -> str:
        """Digest of all that the records of one batch depend on."""
        return digests.digest(*(part for name in self.batches[batch] for part in (name, self.sessions[name])))

    @property
    def adjusted(self) -> str:
        """Digest of all that sessions adjusted together depend on: every one of them."""
        return digests.digest("together", *(part for item in sorted(self.sessions.items()) for part in item))

    def record_name(self, session: str) -> str:
        """Digest that names the record the tables and reports are made from."""
        own = self.sessions[session]
        return digests.digest(own, self.adjusted) if self.together else own

    def page_name(self, session: str) -> str:
        """Digest of all that the session's report depends on."""
        return digests.digest("page", session, self.record_name(session), self.title)

    def marks_digest(self, batch: str) -> str:
        """Digest of all that the marks of one batch depend on."""
        return digests.digest("marks", *(part for name in self.batches[batch] for part in (name, self.marks[name])))

    def bench_page_name(self, session: str) -> str:
        """Digest of all that the feedback of one bench depends on."""
        return digests.digest("feedback", session, self.marks[session], self.title)

    def records(self, results: Path) -> Iterator[tuple[str, Path]]:
        """Each session and the folder of the record its results are made from."""
        for session in sorted(self.sessions):
            yield session, record_folder(results, session, self.record_name(session))

    def save(self, results: Path) -> None:
        """Write the plan for the jobs to read."""
        write_json(results / STATE / "plan.json", asdict(self))

    @staticmethod
    def load(results: Path) -> Plan:
        """Read the plan of the run that is going on."""
        try:
            with open(results / STATE / "plan.json", encoding="utf-8") as handle:
                return Plan(**json.load(handle))
        except FileNotFoundError:
            message = "this results folder has no plan; start with the step `plan`, or with the workflow"
            raise ResultsError(message) from None


def record_folder(results: Path, session: str, name: str) -> Path:
    """Folder of one record."""
    return results / STATE / "records" / session / name


def constants_folder(results: Path) -> Path:
    """Folder of the trap constants computed from drawings, each file named by the digest of its drawing."""
    return results / STATE / "traps"


def make_plan(campaign: Path) -> Plan:
    """Read a campaign's files and settle what a run has to do."""
    settings = digests.campaign_settings(campaign)
    names = digests.session_ids(campaign)
    code = digests.code_digest()
    inputs = digests.session_inputs(campaign, names)
    sessions = {name: digests.digest(inputs[name], code) for name in names}
    marks = digests.mark_inputs(campaign, sessions)
    title = settings.get("title", "")
    return Plan(
        sessions=sessions,
        inputs=inputs,
        campaign=campaign_digest(campaign, digests.input_digests(campaign), code),
        code=code,
        together=settings.get("adjust") == "campaign",
        title=title if isinstance(title, str) else "",
        drawings=digests.drawings(campaign),
        marks=marks,
    )


def campaign_digest(campaign: Path, inputs: Mapping[str, str], code: str) -> str:
    """Digest of every file of the campaign (`inputs`), the names beside them, the key of pseudonyms, and the code."""
    odd = _other_names(campaign)
    key = digests.content(campaign / KEY) or b""  # what pseudonyms depend on, named nowhere
    files = digests.digest(*(part for item in inputs.items() for part in item), *odd, key)
    return digests.digest(files, code)


def _other_names(campaign: Path) -> list[str]:
    """Names the check may find fault with: a new one must make a run begin, so that the check is run."""
    names = [path.name for path in campaign.glob("*.y*ml")]
    for pattern in ("traps/*", "species/*", "sessions/*", "sessions/*/*", "marking/*"):
        names += [path.relative_to(campaign).as_posix() for path in campaign.glob(pattern)]
    return sorted(name for name in names if "/." not in name)
