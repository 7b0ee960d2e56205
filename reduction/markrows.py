"""Rows of the tables of marking: cells as texts, numbers with a decimal point, faults by bench."""

from __future__ import annotations

import re
from collections.abc import Collection, Iterator, Mapping
from dataclasses import dataclass
from pathlib import Path

from reduction.benchrows import NUMBERS, TABLES, by_session, mark_of, read_rows
from reduction.contract import MARKING
from reduction.csvfile import ROW_LIMIT, SIZE_LIMIT, Sheet
from reduction.errors import Fault, Faults, nearest
from reduction.heads import match_heads
from reduction.textfile import read_text

_NUMBER = re.compile(r"[+-]?(?:\d+\.?\d*|\.\d+)(?:[eE][+-]?\d+)?", re.ASCII)
_TEXT_LIMIT = 1000


class BenchFaults:
    """Faults of rows, each laid at the door of the bench it belongs to; those of a whole file stand under ""."""

    def __init__(self) -> None:
        self.by_bench: dict[str, Faults] = {}

    def of(self, bench: str) -> Faults:
        """Collector of one bench, "" for what belongs to none."""
        return self.by_bench.setdefault(bench, Faults())

    def all(self) -> dict[str, tuple[Fault, ...]]:
        """Faults by bench, benches without any left out."""
        return {bench: tuple(faults) for bench, faults in sorted(self.by_bench.items()) if len(faults)}


@dataclass(frozen=True)
class Row:
    """One row of a table of marking: its cells as texts, numbers with a decimal point."""

    cells: Mapping[str, str]
    raw: Mapping[str, str]
    file: str
    line: int

    def fault(self, faults: Faults, column: str, expected: str, advice: str = "", found: str = "") -> None:
        """Record a fault of one cell."""
        cell = self.raw.get(column, "")
        shown = found or (cell if len(cell) <= 60 else cell[:57] + "...") or "nothing"
        faults.add(self.file, line=self.line, column=column, found=shown, expected=expected, advice=advice)


def check_texts(row: Row, columns: Collection[str], faults: Faults) -> None:
    """Record formulas and very long texts in some columns of a row."""
    for column in columns:
        cell = row.raw.get(column, "")
        if advice := formula_advice(cell):
            row.fault(faults, column, "a text", advice)
        if len(cell) > _TEXT_LIMIT:
            row.fault(faults, column, f"at most {_TEXT_LIMIT} characters")


def rows_of(
    folder: Path,
    name: str,
    session: str,
    benches: Collection[str],
    faults: BenchFaults,
) -> dict[str, list[Row]]:
    """Rows of a table by session; `session` is the one whose folder the file lies in, "" in marking/."""
    whole = Faults()
    sheet = read_rows(folder, name, faults=whole)
    if sheet is None:
        faults.of(session).extend(whole)
        return {}
    if session and "session" not in sheet.heads:
        heads = [*sheet.heads, "session"]
        sheet = Sheet(sheet.name, heads, [*sheet.columns, (session,) * len(sheet.lines)], sheet.head_line, sheet.lines,
                      sheet.separator, sheet.encoding)  # fmt: skip
    table = TABLES.get(name, "claims")
    matches, _ = match_heads(sheet, table, faults=whole)
    _lay_at_doors(whole, folder / name, session, benches, faults)
    heads_there = {match.column.name for match in matches}
    if not {column.name for column in MARKING[table] if column.required} <= heads_there:
        return {}
    found: dict[str, list[Row]] = {}
    for bench, own in by_session(sheet).items():
        found[bench] = _rows_of_bench(bench, own, sheet, session, benches, faults)
    return found


def _rows_of_bench(
    bench: str, own: Sheet, whole: Sheet, session: str, benches: Collection[str], faults: BenchFaults
) -> list[Row]:
    collector = faults.of(session or bench)
    expected = f"{session}, whose folder this is" if session else "the name of a folder in sessions/"
    wrong = bench != session if session else bench not in benches
    if wrong:
        formula = formula_advice(bench)
        advice = formula or ("" if session or not benches else nearest(bench, benches))
        for line in own.lines:
            collector.add(own.name, line=line, column="session", found=bench or "nothing", expected=expected,
                          advice=advice)  # fmt: skip
        return []
    mark = mark_of(own, whole, faults=collector)
    return list(_made(own, mark))


def _made(sheet: Sheet, mark: str) -> Iterator[Row]:
    for line, cells in zip(sheet.lines, zip(*sheet.columns, strict=True), strict=True):
        raw = dict(zip(sheet.heads, cells, strict=True))
        plain = {head: _plain(head, cell, mark) for head, cell in raw.items()}
        yield Row(plain, raw if mark else {**raw, "?": "?"}, sheet.name, line)


def _plain(head: str, cell: str, mark: str) -> str:
    """The cell of a number with a plain minus and a decimal point; "?" where that is not possible."""
    if head not in NUMBERS:
        return cell
    cell = cell.replace("\N{MINUS SIGN}", "-")
    if mark == ",":
        return "?" if "." in cell else cell.replace(",", ".")
    return cell


def _lay_at_doors(whole: Faults, path: Path, session: str, benches: Collection[str], faults: BenchFaults) -> None:
    """Give each fault of a line to the one bench that the line names; the rest belong to the whole file."""
    lines: list[str] = []
    for fault in whole:
        if not lines and fault.line and not session:
            text = read_text(path, fault.path, faults=Faults(), limit=SIZE_LIMIT, lines=ROW_LIMIT)
            lines = text.lines if text else []  # as they were numbered when the fault was found
        line = lines[fault.line - 1] if not session and 0 < fault.line <= len(lines) else ""
        named = {word for word in re.split(r"[,;\t]", line) if (bare := word.strip(' "')) and bare in benches}
        named = {word.strip(' "') for word in named}
        faults.of(session or (named.pop() if len(named) == 1 else "")).extend([fault])


def number(row: Row, column: str, faults: Faults, *, optional: bool = False) -> float | None:
    """Finite number of a cell; None where it is empty and may be, or at fault."""
    text = row.cells[column]
    if not text and optional:
        return None
    expected = "a number" + (", or nothing" if optional else "")
    if not _NUMBER.fullmatch(text):
        if row.raw.get("?"):  # the decimal mark of the rows is a fault already
            return None
        row.fault(faults, column, expected, _number_advice(row.raw[column]))
        return None
    value = float(text)
    if value in (float("inf"), float("-inf")):
        row.fault(faults, column, "a finite number")
        return None
    return value


def _number_advice(cell: str) -> str:
    if not cell:
        return "Fill in the cell, or delete the row: a missing claim is none."
    if advice := formula_advice(cell):
        return advice
    if "±" in cell or "+-" in cell or "(" in cell:
        return "The uncertainty belongs in expanded_uncertainty."
    if re.search(r"\d\s*[A-Za-zµμ%°/]+$", cell):
        return "The unit belongs in the column unit."
    return ""


def formula_advice(cell: str) -> str:
    """Advice for a cell that is a formula, "" for any other."""
    return "That is a formula of a spreadsheet; paste its value." if cell[:1] in "=@" and cell else ""
