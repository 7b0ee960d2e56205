"""What limits a result: shares of its variance gathered by what the inputs have in common, and that in words."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from statistics import median
from typing import Any

from reduction.wording import RESULTS, input_words, joined

Row = Mapping[str, Any]
GROUPS: dict[str, tuple[str, str]] = {  # head of a column; words in a sentence
    "trap": ("Trap\nconstants", "the trap constants"),
    "gains": ("Gains,\noffsets", "gains and offsets of the instruments"),
    "stray": ("Stray\nfield", "the stray field"),
    "air": ("Air,\ngravity", "air and gravity"),
    "species": ("Density,\nshape", "density and shape"),
    "diameter": ("Dia-\nmeter", "the diameter stated for the particle or its lot"),
    "formulas": ("Formu-\nlas", "the formulas for drag and air"),
    "own": ("Own\nreadings", "the particle's own readings"),
    "others": ("Other\nparticles'", "the other particles' readings"),
}
_BY_KEY = {
    "stray_field_V_per_m": "stray",
    "temperature_degC": "air",
    "pressure_hPa": "air",
    "relative_humidity_percent": "air",
    "elevation_m": "air",
    "latitude_deg": "air",
    "gravity_m_per_s2": "air",
    "finite_reynolds": "formulas",
    "diameter_um": "diameter",
    "diameter_spread_um": "diameter",
}
_BY_SCOPE = {"trap": "trap", "campaign": "formulas", "instrument": "gains", "session": "gains", "species": "species"}
VALUES = {  # columns of each result and its u in particles.csv
    "charge_to_mass": ("charge_to_mass_C_per_kg", "u_charge_to_mass_C_per_kg"),
    "drag_rate": ("drag_rate_per_s", "u_drag_rate_per_s"),
    "diameter": ("diameter_um", "u_diameter_um"),
    "mass": ("mass_kg", "u_mass_kg"),
    "charge": ("charge_C", "u_charge_C"),
    "surface_charge_density": ("surface_charge_density_C_per_m2", "u_surface_charge_density_C_per_m2"),
}
_ENOUGH = 0.7  # of the variance: a sentence names groups until they make up this much
_NAMED = 0.5  # of a group: the input that makes up this much of it is named
_READINGS = 0.1  # of the variance: below it more readings of the same kind do not help


def group_of(name: str) -> str:
    """Which of `GROUPS` an input of the budget belongs to."""
    scope, _, rest = name.partition("/")
    key = rest.rpartition("/")[2]
    if not rest:
        return "others"
    if scope == "particle":
        return "diameter" if key.startswith("diameter") else "own"
    return _BY_KEY.get(key) or _BY_SCOPE.get(scope, "gains")


def shares_of(budget: Sequence[Row], result: str) -> tuple[dict[str, float], dict[str, float]]:
    """Median over the particles of each group's and of each input's share of the variance of one result."""
    groups: dict[str, dict[str, float]] = {}
    inputs: dict[str, dict[str, float]] = {}
    for row in budget:
        if row["result"] == result and math.isfinite(row["share"]):
            name, who = str(row["input"]), str(row["particle"])
            if name.startswith("particle/"):
                name = "own/" + name.rpartition("/")[2]
            for table, key in ((groups, group_of(str(row["input"]))), (inputs, name)):
                own = table.setdefault(who, {})
                own[key] = own.get(key, 0.0) + float(row["share"])
    return _medians(groups), _medians(inputs)


def _medians(table: Mapping[str, Mapping[str, float]]) -> dict[str, float]:
    keys = sorted({key for own in table.values() for key in own})
    return {key: median(own.get(key, 0.0) for own in table.values()) for key in keys}


def spread_of(particles: Sequence[Row], value: str, u: str) -> str:
    """Relative standard uncertainty over the particles: `1.4 %`, `1.4 % to 2.1 %`, nothing where none is known."""
    found = [abs(p[u] / p[value]) for p in particles if math.isfinite(p[u]) and math.isfinite(p[value]) and p[value]]
    ends = list(dict.fromkeys(f"{100 * one:.2g}" for one in (min(found), max(found)))) if found else []
    return " to ".join(f"{end}\N{NO-BREAK SPACE}%" for end in ends)


def sentence(budget: Sequence[Row], result: str, spread: str = "") -> str:
    """One plain sentence on what makes up most of the variance of a result; empty where it has no budget."""
    groups, inputs = shares_of(budget, result)
    ranked = sorted(groups, key=lambda key: (-groups[key], key))
    if not ranked or groups[ranked[0]] <= 0:
        return ""
    told: list[tuple[str, str, str]] = []
    total = 0.0
    for key in ranked[:3]:
        if told and (total >= _ENOUGH or groups[key] < 0.05):
            break
        told.append(_told(key, groups[key], inputs))
        total += groups[key]
    name = RESULTS[result][0]
    lead = f"{name[0].upper()}{name[1:]}" + (f", standard uncertainty {spread}" if spread else "")
    verb = "make up" if ranked[0] in ("trap", "gains", "air", "species", "formulas", "own", "others") else "makes up"
    first, *rest = told
    text = f"{lead}: {first[0]} {verb} {first[1]} of the variance{first[2]}"
    if rest:
        text += ", " + joined([f"{what} {share}{which}" for what, share, which in rest])
    few = groups.get("own", 0.0) + groups.get("others", 0.0) < _READINGS
    return text + ("; more readings would hardly narrow it." if few else ".")


def _told(key: str, share: float, inputs: Mapping[str, float]) -> tuple[str, str, str]:
    """Words of a group, its share, and the input that makes up most of it, if there are several."""
    own = {name: one for name, one in inputs.items() if _group_of_median(name) == key and one > 0.001}
    which = ""
    if len(own) > 1 and key not in ("own", "others", "diameter"):
        name = max(sorted(own), key=lambda one: own[one])
        if own[name] > _NAMED * share:
            which = f" ({input_words(name)[0]} alone {100 * own[name]:.0f}\N{NO-BREAK SPACE}%)"
    return GROUPS[key][1], f"{100 * share:.0f}\N{NO-BREAK SPACE}%", which


def _group_of_median(name: str) -> str:
    if name.startswith("own/"):
        return "diameter" if name.startswith("own/diameter") else "own"
    return group_of(name)
