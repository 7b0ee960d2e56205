"""The criteria of a marking scheme, each as a share of its marks that one particle earns, with words for the bench.

Words never hold a value of the program's own, nor a tolerance of the scheme.
"""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field

from reduction.benchreference import ParticleReference, Reference
from reduction.claims import AGREEMENT, COMPONENT, Claim
from reduction.markrecord import Hint
from reduction.markscheme import METHODS, Criterion
from reduction.stateddigits import rounded_together
from reduction.units import split_name

NAMES: Mapping[str, str] = {
    "charge_to_mass": "charge-to-mass ratio",
    "drag_rate": "drag rate",
    "diameter": "diameter",
    "mass": "mass",
    "charge": "charge",
    "surface_charge_density": "surface charge density",
}
"""Quantities as a sentence calls them."""
HINTS: Mapping[str, str] = {
    "standard_as_expanded": "the uncertainty looks like a standard one (k = 1) given with a coverage factor of 2",
    "expanded_as_standard": "the uncertainty looks like an expanded one (k = 2) given with a coverage factor of 1",
    "no_coverage_factor": "the coverage factor is not stated; it is taken as 2",
    "scatter_only": "the uncertainty looks like the scatter of the readings alone; trap constants, gains and the stray "
    "field belong in the budget too",
    "uncertainty_large": "the uncertainty is larger than the readings and the stated inputs ask for",
    "uncertainty_small": "the uncertainty is smaller than the readings and the stated inputs allow",
    "digits": "an uncertainty is stated with one or two digits",
    "places": "value and uncertainty end at the same decimal place; zeros at the end count, and a spreadsheet drops "
    "them unless the cell is text",
    "unit_kind": "the unit belongs to another kind of quantity",
    "unit_prefix": "the number fits another prefix of the unit",
}
"""What a bench is told, in a sentence after the particle's name."""
_K_FITS = 0.2  # in the logarithm of the ratio of uncertainties, how near two it must be for a mistake in k
_SCATTER_FITS = 1.3  # claimed over own scatter, either way
_EITHER = (0.8, 1.25)  # |E_n| between these may be called agreement or not


@dataclass(frozen=True)
class Share:
    """What one particle earns of a criterion."""

    share: float | None  # from 0 to 1; None where it cannot be told
    words: str = ""  # after the particle's name
    hints: tuple[Hint, ...] = ()
    claimed: float | None = None
    reference: float | None = None
    u_reference: float | None = None
    look_at: str = field(default="")  # staff only: why a person should look


def hint(particle: str, code: str, text: str = "") -> Hint:
    """Hint about one particle."""
    return Hint(code, f"{particle}: {text or HINTS[code]}")


def missing(quantity: str) -> Share:
    """What is earned where nothing is claimed."""
    return Share(0.0, f"no {NAMES[quantity]} claimed")


def not_counted(quantity: str) -> Share:
    """A particle measured of which nothing is claimed: no number to judge."""
    return Share(None, f"no {NAMES[quantity]} claimed, not counted")


UNKNOWN = "the program cannot judge this particle; a person will look"


def linear(value: float, full: float, none: float) -> float:
    """1 up to `full`, 0 from `none` on, a straight line between."""
    return min(1.0, max(0.0, (none - value) / (none - full)))


def readings_share(criterion: Criterion, reference: ParticleReference) -> Share:
    """Readings logged over readings asked for, of the log that lacks most."""
    shares, short = [], []
    for method in METHODS:
        asked = criterion.options[f"{method}_at_least"]
        if asked:
            count = reference.readings[method]
            shares.append(min(1.0, count / asked))
            if count < asked:
                short.append(f"{count} {method} reading{'s' if count != 1 else ''}")
    words = f"{' and '.join(short)}, fewer than asked for" if short else "enough readings"
    return Share(min(shares), words)


def uncertainty_share(
    criterion: Criterion, particle: str, claim: Claim, reference: Reference, own_scatter: float | None
) -> Share:
    """How the claimed relative standard uncertainty compares with the program's own, both ways alike.

    Relative, so that a wrong value costs once; anything from the adjusted u to that of the best single method is
    right. Linear in the logarithm of the ratio between `ratio_between` and `none_beyond`.

    Parameters
    ----------
    own_scatter : float, optional
        Relative standard uncertainty from the particle's own readings alone.
    """
    u = claim.standard_uncertainty
    if u is None:
        return Share(0.0, f"no expanded uncertainty of the {NAMES[criterion.quantity]} claimed")
    if claim.value == 0.0:
        return Share(0.0, "an uncertainty cannot be judged beside a value of zero", claimed=u)
    relative = u / abs(claim.value)
    least, most = reference.u / abs(reference.value), reference.widest_u / abs(reference.value)
    ratio = relative / most if relative > most else min(1.0, relative / least)
    low, high = criterion.options["ratio_between"]
    none_low, none_high = criterion.options["none_beyond"]
    if ratio >= 1.0:
        share = linear(math.log(ratio), math.log(high), math.log(none_high))
    else:
        share = linear(-math.log(ratio), -math.log(low), -math.log(none_low))
    of_scatter = None if own_scatter is None else relative / own_scatter
    code = _uncertainty_code(claim, (relative / least, relative / most), ratio, share, of_scatter)
    hints = [hint(particle, code)] if code else []
    if claim.coverage_factor is None:
        hints.append(hint(particle, "no_coverage_factor"))
    size = "fits the readings and the stated inputs" if not code else "too large" if ratio > 1.0 else "too small"
    return Share(share, f"uncertainty of the {NAMES[criterion.quantity]} {size}", tuple(hints), u, None, reference.u)


def _uncertainty_code(
    claim: Claim, over: tuple[float, float], ratio: float, share: float, of_scatter: float | None
) -> str:
    """Code of what is wrong with an uncertainty; `over` are its ratios to the least and the widest that are right."""
    factor = claim.coverage_factor or 2.0
    near_two = any(abs(math.log(one) - math.log(2.0)) < _K_FITS for one in over)
    near_half = abs(math.log(over[0]) + math.log(2.0)) < _K_FITS
    if near_two and abs(factor - 1.0) < 0.1:
        return "expanded_as_standard"
    from_scatter = of_scatter is not None and 1.0 / _SCATTER_FITS < of_scatter < _SCATTER_FITS
    if near_half and factor > 1.5 and not from_scatter:
        return "standard_as_expanded"
    if share == 1.0:
        return ""
    if ratio < 1.0:
        return "scatter_only" if from_scatter else "uncertainty_small"
    return "uncertainty_large"


def rounding_share(particle: str, claim: Claim) -> Share:
    """Half for one or two digits of the uncertainty, half for a value that ends where the uncertainty ends."""
    if not claim.uncertainty_text:
        return Share(0.0, f"no expanded uncertainty of the {NAMES[claim.quantity]} to round with")
    together, few = rounded_together(claim.value_text, claim.uncertainty_text)
    hints = [] if few else [hint(particle, "digits")]
    hints += [] if together else [hint(particle, "places")]
    words = "value and uncertainty rounded together" if together and few else "rounding to be mended"
    return Share(0.5 * together + 0.5 * few, words, tuple(hints))


def unit_share(particle: str, claim: Claim, prefix_wrong: bool) -> Share:
    """Whether the unit is one of the quantity, and its prefix the one that the number fits."""
    if not claim.unit_fits:
        return Share(0.0, f"{claim.unit} is no unit of a {NAMES[claim.quantity]}", (hint(particle, "unit_kind"),))
    if prefix_wrong:
        return Share(0.0, "number and unit do not go together", (hint(particle, "unit_prefix"),))
    return Share(1.0, "unit right")


def agreement_share(criterion: Criterion, claims: Sequence[Claim], reference: ParticleReference) -> Share:
    """Whether the bench's E_n says what the program's own says: that two methods agree (|E_n| <= 1), or do not."""
    pair = criterion.options["between"]
    own = [claim for claim in claims if claim.quantity in (f"{AGREEMENT}{a}_{b}" for a, b in (pair, pair[::-1]))]
    known = reference.agreement.get(frozenset(pair))
    if not own:
        return Share(0.0, f"no agreement of {pair[0]} and {pair[1]} claimed")
    if known is None:
        return Share(None, UNKNOWN, look_at="one of the two methods determines nothing by itself")
    same = (abs(own[0].value) <= 1.0) == (abs(known) <= 1.0) or _EITHER[0] <= abs(known) <= _EITHER[1]
    words = f"{pair[0]} and {pair[1]} compared"
    words += "" if same else ", with a conclusion that the readings do not bear out"
    return Share(float(same), words, claimed=own[0].value, reference=known)


def budget_share(criterion: Criterion, claims: Sequence[Claim], reference: ParticleReference) -> Share:
    """Share of the variance that the components claimed account for, over the share asked for."""
    named = {claim.quantity.removeprefix(COMPONENT): claim for claim in claims if claim.quantity.startswith(COMPONENT)}
    if not named:
        return Share(0.0, "no components of the uncertainty claimed")
    budget = [one for one in reference.budget.get(criterion.quantity, ()) if " " not in one.key]  # of its own alone
    total = math.fsum(one.share for one in budget)
    if total <= 0.0:
        return Share(None, UNKNOWN, look_at="no budget of its own")
    band = criterion.options["ratio_between"] or (0.0, math.inf)
    found = 0.0
    for one in budget:
        claim = named.get(one.key) or named.get(split_name(one.key)[0])
        if claim and one.relative > 0.0 and band[0] <= abs(claim.value) / one.relative <= band[1]:
            found += one.share
    share = min(1.0, found / total / criterion.options["share_at_least"])
    words = "complete" if share == 1.0 else "a component that matters is missing or far from its size"
    return Share(share, f"budget of the {NAMES[criterion.quantity]}: {words}", reference=found / total)
