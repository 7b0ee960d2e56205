"""Numbers, intervals and foreign text as they are set."""

from __future__ import annotations

import math
import unicodedata

import pytest

from reduction import typeset
from reduction.sheets import quantity_column


@pytest.mark.parametrize(
    ("estimate", "u", "power", "text"),
    [
        (0.0123456, 0.00078, 0, "0.01235(78)"),
        (-0.00120004, 0.0000174, -3, "−1.200(17)"),
        (123456.0, 7800.0, 3, "123.5(78)"),
        (123456.0, 7800.0, 0, "123500(7800)"),
        (9.80665, 0.0, 0, "9.80665"),
        (0.2, 1.5, 0, "0.2(15)"),
        (-0.001, 0.5, 0, "0.00(50)"),
        (math.nan, 0.1, 0, "—"),
        (1.0, math.inf, 0, "—"),
    ],
)
def test_value_stands_with_its_uncertainty_in_the_last_digits(estimate: float, u: float, power: int, text: str) -> None:
    assert typeset.bracketed(estimate, u, power) == text


def test_interval_is_rounded_to_the_place_of_u_and_keeps_its_order() -> None:
    assert typeset.interval(-1.2345e-3, -1.1671e-3, 1.7e-5, -3) == "−1.234 to −1.167"
    assert typeset.interval(1.0, math.nan, 0.1, 0) == "—"


def test_a_single_value_carries_its_power_of_ten() -> None:
    assert typeset.bracketed_alone(-0.0012, 0.000017) == "−1.200(17)\u202f×\u202f10⁻³"
    assert typeset.bracketed_alone(61.3, 0.9) == "61.30(90)"


@pytest.mark.parametrize(
    ("values", "power"), [([1.2e-3, 9e-4], -3), ([5e4, 7e4, 1.0], 3), ([2.0, 900.0], 0), ([], 0), ([math.nan, 0.0], 0)]
)
def test_one_power_of_ten_serves_a_column(values: list[float], power: int) -> None:
    assert typeset.common_power(values) == power


def test_column_over_many_decades_has_a_power_in_each_cell() -> None:
    head, cells, _ = quantity_column("q/m", "C kg⁻¹", [1e-6, 2.5], [1e-8, 0.1])
    assert head == "q/m\nC kg⁻¹"
    assert cells == ["1.000(10)\u202f×\u202f10⁻⁶", "2.50(10)"]
    head, cells, power = quantity_column("q/m", "C kg⁻¹", [1.0e-3, 2.5e-3], [1e-5, 1e-4])
    assert (head, cells, power) == ("q/m\n10⁻³ C kg⁻¹", ["1.000(10)", "2.50(10)"], -3)


def test_estimate_and_uncertainty_of_a_budget_line_are_rounded_together() -> None:
    assert typeset.pair(13104.0, 200.0) == ("13100", "200")
    assert typeset.pair(1.0, 2.2e-5) == ("1.000000", "0.000022")
    assert typeset.pair(math.nan, 1.0) == ("—", "1.0")


def test_small_moves_do_not_carry_a_sign() -> None:
    assert typeset.moved(1.0, 1.0, 1.0 - 1e-6) == "0.00"
    assert typeset.moved(1.0, 0.5, 0.0) == "−2.00"
    assert typeset.moved(1.0, 0.0, 1.0) == "—"


@pytest.mark.parametrize("value", [0.0, 3.14159, -2.5e-9, 1.2e7, math.nan])
def test_significant_digits_read_back(value: float) -> None:
    text = typeset.significant(value)
    if math.isnan(value):
        assert text == "—"
        return
    mantissa, _, power = text.replace("\u202f", "").partition("×10")
    plain = "".join(unicodedata.normalize("NFKC", sign) for sign in power).replace("−", "-")
    assert float(mantissa.replace("−", "-")) * 10.0 ** int(plain or 0) == pytest.approx(value, rel=5e-3)


def test_what_no_page_can_show_is_spelled_out() -> None:
    assert typeset.foreign("a\x07b \u202ec \ue000 \uffff \ufdd0") == "a[U+0007]b [U+202E]c [U+E000] [U+FFFF] [U+FDD0]"
    assert typeset.foreign("tab\tand\nline") == "tab and line"
    assert typeset.foreign("\ud800") == "[U+D800]"


def test_long_words_may_break_and_lose_nothing() -> None:
    word = "x" * 100 + "/" + "é" * 30
    broken = typeset.foreign(word)
    assert broken.replace("\u200b", "") == word
    assert max(map(len, broken.split("\u200b"))) <= 18
    assert typeset.foreign("short words stay as they are") == "short words stay as they are"


def test_an_accent_is_not_parted_from_its_letter() -> None:
    broken = typeset.foreign("e\u0301" * 60)
    assert all(not unicodedata.combining(part[0]) for part in broken.split("\u200b"))
