"""Marked campaigns for the tests, and claims that are right or wrong in a known way."""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from functools import cache
from pathlib import Path

from reduction.benchreference import ParticleReference, references_of
from reduction.check import check_campaign, check_marking
from reduction.errors import Fault
from reduction.markedbench import marks_of
from reduction.marking import BenchMarks, CriterionMark
from reduction.markingfiles import MarkingFiles
from reduction.session import reduce_session

HEAD = "session,particle,quantity,value,unit,expanded_uncertainty,coverage_factor\n"
SCHEME = """\
total: 20
criteria:
  readings:    {marks: 4, balance_at_least: 5, height_at_least: 12}
  value:       {marks: 8, quantity: charge_to_mass, full_within: 1, none_beyond: 3}
  uncertainty: {marks: 4, ratio_between: [0.5, 2.0]}
  rounding:    {marks: 2}
  sign:        {marks: 2}
claim_tolerance_percent: 2
show_reduction: no
"""
UNITS = {"charge_to_mass": "C_per_kg", "drag_rate": "per_s", "diameter": "m", "mass": "kg", "charge": "C",
         "surface_charge_density": "C_per_m2"}  # fmt: skip


def scheme(*criteria: str, tolerance: float = 2.0, more: str = "") -> str:
    """A scheme of the given criteria, four marks each."""
    lines = "".join(f"  {one}\n" for one in criteria)
    return f"total: {4 * len(criteria)}\ncriteria:\n{lines}claim_tolerance_percent: {tolerance}\n{more}"


def write_marking(folder: Path, files: Mapping[str, str]) -> Path:
    """Write files under marking/, a scheme too unless one is given."""
    (folder / "marking").mkdir(exist_ok=True)
    for name, text in ({"scheme.yaml": SCHEME} | dict(files)).items():
        (folder / "marking" / name).write_text(text, encoding="utf-8")
    return folder


def claim(quantity: str, value: float, *, session: str = "s001", particle: str = "p01", unit: str = "",
          u: float | None = None, k: str = "2", digits: int = 6) -> str:  # fmt: skip
    """One row of claims.csv; `u` is the standard uncertainty, stated times k."""
    shown = "" if u is None else f"{u * float(k or 2):.2e}"
    return (
        f"{session},{particle},{quantity},{value:.{digits}e},{unit or UNITS[quantity]},{shown},{k if shown else ''}\n"
    )


def marking_of(folder: Path) -> tuple[MarkingFiles | None, list[Fault]]:
    """Files of marking and every fault of the campaign."""
    campaign, logs, faults = check_campaign(folder)
    return check_marking(campaign, logs, faults), list(faults)


@cache
def references(folder: Path, session: str = "s001") -> dict[str, ParticleReference]:
    """What the program's own reduction says; of folders that no test changes."""
    campaign, logs, _ = check_campaign(folder)
    return references_of(reduce_session(campaign, session, logs[session]))


def marked(folder: Path, rows: Iterable[str], criteria: str = SCHEME, overrides: str = "") -> BenchMarks:
    """Marks of session s001 for the given claims."""
    files = {"scheme.yaml": criteria, "claims.csv": HEAD + "".join(rows)}
    if overrides:
        files["overrides.csv"] = "session,criterion,marks,reason,by\n" + overrides
    write_marking(folder, files)
    campaign, logs, faults = check_campaign(folder)
    marking = check_marking(campaign, logs, faults)
    assert marking is not None
    assert not list(faults), "\n".join(map(str, faults))
    return marks_of(campaign, "s001", marking, None, lambda: logs["s001"])


def mark(marks: BenchMarks, criterion: str) -> CriterionMark:
    """Marks of one criterion."""
    (found,) = (one for one in marks.criteria if one.criterion == criterion)
    return found


def codes(marks: BenchMarks) -> set[str]:
    """Codes of the hints."""
    return {hint.code for hint in marks.hints}
