"""Results by group with the session as the unit: the mean of session means, and an interval it deserves."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
from scipy.special import stdtrit

Row = Mapping[str, Any]
SHARED_SCOPES = frozenset({"trap", "species", "instrument", "campaign"})
"""Scopes whose errors sessions share, so that more sessions do not shrink them."""


@dataclass(frozen=True)
class GroupResult:
    """One group's result; mean and interval are NaN where fewer than two sessions give a number."""

    group: str
    sessions: int  # that give at least one number
    particles: int  # that give a number
    session_means: dict[str, float]
    mean: float  # of the session means
    u: float  # of that mean: scatter between sessions, and the share that sessions have in common
    low: float
    high: float
    median: float  # over particles, for description
    least: float
    most: float


def by_group(
    particles: Sequence[Row], group_of: Mapping[tuple[str, str], str], column: str, *,
    components: Mapping[tuple[str, str], Mapping[str, float]], coverage: float,
) -> list[GroupResult]:  # fmt: skip
    """Mean of session means per group.

    u^2 = s^2 / n + sum over shared inputs (mean over sessions of the mean component)^2, s^2 the variance of the n
    session means, but no less than the scatter of particles within sessions makes it; the interval by Student's t with
    the Welch-Satterthwaite degrees of freedom of the two parts.

    Parameters
    ----------
    particles : sequence of mappings
        Rows of particles.csv.
    group_of : mapping
        Group of each (session, particle).
    column : str
        Column of particles.csv to average.
    components : mapping
        Of each (session, particle): signed component per shared input, in the unit of `column`.
    coverage : float
        Coverage probability of the interval [1].

    Notes
    -----
    Session means are unweighted: weights 1/u^2 with u in proportion to the value pull the mean low. Two sessions that
    happen to agree must not give a certainty their own particles deny, hence the lower bound on s^2.
    """
    values: dict[str, dict[str, list[tuple[float, Mapping[str, float]]]]] = {}
    for row in particles:
        key = (str(row["session"]), str(row["particle"]))
        value = row[column]
        sessions = values.setdefault(group_of[key], {})
        if math.isfinite(value):
            sessions.setdefault(key[0], []).append((float(value), components.get(key, {})))
    return [_result(group, values[group], coverage) for group in sorted(values)]


def _result(
    group: str, sessions: Mapping[str, Sequence[tuple[float, Mapping[str, float]]]], coverage: float
) -> GroupResult:
    means = {name: float(np.mean([v for v, _ in rows])) for name, rows in sorted(sessions.items())}
    pooled = [v for rows in sessions.values() for v, _ in rows]
    mean = u = low = high = math.nan
    if len(means) >= 2:
        mean = float(np.mean(list(means.values())))
        private = max(float(np.var(list(means.values()), ddof=1)), _sampling(sessions)) / len(means)
        shared: dict[str, float] = {}
        for rows in sessions.values():
            for _, parts in rows:
                for name, component in parts.items():
                    shared[name] = shared.get(name, 0.0) + component / len(rows) / len(means)
        total = private + sum(part * part for part in shared.values())
        u = math.sqrt(total)
        if private > 0:
            dof = (total / private) ** 2 * (len(means) - 1)
            reach = float(stdtrit(dof, 0.5 + coverage / 2)) * u
            low, high = mean - reach, mean + reach
    return GroupResult(
        group, len(means), len(pooled), means, mean, u, low, high,
        float(np.median(pooled)) if pooled else math.nan,
        min(pooled, default=math.nan), max(pooled, default=math.nan),
    )  # fmt: skip


def _sampling(sessions: Mapping[str, Sequence[tuple[float, Mapping[str, float]]]]) -> float:
    """Variance of a session mean that the scatter of its particles alone explains, averaged over sessions."""
    squares = sum(float(np.var([v for v, _ in rows])) * len(rows) for rows in sessions.values())
    freedom = sum(len(rows) - 1 for rows in sessions.values())
    if not freedom:
        return 0.0
    return squares / freedom * float(np.mean([1.0 / len(rows) for rows in sessions.values()]))
