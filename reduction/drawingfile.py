"""The drawing of the electrodes in a trap file: dimensions and conductors read, each fault with its line."""

from __future__ import annotations

from collections.abc import Callable, Iterator
from dataclasses import dataclass, field

from reduction.contract import ID, ID_WORDS
from reduction.drawing import Coordinate, Drawing, Point, Shape, Step
from reduction.entries import Entries, value_of
from reduction.errors import Faults, nearest
from reduction.quantity import Quantity, QuantityError, read_number, read_quantity
from reduction.yamlfile import Mapping, Node, Scalar, Sequence, plain, shown

CARRIES = ("drive", "dc_above", "dc_below", "ground")
RESERVED = ("field_solution", "field_departure")
"""Names of inputs of a trap that are no dimensions."""
MM = 1e3
LARGEST = 1e4  # of a coordinate [mm]
FORMS = ("outline", "circle", "rectangle")
_KEYS = ("carries", "mirrored", "sheet", *FORMS)
_TOOLS = {"true": "yes", "false": "no"}  # what tools that rewrite a file make of yes and no
_COORDINATE = "a number in mm, the name of a dimension, one with a minus, or a list of those that is summed"
_POINT = "[r, z]"


@dataclass
class _Reader:
    """Where the file is being read, what its dimensions are, and what was found wrong."""

    path: str
    faults: Faults
    dimensions: dict[str, Quantity] = field(default_factory=dict)
    lines: dict[str, int] = field(default_factory=dict)
    used: set[str] = field(default_factory=set)

    def fault(self, line: int, column: str, found: str, expected: str, advice: str = "") -> None:
        self.faults.add(
            self.path, line=line, column=f"electrodes.{column}", found=found, expected=expected, advice=advice
        )


class _Bad(Exception):
    def __init__(self, line: int, found: str, expected: str, advice: str = "") -> None:
        self.line, self.found, self.expected, self.advice = line, found, expected, advice
        super().__init__(found)


def read_drawing(entries: Entries, path: str, *, faults: Faults) -> Drawing | None:
    """Drawing in the entries of a trap file; None, with every fault, where it is not whole.

    What the outlines do to each other is another question; see `drawingcheck`.
    """
    before = len(faults)
    line = entries["electrodes"].line
    reader = _Reader(path, faults)
    for key in ("dc_applied", "conductors"):
        if f"electrodes.{key}" not in entries:
            reader.fault(line, key, "nothing", _EXPECTED[key], "Add the key.")
    dimensions = value_of(entries, "electrodes.dimensions_mm", Mapping())
    _read_dimensions(reader, dimensions)
    shapes: list[Shape] = []
    conductors = value_of(entries, "electrodes.conductors", Mapping())
    for name, node in conductors.entries.items():
        try:
            shapes += _conductor(reader, name, node, conductors.lines[name])
        except _Bad as bad:
            reader.fault(bad.line, f"conductors.{name}", bad.found, bad.expected, bad.advice)
    if len(faults) == before:
        for name in sorted(set(reader.dimensions) - reader.used):
            reader.fault(
                reader.lines[name],
                f"dimensions_mm.{name}",
                f"{name}, which no conductor uses",
                "dimensions of the conductors",
                "Delete it, or write its name where the outline depends on it.",
            )
        _check_roles(reader, shapes, str(value_of(entries, "electrodes.dc_applied")), line)
    if len(faults) > before:
        return None
    return Drawing(
        dict(sorted(reader.dimensions.items())),
        tuple(shapes),
        str(value_of(entries, "electrodes.dc_applied")),
        str(value_of(entries, "electrodes.departure", "component")),
        line,
    )


_EXPECTED = {
    "dc_applied": "both_plates (half the voltage on each) or one_plate (all of it on one, the other grounded)",
    "conductors": "at least one that carries the drive and one that carries dc",
}


def _read_dimensions(reader: _Reader, mapping: Mapping) -> None:
    for name, node in mapping.entries.items():
        line, column = mapping.lines[name], f"dimensions_mm.{name}"
        reader.lines[name] = line
        reader.dimensions[name] = Quantity(1e-3)  # a faulty one is known all the same
        if not ID.fullmatch(name) or name[:1].isdigit():
            reader.fault(line, column, f"the name {name}", f"{ID_WORDS.replace(' or digit', '')}")
        elif name in RESERVED:
            reader.fault(line, column, f"the name {name}", "a name that is not taken", "Choose another.")
        elif isinstance(node, Sequence) or (isinstance(node, Scalar) and node.empty):
            reader.fault(line, column, shown(node), "a length in mm such as 5, 5.00(5), or {value: 5, u: 0.05}")
        else:
            try:
                quantity = read_quantity(plain(node), "mm")
            except QuantityError as bad:
                reader.fault(line, column, bad.found, bad.expected, bad.advice)
                continue
            if abs(quantity.estimate) * MM > LARGEST:
                reader.fault(line, column, shown(node), f"at most {LARGEST:g} mm", "Lengths are in mm here.")
            reader.dimensions[name] = quantity


def _conductor(reader: _Reader, name: str, node: Node, line: int) -> list[Shape]:
    """One conductor, and its mirror image where one is asked for."""
    column = f"conductors.{name}"
    if not ID.fullmatch(name):
        reader.fault(line, column, f"the name {name}", ID_WORDS)
    if not isinstance(node, Mapping):
        raise _Bad(line, shown(node), f"carries, and one of {', '.join(FORMS)}, below it")
    for key in node.entries:
        if key not in _KEYS:
            reader.fault(node.lines[key], f"{column}.{key}", "an unknown key", "a key of a conductor",
                         nearest(key, _KEYS))  # fmt: skip
    carries = _word(reader, node, column, "carries", CARRIES, line)
    mirrored = _word(reader, node, column, "mirrored", ("no", "yes"), line) == "yes"
    sheet = _word(reader, node, column, "sheet", ("no", "yes"), line) == "yes"
    forms = [form for form in FORMS if form in node.entries]
    if len(forms) != 1:
        raise _Bad(line, " and ".join(forms) or "no outline", f"one of {', '.join(FORMS)}", "Give one of them.")
    (form,) = forms
    start, steps = _READERS[form](reader, node.entries[form])
    shape = Shape(name, carries, start, steps, line)
    ends = start.r.on_axis and steps[-1].end.r.on_axis
    if not shape.closed and not ends and not sheet:
        last = steps[-1].end
        raise _Bad(
            node.lines[form],
            f"an outline from {_place(reader, start)} to {_place(reader, last)}",
            "one that comes back to its first point, or begins and ends on the axis (r = 0)",
            "Write the first point again at its end. A thin sheet with a free edge is said by sheet: yes.",
        )
    if sheet and shape.closed:
        raise _Bad(node.lines["sheet"], "sheet: yes with a closed outline", "an outline with a free edge",
                   "Leave sheet out.")  # fmt: skip
    for point in shape.points():
        r = point.r.at(_values(reader))
        if r < 0.0:
            found = f"r = {r * MM:.6g} mm"
            raise _Bad(node.lines[form], found, "a radius of 0 or more",
                       "Draw the half with r of 0 or more only; it is turned about the axis.")  # fmt: skip
    return [shape, shape.mirrored] if mirrored else [shape]


def _word(reader: _Reader, node: Mapping, column: str, key: str, words: tuple[str, ...], line: int) -> str:
    """A word under a key; the first of its words where it is left out, but nothing that is carried is left out."""
    if key not in node.entries:
        if key == "carries":
            reader.fault(line, f"{column}.{key}", "nothing", f"one of {', '.join(words)}", "Add the key.")
        return words[0]
    given = node.entries[key]
    text = given.text if isinstance(given, Scalar) else shown(given)
    text = _TOOLS.get(text, text) if words == ("no", "yes") else text
    if text in words:
        return text
    advice = nearest(text, words) if key == "carries" else "Write yes, or leave the key out."
    reader.fault(node.lines[key], f"{column}.{key}", text or "nothing", f"one of {', '.join(words)}", advice)
    return words[0]


def _values(reader: _Reader) -> dict[str, float]:
    return {name: one.estimate for name, one in reader.dimensions.items()}


def _place(reader: _Reader, point: Point) -> str:
    r, z = (value * MM for value in point.at(_values(reader)))
    return f"({r:.6g}, {z:.6g}) mm"


def _coordinate(reader: _Reader, node: Node) -> Coordinate:
    if isinstance(node, Sequence) and node.items:
        total = Coordinate()
        for item in node.items:
            if not isinstance(item, Scalar):
                raise _Bad(item.line, shown(item), _COORDINATE)
            total = total + _coordinate(reader, item)
        return total
    if not isinstance(node, Scalar) or node.empty or not node.text:
        raise _Bad(node.line, shown(node), _COORDINATE)
    text = node.text.replace("\N{MINUS SIGN}", "-")
    name = text.removeprefix("-").strip()
    if name in reader.dimensions:
        reader.used.add(name)
        return Coordinate(0.0, ((name, -1 if text.startswith("-") else 1),))
    try:
        number = read_number(text)
    except QuantityError as bad:
        known = sorted(reader.dimensions)
        if ID.fullmatch(name) and not name[:1].isdigit():
            advice = nearest(name, known) if known else "Add it under dimensions_mm."
            raise _Bad(node.line, f"{name}, which is no dimension", _COORDINATE, advice) from None
        advice = bad.advice
        if "(" in text:
            advice = "A length with an uncertainty stands under dimensions_mm, and its name here."
        elif set(text) & set("+*/"):
            advice = "Nothing is computed here: list what is to be added, [a, -b]."
        raise _Bad(node.line, shown(node), _COORDINATE, advice) from None
    if abs(number) > LARGEST:
        raise _Bad(node.line, shown(node), f"at most {LARGEST:g} mm", "Lengths are in mm here.")
    return Coordinate(number / MM)


def _point(reader: _Reader, node: Node) -> Point:
    if not isinstance(node, Sequence) or len(node.items) != 2:
        raise _Bad(node.line, shown(node), f"a point {_POINT}: radius from the axis and height, in mm")
    return Point(*(_coordinate(reader, item) for item in node.items))


def _part(node: Mapping, key: str, expected: str) -> Node:
    if key not in node.entries:
        raise _Bad(node.line, f"no key {key}", expected, "Add it.")
    return node.entries[key]


def _only(node: Node, keys: tuple[str, ...], expected: str) -> Mapping:
    if not isinstance(node, Mapping):
        raise _Bad(node.line, shown(node), expected)
    for key in node.entries:
        if key not in keys:
            raise _Bad(node.lines[key], f"the key {key}", expected, nearest(key, keys))
    return node


def _outline(reader: _Reader, node: Node) -> tuple[Point, tuple[Step, ...]]:
    expected = (
        f"a list of two or more points {_POINT} or arcs {{arc_to: {_POINT}, centre: {_POINT}, turning: anticlockwise}}"
    )
    if not isinstance(node, Sequence) or len(node.items) < 2:
        raise _Bad(node.line, shown(node), expected)
    start = _point(reader, node.items[0])
    steps = []
    for item in node.items[1:]:
        if not isinstance(item, Mapping):
            steps.append(Step(_point(reader, item)))
            continue
        arc = _only(item, ("arc_to", "centre", "turning"), "arc_to, centre and turning")
        end, centre = (_point(reader, _part(arc, key, f"{key}: {_POINT}")) for key in ("arc_to", "centre"))
        turning = _part(arc, "turning", "anticlockwise or clockwise, r to the right and z up")
        text = turning.text if isinstance(turning, Scalar) else shown(turning)
        if text not in ("anticlockwise", "clockwise"):
            raise _Bad(turning.line, text, "anticlockwise or clockwise", nearest(text, ["anticlockwise", "clockwise"]))
        steps.append(Step(end, centre, text == "anticlockwise"))
    values = _values(reader)
    for before, after, item in zip([start, *(step.end for step in steps)], steps, node.items[1:], strict=False):
        if after.centre is None:
            continue
        (r, z), ends = after.centre.at(values), (before.at(values), after.end.at(values))
        near, far = sorted(((end[0] - r) ** 2 + (end[1] - z) ** 2) ** 0.5 for end in ends)
        if far - near > 1e-6 * far:
            found = f"an arc with one end {near * MM:.6g} mm from its centre and the other {far * MM:.6g} mm"
            raise _Bad(item.line, found, "the same distance", "Correct the centre or an end.")
    return start, tuple(steps)


def _circle(reader: _Reader, node: Node) -> tuple[Point, tuple[Step, ...]]:
    """A round cross-section: a ring of round wire, or a sphere where its centre is on the axis."""
    expected = f"{{centre: {_POINT}, radius: a length}}"
    mapping = _only(node, ("centre", "radius"), expected)
    centre = _point(reader, _part(mapping, "centre", expected))
    radius = _coordinate(reader, _part(mapping, "radius", expected))
    if radius.at(_values(reader)) <= 0.0:
        raise _Bad(mapping.lines["radius"], f"a radius of {radius.at(_values(reader)) * MM:.6g} mm", "one above 0")
    if centre.r.on_axis:
        bottom, top = (Point(Coordinate(), centre.z + part) for part in (-radius, radius))
        return bottom, (Step(top, centre),)
    outer, inner = (Point(centre.r + part, centre.z) for part in (radius, -radius))
    return outer, (Step(inner, centre), Step(outer, centre))


def _rectangle(reader: _Reader, node: Node) -> tuple[Point, tuple[Step, ...]]:
    """A square-edged cross-section: a plate, with a hole or without, a flat ring, or a rod along the axis."""
    expected = "{r: [inner, outer], z: [lower, upper]}"
    mapping = _only(node, ("r", "z"), expected)
    ends = []
    for key in ("r", "z"):
        part = _part(mapping, key, expected)
        if not isinstance(part, Sequence) or len(part.items) != 2:
            raise _Bad(part.line, shown(part), expected)
        low, high = (_coordinate(reader, item) for item in part.items)
        values = _values(reader)
        if low.at(values) >= high.at(values):
            found = f"{key} from {low.at(values) * MM:.6g} to {high.at(values) * MM:.6g} mm"
            raise _Bad(part.line, found, "the lesser first", "Exchange them.")
        ends.append((low, high))
    (inner, outer), (lower, upper) = ends
    corners = [Point(inner, lower), Point(outer, lower), Point(outer, upper), Point(inner, upper)]
    if not inner.on_axis:
        corners.append(corners[0])
    return corners[0], tuple(Step(corner) for corner in corners[1:])


_READERS: dict[str, Callable[[_Reader, Node], tuple[Point, tuple[Step, ...]]]] = {
    "outline": _outline,
    "circle": _circle,
    "rectangle": _rectangle,
}


def _check_roles(reader: _Reader, shapes: list[Shape], dc_applied: str, line: int) -> None:
    """Something carries the drive, and what carries dc goes with how it is applied."""
    carried = {shape.carries for shape in shapes}
    if "drive" not in carried:
        reader.fault(line, "conductors", "no conductor that carries the drive", "one or more",
                     "Write carries: drive where the ac voltage is.")  # fmt: skip
    for there in _lacking(carried, dc_applied):
        reader.fault(line, "conductors", there, f"what dc_applied: {dc_applied} needs",
                     "Write carries: dc_above at the upper plate, dc_below at the lower, or mirrored.")  # fmt: skip


def _lacking(carried: set[str], dc_applied: str) -> Iterator[str]:
    plates = {"dc_above", "dc_below"}
    if not plates & carried:
        yield "no conductor that carries dc"
    elif dc_applied == "both_plates" and plates - carried:
        yield f"no conductor that carries {min(plates - carried)}"
