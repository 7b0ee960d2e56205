"""The campaign's tables, put together from the sessions' records, and the statement of what they were made from."""

from __future__ import annotations

import csv
import io
import shutil
from collections.abc import Mapping, Sequence
from dataclasses import asdict
from pathlib import Path
from typing import TYPE_CHECKING, Any

from reduction import digests
from reduction.batches import STATE, Plan
from reduction.errors import ResultsError
from reduction.records import FACTS, PIECES
from reduction.tables import COLUMNS
from reduction.wholefile import read_json, whole_file, write_whole

if TYPE_CHECKING:
    from reduction.settings import Campaign


def gather(records: Sequence[Path], results: Path) -> None:
    """Write the campaign's tables, the rows of each record after those of the one before.

    Parameters
    ----------
    records : sequence of Path
        Folders of the sessions' records.
    results : Path
        Where the tables go.

    Raises
    ------
    ResultsError
        If a record has other columns than the tables of this program.
    """
    for piece in PIECES:
        pieces = [folder / f"{piece}.csv" for folder in records]
        if piece == "inputs":
            _gather_inputs(results / f"{piece}.csv", pieces)
        elif piece != "readings":  # a file of its own for each session
            _gather(results / f"{piece}.csv", COLUMNS[piece], pieces)


def _gather(path: Path, columns: Sequence[str], pieces: Sequence[Path]) -> None:
    """Write one table from pieces with the same head."""
    head = (",".join(columns) + "\n").encode()
    with whole_file(path) as out:
        out.write(head)
        for piece in pieces:
            with open(piece, "rb") as handle:
                if handle.readline() != head:
                    message = f"the record {piece.parent} is not one of this program. Remove {STATE} from the results."
                    raise ResultsError(message)
                shutil.copyfileobj(handle, out)


def _gather_inputs(path: Path, pieces: Sequence[Path]) -> None:
    """Write one row for each shared input; where sessions adjusted it apart, it has no one adjusted value."""
    columns = COLUMNS["inputs"]
    adjusted = columns.index("adjusted_estimate")
    rows: dict[tuple[str, ...], tuple[str, ...]] = {}
    for piece in pieces:
        with open(piece, encoding="utf-8", newline="") as handle:
            for row in list(csv.reader(handle))[1:]:
                key, value = tuple(row[:adjusted]), tuple(row[adjusted:])
                rows[key] = value if rows.get(key, value) == value else ("",) * len(value)
    text = io.StringIO()
    writer = csv.writer(text, lineterminator="\n")
    writer.writerow(columns)
    writer.writerows((*key, *value) for key, value in sorted(rows.items()))
    write_whole(path, text.getvalue().encode())


def run_statement(settings: Campaign, plan: Plan, results: Path, inputs: Mapping[str, str]) -> dict[str, Any]:
    """Content of run.json: what the results were made from, and nothing of when, where or by whom.

    Parameters
    ----------
    settings : Campaign
        The campaign; its sessions may be left unread.
    plan : Plan
        What the run had to do.
    results : Path
        Where the records lie.
    inputs : mapping
        Digest of every input file.
    """
    facts = {name: read_json(folder / FACTS) for name, folder in plan.records(results)}
    left = {str(name): str(reason) for name, reason in settings.leave_out.items()}
    left |= {name: str(fact["reason"]) for name, fact in facts.items() if fact["status"] == "left_out"}
    options = asdict(settings.options)
    options.pop("when_a_session_fails")  # what it did stands in `left_out`
    return {
        "digest": plan.campaign,
        "inputs": dict(inputs),
        "left_out": left,
        "lock": digests.lock_digest(),
        "package": digests.package_digest(),
        "seed": options["seed"],
        "sessions": {
            name: {
                "date": fact.get("date", ""),
                "digest": plan.record_name(name),
                "status": fact["status"],
                "trap": fact.get("trap", ""),
            }
            for name, fact in facts.items()
        },
        "settings": options,
        "versions": dict(digests.versions()),
    }
