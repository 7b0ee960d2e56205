"""Charge in electrons as a histogram that does not lie: signed, no finer than what is known, with a band."""

from __future__ import annotations

import math
from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from typing import Any

import numpy as np
import pandas as pd
from numpy.typing import NDArray
from scipy.special import ndtr

from reduction.groupmeans import group_means
from reduction.intrinsic import Intrinsic, fraction_positive, intrinsic, lot_free, lot_means
from reduction.multiplicity import reach
from reduction.sessionmeans import JOINT, Facts, Sample, cells_of, gather
from reduction.shapes import stream
from reduction.units import ELEMENTARY_CHARGE
from reduction.unseen import lost_of, window_of

Array = NDArray[np.floating[Any]]
MOST_BINS = 60
DRAWS = 1000
DECADES = 2.0  # between the 10th and the 90th centile of the size of the charge: from there, bins grow with it
COLUMNS = {
    name: tuple(text.split())
    for name, text in {
        "histogram": """group species scale low_e high_e count count_low count_high expected_count share
            cumulative_share""",
        "charge_distribution": "group species session particle charge_e u_charge_e share_at_or_below share_smeared",
        "charge_summary": """group species sessions particles mean_e u_mean_e mean_low_e mean_high_e intrinsic_spread_e
            u_intrinsic_spread_e intrinsic_skew intrinsic_basis intrinsic_particles fraction_positive
            fraction_positive_low fraction_positive_high fraction_positive_least fraction_positive_most lost
            sign_undetermined not_determined excluded scale bin_width_e median_u_e window_positive_low_e
            window_positive_high_e window_negative_low_e window_negative_high_e window_low_C_per_kg
            window_high_C_per_kg""",
    }.items()
}


@dataclass(frozen=True)
class Bins:
    """Edges [e] and how they were chosen; zero is an edge, so that no bin mixes signs."""

    edges: Array
    scale: str  # linear, symmetric_log
    width: float  # of the narrowest bin [e]


@dataclass(frozen=True)
class Distribution:
    """Charges of one group and species."""

    group: str
    species: str
    sample: Sample
    bins: Bins
    count: Array
    low: Array
    high: Array
    expected: Array  # mean count with every particle blurred by its u once more
    mean: tuple[float, float, float, float]  # mean of session means, u, low, high
    intrinsic: Intrinsic
    positive: tuple[float, ...]  # fraction, low, high
    lost: Mapping[str, int]  # reason: particles
    mass: float  # median [kg]
    window: Mapping[str, tuple[float, float]]  # positive, negative: sizes of q/m [C/kg]

    @property
    def scale(self) -> str:
        """Scale of the axis."""
        return self.bins.scale


def bins_of(value: Array, u: Array) -> Bins:
    """Bins for signed values.

    Width 2 IQR / n^(1/3) (Freedman and Diaconis, Z. Wahrscheinlichkeitstheorie 57 (1981) 453), but never finer than
    the median u and never so fine that more than `MOST_BINS` cover the values. Where the sizes span decades the bins
    are even in asinh(q / q0), near zero linear and far from it in equal ratios, the narrowest again no finer than the
    median u.

    Parameters
    ----------
    value, u : (n,) arrays
        Values and standard uncertainties [e], one or more.

    Returns
    -------
    Bins
        Edges from below the least to above the largest value.
    """
    floor = float(np.median(u))
    size = np.abs(value)
    small, large = np.quantile(size, [0.1, 0.9])
    if len(value) >= 10 and small > 0.0 and math.log10(large / small) >= DECADES:
        return _growing(value, floor, float(small))
    width = max(_rule(value), floor)
    reached = float(value.max() - value.min())
    width = max(width, reached / (MOST_BINS - 2), float(size.max()) * 1e-12)
    if not width > 0.0:
        width = 1.0
    first, last = math.floor(float(value.min()) / width), math.floor(float(value.max()) / width) + 1
    return Bins(np.arange(first, last + 1) * width, "linear", width)


def _growing(value: Array, floor: float, linear: float) -> Bins:
    stretched = np.arcsinh(value / linear)
    step = max(_rule(stretched), float(stretched.max() - stretched.min()) / (MOST_BINS - 2), 1e-6)
    if linear * math.sinh(step) < floor:
        linear = floor / math.sinh(step)
        stretched = np.arcsinh(value / linear)
    first, last = math.floor(float(stretched.min()) / step), math.floor(float(stretched.max()) / step) + 1
    edges = linear * np.sinh(np.arange(first, last + 1) * step)
    return Bins(edges, "symmetric_log", float(linear * math.sinh(step)))


def _rule(value: Array) -> float:
    quarter, three = np.quantile(value, [0.25, 0.75])
    return 2.0 * float(three - quarter) / math.cbrt(len(value))


def counts_in(edges: Array, value: Array) -> Array:
    """Counts in bins that hold their lower edge, of values (..., n); what lies outside goes to no bin."""
    at = np.searchsorted(edges, value, side="right") - 1
    inside = (at >= 0) & (at < len(edges) - 1)
    rows = np.broadcast_to(np.arange(value[..., 0].size)[:, None], at.reshape(-1, at.shape[-1]).shape)
    flat = (rows * (len(edges) - 1) + at.reshape(rows.shape))[inside.reshape(rows.shape)]
    found = np.bincount(flat, minlength=rows.shape[0] * (len(edges) - 1)).reshape(rows.shape[0], -1)
    return np.asarray(found.reshape(*value.shape[:-1], len(edges) - 1), dtype=float)


def draws_of(sample: Sample, *, seed: int, draws: int = DRAWS) -> Array:
    """Joint draws (draws, n) of what the particles could have been read as, shared errors moving all together."""
    shared = np.zeros((draws, len(sample.value)))
    used = np.unique(sample.shared.nonzero()[1])
    if len(used):
        common = np.array([stream(seed, f"histogram/{sample.names[at]}").standard_normal(draws) for at in used])
        shared = np.asarray((sample.shared[:, used] @ common).T)
    keys = [f"histogram/{s}/{p}" for s, p in zip(sample.session.tolist(), sample.particle.tolist(), strict=True)]
    own = np.array([stream(seed, key).standard_normal(draws) for key in keys]).T
    return np.asarray(sample.value + shared + np.sqrt(sample.own) * own)


def distributions(
    particles: pd.DataFrame, components: pd.DataFrame, inputs: pd.DataFrame, facts: Facts, *,
    by: str = "charged_with", coverage: float = 0.95, seed: int = 1, draws: int = DRAWS,
) -> list[Distribution]:  # fmt: skip
    """Charges in electrons of every group and species.

    Parameters
    ----------
    particles, components, inputs : DataFrame
        particles.csv, components.csv and inputs.csv as `tables.read_table` gives them.
    facts : mapping
        Session: content of its session.json; of it `masses`, and `window` and `lost` as `window` makes them.
    by : str
        What makes a group, as in `comparison.compare`.
    coverage : float
        Coverage probability of the band and the intervals [1].
    seed, draws : int
        Seed of the campaign; draws for the band.

    Returns
    -------
    list of Distribution
        Sorted by group, then species; none for a group without a charge.
    """
    sample = gather(particles, components, facts, quantity="charge", by=(by, "species"))
    lots = lot_means(inputs)
    mass = {
        (row["session"], row["particle"]): float(row["mass_kg"])
        for row in particles[["session", "particle", "mass_kg"]].to_dict("records")
    }
    means = group_means(cells_of(sample))
    found = []
    for place, one in enumerate(means.groups):
        group, _, species = one.group.rpartition(JOINT)
        chosen = sample.take(sample.group == one.group)
        bins = bins_of(chosen.value, chosen.u)
        drawn = counts_in(bins.edges, draws_of(chosen, seed=seed, draws=draws))
        low, high = np.quantile(drawn, [0.5 - 0.5 * coverage, 0.5 + 0.5 * coverage], axis=0)
        unit = np.zeros(len(means.groups))
        unit[place] = 1.0
        interval = (one.mean, math.nan, math.nan, math.nan)
        if one.tested:
            u = math.sqrt(max(means.variance(unit), 0.0))
            half = reach(means.freedom(unit), coverage) * u
            interval = (one.mean, u, one.mean - half, one.mean + half)
        sessions = sorted(set(chosen.session.tolist()))
        masses = [mass[key] for key in zip(chosen.session.tolist(), chosen.particle.tolist(), strict=True)]
        found.append(
            Distribution(
                group, species, chosen, bins, counts_in(bins.edges, chosen.value), low, high, drawn.mean(axis=0),
                interval, intrinsic(lot_free(chosen, particles, facts, lots)),
                fraction_positive(chosen.value > 0.0, chosen.session, coverage),
                lost_of(facts, by, group, species), float(np.median(masses)), window_of(facts, sessions),
            )
        )  # fmt: skip
    return found


def histogram_rows(found: list[Distribution]) -> Iterator[dict[str, Any]]:
    """Rows of histogram.csv, one for each bin."""
    for one in found:
        total = float(len(one.sample.value))
        for at in range(len(one.count)):
            yield {
                "group": one.group,
                "species": one.species,
                "scale": one.scale,
                "low_e": float(one.bins.edges[at]),
                "high_e": float(one.bins.edges[at + 1]),
                "count": int(one.count[at]),
                "count_low": float(one.low[at]),
                "count_high": float(one.high[at]),
                "expected_count": float(one.expected[at]),
                "share": float(one.count[at]) / total,
                "cumulative_share": float(one.count[: at + 1].sum()) / total,
            }


def distribution_rows(found: list[Distribution]) -> Iterator[dict[str, Any]]:
    """Rows of charge_distribution.csv: the empirical distribution, as read and blurred by every particle's own u."""
    for one in found:
        order = np.argsort(one.sample.value, kind="stable")
        value, u = one.sample.value[order], one.sample.u[order]
        blur = np.where(u > 0.0, u, 1.0)
        for rank, at in enumerate(order):
            step = np.where(u > 0.0, ndtr((value[rank] - value) / blur), value <= value[rank])
            yield {
                "group": one.group,
                "species": one.species,
                "session": str(one.sample.session[at]),
                "particle": str(one.sample.particle[at]),
                "charge_e": float(value[rank]),
                "u_charge_e": float(u[rank]),
                "share_at_or_below": float(np.searchsorted(value, value[rank], side="right")) / len(value),
                "share_smeared": float(step.mean()),
            }


def summary_rows(found: list[Distribution]) -> Iterator[dict[str, Any]]:
    """Rows of charge_summary.csv, one for each group and species.

    `fraction_positive_least` and `_most` take the lost particles in as all negative and all positive: what they were
    is not known, only that they were there.
    """
    for one in found:
        count = len(one.sample.value)
        lost = sum(one.lost.values())
        left = one.sample.left_out.get(one.group + JOINT + one.species, {})
        positive = one.positive[0] * count
        ends = {word: [size * one.mass / ELEMENTARY_CHARGE for size in one.window.get(word, (math.nan, math.nan))]
                for word in ("positive", "negative")}  # fmt: skip
        sizes = list(one.window.values())
        yield {
            "group": one.group,
            "species": one.species,
            "sessions": len(set(one.sample.session.tolist())),
            "particles": count,
            "mean_e": one.mean[0],
            "u_mean_e": one.mean[1],
            "mean_low_e": one.mean[2],
            "mean_high_e": one.mean[3],
            "intrinsic_spread_e": one.intrinsic.spread,
            "u_intrinsic_spread_e": one.intrinsic.u_spread,
            "intrinsic_skew": one.intrinsic.skew,
            "intrinsic_basis": one.intrinsic.basis,
            "intrinsic_particles": one.intrinsic.particles,
            "fraction_positive": one.positive[0],
            "fraction_positive_low": one.positive[1],
            "fraction_positive_high": one.positive[2],
            "fraction_positive_least": positive / (count + lost),
            "fraction_positive_most": (positive + lost) / (count + lost),
            "lost": lost,
            **{reason: left.get(reason, 0) for reason in ("sign_undetermined", "not_determined", "excluded")},
            "scale": one.scale,
            "bin_width_e": one.bins.width,
            "median_u_e": float(np.median(one.sample.u)),
            "window_positive_low_e": ends["positive"][0],
            "window_positive_high_e": ends["positive"][1],
            "window_negative_low_e": -ends["negative"][1],
            "window_negative_high_e": -ends["negative"][0],
            "window_low_C_per_kg": min((low for low, _ in sizes), default=math.nan),
            "window_high_C_per_kg": max((high for _, high in sizes), default=math.nan),
        }
