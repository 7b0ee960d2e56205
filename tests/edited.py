"""Copies of simulated campaigns with one thing changed, and what the reduction says of them."""

from __future__ import annotations

import csv
import shutil
from collections.abc import Callable
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import pandas as pd
import yaml

from reduction.check import check_campaign
from reduction.records import SessionRecord
from reduction.session import reduce_session
from reduction.simulation import Habits, simulate_campaign
from reduction.simulationplan import Plan

Row = dict[str, str]
LOGS = ("balance", "height", "secular")


def simulated(
    folder: Path, regime: str, *, seed: int, particles: int = 1, options: dict[str, str] | None = None, **habits: Any
) -> Path:
    """One session of one regime in a new folder; its truth stands beside the folder."""
    plan = Plan(
        regimes=(regime,),
        materials=("PTFE",),
        sessions=1,
        particles=particles,
        habits=Habits(**habits),
        options=options or {},
    )
    simulate_campaign(folder, plan=plan, seed=seed)
    return folder


def truth_of(folder: Path) -> pd.DataFrame:
    """True particles of a simulated campaign, by id."""
    table = pd.read_csv(folder.with_name(f"{folder.name}.truth.csv"), comment="#", dtype={"particle": str})
    return table.set_index("particle")


@dataclass(frozen=True)
class Edited:
    """A campaign of one session that a test may change file by file."""

    folder: Path

    def read(self, name: str) -> dict[str, Any]:
        """Content of a YAML file."""
        content = yaml.safe_load((self.folder / f"{name}.yaml").read_text(encoding="utf-8"))
        return dict(content or {})

    def yaml(self, name: str, **changes: Any) -> Edited:
        """Set keys of a YAML file; None takes a key away, a mapping sets the keys below one."""
        path, content = self.folder / f"{name}.yaml", self.read(name)
        for key, value in changes.items():
            if value is None:
                content.pop(key, None)
            elif isinstance(value, dict) and isinstance(content.get(key), dict):
                content[key] = {k: v for k, v in {**content[key], **value}.items() if v is not None}
            else:
                content[key] = value
        path.write_text(yaml.safe_dump(content, sort_keys=False, width=1000), encoding="utf-8")
        return self

    def campaign(self, **changes: Any) -> Edited:
        """Set keys of campaign.yaml."""
        return self.yaml("campaign", **changes)

    def session(self, **changes: Any) -> Edited:
        """Set keys of the session's file."""
        return self.yaml("sessions/s001/session", **changes)

    def trap(self, **changes: Any) -> Edited:
        """Set keys of the only trap's file."""
        return self.yaml(f"traps/{self.only_name('traps')}", **changes)

    def species(self, **changes: Any) -> Edited:
        """Set keys of the only species' file."""
        return self.yaml(f"species/{self.only_name('species')}", **changes)

    def only_name(self, folder: str) -> str:
        """Name of the only trap or species."""
        (path,) = (self.folder / folder).glob("*.yaml")
        return path.stem

    def path(self, log: str) -> Path:
        """File of a log."""
        return self.folder / "sessions" / "s001" / f"{log}.csv"

    def rows(self, log: str) -> list[Row]:
        """Rows of a log as texts."""
        lines = self.path(log).read_text(encoding="utf-8").splitlines()
        return list(csv.DictReader(line for line in lines if not line.startswith("#")))

    def write(self, log: str, rows: list[Row]) -> Edited:
        """Replace a log; the columns are those of all rows."""
        heads = list(dict.fromkeys(head for row in rows for head in row))
        with self.path(log).open("w", encoding="utf-8", newline="") as file:
            writer = csv.DictWriter(file, heads, restval="")
            writer.writeheader()
            writer.writerows(rows)
        return self

    def each(self, log: str, change: Callable[[Row], Row]) -> Edited:
        """Change every row of a log."""
        return self.write(log, [change(dict(row)) for row in self.rows(log)])

    def keep(self, log: str, wanted: Callable[[Row], bool]) -> Edited:
        """Keep only some rows of a log."""
        return self.write(log, [row for row in self.rows(log) if wanted(row)])

    def one(self, log: str, number: int, **cells: str) -> Edited:
        """Set cells of one row of a log, counted from 0."""
        rows = self.rows(log)
        rows[number] |= cells
        return self.write(log, rows)

    def only(self, *logs: str) -> Edited:
        """Take the other logs away."""
        for log in LOGS:
            if log not in logs:
                self.path(log).unlink(missing_ok=True)
        return self

    def reduce(self) -> SessionRecord:
        """Check the campaign as the program does and reduce its session."""
        campaign, logs, faults = check_campaign(self.folder)
        assert not list(faults), "\n".join(map(str, faults))
        return reduce_session(campaign, "s001", logs["s001"])


def copied(source: Path, folder: Path) -> Edited:
    """Copy a campaign to change."""
    shutil.copytree(source, folder)
    return Edited(folder)


def scaled(cell: str, factor: float) -> str:
    """Number in a cell times a factor, with all its digits."""
    return repr(float(cell) * factor) if cell else ""


def particle(record: SessionRecord, name: str = "p01") -> pd.Series:
    """Row of particles.csv of one particle."""
    (row,) = record.tables["particles"].set_index("particle").loc[[name]].iloc
    return row


def flags(record: SessionRecord, name: str = "p01") -> set[str]:
    """Flags of one particle."""
    return set(filter(None, particle(record, name)["flags"].split(";")))


def method(record: SessionRecord, which: str, name: str = "p01") -> pd.Series:
    """Row of methods.csv of one particle and method."""
    table = record.tables["methods"]
    (row,) = table[(table["particle"] == name) & (table["method"] == which)].iloc
    return row
