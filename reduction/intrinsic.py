"""Charge as it is between particles: mean, spread and skew with the measurement error taken out, and its sign.

Sizes adjusted with a lot's mean and spread are drawn towards that lot: to take u out of their spread again would
count it twice. So each particle enters with a charge that does not rest on the lot: adjusted where no lot was used,
else from the drag alone, else from an own diameter. Where only the lot fixes the size, the spread is not determined.
"""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from reduction.multiplicity import reach
from reduction.sessionmeans import Facts, Sample

Array = NDArray[np.floating[Any]]
FEWEST = 3  # particles for a spread
FEWEST_FOR_SKEW = 10
SAME_SIZE = 1e-9
ESTIMATE, LOWER_BOUND, NOT_DETERMINED = "estimate", "lower bound", "not determined"


@dataclass(frozen=True)
class Intrinsic:
    """Spread and skew of one group; NaN where not determined, with the reason in `basis`."""

    particles: int
    spread: float = math.nan
    u_spread: float = math.nan  # by leaving out one session at a time; NaN below three sessions
    skew: float = math.nan
    basis: str = NOT_DETERMINED


@dataclass(frozen=True)
class LotFree:
    """A sample of charges that do not rest on the lot; `exact` says whether every own variance is known as such."""

    sample: Sample
    exact: bool


def lot_means(inputs: pd.DataFrame) -> dict[str, float]:
    """Species whose lot entered an adjustment: its mean diameter [um], from inputs.csv."""
    suffix = "/diameter_um"
    return {
        str(name).removeprefix("species/").removesuffix(suffix): float(estimate)
        for name, estimate in zip(inputs["input"], inputs["estimate"], strict=True)
        if str(name).startswith("species/") and str(name).endswith(suffix)
    }


def lot_free(sample: Sample, particles: pd.DataFrame, facts: Facts, lots: Mapping[str, float]) -> LotFree:
    """Charges [e] of a sample that do not rest on the lot; a particle without one is left out.

    Parameters
    ----------
    sample : Sample
        Adjusted charges, from `sessionmeans.gather`.
    particles : DataFrame
        particles.csv, for species and flags.
    facts : mapping
        Session: content of its session.json; `masses` holds the charge by each way to the size. An entry's
        `u_own_charge_e` is u from the particle's own readings; without it, the shared part is taken to be that of the
        adjusted charge, which is too little, and the spread is a lower bound.
    lots : mapping
        As `lot_means` gives them.
    """
    about = {
        (row["session"], row["particle"]): row
        for row in particles[["session", "particle", "species", "flags"]].to_dict("records")
    }
    kept = np.zeros(len(sample.value), dtype=bool)
    value, own = sample.value.copy(), sample.own.copy()
    scale, exact = np.ones(len(value)), True
    shared = sample.u**2 - sample.own
    for at, key in enumerate(zip(sample.session.tolist(), sample.particle.tolist(), strict=True)):
        row, fact = about[key], facts.get(key[0], {})
        entry = _way(row, fact, lots, (fact.get("masses") or {}).get(key[1]) or [])
        if entry is None:
            continue
        kept[at] = True
        if entry:
            value[at] = entry["charge_e"]
            scale[at] = value[at] / sample.value[at]
            if entry.get("u_own_charge_e") is not None:
                own[at] = entry["u_own_charge_e"] ** 2
            else:
                own[at] = max(entry["u_charge_e"] ** 2 - shared[at] * scale[at] ** 2, 0.0)
                exact = False
    moved = Sample(
        sample.unit, sample.session, sample.particle, sample.group, value, own,
        sample.shared.multiply(scale[:, None]).tocsr(), sample.names, sample.scopes,
    )  # fmt: skip
    return LotFree(moved.take(kept), exact)


def _way(
    row: Mapping[Any, Any], fact: Mapping[str, Any], lots: Mapping[str, float], masses: list[dict[str, Any]]
) -> dict[str, Any] | None:
    """The entry of `masses` to use; empty for the adjusted charge itself, None where only the lot fixes the size."""
    if "size_from_lot" in str(row["flags"]).split(";"):
        return None
    by_way = {str(entry["mass_from"]): entry for entry in masses}
    lot = lots.get(str(row["species"]))
    mass_from = fact.get("mass_from")
    if lot is None or mass_from == "drag" or (fact.get("lot") == "unused" and mass_from != "diameter"):
        return {}
    own_size = "diameter" in by_way and abs(by_way["diameter"]["diameter_um"] - lot) > SAME_SIZE * lot
    if mass_from == "diameter":
        return {} if own_size else None
    if "drag" in by_way:
        return by_way["drag"]
    return by_way["diameter"] if own_size else None


def intrinsic(free: LotFree) -> Intrinsic:
    """Spread and skew between particles.

    sigma^2 = S^2 - mean of what measurement error makes of S^2, shared errors as far as they spread particles;
    skew = (m_3 - 3 mean((q - mean) u^2)) / sigma^3, small-sample factors applied: errors that grow with the charge skew
    what they blur. Both hold for errors of any size and any intrinsic distribution.

    Parameters
    ----------
    free : LotFree
        Charges of one group.

    Returns
    -------
    Intrinsic
        Spread 0 where measurement error explains all of the scatter.
    """
    sample = free.sample
    count = len(sample.value)
    if count < FEWEST:
        return Intrinsic(count)
    square = _intrinsic_square(sample)
    spread = math.sqrt(max(square, 0.0))
    names = np.unique(sample.session)
    u = math.nan
    if len(names) > 2:
        left = [_intrinsic_square(sample.take(sample.session != name)) for name in names]
        roots = np.sqrt(np.maximum(left, 0.0))
        u = math.sqrt((len(names) - 1.0) / len(names) * float(((roots - roots.mean()) ** 2).sum()))
    skew = math.nan
    if count >= FEWEST_FOR_SKEW and square > 0.0:
        off = sample.value - sample.value.mean()
        third = float((off**3).mean()) - 3.0 * float((off * sample.u**2).mean())
        skew = third * count**2 / ((count - 1.0) * (count - 2.0)) / spread**3
    return Intrinsic(count, spread, u, skew, ESTIMATE if free.exact else LOWER_BOUND)


def _intrinsic_square(sample: Sample) -> float:
    """Variance between particles less what measurement error contributes to it on average."""
    count = len(sample.value)
    if count < 2:
        return math.nan
    mean = np.asarray(sample.shared.sum(axis=0)).ravel() / count
    squares = float(sample.shared.multiply(sample.shared).sum()) - count * float(mean @ mean)
    noise = float(sample.own.sum()) * (1.0 - 1.0 / count) + squares
    return float(np.var(sample.value, ddof=1)) - noise / (count - 1.0)


def fraction_positive(positive: NDArray[np.bool_], session: NDArray[np.str_], coverage: float) -> tuple[float, ...]:
    """Fraction of positive particles with its interval: Wilson's with the particles that would tell as much.

    n_eff = n / (1 + (n_0 - 1) r), r the intraclass correlation of the sign between sessions, times (z / t)^2 for the
    few sessions it comes from, but no fewer than the sessions. Where all signs are alike r is not known and every
    session counts once. Wilson, J. Am. Statist. Assoc. 22 (1927) 209; Korn and Graubard, Surv. Methodol. 24 (1998) 193.

    Parameters
    ----------
    positive : (n,) array of bool
        Sign of each particle.
    session : (n,) array of str
        Its session.
    coverage : float
        Coverage probability [1].

    Returns
    -------
    tuple of float
        Fraction, low, high; the interval NaN below two sessions.
    """
    count = len(positive)
    if not count:
        return (math.nan,) * 3
    share = float(positive.mean())
    _, at, sizes = np.unique(session, return_inverse=True, return_counts=True)
    sessions = len(sizes)
    if sessions < 2:
        return share, math.nan, math.nan
    effective = float(sessions)
    if 0.0 < share < 1.0:
        inside = np.bincount(at, weights=positive.astype(float)) / sizes
        between = float((sizes * (inside - share) ** 2).sum()) / (sessions - 1)
        within = float((sizes * inside * (1.0 - inside)).sum()) / (count - sessions) if count > sessions else between
        size = (count - float((sizes**2).sum()) / count) / (sessions - 1)
        total = between + (size - 1.0) * within
        correlation = max((between - within) / total, 0.0) if total > 0.0 else 0.0
        weighted = float((sizes**2).sum()) / count
        independent = count / (1.0 + (weighted - 1.0) * correlation)
        z, t = reach(1e9, coverage), reach(sessions - 1.0, coverage)
        effective = max(independent * (z / t) ** 2, min(float(sessions), independent))
    return share, *wilson(share, effective, reach(1e9, coverage))


def wilson(share: float, count: float, z: float) -> tuple[float, float]:
    """Wilson's interval (p + z^2/2n +- z sqrt(p(1-p)/n + z^2/4n^2)) / (1 + z^2/n)."""
    scale = 1.0 + z * z / count
    middle = (share + z * z / (2.0 * count)) / scale
    half = z * math.sqrt(share * (1.0 - share) / count + z * z / (4.0 * count * count)) / scale
    return max(middle - half, 0.0), min(middle + half, 1.0)
