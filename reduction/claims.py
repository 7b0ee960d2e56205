"""What benches claim, who sits at them and what staff set by hand: the tables of marking, each row checked."""

from __future__ import annotations

import re
from collections.abc import Collection, Mapping
from dataclasses import dataclass
from pathlib import Path

from reduction.benchrows import CLAIMS, OVERRIDES, REGISTER, own_claims
from reduction.contract import ID, ID_WORDS
from reduction.errors import Faults, nearest
from reduction.markrows import BenchFaults, Row, check_texts, formula_advice, number, rows_of
from reduction.markscheme import METHODS, QUANTITIES, SIGNED, Scheme
from reduction.units import UNITS, from_unit, unit_spelling, units_of

__all__ = [
    "AGREEMENT",
    "COMPONENT",
    "BenchFaults",
    "Claim",
    "Override",
    "RegisterRow",
    "read_claims",
    "read_overrides",
    "read_register",
]

DIMENSIONS = {
    "charge_to_mass": "charge_to_mass",
    "drag_rate": "rate",
    "diameter": "length",
    "mass": "mass",
    "charge": "charge",
    "surface_charge_density": "surface_charge_density",
}
AGREEMENT, COMPONENT = "agreement_", "component_"
"""`agreement_balance_height` claims E_n of two methods, unit 1; `component_<input>` what one input adds to u."""
ONE, PERCENT = "1", "percent"
_LARGEST_FACTOR = 10.0  # of coverage


@dataclass(frozen=True)
class Claim:
    """One row of claims.csv: numbers in SI, and the texts as written.

    A unit of another kind of quantity than the claimed one leaves the numbers as they are, and `unit_fits` is False.
    """

    session: str
    particle: str
    quantity: str  # a word of QUANTITIES, agreement_<method>_<method> or component_<input>
    value: float  # SI
    unit: str  # as the table of units spells it, or 1
    unit_fits: bool
    expanded_uncertainty: float | None  # SI
    coverage_factor: float | None
    value_text: str  # with a decimal point
    uncertainty_text: str
    file: str
    line: int

    @property
    def standard_uncertainty(self) -> float | None:
        """U / k, SI; k counts as 2 where it is not stated."""
        return None if self.expanded_uncertainty is None else self.expanded_uncertainty / (self.coverage_factor or 2.0)


@dataclass(frozen=True)
class RegisterRow:
    """One person of one bench; staff only."""

    session: str
    name: str
    email: str
    id_number: str
    pseudonym: str
    line: int


@dataclass(frozen=True)
class Override:
    """Marks of one criterion set by hand."""

    session: str
    criterion: str
    marks: float
    reason: str
    by: str
    line: int


def read_claims(
    folder: Path, sessions: Mapping[str, Collection[str] | None], benches: Collection[str], faults: BenchFaults
) -> dict[str, tuple[Claim, ...]]:
    """Claims of each session, from marking/claims.csv and from the sessions' own folders.

    Parameters
    ----------
    folder : Path
        The campaign.
    sessions : mapping
        Sessions that are reduced, each with its particles, or None where those are not known.
    benches : collection of str
        All session folders there are; a row that names none of them is a fault.
    faults : BenchFaults
        Collector.

    Returns
    -------
    dict
        Session to its claims in the order written.
    """
    found: dict[str, list[Claim]] = {session: [] for session in sessions}
    shared = rows_of(folder, CLAIMS, "", benches, faults)
    for session, rows in shared.items():
        _take(found, session, rows, sessions.get(session), faults.of(session))
    for session in sorted(sessions):
        name = own_claims(session)
        own = rows_of(folder, name, session, benches, faults)
        if own and session in shared:
            faults.of(session).add(name, found=f"claims here and in {CLAIMS}", expected="a bench's claims in one file",
                                   advice="Delete one.")  # fmt: skip
            continue
        for rows in own.values():
            _take(found, session, rows, sessions.get(session), faults.of(session))
    return {session: tuple(claims) for session, claims in found.items()}


def _take(
    found: dict[str, list[Claim]], session: str, rows: list[Row], particles: Collection[str] | None, faults: Faults
) -> None:
    if session not in found:
        return
    first: dict[tuple[str, str], int] = {}
    for row in rows:
        claim = _claim(session, row, particles, faults)
        key = (row.cells["particle"], row.cells["quantity"])
        if claim and key in first:
            row.fault(faults, "quantity", "one claim for each particle and quantity", "Delete one.",
                      f"{key[1]} of {key[0]} again, first on line {first[key]}")  # fmt: skip
        elif claim:
            first[key] = row.line
            found[session].append(claim)


def _claim(session: str, row: Row, particles: Collection[str] | None, faults: Faults) -> Claim | None:
    before = len(faults)
    cells = row.cells
    particle, quantity = cells["particle"], cells["quantity"]
    if not ID.fullmatch(particle):
        row.fault(faults, "particle", ID_WORDS, formula_advice(row.raw["particle"]))
    elif particles is not None and particle not in particles:
        advice = nearest(particle, particles) if particles else ""
        row.fault(faults, "particle", "a particle that the bench has logged", advice)
    dimension = _dimension(row, faults)
    unit = _unit(row, dimension, faults)
    value = number(row, "value", faults)
    uncertainty = number(row, "expanded_uncertainty", faults, optional=True)
    factor = number(row, "coverage_factor", faults, optional=True)
    if value is not None and value <= 0.0 and (quantity in QUANTITIES and quantity not in SIGNED):
        row.fault(faults, "value", "a number above 0", f"A {quantity.replace('_', ' ')} has no sign.")
    if value is not None and value <= 0.0 and quantity.startswith(COMPONENT):
        row.fault(faults, "value", "a number above 0", "Give the size of the component.")
    if uncertainty is not None and uncertainty <= 0.0:
        row.fault(faults, "expanded_uncertainty", "a number above 0, or nothing where none is claimed")
    if factor is not None and not 0.0 < factor <= _LARGEST_FACTOR:
        row.fault(faults, "coverage_factor", f"a number above 0, to {_LARGEST_FACTOR:g}, or nothing")
    if factor is not None and uncertainty is None and not row.raw.get("expanded_uncertainty"):
        row.fault(faults, "expanded_uncertainty", "the expanded uncertainty that the coverage factor belongs to")
    if len(faults) > before or value is None:
        return None
    fits = unit == ONE or UNITS[unit].dimension in (dimension, "ratio")
    scale = unit if fits and unit != ONE else ""
    return Claim(
        session,
        particle,
        quantity,
        from_unit(value, scale) if scale else value,
        unit,
        fits,
        from_unit(uncertainty, scale) if scale and uncertainty is not None else uncertainty,
        factor,
        cells["value"],
        cells["expanded_uncertainty"],
        row.file,
        row.line,
    )


def _dimension(row: Row, faults: Faults) -> str:
    """Dimension of the quantity claimed; "" where it has none or is no quantity."""
    quantity = row.cells["quantity"]
    if quantity in DIMENSIONS:
        return DIMENSIONS[quantity]
    pair = quantity.removeprefix(AGREEMENT).split("_")
    is_pair = quantity.startswith(AGREEMENT) and len(pair) == 2 and set(pair) <= set(METHODS) and pair[0] != pair[1]
    is_component = quantity.startswith(COMPONENT) and re.fullmatch(r"[A-Za-z0-9_]{1,80}", quantity[len(COMPONENT) :])
    if not is_pair and not is_component:
        expected = f"one of {', '.join(QUANTITIES)}, {AGREEMENT}balance_height, {COMPONENT}<input>"
        row.fault(faults, "quantity", expected, formula_advice(quantity) or nearest(quantity, QUANTITIES))
    return ""


def _unit(row: Row, dimension: str, faults: Faults) -> str:
    text, quantity = row.cells["unit"], row.cells["quantity"]
    unit = unit_spelling(text)
    usual = f"one of {', '.join(units_of(dimension))}" if dimension else f"{ONE} or {PERCENT}"
    if not text:
        row.fault(faults, "unit", usual, "A number without a unit says nothing.")
    elif quantity.startswith(AGREEMENT) and unit != ONE:
        row.fault(faults, "unit", ONE, "E_n is a difference over its expanded uncertainty.")
    elif quantity.startswith(COMPONENT) and unit not in (ONE, PERCENT):
        row.fault(faults, "unit", f"{PERCENT} or {ONE}: the component over the value", "Give it relative to the value.")
    elif dimension and unit not in UNITS:
        row.fault(faults, "unit", usual, formula_advice(text) or nearest(unit, units_of(dimension)))
    elif dimension or quantity.startswith((AGREEMENT, COMPONENT)):
        return unit
    return ONE


def read_register(
    folder: Path, sessions: Mapping[str, Collection[str] | None], benches: Collection[str], faults: BenchFaults
) -> dict[str, tuple[RegisterRow, ...]] | None:
    """People of each bench, from marking/register.csv; None where there is no such file.

    A bench without a row is a fault, and so is an address or number that two rows share.
    """
    if not (folder / REGISTER).exists():
        return None
    rows = rows_of(folder, REGISTER, "", benches, faults)
    found: dict[str, list[RegisterRow]] = {session: [] for session in sessions}
    people: list[tuple[str, Row]] = []
    readable = not any(fault.path == REGISTER for fault in faults.of(""))
    for session, listed in rows.items():
        for row in listed:
            check_texts(row, ("name", "email", "id_number", "pseudonym"), faults.of(session))
            if not row.cells["name"]:
                row.fault(faults.of(session), "name", "the name of a person")
            people.append((session, row))
            if session in found:
                email, number, pseudonym = (row.cells.get(one, "") for one in ("email", "id_number", "pseudonym"))
                found[session].append(RegisterRow(session, row.cells["name"], email, number, pseudonym, row.line))
    _check_people(people, faults)
    last = max((row.line for _, row in people), default=0)
    for session in sorted(sessions):
        if not rows.get(session) and readable:
            faults.of(session).add(
                REGISTER,
                line=last,
                column="session",
                found=f"no row for {session} up to here, the last line",
                expected="a row for each bench",
                advice="Add it, or leave the session out.",
            )
    return {session: tuple(listed) for session, listed in found.items()}


def _check_people(people: list[tuple[str, Row]], faults: BenchFaults) -> None:
    """Nobody sits at two benches, and nobody's address or number is another's."""
    for column in ("email", "id_number"):
        seen: dict[str, tuple[str, Row]] = {}
        for session, row in sorted(people, key=lambda one: one[1].line):
            cell = row.cells.get(column, "").casefold()
            if not cell:
                continue
            if cell in seen:
                other, first = seen[cell]
                for bench in sorted({session, other}):
                    found = f"{row.raw[column]} again, first on line {first.line}"
                    row.fault(faults.of(bench), column, "each person once", "Correct one, or delete it.", found)
            seen.setdefault(cell, (session, row))


def read_overrides(
    folder: Path,
    sessions: Mapping[str, Collection[str] | None],
    benches: Collection[str],
    scheme: Scheme,
    faults: BenchFaults,
) -> dict[str, tuple[Override, ...]]:
    """Marks set by hand, from marking/overrides.csv."""
    found: dict[str, list[Override]] = {session: [] for session in sessions}
    for session, rows in rows_of(folder, OVERRIDES, "", benches, faults).items():
        first: dict[str, int] = {}
        for row in rows:
            own = faults.of(session)
            before = len(own)
            name = row.cells["criterion"]
            criterion = scheme.criteria.get(name)
            check_texts(row, ("reason", "by"), own)
            for column, expected in (("reason", "why the marks were set"), ("by", "who set them")):
                if not row.cells[column]:
                    row.fault(own, column, expected)
            if criterion is None:
                row.fault(own, "criterion", f"one of {', '.join(scheme.criteria)}", nearest(name, scheme.criteria))
            marks = number(row, "marks", own)
            if criterion and marks is not None and not 0.0 <= marks <= criterion.marks:
                row.fault(own, "marks", f"from 0 to {criterion.marks:g}")
            if name in first:
                row.fault(own, "criterion", "each criterion of a bench once", "Delete one.",
                          f"{name} again, first on line {first[name]}")  # fmt: skip
            first.setdefault(name, row.line)
            if len(own) == before and marks is not None and session in found:
                found[session].append(Override(session, name, marks, row.cells["reason"], row.cells["by"], row.line))
    return {session: tuple(listed) for session, listed in found.items()}
