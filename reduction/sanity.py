"""Whether a result is physically sensible: notes for the reader, never a rejection."""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np
from scipy import constants

from reduction import motion
from reduction.logs import Logs
from reduction.methods import DRIFT, particle_properties, scaled_motion, surroundings
from reduction.outcome import CHARGE, MASS, Outcome

NEIGHBOUR_LIMIT = 0.01  # force of a neighbour over weight beyond which the balance is flagged
FASTEST_DRIFT = 0.05  # relative, per hour: ten times what some days of decay make


def notes_of(outcome: Outcome) -> Iterator[tuple[int, str, str]]:
    """Particle, flag and text of everything that does not look sensible at the reported values."""
    yield from _neighbours(outcome)
    yield from _outside_window(outcome)
    yield from _coarse(outcome)
    yield from _fast_drift(outcome)


def _neighbours(outcome: Outcome) -> Iterator[tuple[int, str, str]]:
    """Estimated force of a neighbour of the same charge, q^2 / (4 pi eps0 r^2), over the particle's weight."""
    table: Logs = outcome.logs
    if "balance" not in table.tables:
        return
    balance = table.tables["balance"]
    for index, place in outcome.place.items():
        name = outcome.prepared.names[index]
        own = balance[(balance["particle"] == name) & (balance["exclude"] == "") & (balance["particles_in_trap"] > 1)]
        if not len(own):
            continue
        nearest = float(own["nearest"].min())
        charge, mass = outcome.results.value[place, CHARGE], outcome.results.value[place, MASS]
        if not np.isfinite(nearest) or not np.isfinite(charge):
            yield index, "neighbours", "others were in the trap, at a distance or with a charge that is not known"
            continue
        crowd = float(own["particles_in_trap"].max()) - 1.0
        force = charge**2 / (4.0 * np.pi * constants.epsilon_0 * nearest**2)
        bias = crowd * force / (mass * constants.g)
        if bias > NEIGHBOUR_LIMIT:
            yield index, "neighbours", f"a neighbour of equal charge could bias the balance by {100.0 * bias:.2g} %"


def _outside_window(outcome: Outcome) -> Iterator[tuple[int, str, str]]:
    """Drives at which a particle of the reported charge and drag would not have been held."""
    adjusted = outcome.adjusted
    setting = adjusted.model.setting
    for log in ("balance", "height", "secular"):
        readings = adjusted.model.logs.get(log)
        around = surroundings(setting, adjusted.xi[None])
        if readings is None or "ac_gradient" not in around.values:
            continue
        particle = particle_properties(setting, around, adjusted.theta[None], adjusted.model.sign)
        scaled = scaled_motion(setting, around, particle, adjusted.theta[None], readings)
        code = motion.regime(scaled.drive[0], scaled.drag[0], scaled.added_mass[0], scaled.history[0])
        lost = np.isin(code, (motion.UNSTABLE, motion.PAST_MAXIMUM))
        for index, place in outcome.place.items():
            count = int((lost & (readings.particle == place)).sum())
            if count and outcome.sure[place].all():
                text = f"{count} readings of {log}.csv have a drive at which the particle would not have been held"
                yield index, "outside_window", text


def _coarse(outcome: Outcome) -> Iterator[tuple[int, str, str]]:
    """Logs whose readings come in steps that the stated u does not allow for: step > 3.5 u, its sd beyond u."""
    for log, readings in outcome.adjusted.model.logs.items():
        if log == "diameter" or log in outcome.reduced.scatter:
            continue
        for index, place in outcome.place.items():
            own = readings.particle == place
            steps = np.diff(np.unique(np.round(readings.observed[own], 12)))
            if len(steps) and steps.min() > np.sqrt(12.0) * readings.u[own].max() and _stepped(steps):
                yield index, "resolution", f"{log}.csv is written in steps coarser than its stated uncertainty"


def _stepped(steps: np.ndarray) -> bool:
    """Whether all differences are whole multiples of the smallest."""
    ratio = steps / steps.min()
    return len(steps) > 2 and bool(np.abs(ratio - np.round(ratio)).max() < 1e-3)


def _fast_drift(outcome: Outcome) -> Iterator[tuple[int, str, str]]:
    """Charge drifts faster than charge leaves a particle in air, days to weeks (arXiv 2206.06848)."""
    for index, place in outcome.place.items():
        if outcome.reduced.model.drifting[index]:
            per_hour = 3600.0 * float(outcome.adjusted.theta[place, DRIFT])
            if abs(per_hour) > FASTEST_DRIFT:
                text = (
                    f"its charge drifts by {100.0 * per_hour:+.2g} % an hour, faster than charge leaves a particle in "
                    "air: suspect evaporation, a drifting supply, an ioniser or ultraviolet light"
                )
                yield index, "charge_drift", text
