"""The record of one session: its tables and facts, kept in a folder named by what they depend on."""

from __future__ import annotations

import os
import shutil
from dataclasses import dataclass, field
from pathlib import Path
from typing import TYPE_CHECKING, Any

from reduction.wholefile import read_json, write_json

if TYPE_CHECKING:
    import pandas as pd

PIECES = ("particles", "methods", "agreement", "inputs", "components", "budget", "readings")
"""The tables of a record, each one session's rows of the results' table of that name."""

FACTS = "session.json"


@dataclass
class SessionRecord:
    """What the reduction of one session found."""

    tables: dict[str, pd.DataFrame] = field(default_factory=dict)  # by the names in PIECES; a missing one is empty
    facts: dict[str, Any] = field(default_factory=dict)  # the content of session.json

    @property
    def session(self) -> str:
        """Id of the session."""
        return str(self.facts["session"])

    def save(self, folder: Path | str) -> None:
        """Write the record as a folder that is there whole or not at all."""
        from reduction.tables import COLUMNS, write_table

        folder = Path(folder)
        part = folder.with_name(f".{folder.name}.part")
        shutil.rmtree(part, ignore_errors=True)
        part.mkdir(parents=True)
        unknown = sorted(set(self.tables) - set(PIECES))
        if unknown:
            message = f"tables no record has: {unknown}"
            raise ValueError(message)
        for name in PIECES:
            write_table(part / f"{name}.csv", COLUMNS[name], self.tables.get(name, []))
        write_json(part / FACTS, self.facts)
        shutil.rmtree(folder, ignore_errors=True)
        os.replace(part, folder)


def load(folder: Path | str) -> SessionRecord:
    """Read a record back."""
    from reduction.tables import read_table

    folder = Path(folder)
    tables = {name: read_table(folder / f"{name}.csv") for name in PIECES}
    return SessionRecord(tables, read_json(folder / FACTS))
