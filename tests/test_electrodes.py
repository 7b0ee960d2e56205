"""Trap constants of drawings against exact solutions, an independent finite-difference solution and laws of scale."""

from __future__ import annotations

import math
from dataclasses import replace
from functools import cache

import numpy as np
import pytest
from electrodes_drawn import MM, NOMINAL, block, can, mm, ring_and_plates, sphere
from scipy.constants import epsilon_0
from scipy.sparse import csc_array
from scipy.sparse.linalg import spsolve

from reduction.boundary import Boundary
from reduction.conductors import Arc, Conductor, Electrodes, Line, circle, polyline
from reduction.electrodes import NoCentre, NotConverged, refinement_errors, solution, solve
from reduction.meridian import Mesh, first_mesh, panels_of
from reduction.trapfield import departures, usable_height

# --- exact: two spheres on the axis, by images


class TwoSpheres(Electrodes):
    """Two spheres, both with the drive and half the dc each: a trap whose field is known in full."""

    def __post_init__(self) -> None:
        """Let one conductor carry two things, which drawings cannot."""

    @property
    def drive_shares(self) -> np.ndarray:
        return np.array([1.0, 1.0])

    @property
    def dc_shares(self) -> np.ndarray:
        return np.array([-0.5, 0.5])


def two_spheres(h: float) -> TwoSpheres:
    return TwoSpheres((sphere("upper", "drive", 1.0, h), sphere("lower", "drive", 1.0, -h)))


def image_charges(h: float, upper: float, parity: float) -> tuple[np.ndarray, np.ndarray]:
    """Heights and charges in the upper of two spheres of radius 1 at +-h; those in the lower are `parity` times these.

    Kelvin's chain of images: q at distance d from the centre of a sphere is answered by -q/d at 1/d from the centre
    (Jackson, section 2.2; Smythe, Static and Dynamic Electricity, section 5.08, from memory).
    """
    x, q = [0.0], [upper]
    while abs(q[-1]) > 1e-17 and len(x) < 2000:
        away = 2.0 * h - x[-1]
        x.append(1.0 / away), q.append(-parity * q[-1] / away)
    return h - np.array(x), np.array(q)


def exact_constants(h: float) -> tuple[float, float]:
    """D and A half-way between the spheres."""
    z, q = image_charges(h, 1.0, 1.0)
    gradient = -2.0 * np.sum(2.0 * q / z**3)
    z, q = image_charges(h, 0.5, -1.0)
    return float(2.0 * np.sum(q / z**2)), float(abs(gradient))


@pytest.mark.parametrize("h", [3.0, 1.4, 1.1])
def test_two_spheres_have_the_constants_of_their_images(h: float) -> None:
    field = solve(two_spheres(h))
    d, a = exact_constants(h)
    assert field.dc_field_per_volt == pytest.approx(d, rel=1e-9)
    assert field.ac_gradient_per_volt == pytest.approx(a, rel=1e-8)
    assert field.centre == pytest.approx(0.0, abs=1e-12)
    even, odd = (image_charges(h, 1.0, parity)[1].sum() for parity in (1.0, -1.0))
    own, mutual = 0.5 * (even + odd), 0.5 * (even - odd)
    found = field.capacitances / (4.0 * math.pi * epsilon_0)
    np.testing.assert_allclose(found, [[own, mutual], [mutual, own]], rtol=1e-9)


SPREAD = [6.0, 3.0, 1.7, 1.4, 1.2, 1.1, 1.05]
ORDERS = [(3, 4, 5), (4, 5, 7), (5, 7, 9), (6, 8, 10), (7, 9, 12), (8, 10, 13), (10, 13, 16)]


@pytest.mark.parametrize("orders", ORDERS)
@pytest.mark.parametrize("h", SPREAD)
def test_error_estimate_is_honest(h: float, orders: tuple[int, int, int]) -> None:
    # never below the true error, which the images give, from tens of percent to rounding
    true, stated = errors(h, orders)
    assert true <= stated


def test_error_estimate_is_not_absurdly_large() -> None:
    # it is the error of the last refinement but one: mostly one or two digits above the true error, never five
    every = [errors(h, orders) for h in SPREAD for orders in ORDERS]
    ratios = [stated / true for true, stated in every if stated > 5e-11]
    assert len(ratios) > 30
    assert np.median(ratios) < 100.0
    assert max(ratios) < 1e5


@cache
def errors(h: float, orders: tuple[int, int, int]) -> tuple[float, float]:
    """True and stated relative error of D and A of two spheres."""
    drawn = two_spheres(h)
    mesh = first_mesh(drawn.conductors)
    steps = [solution(drawn, mesh, order) for order in orders]
    d, a = exact_constants(h)
    true = max(abs(1.0 - d / steps[-1].dc[0]), abs(1.0 - a / abs(steps[-1].drive[1])))
    return true, refinement_errors(steps)[0]


# --- the ideal trap


def hyperbola(a: float, b: float, along: bool, reach: float, pieces: int) -> list[tuple[float, float]]:
    """Points on r^2/a^2 - z^2/b^2 = 1 (along False: the ring) or on the sheet z > 0 of -1, out to parameter `reach`."""
    t = np.linspace(-reach, reach, 2 * pieces + 1) if not along else np.linspace(0.0, reach, 2 * pieces + 1)
    r, z = (a * np.sinh(t), b * np.cosh(t)) if along else (a * np.cosh(t), b * np.sinh(t))
    return list(zip(r.tolist(), z.tolist(), strict=True))


def through(points: list[tuple[float, float]]) -> tuple[Arc, ...]:
    """Arcs through each point, the next and the one after it."""
    arcs = []
    for p, q, s in zip(points[:-2:2], points[1:-1:2], points[2::2], strict=True):
        square = np.array([[q[0] - p[0], q[1] - p[1]], [s[0] - p[0], s[1] - p[1]]])
        half = 0.5 * np.array([q[0] ** 2 + q[1] ** 2, s[0] ** 2 + s[1] ** 2]) - 0.5 * (p[0] ** 2 + p[1] ** 2)
        centre = np.linalg.solve(square, half)
        turn = square[0, 0] * square[1, 1] - square[0, 1] * square[1, 0]
        arcs.append(Arc(p, s, (float(centre[0]), float(centre[1])), bool(turn > 0.0)))
    return tuple(arcs)


def ideal_trap(reach: float, pieces: int) -> Electrodes:
    """Hyperbolic ring and caps with r0^2 = 2 z0^2, z0 = 1, as thin sheets out to cosh(reach) times r0."""
    a, b = math.sqrt(2.0), 1.0
    ring = Conductor("ring", "drive", through(hyperbola(a, b, False, reach, pieces)), False)
    upper = through(hyperbola(a, b, True, reach, pieces))
    lower = through([(r, -z) for r, z in hyperbola(a, b, True, reach, pieces)])
    return Electrodes(
        (ring, Conductor("upper", "dc_above", upper, False), Conductor("lower", "dc_below", lower, False))
    )


def test_hyperbolic_electrodes_tend_to_the_ideal_constants() -> None:
    # Potential between them (2 z0^2 + r^2 - 2 z^2)/(r0^2 + 2 z0^2) per volt on the ring: A = 4/(r0^2 + 2 z0^2) = 1 here
    # (March and Todd, Quadrupole Ion Trap Mass Spectrometry, section 2.4, from memory). The further out the sheets go
    # before they end, the less the ends matter.
    far = [abs(solve(ideal_trap(reach, 16)).ac_gradient_per_volt - 1.0) for reach in (0.7, 0.9, 1.2, 1.5)]
    assert far[0] > 2.0 * far[1] > 20.0 * far[2] > 100.0 * far[3]
    assert far[3] < 1e-5


def test_long_hyperbolic_electrodes_have_the_ideal_field() -> None:
    field = solve(ideal_trap(2.2, 14))
    assert field.ac_gradient_per_volt == pytest.approx(1.0, abs=5e-4)
    assert max(abs(term) for term in field.drive_terms[:4]) < 1e-4
    assert usable_height(field) > 0.5
    # c1 of the dipole term for r0^2 = 2 z0^2, E = c1 U/(2 z0), is 0.80 (Beaty, Journal of Applied Physics 61 (1987)
    # 2118, from memory)
    assert 2.0 * field.dc_field_per_volt == pytest.approx(0.80, abs=0.01)


# --- an independent solution of a shape without a closed form


def finite_differences(step: float) -> tuple[float, float]:
    """D and A [1/mm, 1/mm2] of the shape of `boxes` on a square grid, upper half only, five-point stencil."""
    n, m = round(10.0 / step), round(8.0 / step)
    i, k = (one.ravel() for one in np.meshgrid(np.arange(n + 1), np.arange(m + 1), indexing="ij"))
    r, z, edge = i * step, k * step, 1e-9
    inside_ring = (r > 4.0 - edge) & (r < 6.0 + edge) & (z < 1.0 + edge)
    inside_plate = (r > 1.0 - edge) & (r < 7.0 + edge) & (z > 3.0 - edge) & (z < 4.0 + edge)
    fixed = inside_ring | inside_plate | (i == n) | (k == m)
    number = i * (m + 1) + k

    def solved(odd: bool, ring: float, plate: float) -> np.ndarray:
        held = fixed | ((k == 0) & odd)
        value = np.where(inside_ring, ring, np.where(inside_plate, plate, 0.0))
        rows, columns, entries = [number[held]], [number[held]], [np.ones(held.sum())]
        free = ~held
        me, ii, kk = number[free], i[free], k[free]
        outward = np.where(ii == 0, 4.0, 1.0 + 0.5 / np.maximum(ii, 1))
        inward = np.where(ii == 0, 0.0, 1.0 - 0.5 / np.maximum(ii, 1))
        up = np.where(kk == 0, 2.0, 1.0)
        for shift, weight in ((m + 1, outward), (-(m + 1), inward), (1, up), (-1, 2.0 - up)):
            use = weight != 0.0
            rows.append(me[use]), columns.append(me[use] + shift), entries.append(weight[use])
        rows.append(me), columns.append(me), entries.append(-(outward + inward + 2.0))
        size = (n + 1) * (m + 1)
        square = csc_array((np.concatenate(entries), (np.concatenate(rows), np.concatenate(columns))), (size, size))
        return spsolve(square, np.where(held, value, 0.0))[: m + 1]  # on the axis

    z = np.arange(6) * 0.25  # the same heights on every grid: the polynomial's own error is common, and small
    at = np.round(z / step).astype(int)
    odd, even = solved(True, 0.0, -0.5)[at], solved(False, 1.0, 0.0)[at]
    d = -np.linalg.solve(z[1:, None] ** np.arange(1, 11, 2), odd[1:])[0]
    a = -2.0 * np.linalg.solve(z[:, None] ** np.arange(0, 12, 2), even)[1]
    return float(d), float(a)


def boxes() -> Electrodes:
    plates = (block("upper", "dc_above", 1.0, 7.0, 3.0, 4.0), block("lower", "dc_below", 1.0, 7.0, -4.0, -3.0))
    return Electrodes((block("ring", "drive", 4.0, 6.0, -1.0, 1.0), *plates, can(10.0, 8.0)))


def test_boxes_agree_with_finite_differences() -> None:
    # the error of the grid goes as step^(4/3) at square edges (Strang and Fix, An Analysis of the Finite Element
    # Method, chapter 8, from memory), then step^2: two steps of Richardson's extrapolation
    coarse, middle, fine = (np.array(finite_differences(step)) for step in (0.25, 0.125, 0.0625))
    gone = 2.0 ** (4.0 / 3.0)
    first, second = ((gone * b - a) / (gone - 1.0) for a, b in ((coarse, middle), (middle, fine)))
    d, a = (4.0 * second - first) / 3.0
    field = solve(boxes())
    assert field.dc_field_per_volt * MM == pytest.approx(d, rel=5e-5)
    assert field.ac_gradient_per_volt * MM**2 == pytest.approx(a, rel=5e-5)
    # and the extrapolation is what brings them together
    assert abs(fine[1] / (field.ac_gradient_per_volt * MM**2) - 1.0) > 1e-3


# --- laws any trap obeys


def test_constants_scale_with_the_trap() -> None:
    # Laplace's equation has no length of its own: D goes as 1/length, A as 1/length^2
    small, large = solve(ring_and_plates(NOMINAL)), solve(ring_and_plates(7.0 * NOMINAL))
    assert 7.0 * large.dc_field_per_volt == pytest.approx(small.dc_field_per_volt, rel=1e-10)
    assert 49.0 * large.ac_gradient_per_volt == pytest.approx(small.ac_gradient_per_volt, rel=1e-10)
    assert large.centre / 7.0 == pytest.approx(small.centre, rel=1e-9)
    np.testing.assert_allclose(large.drive_terms, small.drive_terms, rtol=1e-8)


def test_a_mirrored_trap_has_the_same_constants_and_opposite_odd_terms() -> None:
    drawn = ring_and_plates(NOMINAL)
    turned = NOMINAL.copy()
    turned[[4, 7]], turned[[2, 6]] = NOMINAL[[7, 4]], NOMINAL[[6, 2]]
    one, other = solve(drawn), solve(ring_and_plates(turned))
    assert one.centre < -1e-5
    assert other.centre == pytest.approx(-one.centre, rel=1e-9)
    assert other.dc_field_per_volt == pytest.approx(one.dc_field_per_volt, rel=1e-10)
    np.testing.assert_allclose(other.drive_terms, np.array(one.drive_terms) * (-1.0) ** np.arange(1, 9), rtol=1e-7)


def test_a_symmetric_trap_has_its_centre_in_the_middle_and_even_fields() -> None:
    x = NOMINAL.copy()
    x[7] = x[4]
    field = solve(ring_and_plates(x))
    assert abs(field.centre) < 1e-12 * MM
    assert max(abs(term) for term in (*field.drive_terms[::2], *field.dc_terms[::2])) < 1e-9


def test_dc_on_one_plate_is_half_on_both_and_a_common_part() -> None:
    # superposition: at the centre of a symmetric trap the common part has no field
    x = NOMINAL.copy()
    x[7] = x[4]
    both = ring_and_plates(x)
    for drawn in (replace(both, dc_applied="one_plate"), _lower_alone(both)):
        assert solve(drawn).dc_field_per_volt == pytest.approx(solve(both).dc_field_per_volt, rel=1e-10)


def _lower_alone(drawn: Electrodes) -> Electrodes:
    grounded = replace(drawn.conductors[1], carries="ground")
    return Electrodes((drawn.conductors[0], grounded, *drawn.conductors[2:]), "one_plate")


def test_a_thin_sheet_is_the_limit_of_a_thin_plate() -> None:
    def plates(half: float) -> Electrodes:
        ring = Conductor("ring", "drive", circle((6 * MM, 0.0), 0.75 * MM), True)
        if half:
            pair = (
                block("u", "dc_above", 0.5, 10, 4 - half, 4 + half),
                block("l", "dc_below", 0.5, 10, -4 - half, -4 + half),
            )
        else:
            upper, lower = (polyline(mm((0.5, z), (10.0, z)), closed=False) for z in (4.0, -4.0))
            pair = (Conductor("u", "dc_above", upper, False), Conductor("l", "dc_below", lower, False))
        return Electrodes((ring, *pair, can(25.0, 20.0)))

    sheet = solve(plates(0.0)).ac_gradient_per_volt
    differences = [solve(plates(half)).ac_gradient_per_volt / sheet - 1.0 for half in (0.1, 0.01, 0.001)]
    assert abs(differences[0]) > 5.0 * abs(differences[1]) > 25.0 * abs(differences[2])
    assert abs(differences[2]) < 2.0 * 0.001 / 4.0  # as A of a gap of 4 mm that closes by 0.001 mm


# --- the field along the axis


def test_departures_are_those_of_the_field_itself() -> None:
    field = solve(ring_and_plates(NOMINAL))
    z = np.array([-2.0, -0.7, -0.3, 0.2, 0.65, 1.5]) * MM
    away, axis = departures(field, z), field.axis(field.centre + z)
    np.testing.assert_allclose(axis.dc_field / field.dc_field_per_volt - 1.0, away.dc_field, atol=1e-8)
    np.testing.assert_allclose(axis.drive_field / (field.ac_gradient_per_volt * z) - 1.0, away.drive_field, atol=1e-8)
    step = 1e-3 * MM
    up, down = field.axis(field.centre + z + step), field.axis(field.centre + z - step)
    slope = (up.drive_field - down.drive_field) / (2.0 * step)
    np.testing.assert_allclose(slope / field.ac_gradient_per_volt - 1.0, away.drive_gradient, atol=1e-6)
    fall = (up.dc_potential - down.dc_potential) / (2.0 * step)
    np.testing.assert_allclose(-fall, axis.dc_field, rtol=1e-6)


def test_terms_and_field_meet_where_one_takes_over() -> None:
    field = solve(ring_and_plates(NOMINAL))
    z = 0.15 * field.reach * np.array([1.0 - 1e-9, 1.0 + 1e-9])
    away = departures(field, z)
    for one in (away.drive_gradient, away.drive_field, away.dc_field):
        assert one[0] == pytest.approx(one[1], abs=2e-6)


def test_usable_height_is_where_the_gradient_has_changed() -> None:
    field = solve(ring_and_plates(NOMINAL))
    for change in (0.001, 0.01, 0.1):
        height = usable_height(field, change)
        both = np.abs(departures(field, np.array([height, -height])).drive_gradient)
        assert both.max() == pytest.approx(change, rel=1e-6)


def test_potential_within_metal_is_that_of_the_metal() -> None:
    field = solve(ring_and_plates(NOMINAL))
    points = mm((6.0, 0.0), (3.0, 4.7), (3.0, -5.0), (25.0, 20.0), (0.0, -20.0), (30.0, 0.0))
    r, z = np.array(points).T
    drive, dc = field.potential(r, z)
    np.testing.assert_allclose(drive, [1.0, 0.0, 0.0, 0.0, 0.0, 0.0], atol=1e-6)
    np.testing.assert_allclose(dc, [0.0, -0.5, 0.5, 0.0, 0.0, 0.0], atol=1e-6)


# --- what is refused, and what to do


def test_refinement_goes_on_where_the_charge_asks_for_it(monkeypatch: pytest.MonkeyPatch) -> None:
    # a slot a hundredth as wide as deep: nothing of the outline says that its mouth needs short panels
    slotted = [(0.5, 4.0), (2.0, 4.0), (2.0, 7.0), (2.02, 7.0), (2.02, 4.0), (10.0, 4.0), (10.0, 8.0), (0.5, 8.0)]
    pair = (
        Conductor("upper", "dc_above", polyline(mm(*slotted), closed=True), True),
        Conductor("lower", "dc_below", polyline(mm(*[(r, -z) for r, z in slotted]), closed=True), True),
    )
    drawn = Electrodes((Conductor("ring", "drive", circle((6 * MM, 0.0), 0.75 * MM), True), *pair, can(25.0, 20.0)))
    monkeypatch.setattr("reduction.electrodes.ORDERS", (6, 8, 10))
    field = solve(drawn, relative_u=1e-7)
    assert len(field.boundary.panels) > len(panels_of(drawn.conductors, first_mesh(drawn.conductors)))
    finer = field.mesh.halved(np.arange(len(field.boundary.panels)))
    assert field.dc_field_per_volt == pytest.approx(solution(drawn, finer, 16).dc[0], rel=field.numerical_u)


def test_a_gap_too_fine_is_named_with_what_to_do() -> None:
    ring = block("ring", "drive", 5.0, 9.0, -1.0, 1.0)
    pair = (block("upper", "dc_above", 0.5, 10.0, 1.002, 2.0), block("lower", "dc_below", 0.5, 10.0, -2.0, -1.5))
    with pytest.raises(NotConverged, match=r"gap of 0\.002 mm between ring and upper.*draw it wider"):
        solve(Electrodes((ring, *pair)))


def test_too_many_pieces_are_counted() -> None:
    angle = np.arange(400) * 2.0 * np.pi / 400
    points = [(6 * MM + MM * math.cos(a), MM * math.sin(a)) for a in angle]
    ring = Conductor("ring", "drive", polyline(points, closed=True), True)
    pair = (block("upper", "dc_above", 0.5, 10.0, 4.0, 5.0), block("lower", "dc_below", 0.5, 10.0, -5.0, -4.0))
    with pytest.raises(NotConverged, match="408 pieces"):
        solve(Electrodes((ring, *pair)))


def test_what_does_not_settle_is_no_number(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr("reduction.electrodes.MOST", 10)
    monkeypatch.setattr("reduction.electrodes.ORDERS", (2, 3, 4))
    with pytest.raises(
        NotConverged, match=r"has not settled: relative error .* The charge is least known on .* near r ="
    ):
        solve(ring_and_plates(NOMINAL))


def test_a_matrix_that_is_not_finite_is_no_number(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(Boundary, "matrix", lambda self: np.full((len(self.r), len(self.r)), np.nan))
    with pytest.raises(NotConverged, match="cannot be solved"):
        solve(ring_and_plates(NOMINAL))


def test_a_drive_without_a_point_of_rest_is_no_trap() -> None:
    upper = sphere("upper", "drive", 1.0, 3.0)
    lower = (Conductor("disc", "dc_below", (Line((0.0, -3.0), (2.0, -3.0)),), False),)
    with pytest.raises(NoCentre, match="vanishes nowhere on the axis"):
        solve(Electrodes((upper, *lower), "one_plate"))


def test_dc_that_does_not_reach_the_centre_is_no_trap() -> None:
    hidden = (sphere("upper", "dc_above", 0.1, 3.0), sphere("lower", "dc_below", 0.1, -3.0))
    shields = (sphere("shield", "ground", 1.0, 3.0), sphere("screen", "ground", 1.0, -3.0))
    with pytest.raises(NoCentre, match="dc makes no field"):
        solve(Electrodes((*hidden, *shields, Conductor("ring", "drive", circle((3.0, 0.0), 0.3), True))))


def test_plates_named_the_wrong_way_round_are_refused() -> None:
    pair = (block("upper", "dc_below", 0.5, 10.0, 4.0, 5.0), block("lower", "dc_above", 0.5, 10.0, -5.0, -4.0))
    with pytest.raises(NoCentre, match="what carries dc_above lies below"):
        solve(Electrodes((Conductor("ring", "drive", circle((6 * MM, 0.0), 0.75 * MM), True), *pair)))


def test_more_than_double_precision_is_not_promised() -> None:
    with pytest.raises(ValueError, match="double precision"):
        solve(ring_and_plates(NOMINAL), relative_u=1e-13)


def test_cuts_follow_a_slightly_different_drawing() -> None:
    drawn, wider = ring_and_plates(NOMINAL), ring_and_plates(NOMINAL * 1.001)
    mesh: Mesh = solve(drawn).mesh
    moved = solution(wider, mesh, 16)
    assert moved.dc[0] == pytest.approx(solve(wider).dc_field_per_volt, rel=1e-9)
