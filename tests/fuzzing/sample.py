"""The small campaign that mutations start from, as texts, and how its files are written in another way."""

from __future__ import annotations

import random
import re
from dataclasses import dataclass
from pathlib import Path

from edited import simulated
from marked import HEAD as CLAIMS
from marked import SCHEME

LOGS = ("balance", "height", "secular")
SESSION = "sessions/s001/session.yaml"


@dataclass(frozen=True)
class Sample:
    """Files of a campaign by name; every one is UTF-8, each CSV plain comma-separated cells."""

    files: dict[str, str]

    def write(self, folder: Path) -> None:
        """Write the campaign into a new folder."""
        for name, text in self.files.items():
            path = folder / name
            path.parent.mkdir(parents=True, exist_ok=True)
            path.write_bytes(text.encode())

    def table(self, log: str) -> tuple[list[str], list[list[str]]]:
        """Heads and rows of a CSV file."""
        lines = [line.split(",") for line in self.files[csv_name(log)].splitlines() if not line.startswith("#")]
        return lines[0], lines[1:]

    def named(self, start: str) -> str:
        """Name of the one file in a folder."""
        (name,) = (name for name in self.files if name.startswith(start))
        return name


def csv_name(log: str) -> str:
    """Path of a log within the campaign."""
    return f"sessions/s001/{log}.csv"


def made(folder: Path) -> Sample:
    """One dense bead with all three logs, a few texts, a particle lost, a marked claim: every kind of file."""
    simulated(folder, "room_air_dense", seed=5)
    files = {path.relative_to(folder).as_posix(): path.read_text("utf-8") for path in folder.rglob("*.*")
             if path.is_file()}  # fmt: skip
    files["campaign.yaml"] = re.sub(r"monte_carlo_trials.*\n", "", files["campaign.yaml"]) + "monte_carlo_trials: 100\n"
    files[SESSION] += "operator: A. Nonym\nnotes: invented\nattributes: {bench: three}\n"
    files[csv_name("particles")] = "particle,charged_with,contacts\np01,PTFE,1\n"
    files[csv_name("lost")] = "particle,reason\np09,left at the first change of drive\n"
    files["marking/scheme.yaml"] = SCHEME
    files["marking/claims.csv"] = CLAIMS + "s001,p01,charge_to_mass,1.990e-4,C_per_kg,4.0e-6,2\n"
    files["marking/register.csv"] = "session,name,email\ns001,A. Nonym,a@uni.example\n"
    files["marking/overrides.csv"] = "session,criterion,marks,reason,by\ns001,sign,1,shown on the day,B. Nonym\n"
    return Sample(files)


@dataclass(frozen=True)
class Dialect:
    """How a CSV file is written."""

    separator: str = ","
    mark: str = "."
    end: str = "\n"
    quotes: bool = False
    spaces: bool = False


def dialect(chance: random.Random) -> Dialect:
    """Draw one of those that laboratories use."""
    separator = chance.choice(",;\t")
    mark = "." if separator == "," else chance.choice(".,")
    return Dialect(separator, mark, chance.choice(["\n", "\r\n", "\r"]), chance.random() < 0.3, chance.random() < 0.3)


def localised(cell: str, mark: str) -> str:
    """Number with its decimal mark, and a digit more where 1,234 would be left open."""
    if mark == "." or not re.fullmatch(r"[+\-\u2212]?\d*\.\d*(?:[eE][+-]?\d+)?", cell):
        return cell
    return cell.replace(".", mark) + ("0" if re.fullmatch(r"[+\-\u2212]?[1-9]\d{0,2}\.\d{3}", cell) else "")


def rendered(heads: list[str], rows: list[list[str]], how: Dialect) -> str:
    """CSV text of a table; cells are taken as they are, quoted where they must be."""

    def cell(text: str) -> str:
        must = how.quotes or any(mark in text for mark in (how.separator, '"', "\n", "\r")) or text[:1] == "#"
        text = '"' + text.replace('"', '""') + '"' if must else text
        return f" {text} " if how.spaces and not must else text

    return "".join(how.separator.join(map(cell, row)) + how.end for row in [heads, *rows])
