"""A bench's own readings as it took them: no fit, no curve, no number that the reduction found."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import Any

import numpy as np
from matplotlib.axes import Axes
from matplotlib.figure import Figure

from reduction.figurestyle import (
    SOFT,
    Array,
    Drawing,
    canvas,
    limits,
    place,
    points,
    series,
    svg,
    wipe,
)
from reduction.panels import column, heading, number

Row = Mapping[str, Any]
WIDTH, HEIGHT = 166.0, 36.5  # [mm]
FOOT, TALL, LEFT = 8.5, 23.5, 10.0
LOGS = ("height", "secular", "balance")
_GAPS = {"height": 11.0, "secular": 11.0, "balance": 0.0}  # right of each panel
_SHARES = {"height": 3.0, "secular": 2.0, "balance": 2.0}


class BenchFigures:
    """Draws one particle's readings after the other on the same few canvases."""

    def __init__(self) -> None:
        self._sheets: dict[tuple[str, ...], tuple[Figure, dict[str, Axes]]] = {}

    def draw(self, particle: str, readings: Sequence[Row]) -> Drawing | None:
        """Draw what was read of one particle.

        Parameters
        ----------
        particle : str
            Id.
        readings : sequence of mappings
            Rows of readings.csv of this particle; what the reduction made of them is not looked at.

        Returns
        -------
        Drawing or None
            None where there is nothing to draw.
        """
        by_log = {log: [row for row in readings if row["log"] == log] for log in LOGS}
        kinds = tuple(log for log in LOGS if by_log[log])
        if not kinds:
            return None
        figure, axes = self._sheet(kinds)
        spoken = [_PANELS[log](axes[log], by_log[log]) for log in kinds]
        return Drawing(svg(figure), f"Readings of particle {particle}. " + " ".join(spoken))

    def _sheet(self, kinds: tuple[str, ...]) -> tuple[Figure, dict[str, Axes]]:
        if kinds not in self._sheets:
            figure, left = canvas(WIDTH, HEIGHT), LEFT
            free = WIDTH - LEFT - 2.0 - sum(_GAPS[log] for log in kinds[:-1])
            unit = free / sum(_SHARES[log] for log in kinds)
            axes = {}
            for log in kinds:
                width = unit * _SHARES[log]
                axes[log] = place(figure, left, FOOT, width, TALL)
                axes[log].locator_params(axis="y", nbins=5)
                axes[log].locator_params(axis="x", nbins=max(3, round(width / 12)))
                left += width + _GAPS[log]
            self._sheets[kinds] = (figure, axes)
        figure, axes = self._sheets[kinds]
        for panel in axes.values():
            wipe(panel)
        return figure, axes


def _dots(axes: Axes, rows: Sequence[Row], x: Array, y: Array, colour: str, marker: str) -> None:
    """Readings, hollow where the bench itself left them out."""
    out = np.array([row["status"] == "excluded" for row in rows], dtype=bool)
    points(axes, x[~out], y[~out], colour, marker, size=3.6)
    if out.any():
        points(axes, x[out], y[out], SOFT, marker, hollow=True, size=3.6)


def _height(axes: Axes, rows: Sequence[Row]) -> str:
    x, y = column(rows, "dc_voltage_V"), column(rows, "height_mm")
    drive, hertz = column(rows, "drive_voltage_peak_V").round(6), column(rows, "drive_frequency_Hz").round(6)
    settings = sorted(set(zip(drive.tolist(), hertz.tolist(), strict=True)))
    several = len({hz for _, hz in settings}) > 1
    names = [f"{number(volts)} V" + (f", {number(hz)} Hz" if several else "") for volts, hz in settings]
    low, high = limits(x, margin=0.04)
    bottom, top = limits(y)
    axes.set_xlim(low, high + (high - low) * (0.36 if several else 0.22))
    axes.set_ylim(bottom, top)
    step = min(0.15, 0.9 / len(settings))
    for k, ((volts, hz), name) in enumerate(zip(settings, names, strict=True)):
        chosen = (drive == volts) & (hertz == hz)
        colour, marker, _ = series(k)
        part = [row for row, c in zip(rows, chosen, strict=True) if c]
        _dots(axes, part, x[chosen], y[chosen], colour, marker)
        seat = top - (0.06 + step * k) * (top - bottom)
        points(axes, np.array([high + 0.05 * (high - low)]), np.array([seat]), colour, marker, size=3.6)
        axes.text(high + 0.08 * (high - low), seat, name, color=colour, va="center", ha="left", fontsize=7.5)
    heading(axes, "height / mm, at each drive voltage (peak)")
    axes.set_xlabel("dc voltage / V")
    count = f"{len(settings)} drive voltage" + ("s" if len(settings) > 1 else "")
    return f"Height against dc voltage: {_counted(rows, f' at {count}')}, {_rises(x, y)}."


def _secular(axes: Axes, rows: Sequence[Row]) -> str:
    x, y = column(rows, "drive_voltage_peak_V"), column(rows, "secular_frequency_Hz")
    _dots(axes, rows, x, y, *series(0)[:2])
    axes.set_xlim(*limits(x))
    axes.set_ylim(*limits(y))
    heading(axes, "secular frequency / Hz")
    axes.set_xlabel("drive voltage, peak / V")
    return f"Secular frequency against drive voltage: {_counted(rows)}, {_rises(x, y)}."


def _balance(axes: Axes, rows: Sequence[Row]) -> str:
    y, time = column(rows, "balance_voltage_V"), column(rows, "time_s")
    timed = bool(np.isfinite(time).all())
    x = time if timed else np.arange(1.0, len(rows) + 1)
    _dots(axes, rows, x, y, *series(0)[:2])
    axes.set_xlim(*limits(x))
    axes.set_ylim(*limits(y, margin=0.2))
    heading(axes, "balance voltage / V")
    axes.set_xlabel("time / s" if timed else "reading number")
    return f"Balance voltage against {'time' if timed else 'the order read'}: {_counted(rows)}."


_PANELS = {"height": _height, "secular": _secular, "balance": _balance}


def _counted(rows: Sequence[Row], where: str = "") -> str:
    out = sum(row["status"] == "excluded" for row in rows)
    said = f"{len(rows)} reading" + ("s" if len(rows) != 1 else "") + where
    return said + (f", {out} of them left out by the bench" if out else "")


def _rises(x: Array, y: Array) -> str:
    """Whether y grows with x, in words."""
    known = np.isfinite(x) & np.isfinite(y)
    if known.sum() < 2 or np.ptp(x[known]) == 0.0:
        return "at one setting"
    return "rising" if float(np.cov(x[known], y[known])[0, 1]) > 0.0 else "falling"
