import doctest
import math
import random
from decimal import Decimal, localcontext

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

import reduction.quantity
from reduction.quantity import Quantity, QuantityError, read_number, read_quantity, rounded, rounded_text, shorthand


@pytest.mark.parametrize(
    ("text", "estimate", "u"),
    [
        ("61.3(9)", 61.3, 0.9),
        ("1.310(20)e4", 13100.0, 200.0),
        ("1.310(20)E+4", 13100.0, 200.0),
        ("9780(30)", 9780.0, 30.0),
        ("-0.5(12)", -0.5, 1.2),
        ("+0.50(12)", 0.5, 0.12),
        ("\N{MINUS SIGN}3.0(1)", -3.0, 0.1),
        ("  61.3 (9) ", 61.3, 0.9),
        ("61.3(1.2)", 61.3, 1.2),
        (".5(1)", 0.5, 0.1),
        ("5.(1)", 5.0, 1.0),
        ("2(1)e-3", 2e-3, 1e-3),
        ("61.3(0)", 61.3, 0.0),
        ("61.3", 61.3, 0.0),
        (61.3, 61.3, 0.0),
        (20, 20.0, 0.0),
        ("1e3", 1000.0, 0.0),
    ],
)
def test_shorthand_is_read(text, estimate, u):
    read = read_quantity(text)
    assert (read.estimate, read.u, read.shape, read.dof) == (estimate, u, "normal", math.inf)
    assert read.exact is (u == 0.0)


def test_published_shorthand_is_read():
    # CODATA 2018, Rev. Mod. Phys. 93, 025010: m_e = 9.109 383 7015(28)e-31 kg
    read = read_quantity("9.1093837015(28)e-31")
    assert read == Quantity(9.1093837015e-31, 0.0000000028e-31)
    # GUM 7.2.2: m_S = 100,021 47 g with u_c = 0,35 mg is written 100,021 47(35) g
    assert read_quantity("100.02147(35)", "g").u == pytest.approx(0.35e-6, rel=1e-14)


@pytest.mark.parametrize(
    ("mapping", "expected"),
    [
        ({"value": "20", "u": "0.4", "dof": "9"}, Quantity(20.0, 0.4, dof=9.0)),
        ({"value": 20, "u": 0.4}, Quantity(20.0, 0.4)),
        ({"value": 20}, Quantity(20.0)),
        ({"value": 20, "u": 0}, Quantity(20.0)),
        ({"value": 20, "u": 0.4, "shape": "triangular"}, Quantity(20.0, 0.4, "triangular")),
        ({"value": 20, "half_width": 0.5, "shape": "rectangular"}, Quantity(20.0, 0.5 / math.sqrt(3), "rectangular")),
        ({"value": 20, "half_width": 0.5, "shape": "triangular"}, Quantity(20.0, 0.5 / math.sqrt(6), "triangular")),
        ({"value": 20, "half_width": 0.5, "shape": "arcsine"}, Quantity(20.0, 0.5 / math.sqrt(2), "arcsine")),
    ],
)
def test_mappings_are_read(mapping, expected):
    assert read_quantity(mapping) == expected


@pytest.mark.parametrize(
    ("shape", "draw"),
    [
        ("rectangular", lambda uniform: 2 * uniform() - 1),
        ("triangular", lambda uniform: uniform() + uniform() - 1),
        ("arcsine", lambda uniform: math.cos(math.pi * uniform())),
    ],
)
def test_u_is_the_standard_deviation_of_the_shape(shape, draw):
    uniform = random.Random(1).random
    draws = [draw(uniform) for _ in range(40_000)]
    deviation = math.sqrt(sum(value * value for value in draws) / len(draws))
    u = read_quantity({"value": 0, "half_width": 1, "shape": shape}).u
    assert deviation == pytest.approx(u, rel=0.02)


@pytest.mark.parametrize(
    "value",
    [
        "",
        None,
        True,
        False,
        "true",
        "no",
        "nan",
        "inf",
        "-inf",
        ".inf",
        "1e999",
        "1_000",
        "1:30",
        "0x10",
        "1,5",
        "1.234,5",
        "61,3(9)",
        "61.3(9",
        "61.3()",
        "61.3(-9)",
        "61.3(9)(9)",
        "(9)",
        "61.3 ± 0.9",
        "61.3+/-0.9",
        "61.3 9",
        "5 %",
        "61.3(9) mm",
        "61.3e4(9)",
        "--1",
        "1.2.3",
        "e4",
        ".",
        "+",
        "١٢",
        [1],
        {},
        {"value": 1, "u": -1},
        {"value": 1, "u": 1, "dof": 0},
        {"value": 1, "u": 1, "dof": "inf"},
        {"value": 1, "dof": 3},
        {"u": 1},
        {"value": 1, "half_width": 1},
        {"value": 1, "half_width": 1, "shape": "normal"},
        {"value": 1, "half_width": 0, "shape": "arcsine"},
        {"value": 1, "half_width": 1, "shape": "rectangular", "u": 1},
        {"value": 1, "u": 1, "shape": "square"},
        {"value": 1, "u": 1, "shape": "rectangular", "dof": 3},
        {"value": 1, "sigma": 1},
        {"value": "1(2)", "dof": 3},
        {"value": None, "u": 1},
        {"value": True},
        "1(2)e999",
        "9" * 400,
    ],
)
def test_what_is_no_quantity_is_refused(value):
    with pytest.raises(QuantityError, match="expected"):
        read_quantity(value)


def test_a_fault_says_what_to_write():
    for text, word in (
        ("61.3 ± 0.9", "61.3(9)"),
        ("1,5", "decimal point"),
        ("1_000", "digits"),
        ("5 %", "end of the key"),
    ):
        with pytest.raises(QuantityError) as caught:
            read_quantity(text)
        assert word in caught.value.advice
    with pytest.raises(QuantityError, match="Did you mean half_width"):
        read_quantity({"value": 1, "halfwidth": 2})


def test_a_number_has_no_uncertainty():
    assert read_number(" 1.5e-3 ") == 1.5e-3
    with pytest.raises(QuantityError, match="a number"):
        read_number("1.5(2)")


def test_units_scale_estimate_and_u_and_an_offset_moves_the_estimate_alone():
    assert read_quantity("20.0(2)", "degC") == Quantity(293.15, 0.2)
    assert read_quantity("20.3(2)", "um") == Quantity(20.3 / 1e6, 0.2 / 1e6)
    half = read_quantity({"value": 1, "half_width": 3, "shape": "triangular"}, "kPa")
    assert (half.estimate, half.u, half.shape) == (1000.0, pytest.approx(3000 / math.sqrt(6)), "triangular")


@pytest.mark.parametrize(
    ("estimate", "u", "digits", "text"),
    [
        (1.2345, 0.0563, 2, "1.234(56)"),  # half to even
        (1.2355, 0.0563, 2, "1.236(56)"),
        (0.5, 0.0995, 2, "0.50(10)"),  # 0.0995 rounds to 0.10, one digit fewer after the point
        (0.5, 0.0994, 2, "0.500(99)"),
        (0.5, 0.0985, 2, "0.500(98)"),
        (0.5, 0.00949, 1, "0.500(9)"),
        (0.5, 0.0095, 1, "0.50(1)"),
        (9.9996, 0.0995, 2, "10.00(10)"),
        (9.9996, 0.012, 2, "10.000(12)"),
        (123.0, 99.5, 2, "1.2(10)e2"),
        (123.0, 99.4, 2, "123(99)"),
        (13100.0, 200.0, 2, "1.310(20)e4"),
        (123456.0, 12.0, 2, "123456(12)"),
        (0.0, 1.2, 2, "0.0(12)"),
        (0.3, 1.2, 2, "0.3(12)"),
        (-0.04, 1.2, 2, "0.0(12)"),  # no minus before zero
        (-1.5, 0.25, 1, "-1.5(2)"),
        (-1.5e-3, 2.5e-5, 2, "-0.001500(25)"),
        (1.5e-4, 2.5e-6, 2, "1.500(25)e-4"),
        (1.234e-7, 5.6e-9, 2, "1.234(56)e-7"),
        (1e22, 3e18, 2, "1.00000(30)e22"),
        (1.2e-300, 3e-302, 2, "1.200(30)e-300"),
        (1.0, 1e-12, 2, "1.0000000000000(10)"),
        (0.0, 5e4, 2, "0.0(50)e4"),
        (2.0, 0.0, 2, "2"),
        (-2.5, 0.0, 2, "-2.5"),
        (0.1, 0.0, 2, "0.1"),
        (100000.0, 0.0, 2, "100000"),
        (1e-7, 0.0, 2, "1e-7"),
        (-0.0, 0.0, 2, "0"),
        (1.602176634e-19, 0.0, 2, "1.602176634e-19"),
        (math.nan, 1.0, 2, ""),
        (1.0, math.inf, 2, ""),
        (3.14159, 0.00123, 3, "3.14159(123)"),
    ],
)
def test_shorthand_rounds_both_to_the_same_place(estimate, u, digits, text):
    assert shorthand(estimate, u, digits) == text


def test_published_results_print_as_published():
    # CODATA 2018, Rev. Mod. Phys. 93, 025010; GUM H.1.7 and H.2.3 as quoted in JCGM 100:2008
    assert shorthand(6.67430e-11, 0.00015e-11) == "6.67430(15)e-11"
    assert shorthand(100.02147, 0.00035) == "100.02147(35)"
    assert shorthand(50.000838, 0.000032) == "50.000838(32)"
    assert shorthand(127.732, 0.071) == "127.732(71)"


def test_value_and_u_are_rounded_together():
    assert rounded(1.2345, 0.0563) == ("1.234", "0.056")
    assert rounded(123456.0, 7800.0) == ("1.235e5", "0.078e5")
    assert rounded(0.0, 0.5) == ("0.00", "0.50")
    assert rounded(2.5, 0.0) == ("2.5", "0")
    assert rounded(math.nan, 0.5) == ("", "")
    assert rounded_text(123456.0, 7800.0) == ("1.235(78)", 5)


REPEATABLE = settings(derandomize=True, database=None, deadline=None)
NUMBERS = st.floats(min_value=-1e250, max_value=1e250, allow_nan=False)
UNCERTAINTIES = st.floats(min_value=1e-250, max_value=1e250, allow_nan=False)


@REPEATABLE
@given(NUMBERS, UNCERTAINTIES, st.integers(1, 4))
def test_rounding_moves_no_number_by_more_than_half_its_last_place(estimate, u, digits):
    estimate, u = _kept(estimate, u)
    value_text, u_text = (Decimal(text) for text in rounded(estimate, u, digits))
    with localcontext(prec=400):
        half = Decimal(5).scaleb(u_text.adjusted() - digits)
        assert abs(u_text - Decimal(repr(u))) <= half
        assert abs(value_text - Decimal(repr(estimate))) <= half
    assert len(u_text.as_tuple().digits) == digits


@REPEATABLE
@given(NUMBERS, UNCERTAINTIES, st.integers(1, 4))
def test_what_is_printed_reads_back_as_printed(estimate, u, digits):
    estimate, u = _kept(estimate, u)
    value_text, u_text = rounded(estimate, u, digits)
    read = read_quantity(shorthand(estimate, u, digits))
    assert read.estimate == float(value_text)
    assert read.u == pytest.approx(float(u_text), rel=1e-15)


@REPEATABLE
@given(st.integers(1, 99_999), st.integers(-20, 20))
def test_scaling_by_powers_of_ten_changes_only_the_power(figures, power):
    one, other = (rounded_text(float(f"1.2345e{p}"), float(f"{figures}e{p - 6}"))[0] for p in (6, 6 + power + 30))
    if rounded_text(1.2345e6, float(figures))[1]:
        assert one == other


@REPEATABLE
@given(st.floats(allow_nan=False, allow_infinity=False))
def test_an_exact_number_is_printed_in_full(number):
    assert float(shorthand(number, 0.0)) == number


def _kept(estimate, u):
    """Keep u within thirty powers of ten of the estimate: beyond, the text would be hundreds of digits long."""
    size = abs(estimate) or u
    return estimate, min(max(u, size * 1e-30), max(size * 1e30, 1e-250))


def test_the_examples_in_the_docstrings_hold():
    assert doctest.testmod(reduction.quantity) == (0, 3)
