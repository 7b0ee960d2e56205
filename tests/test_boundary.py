"""Charge on axisymmetric conductors against closed forms and published series."""

from __future__ import annotations

import math

import numpy as np
import pytest
from electrodes_drawn import can, mm, sphere
from scipy.constants import epsilon_0
from scipy.integrate import quad
from scipy.special import j0, j1, jn_zeros

from reduction.boundary import Boundary, axial_field, axial_gradient, kernel
from reduction.conductors import Conductor, Line, circle, polyline
from reduction.meridian import first_mesh, panels_of
from reduction.trapfield import capacitances_of, terms_about


def boundary_of(*conductors: Conductor, order: int = 16) -> Boundary:
    return Boundary(panels_of(conductors, first_mesh(conductors)), order)


def capacitances(*conductors: Conductor, order: int = 16) -> np.ndarray:
    boundary = boundary_of(*conductors, order=order)
    return capacitances_of(boundary, boundary.unit_charges(len(conductors)), len(conductors))


def disc(name: str, radius: float, z: float) -> Conductor:
    return Conductor(name, "drive", (Line((0.0, z), (radius, z)),), False)


def test_sphere_has_its_capacitance() -> None:
    # 4 pi eps0 a: Jackson, Classical Electrodynamics, section 1.11 (from memory)
    assert capacitances(sphere("ball", "drive", 1.3e-3, 0.4e-3))[0, 0] == pytest.approx(
        4.0 * math.pi * epsilon_0 * 1.3e-3, rel=1e-11
    )


def test_disc_has_its_capacitance() -> None:
    # 8 eps0 a: Smythe, Static and Dynamic Electricity, section 5.03 (from memory); a thin sheet with a free edge
    assert capacitances(disc("disc", 2.1e-3, 0.0))[0, 0] == pytest.approx(8.0 * epsilon_0 * 2.1e-3, rel=1e-11)


@pytest.mark.parametrize(("major", "minor"), [(1.3, 0.4), (1.0, 0.9), (1.0, 0.01)])
def test_torus_has_its_capacitance(major: float, minor: float) -> None:
    # 8 eps0 sqrt(R^2 - a^2) [Q(-1/2)/P(-1/2) + 2 sum Q(n-1/2)/P(n-1/2)] of x = R/a: toroidal coordinates, Morse and
    # Feshbach, Methods of Theoretical Physics, section 10.3 (from memory). The Legendre functions by the integrals of
    # Laplace and Heine (Abramowitz and Stegun, section 8.8 and 8.713, from memory)
    x, y = major / minor, math.sqrt((major / minor) ** 2 - 1.0)

    def ratio(n: int) -> float:
        angle = (np.arange(2000) + 0.5) * np.pi / 2000  # midpoints: exact for smooth periodic functions
        first = np.mean((x + y * np.cos(angle)) ** (n - 0.5))
        second = quad(lambda t: (x + y * math.cosh(t)) ** (-n - 0.5), 0.0, 80.0, epsabs=0.0, epsrel=1e-12, limit=500)[0]
        return second / first

    series = ratio(0) + 2.0 * sum(ratio(n) for n in range(1, 50))
    expected = 8.0 * epsilon_0 * math.sqrt(major**2 - minor**2) * series
    wire = Conductor("wire", "drive", circle((major, 0.2), minor), True)
    assert capacitances(wire)[0, 0] == pytest.approx(expected, rel=1e-9)


@pytest.mark.parametrize("apart", [0.1, 1.0, 10.0])
def test_two_coaxial_discs_follow_love(apart: float) -> None:
    # Love, Quarterly Journal of Mathematics 2 (1949) 428: at opposite voltages +-V the charge of one disc of radius 1
    # is 4 eps0 V times the integral of f over -1..1,  f(x) - (1/pi) int k/(k^2 + (x - t)^2) f(t) dt = 1, k the
    # distance (from memory; sign and factor are right for k large, where each disc has 8 eps0)
    x, w = np.polynomial.legendre.leggauss(400)
    square = np.eye(400) - apart / np.pi / (apart**2 + (x[:, None] - x) ** 2) * w
    love = 4.0 * epsilon_0 * float(w @ np.linalg.solve(square, np.ones(400)))
    matrix = capacitances(disc("upper", 1.0, 0.5 * apart), disc("lower", 1.0, -0.5 * apart))
    assert matrix[0, 0] - matrix[0, 1] == pytest.approx(love, rel=1e-9)


def test_two_distant_discs_are_alone() -> None:
    # so that the factor in the check above stands on the single disc
    matrix = capacitances(disc("upper", 1.0, 500.0), disc("lower", 1.0, -500.0))
    assert matrix[0, 0] - matrix[0, 1] == pytest.approx(8.0 * epsilon_0, rel=2e-3)


def test_charged_ring_has_its_field_on_the_axis() -> None:
    # 1/sqrt(a^2 + z^2) and derivatives: any textbook, Jackson section 3.3 (from memory)
    a, z = 2.0, np.linspace(-3.0, 3.0, 7)
    away = np.hypot(a, z)
    zero = np.zeros_like(z)
    np.testing.assert_allclose(kernel(zero, z, a, 0.0), 1.0 / away, rtol=1e-14)
    np.testing.assert_allclose(axial_field(zero, z, a, 0.0), z / away**3, rtol=1e-14)
    np.testing.assert_allclose(
        axial_gradient(zero, z, a, 0.0), 1.0 / away**3 - 3.0 * z**2 / away**5, rtol=1e-13, atol=1e-16
    )


def test_kernel_is_the_average_over_the_ring() -> None:
    # the definition: 1/distance averaged over the angle, by the trapezoidal rule, exact for periodic functions
    angle = np.arange(4000) * 2.0 * np.pi / 4000
    r, z, a = 1.1, 0.3, 0.9
    average = np.mean(1.0 / np.sqrt(r * r + a * a - 2.0 * r * a * np.cos(angle) + z * z))
    assert kernel(np.array(r), np.array(z), np.array(a), np.array(0.0)) == pytest.approx(average, rel=1e-13)


def test_pair_of_thin_wires_is_a_pair_of_charged_rings() -> None:
    # axis of two equal rings at +-b: E_z = sum of q (z -+ b)/(a^2 + (z -+ b)^2)^1.5, expanded about the middle
    a, b, thin = 1.0, 0.6, 1e-4
    wires = [Conductor(name, "drive", circle((a, z), thin), True) for name, z in (("upper", b), ("lower", -b))]
    boundary = boundary_of(*wires)
    q = boundary.unit_charges(2).sum(axis=1, keepdims=True)
    terms = terms_about(boundary, q, 0.0, 4)[:, 0] / q.sum()
    s = math.hypot(a, b)
    gradient = (a * a - 2.0 * b * b) / s**5
    cubic = -0.5 * (3.0 * a**4 - 24.0 * a * a * b * b + 8.0 * b**4) / s**9
    np.testing.assert_allclose(terms, [0.0, gradient, 0.0, cubic], atol=3.0 * thin)


def test_charge_in_a_can_has_the_potential_of_its_bessel_series() -> None:
    # A ring of charge q, radius s, at mid-height of a grounded can of radius a and length L (walls at z = 0, L), on the
    # axis, in units of q/(4 pi eps0): sum over zeros x of J0 of
    #   4 sinh(x z/a) sinh(x (L - z')/a) J0(x s/a) / (a x J1(x)^2 sinh(x L/a)),  z < z'
    # Jackson, Classical Electrodynamics, problem 3.23 (from memory). The can's charge answers the ring's potential.
    a, length, s = 1.0, 2.4, 0.35
    conductor = Conductor("can", "ground", polyline([(0, 0), (a, 0), (a, length), (0, length)], closed=False), False)
    boundary = boundary_of(conductor)
    ring = kernel(boundary.r, boundary.z, np.array(s), np.array(0.5 * length))
    induced = -np.linalg.solve(boundary.matrix(), ring)
    z = np.array([0.05, 0.3, 0.6])
    found = boundary.rows(np.zeros(3), z) @ induced + 1.0 / np.hypot(s, z - 0.5 * length)
    x = jn_zeros(0, 80)[:, None]
    up = np.exp(-x * (0.5 * length - z) / a) * (1 - np.exp(-2 * x * z / a)) * (1 - np.exp(-x * length / a))
    series = 2.0 * up * j0(x * s / a) / (a * x * j1(x) ** 2 * (1 - np.exp(-2 * x * length / a)))
    np.testing.assert_allclose(found, series.sum(axis=0), rtol=1e-9)
    assert induced.sum() == pytest.approx(-1.0, abs=1e-9)  # Gauss: all field lines of the ring end on the can


def test_charge_in_a_spherical_can_is_answered_by_its_image() -> None:
    # charge q at height h in a grounded sphere of radius a: -q a/h at a^2/h (Jackson, section 2.2, from memory)
    a, h = 1.0, 0.4
    boundary = boundary_of(sphere("can", "ground", a, 0.0))
    induced = -np.linalg.solve(boundary.matrix(), 1.0 / np.hypot(boundary.r, boundary.z - h))
    r, z = np.array([0.0, 0.5, 0.2, 0.0]), np.array([0.1, 0.3, -0.7, -0.999])
    image = -(a / h) / np.hypot(r, z - a * a / h)
    np.testing.assert_allclose(boundary.rows(r, z) @ induced, image, rtol=1e-10)


def test_capacitances_are_reciprocal_and_charges_balance() -> None:
    # Green's reciprocity, and Gauss: within a closed can the charges add to zero unless the can itself is raised
    ring = Conductor("ring", "drive", circle((6e-3, 0.0), 0.7e-3), True)
    plate = Conductor("plate", "dc_above", polyline(mm((0.5, 3), (8, 3), (8, 4), (0.5, 4)), closed=True), True)
    rod = Conductor("rod", "dc_below", polyline(mm((0, -9), (1, -9), (1, -3), (0, -3)), closed=False), False)
    matrix = capacitances(ring, plate, rod, can(12.0, 10.0))
    np.testing.assert_allclose(matrix, matrix.T, atol=1e-9 * matrix.max())
    np.testing.assert_allclose(matrix[:, :3].sum(axis=0), 0.0, atol=1e-8 * matrix.max())
    assert np.all(np.diag(matrix) > 0.0)
    assert np.all(matrix[~np.eye(4, dtype=bool)] < 0.0)


def test_potential_is_found_on_outlines_edges_and_the_axis() -> None:
    # the maximum principle: on a conductor its own voltage, at edges, corners and where an outline meets the axis, too
    plate = Conductor("plate", "drive", polyline(mm((0, 3), (8, 3), (8, 4), (0, 4)), closed=False), False)
    sheet = disc("sheet", 5e-3, -2e-3)
    boundary = boundary_of(plate, sheet)
    q = boundary.unit_charges(2)
    points = np.array(mm((8, 3), (8, 4), (0, 3), (4, 3), (3, 3.5), (5, -2), (0, -2), (1.7, -2)))
    volts = boundary.rows(points[:, 0], points[:, 1]) @ q
    expected = np.repeat([[1.0, 0.0], [0.0, 1.0]], [5, 3], axis=0)
    np.testing.assert_allclose(volts, expected, atol=1e-6)
