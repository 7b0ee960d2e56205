"""How session means go with humidity, temperature, order and contacts: described, with the session as the unit."""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass, replace
from typing import Any

import numpy as np
from numpy.typing import NDArray

from reduction.groupmeans import GroupMeans
from reduction.multiplicity import holm, reach, two_sided
from reduction.quantity import QuantityError, read_quantity
from reduction.sessionmeans import Cells, Facts

Array = NDArray[np.floating[Any]]
COVARIATES = {
    "relative_humidity": "percent",
    "temperature": "degC",
    "session_order": "session",
    "contacts": "contact",
}
"""What a session mean is held against, and the unit of one step."""

SAME = 1e-20  # squares this small beside the values' own are rounding
NOT_VARYING = "does not vary within a group"
TOO_FEW = "too few sessions"
NOT_LOGGED = "not logged in every session"


@dataclass(frozen=True)
class Trend:
    """Slope of the session means on one covariate, within groups; NaN where nothing can be said."""

    covariate: str
    unit: str  # of one step of the covariate
    sessions: int
    between_groups: float = math.nan  # share of the covariate's variance that lies between groups
    slope: float = math.nan
    u: float = math.nan
    freedom: float = math.nan
    low: float = math.nan
    high: float = math.nan
    p: float = math.nan
    p_holm: float = math.nan
    note: str = ""


def covariates(facts: Facts) -> dict[str, dict[str, float]]:
    """Covariate: session: value, NaN where it is not logged; the order counts all sessions by date, then id."""
    order = {
        session: float(place)
        for place, session in enumerate(sorted(facts, key=lambda name: (str(facts[name].get("date", "")), name)), 1)
    }
    air = {session: fact.get("air") or {} for session, fact in facts.items()}
    return {
        "relative_humidity": {name: _number(air[name].get("relative_humidity_percent")) for name in facts},
        "temperature": {name: _number(air[name].get("temperature_degC")) for name in facts},
        "session_order": order,
        "contacts": {name: _number(fact.get("contacts")) for name, fact in facts.items()},
    }


def _number(value: object) -> float:
    if value is None:
        return math.nan
    try:
        return float(read_quantity(value).estimate)
    except QuantityError:
        return math.nan


def trends(
    cells: Cells, means: GroupMeans, values: Mapping[str, Mapping[str, float]], *, coverage: float
) -> tuple[Trend, ...]:
    """Slope on each covariate within groups, y_i = mean_g + slope (x_i - mean x_g), by weighted least squares.

    Weights 1/(tau_g^2 + v_i), their scale from the residuals, degrees of freedom sessions - groups - 1. A group that
    was measured in damper air than another differs from it for two reasons that no slope within groups takes apart:
    the share of the covariate's variance between groups tells how far that is so.

    Parameters
    ----------
    cells, means : Cells, GroupMeans
        Session means and what was made of them.
    values : mapping
        As `covariates` gives them.
    coverage : float
        Coverage probability of an interval [1].

    Returns
    -------
    tuple of Trend
        One for each covariate, p adjusted by Holm over those with a slope.
    """
    spread = np.full(len(cells.mean), math.nan)
    for group in means.groups:
        if group.tested:
            spread[cells.of(group.group)] = group.tau_squared + group.sampling
    weight = np.where(spread > 0.0, 1.0 / np.where(spread > 0.0, spread, 1.0), np.nan)
    found = [_trend(cells, weight, name, values.get(name, {}), coverage) for name in COVARIATES]
    adjusted = holm(np.array([one.p for one in found]))
    return tuple(replace(one, p_holm=float(p)) for one, p in zip(found, adjusted, strict=True))


def _trend(cells: Cells, weight: Array, name: str, value: Mapping[str, float], coverage: float) -> Trend:
    x = np.array([value.get(session, math.nan) for session in cells.session])
    used = np.isfinite(x) & np.isfinite(weight)
    groups = np.array(cells.group)[used]
    x, y, w = x[used], cells.mean[used], weight[used]
    plain = Trend(name, COVARIATES[name], int(used.sum()))
    names, at = np.unique(groups, return_inverse=True)
    freedom = len(x) - len(names) - 1
    if not len(x):
        return replace(plain, note=NOT_LOGGED)
    x_left, y_left = _within(x, w, at), _within(y, w, at)
    inside, around = float((w * x_left**2).sum()), float((w * (x - np.average(x, weights=w)) ** 2).sum())
    if inside <= SAME * float((w * x**2).sum()):
        varies = around > SAME * float((w * x**2).sum())
        return replace(plain, between_groups=1.0 if varies else math.nan, note=NOT_VARYING)
    shared = replace(plain, between_groups=1.0 - inside / around)
    if freedom < 1:
        return replace(shared, note=TOO_FEW)
    slope = float((w * x_left * y_left).sum()) / inside
    residual = float((w * (y_left - slope * x_left) ** 2).sum())
    u = math.sqrt(residual / freedom / inside)
    half = reach(freedom, coverage) * u
    return replace(
        shared,
        slope=slope,
        u=u,
        freedom=float(freedom),
        low=slope - half,
        high=slope + half,
        p=two_sided(slope / u, freedom) if u > 0.0 else math.nan,
        note="" if len(x) == len(cells.mean) else NOT_LOGGED,
    )


def _within(values: Array, weight: Array, at: NDArray[np.intp]) -> Array:
    """Values less the weighted mean of their group."""
    total = np.bincount(at, weights=weight)
    return np.asarray(values - (np.bincount(at, weights=weight * values) / total)[at])
