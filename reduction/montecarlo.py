"""Monte Carlo as JCGM 101: joint draws from adjusted values and inputs, exactly through drag, diameter, mass, charge.

    xi = xi^ + F z + noise,   theta = theta^ + S (xi - xi^) + noise

z is the deviation of each input's estimate in the input's stated shape, so that an input the readings do not adjust
keeps its shape and an adjusted one mixes; the noise is that of the readings, normal, or Student's t where its u came
from their scatter. Random numbers belong to names: of the input, the session's readings, the particle.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass, replace

import numpy as np

from reduction.adjustment import Adjusted
from reduction.budget import RESULTS, OwnSize, Results, result_logarithms
from reduction.fits import UNDETERMINED
from reduction.methods import Array, Flags, Indices, Setting, Surroundings, surroundings
from reduction.noise import KNOWN, NEGLIGIBLE, ROWS, covariance_root, noise_alone, noise_by_group, noise_together
from reduction.shapes import draws, spread_factor, stream, symmetric_ends

ROLES = ("temperature", "pressure", "viscosity_formula", "slip_formula", "gain_diameter")  # shared ones, and:
OF_SPECIES = ("shape_factor", "density", "lot_diameter")


@dataclass(frozen=True)
class Intervals:
    """Coverage intervals, means and standard deviations of the results of one session, SI, (N, 6) each.

    In the order of `budget.RESULTS`, signed, low below high; nan where a result is not determined.
    """

    low: Array
    high: Array
    mean: Array
    sd: Array


@dataclass(frozen=True)
class _Shared:
    """What particles share: coefficients on xi (N or 1, K, columns) and the draws they go with (columns, trials)."""

    columns: Array
    z: Array


def result_draws(
    results: Results,
    *,
    session: str,
    names: Sequence[str],
    log_dof: Mapping[str, float],
    trials: int,
    seed: int,
    size: OwnSize | None = None,
    pooled: bool = False,
) -> Iterator[Array]:
    """Joint draws of the logarithms of the results, particle after particle.

    Parameters
    ----------
    results : Results
        Of one session.
    session : str
        Its id.
    names : sequence of str
        Ids of its particles, in the order of the results.
    log_dof : mapping
        Log to the degrees of freedom of its u, where that came from scatter.
    trials : int
        Number of draws.
    seed : int
        Seed of the run.
    size : OwnSize, optional
        As given to `results_of`.
    pooled : bool
        Whether sessions were adjusted together, so that what the readings do to the inputs is the campaign's.

    Yields
    ------
    ndarray, shape (6, trials)
        Ln of the size of each result; nan where a draw is impossible, such as a negative density. Draw by draw, the
        shared inputs are the same for every particle, and by name for every session.

    Notes
    -----
    Means and covariances are those of the adjustment, to all orders in what follows from it. With `pooled`, the noise
    of the readings as it moves the shared inputs is taken as normal whatever the degrees of freedom.
    """
    adjusted, setting = results.adjusted, results.adjusted.model.setting
    groups = sorted(set(log_dof) & set(adjusted.normals))
    factors = {
        log: spread_factor(log_dof[log], seed=seed, name=f"session/{session}/scatter/{log}", trials=trials)
        for log in groups
    }
    own_noise = _Own(session, names, factors, trials, seed)
    shared = _shared(results, own_noise, pooled)
    uncertain = setting.uncertain
    for index, name in enumerate(names):
        at = index if len(adjusted.xi) > 1 else 0
        needed = _needed(setting, index)
        response = adjusted.response[index][ROWS]
        on_shared = shared.columns[at] if len(shared.columns) > 1 else shared.columns[0]
        alone = results.alone or len(adjusted.shared) > 1
        own = noise_alone(adjusted, index, at, needed, groups) if alone else noise_together(adjusted, index, groups)
        moved = np.concatenate([response @ on_shared, on_shared[needed]]) @ shared.z
        for group, root in own:
            moved[: len(root)] += own_noise.carried(root, index, group)
        theta = np.zeros((5, trials))
        theta[ROWS] = adjusted.theta[index, ROWS][:, None] + moved[: len(ROWS)]
        xi = adjusted.xi[at, needed][:, None] + moved[len(ROWS) :]
        one = replace(setting.of(index), uncertain=tuple(uncertain[column] for column in needed))
        with np.errstate(all="ignore"):
            around = surroundings(one, xi.T[:, None, :])
            yield _exactly(one, around, theta, size, index, f"particle/{session}/{name}/size", seed)


def _exactly(
    setting: Setting, around: Surroundings, theta: Array, size: OwnSize | None, index: int, name: str, seed: int
) -> Array:
    """Logarithms of the results of one particle, (6, trials), at draws of its unknowns and of the shared inputs."""
    deviation: Array | float = 0.0
    if size is not None:
        part = slice(index, index + 1)
        size = OwnSize(size.diameter[part], size.u[part], size.lot[part])
        deviation = (size.u * stream(seed, name).standard_normal(theta.shape[1]))[:, None]
    logs = result_logarithms(setting, around, theta.T[:, None, :], size, deviation)
    return np.ascontiguousarray(logs[:, 0, :].T)


def _needed(setting: Setting, index: int) -> list[int]:
    """Columns of xi that the results of a particle depend on besides its own unknowns."""
    species = setting.species[index]
    roles = {*ROLES, *(f"{role}:{species}" for role in OF_SPECIES)}
    return [column for column, one in enumerate(setting.uncertain) if setting.inputs[one].role in roles]


def _matters(results: Results, parts: Array) -> Indices:
    """Columns of components (N, 6, columns) that move any result by more than is negligible."""
    with np.errstate(invalid="ignore"):
        size = np.abs(parts) > NEGLIGIBLE * np.sqrt(results.variance)[:, :, None]
    return np.flatnonzero(np.asarray(size).any(axis=(0, 1)))


class _Own:
    """Normal draws of each particle, by group of logs, times the factor of a group whose u came from scatter."""

    def __init__(
        self, session: str, names: Sequence[str], factors: Mapping[str, Array], trials: int, seed: int
    ) -> None:
        self.session, self.names, self.factors, self.trials, self.seed = session, names, factors, trials, seed

    def normal(self, name: str, group: str = KNOWN) -> Array:
        """Draws of one name, normal or with the group's Student's t, (trials,)."""
        z = stream(self.seed, name).standard_normal(self.trials)
        return z * self.factors[group] if group in self.factors else z

    def carried(self, root: Array, index: int, group: str) -> Array:
        """Product of a root and draws y, (rows, trials); one column more leaves the draws of the others as they are."""
        found = np.zeros((len(root), self.trials))
        for place, column in enumerate(root.T):
            name = f"particle/{self.session}/{self.names[index]}/{group}/{place + 1}"
            found += column[:, None] * self.normal(name, group)
        return found


def _shared(results: Results, own: _Own, pooled: bool) -> _Shared:
    adjusted = results.adjusted
    alone = results.alone or len(adjusted.shared) > 1
    kept = _matters(results, results.by_input)
    group = [adjusted.group[one] for one in kept]
    columns = [adjusted.from_priors[:, :, kept]]
    z: list[Array] = [draws(one.quantity, seed=own.seed, name=one.name, trials=own.trials) for one in group]
    owner = "campaign//readings" if pooled else f"session/{own.session}/readings"
    if not alone and (pooled or not own.factors):
        kept = _matters(results, results.by_readings)
        columns.append(adjusted.from_readings[:, :, kept])
        z += [own.normal(f"{owner}/{one + 1}") for one in kept]
    elif not alone:
        columns.append(adjusted.shared)
        z += list(_onto_shared(adjusted, own, owner))
    return _Shared(np.concatenate(columns, axis=2), np.array(z).reshape(-1, own.trials))


def _onto_shared(adjusted: Adjusted, own: _Own, owner: str) -> Array:
    """What the noise of all readings of the session does to the gradient of the shared inputs, (K, trials)."""
    width = adjusted.shared.shape[1]
    total = np.zeros((width, own.trials))
    rest: dict[str, Array] = {}
    for index in range(len(own.names)):
        for group, noise in noise_by_group(adjusted, index, sorted(own.factors)).items():
            total += own.carried(noise.onto, index, group)
            rest[group] = rest.get(group, np.zeros((width, width))) + noise.rest
    for group, square in rest.items():
        for place, column in enumerate(covariance_root(square).T):
            total += column[:, None] * own.normal(f"{owner}/{group}/{place + 1}", group)
    return total


def result_intervals(
    results: Results,
    *,
    session: str,
    names: Sequence[str],
    log_dof: Mapping[str, float],
    trials: int,
    seed: int,
    coverage: float,
    size: OwnSize | None = None,
    pooled: bool = False,
) -> Intervals:
    """Probabilistically symmetric coverage intervals of the results by joint draws.

    Parameters
    ----------
    results, session, names, log_dof, trials, seed, size, pooled
        As in `result_draws`.
    coverage : float
        Coverage probability [1].

    Returns
    -------
    Intervals
        Draws that are impossible, such as those of a negative density, are left out: the draws are conditional on
        possible values.

    Notes
    -----
    JCGM 101:2008, 7.6 and 7.7. The ends are those of the logarithms, to which each result goes monotonically.
    """
    count = len(names)
    low, high, mean, sd = (np.full((count, len(RESULTS)), np.nan) for _ in range(4))
    found = result_draws(
        results, session=session, names=names, log_dof=log_dof, trials=trials, seed=seed, size=size, pooled=pooled
    )
    determined = known_results(results, size)
    for index, logs in enumerate(found):
        for place in np.flatnonzero(determined[index]):
            sample = logs[place]
            possible = np.isfinite(sample)
            if not possible.all():
                sample = sample[possible]
            if len(sample) < 2:
                continue
            ends = np.exp(symmetric_ends(sample, coverage))
            sign = np.sign(results.value[index, place])
            low[index, place], high[index, place] = np.sort(sign * ends)
            values = np.exp(sample)
            mean[index, place], sd[index, place] = sign * values.mean(), values.std(ddof=1)
    return Intervals(low, high, mean, sd)


def known_results(results: Results, size: OwnSize | None = None) -> Flags:
    """Which results are determined, (N, 6), by the rule of the reduction: what is not gets no number.

    u of the logarithm of charge-to-mass ratio and drag rate within bounds, a size, a density.
    """
    u = np.sqrt(results.variance)
    settled = results.adjusted.settled
    with np.errstate(invalid="ignore"):
        s, gamma = (u[:, :2] <= UNDETERMINED).T & settled
    sized = (gamma if size is None else np.isfinite(size.u)) & np.isfinite(results.value[:, 3])
    return np.stack([s, gamma, sized, sized, s & sized, s & sized], axis=1)
