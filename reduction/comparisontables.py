"""The files of a comparison: its tables, and what they say in plain words."""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence
from pathlib import Path
from typing import Any

import pandas as pd

from reduction import comparison, groupbudget, histogram
from reduction.comparison import Comparison, compare
from reduction.comparisonwords import charge_statements, summary
from reduction.histogram import distributions
from reduction.sessionmeans import QUANTITIES, Facts
from reduction.tables import read_table, write_table
from reduction.wholefile import write_json

TABLES = (
    "comparison", "contrasts", "session_means", "trends", "series", "group_budget", "histogram", "charge_distribution",
    "charge_summary",
)  # fmt: skip
"""Tables of a comparison, each a CSV file of that name."""

_ROWS_AT_ONCE = 100_000  # of a table that may have millions
WORDS = "comparison.json"  # statements in plain words, and what they rest on


def compared(
    particles: pd.DataFrame, components: pd.DataFrame, facts: Facts, settings: Mapping[str, Any]
) -> Comparison:
    """Compare the groups of a campaign as its settings say.

    Parameters
    ----------
    particles, components : DataFrame
        particles.csv and components.csv as `tables.read_table` gives them.
    facts : mapping
        Session: content of its session.json.
    settings : mapping
        Options of the campaign as run.json has them.

    Returns
    -------
    Comparison
        As `comparison.compare` gives it.
    """
    return compare(
        particles,
        components,
        facts,
        quantity=str(settings["compare"]["quantity"]),
        by=str(settings["compare"]["by"]),
        coverage=float(settings["coverage_probability"]),
        seed=int(settings["seed"]),
        trials=int(settings["monte_carlo_trials"]),
    )


def evaluations(results: Path) -> dict[str, str]:
    """Type A or B of every input that budget.csv names."""
    columns = ["input", "evaluation"]
    known: dict[str, str] = {}
    parts = pd.read_csv(
        results / "budget.csv", usecols=columns, dtype=str, keep_default_na=False, chunksize=_ROWS_AT_ONCE
    )
    for part in parts:
        first = part.drop_duplicates()
        known.update(zip(first["input"], first["evaluation"], strict=True))
    return known


def write_comparison(results: Path, facts: Facts, settings: Mapping[str, Any]) -> Comparison:
    """Compare the groups of a results folder and write every file of the comparison there; see `compared`."""
    particles, inputs = (read_table(results / f"{name}.csv") for name in ("particles", "inputs"))
    needed = {QUANTITIES[name].result for name in ("charge", str(settings["compare"]["quantity"]))}
    components = read_table(results / "components.csv", only={"result": needed})
    found = compared(particles, components, facts, settings)
    charges = distributions(
        particles, components, inputs, facts, by=found.by, coverage=found.coverage, seed=int(settings["seed"])
    )
    made: dict[str, tuple[Sequence[str], Iterable[Mapping[str, Any]]]] = {
        "comparison": (comparison.comparison_columns(found), comparison.comparison_rows(found)),
        "contrasts": (comparison.contrast_columns(), comparison.contrast_rows(found)),
        "session_means": (comparison.COLUMNS["session_means"], comparison.session_rows(found)),
        "trends": (comparison.COLUMNS["trends"], comparison.trend_rows(found)),
        "series": (comparison.COLUMNS["series"], comparison.series_rows(found)),
        "group_budget": (groupbudget.COLUMNS, groupbudget.group_budget_rows(found, evaluations(results))),
        "histogram": (histogram.COLUMNS["histogram"], histogram.histogram_rows(charges)),
        "charge_distribution": (histogram.COLUMNS["charge_distribution"], histogram.distribution_rows(charges)),
        "charge_summary": (histogram.COLUMNS["charge_summary"], histogram.summary_rows(charges)),
    }
    for name in TABLES:
        write_table(results / f"{name}.csv", *made[name])
    write_json(results / WORDS, {**summary(found), "charge": charge_statements(charges, facts, found.by)})
    return found
