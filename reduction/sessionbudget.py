"""The uncertainty budgets of a session's particles, told in few rows; budget.csv holds them whole."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from statistics import median
from typing import Any

from reduction.limits import GROUPS, VALUES, shares_of, spread_of
from reduction.sheets import Sheet, sheet
from reduction.typeset import NONE, foreign, pair, percent, significant
from reduction.wording import OWN, RESULTS, counted, input_words

Row = Mapping[str, Any]
SMALL = 0.001  # of the variance: inputs below it in every column of a table are gathered in its last row
SIDE_BY_SIDE = 10  # particles whose shares stand in columns of their own, if their ids are short
_SHORT = 7
_ONE_TABLE = 12  # columns of shares that fit one table


def named(name: str) -> str:
    """An input of a budget in words, with whose it is."""
    what, whose = input_words(name)
    if name.startswith("particle/"):
        return foreign(what)
    whose = "this session" if name.startswith("session/") else whose
    return foreign(f"{what}, {whose}" if whose else what)


def title(result: str) -> str:
    """Name of a result with a capital."""
    return RESULTS[result][0][0].upper() + RESULTS[result][0][1:]


def limits_table(particles: Sequence[Row], budget: Sequence[Row]) -> Sheet | None:
    """Each result with its relative uncertainty and the median share of every group of inputs."""
    results = [r for r in RESULTS if any(row["result"] == r for row in budget)]
    if not results:
        return None
    medians = [shares_of(budget, result)[0] for result in results]
    shown = [key for key in GROUPS if any(abs(one.get(key, 0.0)) >= 0.0005 for one in medians)]
    head = ["Result", "Relative u", *[GROUPS[key][0] for key in shown]]
    cells = [[title(r) for r in results], [spread_of(particles, *VALUES[r]) or NONE for r in results]]
    cells += [[percent(one.get(key, math.nan)) for one in medians] for key in shown]
    return sheet(head, cells, "l" + "r" * (len(head) - 1), [1] + [0] * (len(head) - 1))


def example(particles: Sequence[Row], budget: Mapping[str, Sequence[Row]]) -> dict[str, Any] | None:
    """The whole budget of one particle, that whose relative uncertainty of charge-to-mass is the median."""
    known = [p for p in particles if budget.get(p["particle"]) and math.isfinite(p["charge_to_mass_C_per_kg"])]
    if not known:
        return None
    ranked = sorted(known, key=lambda p: abs(p["u_charge_to_mass_C_per_kg"] / p["charge_to_mass_C_per_kg"]))
    p = ranked[(len(ranked) - 1) // 2]
    rows = budget[p["particle"]]
    tables = []
    for result in ("charge_to_mass", "charge" if math.isfinite(p["charge_C"]) else "drag_rate"):
        own = [r for r in rows if r["result"] == result]
        if own:
            tables.append({"title": title(result), "table": _whole(own, RESULTS[result][1])})
    return {"particle": foreign(p["particle"]), "tables": tables}


def _whole(rows: Sequence[Row], unit: str) -> Sheet:
    ranked = sorted(rows, key=lambda r: (-abs(r["component"]) if math.isfinite(r["component"]) else 0.0, r["input"]))
    shown = [r for r in ranked if abs(r["share"]) >= SMALL]
    small = [r for r in ranked if r not in shown]
    both = [pair(r["estimate"], r["u"]) for r in shown]
    cells = [
        [named(r["input"]) for r in shown],
        [estimate for estimate, _ in both],
        [u for _, u in both],
        [r["shape"] or NONE for r in shown],
        [r["evaluation"] or NONE for r in shown],
        [significant(r["sensitivity"]) for r in shown],
        [significant(r["component"]) for r in shown],
        [percent(r["share"]) for r in shown],
    ]
    if small:
        component = math.sqrt(math.fsum(r["component"] ** 2 for r in small if math.isfinite(r["component"])))
        last = [further(len(small)), "", "", "", "", "", significant(component), percent(_sum(small))]
        cells = [[*column, cell] for column, cell in zip(cells, last, strict=True)]
    return sheet(
        ["Quantity", "Estimate", "u", "Shape", "Type", "Sensitivity", f"Component\n{unit}", "Share\n%"],
        cells, "lrrlcrrr", [1, 0, 0, 0, 0, 0, 0, 0],
    )  # fmt: skip


def further(number: int) -> str:
    """The last row of a table that gathers small inputs."""
    return counted(number, "further input", "further inputs together")


def _sum(rows: Sequence[Row]) -> float:
    return math.fsum(r["share"] for r in rows if math.isfinite(r["share"]))


def share_tables(particles: Sequence[Row], budget: Mapping[str, Sequence[Row]]) -> list[dict[str, Any]]:
    """Shares of every input in the variance of the chief results, in percent, particles side by side.

    With many particles, or long ids, the least, the median and the greatest share over the particles instead.
    """
    names = [p["particle"] for p in particles if budget.get(p["particle"])]
    if len(names) < 2:
        return []
    held = {row["result"] for name in names for row in budget[name]}
    columns = {
        result: {name: _by_input(budget[name], result) for name in names}
        for result in ("charge_to_mass", "charge" if "charge" in held else "drag_rate")
        if result in held
    }
    if len(names) > SIDE_BY_SIDE or any(len(name) > _SHORT for name in names):
        return [{"title": "", "table": _ranges(columns)}]
    parts = [columns] if len(columns) * len(names) <= _ONE_TABLE else [{r: t} for r, t in columns.items()]
    return [{"title": title(next(iter(one))) if len(one) == 1 else "", "table": _side_by_side(one)} for one in parts]


def _by_input(rows: Sequence[Row], result: str) -> dict[str, float]:
    """Share by input of one particle; its own readings under one name for all particles."""
    return {
        str(r["input"]) if not str(r["input"]).startswith("particle/") else _own(str(r["input"])): float(r["share"])
        for r in rows
        if r["result"] == result and math.isfinite(r["share"])
    }


def _own(name: str) -> str:
    part = name.rpartition("/")[2]
    return OWN.get(part) or input_words(name)[0]


def _side_by_side(columns: Mapping[str, Mapping[str, Mapping[str, float]]]) -> Sheet:
    shares = [one for table in columns.values() for one in table.values()]
    heads = [
        f"{_letter(result)}\n{foreign(name)}" if len(columns) > 1 else foreign(name)
        for result, table in columns.items()
        for name in table
    ]
    shown, small = _split({name: [one.get(name, math.nan) for one in shares] for name in _names(shares)})
    cells = [[named(name) for name in shown]]
    cells += [[percent(one.get(name, math.nan)) for name in shown] for one in shares]
    if small:
        last = [further(len(small)), *[percent(math.fsum(one.get(n, 0.0) for n in small)) for one in shares]]
        cells = [[*column, cell] for column, cell in zip(cells, last, strict=True)]
    return sheet(["Quantity", *heads], cells, "l" + "r" * len(heads), [int(len(heads) > 5)] + [0] * len(heads))


def _letter(result: str) -> str:
    return {"charge_to_mass": "q/m", "charge": "q", "drag_rate": "γ"}[result]


def _ranges(columns: Mapping[str, Mapping[str, Mapping[str, float]]]) -> Sheet:
    pooled = {result: list(table.values()) for result, table in columns.items()}
    every = [one for shares in pooled.values() for one in shares]
    shown, small = _split({name: [one.get(name, math.nan) for one in every] for name in _names(every)})
    head, cells = ["Quantity"], [[named(name) for name in shown] + ([further(len(small))] if small else [])]
    for result, shares in pooled.items():
        for word, of in (("least", min), ("median", median), ("most", max)):
            column = []
            for group in [[name] for name in shown] + ([small] if small else []):
                values = [math.fsum(one.get(name, 0.0) for name in group) for one in shares]
                column.append(percent(float(of(values))))
            head.append(f"{_letter(result)},\n{word}")
            cells.append(column)
    return sheet(head, cells, "l" + "r" * (len(head) - 1), [1] + [0] * (len(head) - 1))


def _names(shares: Sequence[Mapping[str, float]]) -> list[str]:
    return sorted({name for one in shares for name in one})


def _split(values: Mapping[str, Sequence[float]]) -> tuple[list[str], list[str]]:
    """Names to show, by their greatest share, and those below `SMALL` everywhere."""
    largest = {name: max((abs(v) for v in row if math.isfinite(v)), default=0.0) for name, row in values.items()}
    ranked = sorted(largest, key=lambda name: (-largest[name], name))
    return [n for n in ranked if largest[n] >= SMALL], [n for n in ranked if largest[n] < SMALL]
