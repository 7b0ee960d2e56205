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
    moved,
    pair,
    percent,
    significant,
    times,
    wide,
)
from reduction.wording import RESULTS, flag_words, input_words, status_words, unit_words

Row = Mapping[str, Any]
_SHORT_ID = 12
_COMPACT_TAIL = 0.005  # inputs below this share everywhere are left to the CSV in the compact table


def particle_table(particles: Sequence[Row], coverage: float) -> Sheet:
    """State, charge-to-mass ratio, interval, drag rate and charge of each particle."""
    head = ["Particle", "State"]
    cells = [[foreign(p["particle"], 14) for p in particles], [status_words(p["status"]) for p in particles]]
    s, u = columns_of(particles, "charge_to_mass_C_per_kg", "u_charge_to_mass_C_per_kg")
    title, text, power = quantity_column("q/m", "C kg⁻¹", s, u)
    head.append(title)
    cells.append(text)
    lows, highs = columns_of(particles, "charge_to_mass_low_C_per_kg", "charge_to_mass_high_C_per_kg")
    head.append(f"{100 * coverage:g} % interval\n" + title.partition("\n")[2])
    cells.append([interval(a, b, c, power) for a, b, c in zip(lows, highs, u, strict=True)])
    for name, key, factor, unit in (
        ("Drag rate", "drag_rate_per_s", 1.0, "s⁻¹"),
        ("Charge", "charge_e", 1.0, "e"),
    ):
        value, u = columns_of(particles, key, f"u_{key}")
        title, text, _ = quantity_column(name, unit, [factor * v for v in value], [factor * v for v in u])
        head.append(title)
        cells.append(text)
    head.append("From")
    cells.append([p["methods"].replace(";", ", ") or NONE for p in particles])
    return sheet(head, cells, "llrlrrl", [_room(particles), 0, 0, 0, 0, 0, 2])


def size_table(particles: Sequence[Row]) -> Sheet | None:
    """Diameter, mass, charge and how well the particle's own readings fit."""
    known = [p for p in particles if math.isfinite(p["diameter_um"]) or math.isfinite(p["mass_kg"])]
    if not known:
        return None
    head, cells = ["Particle"], [[foreign(p["particle"], 14) for p in known]]
    for name, key, unit in (
        ("Diameter", "diameter_um", "µm"),
        ("Mass", "mass_kg", "kg"),
        ("Charge", "charge_C", "C"),
        ("Surface charge density", "surface_charge_density_C_per_m2", "C m⁻²"),
    ):
        value, u = columns_of(known, key, f"u_{key}")
        title, text, _ = quantity_column(name, unit, value, u)
        head.append(title)
        cells.append(text)
    head += ["χ²", "Degrees of\nfreedom", "Effective\nd.o.f.", "Mass from"]
    cells.append([significant(p["chi_square"]) for p in known])
    cells.append([NONE if math.isnan(p["degrees_of_freedom"]) else f"{p['degrees_of_freedom']:.0f}" for p in known])
    cells.append([_effective(p["effective_degrees_of_freedom"]) for p in known])
    cells.append([p["mass_from"] or NONE for p in known])
    return sheet(head, cells, "lrrrrrrrl", [_room(known), 0, 0, 0, 0, 0, 0, 0, 1])


def ways_table(particles: Sequence[Row], facts: Row) -> Sheet | None:
    """Mass and charge by each way to the size, side by side."""
    masses = facts.get("masses") or {}
    names = [p["particle"] for p in particles if masses.get(p["particle"])]
    if not names:
        return None
    by_way = {(name, str(row["mass_from"])): row for name in names for row in masses[name]}
    head, cells = ["Particle"], [[foreign(name, 14) for name in names]]
    for title, key, unit in (("Mass", "mass_kg", "kg"), ("Charge", "charge_e", "e")):
        power = common_power([row[key] for row in by_way.values()])
        for way in ("adjusted", "drag", "diameter"):
            rows = [by_way.get((name, way), {}) for name in names]
            value, u = ([float(row.get(k, math.nan)) for row in rows] for k in (key, f"u_{key}"))
            top, text, _ = quantity_column(f"{title},\n{way}", unit, value, u, power)
            head.append(top)
            cells.append(text)
    return sheet(head, cells, "lrrrrrr", [1, 1, 1, 1, 1, 1, 1])


def _room(particles: Sequence[Row]) -> int:
    """Share of the free width for a column of ids: none while they are short."""
    return int(any(len(p["particle"]) > _SHORT_ID for p in particles))


def _effective(dof: float) -> str:
    if math.isnan(dof):
        return NONE
    return "∞" if math.isinf(dof) else "> 1000" if dof > 1000 else f"{dof:.0f}"


def remark_table(particles: Sequence[Row]) -> Sheet:
    """What qualifies the particles' results, in words."""
    rows = [(p, words) for p in particles if (words := flag_words(p["flags"])) or p["status"] not in ("ok", "excluded")]
    return sheet(
        ["Particle", "State", "Remark"],
        [
            [foreign(p["particle"], 14) for p, _ in rows],
            [status_words(p["status"]) for p, _ in rows],
            ["; ".join(words) or NONE for _, words in rows],
        ],
        "lll",
        [_room([p for p, _ in rows]), 0, 3],
    )


def ratio_power(particles: Sequence[Row]) -> int | None:
    """Power of ten that the charge-to-mass ratios of a session share; None where they span too many decades."""
    values = [p["charge_to_mass_C_per_kg"] for p in particles]
    return None if wide(values) else common_power(values)


def ratio(p: Row, power: int | None) -> str:
    """Charge-to-mass ratio of a particle with the power of ten the session shares."""
    value, u = p["charge_to_mass_C_per_kg"], p["u_charge_to_mass_C_per_kg"]
    return bracketed_alone(value, u) if power is None else times(bracketed(value, u, power), power)


def method_table(rows: Sequence[Row], power: int | None) -> Sheet | None:
    """Each method by itself, with the adjusted value last; charge-to-mass in units of ten to `power`."""
    if not rows:
        return None
    head, cells = ["Method"], [[r["method"] for r in rows]]
    s, u, own = columns_of(
        rows, "charge_to_mass_C_per_kg", "u_charge_to_mass_C_per_kg", "u_random_charge_to_mass_C_per_kg"
    )
    title, text, power = quantity_column("q/m", "C kg⁻¹", s, u, power)
    text = [
        f"±{cell}" if r["method"] == "secular" and v > 0 else cell for r, v, cell in zip(rows, s, text, strict=True)
    ]
    head += [title, "random part\nof u alone"]
    cells += [text, [NONE if math.isnan(v) else significant(v / 10.0**power, 2) for v in own]]
    gamma, u = columns_of(rows, "drag_rate_per_s", "u_drag_rate_per_s")
    title, text, _ = quantity_column("Drag rate", "s⁻¹", gamma, u)
    head.append(title)
    cells.append(text)
    origin, u = ([1e3 * v for v in c] for c in columns_of(rows, "height_origin_mm", "u_height_origin_mm"))
    if any(map(math.isfinite, origin)):
        title, text, _ = quantity_column("Height origin", "µm", origin, u, 0)
        head.append(title)
        cells.append(text)
    head += ["Readings", "χ² / d.o.f.", "State"]
    cells.append([NONE if math.isnan(r["readings"]) else f"{r['readings']:.0f}" for r in rows])
    cells.append(
        [
            NONE if math.isnan(r["chi_square"]) else f"{significant(r['chi_square'])} / {r['degrees_of_freedom']:.0f}"
            for r in rows
        ]
    )
    cells.append([_state(r) for r in rows])
    return sheet(head, cells, "l" + "r" * (len(head) - 2) + "l", [0] * (len(head) - 1) + [1])


def _state(row: Row) -> str:
    words = status_words(row["status"]) if row["status"] != "ok" else "ok"
    return f"{words}: {foreign(row['reason'])}" if row["reason"] and row["reason"] != words else words


def budgets(particles: Sequence[Row], budget: pd.DataFrame) -> list[dict[str, Any]]:
    """Uncertainty budget of each particle: charge-to-mass ratio in full, the other results as shares."""
    rows = by_particle(budget)
    out = []
    for p in particles:
        own = rows.get(p["particle"], [])
        main = [r for r in own if r["result"] == "charge_to_mass"]
        if not main:
            continue
        value = ratio(p, ratio_power(particles))
        others = _compact(own)
        out.append(
            {
                "title": f"Particle {foreign(p['particle'])}: charge-to-mass ratio {value} C kg⁻¹",
                "table": _budget_table(main),
                "others": others,
                "others_words": "The other results of this particle: share of each input in the variance, in percent.",
            }
        )
    return out


def _named(name: str) -> str:
    what, whose = input_words(name)
    if name.startswith("particle/"):
        return foreign(what)
    whose = "this session" if name.startswith("session/") else whose
    return foreign(f"{what}, {whose}" if whose else what)


def _budget_table(rows: Sequence[Row]) -> Sheet:
    ranked = sorted(rows, key=lambda r: (-abs(r["component"]) if math.isfinite(r["component"]) else 0.0, r["input"]))
    both = [pair(r["estimate"], r["u"]) for r in ranked]
    return sheet(
        ["Quantity", "Estimate", "u", "Shape", "Type", "Sensitivity", "Component\nC kg⁻¹", "Share\n%"],
        [
            [_named(r["input"]) for r in ranked],
            [estimate for estimate, _ in both],
            [u for _, u in both],
            [r["shape"] or NONE for r in ranked],
            [r["evaluation"] or NONE for r in ranked],
            [significant(r["sensitivity"]) for r in ranked],
            [significant(r["component"]) for r in ranked],
            [percent(r["share"]) for r in ranked],
        ],
        "lrrlcrrr",
        [1, 0, 0, 0, 0, 0, 0, 0],
    )


def _compact(rows: Sequence[Row]) -> Sheet | None:
    results = [name for name in RESULTS if name != "charge_to_mass" and any(r["result"] == name for r in rows)]
    if not results:
        return None
    share = {(r["result"], r["input"]): r["share"] for r in rows}
    largest: dict[str, float] = {}
    for (result, name), value in share.items():
        if result in results and math.isfinite(value):
            largest[name] = max(largest.get(name, 0.0), abs(value))
    names = sorted((n for n in largest if largest[n] >= _COMPACT_TAIL), key=lambda n: (-largest[n], n))
    cells = [[_named(name) for name in names]]
    cells += [[percent(share.get((result, name), math.nan)) for name in names] for result in results]
    return sheet(
        ["Quantity", *[RESULTS[name][0].capitalize().replace("Surface charge", "Surface\ncharge") for name in results]],
        cells, "l" + "r" * len(results), [1] + [0] * len(results),
    )  # fmt: skip


def input_table(frame_: pd.DataFrame) -> Sheet | None:
    """Shared inputs as stated and as adjusted."""
    rows = [r for r in rows_of(frame_) if r["scope"] != "particle" and r["u"] > 0]
    if not rows:
        return None
    words = [input_words(r["input"]) for r in rows]
    stated = [pair(r["estimate"], r["u"]) for r in rows]
    adjusted = [pair(r["adjusted_estimate"], r["adjusted_u"]) for r in rows]
    return sheet(
        ["Input", "Shared by", "Unit", "Stated", "u", "Adjusted", "u adjusted", "Moved\n/ u", "Shape"],
        [
            [foreign(what) for what, _ in words],
            [
                "this session" if r["scope"] == "session" else foreign(whose)
                for r, (_, whose) in zip(rows, words, strict=True)
            ],
            [unit_words(r["unit"]) or "1" for r in rows],
            [estimate for estimate, _ in stated],
            [u for _, u in stated],
            [estimate for estimate, _ in adjusted],
            [u for _, u in adjusted],
            [moved(r["estimate"], r["u"], r["adjusted_estimate"]) for r in rows],
            [r["shape"] or NONE for r in rows],
        ],
        "lllrrrrrl",
        [2, 1, 0, 0, 0, 0, 0, 0, 0],
    )


def exact_table(facts: Row) -> Sheet | None:
    """Inputs stated without an uncertainty."""
    rows = facts.get("exact_inputs") or []
    if not rows:
        return None
    return sheet(
        ["Input", "Value", "Unit"],
        [
            [_exact_words(str(name)) for name, _, _ in rows],
            [foreign(value) for _, value, _ in rows],
            [unit_words(str(unit)) or "1" for _, _, unit in rows],
        ],
        "lrl",
        [2, 2, 1],
    )


def _exact_words(name: str) -> str:
    return _named(name) if name.count("/") >= 2 else foreign(name.replace("/", ", ").replace("_", " "))


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
