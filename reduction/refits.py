"""Simulated readings refitted: the reduction of a particle repeated with new readings and new estimates of inputs.

Every trial draws new readings about the adjusted prediction (noise of the reading, of its dc voltage) and a new prior
estimate of every shared input, in its shape, about the adjusted value; a particle's shape factor is drawn from its
species anew, its diameter kept. Weights and decisions - what is used, flagged, drifting - stay as they were.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from contextlib import suppress
from dataclasses import replace
from typing import Any, cast

import numpy as np

from reduction.adjustment import Adjusted, adjust_alone, adjust_together
from reduction.budget import OwnSize, result_logarithms
from reduction.methods import LN_GAMMA, SHAPE, Array, Indices, Readings, Setting, predict, surroundings
from reduction.normalequations import Model
from reduction.shapes import draws, spread_factor, stream

BATCH = 250  # trials adjusted at a time, to bound memory; each trial is adjusted by itself


class Trials:
    """Random numbers of all trials, by name: of an input, of a particle's log, of a particle's shape."""

    def __init__(
        self, setting: Setting, session: str, names: Sequence[str], log_dof: Mapping[str, float], trials: int, seed: int
    ) -> None:
        self.session, self.names, self.trials, self.seed = session, names, trials, seed
        uncertain = [setting.inputs[one] for one in setting.uncertain]
        self.inputs = np.zeros((trials, len(uncertain)))
        for column, one in enumerate(uncertain):
            self.inputs[:, column] = draws(one.quantity, seed=seed, name=one.name, trials=trials)
        self.factors = {
            log: spread_factor(dof, seed=seed, name=f"session/{session}/scatter/{log}", trials=trials)
            for log, dof in log_dof.items()
        }
        self.shape = np.stack([self._normal(name, "shape", 1)[:, 0] for name in names], axis=1)

    def _normal(self, name: str, what: str, count: int) -> Array:
        return stream(self.seed, f"refit/{self.session}/{name}/{what}").standard_normal((self.trials, count))

    def noise(self, log: str, particle: Readings, name: str) -> tuple[Array, Array]:
        """Noise of a particle's readings of one log and of their dc voltages, each (trials, n), in their units."""
        factor = self.factors.get(log, np.ones(self.trials))[:, None]
        reading = factor * self._normal(name, log, len(particle)) * particle.u
        return reading, self._normal(name, f"{log}/dc_voltage", len(particle)) * particle.u_voltage

    def size(self, name: str) -> Array:
        """Noise of a diameter that alone gives the size, (trials,), in units of its u."""
        return self._normal(name, "size", 1)[:, 0]


def moved(setting: Setting, xi: Array, z: Array) -> Setting:
    """The same setting with new estimates of the shared inputs, z times their u off the adjusted values xi.

    With z (N, K) every particle gets estimates of its own, which broadcast through the equations as numbers do.
    """
    inputs = list(setting.inputs)
    for column, one in enumerate(setting.uncertain):
        quantity = inputs[one].quantity
        estimate = quantity.estimate + quantity.u * (xi[column] + z[..., column])
        inputs[one] = replace(inputs[one], quantity=replace(quantity, estimate=cast(Any, estimate)))
    return replace(setting, inputs=tuple(inputs))


def redrawn_shape(setting: Setting, theta: Array, xi: Array, deviation: Array) -> Array:
    """Unknowns (N, 5) of the same diameters with other deviations of the shape factor; the drag rate goes along.

    gamma' = gamma chi' / chi
    """
    values = surroundings(setting, xi[None, None, :]).values
    base = np.array([float(values[f"shape_factor:{name}"][0, 0]) for name in setting.species])
    spread = np.where(setting.has_density, setting.shape_spread, 0.0)
    found = theta.copy()
    found[:, SHAPE] = np.where(spread > 0.0, deviation, theta[:, SHAPE])
    ratio = (base + spread * found[:, SHAPE]) / (base + spread * theta[:, SHAPE])
    found[:, LN_GAMMA] += np.log(ratio)
    return found


def _deviations(
    setting: Setting, estimated: Adjusted, truth: Array, xi: Array, size: OwnSize | None, off: Array
) -> Array:
    """Logarithms of the results as estimated less those of the truth, (N, 6)."""
    found = result_logarithms(
        estimated.model.setting,
        surroundings(estimated.model.setting, estimated.xi[None]),
        estimated.theta[None],
        size,
        off[None],
    )[0]
    true = result_logarithms(setting, surroundings(setting, xi[None, None, :]), truth[None], size)[0]
    difference: Array = np.where(estimated.settled[:, None], found - true, np.nan)
    return difference


def refits_alone(adjusted: Adjusted, index: int, trials: Trials, size: OwnSize | None = None) -> Array:
    """Logarithms of the results of refitted trials less those they were simulated with, each trial adjusted alone.

    Parameters
    ----------
    adjusted : Adjusted
        Particles adjusted alone.
    index : int
        Which particle.
    trials : Trials
        Drawn for that particle alone.
    size : OwnSize, optional
        Of that particle, where the size comes from the diameter method alone.

    Returns
    -------
    ndarray, shape (trials, 6)
        nan where the adjustment did not settle.
    """
    model = adjusted.model.subset(np.array([index], dtype=np.intp))
    theta, xi = adjusted.theta[index], adjusted.xi[index if len(adjusted.xi) > 1 else 0]
    noise = {name: trials.noise(name, log, trials.names[0]) for name, log in model.logs.items()}
    off = trials.size(trials.names[0]) if size is not None else np.zeros(trials.trials)

    def adjusted_again(which: Indices) -> Array:
        count = len(which)
        copies = _copies(model, count)
        truth = redrawn_shape(copies.setting, np.repeat(theta[None], count, axis=0), xi, -trials.shape[which, 0])
        of_batch = {
            name: (reading[which].ravel(), voltage[which].ravel()) for name, (reading, voltage) in noise.items()
        }
        simulated = replace(_read(copies, truth, xi, of_batch), setting=moved(copies.setting, xi, trials.inputs[which]))
        many, shift = None, np.zeros(count)
        if size is not None:
            many = OwnSize(*(np.repeat(one, count) for one in (size.diameter, size.u, size.lot)))
            shift = many.u * off[which]
        try:
            return _deviations(copies.setting, adjust_alone(simulated, truth, near=True), truth, xi, many, shift)
        except np.linalg.LinAlgError:  # an impossible draw, such as a negative density: find it and leave it out
            if count == 1:
                return np.full((1, 6), np.nan)
            return np.concatenate([adjusted_again(half) for half in np.array_split(which, 2)])

    batches = [np.arange(first, min(first + BATCH, trials.trials)) for first in range(0, trials.trials, BATCH)]
    with np.errstate(all="ignore"):
        return np.concatenate([adjusted_again(which) for which in batches])


def refits_together(adjusted: Adjusted, index: int, trials: Trials, size: OwnSize | None = None) -> Array:
    """The same with all particles of the session simulated and adjusted together in every trial.

    Parameters
    ----------
    adjusted : Adjusted
        Particles of a session adjusted together.
    index : int
        Which particle to report.
    trials : Trials
        Drawn for all particles of the session.
    size : OwnSize, optional
        Of all particles, where sizes come from the diameter method alone.

    Returns
    -------
    ndarray, shape (trials, 6)
        nan where the adjustment did not settle.
    """
    model, xi = adjusted.model, adjusted.xi[0]
    by_log: dict[str, tuple[Array, Array]] = {}
    for name, log in model.logs.items():
        own = [trials.noise(name, log.of(one), particle) for one, particle in enumerate(trials.names)]
        by_log[name] = (
            np.concatenate([one[0] for one in own], axis=1),
            np.concatenate([one[1] for one in own], axis=1),
        )
    off = np.zeros((trials.trials, model.particles))
    if size is not None:
        off = np.stack([trials.size(name) for name in trials.names], axis=1) * size.u
    found = np.full((trials.trials, 6), np.nan)
    for trial in range(trials.trials):
        truth = redrawn_shape(model.setting, adjusted.theta, xi, -trials.shape[trial])
        simulated = _read(model, truth, xi, {name: (a[trial], b[trial]) for name, (a, b) in by_log.items()})
        simulated = replace(simulated, setting=moved(model.setting, xi, trials.inputs[trial]))
        with np.errstate(all="ignore"), suppress(np.linalg.LinAlgError):  # an impossible draw stays nan
            estimated = adjust_together([simulated], [truth])[0]
            found[trial] = _deviations(model.setting, estimated, truth, xi, size, off[trial])[index]
    return found


def _copies(model: Model, count: int) -> Model:
    """A model of one particle as so many particles alike."""
    setting = replace(
        model.setting,
        species=model.setting.species * count,
        shape_spread=np.repeat(model.setting.shape_spread, count),
        has_density=np.repeat(model.setting.has_density, count),
    )
    logs = {}
    for name, log in model.logs.items():
        tiled = {field: np.tile(getattr(log, field), count) for field in Readings.__dataclass_fields__}
        logs[name] = Readings(**tiled | {"particle": np.repeat(np.arange(count, dtype=np.intp), len(log))})
    return Model(setting, logs, np.repeat(model.sign, count), np.repeat(model.drifting, count))


def _read(model: Model, theta: Array, xi: Array, noise: Mapping[str, tuple[Array, Array]]) -> Model:
    """The model with readings about what the particles at theta would give, the noise added."""
    with np.errstate(all="ignore"):
        predicted = predict(model.setting, model.logs, theta[None], model.sign, xi[None, None, :])
    logs = dict(model.logs)
    for name, prediction in predicted.items():
        reading, voltage = noise[name]
        log = logs[name]
        logs[name] = replace(log, observed=prediction.reading[0] + reading, voltage=log.voltage + voltage)
    return replace(model, logs=logs)
