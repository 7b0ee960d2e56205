"""Logs of a session as checked tables in SI: as read, before gain, offset and polarity."""

from __future__ import annotations

import difflib
import os
import re
from collections.abc import Iterable
from dataclasses import dataclass, replace
from pathlib import Path
from typing import Any

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from reduction.contract import ID, ID_WORDS, LOGS, READING_LOGS
from reduction.csvfile import Sheet, decimal_mark, read_sheet
from reduction.entries import NOT_A_REASON
from reduction.errors import Faults
from reduction.heads import Match, columns_of, knows, match_heads
from reduction.settings import Session
from reduction.units import QUANTITIES, from_unit, range_text

_FAULTS_SHOWN = 10  # of one sort in one column; a file with a wrong decimal mark would have one a cell
_DIGITS = frozenset("0123456789+-.eE")
_NUMBER = re.compile(r"[+-]?(?:\d+(?:\.\d*)?|\.\d+)(?:[eE][+-]?\d+)?", re.ASCII)


@dataclass(frozen=True)
class Logs:
    """Logs of one session.

    Every table has every column of its log: numbers as float64 in SI with NaN where the cell is empty, texts with "".
    `line` is the line in the file. Columns are named by the stems of the contract, the drive voltage `drive_amplitude`,
    a peak value whatever the convention of the log.
    """

    tables: dict[str, pd.DataFrame]  # balance, secular, height, those that hold readings
    extra_columns: dict[str, list[str]]  # file: columns outside the contract
    dialects: dict[str, str]  # file: how it was written
    particles: pd.DataFrame | None
    lost: pd.DataFrame | None


def read_logs(folder: Path | str, session: Session | str, *, faults: Faults) -> Logs:
    """Read every log of a session; every fault goes to `faults`.

    Parameters
    ----------
    folder : Path
        The campaign.
    session : Session or str
        The session, or its id.
    faults : Faults
        Collector.

    Returns
    -------
    Logs
        With as much as could be read; whole only if no fault was added.
    """
    session = session if isinstance(session, str) else session.id
    place = Path(folder) / "sessions" / session
    tables: dict[str, pd.DataFrame] = {}
    extra: dict[str, list[str]] = {}
    dialects: dict[str, str] = {}
    broken = False
    for log in LOGS:
        path, name = place / f"{log}.csv", f"sessions/{session}/{log}.csv"
        if not os.path.lexists(path):
            continue
        sheet = read_sheet(path, name, faults=faults, knows=lambda head, log=log: knows(log, head))  # type: ignore[misc]
        if sheet is None:
            broken = True
            continue
        before = len(faults)
        table, extra_heads, dialect = _table(sheet, log, faults)
        broken |= len(faults) > before
        extra[log], dialects[log] = extra_heads, dialect
        if len(table):
            tables[log] = table
    particles, lost = tables.pop("particles", None), tables.pop("lost", None)
    _check_files(place, session, tables, broken, faults)
    if not broken:
        _check_particles(session, tables, particles, lost, faults)
    return Logs(tables, extra, dialects, particles, lost)


def _table(sheet: Sheet, log: str, faults: Faults) -> tuple[pd.DataFrame, list[str], str]:
    matches, extra = match_heads(sheet, log, faults=faults)
    numeric = [match.index for match in matches if match.column.of]
    mark = decimal_mark(sheet, numeric, extra, faults=faults)
    columns: dict[str, Any] = {"line": np.array(sheet.lines, dtype=np.int64)}
    for column in columns_of(log):
        columns.setdefault(column.field, np.full(len(sheet.lines), np.nan) if column.of else [""] * len(sheet.lines))
    for match in matches:
        if match.column.field == "drive_amplitude" and log in READING_LOGS:  # one of the three conventions is there
            match = replace(match, column=replace(match.column, required=True))
        read = _numbers(sheet, match, mark, faults) if match.column.of else _texts(sheet, match, faults)
        columns[match.column.field] = read
    table = pd.DataFrame(columns)
    _check_repeats(sheet, log, table, faults)
    return table, [sheet.heads[index] for index in extra], sheet.dialect(mark)


def _numbers(sheet: Sheet, match: Match, mark: str, faults: Faults) -> NDArray[np.float64]:
    """Cells of one column in SI; a cell at fault is NaN."""
    cells, column = sheet.columns[match.index], match.column
    if mark == "":  # already a fault, and which numbers the cells stand for is unknown
        return np.full(len(cells), np.nan)
    plain = cells
    if any("\N{MINUS SIGN}" in cell for cell in cells):
        plain = tuple(cell.replace("\N{MINUS SIGN}", "-") for cell in cells)
    if mark == ",":
        plain = tuple("?" if "." in cell else cell.replace(",", ".") for cell in plain)
    values, bad = _floats(plain)
    number = f"a number with a decimal {'comma' if mark == ',' else 'point'}"
    if column.required:
        bad = bad | np.fromiter((not cell for cell in cells), dtype=bool, count=len(cells))
    else:
        number += ", or nothing"
    _report(sheet, match.index, np.flatnonzero(bad), number, _number_advice, faults)
    kind = QUANTITIES[column.of]
    si = (from_unit(values, match.unit) if match.unit else values) * column.multiple
    outside = kind.outside(si) & ~np.isnan(values)
    if column.kind == "count":
        outside |= (si != np.floor(si)) & ~np.isnan(si)
    expected = ("a whole number " if column.kind == "count" else "") + range_text(kind, match.unit, column.multiple)
    _report(sheet, match.index, np.flatnonzero(outside), expected, lambda _: "", faults)
    si[outside] = np.nan
    return si


def _floats(cells: tuple[str, ...]) -> tuple[NDArray[np.float64], NDArray[np.bool_]]:
    """Numbers, NaN where a cell is empty or bad, and which are bad: nan, inf, 1_000, 1e999 and 0x1 all are."""
    if _DIGITS.issuperset("".join(cells)):
        try:
            values = np.array([float(cell) if cell else np.nan for cell in cells], dtype=np.float64)
        except ValueError:
            pass
        else:
            return _finite(values)
    good = [not cell or _NUMBER.fullmatch(cell) is not None for cell in cells]
    values = np.array([float(c) if c and ok else np.nan for c, ok in zip(cells, good, strict=True)], dtype=np.float64)
    values, infinite = _finite(values)
    return values, ~np.array(good, dtype=bool) | infinite


def _finite(values: NDArray[np.float64]) -> tuple[NDArray[np.float64], NDArray[np.bool_]]:
    infinite = np.isinf(values)
    return np.where(infinite, np.nan, values), infinite


def _number_advice(cell: str) -> str:
    if not cell:
        return "Fill in the cell, or delete the row."
    if cell.casefold() in ("nan", "na", "n/a", "-", "--", "none", "null"):
        return "Leave the cell empty where nothing was read; it must be filled in a required column."
    if re.search(r"\d\s*[A-Za-zµμ%°]+$", cell):
        return "The unit belongs in the head of the column."
    if cell.count(",") + cell.count(".") > 1 or re.search(r"\d[ \u00a0\u202f'_]\d", cell):
        return "Write no separators between thousands."
    return ""


def _texts(sheet: Sheet, match: Match, faults: Faults) -> list[str]:
    cells, column = list(sheet.columns[match.index]), match.column
    if column.kind in ("id", "optional_id"):
        wrong = {cell for cell in set(cells) if not ID.fullmatch(cell) and (cell or column.kind == "id")}
        expected = ID_WORDS + (", or nothing" if column.kind == "optional_id" else "")
    elif column.kind == "reason":
        wrong = {cell for cell in set(cells) if cell.casefold() in NOT_A_REASON}
        expected = "a reason to leave the row out, or nothing"
    else:
        wrong = {cell for cell in set(cells) if column.required and not cell}
        expected = "a text"
    rows = [row for row, cell in enumerate(cells) if cell in wrong] if wrong else []
    advice = "Empty the cell to keep the row." if column.kind == "reason" else ""
    _report(sheet, match.index, rows, expected, lambda _: advice, faults)
    return cells


def _report(sheet: Sheet, index: int, rows: Iterable[int], expected: str, advice: Any, faults: Faults) -> None:
    """Record the first few rows of one column that have the same fault, and how many more there are."""
    rows = list(rows)
    for row in rows[:_FAULTS_SHOWN]:
        cell = sheet.columns[index][row]
        found = (cell if len(cell) <= 60 else cell[:57] + "...") or "nothing"
        faults.add(
            sheet.name,
            line=sheet.lines[row],
            column=sheet.heads[index],
            found=found,
            expected=expected,
            advice=advice(cell),
        )
    if len(rows) > _FAULTS_SHOWN:
        faults.add(
            sheet.name,
            line=sheet.lines[rows[_FAULTS_SHOWN]],
            column=sheet.heads[index],
            found=f"{len(rows) - _FAULTS_SHOWN} more cells like these from here on",
            expected=expected,
        )


def _check_repeats(sheet: Sheet, log: str, table: pd.DataFrame, faults: Faults) -> None:
    """A particle has one reading of a log at one time, and one row in particles.csv."""
    if log == "particles":
        there, keys = table["particle"] != "", ["particle"]
    elif log in READING_LOGS:
        there, keys = table["time"].notna(), ["particle", "time"]
    else:
        return
    if not there.any() or not table[there].duplicated(keys).any():
        return
    rows = table[there]
    repeated = rows[rows.duplicated(keys)]
    first = rows.drop_duplicates(keys).set_index(keys)["line"]
    for at, (_, row) in enumerate(repeated.iterrows()):
        if at == _FAULTS_SHOWN:
            found = f"{len(repeated) - at} more repeated rows from here on"
            faults.add(sheet.name, line=int(row["line"]), column="particle", found=found, expected="each row once")
            break
        key = tuple(row[name] for name in keys) if len(keys) > 1 else row[keys[0]]
        what = f"particle {row['particle']}" + (f" at {row['time']:.12g} s" if len(keys) > 1 else "")
        faults.add(
            sheet.name,
            line=int(row["line"]),
            column="particle",
            found=f"{what} again, first on line {int(first[key])}",
            expected="one row for each particle" + (" and time" if len(keys) > 1 else ""),
            advice="Delete the copy, or correct the time." if len(keys) > 1 else "Delete one.",
        )


def _check_files(place: Path, session: str, tables: dict[str, pd.DataFrame], broken: bool, faults: Faults) -> None:
    names = {f"{log}.csv" for log in LOGS}
    try:
        there = sorted(path.name for path in place.iterdir() if not path.name.startswith("."))
    except OSError:
        there = []
    for name in there:
        stem, _, ending = name.rpartition(".")
        if name in names or ending.casefold() not in ("csv", "txt", "tsv"):
            continue
        near = difflib.get_close_matches(stem.casefold(), list(LOGS), n=1, cutoff=0.82)
        if near and f"{near[0]}.csv" not in there:
            advice = f"Rename it {near[0]}.csv if it is that log, else give it a name less like it."
            faults.add(f"sessions/{session}/{name}", found="a file of an unknown name", expected=f"{near[0]}.csv",
                       advice=advice)  # fmt: skip
            broken = True
    if not tables and not broken:
        faults.add(
            f"sessions/{session}",
            found="no reading",
            expected="rows in at least one of balance.csv, secular.csv, height.csv",
            advice="Add the logs, or leave the session out in campaign.yaml.",
        )


def _check_particles(
    session: str,
    tables: dict[str, pd.DataFrame],
    particles: pd.DataFrame | None,
    lost: pd.DataFrame | None,
    faults: Faults,
) -> None:
    """Every particle of particles.csv was read or lost."""
    if particles is None:
        return
    logged = set().union(
        *(table["particle"] for table in tables.values()), lost["particle"] if lost is not None else ()
    )
    strangers = particles[~particles["particle"].isin(logged)]
    for line, particle in zip(strangers["line"][:_FAULTS_SHOWN], strangers["particle"], strict=False):
        near = difflib.get_close_matches(particle, sorted(logged), n=1, cutoff=0.6)
        faults.add(
            f"sessions/{session}/particles.csv",
            line=int(line),
            column="particle",
            found=f"{particle}, which no log has",
            expected="a particle of balance.csv, secular.csv, height.csv or lost.csv",
            advice=f"Did you mean {near[0]}?" if near else "Delete the row.",
        )
    if len(strangers) > _FAULTS_SHOWN:
        faults.add(
            f"sessions/{session}/particles.csv",
            line=int(strangers["line"].iloc[_FAULTS_SHOWN]),
            column="particle",
            found=f"{len(strangers) - _FAULTS_SHOWN} more particles that no log has, from here on",
            expected="particles of balance.csv, secular.csv, height.csv or lost.csv",
        )
