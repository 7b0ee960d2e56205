"""The figure of one group's charges: counts with their band, the empirical distribution, and what could be held."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from typing import Any

import numpy as np

from reduction.figures import WIDTH
from reduction.figurestyle import BAND, HAIR, INK, SOFT, Array, Drawing, canvas, decades, place, series, svg
from reduction.panels import column, heading, number
from reduction.typeset import common_power, power_of_ten

Row = Mapping[str, Any]
_HEIGHT = 45.0  # [mm]
_SPARE = 0.06  # of the axis beyond what is drawn


def charges(summary: Row, bins: Sequence[Row], particles: Sequence[Row], index: int) -> Drawing:
    """Histogram of charge with its band, and beside it the empirical distribution.

    Parameters
    ----------
    summary : mapping
        Row of charge_summary.csv of one group and species.
    bins, particles : sequence of mappings
        Its rows of histogram.csv and charge_distribution.csv.
    index : int
        Number of the group, which sets the colour.
    """
    edges = np.append(column(bins, "low_e"), float(bins[-1]["high_e"]))
    value = np.sort(column(particles, "charge_e"))
    growing = summary["scale"] == "symmetric_log"
    power = 0 if growing else common_power([float(np.abs(edges).max())])
    factor = 10.0**-power
    unit = f"({power_of_ten(power)} e)" if power else "e"
    colour, _, _ = series(index)
    figure = canvas(WIDTH, _HEIGHT)
    left = place(figure, 10.0, 10.0, 88.0, _HEIGHT - 16.0)
    right = place(figure, 110.0, 10.0, WIDTH - 113.0, _HEIGHT - 16.0)
    windows = _windows(summary)
    low, high = _span(edges, windows, growing, float(summary["bin_width_e"]))
    for axes in (left, right):
        if growing:
            linear = 10.0 ** math.floor(math.log10(float(summary["bin_width_e"])))
            axes.set_xscale("symlog", linthresh=linear)
            axes.set_xlim(low, high)
            decades(axes, linear, 4 if axes is left else 2)
        else:
            axes.set_xlim(factor * low, factor * high)
            axes.locator_params(axis="x", nbins=6)
        _shade(axes, windows, low, high, factor)
        axes.axvline(0.0, color=SOFT, linewidth=0.6, zorder=1.5)
        axes.set_xlabel(f"charge / {unit}" + (", logarithmic" if growing else ""))
    _counts(left, bins, factor * edges, colour)
    _steps(right, particles, factor, colour)
    name = f"{summary['group']}, {summary['species']}"
    alt = (
        f"Charges of {name}: {len(value)} particles in {int(summary['sessions'])} sessions, "
        f"from {number(float(value[0]))} to {number(float(value[-1]))} e, median {number(float(np.median(value)))} e, "
        f"{100 * float(summary['fraction_positive']):.0f} % positive, {int(summary['lost'])} lost. {_held(windows)}"
    )
    return Drawing(svg(figure), alt)


def _windows(summary: Row) -> list[tuple[float, float]]:
    """Ranges of charge that could have been held [e], an end that nothing sets infinite; empty where not known."""
    found = []
    for word, sign in (("negative", -1.0), ("positive", 1.0)):
        low, high = (float(summary[f"window_{word}_{end}_e"]) for end in ("low", "high"))
        inner, outer = (high, low) if sign < 0.0 else (low, high)
        if math.isfinite(inner) or math.isfinite(outer):
            inner = inner if math.isfinite(inner) else 0.0
            outer = outer if math.isfinite(outer) else sign * math.inf
            found.append((min(inner, outer), max(inner, outer)))
    return found


def _span(edges: Array, windows: Sequence[tuple[float, float]], growing: bool, width: float) -> tuple[float, float]:
    """Ends of the axis: all bins and zero, and an end of the window where it is not far off."""
    low, high = min(float(edges[0]), 0.0), max(float(edges[-1]), 0.0)
    if growing:
        return (1.6 * low if low < 0.0 else -width), (1.6 * high if high > 0.0 else width)
    reach = max(high - low, abs(low), abs(high))
    near = [end for window in windows for end in window if low - 0.3 * reach < end < high + 0.3 * reach]
    low, high = min([low, *near]), max([high, *near])
    return low - _SPARE * reach, high + _SPARE * reach


def _shade(axes: Any, windows: Sequence[tuple[float, float]], low: float, high: float, factor: float) -> None:
    """Grey what no session could have held, with a line at every end of a window."""
    if not windows:
        return
    at = low
    for start, end in [*sorted(windows), (math.inf, math.inf)]:
        stop = min(max(start, low), high)
        if stop > at:
            axes.axvspan(factor * at, factor * stop, facecolor=BAND, edgecolor="none", zorder=0)
        at = max(at, min(end, high))
    for end in (end for window in windows for end in window):
        if low < end < high:
            axes.axvline(factor * end, color=SOFT, linewidth=0.8, linestyle=(0, (3, 2)), zorder=1)


def _counts(axes: Any, bins: Sequence[Row], edges: Array, colour: str) -> None:
    count, least, most, expected = (
        column(bins, name) for name in ("count", "count_low", "count_high", "expected_count")
    )
    axes.bar(edges[:-1], count, np.diff(edges), align="edge", color=colour, alpha=0.45, edgecolor=colour,
             linewidth=0.6, zorder=2)  # fmt: skip
    middle = 0.5 * (edges[:-1] + edges[1:])
    wide = most > least
    axes.vlines(middle[wide], least[wide], most[wide], colors=INK, linewidth=0.9, zorder=3)
    axes.plot(middle, expected, linestyle="none", marker="_", markersize=5, color=INK, markeredgewidth=0.9, zorder=3)
    axes.set_ylim(0.0, 1.08 * float(max(count.max(), most.max(), 1.0)))
    axes.yaxis.get_major_locator().set_params(integer=True, nbins=5)
    heading(axes, "particles in a bin: bars as counted, lines the band")


def _steps(axes: Any, particles: Sequence[Row], factor: float, colour: str) -> None:
    order = np.argsort(column(particles, "charge_e"), kind="stable")
    value = factor * column(particles, "charge_e")[order]
    share, smeared = (column(particles, name)[order] for name in ("share_at_or_below", "share_smeared"))
    left, right = axes.get_xlim()
    axes.step([left, *value, right], [0.0, *share, 1.0], where="post", color=colour, linewidth=1.1, zorder=3)
    axes.plot(value, smeared, color=INK, linewidth=0.8, linestyle=(0, (4, 1.6)), zorder=4)
    for level in (0.0, 0.5, 1.0):
        axes.axhline(level, color=HAIR, linewidth=0.5, zorder=0.6)
    axes.set_ylim(-0.03, 1.03)
    axes.set_yticks([0.0, 0.5, 1.0], ["0", "0.5", "1"])
    heading(axes, "share at or below")


def _held(windows: Sequence[tuple[float, float]]) -> str:
    if not windows:
        return "What could have been held is not known."
    ends = " and ".join(f"{_end(low)} to {_end(high)} e" for low, high in windows)
    return f"Of the median mass, charges from {ends} could have been held."


def _end(value: float) -> str:
    return number(value) if math.isfinite(value) else ("minus infinity" if value < 0.0 else "infinity")
