"""What a results folder says of one particle, gathered from its tables and the session's record."""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass, replace
from pathlib import Path
from typing import Any

import pandas as pd

from reduction.errors import ResultsError, nearest
from reduction.records import FACTS
from reduction.tables import read_table
from reduction.wholefile import read_json

USED = ("used", "flagged")  # states of readings that entered
RECORDS = Path(".motescale") / "records"


@dataclass(frozen=True)
class Findings:
    """One particle's rows of every table, with the inputs and facts of its session."""

    session: str
    particle: str
    row: Mapping[str, Any]  # of particles.csv
    methods: pd.DataFrame
    agreement: pd.DataFrame
    budget: pd.DataFrame
    readings: pd.DataFrame
    inputs: pd.DataFrame  # of the session, and of this particle's species only
    facts: Mapping[str, Any]  # session.json
    stated: bool = False  # every input at its estimate
    trials: int = 0  # Monte Carlo draws, 0 where the folder does not say

    def value(self, key: str) -> float:
        """Value used for the input `key`, in the unit of the key: the adjusted one if there is one, nan if none."""
        found = self.inputs[self.inputs["input"].str.rsplit("/", n=1).str[-1] == key]
        if not len(found):
            computed = self.facts.get("trap_constants", {}).get(key, {})
            return float(computed.get("estimate" if self.stated else "adjusted", computed.get("estimate", math.nan)))
        adjusted = float(found["adjusted_estimate"].iloc[0])
        return float(found["estimate"].iloc[0]) if math.isnan(adjusted) else adjusted

    def gain(self, name: str) -> float:
        """Gain of an instrument [1]; 1 where none is stated."""
        found = self.value(f"gain_{name}")
        return 1.0 if math.isnan(found) else found

    def as_stated(self) -> Findings:
        """The same with every input at its estimate, as each method by itself holds them."""
        return replace(self, inputs=self.inputs.assign(adjusted_estimate=math.nan), stated=True)

    def used(self, log: str) -> pd.DataFrame:
        """Readings of one log that entered."""
        return self.readings[(self.readings["log"] == log) & self.readings["status"].isin(USED)]


def read_findings(results: Path, session: str, particle: str) -> Findings:
    """Gather what a results folder says of one particle.

    Parameters
    ----------
    results : Path
        A results folder.
    session, particle : str
        Ids as in particles.csv.

    Returns
    -------
    Findings

    Raises
    ------
    ResultsError
        If the folder holds no results, or no such session or particle; the message offers the nearest id.
    """
    path = results / "particles.csv"
    if not path.is_file():
        raise ResultsError(
            f"{results}: found no particles.csv; expected a results folder. Run a campaign into it first."
        )
    particles = read_table(path)
    sessions = {str(one) for one in particles["session"]}
    if session not in sessions:
        raise ResultsError(f"{path}: holds no particle of a session {session}. {_offer(session, sessions)}")
    here = particles[particles["session"] == session].reset_index(drop=True)
    ids = {str(one) for one in here["particle"]}
    if particle not in ids:
        raise ResultsError(f"{path}: session {session} holds no particle {particle}. {_offer(particle, ids)}")
    record = _record(results, session, here)

    def own(name: str) -> pd.DataFrame:
        if not (results / name).is_file():
            raise ResultsError(f"{results}: {name} is missing. Run the campaign again to make the results whole.")
        table = read_table(results / name)
        return table[(table["session"] == session) & (table["particle"] == particle)]

    row = {str(name): value for name, value in here[here["particle"] == particle].iloc[0].items()}
    inputs = read_table(record / "inputs.csv")
    inputs = inputs[(inputs["scope"] != "species") | (inputs["owner"] == row["species"])]
    return Findings(
        session=session,
        particle=particle,
        row=row,
        methods=own("methods.csv"),
        agreement=own("agreement.csv"),
        budget=own("budget.csv"),
        readings=own(f"readings/{session}.csv"),
        inputs=inputs,
        facts=read_json(record / FACTS),
        trials=_trials(results),
    )


def _trials(results: Path) -> int:
    path = results / "run.json"
    settings = read_json(path).get("settings", {}) if path.is_file() else {}
    return int(settings.get("monte_carlo_trials", 0))


def _offer(word: str, known: set[str]) -> str:
    return nearest(word, known) if known else "It holds none at all."


def _record(results: Path, session: str, here: pd.DataFrame) -> Path:
    """Find the session's record that the tables were assembled from; older ones may lie beside it."""
    for folder in sorted((results / RECORDS / session).glob("*")):
        if (folder / FACTS).is_file() and read_table(folder / "particles.csv").equals(here):
            return folder
    raise ResultsError(f"{results}: no record of session {session} goes with particles.csv. Run the campaign again.")
