"""What a run ends with: which numbers moved, by how many u, and what could have moved them."""

from __future__ import annotations

import json
import math
from pathlib import Path
from typing import Any

from reduction.rundiff import State, changes, difference_text, moved, read_state


def state(run: dict[str, Any] | None = None, **numbers: tuple[float, float]) -> State:
    """State of a run with one particle: column=(estimate, u)."""
    row = {"session": "s1", "particle": "p1", "status": "ok"}
    for name, (value, u) in numbers.items():
        row |= {name: repr(value), f"u_{name}": repr(u) if u else ""}
    return State({("s1", "p1"): row}, {"digest": "d", **(run or {})})


def test_move_is_told_in_units_of_the_u_it_had() -> None:
    found = moved(
        state(mass_kg=(2e-12, 1e-13), charge_e=(100.0, 4.0)), state(mass_kg=(1.9e-12, 5e-13), charge_e=(102.0, 1.0))
    )
    assert [(move.quantity, round(move.by, 9)) for move in found] == [("mass_kg", -1.0), ("charge_e", 0.5)]


def test_number_without_u_moves_without_a_measure() -> None:
    (move,) = moved(state(mass_kg=(1.0, 0.0)), state(mass_kg=(2.0, 0.0)))
    assert math.isinf(move.by)
    assert "no u before" in str(move)


def test_same_numbers_have_not_moved() -> None:
    assert moved(state(mass_kg=(1.0, 0.1)), state(mass_kg=(1.0, 0.1))) == []
    assert (
        difference_text(state(mass_kg=(1.0, 0.1)), state(mass_kg=(1.0, 0.1))) == "Since the last run no number moved."
    )


def test_changes_name_files_settings_versions_and_the_program() -> None:
    before = {"inputs": {"a": "1", "b": "1"}, "settings": {"seed": 1}, "versions": {"numpy": "2.4.6"}, "package": "x"}
    after = {"inputs": {"a": "2", "c": "1"}, "settings": {"seed": 2}, "versions": {"numpy": "2.5.0"}, "package": "y"}
    assert list(changes(state(before), state(after | {"left_out": {"s2": "no gain"}}))) == [
        "file edited a",
        "file gone b",
        "new file c",
        "setting seed: 1 -> 2",
        "version of numpy: 2.4.6 -> 2.5.0",
        "left out s2: none -> no gain",
        "the program itself (its files differ)",
    ]


def test_particles_that_come_go_or_change_status_are_named() -> None:
    before, after = state(mass_kg=(1.0, 0.1)), state(mass_kg=(1.0, 0.1))
    gone = State({**before.particles, ("s1", "p2"): {"status": "ok"}}, before.run)
    excluded = State({("s1", "p1"): {**after.particles["s1", "p1"], "status": "excluded"}}, after.run)
    told = difference_text(gone, excluded)
    assert "No longer there: s1 p2." in told
    assert "s1 p1: status ok -> excluded." in told


def test_long_lists_are_cut_short_and_say_so() -> None:
    def many(shift: float) -> State:
        rows = {
            ("s", f"p{i:02d}"): {"mass_kg": repr(1.0 + shift * i), "u_mass_kg": "1.0", "status": "ok"}
            for i in range(40)
        }
        return State(rows, {"digest": "d"})

    told = difference_text(many(0.0), many(0.01))
    assert "39 numbers of 39 particles moved" in told
    assert "and 27 more, each by no more than 0.27 u" in told


def test_folder_without_a_finished_run_has_no_state(tmp_path: Path) -> None:
    assert not read_state(tmp_path)
    (tmp_path / "particles.csv").write_text("session,particle,mass_kg\ns1,p1,1.0\n")
    assert not read_state(tmp_path)
    (tmp_path / "run.json").write_text(json.dumps({"digest": "d"}))
    assert read_state(tmp_path).particles["s1", "p1"]["mass_kg"] == "1.0"
    assert difference_text(State(), read_state(tmp_path)) == "First finished run in this folder: 1 particles."
