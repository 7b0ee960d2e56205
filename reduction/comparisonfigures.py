"""The figures of a comparison: groups with all their particles, differences, ranks, and what session means go with."""

from __future__ import annotations

import math
import unicodedata
from collections.abc import Mapping, Sequence
from typing import Any

import numpy as np

from reduction.figures import WIDTH
from reduction.figurestyle import (
    BAND,
    COLOURS,
    HAIR,
    INK,
    SOFT,
    Array,
    Drawing,
    bars,
    canvas,
    decades,
    limits,
    place,
    points,
    series,
    svg,
)
from reduction.panels import column, heading, number
from reduction.wording import counted

Row = Mapping[str, Any]
_ROWS_MOST = 44  # session rows that fit one figure; beyond, a group is one row
_TALLEST = 180.0  # what fits a page below its words [mm]
_LABEL = 34.0  # room for labels on the left [mm]
DIFFERENCES_MOST = 36  # pairs that fit one figure; the table has them all
_PRINTED_MOST = 24  # groups whose chances are printed in the matrix
_MEANS_MOST = 10  # groups that fit the first page as a figure
_NAMED_MOST = 10  # groups that a key names


def by_group(
    title: str, unit: str, factor: float, groups: Sequence[Row], sessions: Sequence[Row], particles: Sequence[Row]
) -> Drawing | None:
    """Strip of every particle by group and session, with session means, and group mean and interval.

    Parameters
    ----------
    title, unit : str
        What the horizontal axis shows; values are multiplied by `factor` into `unit`.
    groups, sessions : sequence of mappings
        Rows of comparison.csv and session_means.csv, the groups in the order to be drawn.
    particles : sequence of mappings
        `group`, `session`, `particle`, `value` and `u` of every particle compared.
    """
    if not particles:
        return None
    lanes = _lanes(groups, sessions)
    detailed = all(session != "" for _, session in lanes)
    lane = min(4.4 if detailed else 7.5, _TALLEST / (len(lanes) + 0.8))
    height = 11.0 + lane * (len(lanes) + 0.8)
    figure = canvas(WIDTH, height)
    axes = place(figure, _LABEL, 9.5, WIDTH - _LABEL - 3, height - 10.5)
    mean_of = {(row["group"], row["session"]): float(row["mean"]) for row in sessions}
    twin: list[tuple[object, ...]] = []
    pooled: list[Array] = []
    for at, (group, session) in enumerate(lanes):
        name = str(group["group"])
        colour, marker, _ = series([one["group"] for one in groups].index(name))
        across = axes.get_yaxis_transform()
        if session is None:
            twin.append((name, "", "", "group_mean", *(factor * float(group[key])
                         for key in ("mean", "u_mean", "low", "high")), unit))  # fmt: skip
            axes.text(-0.012, at, shortened(name, 20), transform=across, ha="right", va="center", fontsize=8,
                      weight="bold")  # fmt: skip
            continue
        chosen = [row for row in particles if row["group"] == name and session in ("", row["session"])]
        value, u = factor * column(chosen, "value"), factor * column(chosen, "u")
        jitter = at + (0.26 if detailed else 0.4) * _offsets(len(chosen), 5 if detailed else 13)
        bars(axes, value, jitter, u, colour, across=True)
        points(axes, value, jitter, colour, marker, size=2.6)
        pooled += [value - u, value + u]
        twin += [(name, row["session"], row["particle"], "particle", a, b, None, None, unit)
                 for row, a, b in zip(chosen, value, u, strict=True)]  # fmt: skip
        if session:
            mean = factor * mean_of[name, session]
            axes.vlines([mean], [at - 0.4], [at + 0.4], colors=INK, linewidth=1.1, zorder=4)
            twin.append((name, session, "", "session_mean", mean, None, None, None, unit))
        axes.text(-0.012, at, shortened(session or "all particles", 30), transform=across, ha="right", va="center",
                  fontsize=7, color=SOFT)  # fmt: skip
    axes.set_ylim(len(lanes) - 0.4, -0.7)
    axes.set_yticks([])
    axes.spines["left"].set_visible(False)
    ends = [factor * float(group[end]) for group in groups for end in ("low", "high")]
    scale = _horizontal(axes, pooled, [end for end in ends if math.isfinite(end)])
    for at, (group, session) in enumerate(lanes):
        if session is None:
            _mean(axes, at, group, factor)
    axes.set_xlabel(f"{title} / {unit}" + (" (linear around zero, logarithmic beyond)" if scale == "symlog" else ""))
    said = " ".join(_said(group, factor) for group in groups)
    alt = f"{title} in {unit} of {len(particles)} particles by group. {said}"
    columns = ("group", "session", "particle", "kind", "value", "u", "low", "high", "unit")
    return Drawing(svg(figure), alt, columns, twin)


def means(title: str, unit: str, factor: float, groups: Sequence[Row]) -> Drawing | None:
    """Mean of session means of each group with its interval, small enough for the first page.

    Parameters
    ----------
    title, unit : str
        What the horizontal axis shows; values are multiplied by `factor` into `unit`.
    groups : sequence of mappings
        Rows of comparison.csv with an interval, in the order to be drawn.
    """
    if not 2 <= len(groups) <= _MEANS_MOST:
        return None
    lane = 5.0
    figure = canvas(WIDTH, 10.0 + lane * len(groups))
    axes: Any = place(figure, _LABEL, 9.5, WIDTH - _LABEL - 32, lane * len(groups))
    mean, low, high = (factor * column(groups, name) for name in ("mean", "low", "high"))
    half = 3.0 * float(np.median(high - low))
    axes.set_xlim(*limits(mean, np.maximum(low, mean - half), np.minimum(high, mean + half), margin=0.05, include=0.0))
    axes.axvline(0.0, color=SOFT, linewidth=0.6, zorder=0.5)
    across = axes.get_yaxis_transform()
    for at, group in enumerate(groups):
        axes.axhline(at, color=HAIR, linewidth=0.4, zorder=0)
        _interval(axes, at, low[at], high[at], 1.8)
        axes.text(-0.012, at, shortened(str(group["group"]), 26), transform=across, ha="right", va="center",
                  fontsize=8.5)  # fmt: skip
        counts = f"{counted(int(group['particles']), 'particle')} in {counted(int(group['sessions']), 'session')}"
        axes.text(1.015, at, counts, transform=across, va="center", fontsize=7.5, color=SOFT)
    points(axes, mean, np.arange(len(groups), dtype=float), INK, "D", size=4.6)
    axes.set_ylim(len(groups) - 0.5, -0.5)
    axes.set_yticks([])
    axes.spines["left"].set_visible(False)
    axes.locator_params(axis="x", nbins=7)
    axes.set_xlabel(f"{title} / {unit}")
    alt = f"Means of session means of {title} in {unit}. " + " ".join(_said(group, factor) for group in groups)
    return Drawing(svg(figure), alt)


def _lanes(groups: Sequence[Row], sessions: Sequence[Row]) -> list[tuple[Row, str | None]]:
    """Rows of the figure: per group its name and mean, then its sessions, or all of them in one row."""
    detailed = len(sessions) + len(groups) <= _ROWS_MOST
    lanes: list[tuple[Row, str | None]] = []
    for group in groups:
        own = [str(row["session"]) for row in sessions if row["group"] == group["group"]]
        lanes += [(group, None), *((group, name) for name in (own if detailed else [""]))]
    return lanes


def _mean(axes: Any, at: int, group: Row, factor: float) -> None:
    axes.axhspan(at - 0.45, at + 0.45, facecolor=BAND, edgecolor="none", zorder=0)
    low, high = factor * float(group["low"]), factor * float(group["high"])
    if not math.isfinite(low):
        return
    _interval(axes, at, low, high, 1.6)
    points(axes, np.array([factor * float(group["mean"])]), np.array([float(at)]), INK, "D", size=4.6)


def _interval(axes: Any, at: float, low: float, high: float, width: float, colour: str = INK) -> None:
    """Bar from low to high, with an arrow where it goes on beyond the axis."""
    left, right = axes.get_xlim()
    axes.hlines([at], [max(low, left)], [min(high, right)], colors=colour, linewidth=width, zorder=4)
    for end, edge, arrow in ((low, left, "<"), (high, right, ">")):
        if not left <= end <= right:
            axes.plot([edge], [at], linestyle="none", marker=arrow, color=colour, markersize=5, clip_on=False, zorder=5)


def _said(group: Row, factor: float) -> str:
    counts = f"{group['group']}: {int(group['particles'])} particles in {int(group['sessions'])} sessions"
    if not math.isfinite(float(group["low"])):
        return f"{counts}, median {number(factor * float(group['median']))}, no interval."
    mean, low, high = (number(factor * float(group[key])) for key in ("mean", "low", "high"))
    return f"{counts}, mean of session means {mean}, interval {low} to {high}."


def _offsets(count: int, steps: int) -> Array:
    """Fixed steps up and down within -1 to 1, so that bars of neighbours can be told apart."""
    middle = (steps - 1) / 2
    return np.asarray((np.arange(count) * 2 % steps - middle) / middle if count > 1 else np.zeros(count), dtype=float)


def shortened(text: str, most: int) -> str:
    """Text as long as so many small letters at most, cut in its middle: names often differ at their ends."""
    if sum(map(_breadth, text)) <= most:
        return text
    head, tail = _taken(text, most - 1 - (most - 1) // 2), _taken(text[::-1], (most - 1) // 2)
    return f"{text[:head]}\N{HORIZONTAL ELLIPSIS}{text[len(text) - tail :]}"


def _taken(text: str, room: float) -> int:
    """How many characters from the start of a text fit."""
    for count, letter in enumerate(text):
        room -= _breadth(letter)
        if room < 0:
            return count
    return len(text)


def _breadth(letter: str) -> float:
    """About how broad a letter is, in small letters: capitals are broader, letters of far scripts fill a square."""
    kind = unicodedata.category(letter)
    if kind in ("Lo", "So") and unicodedata.bidirectional(letter) not in ("R", "AL"):
        return 2.4
    return {"Lu": 1.6, "Mn": 0.0, "Me": 0.0}.get(kind, 1.0) + 0.4 * (letter in "MW")


def _horizontal(axes: Any, pooled: Sequence[Array], ends: Sequence[float]) -> str:
    """Set the horizontal axis for the particles; intervals may widen it up to double, and are cut by an arrow there."""
    values = np.concatenate([np.ravel(one) for one in pooled])
    values = values[np.isfinite(values)]
    sizes = np.abs(values[values != 0])
    if sizes.size and sizes.max() > 60 * np.median(sizes):
        threshold = float(10 ** np.floor(np.log10(np.quantile(sizes, 0.1))))
        axes.set_xscale("symlog", linthresh=threshold)
        axes.set_xlim(*(1.3 * np.array([min(values.min(), -threshold), max(values.max(), threshold)])))
        decades(axes, threshold)
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


def differences(title: str, unit: str, factor: float, pairs: Sequence[Row]) -> Drawing | None:
    """Differences between groups, each with its own interval and the one that holds for all at once.

    Parameters
    ----------
    title, unit : str
        What the horizontal axis shows; values are multiplied by `factor` into `unit`.
    pairs : sequence of mappings
        Rows of contrasts.csv with a p, in the order to be drawn; the first `DIFFERENCES_MOST` are.
    """
    shown = list(pairs[:DIFFERENCES_MOST])
    if not shown:
        return None
    lane = 4.6
    height = 11.0 + lane * (len(shown) + 0.4)
    figure = canvas(WIDTH, height)
    label = 62.0
    axes = place(figure, label, 9.5, WIDTH - label - 3, height - 10.5)
    middle, low, high = (factor * column(shown, name) for name in ("difference", "low", "high"))
    least, most = (factor * column(shown, f"{end}_simultaneous") for end in ("low", "high"))
    reach = 1.06 * float(min(np.max(np.abs(np.concatenate([least, most]))),
                             3.0 * np.quantile(np.abs(np.concatenate([low, high])), 0.9)))  # fmt: skip
    reach = max(reach, 1.1 * float(np.max(np.abs(middle))))
    axes.set_xlim(-reach, reach)
    axes.axvline(0.0, color=SOFT, linewidth=0.7, zorder=0.5)
    for at, row in enumerate(shown):
        _interval(axes, at, least[at], most[at], 0.7, SOFT)
        _interval(axes, at, low[at], high[at], 1.8)
        name = f"{shortened(str(row['group_a']), 20)} less {shortened(str(row['group_b']), 20)}"
        axes.text(-0.012, at, name, transform=axes.get_yaxis_transform(), ha="right", va="center", fontsize=7.5)
    points(axes, middle, np.arange(len(shown), dtype=float), INK, "D", size=4.0)
    axes.set_ylim(len(shown) - 0.4, -0.6)
    axes.set_yticks([])
    axes.spines["left"].set_visible(False)
    axes.locator_params(axis="x", nbins=7)
    axes.set_xlabel(f"difference of {title} / {unit}")
    apart = [row for row, a, b in zip(shown, least, most, strict=True) if a > 0.0 or b < 0.0]
    told = "; ".join(f"{row['group_a']} less {row['group_b']} {number(factor * float(row['difference']))}"
                     for row in apart) or "none"  # fmt: skip
    alt = (
        f"{len(shown)} differences of {title} between groups in {unit}. "
        f"Intervals for all at once that leave out zero: {told}."
    )
    return Drawing(svg(figure), alt)


def ranks(groups: Sequence[Row]) -> Drawing | None:
    """Matrix of the chance of each rank of each group, dark where it is high.

    Parameters
    ----------
    groups : sequence of mappings
        Rows of comparison.csv with ranks, in the order to be drawn.
    """
    if len(groups) < 2:
        return None
    count = len(groups)
    side = min(14.0, (WIDTH - 46.0) / count)
    deep = min(side, 7.0, _TALLEST / count)
    figure = canvas(WIDTH, 11.0 + deep * count)
    axes = place(figure, 40.0, 1.0, side * count, deep * count)
    chance = np.array([[float(row[f"rank_{k + 1}"]) for k in range(count)] for row in groups])
    for at in range(count):
        for rank in range(count):
            share = float(chance[at, rank])
            _cell(axes, rank, at, share)
            if count <= _PRINTED_MOST and share >= 0.005:
                axes.text(rank, at, f"{100 * share:.0f}", ha="center", va="center", fontsize=7.5 if count < 13 else 6,
                          color="white" if share > 0.55 else INK)  # fmt: skip
        axes.text(-0.62, at, shortened(str(groups[at]["group"]), 30), ha="right", va="center", fontsize=8)
    axes.set_xlim(-0.5, count - 0.5)
    axes.set_ylim(count - 0.5, -0.5)
    axes.set_yticks([])
    axes.xaxis.tick_top()
    axes.set_xticks(range(count), [str(k + 1) for k in range(count)])
    axes.tick_params(length=0)
    for spine in axes.spines.values():
        spine.set_visible(False)
    axes.set_title("rank, 1 the most positive; chance in percent", loc="left", fontsize=8, pad=12, color=INK)
    best = [int(np.argmax(row)) for row in chance]
    said = "; ".join(f"{row['group']}: rank {rank + 1} with {100 * chance[at, rank]:.0f} %"
                     for at, (row, rank) in enumerate(zip(groups, best, strict=True)))  # fmt: skip
    return Drawing(svg(figure), f"Chance of each rank of {count} groups. Most likely: {said}.")


def _cell(axes: Any, x: float, y: float, share: float) -> None:
    shade = (*(int(COLOURS[0][k : k + 2], 16) / 255.0 for k in (1, 3, 5)), share)  # the page's ground shows through
    across, up = (x - 0.5, x + 0.5, x + 0.5, x - 0.5), (y - 0.5, y - 0.5, y + 0.5, y + 0.5)
    axes.fill(across, up, facecolor=shade, edgecolor=HAIR, linewidth=0.4)


_AXES = {
    "relative_humidity": ("relative_humidity_percent", "relative humidity / %"),
    "temperature": ("temperature_degC", "temperature / °C"),
    "session_order": ("session_order", "order of the sessions"),
    "contacts": ("contacts", "contacts"),
}


def trends(
    title: str, unit: str, factor: float, groups: Sequence[Row], sessions: Sequence[Row], found: Sequence[Row]
) -> Drawing | None:
    """Session means against humidity, temperature, order and contacts, with the slope within groups.

    Parameters
    ----------
    title, unit : str
        What the vertical axis shows; values are multiplied by `factor` into `unit`.
    groups, sessions, found : sequence of mappings
        Rows of comparison.csv, session_means.csv and trends.csv.
    """
    shown = [row for row in found if np.ptp(_known(sessions, row)) > 0.0]
    if not shown:
        return None
    tall = 34.0
    rows = math.ceil(len(shown) / 2)
    names = [str(group["group"]) for group in groups]
    key = 5.0 if len(names) <= _NAMED_MOST else 0.0
    height = key + rows * (tall + 15.0)
    figure = canvas(WIDTH, height)
    across = (WIDTH - 32.0) / 2
    for at, row in enumerate(shown):
        left = 13.0 + (at % 2) * (across + 16.0)
        bottom = height - key - (at // 2 + 1) * (tall + 15.0) + 10.0
        axes: Any = place(figure, left, bottom, across, tall)
        name, label = _AXES[str(row["covariate"])]
        for place_of, group in enumerate(names):
            own = [one for one in sessions if one["group"] == group and math.isfinite(float(one[name]))]
            x, y = column(own, name), factor * column(own, "mean")
            u = factor * np.hypot(column(own, "u_measurement"), np.nan_to_num(column(own, "u_particles")))
            colour, marker, _ = series(place_of)
            bars(axes, x, y, u, colour)
            points(axes, x, y, colour, marker)
            if math.isfinite(float(row["slope"])) and len(x) > 1:
                ends = np.array([x.min(), x.max()])
                axes.plot(ends, y.mean() + factor * float(row["slope"]) * (ends - x.mean()), color=colour,
                          linewidth=0.6)  # fmt: skip
        axes.axhline(0.0, color=HAIR, linewidth=0.5, zorder=0.5)
        axes.set_xlabel(label)
        axes.locator_params(axis="both", nbins=5)
        if name in ("session_order", "contacts"):
            axes.xaxis.get_major_locator().set_params(integer=True)
        heading(axes, f"{title} / {unit}")
    if key:
        _key(figure, names, height)
    said = "; ".join(
        f"{str(row['covariate']).replace('_', ' ')}: "
        + (f"slope {number(factor * float(row['slope']))} per {row['step']}, p by Holm {number(float(row['p_holm']))}"
           if math.isfinite(float(row["slope"])) else str(row["note"]))
        for row in shown
    )  # fmt: skip
    return Drawing(svg(figure), f"Session means of {title} in {unit}. {said}.")


def _known(sessions: Sequence[Row], row: Row) -> Array:
    values = column(sessions, _AXES[str(row["covariate"])][0])
    known = values[np.isfinite(values)]
    return known if known.size else np.zeros(1)


def _key(figure: Any, names: Sequence[str], height: float) -> None:
    """Names of the groups with their markers, in one line above the panels."""
    axes = place(figure, 13.0, height - 5.0, WIDTH - 16.0, 4.0)
    axes.set_axis_off()
    axes.set_xlim(0, len(names))
    axes.set_ylim(0, 1)
    room = max(6, int(88 / len(names)))
    for at, name in enumerate(names):
        colour, marker, _ = series(at)
        points(axes, np.array([at + 0.05]), np.array([0.5]), colour, marker)
        axes.text(at + 0.14 if len(names) < 6 else at + 0.2, 0.5, shortened(name, room), va="center", fontsize=7.5)
