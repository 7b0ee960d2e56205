"""Which group charges more, with the session as the unit: everything one comparison finds."""

from __future__ import annotations

import math
from collections.abc import Iterator, Mapping
from dataclasses import dataclass, replace
from typing import Any

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from reduction import tables
from reduction.groupmeans import GroupMean, GroupMeans, group_means
from reduction.multiplicity import reach
from reduction.pairs import Pair, dominance, pairs_of
from reduction.ranks import alike, rank_intervals, rank_probabilities
from reduction.sessionmeans import Cells, Facts, Sample, cells_of, gather
from reduction.transitivity import Check, series_checks
from reduction.trends import Trend, covariates, trends

Array = NDArray[np.floating[Any]]
DESCRIBED = "described, not tested: one session"
NO_SCATTER = "no scatter and no uncertainty"

COLUMNS = {
    name: tuple(text.split())
    for name, text in {
        "comparison": """degrees_of_freedom u_from_sessions u_from_particles u_from_shared between_sessions_restricted
            intraclass_correlation effective_particles rank_low rank_high median least most sign_undetermined
            not_determined excluded relative_humidity_percent temperature_degC contacts note""",
        "contrasts": """degrees_of_freedom low_simultaneous high_simultaneous smallest_p ratio u_ratio ratio_low
            ratio_high effect_size dominance note""",
        "trends": """covariate unit sessions slope u_slope low high p p_holm degrees_of_freedom share_between_groups
            note""",
        "series": "kind members verdict",
        "session_means": """group session date session_order particles mean u_measurement u_particles
            relative_humidity_percent temperature_degC contacts unit""",
    }.items()
}
"""Columns of the tables, those of comparison and contrasts after the ones the contract names."""


@dataclass(frozen=True)
class Comparison:
    """One quantity compared between groups."""

    quantity: str
    by: str
    unit: str
    coverage: float
    sample: Sample
    cells: Cells
    means: GroupMeans
    pairs: tuple[Pair, ...]
    ranks: Array  # (R, R) over the tested groups, empty where fewer than two
    rank_range: Mapping[str, tuple[int, int]]
    alike: list[tuple[str, ...]]
    trends: tuple[Trend, ...]
    series: tuple[Check, ...]
    values: Mapping[str, Mapping[str, float]]  # covariate: session: value
    dates: Mapping[str, str]

    def interval(self, place: int) -> tuple[float, float, float, float]:
        """u, degrees of freedom, low and high of one group's mean; NaN where it is not tested."""
        if not self.means.groups[place].tested:
            return (math.nan,) * 4
        unit = np.zeros(len(self.means.groups))
        unit[place] = 1.0
        u = math.sqrt(max(self.means.variance(unit), 0.0))
        if not u > 0.0:
            return 0.0, math.nan, math.nan, math.nan
        freedom = self.means.freedom(unit)
        half = reach(freedom, self.coverage) * u
        return u, freedom, float(self.means.mean[place]) - half, float(self.means.mean[place]) + half


def compare(
    particles: pd.DataFrame, components: pd.DataFrame, facts: Facts, *, quantity: str = "charge_to_mass",
    by: str = "charged_with", coverage: float = 0.95, seed: int = 1, trials: int = 20000,
) -> Comparison:  # fmt: skip
    """Compare one quantity between groups.

    Parameters
    ----------
    particles, components : DataFrame
        particles.csv and components.csv as `tables.read_table` gives them.
    facts : mapping
        Session: content of its session.json.
    quantity, by : str
        What is compared, and between which groups: the campaign's option `compare`.
    coverage : float
        Coverage probability of intervals; one less it is the level of sure differences [1].
    seed, trials : int
        Seed of the campaign, and draws for the chance of each rank.

    Returns
    -------
    Comparison
        Group means, pairs, ranks, trends and checks of the series.
    """
    sample = gather(particles, components, facts, quantity=quantity, by=by)
    cells = cells_of(sample)
    means = group_means(cells)
    alpha = 1.0 - coverage
    pairs = tuple(_with_dominance(pairs_of(means, coverage=coverage), sample))
    values = covariates(facts)
    tested = len(means.tested) > 1
    return Comparison(
        quantity, by, sample.unit, coverage, sample, cells, means, pairs,
        rank_probabilities(means, seed=seed, trials=trials) if tested else np.zeros((0, 0)),
        rank_intervals(pairs, alpha=alpha),
        alike(pairs, {one.group: one.mean for one in means.groups}, alpha=alpha),
        trends(cells, means, values, coverage=coverage),
        _series(particles, components, facts, quantity, coverage),
        values,
        {session: str(fact.get("date", "")) for session, fact in facts.items()},
    )  # fmt: skip


def _series(
    particles: pd.DataFrame, components: pd.DataFrame, facts: Facts, quantity: str, coverage: float
) -> tuple[Check, ...]:
    """Checks of one series of materials, where several species met several materials."""
    if particles["species"].nunique() < 2 or particles["charged_with"].nunique() < 2:
        return ()
    sample = gather(particles, components, facts, quantity=quantity, by=("species", "charged_with"))
    means = group_means(cells_of(sample))
    return series_checks(means, pairs_of(means, coverage=coverage), alpha=1.0 - coverage)


def _with_dominance(pairs: tuple[Pair, ...], sample: Sample) -> Iterator[Pair]:
    """Pairs with how far the particles of one lie above those of the other."""
    value, weight = {}, {}
    for group in sorted(set(sample.group.tolist())):
        inside = sample.group == group
        _, at, counts = np.unique(sample.session[inside], return_inverse=True, return_counts=True)
        value[group], weight[group] = sample.value[inside], 1.0 / counts[at]
    for one in pairs:
        yield replace(one, dominance=dominance(value, weight, one)) if one.tested else one


def comparison_columns(found: Comparison) -> list[str]:
    """Columns of comparison.csv: those of the contract, a rank for each group, and what follows."""
    ranks = [f"rank_{k + 1}" for k in range(len(found.means.groups))]
    return [*tables.COLUMNS["comparison"], *ranks, *COLUMNS["comparison"]]


def contrast_columns() -> list[str]:
    """Columns of contrasts.csv."""
    return [*tables.COLUMNS["contrasts"], *COLUMNS["contrasts"]]


def comparison_rows(found: Comparison) -> Iterator[dict[str, Any]]:
    """Rows of comparison.csv; a group of one session has a mean and no more than a description."""
    ranked = {place: row for place, row in zip(found.means.tested, found.ranks, strict=False)}
    for place, one in enumerate(found.means.groups):
        u, freedom, low, high = found.interval(place)
        chances = ranked.get(place)
        row: dict[str, Any] = {f"rank_{k + 1}": math.nan for k in range(len(found.means.groups))}
        if chances is not None:
            padded = np.concatenate([chances, np.zeros(len(found.means.groups) - len(chances))])
            row = {f"rank_{k + 1}": float(chance) for k, chance in enumerate(padded)}
        first, last = found.rank_range.get(one.group, (math.nan, math.nan))
        yield {
            "group": one.group,
            "sessions": one.sessions,
            "particles": one.particles,
            "mean": one.mean,
            "u_mean": u,
            "low": low,
            "high": high,
            "unit": found.unit,
            "between_sessions": math.sqrt(one.tau_squared) if one.tested else math.nan,
            "between_particles": math.sqrt(one.particle_variance),
            **row,
            "degrees_of_freedom": freedom,
            **_parts(found, place, one),
            "between_sessions_restricted": math.sqrt(one.tau_squared_restricted) if one.tested else math.nan,
            "intraclass_correlation": one.correlation_within,
            "effective_particles": one.effective_particles,
            "rank_low": first,
            "rank_high": last,
            **_description(found, one.group),
            "note": DESCRIBED if not one.tested else NO_SCATTER if u == 0.0 else "",
        }


def _parts(found: Comparison, place: int, one: GroupMean) -> dict[str, float]:
    """Standard uncertainty of a mean by what would shrink it: more sessions, more particles, or neither."""
    shared = math.sqrt(float((found.means.shared[place] ** 2).sum())) if one.tested else math.nan
    return {
        "u_from_sessions": math.sqrt(one.by_sessions),
        "u_from_particles": math.sqrt(one.by_particles),
        "u_from_shared": shared,
    }


def _description(found: Comparison, group: str) -> dict[str, float]:
    inside = found.sample.value[found.sample.group == group]
    left = found.sample.left_out.get(group, {})
    sessions = [found.cells.session[at] for at in found.cells.of(group)]
    air = {
        column: float(np.mean([found.values[name][session] for session in sessions]))
        for name, column in (
            ("relative_humidity", "relative_humidity_percent"), ("temperature", "temperature_degC"),
            ("contacts", "contacts"),
        )
    }  # fmt: skip
    return {
        "median": float(np.median(inside)),
        "least": float(inside.min()),
        "most": float(inside.max()),
        "sign_undetermined": left.get("sign_undetermined", 0),
        "not_determined": left.get("not_determined", 0),
        "excluded": left.get("excluded", 0),
        **air,
    }


def contrast_rows(found: Comparison) -> Iterator[dict[str, Any]]:
    """Rows of contrasts.csv, one for each pair of groups."""
    for one in found.pairs:
        yield {
            "group_a": one.group_a,
            "group_b": one.group_b,
            "difference": one.difference,
            "u_difference": one.u,
            "low": one.low,
            "high": one.high,
            "p": one.p,
            "p_holm": one.p_holm,
            "unit": found.unit,
            "degrees_of_freedom": one.freedom,
            "low_simultaneous": one.low_all,
            "high_simultaneous": one.high_all,
            "smallest_p": one.p_smallest,
            "ratio": one.ratio,
            "u_ratio": one.u_ratio,
            "ratio_low": one.ratio_low,
            "ratio_high": one.ratio_high,
            "effect_size": one.effect_size,
            "dominance": one.dominance,
            "note": one.note,
        }


def trend_rows(found: Comparison) -> Iterator[dict[str, Any]]:
    """Rows of trends.csv: slope of session means within groups on each covariate."""
    for one in found.trends:
        yield {
            "covariate": one.covariate,
            "unit": f"{found.unit} per {one.unit}",
            "sessions": one.sessions,
            "slope": one.slope,
            "u_slope": one.u,
            "low": one.low,
            "high": one.high,
            "p": one.p,
            "p_holm": one.p_holm,
            "degrees_of_freedom": one.freedom,
            "share_between_groups": one.between_groups,
            "note": one.note,
        }


def series_rows(found: Comparison) -> Iterator[dict[str, Any]]:
    """Rows of series.csv: triangles of materials, and orders that two species saw."""
    for one in found.series:
        yield {"kind": one.kind, "members": ";".join(one.members), "verdict": one.verdict}


def session_rows(found: Comparison) -> Iterator[dict[str, Any]]:
    """Rows of session_means.csv: what the comparison rests on."""
    cells = found.cells
    spread = {one.group: one.sampling for one in found.means.groups if one.tested}
    for group in sorted(set(cells.group)):
        for index, at in enumerate(cells.of(group)):
            session = cells.session[at]
            sampling = spread.get(group)
            yield {
                "group": group,
                "session": session,
                "date": found.dates.get(session, ""),
                "session_order": found.values["session_order"].get(session, math.nan),
                "particles": int(cells.count[at]),
                "mean": float(cells.mean[at]),
                "u_measurement": math.sqrt(float(cells.own[at] + cells.shared_variance[at])),
                "u_particles": math.sqrt(float(sampling[index])) if sampling is not None else math.nan,
                "relative_humidity_percent": found.values["relative_humidity"].get(session, math.nan),
                "temperature_degC": found.values["temperature"].get(session, math.nan),
                "contacts": found.values["contacts"].get(session, math.nan),
                "unit": found.unit,
            }
