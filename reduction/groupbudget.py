"""Budgets of group means, their differences and ratios: what each u is made of, through the session means.

A mean is sum w_i y_i over session means, so an input's component is c_g = sum w_i c_ig; of a difference c_a - c_b, of a
ratio r = a/b (c_a - r c_b)/b: what both groups share cancels as far as it does. What differs between the sessions and
between the particles of a group is its own. Inputs of single sessions are independent of each other and are gathered
under one name, `session//<key>`, by the root of their sum of squares.
"""

from __future__ import annotations

import math
from collections.abc import Iterator, Mapping
from itertools import combinations
from typing import Any

import numpy as np
from numpy.typing import NDArray

from reduction.comparison import Comparison
from reduction.groupmeans import GroupMean

Array = NDArray[np.floating[Any]]
_COLUMNS = "result group group_b estimate u unit input scope evaluation component share degrees_of_freedom"
COLUMNS = tuple(_COLUMNS.split())
"""Columns of group_budget.csv; `result` is mean, difference or ratio, of `group` or of `group` and `group_b`."""

Part = tuple[str, str, str, float, float]  # input, scope, evaluation, component, degrees of freedom
SMALLEST = 1e-8  # share of the variance below which an input is not listed


def group_budget_rows(found: Comparison, evaluation: Mapping[str, str]) -> Iterator[dict[str, Any]]:
    """Rows of group_budget.csv: every mean, difference and ratio with an uncertainty, by what contributes to it.

    The shares of one result add to 1, less what is too small to be listed; degrees of freedom are given for what comes
    from the scatter of sessions and particles.

    Parameters
    ----------
    found : Comparison
        As `comparison.compare` gives it.
    evaluation : mapping
        Type A or B of each shared input, from budget.csv.
    """
    groups, inputs = found.means.groups, _Inputs(found, evaluation)
    for place in found.means.tested:
        one = groups[place]
        yield from _rows(found, inputs, ("mean", one.group, "", one.mean, found.unit), {place: 1.0})
    pairs = {(one.group_a, one.group_b): one for one in found.pairs}
    for a, b in combinations(found.means.tested, 2):
        names = groups[a].group, groups[b].group
        pair = pairs[names]
        yield from _rows(found, inputs, ("difference", *names, pair.difference, found.unit), {a: 1.0, b: -1.0})
        if math.isfinite(pair.ratio):
            below = groups[b].mean
            factors = {a: 1.0 / below, b: -pair.ratio / below}
            yield from _rows(found, inputs, ("ratio", *names, pair.ratio, "1"), factors)


def _rows(
    found: Comparison, inputs: _Inputs, head: tuple[str, str, str, float, str], factors: dict[int, float]
) -> Iterator[dict[str, Any]]:
    """Contributions to sum f_g mean_g: what is the groups' own, then the shared inputs by name."""
    own = [part for place, factor in factors.items() for part in _own(found.means.groups[place], factor)]
    shared = sum(factor * found.means.shared[place] for place, factor in factors.items())
    parts = [*own, *inputs.parts(np.asarray(shared, dtype=float))]
    variance = sum(component**2 for _, _, _, component, _ in parts)
    if not variance > 0.0:
        return
    result, group, group_b, estimate, unit = head
    for name, scope, kind, component, freedom in parts:
        if component**2 > SMALLEST * variance:
            yield {
                "result": result,
                "group": group,
                "group_b": group_b,
                "estimate": estimate,
                "u": math.sqrt(variance),
                "unit": unit,
                "input": name,
                "scope": scope,
                "evaluation": kind,
                "component": component,
                "share": component**2 / variance,
                "degrees_of_freedom": freedom,
            }


def _own(one: GroupMean, factor: float) -> Iterator[Part]:
    """What differs between the sessions and between the particles of one group."""
    between = float(one.sessions - 1)
    yield f"group/{one.group}/between_sessions", "group", "A", abs(factor) * math.sqrt(one.by_sessions), between
    within = float(one.particles - one.sessions)
    name = f"group/{one.group}/between_particles"
    yield name, "group", "A", abs(factor) * math.sqrt(one.by_particles), within if within > 0.0 else math.nan


class _Inputs:
    """Shared inputs by name, those of single sessions gathered by what they are."""

    def __init__(self, found: Comparison, evaluation: Mapping[str, str]) -> None:
        named = [
            _named(name, scope, evaluation) for name, scope in zip(found.means.names, found.means.scopes, strict=True)
        ]
        self.listed = sorted(set(named), key=lambda one: (one[1] == "session", one[0], one[2]))
        place = {one: at for at, one in enumerate(self.listed)}
        self.at = np.array([place[one] for one in named], dtype=np.intp)

    def parts(self, shared: Array) -> Iterator[Part]:
        """Component of each; the sign is lost where several sessions are gathered."""
        count = len(self.listed)
        squares = np.bincount(self.at, weights=shared**2, minlength=count)
        sums = np.bincount(self.at, weights=shared, minlength=count)
        for (name, scope, kind), square, total in zip(self.listed, squares.tolist(), sums.tolist(), strict=True):
            yield name, scope, kind, math.sqrt(square) if scope == "session" else total, math.nan


def _named(name: str, scope: str, evaluation: Mapping[str, str]) -> tuple[str, str, str]:
    read = "/readings/" in name
    kind = "A" if read else evaluation.get(name, "B")
    if scope != "session":
        return name, scope, kind
    return f"session//{'readings' if read else name.split('/', 2)[-1]}", scope, kind
