"""What a comparison says in plain words, for the report: the order, its doubts, and what would settle them."""

from __future__ import annotations

import math
from collections.abc import Iterator
from typing import Any

import numpy as np
from numpy.typing import NDArray

from reduction.comparison import Comparison
from reduction.histogram import Distribution
from reduction.intrinsic import LOWER_BOUND, NOT_DETERMINED
from reduction.pairs import Pair
from reduction.quantity import shorthand
from reduction.sessionmeans import LEFT_OUT, Facts
from reduction.transitivity import CONSISTENT, CONTRADICTORY, UNDECIDED
from reduction.unseen import lost_by_group
from reduction.wording import RESULTS, counted, joined, unit_words

Array = NDArray[np.floating[Any]]
MOST_TOLD = 10  # differences in words; the table has them all
SHRINK = {
    "sessions": "more sessions: what differs from session to session weighs most",
    "particles": "more particles, or more sessions: the scatter of single particles weighs most",
    "shared": "a better value of {name}: what all sessions share weighs most, and more of them would not shrink it",
}

_BASIS = {
    NOT_DETERMINED: "the spread of charge between particles is not determined; only the lot fixes the size of too many "
    "of them, and sizes drawn towards the lot's mean say nothing of their spread.",
    LOWER_BOUND: "the spread of charge given is a lower bound; too much of u was taken out of it.",
}


def summary(found: Comparison) -> dict[str, Any]:
    """Record of a comparison as a JSON object: statements in plain words, and what they rest on.

    Parameters
    ----------
    found : Comparison
        As `comparison.compare` gives it.

    Returns
    -------
    dict
        `statements`, in the order to be read; `alike`, the sets that cannot be told apart; `shrink`, per group the
        parts of its variance and the advice; `left_out`, per group and reason.
    """
    return {
        "quantity": found.quantity,
        "by": found.by,
        "unit": found.unit,
        "coverage_probability": found.coverage,
        "statements": [*_standing(found), *_differences(found), *_trends(found), *_series(found), *_left_out(found)],
        "alike": [list(names) for names in found.alike],
        "shrink": list(shrinking(found)),
        "left_out": {group: dict(reasons) for group, reasons in found.sample.left_out.items()},
    }


def _standing(found: Comparison) -> Iterator[str]:
    tested = [found.means.groups[place] for place in found.means.tested]
    alone = [one.group for one in found.means.groups if not one.tested]
    what = RESULTS[found.quantity][0]
    if not found.means.groups:
        yield f"No particle has a signed {what}: nothing is compared."
        return
    particles, sessions = len(found.sample.value), len(set(found.cells.session))
    yield (
        f"The {what} of {counted(particles, 'particle')} in {counted(sessions, 'session')} "
        f"is compared between {counted(len(found.means.groups), 'group')}. The session is the unit: particles of one "
        "session share its charging, air and hands, so no p rests on their number."
    )
    if alone:
        text = f"{joined(alone)}: {'one session each' if len(alone) > 1 else 'one session'}, described and not tested."
        least = [one.p_smallest for one in found.pairs if not one.tested]
        if least:
            text += (
                f" Exchanging sessions could not reach a p below {min(least):.2g}; a second session makes a test "
                "possible."
            )
        yield text
    if len(found.ranks):
        best = max(range(len(tested)), key=lambda place: (found.ranks[place, 0], tested[place].group))
        yield (
            f"{tested[best].group} is the most positive with a probability of {_percent(float(found.ranks[best, 0]))}."
        )


def _differences(found: Comparison) -> Iterator[str]:
    tested = [one for one in found.pairs if one.tested]
    if not tested:
        return
    alpha = 1.0 - found.coverage
    sure = [one for one in tested if one.p_holm < alpha]
    yield (
        f"{len(sure)} of {counted(len(tested), 'difference')} {'is' if len(sure) == 1 else 'are'} sure at a level of "
        f"{_percent(alpha)} for all together (Holm)."
    )
    for one in sorted(sure, key=lambda one: (one.p_holm, one.group_a, one.group_b))[:MOST_TOLD]:
        yield _difference(one, found.unit)
    if len(sure) > MOST_TOLD:
        yield f"{len(sure) - MOST_TOLD} more sure differences stand in contrasts.csv."
    for names in found.alike:
        if len(names) > 1:
            yield f"Not told apart: {joined(list(names))}."
    few = [one for one in tested if one.p_smallest > alpha]
    if few:
        least = min(one.p_smallest for one in few)
        have = "has" if len(few) == 1 else "have"
        yield (
            f"{counted(len(few), 'pair')} of groups {have} so few sessions that exchanging "
            f"them between the groups could not reach a p below {least:.2g}: such a difference rests on the assumption "
            "that session means are normally distributed."
        )


def _difference(one: Pair, unit: str) -> str:
    above, below = (one.group_a, one.group_b) if one.difference > 0.0 else (one.group_b, one.group_a)
    text = f"{above} lies above {below} by {_measured(abs(one.difference), one.u, unit)}, p = {one.p_holm:.2g} (Holm)"
    if math.isfinite(one.ratio) and one.ratio > 0.0:
        ends = f"{one.ratio_low:.3g} to {one.ratio_high:.3g}"
        text += f"; the ratio {one.group_a} to {one.group_b} is {one.ratio:.3g} ({ends})"
    return text + "."


def _measured(value: float, u: float, unit: str) -> str:
    return f"{shorthand(value, u)} {unit_words(unit)}"


def _percent(share: float) -> str:
    return f"{100.0 * share:.3g} %"


def _trends(found: Comparison) -> Iterator[str]:
    alpha = 1.0 - found.coverage
    for one in found.trends:
        name = one.covariate.replace("_", " ")
        if one.between_groups > 0.5 and len(found.means.tested) > 1 and math.isfinite(one.between_groups):
            yield (
                f"{name[0].upper()}{name[1:]} differs between groups ({_percent(one.between_groups)} of its variance): "
                "what it does and what the group does cannot be told apart. Mix the order of sessions."
            )
        if one.p_holm < alpha:
            slope = f"{_measured(one.slope, one.u, found.unit)} per {one.unit}"
            yield (
                f"Session means go with {name} within groups: {slope}, "
                f"p = {one.p_holm:.2g} over {counted(one.sessions, 'session')}. Described, not corrected for."
            )


def _series(found: Comparison) -> Iterator[str]:
    if not found.series:
        return
    counts = {
        verdict: sum(one.verdict == verdict for one in found.series)
        for verdict in (CONSISTENT, CONTRADICTORY, UNDECIDED)
    }
    yield (
        f"One series of materials: {counts[CONSISTENT]} of {counted(len(found.series), 'check')} agree with it, "
        f"{counts[CONTRADICTORY]} contradict it, {counts[UNDECIDED]} decide nothing yet."
    )
    for one in found.series:
        if one.verdict == CONTRADICTORY and one.kind == "triangle":
            yield f"{joined(list(one.members))} run in a circle: no one order holds them."
        elif one.verdict == CONTRADICTORY:
            first, second, species, other = one.members
            yield f"{species} and {other} see {first} and {second} in opposite orders."


def _left_out(found: Comparison) -> Iterator[str]:
    for group, reasons in found.sample.left_out.items():
        told = [f"{count} ({LEFT_OUT[reason]})" for reason, count in reasons.items()]
        yield f"Left out of {group or 'all groups'}: {joined(told)}."


def shrinking(found: Comparison) -> Iterator[dict[str, Any]]:
    """Parts of the variance of each tested mean by what would shrink it, and the advice that follows."""
    for place in found.means.tested:
        one = found.means.groups[place]
        shared = found.means.shared[place] ** 2
        anew = np.array([scope == "session" for scope in found.means.scopes], dtype=bool)
        parts = {
            "sessions": one.by_sessions + float(shared[anew].sum()),
            "particles": one.by_particles,
            "shared": float(shared[~anew].sum()),
        }
        total = sum(parts.values())
        if not total > 0.0:
            continue
        most = max(parts, key=lambda name: parts[name])
        name = _largest(found, shared, ~anew)
        yield {
            "group": one.group,
            "shares": {what: part / total for what, part in parts.items()},
            "largest_shared_input": name,
            "advice": f"{one.group} would gain most from {SHRINK[most].format(name=name)}.",
            "twice_the_sessions": _factor(parts, sessions=2.0),
            "twice_the_particles": _factor(parts, particles=2.0),
        }


def _factor(parts: dict[str, float], *, sessions: float = 1.0, particles: float = 1.0) -> float:
    """Factor on u with so many times the sessions, or particles in each."""
    after = (parts["sessions"] + parts["particles"] / particles) / sessions + parts["shared"]
    return math.sqrt(after / sum(parts.values()))


def _largest(found: Comparison, shared: Array, chosen: NDArray[np.bool_]) -> str:
    """The shared input that adds most to one mean, those of sessions apart."""
    left = np.where(chosen, shared, 0.0)
    return found.means.names[int(np.argmax(left))] if left.any() else ""


def charge_statements(found: list[Distribution], facts: Facts, by: str) -> list[str]:
    """What must be said beside the histograms of charge."""
    said = []
    shown = {(one.group, one.species) for one in found}
    for (group, species), reasons in lost_by_group(facts, by).items():
        if (group, species) not in shown:
            lost = counted(sum(reasons.values()), "particle")
            said.append(f"{group}, {species}: {lost} lost, and no other gave a charge: there is no histogram.")
    named = {f"{one.group}, {one.species}": one for one in found}
    for basis, told in _BASIS.items():
        names = [name for name, one in named.items() if one.intrinsic.basis == basis]
        if names:
            said.append(f"{'; '.join(names)}: {told}")
    for name, one in named.items():
        if one.lost:
            told = joined([f"{count} ({reason})" for reason, count in one.lost.items()])
            said.append(f"{name}: lost and not in the histogram: {told}. What charge they had is not known.")
    for word in ("positive", "negative"):
        names = [name for name, one in named.items() if one.window and word not in one.window]
        if names:
            said.append(f"{'; '.join(names)}: no session logged a voltage that would have held a {word} particle.")
    return said
