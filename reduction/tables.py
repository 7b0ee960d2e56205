"""CSV out and in: the exact columns, numbers that round-trip, whole files only."""

from __future__ import annotations

import csv
import io
import math
import re
from collections.abc import Iterable, Mapping, Sequence
from pathlib import Path
from typing import Any

import pandas as pd

from reduction.wholefile import write_whole

COLUMNS: dict[str, tuple[str, ...]] = {
    name: tuple(text.split())
    for name, text in {
        "particles": """session particle species charged_with status flags charge_to_mass_C_per_kg
            u_charge_to_mass_C_per_kg charge_to_mass_low_C_per_kg charge_to_mass_high_C_per_kg methods readings
            chi_square degrees_of_freedom effective_degrees_of_freedom drag_rate_per_s u_drag_rate_per_s diameter_um
            u_diameter_um mass_from mass_kg u_mass_kg mass_low_kg mass_high_kg charge_C u_charge_C charge_e u_charge_e
            charge_low_e charge_high_e surface_charge_density_C_per_m2 u_surface_charge_density_C_per_m2
            charge_drift_per_s u_charge_drift_per_s""",
        "methods": """session particle method status reason charge_to_mass_C_per_kg u_charge_to_mass_C_per_kg
            u_random_charge_to_mass_C_per_kg drag_rate_per_s u_drag_rate_per_s height_origin_mm u_height_origin_mm
            readings chi_square degrees_of_freedom normalized_residual""",
        "agreement": """session particle method_a method_b quantity difference u_difference unit
            normalized_error""",
        "inputs": "input scope owner estimate u unit shape adjusted_estimate adjusted_u pull",
        "components": "session particle result input scope component unit",
        "budget": """session particle result input estimate u shape evaluation sensitivity component share scope
            degrees_of_freedom""",
        "comparison": """group sessions particles mean u_mean low high unit between_sessions
            between_particles""",  # rank_1 ... follow, as many as there are groups
        "contrasts": "group_a group_b difference u_difference low high p p_holm unit",
        "readings": """session particle log line status flags exclude drive_voltage_peak_V drive_frequency_Hz
            dc_voltage_V balance_voltage_V secular_frequency_Hz height_mm time_s u_reading residual
            normalized_residual adjusted_residual""",
    }.items()
}
"""The columns of every table of the results, in their order."""

_TEXT = """session particle species charged_with status flags methods mass_from method reason method_a method_b quantity
    unit input scope owner shape result evaluation group group_a group_b log exclude note date scale kind members
    verdict covariate intrinsic_basis"""
TEXT = frozenset(_TEXT.split())
"""Columns that hold text; every other one holds numbers."""

_WHOLE = """readings degrees_of_freedom line sessions particles count lost sign_undetermined not_determined excluded
    rank_low rank_high session_order intrinsic_particles"""
WHOLE = frozenset(_WHOLE.split())
"""Columns that count something: written without a decimal point where the number is whole."""

_NUMBER = re.compile(r"[+-]?(\d+\.?\d*|\.\d+)([eE][+-]?\d+)?")
_FORMULA = tuple("=+-@\t\r\n＝＋－＠")


def write_table(path: Path | str, columns: Sequence[str], rows: pd.DataFrame | Iterable[Mapping[str, Any]]) -> None:
    """Write one CSV file: UTF-8, line feeds, a head, the given columns in the given order.

    Numbers are written with as many digits as it takes to read the same number back; a missing one (None, NaN) is an
    empty cell. Text a spreadsheet would run as a formula gets an apostrophe in front; `read_table` takes it off again.

    Parameters
    ----------
    path : Path or str
        The file; replaced whole, by rename.
    columns : sequence of str
        Every column, in order, usually one of `COLUMNS`.
    rows : DataFrame or iterable of mappings
        The rows; a column the rows lack, or one they have beyond `columns`, is an error.

    Raises
    ------
    ValueError
        If the columns of `rows` are not the given ones.
    """
    write_whole(path, table_text(columns, rows).encode())


def table_text(columns: Sequence[str], rows: pd.DataFrame | Iterable[Mapping[str, Any]]) -> str:
    """CSV text of a table, as `write_table` writes it."""
    cells: list[list[str]]
    if isinstance(rows, pd.DataFrame):
        _same_columns(columns, rows.columns)
        cells = [[cell_text(name, value) for value in rows[name].tolist()] for name in columns]
    else:
        listed = list(rows)
        for row in listed:
            _same_columns(columns, row)
        cells = [[cell_text(name, row[name]) for row in listed] for name in columns]
    out = io.StringIO()
    writer = csv.writer(out, lineterminator="\n")
    writer.writerow(columns)
    writer.writerows(zip(*cells, strict=True))
    return out.getvalue()


def _same_columns(columns: Sequence[str], given: Iterable[str]) -> None:
    missing, unknown = sorted(set(columns) - set(given)), sorted(set(given) - set(columns))
    if missing or unknown:
        message = f"columns do not fit the table: missing {missing}, unknown {unknown}"
        raise ValueError(message)


def cell_text(name: str, value: Any) -> str:
    """One cell of column `name` as it stands in the file."""
    if value is None or value is pd.NA:
        return ""
    if isinstance(value, str):
        return neutral(value)
    if isinstance(value, (bool, int)):
        return str(int(value))
    number = float(value)
    if math.isnan(number):
        return ""
    if name in WHOLE and number.is_integer():
        return str(int(number))
    return repr(number)


def neutral(text: str) -> str:
    """Text that no spreadsheet runs as a formula; a plain number such as -1.5 stays as it is."""
    bare = text.lstrip("'")
    if not bare.lstrip(" ").startswith(_FORMULA) or (bare == text and _NUMBER.fullmatch(text)):
        return text
    return "'" + text


def plain(cell: str) -> str:
    """Text of a cell as it was before `neutral`."""
    if cell.startswith("'") and cell.lstrip("'").lstrip(" ").startswith(_FORMULA):
        return cell[1:]
    return cell


def read_table(path: Path | str) -> pd.DataFrame:
    """Read a CSV file written by `write_table`.

    Columns in `TEXT` are text ("" where empty), all others float64 with NaN where empty; a column of no known name is
    text where a cell of it is no number.
    """
    with open(path, encoding="utf-8", newline="") as handle:
        reader = csv.reader(handle, strict=True)
        head = next(reader)
        columns = list(zip(*reader, strict=True)) or [()] * len(head)
    known = {name for names in COLUMNS.values() for name in names}
    data: dict[str, Any] = {}
    for name, cells in zip(head, columns, strict=True):
        numeric = name not in TEXT and (name in known or all(not c or _NUMBER.fullmatch(c) for c in cells))
        if numeric:
            data[name] = pd.Series([float(c) if c else math.nan for c in cells], dtype="float64")
        else:
            data[name] = pd.Series([plain(c) for c in cells], dtype="str")
    return pd.DataFrame(data, columns=head)
