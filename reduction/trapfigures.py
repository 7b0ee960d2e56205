"""The figures of a trap whose electrodes are drawn: to scale with equipotentials, and the field along the axis."""

from __future__ import annotations

import numpy as np
from matplotlib.axes import Axes
from matplotlib.patches import Patch

from reduction.figures import WIDTH
from reduction.figurestyle import BAND, HAIR, INK, SOFT, Array, Drawing, canvas, limits, place, series, svg
from reduction.panels import heading, number
from reduction.trapconstants import CHANGE, Axis, Outline, TrapConstants

MM = 1e3
LEVELS = np.linspace(0.05, 0.95, 10)  # of the drive's potential per volt
_FILLS = {"drive": ("#3b4654", ""), "dc_above": ("#ffffff", "////"), "dc_below": ("#ffffff", "\\\\\\\\"),
          "ground": ("#d5dade", "")}  # fmt: skip
_WORDS = {"drive": "drive", "dc_above": "dc above", "dc_below": "dc below", "ground": "ground"}
_TALLEST, _WIDEST = 100.0, 128.0  # of the drawing [mm on paper]
AXIS_COLUMNS = ("height_mm", "drive_field_off_percent", "dc_field_off_percent")


def electrodes(name: str, found: TrapConstants) -> Drawing:
    """Cross-section to scale: equipotentials of the drive left of the axis, of dc right of it.

    Parameters
    ----------
    name : str
        Of the trap.
    found : TrapConstants
        What its drawing makes.
    """
    r, z = np.array(found.map.r) * MM, np.array(found.map.z) * MM
    scale = min(_TALLEST / (z[-1] - z[0]), _WIDEST / (2.0 * r[-1]))
    across, up = 2.0 * r[-1] * scale, (z[-1] - z[0]) * scale
    figure = canvas(WIDTH, up + 18.0)
    axes = place(figure, (WIDTH - across) / 2.0, 12.0, across, up)
    drive, dc = np.array(found.map.drive), np.array(found.map.dc)
    highest = float(np.abs(dc).max()) or 1.0
    axes.contour(-r, z, drive, levels=LEVELS, colors=series(0)[0], linewidths=0.6)
    levels = np.unique(np.concatenate([-LEVELS[::-1], [0.0], LEVELS])) * highest
    axes.contour(r, z, dc, levels=levels, colors=series(1)[0], linewidths=0.6, linestyles="solid")
    for one in found.outlines:
        _conductor(axes, one)
    axes.axvline(0.0, color=HAIR, linewidth=0.6, linestyle=(0, (6, 2)), zorder=1)
    axes.plot([0.0], [found.centre * MM], marker="+", markersize=6, color=INK, markeredgewidth=0.8, zorder=5)
    axes.set_xlim(-r[-1], r[-1])
    axes.set_ylim(z[0], z[-1])
    axes.set_aspect("equal")
    ticks = [tick for tick in axes.get_xticks() if -r[-1] <= tick <= r[-1]]
    axes.set_xticks(ticks, [number(abs(tick)) for tick in ticks])
    axes.set_xlabel("radius / mm")
    heading(axes, "height / mm")
    for at, words, colour in ((0.25, "drive", series(0)[0]), (0.75, "dc", series(1)[0])):
        axes.text(at, 1.012, words, transform=axes.transAxes, ha="center", va="bottom", fontsize=8, color=colour)
    seen = [one for one in found.outlines if min(one.r) * MM < r[-1] and min(map(abs, one.z)) * MM < abs(z).max()]
    carried = [word for word in _FILLS if any(one.carries == word and not _hollow(one) for one in seen)]
    handles = [
        Patch(facecolor=_FILLS[word][0], hatch=_FILLS[word][1], edgecolor=INK, linewidth=0.5, label=_WORDS[word])
        for word in carried
    ]
    figure.legend(handles=handles, loc="lower center", ncols=len(handles), frameon=False, fontsize=7.5,
                  handlelength=1.6, handleheight=0.9, columnspacing=1.6, borderaxespad=0.0)  # fmt: skip
    alt = (
        f"Cross-section of the electrodes of {name} to scale, radius up to {number(float(r[-1]))} mm, height from "
        f"{number(float(z[0]))} to {number(float(z[-1]))} mm: "
        + ", ".join(f"{one.name} ({_WORDS[one.carries]})" for one in found.outlines)
        + f". Equipotentials of the drive left of the axis in steps of 0.1, of dc right of it. The drive's field "
        f"vanishes at {number(found.centre * MM)} mm."
    )
    if any(map(_hollow, found.outlines)):
        alt += " The grounded can around it all need not be in sight."
    columns = ("conductor", "carries", "r_mm", "z_mm")
    rows = [
        (one.name, one.carries, a * MM, b * MM) for one in found.outlines for a, b in zip(one.r, one.z, strict=True)
    ]
    return Drawing(svg(figure), alt, columns, list(rows))


def _conductor(axes: Axes, one: Outline) -> None:
    """One conductor on both sides of the axis, filled where there is metal within its outline."""
    fill, hatch = _FILLS[one.carries]
    r, z = np.array(one.r) * MM, np.array(one.z) * MM
    solid = one.closed and not _hollow(one)
    for side in (1.0, -1.0):
        if solid:
            axes.fill(side * r, z, facecolor=fill, hatch=hatch, edgecolor=INK, linewidth=0.5, zorder=3)
        else:
            axes.plot(side * r, z, color=INK if one.carries != "ground" else SOFT, linewidth=1.4, zorder=3)


def _hollow(one: Outline) -> bool:
    """Whether a grounded outline from axis to axis is a can around the rest rather than a rod."""
    return one.carries == "ground" and one.r[0] == 0.0 and min(one.z) < 0.0 < max(one.z)


def along_axis(name: str, found: TrapConstants) -> Drawing:
    """Field along the axis over the ideal one: of the drive, E/(A z), and of dc, E/D, each less 1, in percent.

    Parameters
    ----------
    name : str
        Of the trap.
    found : TrapConstants
        What its drawing makes.
    """
    axis: Axis = found.axis
    z = np.array(axis.z) * MM
    figure = canvas(WIDTH, 52.0)
    across = (WIDTH - 34.0) / 2.0
    usable = found.usable_height * MM
    twin: list[Array] = [z]
    said = []
    for at, (what, values) in enumerate((("drive", axis.drive), ("dc", axis.dc))):
        axes = place(figure, 14.0 + at * (across + 18.0), 10.0, across, 35.0)
        off = 100.0 * (np.array(values) - 1.0)
        twin.append(off)
        colour, _, dash = series(at)
        axes.axvspan(-usable, usable, facecolor=BAND, edgecolor="none", zorder=0)
        axes.axhline(0.0, color=HAIR, linewidth=0.6, zorder=0.5)
        axes.plot(z, off, color=colour, linestyle=dash)
        axes.set_xlim(z[0], z[-1])
        axes.set_ylim(*limits(off, include=0.0))
        axes.set_xlabel("height from the centre / mm")
        ideal = "A z" if what == "drive" else "D"
        heading(axes, f"field of {what} over {ideal}, less 1 / %")
        edge = float(np.interp(usable, z, off))
        said.append(f"{what} {number(edge)} %")
    alt = (
        f"Field of {name} along its axis against the ideal one, from {number(z[0])} to {number(z[-1])} mm. At the "
        f"height of {number(usable)} mm, where the drive's gradient is off by {100 * CHANGE:g} %, the fields are off "
        f"by: {', '.join(said)}."
    )
    return Drawing(
        svg(figure), alt, AXIS_COLUMNS, [tuple(float(one) for one in row) for row in zip(*twin, strict=True)]
    )
