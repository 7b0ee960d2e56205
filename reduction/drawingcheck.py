"""What the outlines of a drawing must not do: touch, cross, lie in metal, or come within their tolerance."""

from __future__ import annotations

from collections.abc import Iterator

from reduction.clearances import crossings, enclosed, smallest_gaps
from reduction.conductors import DrawingError, Electrodes, place
from reduction.drawing import MIRROR, Drawing
from reduction.errors import Faults

TOLERATED = 2.0  # standard uncertainties of a gap that it has to be wider than
SHARPEST = 1e-5  # of the drawing's size, below which a gap is no gap


def check_outlines(drawing: Drawing, path: str, *, faults: Faults) -> None:
    """Record a fault for every outline that is none, and for every pair that touches or may touch within tolerance.

    Parameters
    ----------
    drawing : Drawing
        As read.
    path : str
        File it stands in.
    faults : Faults
        Collector.
    """
    try:
        electrodes = drawing.electrodes(drawing.nominal)
    except DrawingError as error:
        _add(drawing, path, faults, error.conductor, str(error), "an outline that a conductor can have",
             "Correct its points.")  # fmt: skip
        return
    met = set()
    for one in crossings(electrodes):
        met.add(frozenset((one.name_a, one.name_b)))
        if one.name_a == one.name_b:
            found, advice = f"an outline that crosses itself at {place(one.at)}", "Order its points along the outline."
        else:
            found = f"{one.name_a} and {one.name_b} touching or crossing at {place(one.at)}"
            advice = "Leave a gap between them, or draw them as one conductor."
        if one.name_b == MIRROR + one.name_a:
            advice = "A shape that reaches the middle plane is drawn whole, without mirrored."
        _add(drawing, path, faults, one.name_a, found, "conductors that do not touch", advice)
    for inner, outer in enclosed(electrodes):
        if frozenset((inner, outer)) not in met:
            met.add(frozenset((inner, outer)))
            _add(drawing, path, faults, inner, f"{inner} within the metal of {outer}", "conductors side by side",
                 "A hollow one is drawn as the surface around the others, from axis to axis.")  # fmt: skip
    for names, found in _narrow(drawing, electrodes):
        if frozenset(names) not in met:
            _add(drawing, path, faults, names[0], found, "a gap wider than twice its uncertainty",
                 "Measure the gap itself and draw it as a dimension, or look up the dimensions.")  # fmt: skip


def _narrow(drawing: Drawing, electrodes: Electrodes) -> Iterator[tuple[tuple[str, str], str]]:
    """Pairs whose gap is no wider than what the dimensions leave open."""
    size = max(conductor.size for conductor in electrodes.conductors)
    gaps = {(one.name_a, one.name_b): one for one in smallest_gaps(electrodes)}
    reach = sum(abs(one.u) for one in drawing.dimensions.values())
    near = {names: one for names, one in gaps.items() if one.distance < 20.0 * reach + SHARPEST * size}
    variance = dict.fromkeys(near, 0.0)
    nominal = drawing.nominal
    for place_, one in enumerate(drawing.dimensions.values()) if near else ():
        if not one.u:
            continue
        moved = nominal.copy()
        moved[place_] += one.u * 1e-3
        try:
            after = {(gap.name_a, gap.name_b): gap for gap in smallest_gaps(drawing.electrodes(moved))}
        except DrawingError:
            continue
        for names in near:
            variance[names] += ((after[names].distance - near[names].distance) * 1e3) ** 2
    for names, gap in near.items():
        u = variance[names] ** 0.5
        if gap.distance <= TOLERATED * u or gap.distance <= SHARPEST * size:
            yield (
                names,
                (
                    f"a gap of {gap.distance * 1e3:.3g} mm, u = {u * 1e3:.2g} mm, between {names[0]} at "
                    f"{place(gap.at_a)} and {names[1]} at {place(gap.at_b)}"
                ),
            )


def column_of(drawing: Drawing, conductor: str) -> tuple[int, str]:
    """Line and key of a conductor, or of the drawing where none of that name is drawn."""
    for shape in drawing.shapes:
        if shape.name == conductor:
            return shape.line, f"electrodes.conductors.{conductor.removeprefix(MIRROR)}"
    return drawing.line, "electrodes"


def _add(drawing: Drawing, path: str, faults: Faults, conductor: str, found: str, expected: str, advice: str) -> None:
    line, column = column_of(drawing, conductor)
    faults.add(path, line=line, column=column, found=found, expected=expected, advice=advice)
