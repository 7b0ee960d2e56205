"""One session from settings and logs to its record, and a campaign whose sessions are adjusted together."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from contextlib import contextmanager

import numpy as np
import pandas as pd

from reduction import budget
from reduction.adjustment import adjust_together
from reduction.errors import ReductionError
from reduction.logs import Logs
from reduction.outcome import Outcome, outcome_of
from reduction.preparation import prepare
from reduction.readingrows import flag_readings, reading_rows
from reduction.records import SessionRecord
from reduction.resultrows import agreement_rows, input_rows, method_rows, particle_rows
from reduction.sanity import notes_of
from reduction.sessionfacts import facts
from reduction.settings import Campaign
from reduction.solution import Reduced, adjust_session, fit_session, without_diameter
from reduction.strain import odd_one_out
from reduction.tables import COLUMNS


def reduce_session(campaign: Campaign, session_id: str, logs: Logs) -> SessionRecord:
    """Everything one session gives: the rows of each table of the results, and the facts its report tells.

    Parameters
    ----------
    campaign : Campaign
        Checked settings, `adjust: session` or `particle`.
    session_id : str
        Which session.
    logs : Logs
        Its checked logs.

    Returns
    -------
    SessionRecord
        Tables with the columns of the results, and the content of session.json.
    """
    with _breakdown(f"session {session_id}"):
        reduced = _solved(campaign, session_id, logs)
        adjusted, chosen = adjust_session(reduced, campaign.options.adjust)
        return record_of(outcome_of(campaign, campaign.sessions[session_id], logs, reduced, adjusted, chosen))


@contextmanager
def _breakdown(what: str) -> Iterator[None]:
    """Say in words that the arithmetic broke down: inputs within their ranges can still be absurd together."""
    try:
        yield
    except (ArithmeticError, np.linalg.LinAlgError) as error:
        message = (
            f"{what}: the arithmetic broke down ({error}). Some value or its u is far from what a trap, a particle or "
            "a meter can have. Look at the settings and the readings for slips of unit or power of ten."
        )
        raise ReductionError(message) from error


def reduce_campaign(campaign: Campaign, logs: Mapping[str, Logs]) -> dict[str, SessionRecord]:
    """All sessions of a campaign with the inputs they share adjusted over all of them, `adjust: campaign`.

    Parameters
    ----------
    campaign : Campaign
        Checked settings.
    logs : mapping
        Session id to its checked logs.

    Returns
    -------
    dict
        Session id to its record.
    """
    with _breakdown("the sessions together"):
        return _together(campaign, logs)


def _together(campaign: Campaign, logs: Mapping[str, Logs]) -> dict[str, SessionRecord]:
    solved = {session: _solved(campaign, session, logs[session]) for session in sorted(logs)}
    chosen = {session: np.flatnonzero(~reduced.open).astype(np.intp) for session, reduced in solved.items()}
    pooled = [session for session in solved if len(chosen[session])]
    together = adjust_together(
        [solved[session].model.subset(chosen[session]) for session in pooled],
        [solved[session].alone.theta[chosen[session]] for session in pooled],
    )
    adjusted = dict(zip(pooled, together, strict=True))
    names = [[f"{session}/{solved[session].prepared.names[one]}" for one in chosen[session]] for session in pooled]
    odd = odd_one_out(together, names)
    records = {}
    for session, reduced in solved.items():
        final, particles = adjusted.get(session), chosen[session]
        if final is None:
            final, particles = adjust_session(reduced, "particle")
        records[session] = record_of(
            outcome_of(campaign, campaign.sessions[session], logs[session], reduced, final, particles, odd)
        )
    return records


def _solved(campaign: Campaign, session_id: str, logs: Logs) -> Reduced:
    reduced = fit_session(prepare(campaign, campaign.sessions[session_id], logs), campaign.options.scatter)
    return reduced if campaign.options.mass_from == "adjusted" else without_diameter(reduced)


def record_of(outcome: Outcome) -> SessionRecord:
    """Tables and facts of one reduced session."""
    flag_readings(outcome)
    notes = list(notes_of(outcome))
    for index, word, _ in notes:
        outcome.reduced.flags[index].add(word)
    names, session, pooled = list(outcome.names), outcome.session.id, outcome.campaign.options.adjust == "campaign"
    components = budget.component_rows(outcome.results, session, names, pooled=pooled)
    budgets = budget.budget_rows(outcome.results, session, names, outcome.reduced.scatter, pooled=pooled)
    tables = {
        "particles": list(particle_rows(outcome)),
        "methods": list(method_rows(outcome)),
        "agreement": list(agreement_rows(outcome)),
        "inputs": list(input_rows(outcome)),
        "components": list(_reported(outcome, components)),
        "budget": list(_reported(outcome, budgets)),
        "readings": list(reading_rows(outcome)),
    }
    frames = {name: pd.DataFrame(rows, columns=list(COLUMNS[name])) for name, rows in tables.items()}
    return SessionRecord(frames, facts(outcome, notes))


def _reported(outcome: Outcome, rows: Iterator[dict[str, object]]) -> Iterator[dict[str, object]]:
    """Rows of results that are reported: nothing stands in any table for what is not determined."""
    known = {
        (name, result)
        for place, name in enumerate(outcome.names)
        for result, sure in zip(budget.RESULTS, outcome.known(place), strict=True)
        if sure
    }
    return (row for row in rows if (row["particle"], row["result"]) in known)
