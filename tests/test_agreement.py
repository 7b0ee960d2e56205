"""Whether methods agree: the difference, its uncertainty with what they share, and E_n."""

from __future__ import annotations

import math

import numpy as np
import pytest
from uncertainties import ufloat
from uncertainties.umath import exp

from reduction.agreement import MethodEstimate, agreement_rows, normalized_error


def estimate(value, private, by_input, *, known=(True, True), signed=True):
    return MethodEstimate(
        np.array(value), np.array(private), np.array(by_input, dtype=float), np.array(known, dtype=bool), signed
    )


def rows(**estimates):
    return {(row["method_a"], row["method_b"], row["quantity"]): row for row in agreement_rows("s1", "p1", estimates)}


# E_n = (x - X) / sqrt(U_x^2 + U_X^2) with expanded uncertainties, k = 2 (ISO/IEC 17043, ISO 13528; the definition from
# memory). Worked by hand: 0.953286 of the constructed pair, and exactly 1 on the limit.
@pytest.mark.parametrize(
    ("a", "u_a", "b", "u_b", "score"),
    [(1.2345e-3, 0.0032e-3, 1.2310e-3, 0.0018e-3, 0.953286), (10.05, 0.04, 10.00, 0.03, 1.0)],
)
def test_normalized_error_of_worked_pairs(a, u_a, b, u_b, score):
    u = math.hypot(u_a / 2, u_b / 2)  # expanded uncertainties with k = 2
    assert normalized_error(a - b, u) == pytest.approx(score, rel=1e-6)
    found = rows(
        one=estimate([a, 1.0], [u_a / 2 / a, 0.1], [[0.0], [0.0]]),
        two=estimate([b, 1.0], [u_b / 2 / b, 0.1], [[0.0], [0.0]]),
    )["one", "two", "charge_to_mass"]
    assert found["normalized_error"] == pytest.approx(score, rel=1e-6)
    assert found["difference"] == pytest.approx(a - b)
    assert found["unit"] == "C/kg"


def test_shared_inputs_are_subtracted_before_they_are_squared():
    # the same through the package uncertainties, which follows every input by name
    private = (0.003, 0.004)
    parts = ([0.015, 0.004, 0.0], [0.014, -0.002, 0.007])
    inputs = [ufloat(0.0, 1.0) for _ in parts[0]]
    values = (-6.5e-4, -6.6e-4)
    carried = [
        value * exp(ufloat(0.0, own) + sum(part * one for part, one in zip(row, inputs, strict=True)))
        for value, own, row in zip(values, private, parts, strict=True)
    ]
    difference = carried[0] - carried[1]
    found = rows(
        balance=estimate([values[0], 1.0], [private[0], 0.1], [parts[0], [0.0] * 3], known=(True, False)),
        height=estimate([values[1], 1.0], [private[1], 0.1], [parts[1], [0.0] * 3]),
    )
    assert set(found) == {("balance", "height", "charge_to_mass")}
    row = found["balance", "height", "charge_to_mass"]
    assert row["difference"] == pytest.approx(difference.nominal_value)
    assert row["u_difference"] == pytest.approx(difference.std_dev, rel=1e-9)
    assert row["u_difference"] < 0.6 * math.hypot(carried[0].std_dev, carried[1].std_dev)


def test_what_is_shared_alone_leaves_no_doubt_of_the_difference():
    row = rows(
        balance=estimate([2.0, 1.0], [1e-6, 1.0], [[0.5], [0.0]]),
        height=estimate([2.0, 1.0], [1e-6, 1.0], [[0.5], [0.0]]),
    )["balance", "height", "charge_to_mass"]
    assert row["u_difference"] == pytest.approx(2.0 * 1e-6 * math.sqrt(2.0))


def test_a_method_that_tells_no_sign_is_compared_by_size():
    row = rows(
        balance=estimate([-2.0, 1.0], [0.01, 1.0], [[0.1], [0.0]]),
        secular=estimate([2.1, 1.0], [0.01, 1.0], [[0.1], [0.0]], signed=False),
    )["balance", "secular", "charge_to_mass"]
    assert row["difference"] == pytest.approx(-0.1)
    assert row["u_difference"] == pytest.approx(math.sqrt((0.2 - 0.21) ** 2 + 0.02**2 + 0.021**2))


def test_every_pair_that_determines_a_quantity_and_no_other():
    both = estimate([1.0, 2.0], [0.1, 0.1], [[0.0], [0.0]])
    found = rows(
        balance=estimate([1.0, 2.0], [0.1, 0.1], [[0.0], [0.0]], known=(True, False)), height=both, secular=both
    )
    assert set(found) == {
        ("balance", "height", "charge_to_mass"),
        ("balance", "secular", "charge_to_mass"),
        ("height", "secular", "charge_to_mass"),
        ("height", "secular", "drag_rate"),
    }
    assert found["height", "secular", "drag_rate"]["unit"] == "1/s"
