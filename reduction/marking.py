"""What a bench's claims are worth: every criterion of the scheme judged, and what staff should look at."""

from __future__ import annotations

import math
from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass, replace

from reduction.benchreference import ParticleReference
from reduction.claims import COMPONENT, Claim, Override
from reduction.criteria import (
    NAMES,
    UNKNOWN,
    Share,
    agreement_share,
    budget_share,
    missing,
    not_counted,
    readings_share,
    rounding_share,
    uncertainty_share,
    unit_share,
)
from reduction.markrecord import (
    LOOK_AT,
    MARKED,
    NOT_MARKED,
    BenchMarks,
    CriterionMark,
    Hint,
    Judged,
    from_record,
    to_record,
)
from reduction.markscheme import METHODS, QUANTITIES, Criterion, Scheme
from reduction.mistakes import Mistake
from reduction.valuemark import Circumstances, Earlier, sign_share, value_share

__all__ = [
    "LOOK_AT",
    "MARKED",
    "NOT_MARKED",
    "BenchMarks",
    "CriterionMark",
    "Hint",
    "Judged",
    "from_record",
    "mark_bench",
    "not_marked",
    "to_record",
]

_PLACES = 2  # decimals of marks
_DOUBTS = {
    "factor_suspected": "the readings themselves behave as if logged with a constant factor",
    "two_solutions": "two solutions fit the readings",
    "chi_square": "the readings disagree among themselves more than their stated uncertainties allow",
    "sign_undetermined": "the readings leave the sign open",
}
"""Flags of the reduction that make a reference doubtful, for staff."""


@dataclass(frozen=True)
class Recomputed:
    """What is worked out only where a claim asks for it, by particle."""

    mistakes: Callable[[str], Sequence[Mistake]]
    diameter_of: Callable[[str, float], float]  # particle, drag rate [1/s]: diameter [m]


def mark_bench(
    session: str,
    scheme: Scheme,
    claims: Sequence[Claim],
    overrides: Sequence[Override],
    references: Mapping[str, ParticleReference],
    recomputed: Recomputed,
) -> BenchMarks:
    """Marks of one bench.

    A criterion earns its marks times the mean share of the particles that count: those claimed, and with
    `particles_at_least` as many more as are missing. A particle measured of which nothing is claimed, and one that the
    program cannot judge, are left out of the mean and named to bench and staff; where nothing at all is claimed, every
    particle counts, with nothing. The budget of one particle is enough.

    Parameters
    ----------
    session : str
        The bench.
    scheme : Scheme
        What earns how much.
    claims, overrides : sequence
        Of this bench.
    references : mapping
        Particle to what the program's own reduction says, adjusted within the bench alone.
    recomputed : Recomputed
        What wrong steps give.
    """
    bench = _Bench(scheme, claims, references, recomputed)
    shares = bench.shares()
    by_hand = {one.criterion: one for one in overrides}
    criteria = []
    judged: list[Judged] = []
    look_at: list[str] = bench.doubts()
    for name, criterion in scheme.criteria.items():
        mark = _criterion_mark(criterion, shares[name])
        if name in by_hand:
            mark = replace(mark, marks=by_hand[name].marks, override=by_hand[name])
        elif mark.marks is None:
            look_at.append(f"{name}: cannot be judged")
        criteria.append(mark)
        for particle, share in shares[name].items():
            judged.append(
                Judged(name, particle, criterion.quantity, share.claimed, share.reference, share.u_reference,
                       share.share, share.words)
            )  # fmt: skip
            if share.look_at and name not in by_hand:
                look_at.append(f"{name}, {particle}: {share.look_at}")
    earned = round(math.fsum(one.marks for one in criteria if one.marks is not None), _PLACES)
    status = LOOK_AT if look_at else MARKED
    return BenchMarks(session, status, tuple(criteria), earned, scheme.total, tuple(look_at), tuple(judged))


def not_marked(session: str, scheme: Scheme, reason: str) -> BenchMarks:
    """A bench whose files have faults."""
    return BenchMarks(session, NOT_MARKED, (), None, scheme.total, (reason,), ())


def _criterion_mark(criterion: Criterion, shares: Mapping[str, Share]) -> CriterionMark:
    known = [one.share for one in shares.values() if one.share is not None]
    marks = None
    if known:
        share = max(known) if criterion.kind == "budget" else math.fsum(known) / len(known)
        marks = round(criterion.marks * share, _PLACES)
    words = tuple(f"{particle}: {one.words}" for particle, one in shares.items() if one.words)
    hints = tuple(dict.fromkeys(hint for one in shares.values() for hint in one.hints))
    return CriterionMark(criterion.name, marks, criterion.marks, words, hints, None, marks)


class _Bench:
    """One bench while it is marked: earlier quantities first, so that a mistake is known before what follows."""

    def __init__(
        self,
        scheme: Scheme,
        claims: Sequence[Claim],
        references: Mapping[str, ParticleReference],
        recomputed: Recomputed,
    ) -> None:
        self._scheme, self._references, self._recomputed = scheme, references, recomputed
        self._claims: dict[str, dict[str, Claim]] = {}
        for claim in claims:
            self._claims.setdefault(claim.particle, {})[claim.quantity] = claim
        self._claimed = {
            name for name, own in self._claims.items() if any(not one.startswith(COMPONENT) for one in own)
        }
        self._earlier = {particle: Earlier() for particle in {*self._claims, *references}}
        self._marked = {
            (one.kind, one.quantity) for one in scheme.criteria.values() if one.kind in ("sign", "unit", "value")
        }

    def counting(self) -> list[str]:
        """Particles that count, sorted; those a bench owes and has not logged are called so."""
        there = {name for name, one in self._references.items() if one.status != "excluded"}
        claimed = self._claimed
        least = self._scheme.particles_at_least
        if least is None:
            owed = {name for name in there if self._references[name].status == "ok"}
            return sorted(claimed | owed)
        rest = sorted(there - claimed)[: max(0, least - len(claimed))]
        lacking = least - len(claimed) - len(rest)
        return (
            sorted(claimed)
            + rest
            + [f"particle {len(claimed) + len(rest) + 1 + at} of those asked for" for at in range(lacking)]
        )

    def _unclaimed(self) -> set[str]:
        """Particles measured of which nothing is claimed, and need not be."""
        if self._scheme.particles_at_least is not None or not self._claimed:
            return set()
        return {name for name, one in self._references.items() if one.status == "ok"} - self._claimed

    def doubts(self) -> list[str]:
        """Why the references themselves should be looked at."""
        return [
            f"{name}: {_DOUBTS[flag]}"
            for name in self.counting()
            if name in self._references and name not in self._unclaimed()
            for flag in self._references[name].flags
            if flag in _DOUBTS
        ] + [f"{name}: measured, and nothing claimed" for name in sorted(self._unclaimed())]

    def shares(self) -> dict[str, dict[str, Share]]:
        """Share of each criterion and particle, criteria in the order of the scheme."""
        rank = {quantity: place for place, quantity in enumerate(QUANTITIES)}
        kinds = {"sign": 0, "value": 1, "unit": 2}  # the unit after the value, which finds what is wrong with it

        def order(one: Criterion) -> tuple[int, int]:
            return rank.get(one.quantity, 0), kinds.get(one.kind, 3)

        found = {one.name: self._criterion(one) for one in sorted(self._scheme.criteria.values(), key=order)}
        return {name: found[name] for name in self._scheme.criteria}

    def _criterion(self, criterion: Criterion) -> dict[str, Share]:
        particles = self.counting()
        if criterion.kind == "readings" and self._scheme.particles_at_least is None:
            particles = sorted(
                {name for name, one in self._references.items() if one.status != "excluded"} | set(particles)
            )
        elif criterion.kind != "value":  # a value that is not claimed is said once
            particles = [name for name in particles if name not in self._unclaimed()]
        return {name: self._share(criterion, name) for name in particles}

    def _share(self, criterion: Criterion, name: str) -> Share:
        reference = self._references.get(name)
        claims = self._claims.get(name, {})
        kind, quantity = criterion.kind, criterion.quantity
        if reference is None:
            return Share(0.0, "nothing logged and nothing claimed")
        if kind == "readings":
            return readings_share(criterion, reference)
        if kind == "agreement":
            return agreement_share(criterion, list(claims.values()), reference)
        if kind == "budget":
            return budget_share(criterion, list(claims.values()), reference)
        claim = claims.get(quantity)
        if claim is None:
            return not_counted(quantity) if name in self._unclaimed() else missing(quantity)
        if kind == "rounding":
            return rounding_share(name, claim)
        earlier = self._earlier[name]
        if kind == "unit":
            return unit_share(name, claim, quantity in earlier.prefix)
        own = reference.quantities.get(quantity)
        if own is None or reference.status != "ok" or (kind == "sign" and not reference.signed):
            why = f"{NAMES[quantity]} claimed, but {_why_unknown(reference, quantity)}"
            return Share(None, UNKNOWN, claimed=claim.value, look_at=why)
        if not claim.unit_fits and kind == "value" and ("unit", quantity) not in self._marked:
            return Share(0.0, f"{NAMES[quantity]} in a unit of another kind", claimed=claim.value, reference=own.value)
        if kind == "uncertainty":
            return uncertainty_share(criterion, name, claim, own, _own_scatter(reference, quantity))
        if kind == "sign":
            return sign_share(criterion, name, claim, own, earlier)
        return self._value(criterion, name, claim, reference, earlier)

    def _value(
        self, criterion: Criterion, name: str, claim: Claim, reference: ParticleReference, earlier: Earlier
    ) -> Share:
        around = Circumstances(
            self._scheme.claim_tolerance,
            ("sign", criterion.quantity) in self._marked,
            ("unit", criterion.quantity) in self._marked,
            reference,
            lambda rate: self._recomputed.diameter_of(name, rate),
            lambda: self._recomputed.mistakes(name),
        )
        return value_share(criterion, name, claim, reference.quantities[criterion.quantity], earlier, around)


def _own_scatter(reference: ParticleReference, quantity: str) -> float | None:
    """Relative standard uncertainty that the particle's own readings cause."""
    parts = [one.relative for one in reference.budget.get(quantity, ()) if one.key in METHODS]
    return math.hypot(*parts) if parts and math.hypot(*parts) > 0.0 else None


def _why_unknown(reference: ParticleReference, quantity: str) -> str:
    if reference.status == "excluded":
        return "the particle is excluded"
    if quantity in reference.quantities:
        return "its sign is not determined"
    return f"not determined by the readings ({', '.join((reference.status, *reference.flags))})"
