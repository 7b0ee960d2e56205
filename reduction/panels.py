"""The panels of a particle's figure: each draws its part, notes the numbers drawn, and says what is to be seen."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import Any

import numpy as np
from matplotlib.axes import Axes

from reduction.figurestyle import (
    BAND,
    HAIR,
    INK,
    SOFT,
    Array,
    bars,
    limits,
    points,
    series,
    spread,
)

Row = Mapping[str, Any]
NOT_USED = ("excluded", "left_out")
_QUANTITY_WORDS = {"charge_to_mass": "q/m", "drag_rate": "drag rate"}


def column(rows: Sequence[Row], name: str) -> Array:
    """One numeric column of some rows; missing numbers are NaN."""
    return np.array([np.nan if row[name] in (None, "") else float(row[name]) for row in rows], dtype=float)


_PULL_ROWS, _PULL_REACH = 7, 5.0  # rows drawn at most; the axis either side [u of the difference]


def residuals(rows: Sequence[Row]) -> Array:
    """Residuals from the adjusted result, which the lines show; from the method's own fit where there is none."""
    adjusted, own = column(rows, "adjusted_residual"), column(rows, "residual")
    return adjusted if np.isfinite(adjusted).any() else own


def number(value: float) -> str:
    """A number as it is set in a label: few digits, a true minus sign."""
    return f"{value:.4g}".replace("-", "\N{MINUS SIGN}")


def heading(axes: Axes, text: str) -> None:
    """Quantity and unit of the vertical axis, set level above its upper end."""
    axes.set_title(text, loc="left", fontsize=8, pad=3, y=1.0, color=INK)  # y: no search for a free place


def _mark(axes: Axes, rows: Sequence[Row], x: Array, y: Array, u: Array, colour: str, marker: str) -> None:
    """Readings by status: used filled, flagged ringed as well, excluded hollow."""
    status = np.array([str(row["status"]) for row in rows])
    used = ~np.isin(status, NOT_USED)
    bars(axes, x[used], y[used], u[used], colour)
    points(axes, x[used], y[used], colour, marker)
    if not used.all():
        points(axes, x[~used], y[~used], SOFT, marker, hollow=True)
    flagged = status == "flagged"
    if flagged.any():
        axes.plot(x[flagged], y[flagged], linestyle="none", marker="o", markersize=8, markerfacecolor="none",
                  markeredgecolor=INK, markeredgewidth=0.7)  # fmt: skip


def _residual_panel(
    axes: Axes, rows: Sequence[Row], x: Array, scale: float, unit: str, styles: Sequence[tuple[str, str]], log: str,
    x_unit: str, names: Sequence[str], twin: list[tuple[object, ...]],
) -> None:  # fmt: skip
    residual, u = scale * residuals(rows), scale * column(rows, "u_reading")
    axes.axhline(0.0, color=SOFT, linewidth=0.5)
    for style in dict.fromkeys(styles):
        chosen = np.array([other == style for other in styles])
        _mark(axes, [r for r, c in zip(rows, chosen, strict=True) if c], x[chosen], residual[chosen], u[chosen], *style)
    used = np.array([row["status"] not in NOT_USED for row in rows]) & np.isfinite(residual)
    reach = float(np.max(np.abs(residual[used]) + np.nan_to_num(u[used]), initial=0.0)) or 1.0
    axes.set_ylim(-1.15 * reach, 1.15 * reach)
    heading(axes, f"residual / {unit}")
    for row, name, a, b, c in zip(rows, names, x, residual, u, strict=True):
        twin.append((f"{log}_residual", name, "residual", a, x_unit, b, c, unit, row["status"], row["line"]))


def _worst(rows: Sequence[Row]) -> str:
    size = np.abs(residuals(rows) / column(rows, "u_reading"))
    return f"largest residual {np.nanmax(size):.1f} standard uncertainties" if np.isfinite(size).any() else "not fitted"


def height_panels(
    axes: Mapping[str, Axes], rows: Sequence[Row], curves: Sequence[Mapping[str, Any]], twin: list[tuple[object, ...]]
) -> str:
    """Height against dc voltage at each drive, with the residuals below; returns what it shows, in words."""
    main, below = axes["height"], axes["height_residual"]
    drive, hertz = column(rows, "drive_voltage_peak_V"), column(rows, "drive_frequency_Hz")
    x, y, u = column(rows, "dc_voltage_V"), column(rows, "height_mm"), column(rows, "u_reading")
    drives = sorted({(round(float(c["drive_V"]), 6), round(float(c["drive_Hz"]), 6)) for c in curves}
                    | set(zip(drive.round(6).tolist(), hertz.round(6).tolist(), strict=True)))  # fmt: skip
    several_hertz = len({hz for _, hz in drives}) > 1
    names = {d: f"{number(d[0])} V" + (f", {number(d[1])} Hz" if several_hertz else "") for d in drives}
    ends: list[tuple[float, str, str]] = []
    for curve in curves:
        key = (round(float(curve["drive_V"]), 6), round(float(curve["drive_Hz"]), 6))
        colour, _, dash = series(drives.index(key))
        volts = np.array(curve["dc_V"], dtype=float)
        heights = np.array([np.nan if h is None else h for h in curve["height_mm"]], dtype=float)
        main.plot(volts, heights, color=colour, linestyle=dash, linewidth=0.9)
        last = int(np.argmax(volts))
        ends.append((float(heights[last]), names[key], colour))
        twin += [("height", names[key], "curve", a, "V", b, None, "mm", "", None)
                 for a, b in zip(volts, heights, strict=True)]  # fmt: skip
    styles: list[tuple[str, str]] = []
    for k, key in enumerate(drives):
        chosen = (drive.round(6) == key[0]) & (hertz.round(6) == key[1])
        colour, marker, _ = series(k)
        part = [row for row, c in zip(rows, chosen, strict=True) if c]
        _mark(main, part, x[chosen], y[chosen], u[chosen], colour, marker)
        if chosen.any() and not any(name == names[key] for _, name, _ in ends):
            ends.append((float(y[chosen][np.argmax(x[chosen])]), names[key], colour))
    own = [drives.index((round(a, 6), round(b, 6))) for a, b in zip(drive.tolist(), hertz.tolist(), strict=True)]
    styles = [series(k)[:2] for k in own]
    labels = [names[drives[k]] for k in own]
    for row, name, a, b, c in zip(rows, labels, x, y, u, strict=True):
        twin.append(("height", name, "reading", a, "V", b, c, "mm", row["status"], row["line"]))
    every = [np.array(c["dc_V"], dtype=float) for c in curves]
    low, high = limits(x, *every, margin=0.04)
    room = (high - low) * (0.30 if several_hertz else 0.16)
    tops = [np.array([np.nan if h is None else h for h in c["height_mm"]], dtype=float) for c in curves]
    bottom, top = limits(y - np.nan_to_num(u), y + np.nan_to_num(u), *tops)
    for panel in (main, below):
        panel.set_xlim(low, high + room)
    main.set_ylim(bottom, top)
    main.tick_params(labelbottom=False)
    seat = spread([min(max(end, bottom), top) if np.isfinite(end) else bottom for end, _, _ in ends],
                  0.085 * (top - bottom))  # fmt: skip
    for at, (_, name, colour) in zip(seat, ends, strict=True):
        main.text(high + 0.02 * (high - low), at, name, color=colour, va="center", ha="left", fontsize=7.5)
    heading(main, "height / mm, at each drive voltage (peak)")
    below.set_xlabel("dc voltage / V")
    _residual_panel(below, rows, x, 1e3, "µm", styles, "height", "V", labels, twin)
    listed = "; ".join(names[d] for d in drives)
    return (
        f"Height against dc voltage: {len(rows)} readings at {len(drives)} drive voltages ({listed}), "
        f"from {number(float(np.nanmin(y)))} to {number(float(np.nanmax(y)))} mm, {_worst(rows)}."
    )


def secular_panels(
    axes: Mapping[str, Axes], rows: Sequence[Row], curve: Mapping[str, Any] | None, twin: list[tuple[object, ...]]
) -> str:
    """Secular frequency against drive with the exact and the drag-free curve; returns what it shows, in words."""
    main, below = axes["secular"], axes["secular_residual"]
    x, y, u = column(rows, "drive_voltage_peak_V"), column(rows, "secular_frequency_Hz"), column(rows, "u_reading")
    drawn: list[Array] = []
    curves = curve if isinstance(curve, list) else [curve] if curve else []
    for one in curves:
        volts = np.array(one["drive_V"], dtype=float)
        for key, name, colour, dash in (
            ("frequency_Hz", "exact", series(0)[0], "-"),
            ("drag_free_Hz", "without drag", SOFT, (0, (4, 2))),
        ):
            if one.get(key) is None:
                continue
            hertz = np.array([np.nan if v is None else v for v in one[key]], dtype=float)
            main.plot(volts, hertz, color=colour, linestyle=dash, linewidth=0.9)
            twin += [("secular", name, "curve", a, "V", b, None, "Hz", "", None)
                     for a, b in zip(volts, hertz, strict=True)]  # fmt: skip
            drawn.append(hertz)
            known = np.flatnonzero(np.isfinite(hertz))
            if known.size and one is curves[0]:
                exact = key == "frequency_Hz"
                seat = known[int((0.72 if exact else 0.6) * (known.size - 1))]
                main.annotate(name, (volts[seat], hertz[seat]), xytext=(4, -3) if exact else (-4, 3),
                              textcoords="offset points", ha="left" if exact else "right",
                              va="top" if exact else "bottom", fontsize=7.5, color=colour)  # fmt: skip
    _mark(main, rows, x, y, u, *series(0)[:2])
    for row, a, b, c in zip(rows, x, y, u, strict=True):
        twin.append(("secular", "readings", "reading", a, "V", b, c, "Hz", row["status"], row["line"]))
    low, high = limits(x, *[np.array(one["drive_V"], dtype=float) for one in curves], margin=0.05)
    for panel in (main, below):
        panel.set_xlim(low, high)
    main.set_ylim(*limits(y - np.nan_to_num(u), y + np.nan_to_num(u), *drawn, margin=0.1))
    main.tick_params(labelbottom=False)
    heading(main, "secular frequency / Hz")
    below.set_xlabel("drive voltage, peak / V")
    _residual_panel(below, rows, x, 1.0, "Hz", [series(0)[:2]] * len(rows), "secular", "V",
                    ["readings"] * len(rows), twin)  # fmt: skip
    return (
        f"Secular frequency against drive voltage: {len(rows)} readings from {number(float(np.nanmin(y)))} to "
        f"{number(float(np.nanmax(y)))} Hz, {_worst(rows)}; the exact curve and, for contrast, the one without drag."
    )


def balance_panel(axes: Axes, rows: Sequence[Row], twin: list[tuple[object, ...]]) -> str:
    """Balance voltage against time, or in the order read; returns what it shows, in words."""
    heading(axes, "balance voltage / V")
    if not rows:
        _say(axes, "no balance readings")
        return ""
    axes.set_axis_on()
    y, u, residual = column(rows, "balance_voltage_V"), column(rows, "u_reading"), residuals(rows)
    time = column(rows, "time_s")
    timed = bool(np.isfinite(time).all())
    x = time if timed else np.arange(1.0, len(rows) + 1)
    unit = "s" if timed else "reading"
    order = np.argsort(x, kind="stable")
    fitted = y - residual
    if np.isfinite(fitted).any():
        axes.plot(x[order], fitted[order], color=HAIR, linewidth=1.2)
    _mark(axes, rows, x, y, u, *series(0)[:2])
    for row, a, b, c, f in zip(rows, x, y, u, fitted, strict=True):
        twin.append(("balance", "readings", "reading", a, unit, b, c, "V", row["status"], row["line"]))
        if np.isfinite(f):
            twin.append(("balance", "fit", "curve", a, unit, f, None, "V", "", None))
    axes.set_xlim(*limits(x, margin=0.08))
    axes.set_ylim(*limits(y - np.nan_to_num(u), y + np.nan_to_num(u), fitted, margin=0.15))
    axes.set_xlabel("time / s" if timed else "reading number")
    return f"Balance voltage: {len(rows)} readings, mean {number(float(np.nanmean(y)))} V, {_worst(rows)}."


def _say(axes: Axes, text: str) -> None:
    axes.set_axis_off()
    axes.text(0.0, 0.75, text, transform=axes.transAxes, fontsize=7.5, color=SOFT, style="italic", va="top")


def pair_name(row: Row) -> str:
    """What a row of agreement.csv compares: `balance − height, q/m`."""
    quantity = _QUANTITY_WORDS.get(row["quantity"], row["quantity"])
    return f"{row['method_a']} \N{MINUS SIGN} {row['method_b']}, {quantity}"


def _pull_name(row: Row) -> str:
    short = {"charge_to_mass": "", "drag_rate": ", drag"}
    return f"{row['method_a']} \N{MINUS SIGN} {row['method_b']}{short.get(row['quantity'], '')}"


def pulls_panel(
    axes: Axes, methods: Sequence[Row], agreement: Sequence[Row], twin: list[tuple[object, ...]]
) -> str:  # fmt: skip
    """Each method against the adjusted value, and pairs of methods, over u of the difference; returns it in words.

    A pair's normalised error is its difference over twice u: the grey band, 2 either side, is where it stays within 1.
    """
    own = [(str(r["method"]), float(r["normalized_residual"])) for r in methods if r["method"] != "adjusted"]
    own = [(name, value) for name, value in own if np.isfinite(value)]
    known = [row for row in agreement if np.isfinite(float(row["normalized_error"]))]
    for name, value in own:
        twin.append(("pulls", name, "normalized_residual", value, "1", None, 1.0, "", "", None))
    for row in known:
        twin.append(
            ("pulls", pair_name(row), "normalized_error", row["normalized_error"], "1", None, 0.5, "", "", None)
        )
    if not own and not known:
        _say(axes, "no two methods\ngive the same\nquantity")
        return "No two methods to compare."
    axes.set_axis_on()
    ranked = sorted(known, key=lambda row: -abs(float(row["normalized_error"])))[: max(1, _PULL_ROWS - len(own))]
    shown = [row for row in known if row in ranked]
    rows = [(name, value, True) for name, value in own]
    rows += [(_pull_name(row), 2.0 * float(row["normalized_error"]), False) for row in shown]
    axes.set_xlim(-_PULL_REACH, _PULL_REACH)
    axes.set_ylim(max(len(rows), 5) - 0.5, -0.6)
    axes.set_xticks([-4, -2, 0, 2, 4])
    axes.axvspan(-2, 2, facecolor=BAND, edgecolor="none", zorder=0)
    axes.axvline(0, color=HAIR, linewidth=0.6, zorder=0.5)
    axes.set_yticks([])
    axes.spines["left"].set_visible(False)
    if own and shown:
        axes.axhline(len(own) - 0.5, color=HAIR, linewidth=0.5, zorder=0.5, xmin=-0.95, clip_on=False)
    for k, (name, value, alone) in enumerate(rows):
        colour, marker, _ = series(0 if abs(value) <= 2 else 1)
        at, y = float(np.clip(value, -_PULL_REACH, _PULL_REACH)), np.array([float(k)])
        if at == value:
            bars(axes, np.array([value]), y, np.array([1.0]), colour, across=True)
        else:
            marker = ">" if value > 0 else "<"
        points(axes, np.array([at]), y, colour, marker, hollow=not alone, size=3.6)
        axes.text(-_PULL_REACH - 0.3, k, name, fontsize=6.8, va="center", ha="right",
                  color=INK if abs(value) <= 2 else colour)  # fmt: skip
        if at != value:
            axes.text(at - np.sign(at) * 0.6, k, f"{value:+.1f}".replace("-", "\N{MINUS SIGN}"), fontsize=6.8,
                      va="center", ha="right" if at > 0 else "left", color=colour)  # fmt: skip
    axes.set_title("pulls: difference / u", loc="right", fontsize=8, pad=3, color=INK)
    spoken = [f"{name} {value:+.2f}" for name, value in own]
    text = f"Normalised residuals of the methods: {', '.join(spoken)}. " if spoken else ""
    if known:
        size = [abs(float(row["normalized_error"])) for row in known]
        worst = known[int(np.argmax(size))]
        text += (
            f"Agreement: {len(known)} pairs of methods, largest normalised error {max(size):.2f} "
            f"({worst['method_a']} against {worst['method_b']}), {'all' if max(size) <= 1 else 'not all'} within 1."
        )
    return text.strip()
