"""Budgets of group means and ratios: they add up, and agree with the covariance of single particles."""

from __future__ import annotations

import math
from collections import defaultdict
from typing import Any

import numpy as np
import pandas as pd
import pytest
from test_comparison import facts, parts, rows

from reduction.comparison import Comparison, compare
from reduction.groupbudget import COLUMNS, group_budget_rows
from reduction.tables import table_text

GROUPS = {
    "a": {"s1": [1.0, 1.2, 0.9], "s2": [1.4, 1.5], "s3": [1.1, 1.0]},
    "b": {"s4": [3.0, 3.3], "s5": [2.7, 2.9, 3.1], "s6": [3.2]},
    "c": {"s7": [5.0, 5.5]},
}
SHARED = {
    "trap/ring/dc_field_per_volt_per_m": lambda row: 0.015 * row["charge_to_mass_C_per_kg"],
    "session/{session}/gain_dc_voltage": lambda row: 0.002 * row["charge_to_mass_C_per_kg"],
    "session/{session}/readings/1": lambda row: 0.01,
    "species/bead/shape_factor": 0.03,
}


def found() -> tuple[Comparison, pd.DataFrame, list[dict[str, Any]]]:
    particles = rows(GROUPS)
    components = parts(particles, SHARED, own=0.02)
    made = compare(particles, components, facts(particles), trials=200)
    return made, components, list(group_budget_rows(made, {"trap/ring/dc_field_per_volt_per_m": "A"}))


def test_components_make_up_the_uncertainty_of_every_mean_difference_and_ratio() -> None:
    made, _, budget = found()
    squares: dict[tuple[str, str, str], float] = defaultdict(float)
    shares: dict[tuple[str, str, str], float] = defaultdict(float)
    for row in budget:
        key = row["result"], row["group"], row["group_b"]
        squares[key] += row["component"] ** 2
        shares[key] += row["share"]
    (pair,) = (one for one in made.pairs if one.tested)
    expected = {("mean", "a", ""): made.interval(0)[0], ("mean", "b", ""): made.interval(1)[0],
                ("difference", "a", "b"): pair.u, ("ratio", "a", "b"): pair.u_ratio}  # fmt: skip
    assert set(squares) == set(expected)  # c has one session: described, without a u
    for key, u in expected.items():
        assert math.sqrt(squares[key]) == pytest.approx(u, rel=1e-6)
        assert shares[key] == pytest.approx(1.0, rel=1e-6)


def test_shared_component_of_a_mean_is_the_weighted_mean_over_its_sessions() -> None:
    made, components, budget = found()
    weights = dict(zip(["s1", "s2", "s3"], made.means.groups[0].weights, strict=True))
    trap = components[components["scope"] == "trap"]
    by_session = trap.groupby("session")["component"].mean()
    expected = sum(weight * by_session[name] for name, weight in weights.items())
    (row,) = (one for one in budget if one["result"] == "mean" and one["group"] == "a" and one["scope"] == "trap")
    assert row["component"] == pytest.approx(expected)
    assert row["evaluation"] == "A"  # as budget.csv has it


def test_what_is_in_proportion_to_both_means_cancels_in_their_ratio_and_not_in_the_difference() -> None:
    _, _, budget = found()
    trap = {row["result"]: row for row in budget if row["scope"] == "trap"}
    assert "ratio" not in trap
    assert trap["difference"]["component"] < 0.0  # a lies below b


def test_inputs_of_single_sessions_are_gathered_by_what_they_are() -> None:
    made, _, budget = found()
    own = [row for row in budget if row["result"] == "mean" and row["group"] == "a" and row["scope"] == "session"]
    assert [row["input"] for row in own] == ["session//gain_dc_voltage", "session//readings"]
    readings = 0.01 * math.sqrt(float(np.sum(made.means.groups[0].weights ** 2)))
    assert own[1]["component"] == pytest.approx(readings)
    assert own[1]["evaluation"] == "A"


def test_budget_is_a_table_of_its_columns() -> None:
    _, _, budget = found()
    assert table_text(COLUMNS, budget).count("\n") == len(budget) + 1
