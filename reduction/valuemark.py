"""The value of a claim held against the program's own reduction of the same readings.

They share the readings, so a claim may differ by choices of analysis and by the rounding of its last digit, not by its
uncertainty: a large one neither costs nor buys anything here. A mistake carried into a later quantity costs once.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass, field
from itertools import product

from reduction.benchreference import ParticleReference, Reference
from reduction.claims import Claim
from reduction.criteria import NAMES, Share, hint, linear
from reduction.markrecord import Hint
from reduction.markscheme import SIGNED, Criterion
from reduction.mistakes import TEXTS, Mistake, explaining
from reduction.stateddigits import last_digit
from reduction.units import UNITS

PREFIXES = tuple(power for step in (3, 6, 9, 12) for power in (step, -step))
"""Powers of ten between neighbouring prefixes of a unit."""
FOLLOWS: Mapping[str, tuple[Mapping[str, int], ...]] = {
    "mass": ({"diameter": 3},),
    "charge": ({"charge_to_mass": 1, "mass": 1}, {"charge_to_mass": 1, "diameter": 3}),
    "surface_charge_density": ({"charge": 1, "diameter": -2}, {"charge_to_mass": 1, "diameter": 1}),
}
"""Ways from earlier quantities to a later one, as powers: m of d^3; q of s m or s d^3; sigma of q/d^2 or s d."""


@dataclass
class Earlier:
    """What was found of the earlier claims of one particle, for those that come after."""

    size: dict[str, float] = field(default_factory=dict)  # quantity: claimed size where its marks were lost
    turned: set[str] = field(default_factory=set)  # quantities whose wrong sign has cost its marks
    prefix: set[str] = field(default_factory=set)  # quantities whose wrong prefix costs the marks for the unit


@dataclass(frozen=True)
class Circumstances:
    """What the scheme and the particle say beside the claim itself."""

    tolerance: float  # claim tolerance, relative
    sign_marked: bool  # whether a criterion of its own is there for the sign
    unit_marked: bool  # and for the unit
    particle: ParticleReference
    diameter_of: Callable[[float], float]  # diameter [m] that goes with a drag rate [1/s]
    mistakes: Callable[[], Sequence[Mistake]]


def value_share(
    criterion: Criterion, name: str, claim: Claim, reference: Reference, earlier: Earlier, around: Circumstances
) -> Share:
    """All marks within `full_within` claim tolerances of what the readings give, none beyond `none_beyond`.

    misfit = max(0, |claim - reference| - half a unit of the last digit) / (tolerance |reference|), the rounding
    allowed for being at most 2 u of the reference: digits left out beyond that are no rounding.

    Where the claim follows from earlier claims of the bench that lost their marks, it is held against what follows
    from them as well, and the better counts.
    """
    full, none = criterion.options["full_within"], criterion.options["none_beyond"]
    half = _half_unit(claim)
    rounding = min(half, 2.0 * reference.u)
    size = abs(claim.value)
    misfit = min(_misfit(size, abs(one), rounding, around.tolerance) for one in reference.accepted)
    turned = around.particle.signed and criterion.quantity in SIGNED and claim.value * reference.value < 0.0
    share, words, look = linear(misfit, full, none), "", ""
    hints: tuple[Hint, ...] = ()
    if share < 1.0 and around.unit_marked:
        scaled = [_scaled_share(criterion, claim, reference, around, 10.0**power) for power in PREFIXES]
        if max(scaled) > share:
            share = max(scaled)
            earlier.prefix.add(criterion.quantity)
            words = f"{NAMES[criterion.quantity]} right but for a power of ten, which counts under the unit"
    if share < 1.0 and not words:
        follows = _followed(criterion, claim, reference, earlier, around, half)
        if follows > share:
            share = follows
            words = f"{NAMES[criterion.quantity]} follows from the bench's own earlier values, where the mistake counts"
    if share < 1.0 and not words:
        hints, look = _explained(criterion, name, claim, reference, misfit, rounding, around)
        earns = criterion.options["named_mistake_earns"] or 0.0
        share = max(share, earns) if hints and not look else share
        earlier.size[criterion.quantity] = size
        near = "near" if share >= 0.5 else "not"
        words = f"{NAMES[criterion.quantity]} {near} what the readings give"
    if turned and around.sign_marked:
        earlier.turned.add(criterion.quantity)
    elif turned and not earlier.turned & _parents(criterion.quantity):
        hints = (*hints, hint(name, "sign", f"it looks like {TEXTS['sign']}"))
        share, words = 0.0, f"{NAMES[criterion.quantity]} of the wrong sign"
        earlier.turned.add(criterion.quantity)
    words = words or f"{NAMES[criterion.quantity]} as the readings give it"
    return Share(share, words, hints, claim.value, reference.value, reference.u, look)


def sign_share(criterion: Criterion, name: str, claim: Claim, reference: Reference, earlier: Earlier) -> Share:
    """Whether the sign is right, or follows from an earlier one that was wrong."""
    right = claim.value * reference.value > 0.0
    if right:
        return Share(1.0, f"sign of the {NAMES[criterion.quantity]} right")
    if criterion.quantity != "charge_to_mass" and earlier.turned & _parents(criterion.quantity):
        return Share(1.0, f"sign of the {NAMES[criterion.quantity]} follows from the bench's own earlier one")
    earlier.turned.add(criterion.quantity)
    mistake = hint(name, "sign", f"it looks like {TEXTS['sign']}")
    return Share(0.0, f"sign of the {NAMES[criterion.quantity]} wrong", (mistake,))


def _parents(quantity: str) -> set[str]:
    return {one for way in FOLLOWS.get(quantity, ()) for one in way}


def _half_unit(claim: Claim) -> float:
    """Half a unit of the last digit written, SI."""
    unit = UNITS.get(claim.unit)
    factor = unit.factor if unit is not None and claim.unit_fits else 1.0
    return float(0.5 * 10.0 ** last_digit(claim.value_text, claim.uncertainty_text) * factor)


def _misfit(size: float, right: float, rounding: float, tolerance: float) -> float:
    return max(0.0, abs(size - right) - rounding) / (tolerance * right)


def _scaled_share(
    criterion: Criterion, claim: Claim, reference: Reference, around: Circumstances, factor: float
) -> float:
    rounding = min(_half_unit(claim) * factor, 2.0 * reference.u)
    misfit = min(_misfit(abs(claim.value) * factor, abs(one), rounding, around.tolerance) for one in reference.accepted)
    return linear(misfit, criterion.options["full_within"], criterion.options["none_beyond"])


def _followed(
    criterion: Criterion,
    claim: Claim,
    reference: Reference,
    earlier: Earlier,
    around: Circumstances,
    half: float,
) -> float:
    """Best share against what follows from earlier claims that lost their marks; 0 where there is none."""
    best = 0.0
    for right in _consequences(criterion.quantity, abs(reference.value), earlier, around):
        rounding = min(half, 2.0 * reference.u / abs(reference.value) * right)
        misfit = _misfit(abs(claim.value), right, rounding, around.tolerance)
        best = max(best, linear(misfit, criterion.options["full_within"], criterion.options["none_beyond"]))
    return best


def _consequences(quantity: str, right: float, earlier: Earlier, around: Circumstances) -> list[float]:
    """What the quantity becomes with earlier claims in place of the right values, for every choice of them."""
    known = around.particle.quantities
    wrong = {one: size / abs(known[one].value) for one, size in earlier.size.items() if one in known and size > 0.0}
    if "drag_rate" in wrong and "diameter" in known:
        size = around.diameter_of(earlier.size["drag_rate"])
        if math.isfinite(size) and quantity == "diameter":
            return [size]
        if math.isfinite(size):
            wrong.setdefault("diameter", size / abs(known["diameter"].value))
    found = []
    for way in FOLLOWS.get(quantity, ()):
        choices = [(1.0, wrong[one] ** power) if one in wrong else (1.0,) for one, power in way.items()]
        found += [right * math.prod(picked) for picked in product(*choices) if any(one != 1.0 for one in picked)]
    return sorted(set(found))


def _explained(
    criterion: Criterion,
    name: str,
    claim: Claim,
    reference: Reference,
    misfit: float,
    rounding: float,
    around: Circumstances,
) -> tuple[tuple[Hint, ...], str]:
    """Hints about what the claim looks like, and why staff should look."""
    if not claim.unit_fits:
        return (), ""
    codes = explaining(
        around.mistakes(),
        criterion.quantity,
        claim.value,
        half_unit=rounding,
        tolerance=around.tolerance,
        misfit=misfit,
    )
    quantity = NAMES[criterion.quantity]
    if not codes:
        far = misfit > criterion.options["none_beyond"]
        return (), f"{quantity} far off, and no known mistake explains it" if far else ""
    if len(codes) == 1:
        return (hint(name, codes[0], f"the {quantity} looks like {TEXTS[codes[0]]}"),), ""
    texts = " or like ".join(TEXTS[code] for code in codes[:3])
    mistake = hint(name, "several_fit", f"the {quantity} looks like {texts}")
    return (mistake,), f"several mistakes explain the {quantity}: {', '.join(codes)}"
