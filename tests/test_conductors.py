"""Drawings of electrodes: what an outline may be, gaps between outlines, and what must not be."""

from __future__ import annotations

import math

import numpy as np
import pytest
from electrodes_drawn import MM, block, can, mm, sphere

from reduction.clearances import crossings, enclosed, require_clear, smallest_gaps
from reduction.conductors import Arc, Conductor, DrawingError, Electrodes, Line, circle, polyline


def ring(r: float = 6.0, z: float = 0.0, wire: float = 0.75, name: str = "ring") -> Conductor:
    return Conductor(name, "drive", circle((r * MM, z * MM), wire * MM), True)


def plates(*others: Conductor, hole: float = 0.5, at: float = 4.0) -> Electrodes:
    pair = (
        block("upper", "dc_above", hole, 10.0, at, at + 1.0),
        block("lower", "dc_below", hole, 10.0, -at - 1.0, -at),
    )
    return Electrodes((*others, *pair))


def test_arcs_turn_the_way_they_are_told() -> None:
    left, right = (Arc((1.0, 1.0), (1.0, -1.0), (1.0, 0.0), way) for way in (True, False))
    assert left.turn == pytest.approx(math.pi)
    assert right.turn == pytest.approx(-math.pi)
    assert left.points(np.array(0.5))[0] == pytest.approx(0.0)
    assert right.points(np.array(0.5))[0] == pytest.approx(2.0)
    assert circle((1.0, 0.0), 0.5)[0].length == pytest.approx(math.pi)
    quarter = Arc((2.0, 0.0), (1.0, 1.0), (1.0, 0.0))
    assert (quarter.length, quarter.heading(0.0)) == pytest.approx((0.5 * math.pi, 0.5 * math.pi))
    np.testing.assert_allclose(np.array(quarter.points(np.array(1.0))), [1.0, 1.0])


@pytest.mark.parametrize(
    ("pieces", "closed", "message"),
    [
        ((), False, "has no outline"),
        ((Line((0.0, 0.0), (1.0, 0.0)), Line((1.1, 0.0), (1.1, 1.0))), False, "has a break between r = 1000 mm"),
        ((Line((1.0, 0.0), (2.0, 0.0)), Line((2.0, 0.0), (2.0, 1.0))), True, "does not end where the first begins"),
        ((Line((1.0, 0.0), (-0.5, 0.0)),), False, r"reaches across the axis \(r < 0\)"),
        ((Arc((0.5, -1.0), (0.5, 1.0), (0.5, 0.0), False),), False, "reaches across the axis"),
        ((Line((1.0, 0.0), (1.0, 0.0)),), False, "has a piece of no length at r = 1000 mm, z = 0 mm"),
        ((Arc((1.0, 0.0), (2.0, 0.5), (1.5, 0.0)),), False, "has an arc whose ends lie at two radii"),
        (
            (Line((0.0, 1.0), (1.0, 1.0)), Line((1.0, 1.0), (0.0, 0.0)), Line((0.0, 0.0), (0.0, 1.0))),
            True,
            "along the axis",
        ),
        (
            (Line((0.0, 1.0), (1.0, 1.0)), Line((1.0, 1.0), (1.0, 2.0)), Line((1.0, 2.0), (0.0, 1.0))),
            True,
            "closed, but meets",
        ),
        ((Line((1.0, 1.0), (0.0, 0.0)), Line((0.0, 0.0), (1.0, -1.0))), False, "meets the axis between its ends"),
        ((Line((1.0, math.nan), (1.0, 0.0)),), False, "not finite"),
    ],
)
def test_what_is_no_outline_is_refused(pieces: tuple[Line | Arc, ...], closed: bool, message: str) -> None:
    with pytest.raises(DrawingError, match=f"^odd: .*{message}"):
        Conductor("odd", "ground", pieces, closed)


@pytest.mark.parametrize(
    ("electrodes", "applied", "message"),
    [
        ((ring(),), "both_plates", "no conductor carries dc_above"),
        ((ring(), block("up", "dc_above", 1, 2, 3, 4)), "both_plates", "no conductor carries dc_below"),
        ((block("up", "dc_above", 1, 2, 3, 4),), "one_plate", "no conductor carries the drive"),
        ((ring(), ring(9.0)), "one_plate", "two conductors have one name"),
        ((ring(), block("up", "dc_above", 1, 2, 3, 4)), "neither", "expected one of both_plates, one_plate"),
    ],
)
def test_what_makes_no_trap_is_refused(electrodes: tuple[Conductor, ...], applied: str, message: str) -> None:
    with pytest.raises(DrawingError, match=message):
        Electrodes(electrodes, applied)  # type: ignore[arg-type]


def test_voltages_follow_what_each_carries() -> None:
    drawn = plates(ring(), can(25, 20))
    assert drawn.drive_shares.tolist() == [1.0, 0.0, 0.0, 0.0]
    assert drawn.dc_shares.tolist() == [0.0, 0.0, -0.5, 0.5]
    assert Electrodes(drawn.conductors, "one_plate").dc_shares.tolist() == [0.0, 0.0, -1.0, 0.0]


def test_gaps_are_those_of_plane_geometry() -> None:
    gaps = {(gap.name_a, gap.name_b): gap for gap in smallest_gaps(plates(ring(z=0.3), ring(12.0, 4.2, 0.6, "second")))}
    assert gaps["ring", "upper"].distance == pytest.approx(2.95 * MM)
    assert gaps["ring", "second"].distance == pytest.approx((math.hypot(6.0, 3.9) - 1.35) * MM)
    assert gaps["second", "upper"].distance == pytest.approx(1.4 * MM)  # wire beside the rim, between its corners
    assert gaps["upper", "lower"].distance == pytest.approx(8.0 * MM)
    corner = smallest_gaps(plates(ring(11.0, 2.0, 0.5)))[0]
    assert corner.distance == pytest.approx((math.hypot(1.0, 2.0) - 0.5) * MM)
    assert corner.at_b == pytest.approx((10.0 * MM, 4.0 * MM))


def test_gaps_between_two_balls_on_the_axis() -> None:
    found = smallest_gaps(Electrodes((sphere("a", "drive", 1.0, 2.0), sphere("b", "dc_above", 0.5, -0.3)), "one_plate"))
    assert found[0].distance == pytest.approx(0.8)


@pytest.mark.parametrize(
    ("wire", "at"),
    [
        (ring(6.0, 3.5, 0.75), None),  # into the plate
        (ring(6.0, 3.25, 0.75), (6.0, 4.0)),  # just touching
        (ring(10.5, 4.5, 0.5), (10.0, 4.5)),  # touching the rim
        (block("ring", "drive", 10.0, 12.0, 5.0, 6.0), (10.0, 5.0)),  # corner on corner
        (block("ring", "drive", 8.0, 9.0, 3.0, 4.0), None),  # a face on a face
    ],
)
def test_touching_and_crossing_is_found(wire: Conductor, at: tuple[float, float] | None) -> None:
    found = crossings(plates(wire))
    assert [(one.name_a, one.name_b) for one in found] == [("ring", "upper")]
    if at:
        assert found[0].at == pytest.approx((at[0] * MM, at[1] * MM), abs=1e-8)
    with pytest.raises(DrawingError, match="ring: touches upper at r = .* leave a gap"):
        require_clear(plates(wire))


def test_two_wires_that_cross_or_touch_are_found() -> None:
    assert crossings(plates(ring(), ring(7.0, 0.4, 0.75, "second")))
    assert crossings(plates(ring(), ring(7.5, 0.0, 0.75, "second")))
    assert not crossings(plates(ring(), ring(7.5001, 0.0, 0.75, "second")))
    assert crossings(plates(ring(), ring(6.0, 0.0, 0.75, "second")))  # one on the other


def test_an_outline_that_crosses_itself_is_found() -> None:
    bow = Conductor("bow", "ground", polyline(mm((15, 0), (16, 1), (16, 0), (15, 1)), closed=True), True)
    found = crossings(plates(ring(), bow))
    assert [(one.name_a, one.name_b) for one in found] == [("bow", "bow")]
    assert found[0].at == pytest.approx((15.5 * MM, 0.5 * MM))
    with pytest.raises(DrawingError, match="bow: crosses itself at r = 15.5 mm, z = 0.5 mm"):
        require_clear(plates(ring(), bow))


def test_a_clear_drawing_is_clear() -> None:
    drawn = plates(ring(), can(25, 20))
    assert crossings(drawn) == []
    assert enclosed(drawn) == []
    require_clear(drawn)


def test_a_conductor_in_the_metal_of_another_is_found() -> None:
    drawn = plates(ring(), ring(6.0, 4.5, 0.2, "lost"))
    assert enclosed(drawn) == [("lost", "upper")]
    with pytest.raises(DrawingError, match="lost: lies within the metal of upper"):
        require_clear(drawn)
