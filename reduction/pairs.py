"""Differences and ratios of two group means, each with the interval its few sessions deserve."""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass, replace
from itertools import combinations
from typing import Any

import numpy as np
from numpy.typing import NDArray

from reduction.groupmeans import GroupMeans
from reduction.multiplicity import holm, reach, smallest_p, two_sided

Array = NDArray[np.floating[Any]]
NOT_TESTED = "not tested: fewer than two sessions in a group"
NO_SCATTER = "not tested: no scatter and no uncertainty to test against"


@dataclass(frozen=True)
class Pair:
    """Two groups; NaN where nothing can be said."""

    group_a: str
    group_b: str
    difference: float  # mean of a less mean of b
    u: float = math.nan
    freedom: float = math.nan
    low: float = math.nan
    high: float = math.nan
    low_all: float = math.nan  # by Bonferroni: all pairs at once
    high_all: float = math.nan
    p: float = math.nan
    p_holm: float = math.nan
    p_smallest: float = math.nan  # that exchanging sessions could reach
    ratio: float = math.nan
    u_ratio: float = math.nan
    ratio_low: float = math.nan
    ratio_high: float = math.nan
    effect_size: float = math.nan
    dominance: float = math.nan
    note: str = ""

    @property
    def tested(self) -> bool:
        """Whether it has a p."""
        return not math.isnan(self.p)


def pairs_of(means: GroupMeans, *, coverage: float) -> tuple[Pair, ...]:
    """All pairs of groups.

    difference +- t u by Student's t with Satterthwaite's degrees of freedom, p from the same t, adjusted by Holm over
    the pairs tested. What two groups share cancels in u.

    Parameters
    ----------
    means : GroupMeans
        Group means with their covariance.
    coverage : float
        Coverage probability of an interval [1].

    Returns
    -------
    tuple of Pair
        Sorted by names; a pair with a group of one session holds the difference only, and says so.
    """
    found = [_pair(means, a, b, coverage) for a, b in combinations(range(len(means.groups)), 2)]
    adjusted = holm(np.array([one.p for one in found]))
    count = sum(one.tested for one in found)
    together = 1.0 - (1.0 - coverage) / max(count, 1)
    return tuple(_together(one, float(p), together) for one, p in zip(found, adjusted, strict=True))


def _together(one: Pair, p_holm: float, coverage: float) -> Pair:
    if not one.tested:
        return one
    half = reach(one.freedom, coverage) * one.u
    return replace(one, p_holm=p_holm, low_all=one.difference - half, high_all=one.difference + half)


def _pair(means: GroupMeans, a: int, b: int, coverage: float) -> Pair:
    first, second = means.groups[a], means.groups[b]
    difference = first.mean - second.mean
    fewest = smallest_p(first.sessions, second.sessions)
    plain = Pair(first.group, second.group, difference, p_smallest=fewest)
    if not (first.tested and second.tested):
        return replace(plain, note=NOT_TESTED)
    combination = _combination(means, {a: 1.0, b: -1.0})
    u = math.sqrt(max(means.variance(combination), 0.0))
    if not u > 0.0:
        return replace(plain, note=NO_SCATTER)
    freedom = means.freedom(combination)
    half = reach(freedom, coverage) * u
    spread = math.sqrt(0.5 * sum(one.tau_squared + np.nan_to_num(one.particle_variance) for one in (first, second)))
    ratio, u_ratio, ratio_low, ratio_high = _ratio(means, a, b, coverage)
    return replace(
        plain,
        u=u,
        freedom=freedom,
        low=difference - half,
        high=difference + half,
        p=two_sided(difference / u, freedom),
        ratio=ratio,
        u_ratio=u_ratio,
        ratio_low=ratio_low,
        ratio_high=ratio_high,
        effect_size=difference / spread if spread > 0.0 else math.nan,
    )


def _combination(means: GroupMeans, factors: Mapping[int, float]) -> Array:
    combination = np.zeros(len(means.groups))
    for place, factor in factors.items():
        combination[place] = factor
    return combination


def _ratio(means: GroupMeans, a: int, b: int, coverage: float) -> tuple[float, float, float, float]:
    """Ratio of two means, its u, and Fieller's interval: every r at which mean_a - r mean_b is not surely off zero.

    Empty where the mean below is not surely off zero, since then the interval has no end. Fieller, J. R. Statist. Soc.
    B 16 (1954) 175.
    """
    x, y = means.groups[a].mean, means.groups[b].mean
    if y == 0.0:
        return (math.nan,) * 4
    ratio = x / y
    combination = _combination(means, {a: 1.0, b: -ratio})
    variance, t = means.variance(combination), reach(means.freedom(combination), coverage)
    vxx, vyy, vxy = means.covariance[a, a], means.covariance[b, b], means.covariance[a, b]
    lead = y * y - t * t * vyy
    if lead <= 0.0:
        return (math.nan,) * 4
    middle = x * y - t * t * vxy
    root = math.sqrt(max(middle * middle - lead * (x * x - t * t * vxx), 0.0))
    return ratio, math.sqrt(max(variance, 0.0)) / abs(y), (middle - root) / lead, (middle + root) / lead


def dominance(value: Mapping[str, Array], weight: Mapping[str, Array], pair: Pair) -> float:
    """Chance that a particle of group a lies above one of group b, less the chance that it lies below.

    Every session of a group counts alike, and every particle of a session. Cliff, Psychol. Bull. 114 (1993) 494.
    """
    x, y = value[pair.group_a], value[pair.group_b]
    order = np.argsort(y, kind="stable")
    below = np.concatenate([[0.0], np.cumsum(weight[pair.group_b][order])])
    under, upto = (below[np.searchsorted(y[order], x, side=side)] for side in ("left", "right"))
    total = float(below[-1]) * float(weight[pair.group_a].sum())
    return float(weight[pair.group_a] @ (under - (below[-1] - upto))) / total
