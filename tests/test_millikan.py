"""Millikan's oil drops end to end: our gas, slip, drag and charge against transits timed a century ago.

The search for the common quantum belongs here: the program itself never assumes that a charge is a whole number.
"""

from __future__ import annotations

import numpy as np
import pytest
from numpy.typing import NDArray
from scipy.constants import c as light_speed

from reduction import air, charge, drag
from reduction.fits import least_squares

Array = NDArray[np.float64]
ESU = 0.1 / light_speed  # coulombs per electrostatic unit

# One drop that changed its charge between transits. Source: the raw table at physicsbootcamp.org, "Charge of electron"
# (which of Millikan's own tables it is was not verified; its printed answer does not follow from its data, so is not
# used).
FALL_HEIGHT, PLATE_DISTANCE, VOLTAGE, OIL_DENSITY = 10.21e-3, 16e-3, 5100.0, 919.9
FALL_S = np.array([18.689, 18.73, 18.686, 18.726, 18.772, 18.74, 18.724, 18.72, 18.816, 18.816, 18.716, 18.804, 18.746,
                   18.746])  # fmt: skip
RISE_S = np.array([17.756, 17.778, 45.978, 45.87, 45.716, 45.758, 694.0, 27.95, 118.388, 45.03, 34.564, 44.826, 117.198,
                   44.784])  # fmt: skip
ELECTRONS = [16, 16, 11, 11, 11, 11, 8, 13, 9, 11, 12, 11, 9, 11]  # recomputed independently with numpy
TEMPERATURE, PRESSURE, GRAVITY, AIR_DENSITY = 296.15, 101325.0, 9.803, 1.19  # from memory: Millikan worked near 23 degC


def common_quantum(values: Array, low: float, high: float) -> tuple[float, Array]:
    """Quantum of which all values are whole multiples, and the multiples: scan everywhere, then refine.

    The score is the rms distance from whole numbers in quanta. The scan is bounded below, for any value is nearly a
    multiple of something small enough; a local search alone sticks at a wrong quantum.
    """
    trials = np.geomspace(low, high, 40_000)
    ratio = values / trials[:, None]
    score = np.sqrt(np.mean((ratio - np.rint(ratio)) ** 2, axis=1))
    numbers = np.rint(values / trials[np.argmin(score)])
    return float(values @ numbers / (numbers @ numbers)), numbers


def drop_charges(*, slip: bool) -> tuple[float, Array]:
    """Charge per quantum [C] and whole numbers of the fourteen transits, with or without slip."""
    fall = FALL_HEIGHT / FALL_S.mean()
    speeds = fall + FALL_HEIGHT / RISE_S  # proportional to the charge
    quantum, numbers = common_quantum(speeds, 3e-5, 2e-4)
    gamma = GRAVITY * (1 - AIR_DENSITY / OIL_DENSITY) / fall  # terminal speed is apparent gravity over drag rate
    path = air.mean_free_path(TEMPERATURE, PRESSURE) if slip else 1e-15
    diameter = drag.diameter_from_drag_rate(gamma, OIL_DENSITY, 1.0, air.viscosity(TEMPERATURE), path)
    field = VOLTAGE / PLATE_DISTANCE
    return float(charge.sphere_mass(diameter, OIL_DENSITY) * gamma * quantum / field), numbers


def test_fourteen_transits_give_whole_numbers_and_the_elementary_charge() -> None:
    quantum, numbers = drop_charges(slip=True)
    assert numbers.tolist() == ELECTRONS
    assert charge.electrons(quantum) == pytest.approx(1, abs=0.015)
    np.testing.assert_array_equal(np.rint(charge.electrons(quantum * numbers)), ELECTRONS)


def test_without_slip_the_elementary_charge_comes_out_five_to_six_percent_high() -> None:
    quantum, numbers = drop_charges(slip=False)
    assert numbers.tolist() == ELECTRONS
    assert 1.05 < charge.electrons(quantum) < 1.06


def test_transits_lie_within_a_twentieth_of_a_quantum_of_whole_numbers() -> None:
    """Source: recomputed independently, common quantum of speed 6.99782e-5 m/s and largest deviation 0.043 quanta."""
    speeds = FALL_HEIGHT / FALL_S.mean() + FALL_HEIGHT / RISE_S
    quantum, numbers = common_quantum(speeds, 3e-5, 2e-4)
    assert quantum == pytest.approx(6.99782e-5, abs=5e-10)
    assert np.abs(speeds / quantum - numbers).max() == pytest.approx(0.043, abs=0.001)


@pytest.mark.parametrize(
    ("charges", "numbers", "quantum"),
    [
        # Millikan 1911 as retold in textbooks (wizedu.com): proportional to charge, 1e-10 esu.
        ([19.66, 24.60, 29.62, 34.47, 39.38, 44.42, 49.41, 53.91, 59.12, 63.68, 68.65, 78.34, 83.22],
         [4, 5, 6, 7, 8, 9, 10, 11, 12, 13, 14, 16, 17], 4.90889),
        # Textbook set of nine charges, 1e-19 C (zanotowane.pl).
        ([6.563, 8.204, 11.50, 13.13, 16.48, 18.08, 19.71, 22.89, 26.13], [4, 5, 7, 8, 10, 11, 12, 14, 16], 1.63909),
    ],
)  # fmt: skip
def test_the_search_finds_published_whole_numbers(charges: list[float], numbers: list[int], quantum: float) -> None:
    found, multiples = common_quantum(np.array(charges), 0.2 * quantum, 3 * quantum)
    assert multiples.tolist() == numbers
    assert found == pytest.approx(quantum, abs=1e-4)


# Millikan's table of 25 drops, "The Electron", as stored at bitlit.ru p. 131 (same work: Proc. Natl. Acad. Sci. 3
# (1917) 231, from memory): number, temperature [degC], time of fall [s], speed [cm/s], radius [1e-5 cm],
# pressure [cmHg], l/a, apparent e1^(2/3) and corrected e^(2/3) [1e-8 esu^(2/3)].
DROPS = np.array([
    [1, 23.07, 16.50, 0.06194, 23.40, 74.49, 0.04111, 63.21, 61.03],
    [2, 23.00, 16.76, 0.06099, 23.22, 75.00, 0.04115, 63.204, 61.03],
    [3, 23.05, 19.73, 0.05180, 21.34, 74.49, 0.04509, 63.54, 61.16],
    [4, 23.08, 37.82, 0.02703, 15.33, 75.37, 0.06205, 64.27, 60.97],
    [5, 23.06, 40.09, 0.02521, 14.84, 75.00, 0.06484, 64.63, 61.21],
    [6, 23.12, 51.53, 0.01983, 13.05, 75.77, 0.06502, 65.02, 61.19],
    [7, 23.08, 51.48, 0.01985, 13.05, 74.98, 0.07329, 65.07, 61.20],
    [8, 23.01, 56.06, 0.01823, 12.50, 75.40, 0.07608, 65.13, 61.11],
    [9, 23.00, 59.14, 0.01728, 12.17, 75.04, 0.07850, 65.19, 61.05],
    [10, 23.10, 57.46, 0.01779, 12.34, 75.67, 0.07680, 65.21, 61.16],
    [11, 23.13, 16.58, 0.06165, 22.72, 29.26, 0.1078, 66.70, 61.01],
    [12, 23.21, 29.18, 0.03502, 17.08, 36.61, 0.1146, 67.12, 61.07],
    [13, 22.98, 18.81, 0.05432, 21.26, 30.27, 0.1114, 67.14, 61.26],
    [14, 23.12, 47.65, 0.02145, 13.20, 36.80, 0.1477, 68.90, 61.11],
    [15, 23.10, 32.72, 0.03129, 15.92, 31.25, 0.1437, 68.97, 61.39],
    [16, 23.15, 18.34, 0.05572, 21.11, 20.58, 0.1630, 69.88, 61.27],
    [17, 23.12, 46.82, 0.02294, 13.12, 29.10, 0.1878, 70.85, 60.94],
    [18, 23.12, 26.62, 0.03819, 17.32, 20.54, 0.2014, 71.60, 60.98],
    [19, 23.10, 14.10, 0.07249, 23.00, 13.24, 0.2297, 73.34, 61.20],
    [20, 23.14, 39.24, 0.02605, 14.00, 20.72, 0.2472, 74.27, 61.22],
    [21, 23.14, 18.30, 0.05585, 20.47, 13.62, 0.2570, 74.54, 60.97],
    [22, 23.00, 43.88, 0.02329, 13.17, 20.47, 0.2659, 75.00, 60.97],
    [23, 23.00, 43.88, 0.02329, 12.69, 20.74, 0.2724, 75.62, 61.24],
    [24, 23.09, 19.65, 0.05201, 19.65, 13.12, 0.2781, 75.92, 61.24],
    [25, 23.15, 26.76, 0.03819, 16.57, 13.80, 0.3137, 77.94, 61.18],
])  # fmt: skip
DOUBTFUL = {  # faults of transcription, each seen from the table's own redundancy and not from our numbers
    5: "speed times time of fall is 1.011 cm, not 1.022",
    6: "l/a does not go with pressure and radius",
    15: "speed times time of fall is 1.024 cm",
    16: "printed 1/(p a) is 1 % off pressure and radius",
    17: "speed times time of fall is 1.074 cm",
    18: "speed times time of fall is 1.017 cm",
    19: "radius does not go with pressure and printed 1/(p a)",
    22: "time and speed are those of row 23",
    23: "time and speed repeat row 22",
    25: "corrected value does not follow from l/a",
}
GOOD = DROPS[~np.isin(DROPS[:, 0], list(DOUBTFUL))]
CM_OF_MERCURY = 101325.0 / 76.0


def drop_radii(table: Array) -> Array:
    """Radii [m] from speed of fall, temperature and pressure, through our air and drag."""
    kelvin, pressure = table[:, 1] + 273.15, table[:, 5] * CM_OF_MERCURY
    weight = GRAVITY * (1 - air.density(kelvin, pressure, 0.0) / OIL_DENSITY)
    gamma = weight / (table[:, 3] * 1e-2)
    path = air.mean_free_path(kelvin, pressure)
    return np.asarray(drag.diameter_from_drag_rate(gamma, OIL_DENSITY, 1.0, air.viscosity(kelvin), path) / 2)


def apparent_charge_line() -> tuple[Array, Array]:
    """Intercept and slope of e1^(2/3) against 1/(p a) with our radii, and their u from the scatter."""
    x = 1.0 / (drop_radii(GOOD) * GOOD[:, 5] * CM_OF_MERCURY)
    line = least_squares(
        lambda b: b[0] + b[1] * x - GOOD[:, 7],
        {"intercept": 60.0, "slope": 1.0},
        scale={"intercept": 60.0, "slope": 1.0},
    )
    assert line.status == "ok"
    return line.values, np.sqrt(np.diag(line.covariance) * line.chi_square / line.dof)


def test_sound_rows_share_one_height_of_fall() -> None:
    fall = GOOD[:, 2] * GOOD[:, 3]
    np.testing.assert_allclose(fall, 1.0220, atol=3.5e-4)


def test_radii_of_the_sound_drops_are_reproduced_within_one_percent() -> None:
    np.testing.assert_allclose(drop_radii(GOOD), GOOD[:, 4] * 1e-7, rtol=0.01)


def test_apparent_charge_extrapolates_to_the_published_elementary_charge() -> None:
    """Mean of its last column 61.126, or 4.779e-10 esu; line through all rows as printed, recomputed, 61.094(51)."""
    values, u = apparent_charge_line()
    assert values[0] == pytest.approx(61.094, abs=0.051)
    assert values[0] == pytest.approx(61.126, abs=2 * u[0])
    assert (values[0] * 1e-8) ** 1.5 == pytest.approx(4.779e-10, rel=3e-3)


def test_half_a_percent_is_missing_and_it_is_the_viscosity_of_his_time() -> None:
    """The charge goes with viscosity to the power 3/2; 1.8226e-5 Pa s at 23 degC was his (from memory)."""
    values, _ = apparent_charge_line()
    his = (values[0] * 1e-8) ** 1.5 * ESU
    assert -0.008 < charge.electrons(his) - 1 < -0.003
    renewed = his * (air.viscosity(296.15) / 1.8226e-5) ** 1.5
    assert abs(charge.electrons(renewed) - 1) < 0.003


def test_slip_read_from_the_drops_is_the_slip_we_use() -> None:
    """Slope over intercept is the slip length times pressure; published slip sets for oil and solid differ by 6 %."""
    values, _ = apparent_charge_line()
    from_drops = values[1] / values[0]
    radius, pressure = 1e-6, 101325.0
    ours = (drag.slip_correction(2 * radius, air.mean_free_path(296.15, pressure)) - 1) * radius * pressure
    assert ours == pytest.approx(from_drops, rel=0.06)
