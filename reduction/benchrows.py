"""The tables of marking divided by bench, so that no bench has a say in what another is given; light."""

from __future__ import annotations

import hashlib
import json
import os
from collections.abc import Mapping
from dataclasses import replace
from pathlib import Path

from reduction.csvfile import Sheet, decimal_mark, read_sheet
from reduction.errors import Faults

FOLDER = "marking"
SCHEME, CLAIMS, REGISTER, OVERRIDES = (
    f"{FOLDER}/{name}" for name in ("scheme.yaml", "claims.csv", "register.csv", "overrides.csv")
)
FILES = (SCHEME, CLAIMS, REGISTER, OVERRIDES)
KEY = f"{FOLDER}/pseudonym.key"
"""Staff only, and in no statement of what results were made from."""
TABLES = {CLAIMS: "claims", REGISTER: "register", OVERRIDES: "overrides"}
NUMBERS = ("value", "expanded_uncertainty", "coverage_factor", "marks")
"""Columns that hold numbers, in whichever table."""
UNIQUE = ("email", "id_number")
"""Columns that tell one person from another."""
_HEADS = frozenset(["session", "particle", "quantity", "unit", "name", "pseudonym", "criterion", "reason", "by"])


def own_claims(session: str) -> str:
    """Name of the file of claims in a session's own folder."""
    return f"sessions/{session}/claims.csv"


def is_marked(folder: Path) -> bool:
    """Whether a campaign is marked: whether it has a scheme."""
    return (folder / SCHEME).is_file()


def read_rows(folder: Path, name: str, *, faults: Faults) -> Sheet | None:
    """Read a table of marking as text; None where there is none, or none that can be read."""
    if not os.path.lexists(folder / name):
        return None
    return read_sheet(folder / name, name, faults=faults, knows=lambda head: head in {*_HEADS, *NUMBERS, *UNIQUE})


def by_session(sheet: Sheet) -> dict[str, Sheet]:
    """Rows of each session named, as sheets of their own; those that name none under ""."""
    if "session" not in sheet.heads:
        return {"": sheet}
    rows: dict[str, list[int]] = {}
    for row, session in enumerate(sheet.columns[sheet.heads.index("session")]):
        rows.setdefault(session, []).append(row)
    return {session: _rows_of(sheet, rows[session]) for session in sorted(rows)}


def _rows_of(sheet: Sheet, rows: list[int]) -> Sheet:
    columns = [tuple(column[row] for row in rows) for column in sheet.columns]
    return replace(sheet, columns=columns, lines=[sheet.lines[row] for row in rows])


def mark_of(own: Sheet, whole: Sheet, *, faults: Faults) -> str:
    """Decimal mark of one bench's rows: what they settle among themselves, else what the rest of the file settles."""
    numeric = [index for index, head in enumerate(own.heads) if head in NUMBERS]
    others = [index for index in range(len(own.heads)) if index not in numeric]
    found = Faults()
    mark = decimal_mark(own, numeric, others, faults=found)
    if mark == "" and own.separator != ",":
        rest = decimal_mark(whole, numeric, others, faults=Faults())
        if rest and not _conflicts(own, rest):
            return rest
    faults.extend(found)
    return mark


def _conflicts(own: Sheet, mark: str) -> bool:
    """Whether a bench's own numbers are written with the other decimal mark."""
    other = "," if mark == "." else "."
    numbers = (cells for head, cells in zip(own.heads, own.columns, strict=True) if head in NUMBERS)
    return any(other in cell for cells in numbers for cell in cells)


def bench_texts(folder: Path, sessions: list[str]) -> dict[str, str]:
    """All that the marking tables hold of each session, as one text that says nothing of the other sessions.

    How many rows of the register share an address or number with one of the bench's goes along, because such a bench
    is not marked.
    """
    parts: dict[str, list[object]] = {session: [] for session in sessions}
    for name in TABLES:
        faults = Faults()
        sheet = read_rows(folder, name, faults=faults)
        spoilt = [str(fault) for fault in faults]
        benches = by_session(sheet) if sheet else {}
        shared = _times(sheet) if sheet and name == REGISTER else {}
        for session in sessions:
            own = benches.get(session)
            wanted = name == REGISTER and sheet is not None  # a bench without a row in it is not marked
            parts[session].append([name, spoilt, wanted, own and _text_of(own, sheet, shared)])
    for session in sessions:
        path = folder / own_claims(session)
        parts[session].append(hashlib.sha256(path.read_bytes()).hexdigest() if path.is_file() else None)
    return {session: json.dumps(part, sort_keys=True) for session, part in parts.items()}


def _text_of(own: Sheet, whole: Sheet | None, shared: Mapping[tuple[str, str], int]) -> list[object]:
    rows = [
        sorted((head, cell) for head, cell in zip(own.heads, cells, strict=True) if cell)
        for cells in zip(*own.columns, strict=True)
    ]
    repeated = [shared.get((head, cell), 0) for row in rows for head, cell in row if head in UNIQUE]
    mark = mark_of(own, whole, faults=Faults()) if whole else ""
    return [sorted(own.heads), own.separator, mark, rows, repeated]


def _times(sheet: Sheet) -> dict[tuple[str, str], int]:
    """How often each address and number stands in the register, whatever its case."""
    found: dict[tuple[str, str], int] = {}
    for head, cells in zip(sheet.heads, sheet.columns, strict=True):
        if head in UNIQUE:
            folded = [cell.casefold() for cell in cells]
            found |= {(head, cell): folded.count(cell.casefold()) for cell in set(cells) if cell}
    return found
