"""Tables of a report: columns of ready-made text with their heads, alignment and widths."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from typing import Any

import pandas as pd

from reduction.typeset import NONE, bracketed, bracketed_alone, common_power, power_of_ten, wide

Sheet = dict[str, Any]


def rows_of(frame: pd.DataFrame) -> list[dict[str, Any]]:
    """Rows of a table as mappings by column."""
    return [{str(key): value for key, value in row.items()} for row in frame.to_dict("records")]


def sheet(head: Sequence[str], columns: Sequence[Sequence[str]], align: str, widths: Sequence[int]) -> Sheet:
    """One table: heads, columns of text, `l`, `r` or `c` for each, share of the free width for each (0: its own)."""
    return {
        "head": list(head),
        "rows": [list(row) for row in zip(*columns, strict=True)],
        "align": list(align),
        "widths": list(widths),
    }


def columns_of(rows: Sequence[Mapping[str, Any]], *names: str) -> list[list[float]]:
    """Several numeric columns of some rows; missing numbers are NaN."""
    return [[math.nan if row[name] in (None, "") else float(row[name]) for row in rows] for name in names]


def quantity_column(
    name: str, unit: str, values: Sequence[float], u: Sequence[float], power: int | None = None
) -> tuple[str, list[str], int]:
    """Head, cells and power of ten of a column of values with their uncertainties in brackets.

    The head names the quantity and, on a line of its own, the unit with the power of ten the column shares; a column
    that spans too many decades gets a power in each cell instead. `power` settles it beforehand.
    """
    if power is None and wide(values):
        return f"{name}\n{unit}", [bracketed_alone(v, w) for v, w in zip(values, u, strict=True)], 0
    power = common_power(values) if power is None else power
    cells = [bracketed(v, w, power) for v, w in zip(values, u, strict=True)]
    shared = f"{power_of_ten(power)} {unit}" if power else unit
    return f"{name}\n{shared}", cells or [NONE for _ in values], power
