"""Marks into a learning platform's own exported gradebook: named columns filled, every other byte as it was."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from pathlib import Path

import pandas as pd

from reduction.errors import nearest
from reduction.fieldspans import ExportError, Spans, read_spans
from reduction.marking import LOOK_AT, NOT_MARKED
from reduction.marksheet import PEOPLE, SHEET, STAFF
from reduction.tables import neutral, read_table
from reduction.wholefile import write_whole

KEYS = ("id_number", "email", "name")
"""Columns of the register by which people may be told apart."""


@dataclass(frozen=True)
class Change:
    """One cell that gets another text."""

    row: int
    column: int
    line: int
    key: str
    head: str
    before: str
    after: str


@dataclass(frozen=True)
class Filled:
    """An export with the marks filled in, and who could not be matched."""

    spans: Spans
    changes: tuple[Change, ...]
    same: int  # cells that hold their mark already
    not_in_export: tuple[str, ...]
    not_in_register: tuple[str, ...]
    without_marks: tuple[str, ...]
    look_at: tuple[str, ...]

    @property
    def data(self) -> bytes:
        """Bytes of the filled file."""
        return self.spans.replaced({(one.row, one.column): one.after for one in self.changes})


def fill(
    results: Path, export: Path, *, match: str, fills: Mapping[str, str], by: str | None = None, decimal: str = "."
) -> Filled:
    """Fill the marks of every person into an exported gradebook; several people of one bench get the same marks.

    Parameters
    ----------
    results : Path
        A results folder with marks.
    export : Path
        The platform's own file; it is only read.
    match : str
        Column of the export that says who a row is.
    fills : mapping
        Column of the export to the column of the mark sheet that goes there.
    by : str, optional
        Column of the register that `match` is held against; email where `match` speaks of mail, else id_number.
    decimal : str
        Decimal mark of what is filled in.

    Raises
    ------
    ExportError
        If the marks, the register or a column are missing, or a person cannot be told from another.
    """
    marks, people = _marks(results), _people(results)
    by = by or ("email" if "mail" in match.casefold() else "id_number")
    for head, source in fills.items():
        if source not in marks.columns:
            message = f"the mark sheet has no column {source} to fill {head} from. {nearest(source, marks.columns)}"
            raise ExportError(message)
        if head == match:
            message = f"{head} says who a row is and cannot be filled. Name another column after --fill."
            raise ExportError(message)
    spans = read_spans(export, [match, *fills])
    benches, spoken = _benches(people, by)
    rows = _rows(spans, match, by, spoken, export.name)
    changes: list[Change] = []
    same = 0
    without, look = set(), set()
    sheet = marks.set_index("session")
    for key, row in rows.items():
        session = benches[key]
        if session not in sheet.index or sheet.at[session, "status"] == NOT_MARKED:
            without.add(session)
            continue
        if sheet.at[session, "status"] == LOOK_AT:
            look.add(session)
        for head, source in fills.items():
            column = spans.column(head)
            before, after = spans.rows[row][column].text, _text(sheet.at[session, source], decimal)
            if before == after:
                same += 1
            else:
                changes.append(Change(row, column, spans.lines[row], spoken[key], head, before, after))
    changes.sort(key=lambda one: (one.row, one.column))
    place = spans.column(match)
    used = set(rows.values())
    strangers = [
        f"line {spans.lines[row]}: {cells[place].text.strip() or 'nothing'}"
        for row, cells in enumerate(spans.rows)
        if row not in used and len(cells) > place and any(cell.text.strip() for cell in cells)
    ]
    absent = [_absent(key, benches, spoken, spans, place) for key in sorted(benches) if key not in rows]
    return Filled(spans, tuple(changes), same, tuple(absent), tuple(strangers), tuple(sorted(without)),
                  tuple(sorted(look)))  # fmt: skip


def _marks(results: Path) -> pd.DataFrame:
    path = results / STAFF / SHEET
    if not path.is_file():
        message = f"no {STAFF}/{SHEET} in these results. Run the marked campaign to its end first."
        raise ExportError(message)
    return read_table(path)


def _people(results: Path) -> pd.DataFrame:
    path = results / STAFF / PEOPLE
    if not path.is_file():
        message = f"no {STAFF}/{PEOPLE} in these results. Run the marked campaign to its end first."
        raise ExportError(message)
    people = read_table(path)
    if not len(people):
        message = "the campaign has no marking/register.csv, so nobody can be matched. Add it and run again."
        raise ExportError(message)
    return people.astype(str)


def _folded(text: str) -> str:
    return " ".join(text.split()).casefold()


def _benches(people: pd.DataFrame, by: str) -> tuple[dict[str, str], dict[str, str]]:
    """Bench of each person by key, and the key as the register writes it."""
    benches: dict[str, str] = {}
    spoken: dict[str, str] = {}
    twice: list[str] = []
    for session, text in zip(people["session"], people[by], strict=True):
        key = _folded(text)
        if not key:
            continue
        if key in benches:
            twice.append(f"{text} of bench {session} and of bench {benches[key]}")
        benches[key], spoken[key] = session, text
    if twice:
        message = f"the register has the same {by} twice: {'; '.join(twice)}. Match by another column: --by."
        raise ExportError(message)
    if not benches:
        message = f"the register has no {by}. Match by another of its columns: --by {', '.join(KEYS)}."
        raise ExportError(message)
    return benches, spoken


def _rows(spans: Spans, match: str, by: str, known: Mapping[str, str], name: str) -> dict[str, int]:
    """Row of the export of each person that is there."""
    place = spans.column(match)
    found: dict[str, int] = {}
    twice: list[str] = []
    for row, cells in enumerate(spans.rows):
        key = _folded(cells[place].text) if len(cells) > place else ""
        if key not in known:
            continue
        if key in found:
            twice.append(f"{known[key]} on lines {spans.lines[found[key]]} and {spans.lines[row]}")
        found.setdefault(key, row)
    if twice:
        message = f"{name}: {match} does not tell people apart: {'; '.join(twice)}. Match by another column."
        raise ExportError(message)
    if not found:
        message = f"{name}: no cell of {match} is a person's {by} in the register. Name another column, or --by."
        raise ExportError(message)
    return found


def _absent(key: str, benches: Mapping[str, str], spoken: Mapping[str, str], spans: Spans, place: int) -> str:
    """Words for a person of the register that no row of the export is about."""
    zeros = [
        cells[place].text.strip()
        for cells in spans.rows
        if len(cells) > place and key.isdecimal() and _folded(cells[place].text).lstrip("0") == key.lstrip("0")
    ]
    more = f"; the export has {zeros[0]}, which differs in the zeros in front" if zeros else ""
    return f"{spoken[key]}, bench {benches[key]}{more}"


def _text(value: object, decimal: str) -> str:
    if isinstance(value, str):
        return neutral(value)
    number = float(value)  # type: ignore[arg-type]
    return "" if math.isnan(number) else format(round(number, 2), ".12g").replace(".", decimal)


def filled_text(filled: Filled, written: str | None) -> str:
    """What would change, or has changed, for the terminal."""
    parts = []
    for title, listed in (
        ("in the register, not in the export (nothing is filled in for them)", filled.not_in_export),
        ("in the export, not in the register (their rows stay as they are)", filled.not_in_register),
        ("benches without marks (their people's cells stay as they are)", filled.without_marks),
        ("benches that a person should look at before their marks go out", filled.look_at),
    ):
        if listed:
            parts.append("\n".join([f"{title}:", *(f"  {one}" for one in listed)]))
    lines = [
        f"  line {one.line}, {one.key}, {one.head}: {one.before or 'nothing'} -> {one.after or 'nothing'}"
        for one in filled.changes
    ]
    parts.append("\n".join(["changes:", *(lines or ["  none"])]))
    count = f"{len(filled.changes)} cells change, {filled.same} hold their text already."
    parts.append(f"{count} Written to {written}." if written else f"{count} Nothing is written: add --write OUT.")
    return "\n\n".join(parts)


def write_filled(filled: Filled, export: Path, out: Path) -> None:
    """Write the filled file, never over the export."""
    if out.resolve() == export.resolve() or (out.exists() and out.samefile(export)):
        message = f"{out}: this is the export itself. Give another file after --write."
        raise ExportError(message)
    write_whole(out, filled.data)


def fills_of(asked: Sequence[str]) -> dict[str, str]:
    """Columns to fill from what was asked: `Grade` takes the marks, `Feedback=hints` another column of the sheet."""
    found: dict[str, str] = {}
    for text in asked:
        head, mark, source = text.rpartition("=")
        pair = (head, source) if mark and head and source.isidentifier() else (text, "marks")
        if pair[0] in found:
            message = f"--fill names the column {pair[0]} twice"
            raise ExportError(message)
        found[pair[0]] = pair[1]
    return found
