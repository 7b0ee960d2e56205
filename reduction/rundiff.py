"""Which numbers moved since the last run of a results folder, by how many u, and what changed that could move them."""

from __future__ import annotations

import csv
import json
import math
from collections.abc import Iterator, Mapping
from contextlib import suppress
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

QUANTITIES = {
    "charge_to_mass_C_per_kg": "charge-to-mass ratio",
    "drag_rate_per_s": "drag rate",
    "diameter_um": "diameter",
    "mass_kg": "mass",
    "charge_e": "charge",
    "surface_charge_density_C_per_m2": "surface charge density",
}
"""Columns of particles.csv that are compared; the u of each stands in the column of that name after `u_`."""

SHOWN = 12  # moved numbers listed one by one
FILES = ("particles.csv", "run.json")


@dataclass(frozen=True)
class State:
    """What a finished run of a results folder left: its particles and the statement of what it was made from."""

    particles: Mapping[tuple[str, str], Mapping[str, str]] = field(default_factory=dict)
    run: Mapping[str, Any] = field(default_factory=dict)

    def __bool__(self) -> bool:
        return bool(self.run)


def read_state(folder: Path) -> State:
    """Read a finished run's particles.csv and run.json; an empty state where they are not both there."""
    with suppress(FileNotFoundError, ValueError, KeyError):
        with open(folder / FILES[0], encoding="utf-8", newline="") as handle:
            rows = {(row["session"], row["particle"]): row for row in csv.DictReader(handle)}
        with open(folder / FILES[1], encoding="utf-8") as handle:
            return State(rows, json.load(handle))
    return State()


@dataclass(frozen=True)
class Move:
    """One number that moved."""

    session: str
    particle: str
    quantity: str  # column of particles.csv
    before: float
    after: float
    by: float  # difference over the u it had before [1]; infinite where it had none

    def __str__(self) -> str:
        size = f"{self.by:+.2g} u" if math.isfinite(self.by) else "no u before"
        name = f"{self.session} {self.particle}, {QUANTITIES[self.quantity]}"
        return f"{name}: {self.before:.6g} -> {self.after:.6g} ({size})"


def moved(before: State, after: State) -> list[Move]:
    """Numbers that differ between two runs, the largest move in units of u first."""
    found = []
    for key in sorted(set(before.particles) & set(after.particles)):
        old, new = before.particles[key], after.particles[key]
        for name in QUANTITIES:
            if old.get(name) and new.get(name) and old[name] != new[name]:
                a, b, u = float(old[name]), float(new[name]), float(old.get(f"u_{name}") or 0)
                found.append(Move(*key, name, a, b, (b - a) / u if u > 0 else math.copysign(math.inf, b - a)))
    return sorted(found, key=lambda move: (-abs(move.by), move.session, move.particle, move.quantity))


def _of(mapping: Mapping[str, Any], name: str) -> Mapping[str, Any]:
    value = mapping.get(name)
    return value if isinstance(value, Mapping) else {}


def changes(before: State, after: State) -> Iterator[str]:
    """What differs between what two runs were made from, in plain words."""
    old, new = before.run, after.run
    files_old, files_new = _of(old, "inputs"), _of(new, "inputs")
    for name in sorted(set(files_old) | set(files_new)):
        if name not in files_old:
            yield f"new file {name}"
        elif name not in files_new:
            yield f"file gone {name}"
        elif files_old[name] != files_new[name]:
            yield f"file edited {name}"
    for part, word in (("settings", "setting"), ("versions", "version of"), ("left_out", "left out")):
        a, b = _of(old, part), _of(new, part)
        for name in sorted(set(a) | set(b)):
            if a.get(name) != b.get(name):
                yield f"{word} {name}: {_text(a.get(name))} -> {_text(b.get(name))}"
    if old.get("lock", new.get("lock")) != new.get("lock"):
        yield "the lock of the libraries (.locks/requirements.lock)"
    if old.get("package") != new.get("package"):
        yield "the program itself (its files differ)"


def _text(value: Any) -> str:
    return "none" if value is None else value if isinstance(value, str) else json.dumps(value, sort_keys=True)


def difference_text(before: State, after: State) -> str:
    """Lines that end a run: what moved since the last finished run of this folder, by how much, and why."""
    if not before:
        return f"First finished run in this folder: {len(after.particles)} particles."
    lines = []
    moves = moved(before, after)
    if moves:
        particles = len({(move.session, move.particle) for move in moves})
        lines.append(f"Since the last run {len(moves)} numbers of {particles} particles moved:")
        lines += [f"  {move}" for move in moves[:SHOWN]]
        if len(moves) > SHOWN:
            lines.append(f"  and {len(moves) - SHOWN} more, each by no more than {abs(moves[SHOWN].by):.2g} u")
    else:
        lines.append("Since the last run no number moved.")
    for word, names in (
        ("New", set(after.particles) - set(before.particles)),
        ("No longer there", set(before.particles) - set(after.particles)),
    ):
        if names:
            listed = sorted(" ".join(name) for name in names)
            more = f" and {len(listed) - SHOWN} more" if len(listed) > SHOWN else ""
            lines.append(f"{word}: {', '.join(listed[:SHOWN])}{more}.")
    for key in sorted(set(before.particles) & set(after.particles)):
        a, b = before.particles[key].get("status"), after.particles[key].get("status")
        if a != b:
            lines.append(f"{' '.join(key)}: status {a} -> {b}.")
    reasons = list(changes(before, after))
    if reasons:
        lines.append("What changed:")
        lines += [f"  {reason}" for reason in reasons[: 2 * SHOWN]]
        if len(reasons) > 2 * SHOWN:
            lines.append(f"  and {len(reasons) - 2 * SHOWN} more")
    elif moves:
        lines.append("Nothing it is made from changed: this should not happen on one machine; compare the processors.")
    return "\n".join(lines)
