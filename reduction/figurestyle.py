"""How every figure looks: one style, one reusable canvas, one way to turn a drawing into SVG text."""

from __future__ import annotations

import io
import math
import re
import warnings
from collections.abc import Iterator, Sequence
from contextlib import contextmanager
from dataclasses import dataclass, field

import matplotlib
import numpy as np
from matplotlib.axes import Axes
from matplotlib.backends.backend_svg import FigureCanvasSVG
from matplotlib.figure import Figure
from numpy.typing import NDArray

from reduction.typeset import power_of_ten

Array = NDArray[np.float64]

PAGE_FONT = "Libertinus Serif"  # the page's own face; Typst carries it
_MEASURING_FONT = "STIXGeneral"  # nearest face matplotlib carries, used to measure text only

INK = "#1c2430"
SOFT = "#6a7480"
HAIR = "#c4cad1"
BAND = "#e8ecf0"
# Okabe and Ito's colours for all kinds of colour vision, ordered so that neighbours differ in lightness too; the
# marker and the dash say the same thing again in grey.
COLOURS = ("#0072B2", "#D55E00", "#009E73", "#CC79A7", "#56B4E9", "#000000", "#E69F00")
MARKERS = ("o", "s", "^", "D", "v", "P", "X")
Dash = str | tuple[int, tuple[float, ...]]
DASHES: tuple[Dash, ...] = (
    "-",
    (0, (5, 1.6)),
    (0, (1.2, 1.2)),
    (0, (6, 1.5, 1.2, 1.5)),
    (0, (3, 1.2)),
    (0, (8, 2, 2, 2)),
    (0, (1, 2.4)),
)

_STYLE: dict[str, object] = {
    "svg.fonttype": "none",
    "svg.hashsalt": "motescale",
    "font.family": [_MEASURING_FONT, "DejaVu Sans"],
    "text.parse_math": False,  # names from outside may hold dollar signs
    "font.size": 8.0,
    "axes.linewidth": 0.5,
    "axes.edgecolor": SOFT,
    "axes.labelcolor": INK,
    "axes.labelpad": 2.0,
    "axes.labelsize": 8.0,
    "axes.spines.top": False,
    "axes.spines.right": False,
    "axes.unicode_minus": True,
    "axes.formatter.useoffset": False,
    "text.color": INK,
    "xtick.color": SOFT,
    "ytick.color": SOFT,
    "xtick.labelcolor": INK,
    "ytick.labelcolor": INK,
    "xtick.labelsize": 7.5,
    "ytick.labelsize": 7.5,
    "xtick.major.width": 0.5,
    "ytick.major.width": 0.5,
    "xtick.major.size": 2.5,
    "ytick.major.size": 2.5,
    "xtick.major.pad": 2.0,
    "ytick.major.pad": 2.0,
    "lines.linewidth": 0.9,
    "lines.markersize": 3.0,
    "path.simplify": False,
}


@dataclass(frozen=True)
class Drawing:
    """One finished figure: what is seen, what is read aloud, and the numbers drawn."""

    svg: str
    alt: str
    columns: tuple[str, ...] = ()
    rows: list[tuple[object, ...]] = field(default_factory=list)  # numbers and text, in the order of `columns`


@contextmanager
def styled() -> Iterator[None]:
    """Draw in the house style inside this block and leave matplotlib's settings as they were."""
    with matplotlib.rc_context(_STYLE):  # type: ignore[arg-type]
        yield


def canvas(width: float, height: float) -> Figure:
    """Blank figure of `width` by `height` [mm]; make it once and draw many times."""
    figure = Figure(figsize=(width / 25.4, height / 25.4))
    FigureCanvasSVG(figure)
    return figure


def place(figure: Figure, left: float, bottom: float, width: float, height: float) -> Axes:
    """Axes at a position in [mm] from the lower left corner of the figure."""
    across, up = (side * 25.4 for side in figure.get_size_inches())
    return figure.add_axes((left / across, bottom / up, width / across, height / up))


def wipe(axes: Axes) -> None:
    """Take off what was drawn before; much cheaper than new axes."""
    for artist in [*axes.lines, *axes.collections, *axes.texts, *axes.patches]:
        artist.remove()


def svg(figure: Figure) -> str:
    """SVG text of a figure, its lettering in the page's own face."""
    stream = io.StringIO()
    with warnings.catch_warnings():
        # Faces here only measure; the page has its own way with letters they lack.
        warnings.filterwarnings("ignore", message="Glyph .* missing from font", category=UserWarning)
        figure.savefig(stream, format="svg", metadata={"Date": None, "Creator": None})
    text = stream.getvalue()
    return re.sub(rf"'?{_MEASURING_FONT}'?", f"'{PAGE_FONT}'", text)


def series(index: int) -> tuple[str, str, Dash]:
    """Colour, marker and dash of the series numbered `index`."""
    k = index % len(COLOURS)
    return COLOURS[k], MARKERS[k], DASHES[k]


def bars(axes: Axes, x: Array, y: Array, u: Array, colour: str, *, across: bool = False, width: float = 0.8) -> None:
    """Standard uncertainty as a plain bar either side of each point, where one is known."""
    known = np.isfinite(x) & np.isfinite(y) & np.isfinite(u)
    x, y, u = x[known], y[known], u[known]
    if not x.size:
        return
    if across:
        axes.hlines(y, x - u, x + u, colors=colour, linewidth=width)
    else:
        axes.vlines(x, y - u, y + u, colors=colour, linewidth=width)


def points(
    axes: Axes, x: Array, y: Array, colour: str, marker: str, *, hollow: bool = False, size: float = 3.2
) -> None:
    """Markers without a line; hollow for what was left out."""
    axes.plot(
        x,
        y,
        linestyle="none",
        marker=marker,
        markersize=size,
        markerfacecolor="white" if hollow else colour,
        markeredgecolor=colour,
        markeredgewidth=0.7 if hollow else 0.0,
        zorder=3,
    )


def limits(*values: Array, margin: float = 0.08, include: float | None = None) -> tuple[float, float]:
    """Axis limits that hold all finite values with some air around them."""
    pooled = np.concatenate([np.ravel(np.asarray(value, dtype=float)) for value in values] or [np.array([])])
    pooled = pooled[np.isfinite(pooled)]
    if include is not None:
        pooled = np.append(pooled, include)
    if not pooled.size:
        return 0.0, 1.0
    low, high = float(pooled.min()), float(pooled.max())
    air = margin * (high - low) or 0.1 * abs(high) or 1.0
    return low - air, high + air


def decades(axes: Axes, linear: float, most: int = 5) -> None:
    """Ticks of a horizontal axis linear up to `linear` and logarithmic beyond: `most` powers of ten either side."""
    low, high = axes.get_xlim()
    first = math.ceil(math.log10(linear) - 1e-9)
    last = math.floor(math.log10(max(abs(low), abs(high), linear)))
    step = max(1, math.ceil((last - first + 1) / most))
    sizes = [10.0**power for power in range(last, first - 1, -step)]
    ticks = sorted([*(-size for size in sizes), 0.0, *sizes])
    shown = [tick for tick in ticks if low <= tick <= high]
    axes.set_xticks(shown, [_power(tick) for tick in shown])
    axes.minorticks_off()


def _power(value: float) -> str:
    if value == 0.0:
        return "0"
    power = round(math.log10(abs(value)))
    sign = "\N{MINUS SIGN}" if value < 0.0 else ""
    return sign + ("1" if power == 0 else power_of_ten(power))


def spread(positions: Sequence[float], gap: float) -> list[float]:
    """Positions moved apart to at least `gap`, order kept, each run of them centred on where it wanted to be."""
    order = sorted(range(len(positions)), key=lambda i: (positions[i], i))
    runs: list[list[int]] = []
    starts: list[float] = []
    for i in order:
        runs.append([i])
        starts.append(positions[i])
        while len(runs) > 1 and starts[-1] < starts[-2] + gap * len(runs[-2]):
            merged = runs[-2] + runs[-1]
            centre = sum(positions[j] for j in merged) / len(merged)
            runs[-2:] = [merged]
            starts[-2:] = [centre - gap * (len(merged) - 1) / 2]
    moved = [0.0] * len(positions)
    for run, start in zip(runs, starts, strict=True):
        for place_in_run, i in enumerate(run):
            moved[i] = start + gap * place_in_run
    return moved
