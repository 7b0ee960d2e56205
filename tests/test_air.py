"""Air against published formulas, tables and the reference equations of state and viscosity."""

import numpy as np
import pytest

from reduction import air

# CIPM-2007 at 400 ppm CO2, worked independently from the formula of Picard et al., Metrologia 45 (2008) 149
CIPM_POINTS = [
    (20.0, 101325.0, 0.50, 1.1993144),
    (20.0, 100000.0, 0.50, 1.1835572),
    (23.0, 101325.0, 0.45, 1.1867074),
    (20.0, 101325.0, 0.00, 1.2045573),
    (15.0, 101325.0, 0.00, 1.2255213),
    (25.0, 98000.0, 0.40, 1.1398360),
]


@pytest.mark.parametrize(("celsius", "pressure", "humidity", "expected"), CIPM_POINTS)
def test_density_follows_cipm_2007(celsius, pressure, humidity, expected):
    assert air.density(celsius + 273.15, pressure, humidity) == pytest.approx(expected, rel=1e-6)


def test_density_agrees_with_published_worked_examples():
    # NIST SOP 2 examples (22.3 degC, 748.1 mmHg, 37 %) and (23.4 degC, 612.3 mmHg, 23 %), by an equation older than the
    # argon content of 2007, which raised the density by 7e-5
    mercury = 133.322387
    assert air.density(295.45, 748.1 * mercury, 0.37) == pytest.approx(1.17194, rel=1e-4)
    assert air.density(296.55, 612.3 * mercury, 0.23) == pytest.approx(0.95632, rel=1e-4)


def test_density_agrees_with_the_short_formula_of_legal_metrology():
    # OIML R 111-1, approximation formula E.3-1 (from memory): (0.34848 p - 0.009 h exp(0.061 t)) / (273.15 + t)
    celsius, hectopascal, percent = np.array([18.0, 20.0, 24.0]), np.array([950.0, 1013.25, 1020.0]), 50.0
    short = (0.34848 * hectopascal - 0.009 * percent * np.exp(0.061 * celsius)) / (273.15 + celsius)
    np.testing.assert_allclose(air.density(celsius + 273.15, hectopascal * 100.0, percent / 100.0), short, rtol=2e-4)


def test_density_has_no_step_at_the_edges_of_its_range():
    for t, p in [(288.15, 9e4), (300.15, 9e4), (293.15, 6e4), (293.15, 1.1e5)]:
        below, above = air.density(t * (1 - 1e-12), p * (1 - 1e-12), 0.6), air.density(t * (1 + 1e-12), p, 0.6)
        assert abs(above / below - 1.0) < 1e-10


def test_density_at_low_pressure_is_that_of_an_ideal_gas():
    # molar mass of dry air over R, Picard et al. 2008: 3.483740e-3 kg K/J
    t = np.array([250.0, 293.15, 350.0])
    np.testing.assert_allclose(air.density(t, 1e-7, 0.0), 3.483740e-3 * 1e-7 / t, rtol=1e-9)


def test_vapour_never_exceeds_the_gas_it_is_in():
    # 18.015 over 28.965: molar masses of water and dry air
    pure_vapour = air.density(293.15, 100.0, 1.0)
    assert pure_vapour == pytest.approx(100.0 * 3.483740e-3 / 293.15 * 18.01528 / 28.96546, rel=2e-4)
    assert air.density(1000.0, 2e5, 1.0) > 0.0


def test_saturation_pressure_meets_the_boiling_point():
    # 101.3 kPa at 100 degC within 0.5 %, though the formula is stated for room temperature only
    assert air.saturation_vapour_pressure(373.15) == pytest.approx(101325.0, rel=5e-3)


@pytest.mark.parametrize("t", [250.0, 273.15, 300.15, 320.0, 350.0])
@pytest.mark.parametrize("p", [100.0, 3e4, 101325.0, 2e5])
def test_dry_density_lies_within_its_uncertainty_of_the_reference_equation_of_state(t, p):
    properties = pytest.importorskip("CoolProp.CoolProp")  # Lemmon et al., J. Phys. Chem. Ref. Data 29 (2000) 331
    reference = properties.PropsSI("D", "T", t, "P", p, "Air")
    assert abs(air.density(t, p, 0.0) / reference - 1.0) < 2.0 * max(air.density_relative_u(t, p), 1e-4)


def test_humid_density_agrees_with_the_reference_mixture():
    properties = pytest.importorskip("CoolProp.HumidAirProp")  # Herrmann, Kretzschmar and Gatley, ASHRAE RP-1485
    for t, p, humidity in [(293.15, 101325.0, 0.5), (310.0, 9e4, 0.9), (293.15, 2e4, 0.5)]:
        reference = 1.0 / properties.HAPropsSI("Vha", "T", t, "P", p, "R", humidity)
        assert air.density(t, p, humidity) == pytest.approx(reference, rel=3e-4)


def test_density_uncertainty_is_the_published_one_inside_and_wider_outside():
    assert air.density_relative_u(293.15, 1e5) == 22e-6  # Picard et al. 2008
    assert air.density_relative_u(293.15, 1e4) > 22e-6
    assert air.density_relative_u(280.0, 1e5) > 22e-6
    assert air.density_relative_u(600.0, 1e5) > air.density_relative_u(280.0, 1e5)


# Sutherland's formula on the base of aerosol science (1.83245e-5 at 296.15 K, from memory), worked independently
VISCOSITIES = [(273.15, 1.72051e-5), (288.15, 1.79400e-5), (293.15, 1.81809e-5), (298.15, 1.84198e-5)]


@pytest.mark.parametrize(("temperature", "expected"), VISCOSITIES)
def test_viscosity_is_the_aerosol_base(temperature, expected):
    assert air.viscosity(temperature) == pytest.approx(expected, rel=3e-6)


@pytest.mark.parametrize(
    "temperature", [100.0, 150.0, 200.0, 250.0, 273.15, 293.15, 300.0, 350.0, 500.0, 700.0, 1000.0]
)
def test_viscosity_lies_within_its_uncertainty_of_the_reference_equation(temperature):
    properties = pytest.importorskip("CoolProp.CoolProp")  # Lemmon and Jacobsen, Int. J. Thermophys. 25 (2004) 21
    reference = properties.PropsSI("V", "T", temperature, "P", 1000.0, "Air")
    deviation = air.viscosity(temperature) / reference - 1.0
    assert abs(deviation) < 2.0 * air.viscosity_relative_u(temperature)


def test_viscosity_agrees_with_the_standard_atmosphere_within_its_uncertainty():
    # U.S. Standard Atmosphere 1976 (from memory): 1.458e-6 T^1.5 / (T + 110.4)
    t = np.linspace(250.0, 350.0, 11)
    standard = 1.458e-6 * t**1.5 / (t + 110.4)
    assert np.all(np.abs(air.viscosity(t) / standard - 1.0) < 2.0 * air.viscosity_relative_u(t))


def test_mean_free_path_follows_willeke():
    # worked independently from Willeke's scaling (1976) of 67.3 nm at 296.15 K
    found = air.mean_free_path([293.15, 296.15, 298.15], 101325.0)
    np.testing.assert_allclose(found, [66.434e-9, 67.300e-9, 67.878e-9], atol=1e-12)


def test_mean_free_path_is_near_that_of_kinetic_theory():
    fluids = pytest.importorskip("fluids")
    # (eta / p) sqrt(pi R T / 2 M), other conventions differ by some percent
    t, p = 293.15, 101325.0
    kinetic = air.viscosity(t) / p * np.sqrt(np.pi * fluids.constants.R * t / (2.0 * 28.96546e-3))
    assert air.mean_free_path(t, p) == pytest.approx(kinetic, rel=0.03)


def test_mean_free_path_grows_as_pressure_falls():
    assert air.mean_free_path(293.15, 1e-7) == pytest.approx(air.mean_free_path(293.15, 1e5) * 1e12, rel=1e-12)


def test_every_quantity_is_finite_over_the_whole_range_of_inputs():
    t, p, h = np.meshgrid([1.0, 3.0, 77.0, 300.0, 1000.0], [1e-7, 1.0, 1e5, 2e5], [0.0, 0.5, 1.0])
    for value in (air.density(t, p, h), air.viscosity(t), air.mean_free_path(t, p), air.density_relative_u(t, p)):
        assert np.all(np.isfinite(value))
        assert np.all(value > 0.0)


def test_numbers_give_numbers_and_arrays_give_arrays():
    assert np.ndim(air.density(293.15, 1e5, 0.5)) == 0
    assert air.density([293.15, 294.15], 1e5, 0.5).shape == (2,)
