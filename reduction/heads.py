"""Heads of a log matched with the columns of the contract; what is no column but nearly one is a fault."""

from __future__ import annotations

import difflib
from collections.abc import Sequence
from dataclasses import dataclass

from reduction.contract import DRIVE_VOLTAGES, LOGS, MARKING, READING_LOGS, Column
from reduction.csvfile import Sheet
from reduction.errors import Faults, nearest
from reduction.units import QUANTITIES, UNITS, split_name, units_of

_CLOSE = 0.82  # likeness of two names above which a slip of the pen is more likely than a column of one's own
_TIME_SLIPS = frozenset(("sec", "secs", "second", "seconds", "mins", "minute", "minutes", "hr", "hrs", "hour", "hours"))
_DRIVE_WORDS = "one of drive_voltage_peak_V, drive_voltage_rms_V, drive_voltage_peak_to_peak_V"
_STEMS = {column.stem for columns in LOGS.values() for column in columns} | {c.stem for c in DRIVE_VOLTAGES}


@dataclass(frozen=True)
class Match:
    """A column of the contract, its place in the file and the unit its head states."""

    column: Column
    index: int
    unit: str


def columns_of(log: str) -> tuple[Column, ...]:
    """Columns that a log may have, with the drive voltage in its three conventions, or a table of marking."""
    if log in MARKING:
        return MARKING[log]
    particle, *others = LOGS[log]
    return (particle, *(DRIVE_VOLTAGES if log in READING_LOGS or log == "lost" else ()), *others)


def knows(log: str, head: str) -> bool:
    """Whether a head names a column of this log, whatever its unit."""
    return (head in _STEMS and log in LOGS) or split_name(head)[0] in {column.stem for column in columns_of(log)}


def match_heads(sheet: Sheet, log: str, *, faults: Faults) -> tuple[list[Match], list[int]]:
    """Match the heads of a sheet with the columns of a log.

    Returns
    -------
    matches : list of Match
    extra : list of int
        Places of the columns outside the contract.
    """
    known = {column.stem: column for column in columns_of(log)}
    matches: dict[str, Match] = {}
    others: list[int] = []
    for index, head in enumerate(sheet.heads):
        column, unit = _known(head, known)
        if column is None:
            others.append(index)
        elif column.stem in matches:
            found = f"{column.stem} again, as {head}"
            faults.add(sheet.name, line=sheet.head_line, column=head, found=found, expected="each column once",
                       advice="Delete one, or rename it.")  # fmt: skip
        else:
            matches[column.stem] = Match(column, index, unit)
    missing = {stem: column for stem, column in known.items() if stem not in matches}
    drives = [match for stem, match in matches.items() if match.column.field == "drive_amplitude"]
    if drives:
        missing = {stem: column for stem, column in missing.items() if column.field != "drive_amplitude"}
    slips = {index: _slip(sheet, index, missing, log, faults) for index in others}
    extra = [index for index in others if slips[index] is None]
    _check_drive(sheet, drives, log, faults)
    heads = [sheet.heads[index] for index in others]
    for column in missing.values():
        if column.required and column.stem not in slips.values():
            faults.add(
                sheet.name,
                line=sheet.head_line,
                column=column.name,
                found="no such column",
                expected="a column of this name, or with another unit of its kind",
                advice=_advice_for_missing(column, heads),
            )
    return list(matches.values()), extra


def _known(head: str, known: dict[str, Column]) -> tuple[Column | None, str]:
    plain = known.get(head)
    if plain is not None and (not plain.of or not QUANTITIES[plain.of].dimension):
        return plain, ""
    stem, unit = split_name(head)
    column = known.get(stem)
    if column is None or not column.of or UNITS.get(unit, None) is None:
        return None, ""
    return (column, unit) if UNITS[unit].dimension == QUANTITIES[column.of].dimension else (None, "")


def _slip(sheet: Sheet, index: int, missing: dict[str, Column], log: str, faults: Faults) -> str | None:
    """Record a fault for a head that is nearly a column which is not there; its stem, "" for none in particular.

    None if the head is a column of one's own.
    """
    head = sheet.heads[index]
    if not head:
        if any(sheet.columns[index]):
            faults.add(sheet.name, line=sheet.head_line, found=f"no name above column {index + 1}",
                       expected="a name for each column", advice="Name it, or empty it.")  # fmt: skip
        return ""
    stem, unit = split_name(head)
    if "drive_voltage" in (stem, head) and log in LOGS and log != "particles":
        found, expected = "a drive voltage whose convention is not said", _DRIVE_WORDS
        _fault(
            sheet, head, found, expected, "Rename it by what the meter shows; the three differ by up to 2.83.", faults
        )
        return ""
    for column in sorted(missing.values(), key=lambda column: -len(column.stem)):
        if _dimension(column) and _unit_slip(head, stem, unit, column.stem):
            wrong = head[len(column.stem) :].strip(" _[]/()")
            found = f"the unit {wrong}" if wrong else "no unit"
            expected = f"one of {', '.join(units_of(_dimension(column)))}"
            _fault(sheet, head, found, expected, f"Write {column.name}, say.", faults)
            return column.stem
    if log in LOGS and (head in _STEMS or stem in _STEMS):
        return None  # a column of another log
    near = max(((_likeness(head, stem, unit, column), column.name) for column in missing.values()), default=(0.0, ""))
    if near[0] < _CLOSE:
        return None
    advice = f"Did you mean {near[1]}? If not, give the column a name less like it."
    _fault(sheet, head, "an unknown column", "a column of the contract, or one of another name", advice, faults)
    return next(stem for stem, column in missing.items() if column.name == near[1])


def _fault(sheet: Sheet, head: str, found: str, expected: str, advice: str, faults: Faults) -> None:
    faults.add(sheet.name, line=sheet.head_line, column=head, found=found, expected=expected, advice=advice)


def _dimension(column: Column) -> str:
    return QUANTITIES[column.of].dimension if column.of else ""


def _unit_slip(head: str, stem: str, unit: str, wanted: str) -> bool:
    """Whether a head is the wanted stem with no unit, or with an ending that must be meant as one."""
    if head == wanted or (unit and stem == wanted):
        return True
    rest = head[len(wanted) + 1 :] if head.startswith(wanted + "_") else ""
    if not rest or "_" in rest:
        return False
    if wanted == "time":  # time_zone and time_utc are columns of one's own
        return rest.casefold() in _TIME_SLIPS | {spelling.casefold() for spelling in units_of("time")}
    return True


def _likeness(head: str, stem: str, unit: str, column: Column) -> float:
    """Likeness of a head to a column that is missing, from 0 to 1; a note is no slip, no number rests on it."""
    if column.name == "note":
        return 0.0
    if head.startswith("u_") != column.stem.startswith("u_"):
        return 0.0
    same_kind = unit in UNITS and UNITS[unit].dimension == _dimension(column)
    pairs = [(stem, column.stem)] if same_kind else [(head, column.name), (head, column.stem)]
    return max(difflib.SequenceMatcher(None, one.casefold(), other.casefold()).ratio() for one, other in pairs)


def _check_drive(sheet: Sheet, drives: Sequence[Match], log: str, faults: Faults) -> None:
    heads = [sheet.heads[match.index] for match in drives]
    if len(drives) > 1:
        _fault(sheet, heads[1], f"a second drive voltage beside {heads[0]}", "one drive voltage", "Delete one.", faults)
    elif not drives and log in READING_LOGS and not any(split_name(head)[0] == "drive_voltage" for head in sheet.heads):
        faults.add(
            sheet.name,
            line=sheet.head_line,
            column="drive_voltage_peak_V",
            found="no drive voltage",
            expected=_DRIVE_WORDS,
            advice="The name says what the meter shows: rms of a sine is 0.7071 of its peak.",
        )


def _advice_for_missing(column: Column, heads: list[str]) -> str:
    if not heads:
        return "Add the column."
    near = nearest(column.name, heads)
    if near.startswith("Did you mean"):
        return f"Is it {near.removeprefix('Did you mean ').rstrip('?')}? Rename it {column.name}."
    return f"Add the column; unknown here: {', '.join(heads[:6])}."
