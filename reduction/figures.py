"""The figure of one particle: heights, secular frequencies, balance readings and how the methods agree."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Any

from matplotlib.axes import Axes
from matplotlib.figure import Figure

from reduction.figurestyle import (
    Drawing,
    canvas,
    place,
    svg,
    wipe,
)
from reduction.panels import Row, balance_panel, height_panels, pulls_panel, secular_panels

COLUMNS = ("session", "particle", "panel", "series", "kind", "x", "x_unit", "y", "u_y", "y_unit", "status", "line")
WIDTH = 166.0  # of the text on the page [mm]


@dataclass(frozen=True)
class _Slots:
    """Where the panels of one layout stand [mm]: left, bottom, width, height."""

    height: float
    panels: Mapping[str, tuple[float, float, float, float]]


def _slots(kinds: frozenset[str], low: bool) -> _Slots:
    """Layout for the logs drawn; `low` saves height where there are many particles."""
    below, tall = (8.5, 26.0) if low else (10.0, 31.0)  # heights of the residuals and of the panel above them
    foot, gap = 8.5, 4.3
    top = foot + below + gap + tall
    pulls = foot + below + 8.2
    if not kinds:
        return _Slots(32.0, {"balance": (12, 9, 84, 18), "pulls": (138, 9, 26, 18)})
    panels: dict[str, tuple[float, float, float, float]] = {
        "balance": (116.0, foot, 48.0, below),
        "pulls": (138.0, pulls, 26.0, top - pulls),
    }
    both = {"height": (10.0, 49.0), "secular": (71.0, 34.0)}
    spans = both if len(kinds) == 2 else {kind: (10.0, 94.0) for kind in kinds}
    for kind, (left, width) in spans.items():
        panels[kind] = (left, foot + below + gap, width, tall)
        panels[f"{kind}_residual"] = (left, foot, width, below)
    return _Slots(top + 4.5, panels)


class ParticleFigures:
    """Draws one particle after the other on the same few canvases; `low` ones save height."""

    def __init__(self, *, low: bool = False) -> None:
        self._low = low
        self._sheets: dict[frozenset[str], tuple[Figure, dict[str, Axes]]] = {}

    def draw(
        self, session: str, particle: str, readings: Sequence[Row], curves: Mapping[str, Any],
        agreement: Sequence[Row], methods: Sequence[Row] = (),
    ) -> Drawing | None:  # fmt: skip
        """Draw what was read of one particle and what the fits make of it.

        Parameters
        ----------
        session, particle : str
            Ids.
        readings : sequence of mappings
            Rows of readings.csv of this particle.
        curves : mapping
            The particle's entry of `curves` in session.json; may be empty.
        agreement : sequence of mappings
            Rows of agreement.csv of this particle.
        methods : sequence of mappings
            Rows of methods.csv of this particle.

        Returns
        -------
        Drawing or None
            None where there is nothing to draw.
        """
        logs = {str(row["log"]) for row in readings}
        if not logs & {"balance", "height", "secular"}:
            return None
        kinds = frozenset(logs & {"height", "secular"})
        figure, axes = self._sheet(kinds)
        twin: list[tuple[object, ...]] = []
        spoken: list[str] = []
        if "height" in kinds:
            chosen = [r for r in readings if r["log"] == "height"]
            spoken.append(height_panels(axes, chosen, curves.get("height") or [], twin))
        if "secular" in kinds:
            chosen = [r for r in readings if r["log"] == "secular"]
            spoken.append(secular_panels(axes, chosen, curves.get("secular"), twin))
        spoken.append(balance_panel(axes["balance"], [r for r in readings if r["log"] == "balance"], twin))
        spoken.append(pulls_panel(axes["pulls"], methods, agreement, twin))
        alt = f"Particle {particle} of session {session}. " + " ".join(part for part in spoken if part)
        return Drawing(svg(figure), alt, COLUMNS, [(session, particle, *row) for row in twin])

    def _sheet(self, kinds: frozenset[str]) -> tuple[Figure, dict[str, Axes]]:
        if kinds not in self._sheets:
            slots = _slots(kinds, self._low)
            figure = canvas(WIDTH, slots.height)
            axes = {name: place(figure, *slot) for name, slot in slots.panels.items()}
            for name, panel in axes.items():
                flat = name.endswith("_residual") or name == "balance"
                panel.locator_params(axis="y", nbins=(2 if self._low else 3) if flat else 5)
                panel.locator_params(axis="x", nbins=max(3, round(slots.panels[name][2] / 12)))
            self._sheets[kinds] = (figure, axes)
        figure, axes = self._sheets[kinds]
        for panel in axes.values():
            wipe(panel)
        return figure, axes
