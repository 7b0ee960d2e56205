"""The scheme of a marked campaign: what earns how many marks."""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

from reduction.benchrows import SCHEME
from reduction.contract import ID, ID_WORDS, Key
from reduction.entries import Entries, filled, read_entries, require, value_of
from reduction.errors import Faults, nearest
from reduction.yamlfile import Mapping as YamlMapping
from reduction.yamlfile import read_yaml, shown

QUANTITIES = ("charge_to_mass", "drag_rate", "diameter", "mass", "charge", "surface_charge_density")
"""What may be claimed, each after those it is computed from."""
SIGNED = frozenset(("charge_to_mass", "charge", "surface_charge_density"))
METHODS = ("balance", "height", "secular")

_MARKS = Key("marks", "number", "Marks of the criterion.", True, bounds=(0.0, 1e4))
_QUANTITY = Key("quantity", "word", "What is judged; that of the criterion value if left out.", words=QUANTITIES)
_OWN = Key("quantity", "word", "What is judged.", True, words=QUANTITIES)
KINDS: Mapping[str, tuple[Key, ...]] = {
    "readings": (
        _MARKS,
        *(
            Key(f"{method}_at_least", "integer", f"Readings in {method}.csv asked for.", bounds=(1, 10**6))
            for method in METHODS
        ),
    ),
    "value": (
        _MARKS,
        _OWN,
        Key(
            "full_within",
            "number",
            "Claim tolerances up to which all marks are earned.",
            bounds=(0.0, 1e3),
            default="1",
        ),
        Key("none_beyond", "number", "Claim tolerances beyond which none is.", bounds=(0.0, 1e3), default="3"),
        Key(
            "named_mistake_earns",
            "number",
            "Share of the marks for a value that one recognised mistake explains; none if left out.",
            bounds=(0.0, 1.0),
        ),
    ),
    "uncertainty": (
        _MARKS,
        _QUANTITY,
        Key("ratio_between", "pair", "Claimed over own standard uncertainty that earns all marks.", bounds=(0.0, 1e3)),
        Key(
            "none_beyond", "pair", "Ratios beyond which no mark is earned; twice as far if left out.", bounds=(0.0, 1e6)
        ),
    ),
    "rounding": (_MARKS, _QUANTITY),
    "sign": (_MARKS, _QUANTITY),
    "unit": (_MARKS, _QUANTITY),
    "agreement": (
        _MARKS,
        Key("between", "word_pair", "The two methods whose agreement is claimed.", True, words=METHODS),
    ),
    "budget": (
        _MARKS,
        _QUANTITY,
        Key(
            "share_at_least",
            "number",
            "Share of the variance that the components claimed must account for.",
            bounds=(0.0, 1.0),
            default="0.9",
        ),
        Key("ratio_between", "pair", "Claimed over own component within which it counts.", bounds=(0.0, 1e3)),
    ),
}
"""Kinds of criteria and the keys of each."""

_TOP = (
    Key("total", "number", "Marks in all.", True, bounds=(0.0, 1e5)),
    Key("criteria", "free", "The criteria.", True),
    Key(
        "claim_tolerance_percent",
        "number",
        "By how much a claim may differ for a different choice of analysis, relative.",
        True,
        bounds=(0.0, 100.0),
    ),
    Key(
        "show_reduction",
        "word",
        "Whether a bench is given the program's own results.",
        words=("no", "yes", "false", "true"),
    ),
    Key(
        "particles_at_least",
        "integer",
        "Particles that a bench must claim; those it claims if left out.",
        bounds=(1, 10**4),
    ),
)


@dataclass(frozen=True)
class Criterion:
    """One criterion of the scheme, a column of the mark sheet."""

    name: str  # kind, or kind_word where a kind is asked for more than once: value, value_mass
    kind: str  # a word of KINDS
    marks: float
    quantity: str = ""  # what is judged, "" for readings and agreement
    options: Mapping[str, Any] = field(default_factory=dict)  # the other keys, defaults filled in


@dataclass(frozen=True)
class Scheme:
    """What earns how many marks."""

    total: float
    criteria: Mapping[str, Criterion]  # in the order written
    claim_tolerance: float  # [1] relative, for choices of analysis
    show_reduction: bool
    particles_at_least: int | None = None


def read_scheme(folder: Path, *, faults: Faults) -> Scheme | None:
    """Read marking/scheme.yaml; None if anything is wrong with it."""
    own = Faults()
    mapping = read_yaml(folder / SCHEME, SCHEME, faults=own)
    if mapping is None:
        faults.extend(own)
        return None
    criteria = mapping.entries.get("criteria")
    rest = {name: node for name, node in mapping.entries.items() if name != "criteria"}
    keys = tuple(key for key in _TOP if key.name != "criteria")
    top = read_entries(YamlMapping(rest, mapping.lines, mapping.line), keys, SCHEME, faults=own)
    require(top, keys, SCHEME, faults=own, advice="Add the key.")
    top = filled(top)
    found: dict[str, Criterion] = {}
    if isinstance(criteria, YamlMapping) and criteria.entries:
        found = _criteria(criteria, own)
    else:
        what = "nothing" if criteria is None else shown(criteria)
        line = mapping.lines.get("criteria", 0)
        own.add(SCHEME, line=line, column="criteria", found=what, expected=f"criteria such as {', '.join(KINDS)}")
    if not len(own):
        _check_total(found, top, own)
    faults.extend(own)
    if len(own):
        return None
    return Scheme(
        value_of(top, "total"),
        found,
        value_of(top, "claim_tolerance_percent") / 100.0,
        value_of(top, "show_reduction", "no") in ("yes", "true"),
        value_of(top, "particles_at_least"),
    )


def _criteria(mapping: YamlMapping, faults: Faults) -> dict[str, Criterion]:
    found: dict[str, Criterion] = {}
    lines: dict[str, int] = {}
    for name, node in mapping.entries.items():
        line, column = mapping.lines[name], f"criteria.{name}"
        kind = name if name in KINDS else name.partition("_")[0]
        if kind not in KINDS:
            advice = nearest(name, KINDS) + " A word may follow after _, as in value_mass."
            faults.add(SCHEME, line=line, column=column, found="an unknown criterion",
                       expected=f"one of {', '.join(KINDS)}", advice=advice)  # fmt: skip
            continue
        if not ID.fullmatch(name):
            faults.add(SCHEME, line=line, column=column, found=name, expected=ID_WORDS)
            continue
        if not isinstance(node, YamlMapping):
            faults.add(SCHEME, line=line, column=column, found=shown(node), expected="keys below it, marks: first")
            continue
        keys = KINDS[kind]
        own = Faults()
        entries = read_entries(node, keys, SCHEME, faults=own, shown_above=f"{column}.")
        require(entries, keys, SCHEME, faults=own, advice="Add the key.", shown=f"{column}.")
        _check_keys(kind, filled(entries), line, column, own)
        faults.extend(own)
        if not len(own):
            found[name], lines[name] = _criterion(name, kind, filled(entries)), line
    return {name: _with_quantity(one, found, lines[name], faults) for name, one in found.items()}


def _check_keys(kind: str, entries: Entries, line: int, column: str, faults: Faults) -> None:
    if kind == "readings" and not any(stem.endswith("_at_least") for stem in entries):
        expected = " or ".join(key.name for key in KINDS[kind][1:])
        faults.add(SCHEME, line=line, column=column, found="no number of readings", expected=expected)
    if kind == "value":
        full, none = (
            float(value_of(entries, stem, default)) for stem, default in (("full_within", 1), ("none_beyond", 3))
        )
        if full >= none:
            faults.add(SCHEME, line=line, column=column, found=f"full_within {full:g} and none_beyond {none:g}",
                       expected="none_beyond above full_within")  # fmt: skip
    if kind == "uncertainty":
        full_pair, none_pair = _ratios(entries)
        if not (none_pair[0] < full_pair[0] and full_pair[1] < none_pair[1]) or not full_pair[0] <= 1 <= full_pair[1]:
            faults.add(SCHEME, line=line, column=column, found=f"ratios {full_pair} and {none_pair}",
                       expected="ratio_between around 1, and none_beyond outside it")  # fmt: skip


def _ratios(entries: Entries) -> tuple[tuple[float, float], tuple[float, float]]:
    full = value_of(entries, "ratio_between", (0.5, 2.0))
    return full, value_of(entries, "none_beyond", (full[0] / 2.0, full[1] * 2.0))


def _criterion(name: str, kind: str, entries: Entries) -> Criterion:
    options: dict[str, Any] = {
        key.stem: value_of(entries, key.stem, float(key.default) if key.default else None)
        for key in KINDS[kind]
        if key.stem not in ("marks", "quantity")
    }
    if kind == "uncertainty":
        options["ratio_between"], options["none_beyond"] = _ratios(entries)
    return Criterion(name, kind, value_of(entries, "marks"), value_of(entries, "quantity", ""), options)


def _with_quantity(one: Criterion, others: Mapping[str, Criterion], line: int, faults: Faults) -> Criterion:
    """Fill in the quantity of the value criterion with the same word after its name, or else of the first."""
    if one.quantity or one.kind in ("readings", "agreement"):
        return _checked_sign(one, line, faults)
    values = [other for other in others.values() if other.kind == "value"]
    suffix = one.name[len(one.kind) :]
    near = [other for other in values if other.name[len("value") :] == suffix] or values
    if not near:
        faults.add(SCHEME, line=line, column=f"criteria.{one.name}.quantity", found="nothing",
                   expected=f"one of {', '.join(QUANTITIES)}", advice="Add the key.")  # fmt: skip
        return one
    return _checked_sign(Criterion(one.name, one.kind, one.marks, near[0].quantity, one.options), line, faults)


def _checked_sign(one: Criterion, line: int, faults: Faults) -> Criterion:
    if one.kind == "sign" and one.quantity not in SIGNED:
        expected = f"one of {', '.join(quantity for quantity in QUANTITIES if quantity in SIGNED)}"
        found = f"{one.quantity}, which has no sign"
        faults.add(SCHEME, line=line, column=f"criteria.{one.name}.quantity", found=found, expected=expected)
    return one


def _check_total(found: Mapping[str, Criterion], top: Entries, faults: Faults) -> None:
    marks, total = math.fsum(one.marks for one in found.values()), value_of(top, "total")
    if not math.isclose(marks, total, rel_tol=1e-9):
        expected = f"{marks:g}, the sum of the marks of the criteria"
        faults.add(SCHEME, line=top["total"].line, column="total", found=f"{total:g}", expected=expected)
