"""All methods adjusted together: generalised least squares with the covariance that shared inputs cause.

Each method hands over its normal equations J'WJ and J'Wr in the private unknowns of a particle and in the deviations
xi of the shared inputs, which carry a unit normal prior. Eliminating the private unknowns of every particle (a Schur
complement, the normal-equation form of Woodbury's identity) keeps the cost linear in the number of particles. The
equations are renewed at the adjusted values until settled.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field, replace

import numpy as np

from reduction.inputs import Input
from reduction.methods import (
    DRIFT,
    LN_GAMMA,
    LN_S,
    ORIGIN,
    PRIVATE,
    SHAPE,
    SINGULAR,
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
ROUNDS = 60
SETTLED = 1e-6  # of u: settled when the next step promises to lower chi-square by less than its square
LONGEST = 1.0  # longest step in a logarithm
FLAT = 1e-3  # a valley along which chi-square would fall by less than the square of this is not walked to its end
SETTLED_TOGETHER = 1e-4  # the same for a group, times the root of its particles, over which rounding adds up
FARTHEST = 4.0  # longest step of a shared input, in its u, while a particle is adjusted alone
BLOCK = 48  # particles linearised at a time, so that what is needed stays in the cache
CLOSE = 30.0  # root of the fall in chi-square promised, below which successive steps are compared
FARTHEST_TOGETHER = 40.0  # the same for a group


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
    chi_square, readings = np.zeros(particles), np.zeros(particles, np.intp)
    bounds = np.searchsorted(log.particle, np.arange(particles + 1)).tolist()
    residuals = np.nan_to_num(line.residual)  # a missing one has no slope either
    for one in range(particles):
        part = slice(bounds[one], bounds[one + 1])
        rows, residual = jacobian[part], residuals[part]
        square[one], gradient[one] = rows.T @ rows, rows.T @ residual
        chi_square[one], readings[one] = residual @ residual, len(residual)
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


@dataclass(frozen=True)
class Adjusted:
    """Adjusted unknowns of the particles of one session.

    theta (N, 5) and xi (N or 1, K); the covariance of particles i and j is P_i [i = j] + S_i C S_j' with
    `private` P (N, 5, 5), `response` S (N, 5, K) and `shared` C (N or 1, K, K). C splits in what the priors cause,
    `from_priors` F F' with F (N or 1, K, G) over the inputs `group` of all that was adjusted together, and what the
    readings cause, `from_readings` F F' with F (N or 1, K, R). Normal equations by log go along.
    """

    model: Model
    theta: Array
    xi: Array
    private: Array
    response: Array
    shared: Array
    from_priors: Array
    from_readings: Array
    group: tuple[Input, ...]
    normals: Mapping[str, Normal]
    lines: Mapping[str, Linearised]
    cost: Array  # chi-square with the priors' share, (N,) alone and (1,) otherwise
    settled: Flags  # (N,)

    @property
    def covariance(self) -> Array:
        """Covariance of each particle's private unknowns, (N, 5, 5)."""
        spread: Array = self.private + self.response @ self.shared @ np.swapaxes(self.response, 1, 2)
        return spread


def _evaluate(model: Model, theta: Array, xi: Array) -> tuple[dict[str, Linearised], dict[str, Normal]]:
    lines = _lines(model, theta, xi)
    return lines, _normals(model, lines)


def _lines(model: Model, theta: Array, xi: Array) -> dict[str, Linearised]:
    return {name: _finite(line) for name, line in linearise(model.setting, model.logs, theta, model.sign, xi).items()}


def _normals(model: Model, lines: Mapping[str, Linearised]) -> dict[str, Normal]:
    active = model.active
    return {name: normal_equations(model.logs[name], line, model.particles, active) for name, line in lines.items()}


def _joined(lines: Sequence[Linearised]) -> Linearised:
    """Lines of blocks of particles, one after another."""
    names = Linearised.__dataclass_fields__
    return Linearised(**{name: np.concatenate([getattr(line, name) for line in lines]) for name in names})


def _finite(line: Linearised) -> Linearised:
    """A reading with no slope at the edge of a branch constrains nothing this round; its residual still counts."""
    edge = np.asarray(~(np.isfinite(line.private).all(axis=1) & np.isfinite(line.shared).all(axis=1)))
    if not edge.any():
        return line
    return replace(
        line, private=np.where(edge[:, None], 0.0, line.private), shared=np.where(edge[:, None], 0.0, line.shared)
    )


def _line_cost(model: Model, theta: Array, lines: Mapping[str, Linearised]) -> Array:
    """Chi-square of the readings by particle at the point of linearisation; infinite where the motion gives nothing."""
    cost = np.zeros(model.particles)
    for name, line in lines.items():
        square = np.where(np.isfinite(line.residual), line.residual, np.inf) ** 2
        cost += np.bincount(model.logs[name].particle, square, model.particles)
    return cost + theta[:, SHAPE] ** 2


def _data_cost(model: Model, theta: Array, xi: Array) -> Array:
    """Chi-square of the readings by particle, u with the dc voltage's part; infinite where the motion gives nothing."""
    cost = np.zeros(model.particles)
    for name, prediction in predict(model.setting, model.logs, theta[None], model.sign, xi[None]).items():
        log = model.logs[name]
        residual = (log.observed - prediction.reading[0]) / effective_u(log, prediction)
        square = np.where(np.isfinite(residual), residual, np.inf) ** 2
        cost += np.bincount(log.particle, square, model.particles)
    return cost + theta[:, SHAPE] ** 2


def _assemble(model: Model, theta: Array, normals: Mapping[str, Normal]) -> tuple[Array, Array, Array, Array, Array]:
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


def _shortened(step: Array) -> Array:
    """Factor that keeps the longest step in ln s, ln gamma and, behind the private ones, xi in bounds, by particle."""
    longest = np.abs(step[:, [LN_S, LN_GAMMA]]).max(axis=1)
    longest = np.maximum(longest, np.abs(step[:, 5:]).max(axis=1, initial=0.0) * LONGEST / FARTHEST)
    factor: Array = np.minimum(1.0, LONGEST / np.maximum(longest, 1e-300))
    return factor


def _damped(square: Array, damping: Array) -> Array:
    """Square matrices with their diagonals raised by the damping, by particle."""
    raised = square.copy()
    index = np.arange(square.shape[1])
    raised[:, index, index] *= 1.0 + damping[:, None]
    return raised


def adjust_alone(model: Model, theta: Array, *, near: bool = False) -> Adjusted:
    """Each particle adjusted with its own readings and the shared inputs' priors only.

    Parameters
    ----------
    model : Model
        Readings of one session.
    theta : ndarray, shape (N, 5)
        Where to start.
    near : bool
        Whether the start is close to the solution, so that full steps can be tried at once.

    Returns
    -------
    Adjusted
        With xi, C and the cost by particle.
    """
    count, width = model.particles, len(model.setting.uncertain)
    theta, xi = theta.copy(), np.zeros((count, width))
    damping, settled = np.full(count, 1e-10 if near else 1e-3), np.zeros(count, bool)
    lines, normals = _evaluate(model, theta, xi)
    cost = _line_cost(model, theta, lines) + (xi**2).sum(axis=1)
    for _ in range(ROUNDS):
        square, gradient = _joint(model, theta, xi, normals)
        step = (inverse_of(_damped(square, damping)) @ gradient[:, :, None])[:, :, 0]
        step *= np.where(settled, 0.0, _shortened(step))[:, None]
        trial, trial_xi = theta + step[:, :5], xi + step[:, 5:]
        trial_cost = _data_cost(model, trial, trial_xi) + (trial_xi**2).sum(axis=1)
        better = trial_cost <= cost * (1.0 + 1e-12) + 1e-12
        theta, xi = np.where(better[:, None], trial, theta), np.where(better[:, None], trial_xi, xi)
        damping = np.where(better, np.maximum(damping * 0.1, 1e-12), damping * 10.0)
        size = np.sqrt(np.abs((gradient * step).sum(axis=1)))
        settled |= (better & (size < SETTLED)) | (damping > 1e12)
        lines, normals = _evaluate(model, theta, xi)
        cost = _line_cost(model, theta, lines) + (xi**2).sum(axis=1)
        if settled.all():
            break
    settled |= (size < FLAT) & np.isfinite(cost)
    private, cross, shared, _, _ = _assemble(model, theta, normals)
    inverse = inverse_of(private)
    response = -inverse @ cross
    spread = _posterior(shared + np.swapaxes(cross, 1, 2) @ response)
    group = tuple(model.setting.inputs[one] for one in model.setting.uncertain)
    return Adjusted(
        model,
        theta,
        xi,
        inverse,
        response,
        spread,
        spread,
        _readings_root(spread),
        group,
        normals,
        lines,
        cost,
        settled & np.isfinite(cost) & (damping <= 1e12),
    )


def _readings_root(spread: Array) -> Array:
    """Square root F of C - C C, what the readings' noise leaves in the adjusted inputs, shape (..., K, K).

    With a unit normal prior C = (1 + M)^-1 and C - C C = C M C, M being the information in the readings.
    """
    values, rows = np.linalg.eigh(spread)
    part = np.clip(values - values**2, 0.0, None)
    root: Array = rows * np.sqrt(part)[..., None, :]
    return root


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


def _posterior(information: Array) -> Array:
    """Covariance (1 + M)^-1 of inputs with a unit normal prior; information M from readings is never negative."""
    values, vectors = np.linalg.eigh(information)
    spread: Array = (vectors / (1.0 + np.maximum(values, 0.0))[..., None, :]) @ np.swapaxes(vectors, -1, -2)
    return spread


def ranks(adjusted: Adjusted) -> tuple[Indices, Flags]:
    """How many private unknowns the readings of each particle fix, (N,), and which have rank, (N, 5).

    Rank is missing where a singular value of the scaled Jacobian is below 1e-6 of the largest; an unknown that a
    missing direction touches has none. A shape deviation, fixed by its prior, counts in neither.
    """
    model = adjusted.model
    square = sum((normal.private for normal in adjusted.normals.values()), np.zeros((model.particles, 5, 5)))
    size = np.einsum("nii->ni", square)
    free = model.active & (size > 1e-7)
    free[:, SHAPE] = False
    scale = np.sqrt(np.where(free, size, 1.0))
    scaled = np.where(free[:, :, None] & free[:, None, :], square, 0.0) / (scale[:, :, None] * scale[:, None, :])
    values, vectors = np.linalg.eigh(scaled)
    missing = values < SINGULAR**2 * np.maximum(values[:, -1:], 1e-300)
    touched = (np.abs(vectors) * missing[:, None, :]).max(axis=2) > 1e-3
    count: Indices = (~missing).sum(axis=1)
    return count, free & ~touched


def _joint(model: Model, theta: Array, xi: Array, normals: Mapping[str, Normal]) -> tuple[Array, Array]:
    """Normal matrix (N, 5 + K, 5 + K) and gradient of each particle with its own copy of the shared inputs."""
    private, cross, shared, gradient, shared_gradient = _assemble(model, theta, normals)
    width = xi.shape[1]
    top = np.concatenate([private, cross], axis=2)
    bottom = np.concatenate([np.swapaxes(cross, 1, 2), shared + np.eye(width)], axis=2)
    return np.concatenate([top, bottom], axis=1), np.concatenate([gradient, shared_gradient - xi], axis=1)


@dataclass
class _Member:
    """One session while a group is adjusted."""

    model: Model
    theta: Array
    columns: Indices  # place of the session's inputs among the group's
    lines: Mapping[str, Linearised]
    normals: Mapping[str, Normal]
    blocks: list[Model] = field(init=False)

    def __post_init__(self) -> None:
        count = self.model.particles
        starts = range(0, count, BLOCK) if count > BLOCK else ()
        self.blocks = [self.model.subset(np.arange(one, min(one + BLOCK, count), dtype=np.intp)) for one in starts]

    def renew(self, xi: Array) -> None:
        own = xi[None, self.columns]
        if not self.blocks:
            self.lines, self.normals = _evaluate(self.model, self.theta, own)
            return
        found = [
            _lines(block, self.theta[place * BLOCK : place * BLOCK + block.particles], own)
            for place, block in enumerate(self.blocks)
        ]
        self.lines = {
            name: _joined([lines[name] for lines in found if name in lines])
            for name in self.model.logs
            if len(self.model.logs[name])
        }
        self.normals = _normals(self.model, self.lines)

    def cost(self) -> float:
        return float(_line_cost(self.model, self.theta, self.lines).sum())

    def trial_cost(self, theta: Array, xi: Array) -> float:
        return float(_data_cost(self.model, theta, xi[None, self.columns]).sum())


def adjust_together(models: list[Model], starts: list[Array]) -> list[Adjusted]:
    """All particles of one or more sessions adjusted together, shared inputs of equal name being one.

    Parameters
    ----------
    models : list of Model
        One session, or all sessions of a campaign.
    starts : list of ndarray, shape (N, 5)
        Where to start, best the particles adjusted alone.

    Returns
    -------
    list of Adjusted
        In the order given; xi and C are those of each session's own inputs.
    """
    owners = [[model.setting.inputs[one].name for one in model.setting.uncertain] for model in models]
    known = {
        model.setting.inputs[one].name: model.setting.inputs[one] for model in models for one in model.setting.uncertain
    }
    group = tuple(known[name] for name in sorted(known))
    place = {one.name: index for index, one in enumerate(group)}
    xi = np.zeros(len(place))
    members = []
    for model, start, names in zip(models, starts, owners, strict=True):
        member = _Member(model, start.copy(), np.array([place[name] for name in names], np.intp), {}, {})
        member.renew(xi)
        members.append(member)
    settled = False
    stretch, last = 1.0, None
    enough = SETTLED_TOGETHER * np.sqrt(max(sum(model.particles for model in models), 9))
    for _ in range(ROUNDS):
        cost = sum(one.cost() for one in members) + float(xi @ xi)
        parts, move, size = _group_step(members, xi)
        if stretch == 1.0 and last is not None and size < CLOSE:
            stretch = _stretch(move, last)
        last = move
        move = stretch * move
        steps = [own + response @ move[one.columns] for one, (own, response) in zip(members, parts, strict=True)]
        factor = min([1.0, *(float(_shortened(step).min()) for step in steps if len(step))])
        factor = min(factor, FARTHEST_TOGETHER / max(float(np.abs(move).max(initial=0.0)), FARTHEST_TOGETHER))
        while True:
            trial = sum(
                one.trial_cost(one.theta + factor * step, xi + factor * move)
                for one, step in zip(members, steps, strict=True)
            ) + float(((xi + factor * move) ** 2).sum())
            if trial <= cost * (1.0 + 1e-12) + 1e-9 or factor < 1e-9:
                break
            factor *= 0.5
        if factor >= 1e-9:
            xi = xi + factor * move
            for one, step in zip(members, steps, strict=True):
                one.theta = one.theta + factor * step
                one.renew(xi)
        if size < enough or factor < 1e-9:
            settled = factor >= 1e-9 or size < 1e-3
            break
    return _finished(members, xi, group, settled)


def _reduced(member: _Member) -> tuple[Array, Array, Array, Array, Array, Array]:
    """Inverse private block, response, own step, gradient, and the share of the shared inputs' normal equations."""
    private, cross, shared, gradient, shared_gradient = _assemble(member.model, member.theta, member.normals)
    inverse = inverse_of(private)
    response = -inverse @ cross
    own = inverse @ gradient[:, :, None]
    square = shared.sum(axis=0) + (np.swapaxes(cross, 1, 2) @ response).sum(axis=0)
    right = shared_gradient.sum(axis=0) - (np.swapaxes(cross, 1, 2) @ own).sum(axis=0)[:, 0]
    return inverse, response, own[:, :, 0], square, right, gradient


def _stretch(move: Array, last: Array) -> float:
    """Length of further steps when each leaves a share r of the error to the next: 1 / (1 - r), Aitken's process.

    Gauss-Newton leaves the curvature of the equations out, which makes its steps too long or too short by one ratio.
    """
    ratio = float(move @ last) / max(float(last @ last), 1e-300)
    return 1.0 / (1.0 - ratio) if abs(ratio) < 0.75 else 1.0


def _group_step(members: list[_Member], xi: Array) -> tuple[list[tuple[Array, Array]], Array, float]:
    """Gauss-Newton steps: of each session its own and its response, of the inputs; root of the fall in chi-square."""
    square, right = np.eye(len(xi)), -xi
    parts = [_reduced(one) for one in members]
    for one, part in zip(members, parts, strict=True):
        square[np.ix_(one.columns, one.columns)] += part[3]
        right[one.columns] += part[4]
    move = np.linalg.solve(square, right)
    promised = float(move @ right) + sum(float((part[5] * part[2]).sum()) for part in parts)
    return [(part[2], part[1]) for part in parts], move, float(np.sqrt(abs(promised)))


def _finished(members: list[_Member], xi: Array, group: tuple[Input, ...], settled: bool) -> list[Adjusted]:
    parts = [_reduced(one) for one in members]
    square = np.eye(len(xi))
    for one, part in zip(members, parts, strict=True):
        square[np.ix_(one.columns, one.columns)] += part[3]
    spread = _posterior(square - np.eye(len(xi)))
    root = _readings_root(spread)
    found = []
    for one, (inverse, response, *_) in zip(members, parts, strict=True):
        own = xi[one.columns]
        shared = spread[np.ix_(one.columns, one.columns)]
        cost = np.array([one.cost() + float(own @ own)])
        found.append(
            Adjusted(
                one.model,
                one.theta,
                own[None],
                inverse,
                response,
                shared[None],
                spread[None, one.columns],
                root[None, one.columns],
                group,
                one.normals,
                one.lines,
                cost,
                np.full(one.model.particles, settled),
            )
        )
    return found
