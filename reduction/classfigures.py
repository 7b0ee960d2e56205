"""How a class did, in two figures: marks of all benches, and how each criterion was met."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from matplotlib.patches import Patch
from matplotlib.ticker import MaxNLocator

from reduction.figurestyle import COLOURS, HAIR, INK, SOFT, Drawing, canvas, place, svg

WIDTH = 166.0  # [mm]
STEPS = 10  # columns of the distribution
_FULL, _NONE = 1.0 - 1e-9, 1e-9


@dataclass(frozen=True)
class Met:
    """How often a criterion was met in full, in part, not at all, and could not be judged."""

    name: str
    full: int
    part: int
    none: int
    open: int

    @property
    def benches(self) -> int:
        """All benches marked."""
        return self.full + self.part + self.none + self.open


def met(name: str, marks: Sequence[float | None], available: float) -> Met:
    """Count how benches met one criterion."""
    shares = [one / available for one in marks if one is not None] if available else []
    full = sum(share >= _FULL for share in shares)
    none = sum(share <= _NONE for share in shares)
    return Met(name, full, len(shares) - full - none, none, len(marks) - len(shares))


def distribution(marks: Sequence[float], total: float) -> Drawing:
    """Number of benches by marks earned, a square for each bench."""
    width = total / STEPS
    places = np.clip(np.floor(np.asarray(marks, dtype=float) / width + 1e-9), 0, STEPS - 1).astype(int)
    counts = np.bincount(places, minlength=STEPS)
    figure = canvas(WIDTH, 52.0)
    axes = place(figure, 12.0, 11.0, WIDTH - 14.0, 35.0)
    axes.bar((np.arange(STEPS) + 0.5) * width, counts, width=0.9 * width, color=COLOURS[0], edgecolor="none")
    for k, count in enumerate(counts.tolist()):
        if count:
            axes.text((k + 0.5) * width, count, str(count), ha="center", va="bottom", fontsize=8, color=INK)
    middle = float(np.median(marks))
    axes.axvline(middle, color=COLOURS[1], linewidth=1.0, linestyle=(0, (4, 2)))
    axes.annotate(f"median {middle:.3g}", (middle, 1.0), xycoords=("data", "axes fraction"), xytext=(-3, 4),
                  textcoords="offset points", ha="right", va="bottom", fontsize=8, color=COLOURS[1])  # fmt: skip
    axes.set_xlim(0.0, total)
    axes.set_ylim(0.0, max(1.0, 1.15 * float(counts.max())))
    axes.set_xticks(np.arange(STEPS + 1) * width)
    axes.yaxis.set_major_locator(MaxNLocator(nbins=5, integer=True))
    axes.set_xlabel("marks")
    axes.set_title("benches", loc="left", fontsize=8, pad=3, color=INK)
    said = "; ".join(
        f"{k * width:g} to {(k + 1) * width:g}: {count}" for k, count in enumerate(counts.tolist()) if count
    )
    return Drawing(svg(figure), f"Number of benches by marks out of {total:g}. {said}. Median {middle:.3g}.")


_PARTS = (
    ("full", "in full", COLOURS[0], ""),
    ("part", "in part", COLOURS[4], "///"),
    ("none", "not at all", "white", ""),
    ("open", "cannot be told", HAIR, "..."),
)


def criteria(found: Sequence[Met]) -> Drawing:
    """How each criterion was met, one bar for each."""
    row = 7.0
    figure = canvas(WIDTH, 14.0 + row * len(found))
    axes = place(figure, 44.0, 3.0, WIDTH - 46.0, row * len(found) + 1.0)
    for k, one in enumerate(found):
        left = 0.0
        for key, _, colour, hatch in _PARTS:
            count = getattr(one, key)
            if not count:
                continue
            axes.barh(k, count, left=left, height=0.66, color=colour, hatch=hatch, edgecolor=SOFT, linewidth=0.5)
            box = {"facecolor": "white", "edgecolor": "none", "pad": 0.8} if hatch else None
            axes.text(left + count / 2, k, str(count), ha="center", va="center", fontsize=7.5, bbox=box,
                      color="white" if key == "full" else INK)  # fmt: skip
            left += count
    axes.set_yticks(range(len(found)), [one.name for one in found])
    axes.set_ylim(len(found) - 0.5, -0.5)
    axes.set_xlim(0.0, max(1, *(one.benches for one in found)))
    axes.set_xticks([])
    axes.tick_params(axis="y", length=0)
    for side in ("left", "bottom"):
        axes.spines[side].set_visible(False)
    used = [part for part in _PARTS if any(getattr(one, part[0]) for one in found)]
    keys = [Patch(facecolor=c, hatch=h, edgecolor=SOFT, linewidth=0.5, label=name) for _, name, c, h in used]
    axes.legend(handles=keys, loc="lower left", bbox_to_anchor=(0.0, 1.0), ncols=len(keys), frameon=False, fontsize=7.5,
                handlelength=1.4, columnspacing=1.6, borderaxespad=0.1)  # fmt: skip
    said = " ".join(
        f"{one.name}: {one.full} in full, {one.part} in part, {one.none} not at all"
        + (f", {one.open} cannot be told." if one.open else ".")
        for one in found
    )
    return Drawing(svg(figure), f"How the benches met each criterion. {said}")
