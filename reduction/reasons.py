"""Why a run has something to do, told before it begins: what changed since the last one, and whom it touches."""

from __future__ import annotations

from pathlib import Path

from reduction import digests
from reduction.batches import STATE, Plan
from reduction.resultsfolder import page
from reduction.rundiff import State, changes, read_state

SHOWN = 8  # changes, and sessions, that are named


def reasons(campaign: Path, results: Path, plan: Plan) -> list[str]:
    """Lines that tell why there is something to do; none in a folder without a finished run.

    Parameters
    ----------
    campaign, results : Path
        The folders.
    plan : Plan
        What the run has to do.
    """
    last = read_state(results / STATE / "last")
    if not last:
        return []
    now = {
        "inputs": digests.input_digests(campaign),
        "versions": digests.versions(),
        "lock": digests.lock_digest(),
        "package": digests.package_digest(),
    }
    before = State(run={name: last.run.get(name) for name in now})
    found = list(changes(before, State(run=now))) or ["nothing it is made from; results are missing or were changed"]
    anew = [name for name, folder in plan.records(results) if not folder.is_dir()]
    drawn = [name for name in plan.sessions if not page(results, name, plan.page_name(name)).is_file()]
    return [
        f"Changed since the last run: {_listed(found)}.",
        f"To be reduced anew: {_sessions(anew, plan)}; to be drawn anew: {_sessions(drawn, plan)}.",
    ]


def _listed(names: list[str]) -> str:
    return ", ".join(names[:SHOWN]) + (f" and {len(names) - SHOWN} more" if len(names) > SHOWN else "")


def _sessions(names: list[str], plan: Plan) -> str:
    if not names:
        return "no session"
    count = f"{len(names)} of {len(plan.sessions)} sessions"
    return count if len(names) == len(plan.sessions) else f"{count} ({_listed(sorted(names))})"
