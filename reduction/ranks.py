"""How sure an order of the groups is: chance of each rank, interval of ranks, groups that cannot be told apart."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import Any

import numpy as np
from numpy.typing import NDArray

from reduction.groupmeans import GroupMeans
from reduction.pairs import Pair
from reduction.shapes import stream

Array = NDArray[np.floating[Any]]
MOST_SETS = 200


def rank_probabilities(means: GroupMeans, *, seed: int, trials: int) -> Array:
    """Chance of each rank of each tested group, rank 1 the most positive.

    Draws of the means: what is a group's own by Student's t with its sessions less one degrees of freedom, what groups
    share jointly normal, so that a common error moves them together and changes no order.

    Parameters
    ----------
    means : GroupMeans
        Group means with their covariance.
    seed, trials : int
        Seed of the campaign; number of draws.

    Returns
    -------
    (R, R) array
        Row: group, in the order of `means.tested`; column: rank. Rows and columns sum to 1.
    """
    at = list(means.tested)
    groups = [means.groups[place] for place in at]
    own = np.sqrt(means.private[at])
    shared = means.shared[at] @ means.shared[at].T
    values, turn = np.linalg.eigh(shared)
    root = turn * np.sqrt(np.maximum(values, 0.0))
    drawn = np.array([stream(seed, f"ranks/shared/{one.group}").standard_normal(trials) for one in groups])
    alone = np.array([stream(seed, f"ranks/own/{one.group}").standard_t(one.sessions - 1, trials) for one in groups])
    level = means.mean[at][:, None] + own[:, None] * alone + root @ drawn
    order = np.argsort(-level, axis=0, kind="stable")
    rank = np.empty_like(order)
    np.put_along_axis(rank, order, np.arange(len(groups))[:, None], axis=0)
    return np.array([np.bincount(row, minlength=len(groups)) / trials for row in rank]).reshape(len(at), len(at))


def rank_intervals(pairs: Sequence[Pair], *, alpha: float) -> dict[str, tuple[int, int]]:
    """First and last rank each tested group can have, all groups at once with probability 1 - alpha.

    One more than the groups surely above, and the number of groups less those surely below; sure is what Holm's
    correction leaves below alpha. After Al Mohamad, Goeman and van Zwet, Simultaneous confidence intervals for ranks
    with application to ranking institutions (2022), who reject differences step by step in the same way.
    """
    above: dict[str, int] = {}
    below: dict[str, int] = {}
    for one in pairs:
        if not one.tested:
            continue
        upper, lower = (one.group_a, one.group_b) if one.difference > 0.0 else (one.group_b, one.group_a)
        sure = int(one.p_holm < alpha)
        for name in (upper, lower):
            above.setdefault(name, 0)
            below.setdefault(name, 0)
        above[lower] += sure
        below[upper] += sure
    return {name: (1 + above[name], len(above) - below[name]) for name in sorted(above)}


def alike(pairs: Sequence[Pair], mean: Mapping[str, float], *, alpha: float) -> list[tuple[str, ...]]:
    """Largest sets of groups of which no two can be told apart, each from the most positive down.

    Sets may overlap: a from b and b from c not told apart, while a and c are. At most `MOST_SETS`.
    """
    near: dict[str, set[str]] = {}
    for one in pairs:
        if one.tested:
            near.setdefault(one.group_a, set())
            near.setdefault(one.group_b, set())
            if not one.p_holm < alpha:
                near[one.group_a].add(one.group_b)
                near[one.group_b].add(one.group_a)
    found: list[tuple[str, ...]] = []

    def down(name: str) -> tuple[float, str]:
        return -mean[name], name

    def grow(chosen: set[str], open_: set[str], done: set[str]) -> None:  # Bron and Kerbosch, with a pivot
        if len(found) >= MOST_SETS:
            return
        if not open_ and not done:
            found.append(tuple(sorted(chosen, key=down)))
            return
        pivot = max(sorted(open_ | done), key=lambda name: len(near[name] & open_))
        for name in sorted(open_ - near[pivot], key=down):
            grow(chosen | {name}, open_ & near[name], done & near[name])
            open_, done = open_ - {name}, done | {name}

    grow(set(), set(near), set())
    return sorted((one for one in found if one), key=lambda names: [down(name) for name in names])
