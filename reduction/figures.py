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
from reduction.panels import Row, agreement_panel, balance_panel, height_panels, secular_panels

COLUMNS = ("session", "particle", "panel", "series", "kind", "x", "x_unit", "y", "u_y", "y_unit", "status", "line")
WIDTH = 166.0  # of the text on the page [mm]


@dataclass(frozen=True)
class _Slots:
    """Where the panels of one layout stand [mm]: left, bottom, width, height."""

    height: float
    panels: Mapping[str, tuple[float, float, float, float]]


def _slots(kinds: frozenset[str]) -> _Slots:
    if not kinds:
        return _Slots(36.0, {"balance": (10, 9, 70, 22), "agreement": (96, 9, 68, 22)})
    side = {"balance": (124.0, 9.0, 40.0, 12.0), "agreement": (124.0, 33.0, 40.0, 30.0)}
    both = {"height": (10.0, 54.0), "secular": (76.0, 38.0)}
    spans = both if len(kinds) == 2 else {kind: (10.0, 102.0) for kind in kinds}
    panels: dict[str, tuple[float, float, float, float]] = dict(side)
    for kind, (left, width) in spans.items():
        panels[kind] = (left, 27.0, width, 36.0)
        panels[f"{kind}_residual"] = (left, 9.0, width, 12.0)
    return _Slots(67.0, panels)


class ParticleFigures:
    """Draws one particle after the other on the same few canvases."""

    def __init__(self) -> None:
        self._sheets: dict[frozenset[str], tuple[Figure, dict[str, Axes]]] = {}

    def draw(
        self, session: str, particle: str, readings: Sequence[Row], curves: Mapping[str, Any], agreement: Sequence[Row]
    ) -> Drawing | None:
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
        spoken.append(agreement_panel(axes["agreement"], agreement, twin))
        alt = f"Particle {particle} of session {session}. " + " ".join(part for part in spoken if part)
        return Drawing(svg(figure), alt, COLUMNS, [(session, particle, *row) for row in twin])

    def _sheet(self, kinds: frozenset[str]) -> tuple[Figure, dict[str, Axes]]:
        if kinds not in self._sheets:
            slots = _slots(kinds)
            figure = canvas(WIDTH, slots.height)
            axes = {name: place(figure, *slot) for name, slot in slots.panels.items()}
            for name, panel in axes.items():
                low = name.endswith("_residual") or name == "balance"
                panel.locator_params(axis="y", nbins=3 if low else 5)
                panel.locator_params(axis="x", nbins=max(3, round(slots.panels[name][2] / 12)))
            self._sheets[kinds] = (figure, axes)
        figure, axes = self._sheets[kinds]
        for panel in axes.values():
            wipe(panel)
        return figure, axes
