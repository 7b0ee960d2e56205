"""What the program's own reduction says of one bench, as far as claims are held against it; staff only."""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import Any

import pandas as pd

from reduction.correlated import COLUMN
from reduction.markscheme import METHODS, QUANTITIES
from reduction.records import SessionRecord

_AGREES = 2.0  # standard deviations within which a method alone is as good an answer as the adjusted value


@dataclass(frozen=True)
class Reference:
    """One quantity of one particle.

    A bench that used one method where the program adjusts several has made another choice of analysis, not a mistake:
    `accepted` holds what each method alone gives, as far as it agrees with the adjusted value; `widest_u` is the u of
    the best of them.
    """

    value: float  # SI, signed
    u: float  # SI, standard
    accepted: tuple[float, ...]  # SI, the adjusted value first
    widest_u: float  # SI, at least u


@dataclass(frozen=True)
class Component:
    """One line of the program's budget for a quantity."""

    key: str  # the last part of the input's name, balance, height ... for the particle's own readings
    relative: float  # size over the value [1]
    share: float  # of the variance [1]


@dataclass(frozen=True)
class ParticleReference:
    """One particle of the bench."""

    status: str  # as in particles.csv
    flags: tuple[str, ...]
    readings: Mapping[str, int]  # method: readings logged and not excluded
    quantities: Mapping[str, Reference]  # those that are determined
    agreement: Mapping[frozenset[str], float]  # two methods: E_n, of q/m where both give it, else of the drag rate
    budget: Mapping[str, tuple[Component, ...]] = field(default_factory=dict)  # by quantity

    @property
    def signed(self) -> bool:
        """Whether the sign of the charge is determined."""
        return "sign_undetermined" not in self.flags


def references_of(record: SessionRecord) -> dict[str, ParticleReference]:
    """References of the particles of one session, reduced with `adjust: session`."""
    particles, readings = record.tables["particles"], record.tables["readings"]
    used = readings[readings["status"] != "excluded"]
    counts = {(str(p), str(log)): len(rows) for (p, log), rows in used.groupby(["particle", "log"])}
    found = {}
    for _, row in particles.iterrows():
        name = str(row["particle"])
        found[name] = ParticleReference(
            str(row["status"]),
            tuple(str(row["flags"]).split(";")) if row["flags"] else (),
            {method: counts.get((name, method), 0) for method in METHODS},
            _quantities(name, row, record),
            _agreement(_of(record.tables["agreement"], name)),
            _budget(_of(record.tables["budget"], name), row),
        )
    return found


def _of(table: pd.DataFrame, particle: str) -> pd.DataFrame:
    return table[table["particle"] == particle]


def _quantities(name: str, row: pd.Series[Any], record: SessionRecord) -> dict[str, Reference]:
    found: dict[str, Reference] = {}
    methods, ways = _of(record.tables["methods"], name), record.facts.get("masses", {}).get(name, [])
    for quantity in QUANTITIES:
        column, factor = COLUMN[quantity]
        value, u = float(row[column]) * factor, float(row[f"u_{column}"]) * factor
        if not (math.isfinite(value) and math.isfinite(u) and value != 0.0):
            continue
        others = (
            _by_method(methods, column, value)
            if quantity in ("charge_to_mass", "drag_rate")
            else _by_way(ways, quantity, str(row["mass_from"]))
        )
        close = [(other, own) for other, own in others if own < abs(value) and abs(other - value) <= _AGREES * own]
        widest = max(u, min((own for _, own in close), default=u))
        found[quantity] = Reference(value, u, (value, *(other for other, _ in close)), widest)
    if "surface_charge_density" in found and "charge" in found:
        one, charge = found["surface_charge_density"], found["charge"]
        widest = one.u * charge.widest_u / charge.u
        found["surface_charge_density"] = Reference(one.value, one.u, one.accepted, widest)
    return found


def _by_method(methods: pd.DataFrame, column: str, value: float) -> list[tuple[float, float]]:
    """Value and u of each method alone that gives the quantity; one that tells no sign is given that of `value`."""
    found = []
    for _, row in methods[methods["method"].isin(METHODS) & (methods["status"] == "ok")].iterrows():
        own, u = float(row[column]), float(row[f"u_{column}"])
        if math.isfinite(own) and math.isfinite(u):
            found.append((math.copysign(own, value) if row["method"] == "secular" else own, u))
    return found


def _by_way(ways: list[dict[str, Any]], quantity: str, mass_from: str) -> list[tuple[float, float]]:
    """Value and u from the drag alone; the diameter alone is another choice only where the campaign rests on it."""
    from reduction.charge import ELEMENTARY_CHARGE

    column, factor = {
        "diameter": ("diameter_um", 1e-6),
        "mass": ("mass_kg", 1.0),
        "charge": ("charge_e", ELEMENTARY_CHARGE),
    }.get(quantity, ("", 1.0))
    wanted = "diameter" if mass_from == "diameter" else "drag"
    return [
        (float(way[column]) * factor, float(way[f"u_{column}"]) * factor)
        for way in ways
        if column and way["mass_from"] == wanted
    ]


def _agreement(rows: pd.DataFrame) -> dict[frozenset[str], float]:
    found: dict[frozenset[str], float] = {}
    for quantity in ("drag_rate", "charge_to_mass"):  # the latter counts where there are both
        for _, row in rows[rows["quantity"] == quantity].iterrows():
            found[frozenset((str(row["method_a"]), str(row["method_b"])))] = float(row["normalized_error"])
    return found


def _budget(rows: pd.DataFrame, row: pd.Series[Any]) -> dict[str, tuple[Component, ...]]:
    found: dict[str, tuple[Component, ...]] = {}
    for quantity in QUANTITIES:
        column, factor = COLUMN[quantity]
        value = abs(float(row[column]) * factor)
        own = rows[rows["result"] == quantity]
        if math.isfinite(value) and value > 0.0 and len(own):
            found[quantity] = tuple(
                Component(str(name).rpartition("/")[2], abs(float(component)) / value, float(share))
                for name, component, share in zip(own["input"], own["component"], own["share"], strict=True)
            )
    return found
