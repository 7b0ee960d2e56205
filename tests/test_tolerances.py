"""How trap constants follow dimensions, against laws of scale and draws of the dimensions."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from electrodes_drawn import NOMINAL, TOLERANCES, ring_and_plates

from reduction.conductors import DrawingError
from reduction.electrodes import solve
from reduction.tolerances import ToleranceBudget, monte_carlo, tolerance_budget


@pytest.fixture(scope="module")
def budget() -> ToleranceBudget:
    return tolerance_budget(ring_and_plates, NOMINAL, TOLERANCES)


def test_sensitivities_add_up_to_the_law_of_scale(budget: ToleranceBudget) -> None:
    # Euler's theorem on homogeneous functions: D goes as 1/length, A as 1/length^2, the centre as length, so the sum of
    # x_k d/dx_k of ln D, ln A and the centre is -1, -2 and the centre itself
    total = NOMINAL @ budget.sensitivities
    assert total[0] == pytest.approx(-1.0, abs=2e-4)
    assert total[1] == pytest.approx(-2.0, abs=2e-4)
    assert total[2] == pytest.approx(solve(ring_and_plates(NOMINAL)).centre, rel=2e-3)


def test_sensitivities_are_those_of_two_solutions(budget: ToleranceBudget) -> None:
    for k in (0, 4, 7):
        step = np.where(np.arange(10) == k, 1e-6, 0.0)
        up, down = (solve(ring_and_plates(NOMINAL + sign * step)) for sign in (1.0, -1.0))
        slopes = [
            np.log(up.dc_field_per_volt / down.dc_field_per_volt) / 2e-6,
            np.log(up.ac_gradient_per_volt / down.ac_gradient_per_volt) / 2e-6,
            (up.centre - down.centre) / 2e-6,
        ]
        np.testing.assert_allclose(budget.sensitivities[k], slopes, rtol=3e-4, atol=1e-6)


def test_monte_carlo_agrees_with_the_first_order_budget(budget: ToleranceBudget) -> None:
    # the standard deviation of n draws is uncertain by 1/sqrt(2 n), the mean by u/sqrt(n): 4 of these
    trials = 80
    draws = NOMINAL + TOLERANCES * np.random.default_rng(3).standard_normal((trials, 10))
    field = solve(ring_and_plates(NOMINAL))
    results = monte_carlo(ring_and_plates, draws, field=field)
    np.testing.assert_allclose(results.std(axis=0, ddof=1), budget.u_results, rtol=4.0 / np.sqrt(2.0 * trials))
    nominal = [np.log(field.dc_field_per_volt), np.log(field.ac_gradient_per_volt), field.centre]
    assert np.all(np.abs(results.mean(axis=0) - nominal) < 4.0 * budget.u_results / np.sqrt(trials))
    # draw by draw the plane of the budget says nearly all
    plane = nominal + (draws - NOMINAL) @ budget.sensitivities
    assert np.all((results - plane).std(axis=0) < 0.02 * budget.u_results)


def test_a_dimension_without_tolerance_has_no_component(budget: ToleranceBudget) -> None:
    exact = np.where(np.arange(10) == 4, 0.0, TOLERANCES)
    again = tolerance_budget(ring_and_plates, NOMINAL, exact, field=solve(ring_and_plates(NOMINAL)))
    assert again.components[4].tolist() == [0.0, 0.0, 0.0]
    others = np.arange(10) != 4
    np.testing.assert_allclose(again.components[others], budget.components[others], rtol=1e-9)
    assert np.all(again.u_results[:2] < budget.u_results[:2])


def test_a_tolerance_that_closes_a_gap_is_refused() -> None:
    wide = TOLERANCES.copy()
    wide[4] = 3.5e-3
    with pytest.raises(DrawingError, match="ring: touches upper plate"):
        tolerance_budget(ring_and_plates, NOMINAL, wide)


def test_a_shape_that_changes_its_pieces_is_refused() -> None:
    def shape(x: np.ndarray) -> object:
        drawn = ring_and_plates(x)
        if x[0] > NOMINAL[0]:
            drawn = replace(drawn, conductors=drawn.conductors[:3])
        return drawn

    with pytest.raises(ValueError, match="number of pieces"):
        tolerance_budget(shape, NOMINAL, TOLERANCES)  # type: ignore[arg-type]
