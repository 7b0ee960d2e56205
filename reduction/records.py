"""The record of one session: its tables and facts, kept in a folder named by what they depend on."""

from __future__ import annotations

import errno
import os
import shutil
from dataclasses import dataclass, field
from pathlib import Path
from typing import TYPE_CHECKING, Any

from reduction.wholefile import part_of, read_json, write_json

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
        """Write the record as a folder that is there whole or not at all; one that is there already stays.

        It is named by all that its content depends on, so that it holds the same: another job wrote it, on a node that
        was thought lost, say.
        """
        folder = Path(folder)
        part = part_of(folder)
        part.mkdir(parents=True)
        try:
            self._write(part)
            os.replace(part, folder)
        except OSError as error:
            if error.errno not in (errno.ENOTEMPTY, errno.EEXIST):
                raise
        finally:
            shutil.rmtree(part, ignore_errors=True)

    def _write(self, folder: Path) -> None:
        from reduction.tables import COLUMNS, write_table

        unknown = sorted(set(self.tables) - set(PIECES))
        if unknown:
            message = f"tables no record has: {unknown}"
            raise ValueError(message)
        for name in PIECES:
            write_table(folder / f"{name}.csv", COLUMNS[name], self.tables.get(name, []))
        write_json(folder / FACTS, self.facts)


def load(folder: Path | str) -> SessionRecord:
    """Read a record back."""
    from reduction.tables import read_table

    folder = Path(folder)
    tables = {name: read_table(folder / f"{name}.csv") for name in PIECES}
    return SessionRecord(tables, read_json(folder / FACTS))
