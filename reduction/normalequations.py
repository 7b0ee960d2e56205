"""What the methods hand over to an adjustment: normal equations in private unknowns and shared inputs.

For each particle J'WJ, J'Wr and the cross terms with the deviations xi of the shared inputs, summed over its readings.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace

import numpy as np

from reduction.methods import (
    DRIFT,
    LN_GAMMA,
    LN_S,
    ORIGIN,
    PRIVATE,
    SHAPE,
    Array,
    Flags,
    Indices,
    Linearised,
    Readings,
    Setting,
    effective_u,
    linearise,
    predict,
)

RIDGE = 1e-8  # information added to ln s and ln gamma: u of what is open stays finite (1e4) and is reported as open
SINGULAR_SQUARE = 1e-14  # least eigenvalue of a scaled normal matrix that is inverted


@dataclass(frozen=True)
class Model:
    """Readings of one session, ready to be adjusted."""

    setting: Setting
    logs: Mapping[str, Readings]
    sign: Array  # (N,)
    drifting: Flags  # (N,)

    @property
    def particles(self) -> int:
        """Number of particles."""
        return len(self.sign)

    @property
    def active(self) -> Flags:
        """Which private unknowns of each particle are free, (N, 5)."""
        free = np.zeros((self.particles, len(PRIVATE)), bool)
        free[:, LN_S] = free[:, LN_GAMMA] = True
        height = self.logs.get("height")
        if height is not None:
            free[np.unique(height.particle), ORIGIN] = True
        free[:, DRIFT] = self.drifting
        free[:, SHAPE] = (self.setting.shape_spread > 0.0) & self.setting.has_density
        return free

    def subset(self, indices: Indices) -> Model:
        """Only the given particles, renumbered in the order given."""
        place = np.full(self.particles, -1)
        place[indices] = np.arange(len(indices))
        logs = {}
        for name, log in self.logs.items():
            kept = log.select(np.asarray(place[log.particle] >= 0))
            renumbered = replace(kept, particle=place[kept.particle])
            logs[name] = renumbered.select(np.argsort(renumbered.particle, kind="stable"))
        setting = replace(
            self.setting,
            species=tuple(self.setting.species[one] for one in indices),
            shape_spread=self.setting.shape_spread[indices],
            has_density=self.setting.has_density[indices],
        )
        return Model(setting, logs, self.sign[indices], self.drifting[indices])

    def without(self, method: str) -> Model:
        """The same without one method."""
        return replace(self, logs={name: log for name, log in self.logs.items() if name != method})


@dataclass(frozen=True)
class Normal:
    """Normal equations of one log by particle: A (N, 5, 5), B (N, 5, K), C (N, K, K), g (N, 5), f (N, K)."""

    private: Array
    cross: Array
    shared: Array
    gradient: Array
    shared_gradient: Array
    chi_square: Array
    readings: Indices


def normal_equations(log: Readings, line: Linearised, particles: int, active: Flags) -> Normal:
    """J'WJ, J'Wr and the cross terms with the shared inputs, summed over each particle's readings."""
    jacobian = np.concatenate([line.private * active[log.particle], line.shared], axis=1)
    width = jacobian.shape[1]
    square, gradient = np.zeros((particles, width, width)), np.zeros((particles, width))
    chi_square = np.zeros(particles)
    bounds = np.searchsorted(log.particle, np.arange(particles + 1))
    readings = np.diff(bounds)
    residuals = np.nan_to_num(line.residual)  # a missing one has no slope either
    for number in np.unique(readings[readings > 0]):
        alike = np.flatnonzero(readings == number)
        at = bounds[alike][:, None] + np.arange(number)
        rows, residual = jacobian[at], residuals[at]
        turned = np.swapaxes(rows, 1, 2)
        square[alike], gradient[alike] = turned @ rows, (turned @ residual[:, :, None])[:, :, 0]
        chi_square[alike] = (residual**2).sum(axis=1)
    count = active.shape[1]
    return Normal(
        square[:, :count, :count],
        square[:, :count, count:],
        square[:, count:, count:],
        gradient[:, :count],
        gradient[:, count:],
        chi_square,
        readings,
    )


def evaluate(model: Model, theta: Array, xi: Array) -> tuple[dict[str, Linearised], dict[str, Normal]]:
    """Linearised logs and their normal equations at theta (N, 5) and xi (N or 1, K)."""
    lines = lines_of(model, theta, xi)
    return lines, normals_of(model, lines)


def lines_of(model: Model, theta: Array, xi: Array) -> dict[str, Linearised]:
    """The logs linearised at theta (N, 5) and xi (N or 1, K), without what has no slope there."""
    found = linearise(model.setting, model.logs, theta, model.sign, xi, private=free_unknowns(model))
    return {name: finite(line) for name, line in found.items()}


def free_unknowns(model: Model) -> list[int]:
    """Private unknowns that are free in any particle."""
    return [int(one) for one in np.flatnonzero(model.active.any(axis=0))]


def normals_of(model: Model, lines: Mapping[str, Linearised]) -> dict[str, Normal]:
    """Normal equations of each log."""
    active = model.active
    return {name: normal_equations(model.logs[name], line, model.particles, active) for name, line in lines.items()}


def joined(lines: Sequence[Linearised]) -> Linearised:
    """Lines of blocks of particles, one after another."""
    names = Linearised.__dataclass_fields__
    return Linearised(**{name: np.concatenate([getattr(line, name) for line in lines]) for name in names})


def finite(line: Linearised) -> Linearised:
    """A reading with no slope at the edge of a branch constrains nothing this round; its residual still counts."""
    edge = np.asarray(~(np.isfinite(line.private).all(axis=1) & np.isfinite(line.shared).all(axis=1)))
    if not edge.any():
        return line
    return replace(
        line, private=np.where(edge[:, None], 0.0, line.private), shared=np.where(edge[:, None], 0.0, line.shared)
    )


def line_cost(model: Model, theta: Array, lines: Mapping[str, Linearised]) -> Array:
    """Chi-square of the readings by particle at the point of linearisation; infinite where the motion gives nothing."""
    cost = np.zeros(model.particles)
    for name, line in lines.items():
        square = np.where(np.isfinite(line.residual), line.residual, np.inf) ** 2
        cost += np.bincount(model.logs[name].particle, square, model.particles)
    return cost + theta[:, SHAPE] ** 2


def data_cost(model: Model, theta: Array, xi: Array) -> Array:
    """Chi-square of the readings by particle, u with the dc voltage's part; infinite where the motion gives nothing."""
    cost = np.zeros(model.particles)
    for name, prediction in predict(model.setting, model.logs, theta[None], model.sign, xi[None]).items():
        log = model.logs[name]
        residual = (log.observed - prediction.reading[0]) / effective_u(log, prediction)
        square = np.where(np.isfinite(residual), residual, np.inf) ** 2
        cost += np.bincount(log.particle, square, model.particles)
    return cost + theta[:, SHAPE] ** 2


def residuals_at(model: Model, theta: Array, xi: Array, lines: Mapping[str, Linearised]) -> dict[str, Array]:
    """Residuals at theta (N, 5) and xi (N or 1, K) over the u of the lines; 0 where the motion gives nothing."""
    found = predict(model.setting, model.logs, theta[None], model.sign, xi[None])
    return {
        name: np.nan_to_num((model.logs[name].observed - prediction.reading[0]) / lines[name].u)
        for name, prediction in found.items()
    }


def assemble(model: Model, theta: Array, normals: Mapping[str, Normal]) -> tuple[Array, Array, Array, Array, Array]:
    """Sum of the methods' normal equations, with the priors of the private unknowns."""
    width = len(model.setting.uncertain)
    count = model.particles
    private, cross = np.zeros((count, 5, 5)), np.zeros((count, 5, width))
    shared, gradient, shared_gradient = np.zeros((count, width, width)), np.zeros((count, 5)), np.zeros((count, width))
    for normal in normals.values():
        private += normal.private
        cross += normal.cross
        shared += normal.shared
        gradient += normal.gradient
        shared_gradient += normal.shared_gradient
    active = model.active
    diagonal = np.where(active, 0.0, 1.0)
    diagonal[:, LN_S] += RIDGE
    diagonal[:, LN_GAMMA] += RIDGE
    diagonal[:, SHAPE] += np.where(active[:, SHAPE], 1.0, 0.0)
    gradient[:, SHAPE] -= np.where(active[:, SHAPE], theta[:, SHAPE], 0.0)
    private[:, np.arange(5), np.arange(5)] += diagonal
    return private, cross, shared, gradient, shared_gradient


def inverse_of(square: Array) -> Array:
    """Inverses of symmetric normal matrices, shape (..., n, n), scaled to a unit diagonal first.

    A direction that the readings leave open gets a large variance instead of none, and no step.
    """
    index = np.arange(square.shape[-1])
    size = np.sqrt(np.maximum(square[..., index, index], 1e-30))
    values, vectors = np.linalg.eigh(square / (size[..., :, None] * size[..., None, :]))
    reciprocal = vectors / np.maximum(values, SINGULAR_SQUARE)[..., None, :]
    inverse: Array = (reciprocal @ np.swapaxes(vectors, -1, -2)) / (size[..., :, None] * size[..., None, :])
    return inverse
