"""The tables of a session's report."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from typing import Any

import pandas as pd

from reduction.sheets import Sheet, columns_of, quantity_column, rows_of, sheet
from reduction.typeset import (
    NONE,
    bracketed,
    bracketed_alone,
    common_power,
    foreign,
    interval,
    minus,
    pair,
    significant,
    times,
    wide,
)
from reduction.wording import counted, flag_words, input_words, status_words, unit_words

Row = Mapping[str, Any]
_SHORT_ID = 12


def particle_table(particles: Sequence[Row], coverage: float) -> Sheet:
    """State, charge-to-mass ratio, interval, drag rate and charge of each particle."""
    head = ["Particle", "State"]
    cells = [[foreign(p["particle"], 14) for p in particles], [status_words(p["status"]) for p in particles]]
    s, u = columns_of(particles, "charge_to_mass_C_per_kg", "u_charge_to_mass_C_per_kg")
    title, text, power = quantity_column("q/m", "C kg⁻¹", s, u)
    head.append(title)
    cells.append(signless(particles, text))
    lows, highs = columns_of(particles, "charge_to_mass_low_C_per_kg", "charge_to_mass_high_C_per_kg")
    head.append(f"{100 * coverage:g} % interval\n" + title.partition("\n")[2])
    cells.append(signless(particles, [interval(*one, power) for one in zip(lows, highs, u, strict=True)]))
    value, u = columns_of(particles, "drag_rate_per_s", "u_drag_rate_per_s")
    title, text, _ = quantity_column("Drag rate", "s⁻¹", value, u)
    head.append(title)
    cells.append(text)
    value, u = columns_of(particles, "charge_e", "u_charge_e")
    if any(map(math.isfinite, value)):
        title, text, power = quantity_column("Charge", "e", value, u)
        lows, highs = columns_of(particles, "charge_low_e", "charge_high_e")
        head += [title, f"{100 * coverage:g} % interval\n" + title.partition("\n")[2]]
        cells.append(signless(particles, text))
        cells.append(signless(particles, [interval(*one, power) for one in zip(lows, highs, u, strict=True)]))
    return sheet(head, cells, "llrlrrl"[: len(head)], [_room(particles)] + [0] * (len(head) - 1))


def signless(particles: Sequence[Row], cells: Sequence[str]) -> list[str]:
    """Cells with ± before the sizes of particles whose sign no log tells."""
    return [
        f"±{cell}" if cell != NONE and "sign_undetermined" in p["flags"].split(";") else cell
        for p, cell in zip(particles, cells, strict=True)
    ]


def size_table(particles: Sequence[Row], facts: Row) -> Sheet | None:
    """Diameter, mass by each way to the size, charge, and how well the particle's own readings fit."""
    known = [p for p in particles if math.isfinite(p["charge_to_mass_C_per_kg"])]
    if not known:
        return None
    masses = facts.get("masses") or {}
    by_way = {(p["particle"], str(r["mass_from"])): r for p in known for r in masses.get(p["particle"]) or []}
    power = common_power([*columns_of(known, "mass_kg")[0], *(float(row["mass_kg"]) for row in by_way.values())])
    head, cells = ["Particle"], [[foreign(p["particle"], 14) for p in known]]

    def add(name: str, unit: str, columns: Sequence[Sequence[float]], power: int | None = None) -> None:
        value, u = columns
        if any(map(math.isfinite, value)):
            title, text, _ = quantity_column(name, unit, value, u, power)
            head.append(title)
            cells.append(signless(known, text) if name.startswith(("Charge", "Surface")) else text)

    add("Diameter", "µm", columns_of(known, "diameter_um", "u_diameter_um"))
    add("Mass", "kg", columns_of(known, "mass_kg", "u_mass_kg"), power)
    for way in ("drag", "diameter"):
        rows = [by_way.get((p["particle"], way), {}) for p in known]
        both = [[float(row.get(key, math.nan)) for row in rows] for key in ("mass_kg", "u_mass_kg")]
        add(f"from {way}\nalone", "kg", both, power)
    add("Charge", "C", columns_of(known, "charge_C", "u_charge_C"))
    add("Surface charge\ndensity", "C m⁻²", columns_of(
        known, "surface_charge_density_C_per_m2", "u_surface_charge_density_C_per_m2"))  # fmt: skip
    head += ["χ² / d.o.f.", "Effective\nd.o.f."]
    cells.append([_over(p) for p in known])
    cells.append([_effective(p["effective_degrees_of_freedom"]) for p in known])
    return sheet(head, cells, "l" + "r" * (len(head) - 1), [_room(known)] + [0] * (len(head) - 1))


def drift_table(particles: Sequence[Row]) -> Sheet | None:
    """Relative drift of the charge of the particles that drift."""
    rows = [p for p in particles if math.isfinite(p["charge_drift_per_s"])]
    if not rows:
        return None
    value, u = columns_of(rows, "charge_drift_per_s", "u_charge_drift_per_s")
    second, per_second, _ = quantity_column("Relative drift of the charge", "s⁻¹", value, u)
    hour, per_hour, _ = quantity_column("in an hour", "%", [36e4 * v for v in value], [36e4 * v for v in u], 0)
    return sheet(
        ["Particle", second, hour],
        [[foreign(p["particle"], 14) for p in rows], per_second, per_hour],
        "lrr",
        [_room(rows), 0, 0],
    )


def _room(particles: Sequence[Row]) -> int:
    """Share of the free width for a column of ids: none while they are short."""
    return int(any(len(p["particle"]) > _SHORT_ID for p in particles))


def _effective(dof: float) -> str:
    if math.isnan(dof):
        return NONE
    return "∞" if math.isinf(dof) else "> 1000" if dof > 1000 else f"{dof:.0f}"


def remark_table(particles: Sequence[Row], methods: Mapping[str, Sequence[Row]]) -> Sheet:
    """What qualifies the particles' results, in words, and whose."""
    whose: dict[str, list[str]] = {}
    for p in particles:
        words = flag_words(p["flags"])
        if p["status"] not in ("ok", "excluded"):
            adjusted = next((r for r in methods.get(p["particle"], []) if r["method"] == "adjusted"), None)
            why = f": {foreign(adjusted['reason'])}" if adjusted and adjusted["reason"] else ""
            words = [status_words(p["status"]) + why, *words]
        for one in words:
            whose.setdefault(one, []).append(p["particle"])
    ranked = sorted(whose, key=lambda one: (-len(whose[one]), one))
    return sheet(
        ["Remark", "Particles"], [ranked, [", ".join(foreign(name, 14) for name in whose[one]) for one in ranked]],
        "ll", [2, 1],
    )  # fmt: skip


def ratio_power(particles: Sequence[Row]) -> int | None:
    """Power of ten that the charge-to-mass ratios of a session share; None where they span too many decades."""
    values = [p["charge_to_mass_C_per_kg"] for p in particles]
    return None if wide(values) else common_power(values)


def ratio(p: Row, power: int | None) -> str:
    """Charge-to-mass ratio of a particle with the power of ten the session shares."""
    value, u = p["charge_to_mass_C_per_kg"], p["u_charge_to_mass_C_per_kg"]
    text = bracketed_alone(value, u) if power is None else times(bracketed(value, u, power), power)
    return signless([p], [text])[0]


def method_table(particles: Sequence[Row], methods: Mapping[str, Sequence[Row]]) -> Sheet | None:
    """Each method of every particle by itself, with the adjusted value last."""
    rows = [row for p in particles for row in methods.get(p["particle"], [])]
    if not rows:
        return None
    signs = {p["particle"]: p["flags"] for p in particles}
    spans = [len(methods[p["particle"]]) for p in particles if methods.get(p["particle"])]
    head = ["Particle", "Method"]
    cells = [[foreign(r["particle"], 10) for r in rows], [r["method"] for r in rows]]
    s, u, own = columns_of(
        rows, "charge_to_mass_C_per_kg", "u_charge_to_mass_C_per_kg", "u_random_charge_to_mass_C_per_kg"
    )
    title, text, power = quantity_column("q/m", "C kg⁻¹", s, u, ratio_power(particles))
    text = [
        f"±{cell}"
        if cell != NONE and v > 0 and (r["method"] == "secular" or "sign_undetermined" in signs[r["particle"]])
        else cell
        for r, v, cell in zip(rows, s, text, strict=True)
    ]
    head += [title, "random part\nof u"]
    cells += [text, [NONE if math.isnan(v) else significant(v / 10.0**power, 2) for v in own]]
    gamma, u = columns_of(rows, "drag_rate_per_s", "u_drag_rate_per_s")
    title, text, _ = quantity_column("Drag rate", "s⁻¹", gamma, u)
    head.append(title)
    cells.append(text)
    origin, u = ([1e3 * v for v in c] for c in columns_of(rows, "height_origin_mm", "u_height_origin_mm"))
    if any(map(math.isfinite, origin)):
        title, text, _ = quantity_column("Height\norigin", "µm", origin, u, 0)
        head.append(title)
        cells.append(text)
    head += ["Readings", "χ² / d.o.f.", "Residual\n/ u"]
    cells.append([NONE if math.isnan(r["readings"]) else f"{r['readings']:.0f}" for r in rows])
    cells.append([_over(r) for r in rows])
    cells.append([signed(r["normalized_residual"]) for r in rows])
    align, widths = "ll" + "r" * (len(head) - 2), [_room(particles)] + [0] * (len(head) - 1)
    notes = ["" if r["status"] == "ok" else _state(r) for r in rows]
    if any(notes):
        head.append("Note")
        cells.append(notes)
        align, widths = align + "l", [*widths, 1]
    return {**sheet(head, cells, align, widths), "spans": spans}


def signed(value: float) -> str:
    """A normalised residual, with its sign."""
    return NONE if not math.isfinite(value) else minus(f"{value:+.2f}")


def _over(row: Row) -> str:
    if math.isnan(row["chi_square"]):
        return NONE
    return f"{row['chi_square']:.1f} / {row['degrees_of_freedom']:.0f}"


def _state(row: Row) -> str:
    words = status_words(row["status"]) if row["status"] != "ok" else "ok"
    return f"{words}: {foreign(row['reason'])}" if row["reason"] and row["reason"] != words else words


def input_table(frame_: pd.DataFrame) -> Sheet | None:
    """Shared inputs as stated and, where particles are adjusted together, as adjusted, with the pull."""
    rows = [r for r in rows_of(frame_) if r["scope"] != "particle" and r["u"] > 0]
    if not rows:
        return None
    words = [input_words(r["input"]) for r in rows]
    stated = [pair(r["estimate"], r["u"]) for r in rows]
    whose = [
        "this session" if r["scope"] == "session" else foreign(one) for r, (_, one) in zip(rows, words, strict=True)
    ]
    head = ["Input", "Shared by", "Unit", "Stated", "u", "Shape"]
    cells = [
        [foreign(what) for what, _ in words],
        whose,
        [unit_words(r["unit"]) or "1" for r in rows],
        [estimate for estimate, _ in stated],
        [u for _, u in stated],
        [r["shape"] or NONE for r in rows],
    ]
    if any(math.isfinite(r["adjusted_u"]) for r in rows):
        adjusted = [pair(r["adjusted_estimate"], r["adjusted_u"]) for r in rows]
        head[5:5] = ["Adjusted", "u adjusted", "Pull"]
        cells[5:5] = [
            [estimate for estimate, _ in adjusted],
            [u for _, u in adjusted],
            [signed(r.get("pull", math.nan)) for r in rows],
        ]
    return sheet(head, cells, "lll" + "r" * (len(head) - 4) + "l", [2, 1] + [0] * (len(head) - 2))


def exact_words(facts: Row) -> str:
    """Inputs stated without an uncertainty, with their values, as one sentence."""
    rows = facts.get("exact_inputs") or []
    told = [
        f"{_exact_words(str(name))} {foreign(f'{value} {unit_words(str(unit))}'.strip())}" for name, value, unit in rows
    ]
    return "; ".join(told) + "." if told else "None."


def _exact_words(name: str) -> str:
    if name.count("/") < 2:
        return foreign(name.replace("/", ", ").replace("_", " "))
    what, whose = input_words(name)
    whose = "" if name.startswith("session/") else whose
    return foreign(f"{what}, {whose}" if whose else what)


def left_out_rows(facts: Row, readings: Sequence[Row], methods: Mapping[str, Sequence[Row]]) -> list[list[Any]]:
    """What the user excluded, then what the reduction had to leave out, log by log of a particle, with the reason."""
    rows: list[list[Any]] = [list(row) for row in facts.get("left_out", [])]
    lines: dict[tuple[str, str], list[int]] = {}
    for reading in readings:
        if reading["status"] == "left_out":
            lines.setdefault((str(reading["particle"]), str(reading["log"])), []).append(int(reading["line"]))
    for (particle, log), own in sorted(lines.items()):
        row = next((r for r in methods.get(particle, []) if r["method"] == log), None)
        why = _state(row) if row else "not used"
        span = f"{min(own)} to {max(own)}" if len(own) > 1 else str(own[0])
        rows.append([log, span, particle, f"{counted(len(own), 'reading')}: {why}"])
    return rows


def where_table(rows: Sequence[Sequence[Any]], last: str) -> Sheet | None:
    """What stands where in the logs, with the words said of it under the head `last`."""
    if not rows:
        return None
    return sheet(
        ["Where", "Line", "Particle", last],
        [
            [foreign(str(log) if "." in str(log) else f"{log}.csv") for log, _, _, _ in rows],
            [str(line or NONE) for _, line, _, _ in rows],
            [foreign(particle, 14) for _, _, particle, _ in rows],
            [foreign(why) for _, _, _, why in rows],
        ],
        "lrll",
        [0, 0, int(any(len(str(row[2])) > _SHORT_ID for row in rows)), 3],
    )


def by_particle(frame_: pd.DataFrame) -> dict[str, list[Row]]:
    """Rows of a table by particle."""
    rows: dict[str, list[Row]] = {}
    for row in rows_of(frame_):
        rows.setdefault(str(row["particle"]), []).append(row)
    return rows
