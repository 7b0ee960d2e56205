"""The content of a session's report: a record's tables and facts as text, tables and figures ready to be set."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from pathlib import Path
from typing import Any

import pandas as pd

from reduction import figures, figurestyle, records, tables
from reduction.sessiontables import (
    budgets,
    by_particle,
    exact_table,
    input_table,
    method_table,
    particle_table,
    ratio,
    ratio_power,
    remark_table,
    size_table,
    ways_table,
    where_table,
)
from reduction.sheets import rows_of
from reduction.typeset import (
    NONE,
    bracketed_alone,
    foreign,
)
from reduction.wholefile import read_json
from reduction.wording import (
    CAUTIONS,
    counted,
    flag_words,
    joined,
    status_words,
    unit_words,
)

Row = Mapping[str, Any]
_FACTS = (
    ("date", "Date"),
    ("trap", "Trap"),
    ("species", "Species"),
    ("charged_with", "Charged with"),
    ("contacts", "Charging contacts"),
    ("operator", "Operator"),
)
_READINGS = (("height_reading", "Height means"), ("secular_reading", "Secular frequency means"))
_SETTINGS = (
    ("adjust", "adjusted by"),
    ("drag", "drag"),
    ("mass_from", "mass from"),
    ("lot", "lot"),
    ("scatter", "scatter"),
)


def content(folder: Path, *, digest: str, title: str = "") -> tuple[dict[str, Any], list[figurestyle.Drawing]]:
    """Everything the template sets, and the figures with their numbers, of one record folder."""
    facts = read_json(folder / records.FACTS)
    held = {name: tables.read_table(folder / f"{name}.csv") for name in records.PIECES if name != "components"}
    session = str(facts["session"])
    particles = rows_of(held["particles"])
    drawings, sheets = _particle_sheets(session, particles, held, facts)
    coverage = float(facts.get("coverage_probability", 0.95))
    doc: dict[str, Any] = {
        **frame(facts, digest, title),
        "facts": fact_pairs(facts),
        "summary": _summary(particles, facts),
        "particles": particle_table(particles, coverage),
        "particles_words": f"Value with its standard uncertainty (k = 1) in the last digits, and the interval of "
        f"{100 * coverage:g} % coverage. {NONE}: not determined, for the reason in the remarks.",
        "sizes": size_table(particles),
        "ways": ways_table(particles, facts),
        "remarks_table": remark_table(particles),
        "figures": sheets,
        "figures_words": "Filled: used; hollow: left out; ringed: flagged and kept. Bars are standard uncertainties of "
        "one reading; lines are the adjusted result, residuals the readings less it. Normalised error: the difference "
        "of two methods over twice its standard uncertainty; within the grey band (1) they agree. ± marks a size "
        "without a sign, all that a secular frequency gives. The numbers drawn are kept with the record of "
        "the session, in figures/particles.csv.",
        "budgets": budgets(particles, held["budget"]),
        "budgets_words": "Component: sensitivity times u, in the unit of the result; share: its square in percent of "
        "the variance. Inputs that are correlated after the adjustment need not add up to 100 %.",
        "inputs": input_table(held["inputs"]),
        "inputs_words": "What several readings depend on: as stated, and as the particles of this session adjust it.",
        "exact": exact_table(facts),
        "left_out": where_table(facts.get("left_out", []), "Reason"),
        "flagged": where_table(facts.get("flagged", []), "Why"),
        "notes": _notes(facts),
        "cautions": [list(pair_) for pair_ in CAUTIONS],
    }
    doc["remarks"] = doc["remarks_table"]["rows"]
    return doc, drawings


def frame(facts: Row, digest: str, title: str = "") -> dict[str, Any]:
    """What the page itself needs: title, running head, digest."""
    session = foreign(facts["session"])
    campaign = foreign(title)
    return {
        "title": f"Session {facts['session']}: charge-to-mass ratio of single trapped particles",
        "kind": "Session report",
        "headline": f"Session {session}",
        "subline": campaign or "Charge-to-mass ratio, mass and charge of single trapped particles",
        "running": f"Session {session}" + (f" \N{MIDDLE DOT} {campaign}" if len(campaign) <= 70 and campaign else ""),
        "digest": digest,
        "digest_word": "Inputs and program of this session",
    }


def fact_pairs(facts: Row) -> list[list[str]]:
    """Labels and values of what was set up, in words; what is not given is left out."""
    pairs = [[label, foreign(_plain(facts[key]))] for key, label in _FACTS if facts.get(key) not in (None, "")]
    for group, label in (("air", "Air"), ("site", "Site")):
        values = facts.get(group)
        if isinstance(values, Mapping) and values:
            pairs.append([label, foreign(", ".join(_with_unit(key, value) for key, value in sorted(values.items())))])
    pairs += [[label, foreign(_plain(facts[key]))] for key, label in _READINGS if facts.get(key)]
    shared = facts.get("instruments") or {}
    if shared:
        named = ", ".join(f"{key.replace('_', ' ')}: {value}" for key, value in sorted(shared.items()))
        pairs.append(["Instruments", foreign(named)])
    settings = [f"{label} {_plain(facts[key])}" for key, label in _SETTINGS if facts.get(key)]
    if settings:
        pairs.append(["Reduced with", foreign(", ".join(settings))])
    for key, value in sorted((facts.get("attributes") or {}).items()):
        pairs.append([foreign(str(key).replace("_", " ")), foreign(value)])
    return pairs


def _plain(value: object) -> str:
    return f"{value:g}" if isinstance(value, float) else str(value).replace("_", " ")


def _with_unit(key: str, value: object) -> str:
    stem, _, unit = key.partition("_")
    if stem == "relative":
        stem, unit = "humidity", "percent"
    return f"{stem} {value} {unit_words(unit)}".strip()


def _summary(particles: Sequence[Row], facts: Row) -> list[str]:
    by_status = {s: sum(p["status"] == s for p in particles) for s in ("ok", "not_determined", "failed", "excluded")}
    parts = [f"{n} {status_words(s)}" for s, n in by_status.items() if n]
    words = [f"{counted(len(particles), 'particle')}: {joined(parts)}." if particles else "No particle was recorded."]
    known = [p for p in particles if math.isfinite(p["charge_to_mass_C_per_kg"])]
    if known:
        signs = {p["charge_to_mass_C_per_kg"] > 0 for p in known if "sign_undetermined" not in p["flags"].split(";")}
        low = min(known, key=lambda p: p["charge_to_mass_C_per_kg"])
        high = max(known, key=lambda p: p["charge_to_mass_C_per_kg"])
        ends = [ratio(p, ratio_power(particles)) for p in (low, high)]
        span = f"{ends[0]} to {ends[1]}" if low is not high else ends[0]
        sign = {frozenset({True}): "all positive", frozenset({False}): "all negative",
                frozenset({True, False}): "of both signs"}.get(frozenset(signs), "sign not determined")  # fmt: skip
        words.append(f"Charge-to-mass ratio {span} C kg⁻¹, {sign}.")
    flagged = sorted({word for p in particles for word in flag_words(p["flags"])})
    left, kept = len(facts.get("left_out", [])), len(facts.get("flagged", []))
    out = counted(left, "reading or particle was", "readings or particles were") if left else "Nothing was"
    words.append(
        f"{out} left out; {counted(kept, 'reading is', 'readings are') if kept else 'no reading is'} flagged and kept; "
        + (f"{counted(len(flagged), 'kind')} of remark below." if flagged else "no remarks.")
    )
    return words


def _particle_sheets(
    session: str, particles: Sequence[Row], held: Mapping[str, pd.DataFrame], facts: Row
) -> tuple[list[figurestyle.Drawing], list[dict[str, Any]]]:
    readings, agreement, methods = (by_particle(held[name]) for name in ("readings", "agreement", "methods"))
    drawings, sheets = [], []
    with figurestyle.styled():
        drawer = figures.ParticleFigures()
        for p in particles:
            name = p["particle"]
            drawing = drawer.draw(
                session, name, readings.get(name, []), (facts.get("curves") or {}).get(name) or {},
                agreement.get(name, []),
            )  # fmt: skip
            if drawing:
                drawings.append(drawing)
            sheets.append(
                {
                    "title": f"Particle {foreign(name)}",
                    "words": _particle_words(p, particles),
                    "svg": drawing.svg if drawing else None,
                    "alt": drawing.alt if drawing else "",
                    "width": figures.WIDTH,
                    "caption": _caption(readings.get(name, [])),
                    "nothing": "No readings of this particle entered; there is nothing to draw.",
                    "methods": method_table(methods.get(name, []), ratio_power(particles)),
                }
            )
    return drawings, sheets


def _particle_words(p: Row, particles: Sequence[Row]) -> str:
    if not math.isfinite(p["charge_to_mass_C_per_kg"]):
        why = "; ".join(flag_words(p["flags"]))
        return f"{status_words(p['status']).capitalize()}" + (f": {why}." if why else ".")
    parts = [f"q/m = {ratio(p, ratio_power(particles))} C kg⁻¹"]
    for symbol, key, unit in (("γ", "drag_rate_per_s", "s⁻¹"), ("d", "diameter_um", "µm"), ("m", "mass_kg", "kg"),
                              ("q", "charge_e", "e")):  # fmt: skip
        if math.isfinite(p[key]):
            parts.append(f"{symbol} = {bracketed_alone(p[key], p[f'u_{key}'])} {unit}")
    return ", ".join(parts) + "."


def _caption(readings: Sequence[Row]) -> str:
    count = {log: sum(r["log"] == log for r in readings) for log in ("balance", "height", "secular")}
    parts = [counted(n, f"{log} reading") for log, n in count.items() if n]
    out = sum(r["status"] == "excluded" for r in readings)
    return f"{joined(parts).capitalize()}" + (f", {out} of them left out." if out else ".")


def _notes(facts: Row) -> list[str]:
    listed = [facts.get("session_notes") or "", *_listed(facts.get("notes"))]
    for log, dialect in sorted((facts.get("dialects") or {}).items()):
        listed.append(f"{log}.csv was read as: {dialect}.")
    for log, names in sorted((facts.get("extra_columns") or {}).items()):
        if names:
            listed.append(f"Columns of {log}.csv that were not used: {', '.join(map(str, names))}.")
    return [foreign(note) for note in listed if str(note).strip()]


def _listed(value: object) -> list[str]:
    return [value] if isinstance(value, str) else [str(one) for one in value] if isinstance(value, list) else []
