"""How one particle's number came about: every step from the readings to electrons, with the formulas filled in."""

from __future__ import annotations

import math
from pathlib import Path

from reduction.equations import EQUATIONS, air_lines, sphere_lines, with_u, wrapped
from reduction.findings import Findings, read_findings
from reduction.flags import FLAGS
from reduction.wording import CAUTIONS, RESULTS

LINES = 6  # of each budget, the largest shares
UNITS = {"charge_to_mass": "C/kg", "diameter": "m", "mass": "kg", "charge": "C", "surface_charge_density": "C/m2"}
QUANTITIES = (
    ("charge-to-mass ratio", "charge_to_mass_C_per_kg", "C/kg"),
    ("drag rate", "drag_rate_per_s", "1/s"),
    ("height origin", "height_origin_mm", "mm"),
)


def explain(results: Path, session: str, particle: str) -> str:
    """Account of one particle's reduction, step by step, plain text of 100 columns.

    Parameters
    ----------
    results : Path
        A results folder.
    session, particle : str
        Ids as in particles.csv.

    Returns
    -------
    str
        Lines, each ended by a line feed; numbers with u are rounded to two digits of it.

    Raises
    ------
    ResultsError
        If the folder holds no results, or no such session or particle; the message offers the nearest id.
    """
    found = read_findings(Path(results), session, particle)
    parts = (
        ("Readings", _readings(found)),
        ("Inputs", _inputs(found)),
        ("Air and gravity", air_lines(found)),
        ("Each method by itself, shared inputs held at their estimates", _methods(found)),
        ("Agreement of the methods", _agreement(found)),
        ("Adjusted together", _adjusted(found)),
        ("From drag to charge", sphere_lines(found)),
        ("What makes the uncertainty", _budget(found)),
    )
    lines = [f"How the numbers of particle {particle} of session {session} came about", "", *_head(found)]
    for number, (title, body) in enumerate(parts, start=1):
        lines += ["", f"{number}. {title}", "", *body]
    lines += ["", "Cautions"]
    for title, text in CAUTIONS:
        lines += wrapped(f"{title}: {text}", "  ")
    return "\n".join(line.rstrip() for line in lines) + "\n"


def _head(found: Findings) -> list[str]:
    row = found.row
    lines = wrapped(f"Species {row['species']}, charged with {row['charged_with']}. Status: {row['status']}.")
    for flag in filter(None, str(row["flags"]).split(";")):
        lines += wrapped(f"Flag {flag}: {FLAGS.get(flag, 'a word this version does not know')}.")
    return lines


def _readings(found: Findings) -> list[str]:
    lines = []
    for log in ("balance", "height", "secular"):
        table = found.readings[found.readings["log"] == log]
        if not len(table):
            continue
        status = table["status"]
        lines += wrapped(
            f"{log}.csv: {len(table)} readings, {int((status != 'excluded').sum())} used, "
            f"{int((status == 'flagged').sum())} of these flagged, {int((status == 'excluded').sum())} excluded",
            "  ",
        )
        for _, one in table[status != "used"].iterrows():
            why = str(one["exclude"]) if one["status"] == "excluded" else str(one["flags"]).replace(";", ", ")
            lines += wrapped(f"line {int(one['line'])} {one['status']}: {why.replace('_', ' ')}", "    ")
    return lines or ["  None of this particle's readings is in the results."]


def _inputs(found: Findings) -> list[str]:
    lines = []
    for _, one in found.inputs.iterrows():
        text = f"  {one['input']:<48} {with_u(one['estimate'], one['u'], str(one['unit'])):<24}"
        if not float(one["u"]) > 0.0:
            text += " exact"
        elif math.isfinite(one["adjusted_estimate"]):
            text += f" adjusted {with_u(one['adjusted_estimate'], one['adjusted_u'])}"
        lines.append(text)
    return lines


def _methods(found: Findings) -> list[str]:
    lines: list[str] = []
    for _, one in found.methods.iterrows():
        method = str(one["method"])
        if method == "adjusted":
            continue
        lines += wrapped(f"{method}: {one['status']}" + (f" ({one['reason']})" if one["reason"] else ""), "  ")
        for name, key, unit in QUANTITIES:
            if math.isfinite(one[key]):
                lines.append(f"    {name} {with_u(one[key], one['u_' + key], unit)}")
        lines += _chi_square(one["chi_square"], one["degrees_of_freedom"], "    chi-square")
        lines += EQUATIONS[method](found) if method in EQUATIONS else []
    return lines or ["  No method had anything to fit."]


def _chi_square(value: float, freedom: float, name: str) -> list[str]:
    return [f"{name} {value:.3g} with {int(freedom)} degrees of freedom"] if freedom > 0 else []


def _named(result: str) -> str:
    return RESULTS[result][0] if result in RESULTS else result.replace("_", " ")


def _agreement(found: Findings) -> list[str]:
    lines = []
    for _, one in found.agreement.iterrows():
        score = float(one["normalized_error"])
        difference = with_u(one["difference"], one["u_difference"], str(one["unit"]))
        lines += wrapped(
            f"{one['method_a']} minus {one['method_b']}, {_named(str(one['quantity']))}: {difference}; "
            f"E_n = difference/(2 u) = {score:.2f}" + (", beyond 1: they disagree" if abs(score) > 1.0 else ""),
            "  ",
        )
    return lines or ["  No two methods give the same quantity by themselves."]


def _adjusted(found: Findings) -> list[str]:
    row, lines = found.row, []
    if row["methods"]:
        lines += wrapped(
            f"Generalised least squares of {str(row['methods']).replace(';', ', ')}, {int(row['readings'])} readings, "
            f"with the covariance that shared inputs cause (adjust: {found.facts['adjust']}).",
            "  ",
        )
    lines.append(f"  s = {with_u(row['charge_to_mass_C_per_kg'], row['u_charge_to_mass_C_per_kg'], 'C/kg')}")
    low, high = row["charge_to_mass_low_C_per_kg"], row["charge_to_mass_high_C_per_kg"]
    if math.isfinite(low) and math.isfinite(high):
        lines.append(f"    interval {low:.6g} to {high:.6g} C/kg")
    lines.append(f"  gamma = {with_u(row['drag_rate_per_s'], row['u_drag_rate_per_s'], '1/s')}")
    if math.isfinite(row["charge_drift_per_s"]):
        lines.append(f"  charge drift {with_u(row['charge_drift_per_s'], row['u_charge_drift_per_s'], '1/s')}")
    return lines + _chi_square(row["chi_square"], row["degrees_of_freedom"], "  chi-square of this particle alone")


def _budget(found: Findings) -> list[str]:
    lines: list[str] = []
    for result, unit in UNITS.items():
        table = found.budget[found.budget["result"] == result]
        if not len(table):
            continue
        table = table.assign(size=table["share"].abs()).sort_values(["size", "input"], ascending=[False, True])
        lines.append(f"  {_named(result)}: u that each input causes, and its share of u squared")
        for _, one in table.head(LINES).iterrows():
            lines.append(
                f"    {one['input']:<56} {abs(one['component']):>10.2g} {unit:<5} {100 * one['share']:>6.1f} %"
            )
        rest = table["share"].iloc[LINES:]
        if len(rest):
            lines.append(f"    {f'{len(rest)} smaller ones together':<56} {'':>10} {'':<5} {100 * rest.sum():>6.1f} %")
    return lines or ["  The results hold no budget for this particle."]
