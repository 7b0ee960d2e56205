"""What a comparison left in a results folder, read back for its pages."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import Any

from reduction import tables
from reduction.comparisontables import TABLES, WORDS
from reduction.sessionmeans import Facts, group_word
from reduction.sheets import rows_of
from reduction.typeset import NONE, common_power, power_of_ten, visible
from reduction.wholefile import read_json
from reduction.wording import RESULTS, unit_words

Row = dict[str, Any]


@dataclass(frozen=True)
class Pages:
    """What one comparison left in a results folder, groups from the most positive down."""

    words: Row
    groups: list[Row]
    pairs: list[Row]
    rows: Mapping[str, list[Row]]  # by table
    coverage: float

    @property
    def unit(self) -> str:
        """Unit as it is printed."""
        return unit_words(str(self.words["unit"]))

    @property
    def name(self) -> str:
        """The compared quantity in words."""
        return RESULTS[str(self.words["quantity"])][0]

    @property
    def power(self) -> int:
        """Power of ten its numbers share."""
        return common_power([float(v) for row in self.groups for v in (row["mean"], row["least"], row["most"])])

    @property
    def scaled_unit(self) -> str:
        """Unit with that power."""
        return f"{power_of_ten(self.power)} {self.unit}" if self.power else self.unit


def read_pages(results: Path) -> Pages:
    """Read what the comparison wrote into a results folder."""
    rows = {name: _visible(rows_of(tables.read_table(results / f"{name}.csv"))) for name in TABLES}
    words = _visible(read_json(results / WORDS))
    groups = sorted(rows["comparison"], key=lambda row: (-float(row["mean"]), row["group"]))
    place = {row["group"]: at for at, row in enumerate(groups)}
    pairs = [_turned(row) if place[row["group_a"]] > place[row["group_b"]] else row for row in rows["contrasts"]]
    pairs.sort(key=lambda row: (place[row["group_a"]], place[row["group_b"]]))
    return Pages(words, groups, pairs, rows, float(words["coverage_probability"]))


def _visible(value: Any) -> Any:
    """Rows or records with all that no page can show spelled out in their texts."""
    if isinstance(value, str):
        return visible(value)
    if isinstance(value, list):
        return [_visible(one) for one in value]
    return {key: _visible(one) for key, one in value.items()} if isinstance(value, dict) else value


def _turned(row: Row) -> Row:
    """The same pair the other way round, the more positive first; a ratio stays with the order of the file."""
    swap = {"group_a": row["group_b"], "group_b": row["group_a"]}
    for low, high in (("low", "high"), ("low_simultaneous", "high_simultaneous")):
        swap |= {low: -row[high], high: -row[low]}
    swap |= {name: -row[name] for name in ("difference", "effect_size", "dominance")}
    if math.isfinite(row["ratio"]) and row["ratio_low"] * row["ratio_high"] > 0.0:
        swap |= {
            "ratio": 1.0 / row["ratio"],
            "ratio_low": 1.0 / row["ratio_high"],
            "ratio_high": 1.0 / row["ratio_low"],
        }
    else:
        swap |= dict.fromkeys(("ratio", "ratio_low", "ratio_high"), math.nan)
    return {**row, **swap}


def group_of(particles: Sequence[Row], facts: Facts, by: str) -> dict[tuple[str, str], str]:
    """Group of every particle, for print."""
    return {
        (row["session"], row["particle"]): visible(group_word(row, facts.get(row["session"], {}), by) or NONE)
        for row in particles
    }


def surest(pairs: list[Row], most: int) -> list[Row]:
    """All pairs, or where they are too many those of the smallest p, in the order they stand in."""
    if len(pairs) <= most:
        return pairs
    order = sorted(range(len(pairs)), key=lambda at: (math.isnan(pairs[at]["p"]), pairs[at]["p"], at))
    return [pairs[at] for at in sorted(order[:most])]


def step_of(row: Row) -> str:
    """One step of a trend's covariate, in the words of its unit."""
    return unit_words(str(row["unit"]).rpartition(" per ")[2])
