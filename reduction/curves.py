"""The adjusted motion as curves to draw: height against dc voltage at each drive, secular frequency against drive."""

from __future__ import annotations

from typing import Any

import numpy as np

from reduction import motion
from reduction.adjustment import Adjusted
from reduction.methods import Array, Readings, particle_properties, predict, scaled_motion, surroundings, with_departure
from reduction.preparation import Prepared

POINTS = 49  # of a secular curve
BENT = 25  # of heights in a field that is not linear


def _readings(amplitude: Array, omega: float, voltage: Array, place: int) -> Readings:
    empty = np.zeros(len(amplitude))
    return Readings(
        np.full(len(amplitude), place, np.intp),
        empty,
        np.ones(len(amplitude)),
        amplitude,
        np.full(len(amplitude), omega),
        voltage,
        empty,
        empty,
        np.zeros(len(amplitude), bool),
        np.zeros(len(amplitude), np.intp),
        empty,
        empty,
    )


def curves_of(prepared: Prepared, adjusted: Adjusted, names: list[str], places: list[int]) -> dict[str, Any]:
    """Curves of the named particles, in the units of the readings, as plain lists for session.json.

    A frequency that the exact motion does not have is None. The drag-free curve is the same particle with no drag.
    """
    found: dict[str, Any] = {}
    for place in places:
        curves: dict[str, Any] = {}
        for log, function in (("height", _height_lines), ("secular", _secular_curve)):
            readings = adjusted.model.logs.get(log)
            if readings is not None and (readings.particle == place).any():
                curves[log] = function(adjusted, readings.select(readings.particle == place), place)
        found[names[place]] = curves
    return found


def _height_lines(adjusted: Adjusted, readings: Readings, place: int) -> list[dict[str, Any]]:
    lines = []
    span = readings.voltage.min(), readings.voltage.max()
    margin = 0.05 * (span[1] - span[0])
    straight = adjusted.model.setting.field_map is None
    voltage = np.linspace(span[0] - margin, span[1] + margin, 2 if straight else BENT)
    for amplitude, omega in sorted(
        {(float(a), float(o)) for a, o in zip(readings.amplitude, readings.omega, strict=True)}
    ):
        log = _readings(np.full(len(voltage), amplitude), omega, voltage, place)
        log = with_departure(adjusted.model.setting, log, adjusted.theta, adjusted.model.sign)
        height = _predicted(adjusted, "height", log)
        lines.append(
            {
                "drive_V": amplitude,
                "drive_Hz": omega / (2.0 * np.pi),
                "dc_V": voltage.tolist(),
                "height_mm": (height * 1e3).tolist(),
            }
        )
    return lines


def _secular_curve(adjusted: Adjusted, readings: Readings, place: int) -> dict[str, Any]:
    omega = float(np.median(readings.omega))
    amplitude = np.linspace(0.5 * readings.amplitude.min(), 1.25 * readings.amplitude.max(), POINTS)
    log = _readings(amplitude, omega, np.zeros(POINTS), place)
    exact = _predicted(adjusted, "secular", log)
    around = surroundings(adjusted.model.setting, adjusted.xi[None])
    particle = particle_properties(adjusted.model.setting, around, adjusted.theta[None], adjusted.model.sign)
    scaled = scaled_motion(adjusted.model.setting, around, particle, adjusted.theta[None], log)
    free = motion.drag_free_frequency(scaled.drive[0]) * scaled.omega[0] / (2.0 * np.pi)
    return {
        "drive_Hz": omega / (2.0 * np.pi),
        "drive_V": amplitude.tolist(),
        "frequency_Hz": _listed(exact),
        "drag_free_Hz": _listed(free),
    }


def _predicted(adjusted: Adjusted, name: str, log: Readings) -> Array:
    prediction = predict(
        adjusted.model.setting, {name: log}, adjusted.theta[None], adjusted.model.sign, adjusted.xi[None]
    )[name]
    row: Array = prediction.reading[0]
    return row


def _listed(values: Array) -> list[float | None]:
    return [float(one) if np.isfinite(one) else None for one in values]
