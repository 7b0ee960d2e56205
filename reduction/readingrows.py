"""Rows of readings.csv of one session, and the flags that single readings earn."""

from __future__ import annotations

import math
from collections.abc import Iterator, Mapping
from typing import Any

import numpy as np
import pandas as pd

from reduction.methods import ORIGIN, Readings
from reduction.outcome import Outcome
from reduction.preparation import OBSERVED
from reduction.resultrows import readings_used
from reduction.solution import OUTLIER

REYNOLDS_LIMIT = 0.05  # relative shift of a height beyond which it is flagged
DEPARTURE_LIMIT = 0.05  # likewise, by the field's departure from the linear one, where it exceeds u of the height


def flag_readings(outcome: Outcome) -> None:
    """Flag particles with heights beyond the usable range or shifted by their Reynolds number."""
    trap = outcome.campaign.traps[outcome.session.trap]
    for log in OBSERVED:
        readings = outcome.reduced.model.logs.get(log)
        if readings is None:
            continue
        rows = outcome.logs.tables[log]
        line = outcome.reduced.alone.lines.get(log)
        adjusted = None if line is None else line.residual
        for index in range(len(outcome.prepared.names)):
            own = readings.particle == index
            fit = outcome.reduced.fits[log][index]
            if not own.any() or len(fit.residual) != own.sum():
                continue
            for at, residual in zip(np.flatnonzero(own).tolist(), fit.residual.tolist(), strict=True):
                row = int(readings.row[at])
                words = []
                # an error of a shared input, held fixed in the method alone, must not pass for an outlier
                if abs(residual) > OUTLIER and (adjusted is None or abs(adjusted[at]) > OUTLIER):
                    words.append(("outlier_reading", f"{residual:+.1f} standard deviations from its method's fit"))
                if log == "height":
                    words += _height_words(outcome, readings, at, trap.usable_height)
                for word, text in words:
                    outcome.reduced.flags[index].add(word)
                    outcome.reading_words.setdefault((log, row), []).append(word)
                    outcome.flagged.append([log, int(rows["line"].loc[row]), outcome.prepared.names[index], text])


def _height_words(outcome: Outcome, readings: Readings, at: int, usable: float | None) -> list[tuple[str, str]]:
    height = readings.observed[at]
    gain = outcome.session.gain["height"].estimate
    words = []
    if usable is not None and abs(gain * height) > usable:
        words.append(("beyond_usable_height", f"height {gain * height * 1e3:.3g} mm beyond {usable * 1e3:.3g} mm"))
    shift = float(readings.reynolds[at])
    if abs(shift) > REYNOLDS_LIMIT:
        words.append(("finite_reynolds", f"the finite Reynolds number shifts it by {100.0 * shift:+.2g} %"))
    away = float(readings.departure[at])
    from_centre = gain * height - float(outcome.reduced.alone.theta[int(readings.particle[at]), ORIGIN])
    if abs(away) > max(DEPARTURE_LIMIT * abs(from_centre), float(readings.u[at])):
        words.append(
            ("field_departure", f"the field's departure from the linear one shifts it by {away * 1e3:+.2g} mm")
        )
    return words


def reading_rows(outcome: Outcome) -> Iterator[dict[str, Any]]:
    """Rows of readings.csv: every reading of the logs, used or not."""
    for log in OBSERVED:
        if log not in outcome.logs.tables:
            continue
        residuals = _residuals(outcome, log)
        left_out = {
            name: outcome.reduced.fits[log][place].status
            for place, name in enumerate(outcome.prepared.names)
            if log in outcome.reduced.fits and not readings_used(outcome, log, place)
        }
        for index, row in outcome.logs.tables[log].iterrows():
            yield _reading_row(outcome, log, int(str(index)), row, residuals, left_out)


def _residuals(outcome: Outcome, log: str) -> dict[int, tuple[float, float, float, float]]:
    """By row of the log: u, residual of the method alone, the same over u, residual of the adjusted values."""
    readings = outcome.reduced.model.logs.get(log)
    if readings is None:
        return {}
    final = np.full(len(readings), math.nan)
    line = outcome.adjusted.lines.get(log)
    if line is not None:
        rows = {int(row): at for at, row in enumerate(readings.row)}
        own = outcome.adjusted.model.logs[log]
        for at, row in enumerate(own.row):
            final[rows[int(row)]] = own.observed[at] - line.prediction[at]
    found: dict[int, tuple[float, float, float, float]] = {}
    for place, fit in enumerate(outcome.reduced.fits[log]):
        own_rows = np.flatnonzero(readings.particle == place)
        if len(fit.residual) == len(own_rows):
            for at, one, u in zip(own_rows.tolist(), fit.residual.tolist(), fit.u.tolist(), strict=True):
                found[int(readings.row[at])] = (u, one * u, one, float(final[at]))
        else:
            for at in own_rows.tolist():
                found[int(readings.row[at])] = (math.nan, math.nan, math.nan, float(final[at]))
    return found


def _reading_row(
    outcome: Outcome,
    log: str,
    index: int,
    row: pd.Series[Any],
    residuals: Mapping[int, tuple[float, ...]],
    left_out: Mapping[str, str],
) -> dict[str, Any]:
    """One reading: used, flagged and used, excluded by the user, or left out by the reduction, with the status why."""
    words = outcome.reading_words.get((log, index), [])
    excluded = str(row["exclude"])
    if not excluded and row["particle"] in outcome.prepared.excluded:
        reason = outcome.prepared.excluded[row["particle"]]
        excluded = reason if outcome.session.exclude else f"particle: {reason}"
    status = "flagged" if words else "used"
    if excluded:
        status = "excluded"
    elif row["particle"] in left_out:
        status, words = "left_out", [left_out[row["particle"]]]
    u, residual, normalized, adjusted = residuals.get(index, (math.nan,) * 4)
    scale = 1e3 if log == "height" else 1.0
    return {
        "session": outcome.session.id,
        "particle": row["particle"],
        "log": log,
        "line": int(row["line"]),
        "status": status,
        "flags": ";".join(words),
        "exclude": excluded,
        "drive_voltage_peak_V": row["drive_amplitude"],
        "drive_frequency_Hz": row["drive_frequency"],
        "dc_voltage_V": row.get("dc_voltage", math.nan),
        "balance_voltage_V": row.get("balance_voltage", math.nan),
        "secular_frequency_Hz": row.get("secular_frequency", math.nan),
        "height_mm": row.get("height", math.nan) * 1e3,
        "time_s": row["time"],
        "u_reading": u * scale,
        "residual": residual * scale,
        "normalized_residual": normalized,
        "adjusted_residual": adjusted * scale,
    }
