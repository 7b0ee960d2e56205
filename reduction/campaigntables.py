"""The tables of a campaign's report."""

from __future__ import annotations

import json
import math
from collections.abc import Mapping, Sequence
from typing import Any

import pandas as pd

from reduction.limits import VALUES, spread_of
from reduction.sheets import Sheet, columns_of, quantity_column, sheet
from reduction.typeset import (
    MINUS,
    NONE,
    foreign,
    moved,
    pair,
    percent,
    significant,
)
from reduction.wording import RESULTS, counted, flag_words, input_words, status_words, unit_words

Row = dict[str, Any]
SCOPES = {  # heads of columns
    "particle": "Own\nreadings",
    "others": "Other\nparticles'",
    "session": "Session\ninputs",
    "trap": "Trap",
    "species": "Species",
    "instrument": "Instru-\nments",
    "campaign": "Formulas",
}
NOT_TAKEN = ("left_out", "failed", "excluded")  # statuses of sessions without results
MOST_LISTED = 500  # particles: some eight pages, beyond which a table is for programs


def left_out_table(run: Row, facts: Mapping[str, Row], particles: Sequence[Row]) -> Sheet | None:
    """Sessions, particles and readings without a result, gathered by their reasons."""
    sessions = {str(name): str(reason) for name, reason in (run.get("left_out") or {}).items()}
    for name, fact in facts.items():
        if fact.get("status") in NOT_TAKEN:
            sessions.setdefault(name, str(fact.get("reason") or status_words(str(fact["status"]))))
    rows = [(f"Session {name}", reason) for name, reason in sorted(sessions.items())]
    out: dict[str, list[str]] = {}
    readings = 0
    for name, fact in facts.items():
        for log, _, particle, reason in fact.get("left_out") or []:
            if str(log).startswith("particles"):
                out.setdefault(str(reason), []).append(f"{particle} of {name}")
            else:
                readings += 1
    rows += [(_several("Particle", out[reason]), reason) for reason in sorted(out)]
    none: dict[str, list[str]] = {}
    for p in particles:
        if p["status"] in ("not_determined", "failed"):
            why = "; ".join([status_words(p["status"]), *flag_words(p["flags"])])
            none.setdefault(why, []).append(f"{p['particle']} of {p['session']}")
    rows += [(_several("No result: particle", none[why]), why) for why in sorted(none)]
    if readings:
        rows.append((counted(readings, "single reading").capitalize(), "listed with reasons in the sessions' reports"))
    if not rows:
        return None
    return sheet(["What", "Why"], [[foreign(a) for a, _ in rows], [foreign(b) for _, b in rows]], "ll", [2, 3])


def _several(word: str, names: Sequence[str]) -> str:
    if len(names) == 1:
        return f"{word} {names[0]}"
    shown = ", ".join(names[:3]) + (f" and {len(names) - 3} more" if len(names) > 3 else "")
    return f"{word}s {shown}"


def session_table(in_time: Sequence[Row], facts: Mapping[str, Row], particles: Sequence[Row]) -> Sheet | None:
    """Every session with what it was about and how much came of it, each with its report and its readings to open.

    Parameters
    ----------
    in_time : sequence of mappings
        Sessions taken, in the order measured, with `session`, `date` and `worst` (largest normalised error).
    facts : mapping
        Facts of every session by its id; those not taken come last.
    particles : sequence of mappings
        Rows of particles.csv.
    """
    if not facts:
        return None
    taken = {str(row["session"]): row for row in in_time}
    names = [*taken, *(name for name in facts if name not in taken)]
    count: dict[str, list[bool]] = {}
    for p in particles:
        count.setdefault(p["session"], []).append(math.isfinite(p["charge_to_mass_C_per_kg"]))
    cells = [
        [foreign(name, 14) for name in names],
        [foreign(facts[name].get("date") or NONE) for name in names],
        *([foreign(facts[name].get(key) or NONE, 14) for name in names] for key in ("trap", "species", "charged_with")),
        [f"{sum(count.get(name, []))} of {len(count.get(name, []))}" if name in taken
         else status_words(str(facts[name].get("status"))).partition(" by ")[0] for name in names],
        [significant(taken[name]["worst"], 2) if name in taken else NONE for name in names],
        [NONE if name not in taken else "csv" for name in names],
    ]  # fmt: skip
    head = ["Session", "Date", "Trap", "Species", "Charged with", "Particles\nmeasured",
            "Largest nor-\nmalised error", "Readings"]  # fmt: skip
    reports = {"0": [f"sessions/{name}.pdf" for name in names]}
    readings = {"7": [f"readings/{name}.csv" if name in taken else "" for name in names]}
    return {**sheet(head, cells, "lllllrrl", [2, 0, 2, 2, 2, 0, 0, 0]), "links": reports | readings}


def scope_table(budget: pd.DataFrame, particles: Sequence[Row]) -> Sheet | None:
    """Each result of single particles: relative u, and the share of each scope in its variance, medians in percent."""
    if budget.empty:
        return None
    names = pd.Series(budget["input"].unique())
    scope = dict(zip(names, names.map(_scope), strict=True))
    keys = [budget["session"], budget["particle"], budget["result"], budget["input"].map(scope).rename("scope")]
    own = budget["share"].groupby(keys).sum().unstack("scope", fill_value=0)
    median = own.groupby(level="result").median()
    results = [name for name in RESULTS if name in median.index]
    shown = [name for name in SCOPES if name in median.columns and (median[name].abs() >= 0.0005).any()]
    cells = [
        [RESULTS[name][0][0].upper() + RESULTS[name][0][1:] for name in results],
        [spread_of(particles, *VALUES[name]) or NONE for name in results],
        *([percent(share) for share in median.loc[results, key].tolist()] for key in shown),
    ]
    head = ["Result", "Relative u", *(SCOPES[key] for key in shown)]
    return sheet(head, cells, "l" + "r" * (len(head) - 1), [1] + [0] * (len(head) - 1))


def _scope(name: str) -> str:
    scope, _, rest = str(name).partition("/")
    return scope if rest else "others"


def input_table(inputs: Sequence[Row]) -> Sheet | None:
    """Shared inputs before and after: one row per input, sessions' own ones gathered by what they are."""
    gathered: dict[tuple[str, str, str], dict[str, Row]] = {}
    for row in inputs:
        if row["scope"] == "particle" or not row["u"] > 0:
            continue
        what, whose = input_words(row["input"])
        key = (row["scope"], what, "each session" if row["scope"] == "session" else whose)
        # by its text, as NaN is not equal to itself; adjusted together, sessions agree
        gathered.setdefault(key, {}).setdefault(repr(row), row)
    if not gathered:
        return None
    order = ("campaign", "instrument", "trap", "species", "session")
    keys = sorted(gathered, key=lambda k: (order.index(k[0]) if k[0] in order else 9, k[2], k[1]))
    cells: list[list[str]] = [[] for _ in range(7)]
    for key in keys:
        rows = list(gathered[key].values())
        stated = {pair(r["estimate"], r["u"]) for r in rows}
        after = sorted(r["adjusted_estimate"] for r in rows if math.isfinite(r["adjusted_estimate"]))
        moves = [text for r in rows if (text := moved(r["estimate"], r["u"], r["adjusted_estimate"])) != NONE]
        one = len(rows) == 1
        adjusted = pair(rows[0]["adjusted_estimate"], rows[0]["adjusted_u"])
        typical = sorted(r["adjusted_u"] for r in rows if math.isfinite(r["adjusted_u"]))
        middle = typical[len(typical) // 2] if typical else math.nan
        ends = [pair(v, middle)[0] for v in (after[0], after[-1])] if after else [NONE, NONE]
        for cell, text in zip(
            cells,
            (
                foreign(key[1]),
                foreign(key[2]) + ("" if one else f" ({len(rows)})"),
                unit_words(rows[0]["unit"]) or "1",
                next(iter(stated))[0] if len(stated) == 1 else "varies",
                next(iter(stated))[1] if len(stated) == 1 else "varies",
                f"{adjusted[0]} ± {adjusted[1]}"
                if one
                else f"{ends[0]} to {ends[1]}"
                if ends[0] != ends[1]
                else ends[0],
                max(moves, key=lambda text: abs(float(text.replace(MINUS, "-")))) if moves else NONE,
            ),
            strict=True,
        ):
            cell.append(text)
    return sheet(
        ["Input", "Shared by", "Unit", "Stated", "u", "Adjusted", "Most moved\n/ u"], cells, "lllrrrr",
        [3, 2, 0, 0, 0, 0, 0],
    )  # fmt: skip


def particle_table(particles: Sequence[Row], group_of: Mapping[tuple[str, str], str]) -> Sheet:
    """Particles of the campaign with their results, the first `MOST_LISTED`; remarks by their numbers."""
    numbers = {flag: k for k, flag in enumerate(_flags(particles), 1)}
    particles = particles[:MOST_LISTED]
    head = ["Session", "Particle", "Group"]
    sort: dict[str, list[str]] = {}  # by column: what a reader's browser sorts by, where that is not the text
    cells = [
        [foreign(p["session"], 14) for p in particles],
        [foreign(p["particle"], 12) for p in particles],
        [foreign(group_of[p["session"], p["particle"]], 14) for p in particles],
    ]
    for name, key, unit in (
        ("q/m", "charge_to_mass_C_per_kg", "C kg⁻¹"),
        ("Drag rate", "drag_rate_per_s", "s⁻¹"),
        ("Diameter", "diameter_um", "µm"),
        ("Mass", "mass_kg", "kg"),
        ("Charge", "charge_e", "e"),
    ):
        value, u = columns_of(particles, key, f"u_{key}")
        sort[str(len(head))] = [repr(one) if math.isfinite(one) else "" for one in value]
        title, text, _ = quantity_column(name, unit, value, u)
        head.append(title)
        cells.append(text)
    head.append("State,\nremarks")
    cells.append(
        [
            ", ".join(([] if p["status"] == "ok" else [status_words(p["status"])])
                      + [str(numbers[f]) for f in p["flags"].split(";") if f])
            for p in particles
        ]
    )  # fmt: skip
    made = sheet(head, cells, "lllrrrrrl", [2, 1, 2, 0, 0, 0, 0, 0, 2])
    return {**made, "links": {"0": [f"sessions/{p['session']}.pdf" for p in particles]}, "sort": sort}


def _flags(particles: Sequence[Row]) -> list[str]:
    return sorted({flag for p in particles for flag in p["flags"].split(";") if flag})


def remark_table(particles: Sequence[Row]) -> Sheet | None:
    """The flags that occur, numbered, with how many particles carry each."""
    flags = _flags(particles)
    if not flags:
        return None
    counts = [sum(flag in p["flags"].split(";") for p in particles) for flag in flags]
    return sheet(
        ["No.", "Remark", "Particles"],
        [[str(k) for k in range(1, len(flags) + 1)], [flag_words(f)[0] for f in flags], [str(n) for n in counts]],
        "rlr", [0, 1, 0],
    )  # fmt: skip


def exact_table(facts: Mapping[str, Row]) -> Sheet | None:
    """Inputs stated without an uncertainty, and in how many sessions."""
    seen: dict[tuple[str, str, str], list[str]] = {}
    for session, fact in facts.items():
        for name, value, unit in fact.get("exact_inputs") or []:
            seen.setdefault((_exact_words(str(name)), str(value), str(unit)), []).append(session)
    if not seen:
        return None
    rows = sorted(seen)
    return sheet(
        ["Input", "Value", "Unit", "In so many\nsessions"],
        [
            [foreign(name) for name, _, _ in rows],
            [foreign(value) for _, value, _ in rows],
            [unit_words(unit) or "1" for _, _, unit in rows],
            [str(len(seen[row])) for row in rows],
        ],
        "lrlr",
        [1, 0, 0, 0],
    )


def _exact_words(name: str) -> str:
    what, whose = input_words(name)
    if name.count("/") >= 2:
        return ", ".join(filter(None, (what, "each session" if name.startswith("session/") else whose)))
    return name.replace("/", ", ").replace("_", " ")


def _setting(value: object) -> str:
    """One setting as a reader writes it: words as they are, a mapping as name: value."""
    if isinstance(value, dict):
        return ", ".join(f"{name}: {_setting(one)}" for name, one in sorted(value.items()))
    return value if isinstance(value, str) else json.dumps(value, ensure_ascii=False)


def settings_table(settings: Row, *, title: str = "") -> Sheet:
    """Settings of the campaign that change numbers, and its title where no heading has it whole."""
    shown = {key: value for key, value in sorted(settings.items()) if key != "title"}
    shown |= {"title": title} if title else {}
    texts = [_setting(value) for value in shown.values()]
    return sheet(["Setting", "Value"], [[foreign(k.replace("_", " ")) for k in shown], [foreign(t) for t in texts]],
                 "ll", [1, 2])  # fmt: skip


def provenance_table(run: Row) -> Sheet:
    """Digests and versions the results were made with."""
    rows = [("results", str(run.get("digest", ""))), ("program", str(run.get("package", "")))]
    rows += [(str(k), str(v)) for k, v in sorted((run.get("versions") or {}).items())]
    return sheet(["What", "Version or digest"], [[foreign(a) for a, _ in rows], [foreign(b or NONE) for _, b in rows]],
                 "ll", [1, 4])  # fmt: skip
