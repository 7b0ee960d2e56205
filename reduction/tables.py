"""CSV out and in: the exact columns, numbers that round-trip, whole files only."""

from __future__ import annotations

import csv
import io
import math
import re
from array import array
from collections.abc import Container, Iterable, Mapping, Sequence
from pathlib import Path
from typing import Any

import numpy as np
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
    verdict covariate intrinsic_basis hints hint_codes look_at overridden words name email id_number pseudonym
    criterion trap"""
TEXT = frozenset(_TEXT.split())
"""Columns that hold text; every other one holds numbers."""

_WHOLE = """readings degrees_of_freedom line sessions particles count lost sign_undetermined not_determined excluded
    rank_low rank_high session_order intrinsic_particles"""
WHOLE = frozenset(_WHOLE.split())
"""Columns that count something: written without a decimal point where the number is whole."""

_NUMBER = re.compile(r"[+-]?(\d+(\.\d*)?|\.\d+)([eE][+-]?\d+)?")
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


def read_table(
    path: Path | str, *, only: Mapping[str, Container[str]] | None = None, columns: Container[str] | None = None
) -> pd.DataFrame:
    """Read a CSV file written by `write_table`.

    Columns in `TEXT` are text ("" where empty), all others float64 with NaN where empty; a column of no known name is
    text where a cell of it is no number.

    Parameters
    ----------
    path : Path or str
        The file.
    only : mapping of str to container of str, optional
        Texts of a column whose rows are wanted; the others are passed over, which a large table asks for.
    columns : container of str, optional
        Columns wanted; all if left out.
    """
    known = {name for names in COLUMNS.values() for name in names} - set(TEXT)
    with open(path, encoding="utf-8", newline="") as handle:
        reader = csv.reader(handle, strict=True)
        head = next(reader)
        wanted = [(head.index(name), texts) for name, texts in (only or {}).items()]
        kept = [place for place, name in enumerate(head) if columns is None or name in columns]
        numbers = {place: array("d") for place in kept if head[place] in known}
        texts: dict[int, list[str]] = {place: [] for place in kept if place not in numbers}
        same: dict[str, str] = {}  # equal texts are kept once: most stand in many rows
        for row in reader:
            if len(row) != len(head):
                message = f"{path} line {reader.line_num}: {len(row)} cells below a head of {len(head)}"
                raise ValueError(message)
            if all(row[place] in allowed for place, allowed in wanted):
                for place, values in numbers.items():
                    values.append(float(row[place] or "nan"))
                for place, cells in texts.items():
                    cells.append(same.setdefault(row[place], row[place]))
    data: dict[str, Any] = {head[place]: pd.Series(np.array(values)) for place, values in numbers.items()}
    for place, cells in texts.items():
        if head[place] not in TEXT and all(not cell or _NUMBER.fullmatch(cell) for cell in cells):
            data[head[place]] = pd.Series([float(cell or "nan") for cell in cells], dtype="float64")
        else:
            data[head[place]] = pd.Series([plain(cell) for cell in cells], dtype="str")
    return pd.DataFrame(data, columns=[head[place] for place in kept])
