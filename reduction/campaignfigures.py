"""The figures of a whole campaign: sessions in time, how the methods agree."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from typing import Any

import numpy as np

from reduction.figures import WIDTH
from reduction.figurestyle import (
    BAND,
    HAIR,
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
from reduction.panels import column, heading, number, pair_name

Row = Mapping[str, Any]
_ROOMY = 60  # sessions up to which their marks keep their full size


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
    thin, small = (0.8, 3.2) if len(sessions) <= _ROOMY else (0.35, 1.8)
    stray = place(figure, left, 66, across, 21)
    prior, u_prior = column(sessions, "stray_estimate"), column(sessions, "stray_u")
    after, u_after = column(sessions, "stray_adjusted"), column(sessions, "stray_adjusted_u")
    stray.bar(x, 2 * u_prior, 0.8, prior - u_prior, color=BAND)
    bars(stray, x, after, u_after, colour, width=thin)
    points(stray, x, after, colour, marker, size=small)
    stray.set_ylim(*limits(prior - u_prior, prior + u_prior, after - u_after, after + u_after))
    heading(stray, "stray field / (V m⁻¹): grey as stated, points as adjusted")
    agree = place(figure, left, 38, across, 17)
    worst = column(sessions, "worst")
    agree.axhspan(0, 1, facecolor=BAND, edgecolor="none", zorder=0)
    points(agree, x, worst, series(1)[0], series(1)[1], size=small)
    agree.set_ylim(0, 1.12 * float(np.nanmax(np.append(worst, 1.1))))
    heading(agree, "largest normalised error between two methods: grey up to 1")
    humid = place(figure, left, 10, across, 17)
    humidity, u_humidity = column(sessions, "humidity"), column(sessions, "u_humidity")
    bars(humid, x, humidity, u_humidity, series(2)[0], width=thin)
    points(humid, x, humidity, series(2)[0], series(2)[1], size=small)
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
