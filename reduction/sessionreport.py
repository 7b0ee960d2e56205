"""The content of a session's report: a record's tables and facts as text, tables and figures ready to be set."""

from __future__ import annotations

import math
from collections.abc import Collection, Mapping, Sequence
from pathlib import Path
from typing import Any

import pandas as pd

from reduction import figures, figurestyle, glance, records, tables
from reduction.quantity import read_quantity, shorthand
from reduction.sessionbudget import example, limits_table, share_tables
from reduction.sessiontables import (
    by_particle,
    drift_table,
    exact_words,
    input_table,
    left_out_rows,
    method_table,
    particle_table,
    ratio,
    ratio_power,
    remark_table,
    signless,
    size_table,
    where_table,
)
from reduction.sheets import rows_of
from reduction.typeset import NONE, bracketed_alone, foreign
from reduction.wholefile import read_json
from reduction.wording import CAUTIONS, counted, flag_words, joined, status_words, unit_words

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
MASS_WORDS = (
    "The mass follows from all that is known of the size. Beside it, for comparison, from drag alone: the readings, "
    "nothing assumed of the size; from diameter alone: the particle\u2019s own, else the mean and spread of the lot. "
)
ROOMY = 6  # particles up to which a page holds three of them, else four
_SETTINGS = (
    ("adjust", "adjusted by"),
    ("drag", "drag"),
    ("mass_from", "mass from"),
    ("lot", "lot"),
    ("scatter", "scatter"),
)


def content(
    folder: Path, *, digest: str, title: str = "", hidden: Collection[str] = ()
) -> tuple[dict[str, Any], list[figurestyle.Drawing]]:
    """Everything the template sets, and the figures with their numbers, of one record folder.

    `hidden` names facts that are not told, where whoever reads it must not meet people's names.
    """
    facts = {key: value for key, value in read_json(folder / records.FACTS).items() if key not in hidden}
    held = {name: tables.read_table(folder / f"{name}.csv") for name in records.PIECES if name != "components"}
    session = str(facts["session"])
    particles = rows_of(held["particles"])
    rows = {name: rows_of(frame_) for name, frame_ in held.items() if name in ("agreement", "inputs", "budget")}
    methods, budget = by_particle(held["methods"]), by_particle(held["budget"])
    drawings, sheets = _particle_sheets(session, particles, held, facts)
    coverage = float(facts.get("coverage_probability", 0.95))
    left_out = left_out_rows(facts, rows_of(held["readings"]), methods)
    flagged = facts.get("flagged", [])
    doc: dict[str, Any] = {
        **frame(facts, digest, title),
        "facts": fact_pairs(facts),
        "glance": [*glance.answers(particles, rows, facts), ["Left out, flagged", [_kept(left_out, flagged)]]],
        "particles": particle_table(particles, coverage),
        "particles_words": f"Value with its standard uncertainty (k = 1) in the last digits, and the interval of "
        f"{100 * coverage:g} % coverage: of q/m by Student\u2019s t, of the charge by Monte Carlo, for it is skewed. "
        f"{NONE}: not determined, for the reason in the remarks. ±: the size only; no log tells the sign.",
        "sizes": size_table(particles, facts),
        "sizes_words": (MASS_WORDS if any(math.isfinite(p["mass_kg"]) for p in particles) else "")
        + "χ² and its degrees of freedom are of the particle adjusted alone.",
        "drift": drift_table(particles),
        "remarks": remark_table(particles, methods),
        "fits": glance.fits_together(rows["inputs"], facts),
        "figures": sheets,
        "figures_words": "Filled: used; hollow: left out; ringed: flagged and kept. Bars are standard uncertainties of "
        "one reading, lines the adjusted result, residuals the readings less it. Pulls: each method less the adjusted "
        "value, and pairs of methods, over the standard uncertainty of that difference; within the grey band, 2 either "
        "side, they agree. The numbers drawn are kept with the record of the session, in figures/particles.csv.",
        "methods": method_table(particles, methods),
        "methods_words": "Shared inputs held as stated; u in brackets has their share in it, its random part has not. "
        "Residual / u: the method less the adjusted value over the standard uncertainty of that difference. "
        "± a size without a sign, all that a secular frequency gives.",
        "limits": limits_table(particles, rows["budget"]),
        "limits_words": "Share of the variance of each result in percent, inputs gathered by what they have in "
        "common; the median over the particles. Inputs correlated by the adjustment need not add up to 100 %.",
        "example": example(particles, budget),
        "example_words": "Component: sensitivity times u, in the unit of the result. Type B: judged from what is "
        "known beforehand; A: from repeated readings. Inputs below 0.1 % of the variance are gathered in the last row; "
        "budget.csv has every input of every result of every particle.",
        "shares": share_tables(particles, budget),
        "inputs": input_table(held["inputs"]),
        "inputs_words": "What several readings depend on, as stated and as the readings adjust it. Pull: how far it "
        "moved over how far it could have, about 1 in size where all is well; none where the readings say nothing.",
        "exact": exact_words(facts),
        "left_out": where_table(left_out, "Reason"),
        "flagged": where_table(flagged, "Why"),
        "notes": _notes(facts),
        "cautions": [list(pair_) for pair_ in CAUTIONS],
    }
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
    if unit == "rad":
        angle = read_quantity(value)
        degrees, u = math.degrees(angle.estimate), math.degrees(angle.u)
        value, unit = shorthand(degrees, u) if u else f"{degrees:.6g}", "deg"
    if stem == "relative":
        stem, unit = "humidity", "percent"
    return f"{stem} {value} {unit_words(unit)}".strip()


def _kept(left_out: Sequence[Sequence[Any]], flagged: Sequence[Sequence[Any]]) -> str:
    out = counted(len(left_out), "entry was", "entries were") if left_out else "Nothing was"
    kept = counted(len(flagged), "reading is", "readings are") if flagged else "no reading is"
    listed = " Listed with the reasons near the end." if left_out or flagged else ""
    return f"{out} left out; {kept} flagged and kept.{listed}"


def _particle_sheets(
    session: str, particles: Sequence[Row], held: Mapping[str, pd.DataFrame], facts: Row
) -> tuple[list[figurestyle.Drawing], list[dict[str, Any]]]:
    readings, agreement, methods = (by_particle(held[name]) for name in ("readings", "agreement", "methods"))
    drawings, sheets = [], []
    with figurestyle.styled():
        drawer = figures.ParticleFigures(low=len(particles) > ROOMY)
        for p in particles:
            name = p["particle"]
            drawing = drawer.draw(
                session, name, readings.get(name, []), (facts.get("curves") or {}).get(name) or {},
                agreement.get(name, []), methods.get(name, []),
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
                    "nothing": "No readings of this particle; there is nothing to draw.",
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
            text = bracketed_alone(p[key], p[f"u_{key}"])
            parts.append(f"{symbol} = {signless([p], [text])[0] if symbol == 'q' else text} {unit}")
    return ", ".join(parts)


def _caption(readings: Sequence[Row]) -> str:
    count = {log: sum(r["log"] == log for r in readings) for log in ("balance", "height", "secular")}
    parts = [f"{n} {log}" for log, n in count.items() if n]
    if not parts:
        return ""
    out = sum(r["status"] in ("excluded", "left_out") for r in readings)
    flagged = sum(r["status"] == "flagged" for r in readings)
    word = "reading" if sum(count.values()) == 1 else "readings"
    said = f"{joined(parts).capitalize()} {word}" + (f", {out} left out" if out else "")
    return said + (f", {flagged} flagged" if flagged else "")


def _notes(facts: Row) -> list[str]:
    listed = [facts.get("session_notes") or "", *_listed(facts.get("notes"))]
    by_dialect: dict[str, list[str]] = {}
    for log, dialect in sorted((facts.get("dialects") or {}).items()):
        by_dialect.setdefault(str(dialect), []).append(f"{log}.csv")
    listed += [f"Read as {dialect}: {joined(logs)}." for dialect, logs in sorted(by_dialect.items())]
    for log, names in sorted((facts.get("extra_columns") or {}).items()):
        if names:
            listed.append(f"Columns of {log}.csv that were not used: {', '.join(map(str, names))}.")
    return [foreign(note) for note in listed if str(note).strip()]


def _listed(value: object) -> list[str]:
    return [value] if isinstance(value, str) else [str(one) for one in value] if isinstance(value, list) else []
