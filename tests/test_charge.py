"""Charge in electrons, surface charge density and the limit of air, against published constants."""

from __future__ import annotations

import numpy as np
import pytest
from scipy import constants

from reduction import charge


def test_constants_are_those_of_codata_2022():
    # e is exact in the SI (SI Brochure, 9th edition); eps0 from CODATA 2022, Mohr et al., Rev. Mod. Phys. 97 (2025).
    # The 2018 value, 8.8541878128e-12, lies 7e-10 away, so 1e-10 tells the two apart.
    assert charge.ELEMENTARY_CHARGE == 1.602176634e-19
    assert pytest.approx(8.8541878188e-12 * 3e6, rel=1e-10) == charge.AIR_LIMIT


# Greatest charge that 3 MV/m at the surface allows, q = pi d^2 eps0 E: 3 MV/m is the usual breakdown field of air over
# centimetres (common practice, no source); the products were recomputed independently of this program.
@pytest.mark.parametrize(
    ("diameter_um", "electrons"), [(1, 521), (10, 5.2085e4), (25, 3.2553e5), (30, 4.6876e5), (100, 5.208e6)]
)
def test_greatest_charge_in_air(diameter_um, electrons):
    diameter = diameter_um * 1e-6
    q = electrons * charge.ELEMENTARY_CHARGE
    assert charge.electrons(q) == pytest.approx(electrons, rel=1e-12)
    density = charge.surface_charge_density(q, diameter)
    assert charge.air_limit_ratio(density) == pytest.approx(1.0, rel=1e-3 if diameter_um == 1 else 1e-4)
    assert density == pytest.approx(2.65625635e-5, rel=1e-3)


def test_thirty_micrometres_hold_seventy_five_femtocoulombs():
    q = charge.AIR_LIMIT * np.pi * 30e-6**2
    assert q == pytest.approx(7.5104e-14, rel=2e-5)


# Greatest charge-to-mass ratio, 6 sigma / (rho d), recomputed independently of this program.
@pytest.mark.parametrize(
    ("diameter_um", "density", "ratio"),
    [(26, 510, 1.202e-2), (10, 1190, 1.339e-2), (30, 1050, 5.06e-3), (20, 2500, 3.19e-3), (50, 2500, 1.275e-3)],
)
def test_greatest_charge_to_mass_in_air(diameter_um, density, ratio):
    diameter = diameter_um * 1e-6
    q = ratio * charge.sphere_mass(diameter, density)
    assert charge.air_limit_ratio(charge.surface_charge_density(q, diameter)) == pytest.approx(1.0, rel=1e-3)


def test_mass_of_a_sphere():
    # 2 um of polystyrene, 1050 kg/m3: 4.39823e-15 kg, recomputed independently of this program
    assert charge.sphere_mass(2e-6, 1050.0) == pytest.approx(4.39823e-15, rel=2e-6)


def test_charge_keeps_its_sign_and_the_limit_has_none():
    q = -1000 * constants.e
    assert charge.electrons(q) == pytest.approx(-1000.0)
    density = charge.surface_charge_density(q, 5e-6)
    assert density < 0.0
    assert charge.air_limit_ratio(density) == charge.air_limit_ratio(-density) > 0.0


def test_arrays_go_through_element_by_element():
    diameter, density = np.array([1e-6, 2e-6]), np.array([1000.0, 2000.0])
    np.testing.assert_allclose(
        charge.sphere_mass(diameter, density),
        [charge.sphere_mass(1e-6, 1000.0), charge.sphere_mass(2e-6, 2000.0)],
        rtol=1e-15,
    )
