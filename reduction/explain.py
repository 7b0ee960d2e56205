"""How one particle's number came about: every step from the readings to electrons, with the formulas filled in."""

from __future__ import annotations

import math
from pathlib import Path

from reduction.equations import EQUATIONS, air_lines, coverage, sphere_lines, with_u, wrapped
from reduction.findings import USED, Findings, read_findings
from reduction.flags import FLAGS
from reduction.limits import sentence
from reduction.wording import CAUTIONS, RESULTS

LINES = 6  # of each budget, the largest shares
UNITS = {"charge_to_mass": "C/kg", "diameter": "m", "mass": "kg", "charge": "C", "surface_charge_density": "C/m2"}
TOGETHER = {
    "session": "all particles of the session together",
    "campaign": "all particles of the campaign that share an input together",
    "particle": "each particle by itself",
}
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
            f"{log}.csv: {len(table)} readings, {int(status.isin(USED).sum())} used, "
            f"{int((status == 'flagged').sum())} of these flagged, {int((status == 'excluded').sum())} excluded"
            + (f", {out} left out by the reduction" if (out := int((status == "left_out").sum())) else ""),
            "  ",
        )
        for _, one in table[~status.isin(("used", "left_out"))].iterrows():
            why = str(one["exclude"]) if one["status"] == "excluded" else str(one["flags"]).replace(";", ", ")
            lines += wrapped(f"line {int(one['line'])} {one['status']}: {why.replace('_', ' ')}", "    ")
        gone = table[status == "left_out"]
        if len(gone):
            row = found.methods[found.methods["method"] == log]
            why = str(row["reason"].iloc[0] or row["status"].iloc[0]) if len(row) else "not used"
            span = f"lines {int(gone['line'].min())} to {int(gone['line'].max())}"
            lines += wrapped(f"{span} left out: {why.replace('_', ' ')}", "    ")
    return lines or ["  None of this particle's readings is in the results."]


def _inputs(found: Findings) -> list[str]:
    lines = []
    for _, one in found.inputs.iterrows():
        text = f"  {one['input']:<48} {with_u(one['estimate'], one['u'], str(one['unit'])):<24}"
        if not float(one["u"]) > 0.0:
            text += " exact"
        elif math.isfinite(one["adjusted_estimate"]):
            text += f" adjusted {with_u(one['adjusted_estimate'], one['adjusted_u'])}"
            if math.isfinite(one.get("pull", math.nan)) and abs(one["pull"]) > 2.0:
                text += f", pull {one['pull']:+.1f}"
        lines.append(text)
    for key, one in sorted(found.facts.get("trap_constants", {}).items()):
        text = f"{key} = {one['estimate']:.6g}"
        if "adjusted" in one:
            text += f", adjusted {one['adjusted']:.6g}"
        lines += wrapped(f"{text}, from the drawing of the electrodes: D0 exp(sum S_k (x_k - x0_k)), A likewise", "  ")
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
        if math.isfinite(one.get("normalized_residual", math.nan)):
            lines += wrapped(
                f"less the adjusted value, over the u of that difference: {one['normalized_residual']:+.2f}", "    "
            )
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
            f"with the covariance that shared inputs cause, {TOGETHER[str(found.facts['adjust'])]} "
            f"(adjust: {found.facts['adjust']}).",
            "  ",
        )
    lines.append(f"  s = {with_u(row['charge_to_mass_C_per_kg'], row['u_charge_to_mass_C_per_kg'], 'C/kg')}")
    low, high = row["charge_to_mass_low_C_per_kg"], row["charge_to_mass_high_C_per_kg"]
    if math.isfinite(low) and math.isfinite(high):
        dof = float(row["effective_degrees_of_freedom"])
        freedom = "unlimited" if math.isinf(dof) or dof > 1e4 else f"{dof:.3g}"
        lines += wrapped(
            f"{coverage(found)} coverage interval {low:.6g} to {high:.6g} C/kg: s exp(+-t u/|s|), t of Student with "
            f"{freedom} effective degrees of freedom",
            "    ",
        )
    lines.append(f"  gamma = {with_u(row['drag_rate_per_s'], row['u_drag_rate_per_s'], '1/s')}")
    if math.isfinite(row["charge_drift_per_s"]):
        drift = with_u(row["charge_drift_per_s"], row["u_charge_drift_per_s"], "1/s")
        lines += wrapped(f"charge drift {drift}, relative; s refers to the mean time of the balance readings", "  ")
    lines += _chi_square(row["chi_square"], row["degrees_of_freedom"], "  chi-square of this particle alone")
    strain = found.facts.get("strain")
    if strain and strain["sentences"]:
        lines += ["", f"  What was adjusted together, {len(strain['sentences'])} findings:"]
        for sentence in strain["sentences"]:
            lines += wrapped(f"- {sentence}", "  ")
    return lines


def _budget(found: Findings) -> list[str]:
    lines: list[str] = []
    for result, unit in UNITS.items():
        table = found.budget[found.budget["result"] == result]
        if not len(table):
            continue
        table = table.assign(size=table["share"].abs()).sort_values(["size", "input"], ascending=[False, True])
        if result in ("charge_to_mass", "charge"):
            told = sentence([dict(one) for _, one in table.iterrows()], result)
            lines += [line.replace("\N{NO-BREAK SPACE}", " ") for line in wrapped(told, "  ")]
        lines.append(f"  {_named(result)}: u that each input causes, and its share of u squared")
        for _, one in table.head(LINES).iterrows():
            lines.append(
                f"    {one['input']:<56} {abs(one['component']):>10.2g} {unit:<5} {100 * one['share']:>6.1f} %"
            )
        rest = table["share"].iloc[LINES:]
        if len(rest):
            lines.append(f"    {f'{len(rest)} smaller ones together':<56} {'':>10} {'':<5} {100 * rest.sum():>6.1f} %")
    return lines or ["  The results hold no budget for this particle."]
