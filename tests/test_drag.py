"""Drag against published slip data, settling speeds and the limits of large and small spheres."""

import numpy as np
import pytest

from reduction import air, drag

# Kim et al. (2005) coefficients at a mean free path of 66 nm, worked independently
KIM = [(0.01, 22.28979), (0.1, 2.83737), (0.5, 1.31048), (1.0, 1.15381), (10.0, 1.01538), (100.0, 1.00154)]

# Seinfeld and Pandis, Atmospheric Chemistry and Physics (2006), table 9.3
SEINFELD_PANDIS = [(0.02, 11.4), (0.05, 4.95), (0.1, 2.85), (0.5, 1.326), (1.0, 1.164), (5.0, 1.032), (20.0, 1.008)]

# Hinds, Aerosol Technology (1999), table A11: settling speed of unit density spheres, m/s (from memory)
HINDS = [(0.1e-6, 8.8e-7), (1e-6, 3.48e-5), (10e-6, 3.06e-3)]


@pytest.mark.parametrize(("micrometres", "expected"), KIM)
def test_slip_correction_has_the_coefficients_of_kim(micrometres, expected):
    assert drag.slip_correction(micrometres * 1e-6, 66e-9) == pytest.approx(expected, rel=1e-5)


@pytest.mark.parametrize(("micrometres", "expected"), SEINFELD_PANDIS)
def test_slip_correction_lies_within_its_uncertainty_of_a_textbook_table(micrometres, expected):
    found = drag.slip_correction(micrometres * 1e-6, air.mean_free_path(298.15, 101325.0))
    assert abs(found - expected) < 2.0 * drag.SLIP_RELATIVE_U * (expected - 1.0) + 0.0005


@pytest.mark.parametrize(
    ("a", "b", "c", "path"),
    # Davies (1945); Allen and Raabe (1985), from memory
    [(1.257, 0.400, 1.10, 66e-9), (1.142, 0.558, 0.999, 67.3e-9)],
)
def test_slip_uncertainty_covers_other_published_sets(a, b, c, path):
    d = np.geomspace(1e-8, 1e-4, 9)
    knudsen = 2.0 * path / d
    other = knudsen * (a + b * np.exp(-c / knudsen))
    ours = drag.slip_correction(d, 67.3e-9) - 1.0
    assert np.all(np.abs(ours / other - 1.0) < 2.05 * drag.SLIP_RELATIVE_U)


@pytest.mark.parametrize(("diameter", "expected"), HINDS)
def test_settling_speed_is_the_textbook_one(diameter, expected):
    gamma = drag.drag_rate(diameter, 1000.0, 1.0, air.viscosity(293.15), air.mean_free_path(293.15, 101325.0))
    # Hinds has another slip set
    slip = drag.slip_correction(diameter, air.mean_free_path(293.15, 101325.0))
    allowed = 0.01 + 2.0 * drag.SLIP_RELATIVE_U * (slip - 1.0) / slip
    assert 9.81 * (1.0 - 1.205 / 1000.0) / gamma == pytest.approx(expected, rel=allowed)


def test_settling_speed_with_finite_reynolds_number_is_the_textbook_one():
    # Hinds (1999), table A11: 0.249 m/s at 100 um (from memory)
    d, viscosity = 100e-6, air.viscosity(293.15)
    gamma = drag.drag_rate(d, 1000.0, 1.0, viscosity, air.mean_free_path(293.15, 101325.0))
    speed = 0.3
    for _ in range(60):
        speed = 9.8 / (gamma * drag.schiller_naumann(drag.reynolds(speed, d, 1.205, viscosity)))
    assert speed == pytest.approx(0.249, rel=0.01)


def test_drag_coefficient_agrees_with_the_standard_curve():
    drag_coefficient = pytest.importorskip("fluids.drag")  # Brown and Lawler, J. Environ. Eng. 129 (2003) 222
    re = np.array([0.01, 0.1, 1.0, 10.0, 100.0])
    standard = np.array([drag_coefficient.Clift(value) for value in re])
    np.testing.assert_allclose(24.0 / re * drag.schiller_naumann(re), standard, rtol=0.05)


def test_drag_of_a_large_sphere_is_that_of_stokes():
    # 6 pi eta r v over the mass of a sphere
    d, rho, eta = 1e-3, 2500.0, 1.8e-5
    assert drag.drag_rate(d, rho, 1.0, eta, 1e-13) == pytest.approx(3 * np.pi * eta * d / (rho * np.pi * d**3 / 6))


def test_drag_of_a_small_sphere_is_that_of_free_molecules():
    # Epstein, Phys. Rev. 23 (1924) 710: (4 pi / 3) r^2 rho_air c (1 + pi alpha / 8), accommodation alpha 0.8 to 1
    t, p, d, rho = 293.15, 1.0, 1e-6, 1000.0
    rate = drag.drag_rate(d, rho, 1.0, air.viscosity(t), air.mean_free_path(t, p))
    speed = np.sqrt(8.0 * 8.31446 * t / (np.pi * 28.96546e-3))
    mass = rho * np.pi * d**3 / 6.0
    bounds = [
        4 * np.pi / 3 * (d / 2) ** 2 * air.density(t, p, 0.0) * speed * (1 + np.pi * a / 8) / mass for a in (0.8, 1)
    ]
    assert 0.98 * bounds[0] < rate < 1.02 * bounds[1]


DIAMETERS = np.geomspace(1e-9, 1e-2, 57)
PRESSURES = np.geomspace(1e-7, 2e5, 14)


def test_diameter_inverts_the_drag_rate_everywhere():
    d, p = np.meshgrid(DIAMETERS, PRESSURES)
    path = air.mean_free_path(293.15, p)
    gamma = drag.drag_rate(d, 800.0, 1.1, 1.8e-5, path)
    assert np.all(np.isfinite(gamma))
    np.testing.assert_allclose(drag.diameter_from_drag_rate(gamma, 800.0, 1.1, 1.8e-5, path), d, rtol=4e-15)


def test_diameter_is_smooth_enough_for_central_differences():
    path, step = 67.3e-9, 1e-5
    for d in (2e-8, 1e-7, 1e-6, 25e-6):
        gamma = drag.drag_rate(d, 1000.0, 1.0, 1.8e-5, path)
        up, down = (drag.diameter_from_drag_rate(gamma * (1 + s), 1000.0, 1.0, 1.8e-5, path) for s in (step, -step))
        rate = [drag.drag_rate(d * (1 + s), 1000.0, 1.0, 1.8e-5, path) for s in (step, -step)]
        logarithmic = (np.log(up) - np.log(down)) / (2 * step)
        inverse = (np.log(rate[0]) - np.log(rate[1])) / (2 * step)
        assert logarithmic * inverse == pytest.approx(1.0, abs=1e-8)


def test_unsteady_terms_make_the_oscillating_sphere_of_landau_and_lifshitz():
    # Fluid Mechanics, section 24, problem 5 (from memory), with penetration depth delta = sqrt(2 eta / (rho omega)):
    # F = 6 pi eta R (1 + R/delta) u + 3 pi R^2 sqrt(2 eta rho / omega) (1 + 2 R / (9 delta)) du/dt
    eta, rho_air, rho, radius, omega = 1.8e-5, 1.2, 1050.0, 31e-6, 314.0
    mass = rho * 4.0 / 3.0 * np.pi * radius**3
    thickness = np.sqrt(2 * eta / (rho_air * omega))
    speed, change = 1j * omega, -(omega**2)
    force = 6 * np.pi * eta * radius * (1 + radius / thickness) * speed
    force += 3 * np.pi * radius**2 * np.sqrt(2 * eta * rho_air / omega) * (1 + 2 * radius / (9 * thickness)) * change
    b = drag.drag_rate(2 * radius, rho, 1.0, eta, 1e-18) / omega
    ours = -drag.added_mass(rho_air, rho) + 1j * b * (1 + drag.history(2 * radius, omega, rho_air, eta) * np.sqrt(1j))
    assert force / (mass * omega**2) == pytest.approx(ours, rel=1e-9)


def test_schiller_naumann_leaves_stokes_at_rest():
    assert drag.schiller_naumann(0.0) == 1.0
    assert drag.schiller_naumann(0.1) == pytest.approx(1.0308, abs=1e-4)
