"""CSV as laboratories write it: one file as columns of text, and the decimal mark that its cells settle."""

from __future__ import annotations

import csv
import re
from collections.abc import Callable, Iterable, Iterator
from dataclasses import dataclass
from pathlib import Path

from reduction.errors import Faults
from reduction.textfile import read_text

SIZE_LIMIT = 200_000_000  # [bytes]
ROW_LIMIT = 5_000_000
_SEPARATORS = {",": "comma", ";": "semicolon", "\t": "tab"}
COLUMN_LIMIT = 1000
_HEAD_LIMIT = 200  # characters of one column name
_FAULTS_SHOWN = 10


@dataclass(frozen=True)
class Sheet:
    """A CSV file as text, blank and comment lines left out, cells without spaces around them."""

    name: str
    heads: list[str]
    columns: list[tuple[str, ...]]
    head_line: int
    lines: list[int]  # of each row in the file
    separator: str
    encoding: str

    def dialect(self, mark: str) -> str:
        """Words for the dialect, `mark` being the decimal mark."""
        return f"{_SEPARATORS[self.separator]}, decimal {'comma' if mark == ',' else 'point'}, {self.encoding}"


class _Lines:
    """Lines for `csv.reader`, with blank and comment lines left out between rows but not within quotes.

    A spreadsheet puts a comment in quotes. Above the head such a line is taken for one; below it the first cell of a
    reading may look like that, and `_rows` looks at the other cells.
    """

    def __init__(self, lines: list[str], start: int) -> None:
        self._lines = lines
        self.at = start  # index of the next line
        self.row_starts = True
        self.in_body = False
        self.first = start

    def __iter__(self) -> Iterator[str]:
        lines, count = self._lines, len(self._lines)
        while self.at < count:
            line = lines[self.at]
            self.at += 1
            if self.row_starts:
                head = line.lstrip()
                if not head or head[0] == "#" or (head.startswith('"#') and not self.in_body):
                    continue
                self.first = self.at
                self.row_starts = False
            yield line + "\n"


def read_sheet(path: Path, name: str, *, faults: Faults, knows: Callable[[str], bool]) -> Sheet | None:
    """Read a CSV file as text, or record under `name` why it cannot be read.

    Parameters
    ----------
    path, name : Path, str
        The file, and how to call it in a fault.
    faults : Faults
        Collector.
    knows : callable
        Whether a head is a name of the contract: the separator is the one that splits the head into most of them.

    Returns
    -------
    Sheet or None
        None if there is no table at all; a sheet lacks the rows that had faults.
    """
    text = read_text(path, name, faults=faults, limit=SIZE_LIMIT, lines=ROW_LIMIT)
    if text is None:
        return None
    start, stated = _stated_separator(text.lines)
    lines = _Lines(text.lines, start)
    first = next(iter(lines), None)
    if first is None:
        faults.add(name, found="no line", expected="a line of column names", advice="Write the names of the columns.")
        return None
    if len(first) > COLUMN_LIMIT * _HEAD_LIMIT:
        found, expected = f"a line of {len(first):,} characters", "a line of column names"
        faults.add(name, line=lines.first, found=found, expected=expected, advice="Write the names of the columns.")
        return None
    if stated is not None and stated not in _SEPARATORS:
        expected = "sep=, or sep=; or a tab"
        faults.add(name, line=start, found=f"sep={stated}", expected=expected, advice="Export it again.")
        return None
    separator = stated or _separator(first, knows)
    return _rows(name, _Lines(text.lines, lines.first - 1), separator, text.encoding, faults)


def _stated_separator(lines: list[str]) -> tuple[int, str | None]:
    """Index of the line after `sep=;`, and the separator it states."""
    for index, line in enumerate(lines):
        plain = line.strip(' "\ufeff')
        if plain.strip():
            if plain[:4].lower() == "sep=":
                return index + 1, plain[4:].strip(' "') or None
            break
    return 0, None


def _separator(head: str, knows: Callable[[str], bool]) -> str:
    def merit(separator: str) -> tuple[int, int]:
        fields = _fields(head, separator)
        return sum(map(knows, fields)), len(fields)

    return max(_SEPARATORS, key=merit)


def _fields(line: str, separator: str) -> list[str]:
    try:
        return [field.strip() for field in next(csv.reader([line], delimiter=separator, skipinitialspace=True))]
    except csv.Error:
        return []


def _rows(name: str, lines: _Lines, separator: str, encoding: str, faults: Faults) -> Sheet | None:
    reader = csv.reader(lines, delimiter=separator, skipinitialspace=True, strict=True)
    rows: list[list[str]] = []
    numbers: list[int] = []
    wrong: list[tuple[int, int]] = []  # line, fields
    heads: list[str] = []
    width = head_line = 0
    try:
        for row in reader:
            lines.row_starts = True
            if not head_line:
                heads, head_line = [cell.strip() for cell in row], lines.first
                while heads and not heads[-1]:
                    heads.pop()
                width = len(heads)
                if not _fit_heads(name, heads, head_line, faults):
                    return None
                lines.in_body = True
                continue
            if row[0].startswith("#") and not any(map(str.strip, row[1:])):
                continue
            if len(row) != width:
                while len(row) > width and not row[-1].strip():
                    row.pop()
                if len(row) != width:
                    if any(cell.strip() for cell in row):
                        wrong.append((lines.first, len(row)))
                    continue
            rows.append(row)
            numbers.append(lines.first)
    except csv.Error as error:
        if "field limit" in str(error):
            found, advice = f"a cell of more than {csv.field_size_limit():,} characters", "Close the quotation marks."
        else:
            found = f"quotes that do not match ({error})"
            advice = 'Close each quotation mark, and write a mark within quotes twice: "".'
        faults.add(name, line=lines.first, found=found, expected="fields", advice=advice)
        return None
    if not heads:
        faults.add(name, line=head_line, found="no column names", expected="a line of column names")
        return None
    _report_widths(name, wrong, width, separator, faults)
    columns: list[tuple[str, ...]] = [tuple(map(str.strip, column)) for column in zip(*rows, strict=True)]
    columns = columns or [() for _ in heads]
    if "" in columns[0]:  # there may be rows of separators alone
        keep = [any(cells) for cells in zip(*columns, strict=True)]
        columns = [tuple(cell for cell, kept in zip(column, keep, strict=True) if kept) for column in columns]
        numbers = [number for number, kept in zip(numbers, keep, strict=True) if kept]
    return Sheet(name, heads, columns, head_line, numbers, separator, encoding)


def _fit_heads(name: str, heads: list[str], line: int, faults: Faults) -> bool:
    """Whether a head has no more, and no longer, names than a log can have; each is compared with many others."""
    if len(heads) > COLUMN_LIMIT:
        faults.add(name, line=line, found=f"{len(heads):,} columns", expected=f"at most {COLUMN_LIMIT:,}")
        return False
    longest = max(map(len, heads), default=0)
    if longest > _HEAD_LIMIT:
        found, expected = f"a column name of {longest:,} characters", f"at most {_HEAD_LIMIT}"
        faults.add(name, line=line, found=found, expected=expected, advice="The first line names the columns.")
        return False
    return True


def _report_widths(name: str, wrong: list[tuple[int, int]], width: int, separator: str, faults: Faults) -> None:
    advice = f"Give every row {width - 1} {_SEPARATORS[separator]}s, also where the last cells are empty."
    if separator == ",":
        advice += " With decimal commas, separate the columns by semicolons."
    for line, count in wrong[:_FAULTS_SHOWN]:
        faults.add(name, line=line, found=f"{count} fields", expected=f"{width} as in the head", advice=advice)
    if len(wrong) > _FAULTS_SHOWN:
        faults.add(
            name,
            line=wrong[_FAULTS_SHOWN][0],
            found=f"{len(wrong) - _FAULTS_SHOWN} more rows of another length from here on",
            expected=f"{width} fields",
        )


_COMMA_NUMBER = re.compile(r"[+-]?(?:\d+,\d*|,\d+)(?:[eE][+-]?\d+)?", re.ASCII)
_POINT_NUMBER = re.compile(r"[+-]?(?:\d+\.\d*|\.\d+)(?:[eE][+-]?\d+)?", re.ASCII)
_EITHER = re.compile(r"[+-]?[1-9]\d{0,2},\d{3}", re.ASCII)  # 1,234: decimal comma or thousands


@dataclass(frozen=True)
class _Marks:
    """Places (column, row) where cells tell the decimal mark."""

    comma: tuple[int, int] | None
    point: tuple[int, int] | None
    either: list[tuple[int, int]]


def _marks(sheet: Sheet, indices: Iterable[int]) -> _Marks:
    comma = point = None
    either: list[tuple[int, int]] = []
    for column in indices:
        cells = sheet.columns[column]
        text = "\n".join(cells)
        for row, cell in enumerate(cells) if "," in text else ():
            if "," in cell and _COMMA_NUMBER.fullmatch(cell):
                if _EITHER.fullmatch(cell):
                    either.append((column, row))
                elif comma is None:
                    comma = (column, row)
        if point is None and "." in text:
            point = next(((column, row) for row, cell in enumerate(cells) if _POINT_NUMBER.fullmatch(cell)), None)
    return _Marks(comma, point, either)


def decimal_mark(sheet: Sheet, numeric: list[int], other: list[int], *, faults: Faults) -> str:
    """Decimal mark of a whole file, from all its cells.

    A `1,234` alone is either 1.234 or 1234; another cell must settle it, one of the columns that are not read included.
    Where marks are mixed or nothing settles them, that is a fault.

    Parameters
    ----------
    sheet : Sheet
        The file.
    numeric, other : list of int
        Columns that are read as numbers, and columns outside the contract.
    faults : Faults
        Collector.
    """
    marks = _marks(sheet, numeric)
    places = ([marks.comma] if marks.comma else []) + marks.either
    if not places:
        return "."
    if sheet.separator == ",":
        advice = "Separate the columns by semicolons, or write a decimal point without quotes."
        _report_cells(sheet, places, "a number with a decimal point in a comma-separated file", advice, faults)
        return ""
    if marks.comma and marks.point:
        column, row = marks.point
        other_cell = sheet.columns[marks.comma[0]][marks.comma[1]]
        faults.add(
            sheet.name,
            line=sheet.lines[row],
            column=sheet.heads[column],
            found=f"{sheet.columns[column][row]}, with {other_cell} on line {sheet.lines[marks.comma[1]]}",
            expected="one decimal mark in the whole file",
            advice="Write all numbers with a decimal point, or all with a decimal comma, and none between thousands.",
        )
        return ""
    if marks.comma:
        return ","
    if marks.point:
        column, row = marks.point
        expected = f"a decimal point, as in {sheet.columns[column][row]} on line {sheet.lines[row]}"
        _report_cells(sheet, marks.either, expected, "Write no separators between thousands.", faults)
        return ""
    further = _marks(sheet, other)
    if further.comma and not further.point:
        return ","
    column, row = marks.either[0]
    cell = sheet.columns[column][row]
    readings = f"{cell.replace(',', '.')} or {cell.replace(',', '')}"
    expected = "a decimal mark that some cell of the file settles"
    advice = f"It may mean {readings}. Write a decimal point, or another digit: {cell}0."
    _report_cells(sheet, marks.either, expected, advice, faults)
    return ""


def _report_cells(sheet: Sheet, places: list[tuple[int, int]], expected: str, advice: str, faults: Faults) -> None:
    for column, row in places[:_FAULTS_SHOWN]:
        faults.add(
            sheet.name,
            line=sheet.lines[row],
            column=sheet.heads[column],
            found=sheet.columns[column][row],
            expected=expected,
            advice=advice,
        )
