"""The page of a trap whose electrodes are drawn: its constants, what makes them uncertain, figures ready to be set."""

from __future__ import annotations

import re
from typing import Any

from reduction import figurestyle, trapfigures
from reduction.campaignsections import bullets, lead, section, table
from reduction.comparisonreport import set_drawing
from reduction.sheets import Sheet, sheet
from reduction.trapconstants import TrapConstants
from reduction.trapwords import (
    MM,
    couplings,
    departure,
    gradient_off_at,
    heights,
    length,
    measure_better,
    off_at,
    ranked,
    share,
)
from reduction.typeset import MINUS, bracketed_alone, foreign, minus, pair, percent, significant
from reduction.wording import CAUTIONS

Row = dict[str, Any]
_DRAWING_WORDS = (
    "To scale. Left of the axis: equipotentials of the drive in steps of 0.1 of its voltage; right of it: of dc in as "
    "many steps. The cross is where the drive's field vanishes."
)
CAPACITANCE_WORDS = (
    "As drawn, without leads and insulators. The capacitors of the supplies hold far more, and keep it when switched "
    "off."
)
AXIS_FILE = "figures/field_on_axis.csv"
PAIRS_MOST = 12  # capacitances printed


def content(name: str, found: TrapConstants, source: str = "") -> Row:
    """Plain data of the page of one trap.

    Parameters
    ----------
    name : str
        Of the trap.
    found : TrapConstants
        What its drawing makes.
    source : str
        Where the drawing comes from.
    """
    dc_field, gradient = found.quantities()
    dc, ac = found.relative_u
    with figurestyle.styled():
        drawn, axis = trapfigures.electrodes(foreign(name), found), trapfigures.along_axis(foreign(name), found)
    return {
        "name": foreign(name),
        "facts": [
            ["Dc field per volt D", f"{bracketed_alone(dc_field.estimate, dc_field.u)} m⁻¹ ({_percent(dc)})"],
            ["Ac gradient per volt A", f"{bracketed_alone(gradient.estimate, gradient.u)} m⁻² ({_percent(ac)})"],
            ["Correlation of D and A", minus(f"{found.correlation:.2f}")],
            ["Centre of the drive", minus(length(found.centre, found.centre_u))],
            ["Usable height", f"{significant(found.usable_height * MM)} mm either way"],
            ["Numerical solution", f"relative u {significant(found.solution_u, 1)}"],
            *([["Source", foreign(source)]] if source else []),
        ],
        "drawing": set_drawing(drawn, _DRAWING_WORDS),
        "budget": _budget(found),
        "better": [foreign(minus_words(text)) for text in measure_better(found)],
        "axis": set_drawing(axis, "Grey: the usable height."),
        "axis_numbers": [dict(zip(axis.columns, row, strict=True)) for row in axis.rows],
        "departure": _departure(found),
        "departure_said": [foreign(minus_words(text)) for text in departure(found)],
        "capacitances": _capacitances(found),
    }  # fmt: skip


def sections(number: int, page: Row) -> list[Row]:
    """The page of one trap as sections of a campaign's report, numbered so that no two have one address."""
    ident, name = f"trap-{number}", page["name"]
    labels, values = ([pair_of[which] for pair_of in page["facts"]] for which in (0, 1))

    def drawn(what: str, *files: str) -> Row:
        figure = {**page[what], "files": list(files)}
        return {"kind": "figure", "name": f"{ident}-{what}", "title": "", "figure": figure}

    return [
        section(ident, f"Trap {name} from the drawing of its electrodes",
                table(sheet(["Constant", "Value"], [labels, values], "ll", [1, 2]), f"Constants of trap {name}"),
                drawn("drawing")),
        section(f"{ident}-budget", f"What makes the constants of {name} uncertain",
                table(page["budget"], "Dimensions and what they do to D and A",
                      "No dimension carries an uncertainty.", size=8.0, file="inputs.csv"),
                bullets(page["better"]), level=2),
        section(f"{ident}-departure", f"Departure of {name} from the linear field", drawn("axis", AXIS_FILE),
                table(page["departure"], "Departure of the fields by height", size=8.0),
                bullets(page["departure_said"]), level=2),
        section(f"{ident}-capacitances", f"Capacitances of {name}", lead(CAPACITANCE_WORDS),
                table(page["capacitances"], "Capacitances between conductors", size=8.0), level=2),
    ]  # fmt: skip


def document(name: str, found: TrapConstants, *, digest: str, source: str = "") -> Row:
    """The page as a document of its own."""
    page = content(name, found, source)
    return {
        "title": f"Trap {name}: constants from the drawing of its electrodes",
        "kind": "Trap constants",
        "headline": f"Trap {page['name']}",
        "subline": "Constants from the drawing of the electrodes",
        "running": f"Trap {page['name']}",
        "digest": digest,
        "digest_word": "Drawing and program",
        "trap": page,
        "cautions": [list(words) for words in CAUTIONS],
    }


def minus_words(text: str) -> str:
    """A sentence with a true minus before its numbers, and its letters as they are printed."""
    return re.sub(r"(?<= )-(?=\d)", MINUS, text).replace("Omega^2 K", "Ω²K")


def _percent(relative: float) -> str:
    return f"{significant(100 * relative, 2)}\N{NARROW NO-BREAK SPACE}%"


def _budget(found: TrapConstants) -> Sheet | None:
    rows = ranked(found)
    if not rows:
        return None
    both = [pair(one.estimate * MM, one.u * MM) if one.u else (f"{one.estimate * MM:.6g}", "0") for one in rows]
    parts = [[_signed(part) if one.u else "0" for part in one.parts] for one in rows]
    shares = [[percent(part) for part in share(found, one)] for one in rows]
    return sheet(
        ["Dimension", "Estimate\n/ mm", "u\n/ mm", "Shape", "D off by\n/ %", "A off by\n/ %", "Share of\nD / %",
         "Share of\nA / %"],
        [
            [foreign(one.name.replace("_", " ")) for one in rows],
            [minus(value) for value, _ in both],
            [u for _, u in both],
            [one.shape for one in rows],
            *([row[which] for row in parts] for which in (0, 1)),
            *([row[which] for row in shares] for which in (0, 1)),
        ],
        "lrrlrrrr",
        [2, 0, 0, 0, 0, 0, 0, 0],
    )  # fmt: skip


def _signed(relative: float) -> str:
    return minus(f"{100 * relative:+.2f}")


def _departure(found: TrapConstants) -> Sheet:
    rows = heights(found)
    return sheet(
        ["Height from the\ncentre / mm", "Gradient of the\ndrive off by / %", "Field of the\ndrive off by / %",
         "Field of dc\noff by / %"],
        [
            [minus(f"{one * MM:.3g}") for one in rows],
            [_signed(gradient_off_at(found, one)) for one in rows],
            *([_signed(off_at(found, one)[which]) for one in rows] for which in (0, 1)),
        ],
        "rrrr",
        [1, 1, 1, 1],
    )  # fmt: skip


def _capacitances(found: TrapConstants) -> Sheet:
    rows = sorted(couplings(found), key=lambda one: -abs(one[2]))[:PAIRS_MOST]
    return sheet(
        ["Between", "and", "Capacitance\n/ pF"],
        [
            [foreign(a) for a, _, _ in rows],
            [foreign(b or "ground far away") for _, b, _ in rows],
            [significant(farad * 1e12) for _, _, farad in rows],
        ],
        "llr",
        [1, 1, 0],
    )
