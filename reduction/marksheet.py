"""The mark sheet of staff: one row a bench, and every claim with what it was held against."""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from pathlib import Path
from typing import Any

from reduction.marking import NOT_MARKED, BenchMarks
from reduction.markingfiles import RegisterRow, Scheme
from reduction.tables import write_table

STAFF = "marking/staff"  # folder in the results
SHEET, JUDGED, PEOPLE = "marks.csv", "judged.csv", "register.csv"
_JUDGED = "session particle criterion quantity claimed reference u_reference share words"
JUDGED_COLUMNS = tuple(_JUDGED.split())


PEOPLE_COLUMNS = ("session", "name", "email", "id_number", "pseudonym")


def columns_of(scheme: Scheme) -> tuple[str, ...]:
    """Columns of the mark sheet."""
    return ("session", *scheme.criteria, "marks", "total", "hints", "hint_codes", "status", "look_at", "overridden")


def write_sheet(folder: Path, scheme: Scheme, benches: Sequence[BenchMarks], unknown: Mapping[str, str]) -> None:
    """Write marks.csv and judged.csv; benches that are not marked come first, names that are no bench before them.

    Parameters
    ----------
    folder : Path
        results/marking/staff.
    scheme : Scheme
        The scheme.
    benches : sequence of BenchMarks
        All of them.
    unknown : mapping
        Names in the files of marking that are no bench of this campaign, and what is wrong with each.
    """
    folder.mkdir(parents=True, exist_ok=True)
    ordered = sorted(benches, key=lambda one: (one.status != NOT_MARKED, one.session))
    rows = [*_unknown_rows(scheme, unknown), *(_row(scheme, one) for one in ordered)]
    write_table(folder / SHEET, columns_of(scheme), rows)
    write_table(folder / JUDGED, JUDGED_COLUMNS, (row for one in benches for row in _judged_rows(one)))


def write_people(folder: Path, register: Mapping[str, Sequence[RegisterRow]]) -> None:
    """Write the register beside the mark sheet, for the gradebook; without a row where the campaign has none."""
    rows = [row for session in sorted(register) for row in register[session]]
    cells = ({name: getattr(row, name) for name in PEOPLE_COLUMNS} for row in rows)
    write_table(folder / PEOPLE, PEOPLE_COLUMNS, cells)


def _row(scheme: Scheme, bench: BenchMarks) -> dict[str, Any]:
    marks = {one.criterion: one.marks for one in bench.criteria}
    by_hand = [
        f"{one.criterion}: {'not judged' if one.automatic is None else format(one.automatic, 'g')} to "
        f"{one.override.marks:g} by {one.override.by}, {one.override.reason}"
        for one in bench.criteria
        if one.override is not None
    ]
    return {
        "session": bench.session,
        **{name: marks.get(name) for name in scheme.criteria},
        "marks": bench.marks,
        "total": bench.total,
        "hints": "; ".join(hint.text for hint in bench.hints),
        "hint_codes": ";".join(dict.fromkeys(hint.code for hint in bench.hints)),
        "status": bench.status,
        "look_at": "; ".join(bench.look_at),
        "overridden": "; ".join(by_hand),
    }


def _unknown_rows(scheme: Scheme, unknown: Mapping[str, str]) -> Iterator[dict[str, Any]]:
    for name, reason in sorted(unknown.items()):
        empty: dict[str, Any] = dict.fromkeys(columns_of(scheme), "")
        numbers = dict.fromkeys((*scheme.criteria, "marks"))
        yield empty | numbers | {"session": name, "total": scheme.total, "status": NOT_MARKED, "look_at": reason}


def _judged_rows(bench: BenchMarks) -> Iterator[dict[str, Any]]:
    for one in bench.judged:
        yield {
            "session": bench.session,
            "particle": one.particle,
            "criterion": one.criterion,
            "quantity": one.quantity,
            "claimed": one.claimed,
            "reference": one.reference,
            "u_reference": one.u_reference,
            "share": one.share,
            "words": one.text,
        }
