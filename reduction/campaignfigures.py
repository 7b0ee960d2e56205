"""The figures of a whole campaign: results by group, sessions in time, how the methods agree."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from typing import Any

import numpy as np

from reduction.figures import WIDTH
from reduction.figurestyle import (
    BAND,
    HAIR,
    INK,
    SOFT,
    Array,
    Drawing,
    bars,
    canvas,
    limits,
    place,
    points,
    series,
    svg,
)
from reduction.groups import GroupResult
from reduction.panels import column, heading, number, pair_name

Row = Mapping[str, Any]
_ROWS_MOST = 44  # session rows that fit one figure; beyond, a group is one row
_LABEL = 34.0  # room for labels on the left [mm]


def by_group(
    title: str, unit: str, factor: float, results: Sequence[GroupResult], particles: Sequence[Row],
    group_of: Mapping[tuple[str, str], str], value_column: str, u_column: str,
) -> Drawing | None:  # fmt: skip
    """Strip of every particle by group and session, with session means, and group mean and interval.

    Parameters
    ----------
    title, unit : str
        What the horizontal axis shows; values are multiplied by `factor` into `unit`.
    results : sequence of GroupResult
        In the unit of the table.
    particles : sequence of mappings
        Rows of particles.csv.
    """
    rows = [row for row in particles if math.isfinite(row[value_column])]
    if not rows:
        return None
    lanes = _lanes(results)
    across = WIDTH - _LABEL - 3
    detailed = all(session != "" for _, session in lanes)
    lane = 4.4 if detailed else 7.5
    height = 11.0 + lane * (len(lanes) + 0.8)
    figure = canvas(WIDTH, height)
    axes = place(figure, _LABEL, 9.5, across, height - 10.5)
    twin: list[tuple[object, ...]] = []
    pooled: list[Array] = []
    means: list[tuple[int, GroupResult]] = []
    colour_of = {result.group: series(k)[:2] for k, result in enumerate(results)}
    for at, (result, session) in enumerate(lanes):
        colour, marker = colour_of[result.group]
        if session is None:
            means.append((at, result))
            twin.append((result.group, "", "", "group_mean", factor * result.mean, factor * result.u,
                         factor * result.low, factor * result.high, unit))  # fmt: skip
            axes.text(-0.012, at, _shortened(result.group, 26), transform=axes.get_yaxis_transform(), ha="right",
                      va="center", fontsize=8, color=colour, weight="bold")  # fmt: skip
            continue
        chosen = [r for r in rows if group_of[str(r["session"]), str(r["particle"])] == result.group
                  and session in ("", r["session"])]  # fmt: skip
        value, u = factor * column(chosen, value_column), factor * column(chosen, u_column)
        jitter = at + (0.26 if detailed else 0.4) * _offsets(len(chosen), 5 if detailed else 13)
        bars(axes, value, jitter, u, colour, across=True)
        points(axes, value, jitter, colour, marker, size=2.6)
        pooled += [value - u, value + u]
        twin += [(result.group, r["session"], r["particle"], "particle", a, b, None, None, unit)
                 for r, a, b in zip(chosen, value, u, strict=True)]  # fmt: skip
        if session and session in result.session_means:
            mean = factor * result.session_means[session]
            axes.vlines([mean], [at - 0.4], [at + 0.4], colors=INK, linewidth=1.1, zorder=4)
            twin.append((result.group, session, "", "session_mean", mean, None, None, None, unit))
        axes.text(-0.012, at, _shortened(session or "all particles", 30), transform=axes.get_yaxis_transform(),
                  ha="right", va="center", fontsize=7, color=SOFT)  # fmt: skip
    axes.set_ylim(len(lanes) - 0.4, -0.7)
    axes.set_yticks([])
    axes.spines["left"].set_visible(False)
    scale = _horizontal(axes, pooled, [factor * end for _, r in means for end in (r.low, r.high) if math.isfinite(end)])
    for at, result in means:
        _mean(axes, at, result, factor)
    axes.set_xlabel(f"{title} / {unit}" + (" (linear around zero, logarithmic beyond)" if scale == "symlog" else ""))
    alt = f"{title} in {unit} of {len(rows)} particles by group. " + " ".join(_said(r, factor) for r in results)
    columns = ("group", "session", "particle", "kind", "value", "u", "low", "high", "unit")
    return Drawing(svg(figure), alt, columns, twin)


def _lanes(results: Sequence[GroupResult]) -> list[tuple[GroupResult, str | None]]:
    """Rows of the figure: per group its name and mean, then its sessions, or all of them in one row."""
    detailed = sum(len(r.session_means) + 1 for r in results) <= _ROWS_MOST
    lanes: list[tuple[GroupResult, str | None]] = []
    for result in results:
        lanes.append((result, None))
        lanes += [(result, session) for session in sorted(result.session_means)] if detailed else [(result, "")]
    return lanes


def _mean(axes: Any, at: int, result: GroupResult, factor: float) -> None:
    axes.axhspan(at - 0.45, at + 0.45, facecolor=BAND, edgecolor="none", zorder=0)
    if not math.isfinite(result.mean):
        return
    if math.isfinite(result.low):
        left, right = axes.get_xlim()
        low, high = max(factor * result.low, left), min(factor * result.high, right)
        axes.hlines([at], [low], [high], colors=INK, linewidth=1.6, zorder=4)
        for end, edge, arrow in ((factor * result.low, left, "<"), (factor * result.high, right, ">")):
            if not left <= end <= right:
                axes.plot(
                    [edge], [at], linestyle="none", marker=arrow, color=INK, markersize=5, clip_on=False, zorder=5
                )
    points(axes, np.array([factor * result.mean]), np.array([float(at)]), INK, "D", size=4.6)


def _said(result: GroupResult, factor: float) -> str:
    counts = f"{result.group}: {result.particles} particles in {result.sessions} sessions"
    if not math.isfinite(result.mean):
        return f"{counts}, median {number(factor * result.median)}, no interval."
    return (
        f"{counts}, mean of session means {number(factor * result.mean)}, "
        f"interval {number(factor * result.low)} to {number(factor * result.high)}."
    )


def _offsets(count: int, steps: int) -> Array:
    """Fixed steps up and down within -1 to 1, so that bars of neighbours can be told apart."""
    middle = (steps - 1) / 2
    return np.asarray((np.arange(count) * 2 % steps - middle) / middle if count > 1 else np.zeros(count), dtype=float)


def _shortened(text: str, most: int) -> str:
    return text if len(text) <= most else text[: most - 1] + "\N{HORIZONTAL ELLIPSIS}"


def _horizontal(axes: Any, pooled: Sequence[Array], ends: Sequence[float]) -> str:
    """Set the horizontal axis for the particles; intervals may widen it up to double, and are cut by an arrow there."""
    values = np.concatenate([np.ravel(one) for one in pooled])
    values = values[np.isfinite(values)]
    sizes = np.abs(values[values != 0])
    if sizes.size and sizes.max() > 60 * np.median(sizes):
        threshold = float(10 ** np.floor(np.log10(np.quantile(sizes, 0.1))))
        axes.set_xscale("symlog", linthresh=threshold)
        axes.set_xlim(*(1.3 * np.array([min(values.min(), -threshold), max(values.max(), threshold)])))
        axes.minorticks_off()
        kind = "symlog"
    else:
        low, high = limits(values, margin=0.04, include=0.0)
        room, air = 0.5 * (high - low), 0.03 * (high - low)
        axes.set_xlim(
            max(low - room, min([low, *(end - air for end in ends)])),
            min(high + room, max([high, *(end + air for end in ends)])),
        )
        axes.locator_params(axis="x", nbins=7)
        kind = "linear"
    axes.axvline(0.0, color=SOFT, linewidth=0.6, zorder=0.5)
    return kind


def sessions_in_time(sessions: Sequence[Row]) -> Drawing | None:
    """Stray field, agreement of the methods and humidity, session by session in the order they were measured.

    Parameters
    ----------
    sessions : sequence of mappings
        `session`, `date`, `stray_estimate`, `stray_u`, `stray_adjusted`, `stray_adjusted_u` [V/m],
        `worst` (largest normalised error), `humidity` and `u_humidity` [%]; missing numbers are NaN.
    """
    if not sessions:
        return None
    figure = canvas(WIDTH, 92.0)
    x = np.arange(len(sessions), dtype=float)
    left, across = 13.0, WIDTH - 15.0
    twin: list[tuple[object, ...]] = []
    colour, marker, _ = series(0)
    stray = place(figure, left, 66, across, 21)
    prior, u_prior = column(sessions, "stray_estimate"), column(sessions, "stray_u")
    after, u_after = column(sessions, "stray_adjusted"), column(sessions, "stray_adjusted_u")
    stray.bar(x, 2 * u_prior, 0.8, prior - u_prior, color=BAND)
    bars(stray, x, after, u_after, colour)
    points(stray, x, after, colour, marker)
    stray.set_ylim(*limits(prior - u_prior, prior + u_prior, after - u_after, after + u_after))
    heading(stray, "stray field / (V m⁻¹): grey as stated, points as adjusted")
    agree = place(figure, left, 38, across, 17)
    worst = column(sessions, "worst")
    agree.axhspan(0, 1, facecolor=BAND, edgecolor="none", zorder=0)
    points(agree, x, worst, series(1)[0], series(1)[1])
    agree.set_ylim(0, 1.12 * float(np.nanmax(np.append(worst, 1.1))))
    heading(agree, "largest normalised error between two methods: grey up to 1")
    humid = place(figure, left, 10, across, 17)
    humidity, u_humidity = column(sessions, "humidity"), column(sessions, "u_humidity")
    bars(humid, x, humidity, u_humidity, series(2)[0])
    points(humid, x, humidity, series(2)[0], series(2)[1])
    humid.set_ylim(*limits(humidity - np.nan_to_num(u_humidity), humidity + np.nan_to_num(u_humidity), margin=0.15))
    heading(humid, "relative humidity / %")
    step = max(1, math.ceil(len(sessions) / 9))
    for panel in (stray, agree, humid):
        panel.set_xlim(-0.6, len(sessions) - 0.4)
        panel.set_xticks(x[::step], ["" if panel is not humid else str(s["date"]) for s in sessions][::step])
        panel.locator_params(axis="y", nbins=4)
    humid.set_xlabel("sessions in the order measured")
    for row, a, b, c, d, w, h, v in zip(sessions, prior, u_prior, after, u_after, worst, humidity, u_humidity,
                                        strict=True):  # fmt: skip
        twin.append((row["session"], row["date"], a, b, c, d, w, h, v))
    columns = ("session", "date", "stray_field_V_per_m", "u_stray_field_V_per_m", "adjusted_stray_field_V_per_m",
               "u_adjusted_stray_field_V_per_m", "largest_normalized_error", "relative_humidity_percent",
               "u_relative_humidity_percent")  # fmt: skip
    alt = f"{len(sessions)} sessions from {sessions[0]['date']} to {sessions[-1]['date']}."
    if np.isfinite(after).any():
        alt += f" Adjusted stray field from {number(float(np.nanmin(after)))} to {number(float(np.nanmax(after)))} V/m."
    if np.isfinite(worst).any():
        alt += (
            f" Largest normalised error {number(float(np.nanmax(worst)))}; {int((worst > 1).sum())} sessions above 1."
        )
    if np.isfinite(humidity).any():
        alt += f" Relative humidity {number(float(np.nanmin(humidity)))} to {number(float(np.nanmax(humidity)))} %."
    return Drawing(svg(figure), alt, columns, twin)


def agreement(rows: Sequence[Row]) -> Drawing | None:
    """Normalised errors of every particle, one lane per pair of methods and quantity."""
    known = [row for row in rows if math.isfinite(row["normalized_error"])]
    if not known:
        return None
    lanes: dict[str, list[Row]] = {}
    for row in known:
        lanes.setdefault(pair_name(row), []).append(row)
    lane = 9.0
    height = 11 + lane * len(lanes)
    figure = canvas(WIDTH, height)
    axes = place(figure, 46, 9.5, WIDTH - 74, height - 10.5)
    reach = min(4.0, max(1.5, 1.1 * max(abs(row["normalized_error"]) for row in known)))
    axes.axvspan(-1, 1, facecolor=BAND, edgecolor="none", zorder=0)
    axes.axvline(0, color=HAIR, linewidth=0.6, zorder=0.5)
    twin: list[tuple[object, ...]] = []
    said = []
    for at, name in enumerate(sorted(lanes)):
        error = column(lanes[name], "normalized_error")
        inside = int((np.abs(error) <= 1).sum())
        colour, marker, _ = series(at)
        axes.plot(np.clip(error, -reach, reach), at + 0.3 * _stacked(error, reach), linestyle="none", marker=marker,
                  markersize=2.6, color=colour, markeredgewidth=0, alpha=0.8)  # fmt: skip
        axes.text(-0.02, at, name, transform=axes.get_yaxis_transform(), ha="right", va="center", fontsize=7.5)
        axes.text(1.02, at, f"{inside} of {len(error)} within 1", transform=axes.get_yaxis_transform(), va="center",
                  fontsize=7.5)  # fmt: skip
        said.append(f"{name}: {inside} of {len(error)} within 1.")
        twin += [(r["session"], r["particle"], r["method_a"], r["method_b"], r["quantity"], r["normalized_error"])
                 for r in lanes[name]]  # fmt: skip
    axes.set_xlim(-reach, reach)
    axes.set_ylim(len(lanes) - 0.4, -0.6)
    axes.set_yticks([])
    axes.spines["left"].set_visible(False)
    axes.set_xlabel("normalised error: difference over twice its standard uncertainty")
    columns = ("session", "particle", "method_a", "method_b", "quantity", "normalized_error")
    return Drawing(svg(figure), "Agreement of methods. " + " ".join(said), columns, twin)


def _stacked(error: Array, reach: float) -> Array:
    """Heights that stack points of nearly equal value around the middle of their lane, within -1 to 1."""
    bins = np.round(np.clip(error, -reach, reach) / (2 * reach) * 90).astype(int)
    rank = np.zeros(len(error))
    for k in np.argsort(error, kind="stable"):
        rank[k] = (bins[:k] == bins[k]).sum()
    step = np.where(rank % 2 == 1, (rank + 1) / 2, -rank / 2)
    return np.asarray(step / max(1.0, float(np.abs(step).max()), 4.0))
