"""Group means with the session as the unit, and the covariance between them.

The mean of group g is sum w_i y_i over its session means y_i, with weights in proportion to 1/(t_g^2 + v_i) that sum
to 1. v_i = s_g^2 / n_i comes from the scatter of single particles within sessions, pooled over the group: it depends
on the number of particles but not on their values. t_g^2 is tau_g^2, but no less than the mean of v: few sessions often
show tau_g = 0 by chance, one large session would then be the whole mean, and its interval covered 86 to 93 % in trials
with sessions of 1 to 60 particles; with this bound 95 %. Sessions of equal size have equal weights in any case. Shared
components stay out of the weights: errors in proportion to the value would pull a weighted mean low. They enter where
they belong, in the covariance

    cov(g, h) = [g = h] sum w_i^2 (tau_g^2 + v_i) + sum_k (sum w_i c_ik)_g (sum w_i c_ik)_h

so what groups share cancels in their differences and ratios, and does not shrink with more sessions.

tau_g belongs to each group. Pooled over groups it would bring degrees of freedom, but the spread of charge grows with
the charge, a spread relative to a mean near zero means nothing, and a false pooling is not seen with few sessions.
tau_g comes from Paule and Mandel's equation with the shared covariance inside: u is close to that of Hartung and Knapp
(equal to it for equal sessions), never below what the scatter of particles alone makes it. The degrees of freedom are
Satterthwaite's, 2 u^4 / var(u^2), with var(u^2) = var(tau^2) (sum w_i^2)^2; for equal sessions and nothing shared,
sessions less one. Differences of two groups then have those of Welch.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from functools import cached_property
from typing import Any

import numpy as np
from numpy.typing import NDArray

from reduction.randomeffects import Residuals, paule_mandel, residuals, restricted_likelihood, tau_squared_variance
from reduction.sessionmeans import Cells

Array = NDArray[np.floating[Any]]
FEWEST_SESSIONS = 2
MOST_FREEDOM = 1e9


@dataclass(frozen=True)
class GroupMean:
    """One group; with fewer than two sessions a description, its variances NaN."""

    group: str
    sessions: int
    particles: int
    counts: Array  # particles of each session
    session_means: Array
    weights: Array
    mean: float
    tau_squared: float  # variance between sessions
    tau_squared_variance: float  # of that estimate
    particle_variance: float  # intrinsic, within sessions; NaN where no session has two particles
    sampling: Array  # v, variance of each session mean by its particles
    left: Residuals

    @property
    def tested(self) -> bool:
        """Whether the sessions are enough for an interval."""
        return self.sessions >= FEWEST_SESSIONS

    @property
    def squared_weights(self) -> float:
        """Sum of w^2, the slope of the variance of the mean on tau^2."""
        return float((self.weights**2).sum())

    @property
    def by_sessions(self) -> float:
        """Variance of the mean by what differs from session to session."""
        return self.squared_weights * self.tau_squared

    @property
    def by_particles(self) -> float:
        """Variance of the mean by what differs from particle to particle."""
        return float((self.weights**2 * self.sampling).sum())

    @cached_property
    def tau_squared_restricted(self) -> float:
        """Variance between sessions by restricted likelihood, for comparison."""
        return restricted_likelihood(self.left) if self.tested else math.nan

    @property
    def correlation_within(self) -> float:
        """Intraclass correlation: share of the particles' variance that their session makes."""
        total = self.tau_squared + self.particle_variance
        return self.tau_squared / total if total > 0.0 else math.nan

    @property
    def effective_particles(self) -> float:
        """N / (1 + (sum n^2 / N - 1) r), r the intraclass correlation: independent particles that would tell as much.

        Kish, Survey Sampling (1965).
        """
        size = float((self.counts**2).sum()) / self.particles
        return self.particles / (1.0 + (size - 1.0) * self.correlation_within)


@dataclass(frozen=True)
class GroupMeans:
    """All groups together, sorted by name."""

    groups: tuple[GroupMean, ...]
    shared: Array  # (G, K) components of each mean by shared input
    names: tuple[str, ...] = ()
    scopes: tuple[str, ...] = ()

    @cached_property
    def mean(self) -> Array:
        """Means, (G,)."""
        return np.array([one.mean for one in self.groups])

    @cached_property
    def private(self) -> Array:
        """Variance of each mean by what is its group's own, (G,); NaN where a group is not tested."""
        return np.array([one.by_sessions + one.by_particles for one in self.groups])

    @cached_property
    def covariance(self) -> Array:
        """Covariance of the means, (G, G)."""
        return np.asarray(np.diag(self.private) + self.shared @ self.shared.T)

    @cached_property
    def tested(self) -> tuple[int, ...]:
        """Places of the groups with two sessions or more."""
        return tuple(place for place, one in enumerate(self.groups) if one.tested)

    def variance(self, combination: Array) -> float:
        """Variance of sum a_g mean_g over the groups where a_g is not zero."""
        used = np.flatnonzero(combination)
        chosen = combination[used]
        return float(chosen @ self.covariance[np.ix_(used, used)] @ chosen)

    def freedom(self, combination: Array) -> float:
        """Satterthwaite's degrees of freedom of that variance, no fewer than the group of fewest sessions has."""
        used = [(factor, one) for factor, one in zip(combination.tolist(), self.groups, strict=True) if factor]
        if not all(one.tested for _, one in used):
            return math.nan
        spread = sum(factor**4 * one.tau_squared_variance * one.squared_weights**2 for factor, one in used)
        if not spread > 0.0:
            return MOST_FREEDOM
        fewest = min(one.sessions - 1 for _, one in used)
        return float(np.clip(2.0 * self.variance(combination) ** 2 / spread, fewest, MOST_FREEDOM))


def group_means(cells: Cells) -> GroupMeans:
    """Mean of each group from its session means."""
    groups = [_group_mean(cells, name) for name in sorted(set(cells.group))]
    shared = np.array([one.weights @ cells.shared[cells.of(one.group)] for one in groups])
    return GroupMeans(tuple(groups), shared.reshape(len(groups), cells.shared.shape[1]), cells.names, cells.scopes)


def _group_mean(cells: Cells, group: str) -> GroupMean:
    at = cells.of(group)
    y, count, shared = cells.mean[at], cells.count[at], cells.shared[at]
    freedom = float((count - 1.0).sum())
    sampling = cells.own[at]
    intrinsic = math.nan
    if freedom > 0.0:
        scatter, noise = float(cells.squares[at].sum()) / freedom, float(cells.noise[at].sum()) / freedom
        intrinsic = max(scatter - noise, 0.0)
        sampling = max(scatter, noise) / count
    if len(at) < FEWEST_SESSIONS:
        nothing = Residuals(np.zeros(0), np.zeros(0))
        return GroupMean(group, len(at), int(count.sum()), count, y, np.ones(1), float(y[0]), math.nan, math.nan,
                         intrinsic, np.full(1, math.nan), nothing)  # fmt: skip
    left = residuals(y, np.diag(sampling) + (shared @ shared.T).toarray())
    tau = paule_mandel(left)
    total = max(tau, float(sampling.mean())) + sampling
    weights = 1.0 / total if (total > 0.0).all() else np.ones(len(at))
    weights = weights / weights.sum()
    spread = tau_squared_variance(left, tau) if (tau + left.variances > 0.0).all() else 0.0
    return GroupMean(group, len(at), int(count.sum()), count, y, weights, float(weights @ y), tau, spread, intrinsic,
                     sampling, left)  # fmt: skip
