"""All methods adjusted together: generalised least squares with the covariance that shared inputs cause.

Each method hands over its normal equations J'WJ and J'Wr in the private unknowns of a particle and in the deviations
xi of the shared inputs, which carry a unit normal prior. Eliminating the private unknowns of every particle (a Schur
complement, the normal-equation form of Woodbury's identity) keeps the cost linear in the number of particles. The
equations are renewed at the adjusted values until settled.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field

import numpy as np

from reduction.inputs import Input
from reduction.lotvolume import of_the_lot, volume_gradient
from reduction.methods import SHAPE, SINGULAR, Array, Flags, Indices, Linearised
from reduction.normalequations import (
    Model,
    Normal,
    assemble,
    data_cost,
    evaluate,
    inverse_of,
    line_cost,
)
from reduction.reducedequations import Member, shortened

ROUNDS = 60
SETTLED = 1e-6  # of u: settled when the next step promises to lower chi-square by less than its square
FLAT = 1e-3  # a valley along which chi-square would fall by less than the square of this is not walked to its end
SETTLED_TOGETHER = 1e-4  # the same for a group, times the root of its particles, over which rounding adds up
NEAR = 1.0  # where the last steps begin, the same measure
SLACK = 10.0  # by how many times what it promises to lower chi-square, and 1, a last step may raise it
VOLUME_SETTLED = 0.02  # below which the volume term is not taken anew
DEPTH = 3  # steps that are mixed
FEW = 48  # particles of a session that stand for four times as many or more to begin with
FARTHEST_TOGETHER = 40.0  # longest step of a shared input, in its u


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
    lines, normals = evaluate(model, theta, xi)
    cost = line_cost(model, theta, lines) + (xi**2).sum(axis=1)
    for _ in range(ROUNDS):
        square, gradient = _joint(model, theta, xi, normals)
        step = (inverse_of(_damped(square, damping)) @ gradient[:, :, None])[:, :, 0]
        step *= np.where(settled, 0.0, shortened(step))[:, None]
        trial, trial_xi = theta + step[:, :5], xi + step[:, 5:]
        trial_cost = data_cost(model, trial, trial_xi) + (trial_xi**2).sum(axis=1)
        better = trial_cost <= cost * (1.0 + 1e-12) + 1e-12
        theta, xi = np.where(better[:, None], trial, theta), np.where(better[:, None], trial_xi, xi)
        damping = np.where(better, np.maximum(damping * 0.1, 1e-12), damping * 10.0)
        size = np.sqrt(np.abs((gradient * step).sum(axis=1)))
        settled |= (better & (size < SETTLED)) | (damping > 1e12)
        lines, normals = evaluate(model, theta, xi)
        cost = line_cost(model, theta, lines) + (xi**2).sum(axis=1)
        if settled.all():
            break
    settled |= (size < FLAT) & np.isfinite(cost)
    private, cross, shared, _, _ = assemble(model, theta, normals)
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
    private, cross, shared, gradient, shared_gradient = assemble(model, theta, normals)
    width = xi.shape[1]
    top = np.concatenate([private, cross], axis=2)
    bottom = np.concatenate([np.swapaxes(cross, 1, 2), shared + np.eye(width)], axis=2)
    return np.concatenate([top, bottom], axis=1), np.concatenate([gradient, shared_gradient - xi], axis=1)


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
    known = {
        model.setting.inputs[one].name: model.setting.inputs[one] for model in models for one in model.setting.uncertain
    }
    group = tuple(known[name] for name in sorted(known))
    place = {one.name: index for index, one in enumerate(group)}
    xi: Array = np.zeros(len(group))
    columns = [
        np.array([place[model.setting.inputs[one].name] for one in model.setting.uncertain], np.intp)
        for model in models
    ]
    few = _few(models, starts, columns, xi)
    if few:
        there, _ = _settle(few, xi)
    members = [Member(*given, xi) for given in zip(models, starts, columns, strict=True)]
    if few:
        for one in members:
            one.theta = one.follow(one.theta + one.response @ (there - xi)[one.columns], there)
            one.renew(there)
        xi = there
    xi, settled = _settle(members, xi)
    return _finished(members, xi, settled, group)


def _few(models: list[Model], starts: list[Array], columns: list[Indices], xi: Array) -> list[Member]:
    """Some particles of each session to stand for all, where there are many: enough to begin with, at less cost."""
    if max((model.particles for model in models), default=0) < 4 * FEW:
        return []
    found = []
    for model, start, own in zip(models, starts, columns, strict=True):
        chosen = np.arange(0, model.particles, max(1, model.particles // FEW), dtype=np.intp)
        found.append(Member(model.subset(chosen), start[chosen], own, xi, model.particles / max(len(chosen), 1)))
    return found


def _settle(members: list[Member], xi: Array) -> tuple[Array, bool]:
    """Move all members and the shared inputs to where the normal equations hold; the inputs, and whether they settled.

    Far off a step must lower chi-square. Near the end it need not: with the noise of the dc voltage in u and slopes at
    the likeliest voltages, the normal equations hold a little beside its minimum.
    """
    many = float(np.sqrt(max(sum(one.model.particles for one in members), 9)))
    enough, near, volume = SETTLED_TOGETHER * many, NEAR * many, np.zeros_like(xi)
    walked = Walked()
    for _ in range(ROUNDS):
        information = _information(members, len(xi))
        move, size = _group_step(members, information, xi, volume)
        close = size < near or bool(walked.moves)
        if close:
            if size > VOLUME_SETTLED or not walked.moves:
                volume = _group_volume(members, information, xi)
                move, size = _group_step(members, information, xi, volume)
            move = walked.next_move(xi, move, information)
        steps = [one.own + one.response @ move[one.columns] for one in members]
        factor = min([1.0, *(float(shortened(step).min()) for step in steps if len(step))])
        factor = min(factor, FARTHEST_TOGETHER / max(float(np.abs(move).max(initial=0.0)), FARTHEST_TOGETHER))
        bound = sum(one.cost for one in members) + float(xi @ xi)
        bound += SLACK * (1.0 + size**2) if close else bound * 1e-12 + 1e-9
        while True:
            there = xi + factor * move
            thetas = [one.follow(one.theta + factor * step, there) for one, step in zip(members, steps, strict=True)]
            trial = sum(one.cost_at(theta, there) for one, theta in zip(members, thetas, strict=True))
            if trial + float(there @ there) <= bound or factor < 1e-9:
                break
            factor *= 0.5
        if factor < 1e-9:
            return xi, size < 1e-3
        xi = there
        for one, theta in zip(members, thetas, strict=True):
            one.theta = theta
            one.renew(xi)
        if size < enough and close:
            return xi, True
    return xi, False


@dataclass
class Walked:
    """Points and Gauss-Newton moves of the last rounds, for Anderson's mixing.

    Each move leaves a share of the way to the next, since the curvature of the equations is left out; a combination of
    moves that would leave least leaves far less (Anderson, J. Assoc. Comput. Mach. 12, 1965, 547).
    """

    points: list[Array] = field(default_factory=list)
    moves: list[Array] = field(default_factory=list)

    def next_move(self, point: Array, move: Array, information: Array) -> Array:
        """The mixed move from a point, differences measured by the information on the inputs and their priors."""
        points, moves = self.points[-DEPTH:], self.moves[-DEPTH:]
        self.points, self.moves = [*points, point], [*moves, move]
        if not moves:
            return move
        changes = np.stack([move - one for one in moves], axis=1)
        metric = information + np.eye(len(point))
        square = changes.T @ metric @ changes
        share = np.linalg.lstsq(square, changes.T @ metric @ move, rcond=1e-10)[0]
        ways = np.stack([point - one for one in points], axis=1) + changes
        mixed: Array = move - ways @ share
        return mixed


def _information(members: list[Member], count: int) -> Array:
    """What the readings of all sessions tell of the shared inputs, without the priors, (K, K)."""
    square = np.zeros((count, count))
    for one in members:
        square[np.ix_(one.columns, one.columns)] += one.information
    return square


def _group_volume(members: list[Member], information: Array, xi: Array) -> Array:
    """Gradient of the volume term of all sessions by the shared inputs."""
    spread = _posterior(information)
    count = sum(one.weight * len(of_the_lot(one.model)) for one in members)
    gradient = np.zeros(len(xi))
    for one in members:
        own = one.columns
        gradient[own] += one.weight * volume_gradient(
            one.model, one.theta, xi[own], one.response, spread[np.ix_(own, own)]
        )
    return gradient * (1.0 - 1.0 / max(count, 1.0))  # what the others do: one particle is the same as alone


def _group_step(members: list[Member], information: Array, xi: Array, volume: Array) -> tuple[Array, float]:
    """Gauss-Newton step of the inputs, and the root of the fall in chi-square that it promises with the particles'."""
    right = -xi - volume
    for one in members:
        right[one.columns] += one.right
    move = np.linalg.solve(information + np.eye(len(xi)), right)
    promised = float(move @ right) + sum(one.promised for one in members)
    return move, float(np.sqrt(abs(promised)))


def _finished(members: list[Member], xi: Array, settled: bool, group: tuple[Input, ...]) -> list[Adjusted]:
    spread = _posterior(_information(members, len(xi)))
    root = _readings_root(spread)
    found = []
    for one in members:
        own = xi[one.columns]
        shared = spread[np.ix_(one.columns, one.columns)]
        cost = np.array([one.cost + float(own @ own)])
        found.append(
            Adjusted(
                one.model,
                one.theta,
                own[None],
                one.inverse,
                one.response,
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
