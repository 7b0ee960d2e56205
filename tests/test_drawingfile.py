"""The drawing of the electrodes in a trap file: every form that may stand there, every fault with its line."""

import numpy as np
import pytest
from drawn import DRAWING, OTHER, TEXT, changed, drawing_of, read

from reduction.conductors import Arc

CAN = "outline: [[0, 40], [30, 40], [30, -39], [0, -39]]"
RING = "circle: {centre: [ring_radius, 0], radius: wire_radius}"
PLATE = "rectangle: {r: [hole_radius, plate_radius], z: [plate_height, [plate_height, 2]]}"


def outline(drawing, name):
    """Ends of the pieces of one conductor, mm."""
    conductors = {one.name: one for one in drawing.electrodes(drawing.nominal).conductors}
    pieces = conductors[name].pieces
    return conductors[name], [tuple(round(1e3 * one, 9) for one in end) for end in
                              [pieces[0].start, *(piece.end for piece in pieces)]]  # fmt: skip


def test_dimensions_are_in_metres_sorted_with_shape_and_u(tmp_path):
    drawing = drawing_of(tmp_path)
    assert drawing.names == ("hole_radius", "plate_height", "plate_radius", "ring_radius", "wire_radius")
    assert drawing.nominal == pytest.approx([1e-3, 8e-3, 14e-3, 11.3e-3, 1e-3], rel=1e-12)
    assert drawing.u == pytest.approx([3e-5, 5e-5, 0.0, 6e-5, 2e-5 / 3**0.5], rel=1e-12)
    assert drawing.dimensions["wire_radius"].shape == "rectangular"
    assert (drawing.dc_applied, drawing.departure) == ("both_plates", "component")


def test_a_rectangle_off_the_axis_is_closed_and_its_mirror_image_carries_the_other_dc(tmp_path):
    drawing = drawing_of(tmp_path)
    upper, points = outline(drawing, "plate")
    assert upper.closed
    assert points == [(1, 8), (14, 8), (14, 10), (1, 10), (1, 8)]
    lower, points = outline(drawing, "mirror image of plate")
    assert points == [(1, -8), (14, -8), (14, -10), (1, -10), (1, -8)]
    assert (upper.carries, lower.carries) == ("dc_above", "dc_below")


def test_a_circle_off_the_axis_is_a_wire_and_on_it_a_sphere(tmp_path):
    wire, points = outline(drawing_of(tmp_path), "ring")
    assert wire.closed
    assert points == [(12.3, 0), (10.3, 0), (12.3, 0)]
    sphere = "circle: {centre: [0, [plate_height, 2]], radius: hole_radius}"
    both = drawing_of(tmp_path, changed((PLATE, sphere), ("    plate_radius: 14.0\n", "")))
    ball, points = outline(both, "plate")
    assert not ball.closed
    assert points == [(0, 9), (0, 11)]
    r, z = ball.pieces[0].points(np.array([0.5]))
    assert (1e3 * r[0], 1e3 * z[0]) == pytest.approx((1, 10))
    r, z = outline(both, "mirror image of plate")[0].pieces[0].points(np.array([0.5]))
    assert (1e3 * r[0], 1e3 * z[0]) == pytest.approx((1, -10))


def test_a_rod_along_the_axis_begins_and_ends_on_it(tmp_path):
    rod, points = outline(
        drawing_of(tmp_path, changed((PLATE, "rectangle: {r: [0, hole_radius], z: [plate_height, 20]}"),
                                     ("    plate_radius: 14.0\n", ""))),
        "plate",
    )  # fmt: skip
    assert not rod.closed
    assert points == [(0, 8), (1, 8), (1, 20), (0, 20)]


def test_arcs_turn_as_they_say_and_the_other_way_in_the_mirror_image(tmp_path):
    hemisphere = (
        "outline:\n        - [0, 9]\n        - {arc_to: [hole_radius, [9, hole_radius]], "
        "centre: [0, [9, hole_radius]], turning: anticlockwise}\n        - [hole_radius, 20]\n        - [0, 20]"
    )
    drawing = drawing_of(tmp_path, changed((PLATE, hemisphere), ("    plate_height: 8.00(5)\n", ""),
                                           ("    plate_radius: 14.0\n", "")))  # fmt: skip
    for name, side in (("plate", 1), ("mirror image of plate", -1)):
        arc = outline(drawing, name)[0].pieces[0]
        assert isinstance(arc, Arc)
        r, z = arc.points(np.array([0.5]))
        assert (1e3 * r[0], 1e3 * z[0]) == pytest.approx((0.5**0.5, side * (10 - 0.5**0.5)))


def test_coordinates_are_sums_of_numbers_and_dimensions(tmp_path):
    text = changed(("[30, 40], [30, -39]", "[[plate_radius, plate_radius, 2], 40], [30, [-plate_height, -31]]"))
    assert outline(drawing_of(tmp_path, text), "can")[1] == [(0, 40), (30, 40), (30, -39), (0, -39)]
    moved = drawing_of(tmp_path, text)
    at = moved.nominal + np.where(np.array(moved.names) == "plate_height", 1e-3, 0.0)
    conductors = {one.name: one for one in moved.electrodes(at).conductors}
    assert conductors["can"].pieces[1].end == pytest.approx((30e-3, -40e-3))
    assert conductors["mirror image of plate"].pieces[0].start == pytest.approx((1e-3, -9e-3))


def test_a_thin_sheet_has_a_free_edge_only_where_it_says_so(tmp_path):
    sheet = "outline: [[0, plate_height], [plate_radius, plate_height]]"
    text = changed((PLATE, sheet), ("    hole_radius: 1.00(3)\n", ""))
    (fault,) = read(tmp_path, text)[1]
    assert fault.found == "an outline from (0, 8) mm to (14, 8) mm"
    assert "first point again" in fault.advice
    drawing = drawing_of(tmp_path, text.replace(sheet, f"{sheet}\n      sheet: yes"))
    assert not outline(drawing, "plate")[0].closed


def line_of(text, part):
    return text[: text.index(part)].count("\n") + 1


@pytest.mark.parametrize(
    ("pairs", "at", "column", "found", "advice"),
    [
        ([("ring_radius: 11.30(6)", "ring_radius: about 11")], "ring_radius:", "dimensions_mm.ring_radius",
         "about 11", ""),
        ([("ring_radius: 11.30(6)", "ring_radius: [11, 12]")], "ring_radius:", "dimensions_mm.ring_radius",
         "a list", ""),
        ([("ring_radius: 11.30(6)", "ring_radius:")], "ring_radius:", "dimensions_mm.ring_radius", "nothing", ""),
        ([("ring_radius: 11.30(6)", "ring_radius: 11.30(6)\n    spare: 3")], "spare", "dimensions_mm.spare",
         "spare, which no conductor uses", "Delete it"),
        ([("ring_radius: 11.30(6)", "ring_radius: 11300000(6)")], "ring_radius:", "dimensions_mm.ring_radius",
         "11300000(6)", "in mm"),
        ([("plate_radius: 14.0", "field_solution: 14.0"),
          ("hole_radius, plate_radius]", "hole_radius, field_solution]")],
         "field_solution", "dimensions_mm.field_solution", "the name field_solution", "another"),
        ([("plate_radius: 14.0", "14: 14.0"), ("hole_radius, plate_radius]", "hole_radius, 14]")], "14: ",
         "dimensions_mm.14", "the name 14", ""),
        ([("centre: [ring_radius, 0]", "centre: [ring_radios, 0]")], "ring_radios", "conductors.ring",
         "ring_radios, which is no dimension", "Did you mean ring_radius?"),
        ([("centre: [ring_radius, 0]", "centre: [ring_radius + 1, 0]")], "ring_radius + 1", "conductors.ring",
         "ring_radius + 1", "list what is to be added"),
        ([("centre: [ring_radius, 0]", "centre: [11.30(6), 0]")], "11.30(6), 0", "conductors.ring", "11.30(6)",
         "stands under dimensions_mm"),
        ([("centre: [ring_radius, 0]", "centre: ring_radius")], "centre: ring", "conductors.ring", "ring_radius", ""),
        ([("centre: [ring_radius, 0]", "centre: [ring_radius, [[0]]]")], "[[0]]", "conductors.ring", "a list", ""),
        ([("centre: [ring_radius, 0], ", "")], "circle:", "conductors.ring", "no key centre", "Add"),
        ([("radius: wire_radius", "radius: -wire_radius")], "circle:", "conductors.ring", "a radius of -1 mm", ""),
        ([("radius: wire_radius", "radius: wire_radius, z: 2")], "circle:", "conductors.ring", "the key z", ""),
        ([("[30, 40]", "[-30, 40]")], CAN[:8], "conductors.can", "r = -30 mm", "the half with r of 0 or more"),
        ([("[0, -39]]", "[1, -39]]")], CAN[:8], "conductors.can", "an outline from (0, 40) mm to (1, -39) mm", "sheet"),
        ([("[[0, 40], ", "[[0, 40]]  # ")], CAN[:8], "conductors.can", "a list", ""),
        ([("[30, -39]", "{arc_to: [30, -39], centre: [0, 0], turning: clockwise}")], CAN[:8], "conductors.can",
         "an arc with one end 49.2037 mm from its centre and the other 50 mm", "Correct"),
        ([("[30, -39]", "{arc_to: [30, -39], centre: [0, 0.5]}")], CAN[:8], "conductors.can", "no key turning", "Add"),
        ([("[30, -39]", "{arc_to: [30, -39], centre: [0, 0.5], turning: left}")], CAN[:8], "conductors.can", "left",
         ""),
        ([("z: [plate_height, [plate_height, 2]]", "z: [[plate_height, 2], plate_height]")], PLATE[:12],
         "conductors.plate", "z from 10 to 8 mm", "Exchange"),
        ([("carries: drive", "carries: ac")], "carries: ac", "conductors.ring.carries", "ac", "Known here"),
        ([("      carries: drive\n", "")], "ring:\n", "conductors.ring.carries", "nothing", "Add"),
        ([("mirrored: yes", "mirrored: both")], "mirrored", "conductors.plate.mirrored", "both", "yes"),
        ([("mirrored: yes", "miror: yes")], "miror", "conductors.plate.miror", "an unknown key",
         "Did you mean mirrored?"),
        ([(RING, "outlines: []")], "outlines", "conductors.ring.outlines", "an unknown key", "outline"),
        ([(RING, f"{RING}\n      {CAN}")], "ring:\n", "conductors.ring", "outline and circle", "one of them"),
        ([("carries: drive", "carries: ground")], "electrodes:", "conductors",
         "no conductor that carries the drive", ""),
        ([("      mirrored: yes\n", "")], "electrodes:", "conductors",
         "no conductor that carries dc_below", "mirrored"),
        ([("carries: dc_above", "carries: ground")], "electrodes:", "conductors", "no conductor that carries dc", ""),
        ([("  dc_applied: both_plates\n", "")], "electrodes:", "dc_applied", "nothing", "Add the key"),
        ([("both_plates", "top_plate")], "top_plate", "dc_applied", "top_plate", "Did you mean"),
        ([("dc_applied: both_plates", "dc_applied: both_plates\n  departure: ignored")], "ignored", "departure",
         "ignored", ""),
        ([("dc_applied: both_plates", "dc_applied: both_plates\n  scale: 2")], "scale", "scale", "an unknown key", ""),
    ],
)  # fmt: skip
def test_fault_of_a_drawing(tmp_path, pairs, at, column, found, advice):
    text = changed(*pairs)
    drawing, faults = read(tmp_path, text)
    assert [str(fault) for fault in faults if fault.found.startswith(found)], "\n".join(map(str, faults))
    fault = next(fault for fault in faults if fault.found.startswith(found))
    assert fault.path == "traps/ring-a.yaml"
    assert fault.column == f"electrodes.{column}"
    assert fault.line == line_of(text, at)
    assert advice in fault.advice
    assert fault.expected


def test_all_faults_are_found_at_once(tmp_path):
    text = changed(("11.30(6)", "eleven"), ("carries: drive", "carries: ac"), ("[30, 40]", "[-30, 40]"),
                   ("stray_field_V_per_m: 0(40)\n", ""))  # fmt: skip
    columns = {fault.column for fault in read(tmp_path, text)[1]}
    assert columns == {
        "stray_field_V_per_m", "electrodes.dimensions_mm.ring_radius", "electrodes.conductors.ring.carries",
        "electrodes.conductors.can",
    }  # fmt: skip


@pytest.mark.parametrize(
    ("pairs", "conductor", "found"),
    [
        ([("plate_height: 8.00(5)", "plate_height: 0.50(5)")], "ring", "ring and plate touching or crossing"),
        ([("[30, 40], [30, -39]", "[13, 40], [13, -39]")], "plate", "plate and can touching or crossing"),
        ([(CAN, "outline: [[0, 40], [30, -39], [30, 40], [0, -39]]")], "can", "an outline that crosses itself"),
        (
            [("[plate_height, [plate_height, 2]]", "[-1, [plate_height, 2]]")],
            "plate",
            "plate and mirror image of plate touching or crossing",
        ),
        ([(CAN, "rectangle: {r: [5, 20], z: [-30, 30]}")], "ring", "ring within the metal of can"),
        ([("8.00(5)", "1.05(5)")], "ring", "a gap of 0.05 mm, u = 0.05"),
        ([("8.00(5)", "{value: 1.15, half_width: 0.2, shape: rectangular}")], "ring", "a gap of 0.15 mm, u = 0.12"),
    ],
)
def test_fault_of_outlines(tmp_path, pairs, conductor, found):
    text = changed(*pairs)
    faults = read(tmp_path, text)[1]
    matching = [fault for fault in faults if fault.found.startswith(found)]
    assert matching, "\n".join(map(str, faults))
    fault = matching[0]
    assert fault.column == f"electrodes.conductors.{conductor}"
    assert fault.line == line_of(text, f"    {conductor}:\n")
    assert fault.advice


def test_a_gap_as_narrow_but_measured_as_a_dimension_is_no_fault(tmp_path):
    text = changed(("plate_height: 8.00(5)", "gap: 0.050(5)"), ("z: [plate_height, [plate_height, 2]]",
                   "z: [[wire_radius, gap], [wire_radius, gap, 2]]"))  # fmt: skip
    assert read(tmp_path, text)[1] == []


def test_constants_beside_a_drawing_are_a_fault(tmp_path):
    from small_campaign import FILES, faults_of

    name = "traps/ring-a.yaml"
    assert {(fault.column, fault.found) for fault in faults_of(tmp_path, {name: FILES[name] + DRAWING})} == {
        ("dc_field_per_volt", "dc_field_per_volt beside electrodes"),
        ("ac_gradient_per_volt", "ac_gradient_per_volt beside electrodes"),
    }
    (fault,) = faults_of(tmp_path, {name: f"dc_field_per_volt_per_m: 61.3(9)\n{TEXT}"})
    assert (fault.line, fault.advice) == (1, "Delete one or the other.")


@pytest.mark.parametrize("empty", ["electrodes:\n", "electrodes: {}\n", "electrodes: {conductors: }\n"])
def test_an_empty_drawing_names_what_is_missing(tmp_path, empty):
    from small_campaign import faults_of

    columns = {fault.column for fault in faults_of(tmp_path, {"traps/ring-a.yaml": OTHER + empty})}
    assert columns == {"dc_field_per_volt_per_m"} if empty == "electrodes:\n" else {
        "electrodes.dc_applied", "electrodes.conductors",
    } <= columns  # fmt: skip


def test_words_that_are_no_mapping_are_faults(tmp_path):
    for part in ("dimensions_mm", "conductors"):
        head, _, _ = DRAWING.partition(f"  {part}:")
        faults = read(tmp_path, f"{OTHER}{head}  {part}: some\n")[1]
        assert ("some", f"electrodes.{part}") in {(fault.found, fault.column) for fault in faults}
    faults = read(tmp_path, changed(("    can:\n      carries: ground\n      " + CAN + "\n", "    can: grounded\n")))[1]
    assert "grounded" in {fault.found for fault in faults}


@pytest.mark.parametrize(
    ("text", "fits"),
    [
        (TEXT, True),
        (changed(("[30, -39]", "{arc_to: [30, -39], centre: [0, 0.5], turning: clockwise}")), True),
        (OTHER, False),
        (f"dc_field_per_volt_per_m: 61.3(9)\n{TEXT}", False),
        (f"ac_gradient_per_volt_per_m2: 1.3e4\n{TEXT}", False),
        (changed(("both_plates", "top_plate")), False),
        (changed(("mirrored: yes", "mirrored: both")), False),
        (changed(("carries: drive", "carries: ac")), False),
        (changed(("      carries: drive\n", "")), False),
        (changed((RING, f"{RING}\n      {CAN}")), False),
        (changed((RING, "square: 2")), False),
        (changed(("radius: wire_radius", "diameter: wire_radius")), False),
        (changed(("11.30(6)", "{value: 11.3, half_width: 0.1}")), False),
    ],
)
def test_the_schema_takes_what_the_reader_takes(text, fits):
    from test_schemas import complaints

    assert (complaints("trap", text) == []) is fits


def test_true_and_false_of_tools_that_rewrite_a_file_are_yes_and_no(tmp_path):
    assert len(drawing_of(tmp_path, changed(("mirrored: yes", "mirrored: true"))).shapes) == 4
    faults = read(tmp_path, changed(("mirrored: yes", "mirrored: false")))[1]
    assert [fault.found for fault in faults] == ["no conductor that carries dc_below"]
