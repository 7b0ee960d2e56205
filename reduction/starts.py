"""Where a fit begins: a scan over charge-to-mass ratio and drag rate that finds every basin worth trying."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, replace

import numpy as np

from reduction import motion
from reduction.fits import BAD_READING, balance_start, drag_rate_grid
from reduction.methods import (
    LN_GAMMA,
    LN_S,
    ORIGIN,
    Array,
    Flags,
    Readings,
    Setting,
    effective_u,
    particle_properties,
    predict,
    scaled_motion,
    surroundings,
)
from reduction.normalequations import Model

BASINS = 3  # starts kept at most
APART = 0.8  # in ln s or ln gamma between two starts worth trying both
SMALLEST_DRIVE, LARGEST_DRIVE = 2e-4, 12.0  # scaled drive h that the scan spans where no balance fixes it


@dataclass(frozen=True)
class Start:
    """One place to begin: sign, theta (5,), chi-square there, and logs with readings the motion cannot give."""

    sign: float
    theta: Array
    chi_square: float
    impossible: tuple[str, ...]


def starts_of(model: Model, index: int) -> list[Start]:
    """Starts of one particle, best first: the lowest point of the scan and what lies well apart from it."""
    setting = model.setting.of(index)
    logs = {name: log.of(index) for name, log in model.logs.items()}
    logs = {name: log for name, log in logs.items() if len(log)}
    gamma = drag_rate_grid(setting)
    points: list[tuple[float, Array]] = []
    if "balance" in logs:
        sign, ln_s = balance_start(setting, logs["balance"])
        points = [(sign, _grid(np.array([ln_s]), gamma))]
    elif any(name in logs for name in ("height", "secular")):
        signs = (1.0, -1.0) if "height" in logs else (1.0,)
        points = [(sign, _grid(_ln_s_range(setting, logs), gamma)) for sign in signs]
    else:
        return []
    found = []
    for sign, grid in points:
        theta, chi_square, impossible = _scan(setting, logs, grid, sign)
        for place in _local_minima(chi_square, len(gamma)):
            bad = tuple(name for name, count in impossible.items() if count[place])
            found.append(Start(sign, theta[place], float(chi_square[place]), bad))
    found.sort(key=lambda one: one.chi_square)
    kept: list[Start] = []
    for one in found:
        if not np.isfinite(one.chi_square):
            break
        near = any(one.sign == other.sign and np.abs(one.theta[:2] - other.theta[:2]).max() < APART for other in kept)
        if not near:
            kept.append(one)
        if len(kept) == BASINS:
            break
    return kept


def _local_minima(chi_square: Array, columns: int) -> list[int]:
    """Places of a flattened grid that no neighbour undercuts."""
    grid = chi_square.reshape(-1, columns)
    walled = np.pad(grid, 1, constant_values=np.inf)
    lowest = np.ones(grid.shape, bool)
    for down in (0, 1, 2):
        for right in (0, 1, 2):
            lowest &= grid <= walled[down : down + grid.shape[0], right : right + grid.shape[1]]
    return np.flatnonzero(lowest & np.isfinite(grid)).tolist()


def _grid(ln_s: Array, ln_gamma: Array) -> Array:
    """Every pair of the two, as theta (G, 5)."""
    theta = np.zeros((len(ln_s) * len(ln_gamma), 5))
    theta[:, LN_S], theta[:, LN_GAMMA] = np.repeat(ln_s, len(ln_gamma)), np.tile(ln_gamma, len(ln_s))
    return theta


def _ln_s_range(setting: Setting, logs: Mapping[str, Readings], count: int = 48) -> Array:
    """Ln of charge-to-mass ratios that put the scaled drive of the readings within reach."""
    around = surroundings(setting, np.zeros((1, 1, len(setting.uncertain))))
    per_s = np.concatenate(
        [log.amplitude / (2.0 * log.omega**2) for name, log in logs.items() if name in ("height", "secular")]
    )
    per_s = per_s * around.values["ac_gradient"][0, 0]
    return np.log(np.geomspace(SMALLEST_DRIVE / per_s.max(), LARGEST_DRIVE / per_s.max(), count))


def _tiled(log: Readings, times: int) -> Readings:
    """The same readings for each of several trial particles."""
    fields = {name: np.tile(getattr(log, name), times) for name in log.__dataclass_fields__}
    return replace(Readings(**fields), particle=np.repeat(np.arange(times), len(log)))


def _scan(
    setting: Setting, logs: Mapping[str, Readings], theta: Array, sign: float
) -> tuple[Array, Array, dict[str, Array]]:
    """Theta with the best height origin, chi-square, and readings the motion cannot give, at each grid point."""
    count = len(theta)
    many = replace(
        setting,
        species=setting.species * count,
        shape_spread=np.tile(setting.shape_spread, count),
        has_density=np.tile(setting.has_density, count),
    )
    tiled = {name: _tiled(log, count) for name, log in logs.items()}
    xi = np.zeros((1, 1, len(setting.uncertain)))
    signs = np.full(count, sign)
    total, impossible = np.zeros(count), {}
    theta = theta.copy()
    for name, prediction in predict(many, tiled, theta[None], signs, xi).items():
        log = tiled[name]
        u = effective_u(log, prediction)
        residual = (log.observed - prediction.reading[0]).reshape(count, -1)
        weight = (1.0 / u**2).reshape(count, -1)
        if name == "height":
            theta[:, ORIGIN] = (weight * residual).sum(axis=1) / weight.sum(axis=1)
            residual = residual - theta[:, ORIGIN][:, None]
        square = residual**2 * weight
        bad = ~np.isfinite(square)
        if name == "height":
            bad = bad | _beyond_branch(many, tiled[name], theta, signs, xi).reshape(count, -1)
        impossible[name] = bad.sum(axis=1)
        total += np.where(bad, BAD_READING**2, np.minimum(square, BAD_READING**2)).sum(axis=1)
    return theta, total, impossible


def _beyond_branch(setting: Setting, log: Readings, theta: Array, sign: Array, xi: Array) -> Flags:
    """Readings whose drive lies beyond the maximum of K, where the first stable branch ends."""
    around = surroundings(setting, xi)
    particle = particle_properties(setting, around, theta[None], sign)
    scaled = scaled_motion(setting, around, particle, theta[None], log)
    drive, drag, added, history = (one[0] for one in (scaled.drive, scaled.drag, scaled.added_mass, scaled.history))
    return ~motion.on_branch(drive, drag, added, history)
