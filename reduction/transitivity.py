"""Whether the charging fits one series of materials at all: triangles, and orders seen by two species.

A particle of species A that charges positively on B stands above B. One series exists only if no triangle runs in a
circle, A above B above C above A, and if any two species see any two materials in the same order. Nominally alike
materials are known to charge without any order (Sobarzo et al., Nature 638 (2025) 664).
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from itertools import combinations

import numpy as np

from reduction.groupmeans import GroupMeans
from reduction.multiplicity import holm, two_sided
from reduction.pairs import Pair
from reduction.sessionmeans import JOINT

CONSISTENT, CONTRADICTORY, UNDECIDED = "consistent", "contradictory", "undecided"


@dataclass(frozen=True)
class Check:
    """One triangle or one order seen twice."""

    kind: str  # triangle, order
    members: tuple[str, ...]
    verdict: str


def series_checks(means: GroupMeans, pairs: tuple[Pair, ...], *, alpha: float) -> tuple[Check, ...]:
    """Every triangle and every order seen by two species that the tested groups hold.

    Parameters
    ----------
    means : GroupMeans
        Grouped by species and charged_with together.
    pairs : tuple of Pair
        Their pairs.
    alpha : float
        A sign is sure where p, adjusted by Holm over all signs, is below; so is a difference.

    Returns
    -------
    tuple of Check
        Triangles first; none where species and materials make none.
    """
    return (*_triangles(_signs(means, alpha)), *_orders(pairs, alpha))


def _signs(means: GroupMeans, alpha: float) -> dict[tuple[str, str], int]:
    """(Species, material): +1 or -1 where the sign of the mean is sure, 0 where it is not."""
    p = np.full(len(means.groups), np.nan)
    for place in means.tested:
        unit = np.zeros(len(means.groups))
        unit[place] = 1.0
        variance = means.variance(unit)
        if variance > 0.0:
            p[place] = two_sided(float(means.mean[place]) / variance**0.5, means.freedom(unit))
    adjusted = holm(p)
    signs = {}
    for place in means.tested:
        species, _, material = means.groups[place].group.partition(JOINT)
        if species != material:
            signs[species, material] = int(np.sign(means.mean[place])) if adjusted[place] < alpha else 0
    return signs


def _triangles(signs: dict[tuple[str, str], int]) -> Iterator[Check]:
    names = sorted({name for edge in signs for name in edge})
    for three in combinations(names, 3):
        directions = []
        for one, other in ((three[0], three[1]), (three[1], three[2]), (three[2], three[0])):
            seen = [signs[one, other]] if (one, other) in signs else []
            seen += [-signs[other, one]] if (other, one) in signs else []
            directions.append(sorted(set(seen)))
        if not all(directions):
            continue
        if any({-1, 1} <= set(seen) for seen in directions):
            verdict = CONTRADICTORY  # either calls the other the more positive
        elif any(seen == [0] for seen in directions):
            verdict = UNDECIDED
        else:
            around = {next(sign for sign in seen if sign) for seen in directions}
            verdict = CONTRADICTORY if len(around) == 1 else CONSISTENT
        yield Check("triangle", three, verdict)


def _orders(pairs: tuple[Pair, ...], alpha: float) -> Iterator[Check]:
    seen: dict[tuple[str, str], dict[str, int]] = {}
    for one in pairs:
        species_a, _, first = one.group_a.partition(JOINT)
        species_b, _, second = one.group_b.partition(JOINT)
        if one.tested and species_a == species_b:
            sign = int(np.sign(one.difference)) if one.p_holm < alpha else 0
            seen.setdefault((first, second), {})[species_a] = sign
    for materials, by_species in sorted(seen.items()):
        for one_species, other in combinations(sorted(by_species), 2):
            product = by_species[one_species] * by_species[other]
            verdict = {1: CONSISTENT, -1: CONTRADICTORY, 0: UNDECIDED}[product]
            yield Check("order", (*materials, one_species, other), verdict)
