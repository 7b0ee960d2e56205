"""What a drawing of the electrodes says of a trap, in sentences and in lines for the terminal."""

from __future__ import annotations

from reduction.quantity import shorthand
from reduction.trapconstants import CHANGE, Dimension, TrapConstants
from reduction.wording import joined

MM = 1e3
SMALL = 0.1  # of the variance: what makes up less is not worth measuring better
STEEP = 0.02  # of the dc field over the usable height, beyond which its gradient is worth a caution


def share(found: TrapConstants, one: Dimension) -> tuple[float, float]:
    """Share of a dimension in the variances of D and of A."""
    both = [(part / u) ** 2 if u else 0.0 for part, u in zip(one.parts, found.relative_u, strict=True)]
    return both[0], both[1]


def ranked(found: TrapConstants) -> list[Dimension]:
    """Dimensions, those first that make up most of the variances of D and A."""
    return sorted(found.dimensions, key=lambda one: (-sum(share(found, one)), one.name))


def measure_better(found: TrapConstants) -> list[str]:
    """Which dimensions to measure better, and what it would bring."""
    words: list[str] = []
    for one in ranked(found)[:2]:
        told = [
            f"{100 * part:.0f} % of the variance of {constant}; known exactly, it would bring the uncertainty from "
            f"{_percent(now)} to {_percent(less)}"
            for constant, part, now, less in zip(
                "DA", share(found, one), found.relative_u, found.without(one.name), strict=True
            )
            if part >= SMALL
        ]
        if not told:
            break
        words.append(f"{'Then measure' if words else 'Measure'} {one.name} better: {', and '.join(told)}.")
    exact = [one.name for one in found.dimensions if not one.u]
    if exact:
        words.append(f"Taken as exact, so that no uncertainty of theirs is counted: {joined(exact)}.")
    return words or ["No dimension carries an uncertainty: state one for each that was measured."]


def departure(found: TrapConstants) -> list[str]:
    """Where the field departs from the linear one, and what the program makes of it."""
    usable = found.usable_height
    gradient = off_at(found, usable)
    words = [
        f"The drive's gradient is within {100 * CHANGE:g} % of that at the centre up to {usable * MM:.3g} mm either "
        f"way; there the drive's field is off by {_signed(gradient[0])} and the dc field by {_signed(gradient[1])}.",
        "A weakly held particle makes more of it: what the dc field is off by counts as often as the height at which "
        "gravity alone would hold it, g' / (Omega^2 K), is larger than its own. Each session's report says how much.",
    ]
    if abs(found.dc_terms[0]) * usable > STEEP:
        words.append(
            f"The dc field is not even about the centre: it changes by {100 * found.dc_terms[0] * 1e-3:.2g} % per mm. "
            "With dc on, that stiffens or softens the trap, which no secular frequency is corrected for. Half the "
            "voltage on each plate (dc_applied: both_plates) avoids it."
        )
    if found.centre_u > 0.1 * usable:
        words.append(f"The centre lies at {length(found.centre, found.centre_u)} of the drawing.")
    return words


def off_at(found: TrapConstants, height: float) -> tuple[float, float]:
    """Relative departure of the drive's field and of the dc field at a height from the centre [m]."""
    drive = sum(one * height**power for power, one in enumerate(found.drive_terms, 1))
    return drive, sum(one * height**power for power, one in enumerate(found.dc_terms, 1))


def gradient_off_at(found: TrapConstants, height: float) -> float:
    """Relative departure of the drive's gradient at a height from the centre [m]."""
    return sum((power + 1) * one * height**power for power, one in enumerate(found.drive_terms, 1))


def _percent(relative: float) -> str:
    return f"{100 * relative:#.2g} %"


def _signed(relative: float) -> str:
    return f"{100 * relative:+.2f} %"


def length(estimate: float, u: float) -> str:
    """A place or length in mm, to the nanometre at most, with its uncertainty where that is as much."""
    return f"{shorthand(round(estimate * MM, 6) + 0.0, round(u * MM, 6))} mm"


def constants_text(name: str, found: TrapConstants, source: str = "") -> str:
    """Everything about a trap for the terminal: constants, budget, departure, capacitances, what to measure better."""
    (dc, ac), (dc_field, gradient) = found.relative_u, found.quantities()
    lines = [
        f"trap {name}" + (f" ({source})" if source else ""),
        f"  dc field per volt     D = {shorthand(dc_field.estimate, dc_field.u)} 1/m    ({_percent(dc)})",
        f"  ac gradient per volt  A = {shorthand(gradient.estimate, gradient.u)} 1/m2    ({_percent(ac)})",
        f"  correlation of D and A  {found.correlation:.2f}",
        f"  centre of the drive     {length(found.centre, found.centre_u)}",
        f"  usable height           {found.usable_height * MM:.3g} mm either way",
        f"  numerical solution      relative u {found.solution_u:.1g}",
        "",
        "what makes the uncertainty (k = 1)",
        f"  {'dimension':24}{'estimate/mm':>12}{'u/mm':>10}  {'shape':12}{'D off by':>10}{'A off by':>10}{'share D':>9}"
        f"{'share A':>9}",
    ]
    for one in ranked(found):
        parts, shares = one.parts, share(found, one)
        lines.append(
            f"  {one.name:24}{one.estimate * MM:>12.6g}{one.u * MM:>10.2g}  {one.shape:12}"
            + "".join(f"{_signed(part) if one.u else '':>10}" for part in parts)
            + "".join(f"{f'{100 * one_share:.0f} %':>9}" for one_share in shares)
        )
    lines += ["", *measure_better(found), "", "departure from the linear field"]
    lines.append(f"  {'height/mm':>10}{'gradient of drive':>20}{'field of drive':>17}{'field of dc':>14}")
    for height in heights(found):
        off = gradient_off_at(found, height), *off_at(found, height)
        lines.append(
            f"  {height * MM:>10.3g}"
            + "".join(f"{_signed(one):>{width}}" for one, width in zip(off, (20, 17, 14), strict=True))
        )
    lines += [*departure(found), "", "capacitances, pF, as drawn and without leads"]
    for a, b, farad in couplings(found):
        lines.append(f"  {a} to {b or 'ground'}: {farad * 1e12:.3g}")
    return "\n".join(lines) + "\n"


def heights(found: TrapConstants) -> list[float]:
    """Heights that a table of the departure shows [m]."""
    return [fraction * found.usable_height for fraction in (-1.0, -0.5, 0.5, 1.0)]


def couplings(found: TrapConstants) -> list[tuple[str, str, float]]:
    """Capacitance between each two conductors, and of each to what is grounded far away [F]."""
    names = [one.name for one in found.outlines]
    pairs = [
        (names[i], names[k], -found.capacitances[i][k]) for i in range(len(names)) for k in range(i + 1, len(names))
    ]
    own = [
        (one.name, "", sum(row))
        for one, row in zip(found.outlines, found.capacitances, strict=True)
        if one.carries != "ground"
    ]
    return [*pairs, *(one for one in own if abs(one[2]) > 1e-3 * abs(found.capacitances[0][0]))]
