"""The first page of a session's report in three answers: what came out, whether to trust it, what limits it."""

from __future__ import annotations

import math
import re
from collections.abc import Callable, Mapping, Sequence
from typing import Any

from reduction.limits import sentence, spread_of
from reduction.sessiontables import ratio, ratio_power, signless
from reduction.typeset import bracketed_alone, foreign, minus
from reduction.wording import counted, input_words, joined, status_words

Row = Mapping[str, Any]
NOTABLE_PULL = 2.0  # named
ALARMING_PULL = 2.58  # p = 0.01 of a normal deviate
NOTABLE_P = 0.01
BY_CHANCE = math.erfc(math.sqrt(2.0))  # of a normalised error beyond 1, that is a difference beyond 2 u
_HARMLESS = {"u_from_scatter", "size_from_lot", "no_density", "charge_drift", "sign_undetermined"}
_MISSES = re.compile(r"The (\w+) log of particle (\S+) misses the adjusted values by (\S+) u\.")
ADJUSTED = {
    "session": "All methods of all particles of this session were adjusted together by generalised least squares, "
    "the inputs they share adjusted with them.",
    "campaign": "All methods of all particles of the campaign that share an input were adjusted together by "
    "generalised least squares; another session can move the results of this one a little.",
    "particle": "All methods of one particle were adjusted together by generalised least squares, each particle by "
    "itself; no particle tells anything of the inputs another depends on.",
}


def answers(particles: Sequence[Row], held: Mapping[str, Sequence[Row]], facts: Row) -> list[list[Any]]:
    """Question and sentences that answer it, three times."""
    return [
        ["What came out", came_out(particles)],
        ["Can I trust it?", trust(particles, held["agreement"], held["inputs"], facts)],
        ["What limits it", limits(particles, held["budget"])],
    ]


def came_out(particles: Sequence[Row]) -> list[str]:
    """How many particles, and from where to where their results go."""
    if not particles:
        return ["No particle was recorded."]
    by_status = {s: sum(p["status"] == s for p in particles) for s in ("ok", "not_determined", "failed", "excluded")}
    parts = [f"{n} {status_words(s)}" for s, n in by_status.items() if n]
    told = joined(parts) if len(parts) > 1 or len(particles) == 1 else "all " + parts[0].partition(" ")[2]
    words = [f"{counted(len(particles), 'particle')}: {told}."]
    known = [p for p in particles if math.isfinite(p["charge_to_mass_C_per_kg"])]
    if known:
        signs = {p["charge_to_mass_C_per_kg"] > 0 for p in known if not _signless(p)}
        sign = {frozenset({True}): "all positive", frozenset({False}): "all negative",
                frozenset({True, False}): "of both signs"}.get(frozenset(signs), "sign not determined")  # fmt: skip
        if len(known) == 1:
            sign = sign.replace("all ", "")
        elif signs and any(map(_signless, known)):
            sign = f"those whose sign is known {sign}"
        power = ratio_power(particles)
        words.append(f"Charge-to-mass ratio {_span(known, lambda p: ratio(p, power))} C kg⁻¹, {sign}.")
    charged = [p for p in known if math.isfinite(p["charge_e"])]
    if charged:
        span = _span(charged, _electrons, "charge_e")
        words.append(f"Charge {span} e.")
    return words


def _electrons(p: Row) -> str:
    return signless([p], [bracketed_alone(p["charge_e"], p["u_charge_e"])])[0]


def _span(known: Sequence[Row], told: Callable[[Row], str], key: str = "charge_to_mass_C_per_kg") -> str:
    low, high = min(known, key=lambda p: p[key]), max(known, key=lambda p: p[key])
    return f"{told(low)} to {told(high)}" if low is not high else told(low)


def _signless(p: Row) -> bool:
    return "sign_undetermined" in p["flags"].split(";")


def trust(
    particles: Sequence[Row], agreement: Sequence[Row], inputs: Sequence[Row], facts: Row
) -> list[str]:  # fmt: skip
    """A verdict, and what speaks for and against it."""
    known = [p for p in particles if math.isfinite(p["charge_to_mass_C_per_kg"])]
    if not known:
        return ["Nothing was determined, so there is nothing to trust."]
    good, bad = _strain_words(known, facts)
    errors = [abs(a["normalized_error"]) for a in agreement if math.isfinite(a["normalized_error"])]
    if errors:
        off = sum(e > 1 for e in errors)
        told = f"of {counted(len(errors), 'pair')} of methods {off or 'none'} {'differs' if off == 1 else 'differ'}"
        told += " by more than twice the uncertainty of the difference"
        alarming = _beyond_chance(errors)
        (bad if alarming else good).append(told + (", where 1 in 20 would by chance" if off and not alarming else ""))
    else:
        bad.append("no two methods give the same quantity, so nothing tests the results from within")
    pulled = [what for what, pull in pulls(inputs) if abs(pull) > ALARMING_PULL]
    if pulled:
        bad.append(f"the readings pull {joined(pulled)} further than chance allows (p < 0.01)")
    marked = [p for p in particles if set(filter(None, p["flags"].split(";"))) - _HARMLESS - {"chi_square"}]
    if marked:
        bad.append(f"{counted(len(marked), 'particle carries', 'particles carry')} a remark, below")
    verdict = "Read it with care: " + "; ".join(bad) + "." if bad else "It fits together: " + "; ".join(good) + "."
    words = [verdict]
    if bad and good:
        words.append("For it: " + "; ".join(good) + ".")
    odd = facts.get("strain") or {}
    if odd.get("strains_most") and odd.get("others_move_u") is not None:
        words.append(
            f"Without {foreign(odd['strains_most'])}, which fits least well, no other result would move by more than "
            f"{odd['others_move_u']:.2g} of its standard uncertainty."
        )
    return words


def _beyond_chance(errors: Sequence[float]) -> bool:
    """Whether so many normalised errors beyond 1, or one so far out, come by chance less often than 1 in 100."""
    count, off = len(errors), sum(error > 1 for error in errors)
    many = math.fsum(math.comb(count, k) * BY_CHANCE**k * (1 - BY_CHANCE) ** (count - k) for k in range(off, count + 1))
    far = count * math.erfc(math.sqrt(2.0) * max(errors))
    return off > 0 and min(many, far) < NOTABLE_P


def _strain_words(known: Sequence[Row], facts: Row) -> tuple[list[str], list[str]]:
    """For and against: chi-square of what was adjusted together, else of each particle alone."""
    good: list[str] = []
    bad: list[str] = []
    strain = facts.get("strain") or {}
    if strain.get("p") is not None:
        told = f"chi-square is {strain['chi_square']:.1f} for {strain['degrees_of_freedom']} degrees of freedom"
        p = probability(strain["p"])
        if strain["p"] < NOTABLE_P:
            bad.append(f"{told} ({p}), more than the stated uncertainties explain")
        else:
            good.append(f"{told} ({p}), as expected")
    misfits = [foreign(q["particle"]) for q in known if "chi_square" in q["flags"].split(";")]
    if misfits:
        which = joined(misfits) if len(misfits) <= 4 else f"{len(misfits)} particles"
        bad.append(f"the readings of {which} disagree among themselves")
    elif not strain and any(math.isfinite(q["chi_square"]) for q in known):
        good.append("chi-square of each particle is as expected")
    return good, bad


def probability(p: float) -> str:
    """`p = 0.28`; never a power of ten a page would have to explain."""
    return "p < 0.0001" if p < 1e-4 else f"p = {p:.2g}"


def pulls(inputs: Sequence[Row]) -> list[tuple[str, float]]:
    """Shared inputs that the readings pull beyond 2 standard deviations, in words, with the pull."""
    found = []
    for row in inputs:
        pull = row.get("pull", math.nan)
        if pull is not None and math.isfinite(pull) and abs(pull) > NOTABLE_PULL:
            what, whose = input_words(row["input"])
            mine = row["scope"] in ("session", "campaign")
            found.append((foreign(what if mine else f"{what} of {whose}"), float(pull)))
    return found


def limits(particles: Sequence[Row], budget: Sequence[Row]) -> list[str]:
    """What makes up the variance of charge-to-mass ratio and charge, or drag rate where there is no charge."""
    charged = any(row["result"] == "charge" for row in budget)
    results = [("charge_to_mass", "charge_to_mass_C_per_kg")]
    results.append(("charge", "charge_C") if charged else ("drag_rate", "drag_rate_per_s"))
    said = [sentence(budget, result, spread_of(particles, key, f"u_{key}")) for result, key in results]
    return [one for one in said if one] or ["Nothing has a budget."]


def fits_together(inputs: Sequence[Row], facts: Row) -> list[str]:
    """How the particles were adjusted and what strains that, a sentence each."""
    words = [ADJUSTED.get(str(facts.get("adjust")), "")]
    strain = facts.get("strain") or {}
    if strain.get("p") is not None:
        verdict = "as expected" if strain["p"] >= NOTABLE_P else "more than the stated uncertainties explain"
        words.append(
            f"Chi-square of the adjustment is {strain['chi_square']:.1f} for {strain['degrees_of_freedom']} degrees of "
            f"freedom ({probability(strain['p'])}), {verdict}."
        )
    missing = [found.groups() for one in strain.get("sentences", ()) if (found := _MISSES.fullmatch(one))]
    if missing:
        told = [f"{log} of {foreign(name)} ({size} u)" for log, name, size in missing]
        words.append(f"Logs that miss the adjusted values by more than 2 u, root mean square: {joined(told)}.")
    if strain.get("strains_most") and strain.get("others_move_u") is not None:
        words.append(
            f"{foreign(strain['strains_most'])} strains the adjustment most; without it the others would move by "
            f"{strain['others_move_u']:.2g} u at most."
        )
    pulled = [f"{what} ({minus(f'{pull:+.1f}')})" for what, pull in pulls(inputs)]
    if pulled:
        words.append(
            f"The readings pull beyond 2 standard deviations of what they can move: {joined(pulled)}."
            + (" Inputs that act alike are pulled alike." if len(pulled) > 1 else "")
        )
    elif strain:
        words.append("No shared input is pulled beyond 2 standard deviations.")
    return [one for one in words if one]
