"""A CSV file whose cells can be replaced one by one while every other byte stays as it is."""

from __future__ import annotations

import codecs
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from pathlib import Path

from reduction.errors import ReductionError

SEPARATORS = (",", ";", "\t")
_HEAD_WITHIN = 10  # rows from the top in which the head must be found
_LARGEST = 50_000_000  # bytes


class ExportError(ReductionError, ValueError):
    """An exported file cannot be used as asked."""


@dataclass(frozen=True)
class Cell:
    """One cell: where it stands in the text, and what it says."""

    start: int
    end: int
    text: str
    quoted: bool


@dataclass(frozen=True)
class Spans:
    """A file as text with the place of every cell below its head."""

    text: str
    codec: str
    mark: bytes  # byte order mark
    separator: str
    heads: tuple[str, ...]
    rows: tuple[tuple[Cell, ...], ...]
    lines: tuple[int, ...]  # of each row

    def column(self, head: str) -> int:
        """Place of a column."""
        return self.heads.index(head)

    def replaced(self, cells: Mapping[tuple[int, int], str]) -> bytes:
        """Bytes of the file with some cells, by row and column, saying something else."""
        parts, at = [], 0
        for row, column in sorted(cells):
            cell = self.rows[row][column]
            parts += [self.text[at : cell.start], _written(cells[row, column], cell.quoted, self.separator)]
            at = cell.end
        return self.mark + "".join([*parts, self.text[at:]]).encode(self.codec)


def _written(text: str, quoted: bool, separator: str) -> str:
    if quoted or any(mark in text for mark in (separator, '"', "\n", "\r")):
        return '"' + text.replace('"', '""') + '"'
    return text


def read_spans(path: Path, heads: Sequence[str]) -> Spans:
    """Read a file that has the given columns, whatever its separator, encoding and line ends.

    Raises
    ------
    ExportError
        If there is no such file, one of the columns is missing or stands there twice, or quotes do not match.
    """
    try:
        if path.stat().st_size > _LARGEST:
            message = f"{path.name}: more than {_LARGEST // 10**6} MB; this is no export of a gradebook."
            raise ExportError(message)
        data = path.read_bytes()
    except OSError as error:
        message = f"{path.name}: {error.strerror}. Give the file that the learning platform exported."
        raise ExportError(message) from None
    text, codec, mark = _decoded(data)
    best: tuple[int, list[str]] = (-1, [])
    for separator in SEPARATORS:
        records, lines = _records(text, separator, path.name)
        for place, record in enumerate(records[:_HEAD_WITHIN]):
            names = [cell.text.strip() for cell in record]
            found = sum(head in names for head in heads)
            if found > best[0] or (found == best[0] and len(names) > len(best[1])):
                best = (found, names)
            if all(head in names for head in heads):
                for head in heads:
                    if names.count(head) > 1:
                        message = f"{path.name} line {lines[place]}: the column {head} stands there twice. Rename one."
                        raise ExportError(message)
                body = range(place + 1, len(records))
                _check_widths(path.name, records, lines, place)
                return Spans(text, codec, mark, separator, tuple(names), tuple(records[row] for row in body),
                             tuple(lines[row] for row in body))  # fmt: skip
    lacking = [head for head in heads if head not in best[1]]
    message = f"{path.name}: found no column {', '.join(lacking)}; there are {', '.join(filter(None, best[1]))}."
    raise ExportError(message)


def _check_widths(name: str, records: Sequence[Sequence[Cell]], lines: Sequence[int], head: int) -> None:
    for row in range(head + 1, len(records)):
        if len(records[row]) not in (len(records[head]), 1) or (len(records[row]) == 1 and records[row][0].text):
            message = (
                f"{name} line {lines[row]}: found {len(records[row])} fields; expected {len(records[head])} as in the "
                "head. Export it again."
            )
            raise ExportError(message)


def _decoded(data: bytes) -> tuple[str, str, bytes]:
    """Text, codec and byte order mark; a file that is no UTF-8 is taken byte by byte, so that nothing is lost."""
    for mark, codec in (
        (codecs.BOM_UTF8, "utf-8"),
        (codecs.BOM_UTF16_LE, "utf-16-le"),
        (codecs.BOM_UTF16_BE, "utf-16-be"),
    ):
        if data.startswith(mark):
            try:
                return data[len(mark) :].decode(codec), codec, mark
            except UnicodeDecodeError:
                break
    try:
        return data.decode("utf-8"), "utf-8", b""
    except UnicodeDecodeError:
        return data.decode("latin-1"), "latin-1", b""


def _records(text: str, separator: str, name: str) -> tuple[list[tuple[Cell, ...]], list[int]]:
    """Cells of every row, and the line each row begins on."""
    records, lines = [], []
    at, line = 0, 1
    while at < len(text):
        cells: list[Cell] = []
        lines.append(line)
        ended = False
        while not ended:
            cell = _cell(text, at, separator, name, line)
            line += text.count("\n", cell.start, cell.end)
            cells.append(cell)
            at = cell.end
            ended = text[at : at + 1] != separator
            at += not ended
        records.append(tuple(cells))
        line += 1
        at += 2 if text[at : at + 2] == "\r\n" else 1
    return records, lines


def _cell(text: str, start: int, separator: str, name: str, line: int) -> Cell:
    """The cell that begins at `start`."""
    if text[start : start + 1] != '"':
        end = start
        while end < len(text) and text[end] not in (separator, "\n", "\r"):
            end += 1
        return Cell(start, end, text[start:end], False)
    end = start + 1
    while True:
        end = text.find('"', end)
        if end < 0:
            message = f"{name} line {line}: a quotation mark that is not closed. Export it again."
            raise ExportError(message)
        if text[end + 1 : end + 2] != '"':
            break
        end += 2
    if text[end + 1 : end + 2] not in ("", separator, "\n", "\r"):
        message = f"{name} line {line}: text after a closing quotation mark. Export it again."
        raise ExportError(message)
    return Cell(start, end + 1, text[start + 1 : end].replace('""', '"'), True)
