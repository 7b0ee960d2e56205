import doctest
import math

import numpy as np
import pytest

import reduction.units
from reduction.contract import FILES, LOGS, Key
from reduction.units import QUANTITIES, UNITS, from_unit, range_text, split_name, to_unit, unit_spelling, units_of


@pytest.mark.parametrize(
    ("name", "stem", "unit"),
    [
        ("height_mm", "height", "mm"),
        ("height_um", "height", "um"),
        ("height_µm", "height", "um"),  # micro sign
        ("height_μm", "height", "um"),  # Greek mu
        ("height [um]", "height", "um"),
        ("height[µm]", "height", "um"),
        ("height/um", "height", "um"),
        ("height / mm", "height", "mm"),
        ("  height  [ mm ]  ", "height", "mm"),
        ("height (mm)", "height", "mm"),
        ("drive_voltage_peak_to_peak_kV", "drive_voltage_peak_to_peak", "kV"),
        ("dc_field_per_volt_per_m", "dc_field_per_volt", "per_m"),
        ("ac_gradient_per_volt_per_m2", "ac_gradient_per_volt", "per_m2"),
        ("density_kg_per_m3", "density", "kg_per_m3"),
        ("density [kg/m^3]", "density", "kg_per_m3"),
        ("density [kg m-3]", "density", "kg_per_m3"),
        ("density/(g/cm³)", "density", "g_per_cm3"),
        ("density/kg/m3", "density", "kg_per_m3"),
        ("stray_field_V_per_m", "stray_field", "V_per_m"),
        ("stray_field [V/m]", "stray_field", "V_per_m"),
        ("gravity [m s^-2]", "gravity", "m_per_s2"),
        ("charge_to_mass [C/kg]", "charge_to_mass", "C_per_kg"),
        ("ac_gradient_per_volt [1/m²]", "ac_gradient_per_volt", "per_m2"),
        ("temperature [°C]", "temperature", "degC"),
        ("relative_humidity [%]", "relative_humidity", "percent"),
        ("latitude [°]", "latitude", "deg"),
        ("charge_e", "charge", "e"),
        ("u_height_mm", "u_height", "mm"),
        ("note", "note", ""),
        ("particles_in_trap", "particles_in_trap", ""),
        ("height_furlong", "height_furlong", ""),
        ("height [furlong]", "height", "furlong"),
        ("_m", "_m", ""),
        ("", "", ""),
    ],
)
def test_a_name_splits_into_stem_and_unit(name, stem, unit):
    assert split_name(name) == (stem, unit)


def test_case_counts_because_milli_is_not_mega():
    assert from_unit(1.0, "mHz") == 1e-3
    assert from_unit(1.0, "MHz") == 1e6
    assert split_name("drive_frequency_HZ") == ("drive_frequency_HZ", "")


@pytest.mark.parametrize(
    ("reading", "unit", "si"),
    [
        (20.0, "degC", 293.15),
        (1013.25, "hPa", 101325.0),
        (760.0, "Torr", 101325.0),  # NIST SP 811: 1 atm = 101325 Pa = 760 Torr
        (1.0, "atm", 101325.0),
        (1.0, "mbar", 100.0),
        (50.0, "percent", 0.5),
        (8.413, "mm", 8.413e-3),
        (90.0, "deg", math.pi / 2),
        (1.19, "g_per_cm3", 1190.0),
        (2.0, "kV_per_cm", 2e5),
        (3.0, "per_mm2", 3e6),
        (1.0, "e", 1.602176634e-19),  # the definition of the ampere, BIPM SI brochure 2019
        (5.0, "pg", 5e-15),
        (1.0, "uC_per_g", 1e-3),
        (1.0, "nC_per_cm2", 1e-5),
        (2.0, "h", 7200.0),
    ],
)
def test_a_reading_becomes_si_and_back(reading, unit, si):
    assert from_unit(reading, unit) == pytest.approx(si, rel=1e-15)
    assert to_unit(from_unit(reading, unit), unit) == pytest.approx(reading, rel=1e-13)


def test_arrays_are_converted_like_numbers():
    np.testing.assert_array_equal(from_unit(np.array([1.0, 2.0]), "mm"), [1e-3, 2e-3])


def test_a_prefix_scales_a_unit_by_its_power_of_ten():
    powers = {"f": -15, "p": -12, "n": -9, "u": -6, "m": -3, "k": 3, "M": 6}  # SI brochure, table 7
    for spelling, unit in UNITS.items():
        base = spelling[1:]
        if spelling[0] in powers and base in UNITS and UNITS[base].dimension == unit.dimension and base != "in":
            assert unit.factor == pytest.approx(10.0 ** powers[spelling[0]] * UNITS[base].factor, rel=1e-12), spelling


def test_every_spelling_reads_as_itself():
    for spelling in UNITS:
        assert unit_spelling(spelling) == spelling
        assert split_name(f"word_{spelling}")[1] == spelling


def test_every_key_and_column_has_a_unit_of_its_dimension():
    def flat(keys: tuple[Key, ...]) -> list[Key]:
        return [inner for key in keys for inner in (key, *flat(key.keys))]

    named = [key for keys in FILES.values() for key in flat(keys)] + [c for columns in LOGS.values() for c in columns]
    checked = 0
    for entry in named:
        dimension = QUANTITIES[entry.of].dimension if entry.of else ""
        if dimension:
            assert UNITS[split_name(entry.name)[1]].dimension == dimension, entry.name
            checked += 1
    assert checked > 40


@pytest.mark.parametrize(
    ("stem", "inside", "outside"),
    [
        ("drive_voltage", [1e-3, 1e5], [0.0, -1.0, 1.0001e5]),
        ("dc_voltage", [-1e5, 0.0, 1e5], [1.0001e5, -1.0001e5]),
        ("drive_frequency", [1e-3, 1e8], [0.0, 1.0001e8]),
        ("secular_frequency", [1e8], [0.0, 1.0001e8]),
        ("height", [-1.0, 1.0], [1.0001]),
        ("pressure", [1e-7, 2e5], [0.9e-7, 2.0001e5, 0.0]),
        ("temperature", [1.0, 1000.0], [0.99, 1000.1]),
        ("density", [10.0, 30000.0], [9.9, 30001.0]),
        ("diameter", [1e-9, 1e-2], [0.99e-9, 1.01e-2, 0.0]),
        ("relative_humidity", [0.0, 1.0], [-0.001, 1.001]),
        ("gain", [1e-9, 1e9], [0.0, -1.0]),
        ("dc_field_per_volt", [1e-3], [0.0, -61.3]),
        ("ac_gradient_per_volt", [1e-3], [0.0, -1.0]),
    ],
)
def test_ranges_hold_at_their_ends(stem, inside, outside):
    kind = QUANTITIES[stem]
    assert [kind.contains(value) for value in inside] == [True] * len(inside)
    assert [kind.contains(value) for value in outside] == [False] * len(outside)
    assert not kind.contains(math.nan)
    assert not kind.contains(math.inf)


@pytest.mark.parametrize(
    ("stem", "reading", "unit"),
    [
        ("diameter", 0.001, "um"),
        ("diameter", 10.0, "mm"),
        ("pressure", 1e-9, "hPa"),
        ("temperature", -272.15, "degC"),
        ("latitude", -90.0, "deg"),
        ("relative_humidity", 100.0, "percent"),
        ("height", 1000.0, "mm"),
        ("height", -1e6, "um"),
    ],
)
def test_the_ends_of_a_range_lie_within_it_in_any_unit(stem, reading, unit):
    assert QUANTITIES[stem].contains(from_unit(reading, unit))


def test_ranges_are_told_in_the_unit_of_the_file():
    assert range_text(QUANTITIES["pressure"], "kPa") == "from 1e-10 to 200 kPa"
    assert range_text(QUANTITIES["temperature"], "degC") == "from -272.15 to 726.85 degC"
    assert range_text(QUANTITIES["drive_voltage"], "V", 0.5) == "above 0, to 200000 V"  # peak to peak
    assert range_text(QUANTITIES["time"], "s") == "a finite number"


def test_units_of_one_kind_are_listed():
    assert units_of("temperature") == ["K", "degC"]
    assert units_of("ratio") == ["percent"]


def test_the_examples_in_the_docstrings_hold():
    assert doctest.testmod(reduction.units) == (0, 4)
