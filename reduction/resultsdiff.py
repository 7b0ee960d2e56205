"""What tells two results folders apart: numbers that moved, what appeared or vanished, and what could have done it.

`diffwords` says it in words.
"""

from __future__ import annotations

import csv
import math
from collections.abc import Iterable, Iterator, Mapping, Sequence
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

from reduction.checksums import file_sum
from reduction.errors import ResultsError
from reduction.resultfiles import SUMS, every_file
from reduction.rundiff import QUANTITIES, State, changes, read_state

_DRIFT = {"charge_drift_per_s": "charge drift"}
_UNITS = {
    "charge_to_mass_C_per_kg": "C/kg", "drag_rate_per_s": "1/s", "diameter_um": "um", "mass_kg": "kg", "charge_e": "e",
    "surface_charge_density_C_per_m2": "C/m2", "charge_drift_per_s": "1/s",
}  # fmt: skip

Key = tuple[str, ...]
Row = Mapping[str, str]


@dataclass(frozen=True)
class Compared:
    """A table whose numbers are compared: what its rows are, and each number with its u."""

    file: str
    key: tuple[str, ...]
    numbers: Mapping[str, tuple[str, str]]  # column: words for it, column of its u
    words: tuple[str, ...] = ()  # columns of text


TABLES = (
    Compared(
        "particles.csv",
        ("session", "particle"),
        {name: (f"{words} [{_UNITS[name]}]", f"u_{name}") for name, words in (QUANTITIES | _DRIFT).items()},
        ("status", "flags", "species", "charged_with", "methods", "mass_from"),
    ),
    Compared("comparison.csv", ("group",), {"mean": ("mean of the group", "u_mean")}, ("unit", "note")),
    Compared(
        "contrasts.csv",
        ("group_a", "group_b"),
        {"difference": ("difference of the groups", "u_difference"), "ratio": ("ratio of the groups", "u_ratio")},
        ("note",),
    ),
    Compared(
        "inputs.csv",
        ("input",),
        {"estimate": ("stated", "u"), "adjusted_estimate": ("adjusted", "adjusted_u")},
        ("unit", "shape"),
    ),
)


@dataclass(frozen=True)
class Move:
    """One number, or its u, that is another in B."""

    file: str
    key: Key
    quantity: str  # words for the column
    before: float
    after: float
    by: float  # difference over u in A [1]; infinite where there is none
    u_before: float
    u_after: float

    @property
    def size(self) -> float:
        """Size of the move in u, or of the change of u over u, whichever is the larger."""
        return max(abs(self.by), abs(self.u_change))

    @property
    def u_change(self) -> float:
        """Relative change of u [1]."""
        return self.u_after / self.u_before - 1.0 if self.u_before > 0.0 and math.isfinite(self.u_after) else 0.0


@dataclass(frozen=True)
class Difference:
    """All that tells two results folders apart."""

    moves: tuple[Move, ...] = ()
    appeared: tuple[tuple[str, Key, str], ...] = ()  # file, row, number; no number where the whole row is new
    vanished: tuple[tuple[str, Key, str], ...] = ()
    words: tuple[tuple[str, Key, str, str, str], ...] = ()  # file, row, column, text in A, text in B
    causes: tuple[str, ...] = ()  # what differs between what the two were made from
    by_session: Mapping[str, tuple[str, ...]] = field(default_factory=dict)  # what of it a moved session depends on
    files: tuple[str, ...] = ()  # files that differ, or are in one folder only

    def __bool__(self) -> bool:
        return bool(self.files)


def difference(a: Path, b: Path) -> Difference:
    """Compare two results folders.

    Raises
    ------
    ResultsError
        If one of them holds no finished run.
    """
    before, after = _state(a), _state(b)
    moves: list[Move] = []
    appeared: list[tuple[str, Key, str]] = []
    vanished: list[tuple[str, Key, str]] = []
    words: list[tuple[str, Key, str, str, str]] = []
    for table in TABLES:
        old, new = _rows(a / table.file, table.key), _rows(b / table.file, table.key)
        vanished += [(table.file, key, "") for key in sorted(set(old) - set(new))]
        appeared += [(table.file, key, "") for key in sorted(set(new) - set(old))]
        for key in sorted(set(old) & set(new)):
            for column, (name, u) in table.numbers.items():
                x, y = _number(old[key], column), _number(new[key], column)
                if math.isnan(x) != math.isnan(y):
                    (vanished if math.isnan(y) else appeared).append((table.file, key, name))
                elif move := _move(table.file, key, name, (x, y), (_number(old[key], u), _number(new[key], u))):
                    moves.append(move)
            words += [
                (table.file, key, column, old[key].get(column, ""), new[key].get(column, ""))
                for column in table.words
                if old[key].get(column, "") != new[key].get(column, "")
            ]
    moves.sort(key=lambda move: (-move.size, move.file, move.key, move.quantity))
    touched = {key[0] for file, key in _touched(moves, appeared, vanished, words) if file == "particles.csv"}
    return Difference(
        tuple(moves),
        tuple(appeared),
        tuple(vanished),
        tuple(words),
        tuple(changes(before, after)),
        {session: tuple(_causes_of(session, before, after)) for session in sorted(touched)},
        tuple(_files(a, b)),
    )


def _state(folder: Path) -> State:
    found = read_state(folder) if folder.is_dir() else State()
    if not found:
        message = f"{folder}: there is no finished run in this folder. Expected a results folder with run.json."
        raise ResultsError(message)
    return found


def _rows(path: Path, key: Sequence[str]) -> dict[Key, Row]:
    try:
        with open(path, encoding="utf-8", newline="") as handle:
            return {tuple(row[name] for name in key): row for row in csv.DictReader(handle)}
    except FileNotFoundError:
        return {}
    except (KeyError, TypeError, ValueError, csv.Error) as error:
        message = (
            f"{path}: is not the table a run writes ({error!r}). Verify the folder: motescale verify {path.parent}"
        )
        raise ResultsError(message) from None


def _number(row: Row, column: str) -> float:
    try:
        return float(row.get(column) or "nan")
    except ValueError:
        return math.nan


def _move(file: str, key: Key, name: str, numbers: tuple[float, float], us: tuple[float, float]) -> Move | None:
    (x, y), (u, v) = numbers, us
    same_u = u == v or (math.isnan(u) and math.isnan(v))
    if math.isnan(x) or (x == y and same_u):
        return None
    by = 0.0 if x == y else (y - x) / u if u > 0.0 else math.copysign(math.inf, y - x)
    return Move(file, key, name, x, y, by, u, v)


def _touched(
    moves: Iterable[Move],
    appeared: Iterable[tuple[str, Key, str]],
    vanished: Iterable[tuple[str, Key, str]],
    words: Iterable[tuple[str, Key, str, str, str]],
) -> Iterator[tuple[str, Key]]:
    yield from ((move.file, move.key) for move in moves)
    yield from (one[:2] for part in (appeared, vanished) for one in part)
    yield from (one[:2] for one in words)


def _causes_of(session: str, before: State, after: State) -> Iterator[str]:
    """What differs of all that one session's numbers depend on."""
    species = {
        row.get("species", "") for state in (before, after) for key, row in state.particles.items() if key[0] == session
    }
    traps = {_session(state, session).get("trap", "") for state in (before, after)}
    together = any(_part(state, "settings").get("adjust") == "campaign" for state in (before, after))
    for line in changes(before, after):
        words = line.split(" ")
        name = words[2] if words[0] in ("new", "file") else ""
        part, _, rest = name.partition("/")
        stem = rest.removesuffix(".yaml")
        if (
            together
            or not name
            or (part == "sessions" and rest.startswith(f"{session}/"))
            or (part == "traps" and (stem in traps or traps == {""}))
            or (part == "species" and stem in species)
            or name == "campaign.yaml"
        ) and not line.startswith("left out "):
            yield line


def _part(state: State, name: str) -> Mapping[str, Any]:
    found = state.run.get(name)
    return found if isinstance(found, Mapping) else {}


def _session(state: State, session: str) -> Mapping[str, Any]:
    found = _part(state, "sessions").get(session)
    return found if isinstance(found, Mapping) else {}


def _files(a: Path, b: Path) -> Iterator[str]:
    """Files that differ, except the checksums, which differ wherever anything does."""
    for name in sorted(set(every_file(a)) | set(every_file(b))):
        one, other = file_sum(a / name), file_sum(b / name)
        if one != other and name != SUMS:
            yield name if one and other else f"{name} (only in {'A' if one else 'B'})"
