"""Random effects between means whose errors are correlated: how much they vary beyond their own uncertainty.

    y = X mu + b + e,   cov(b) = tau^2 I,   cov(e) = V, known and full

With K'X = 0, K'K = I and K'VK = U diag(l) U', the contrasts z = U'K'y are independent with variance tau^2 + l, and
every estimator is a sum over them: Q = sum z^2 / l for one mean is Cochran's Q, sum 1/l the trace of DerSimonian and
Laird. For a diagonal V these are the textbook estimators; the libraries that have those have no full V.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.floating[Any]]

MOST_STEPS = 200
SETTLED = 1e-14  # of the step to the value


@dataclass(frozen=True)
class Residuals:
    """What is left of the data once the means are taken out."""

    squares: Array  # z^2 of each contrast
    variances: Array  # l, of each contrast by the known covariance alone

    @property
    def freedom(self) -> int:
        """Number of contrasts, data less means."""
        return len(self.squares)

    @property
    def q(self) -> float:
        """Cochran's Q, sum z^2 / l; infinite where a contrast has no variance of its own."""
        with np.errstate(divide="ignore", invalid="ignore"):
            return float(np.where(self.squares > 0.0, self.squares / self.variances, 0.0).sum())


@dataclass(frozen=True)
class Consensus:
    """Mean of all data under one estimate of tau."""

    mean: float
    u: float
    tau_squared: float
    q: float
    freedom: int
    weights: Array  # sum to 1

    @property
    def birge_ratio(self) -> float:
        """Root of Q over its degrees of freedom."""
        return math.sqrt(self.q / self.freedom)


def residuals(y: Array, covariance: Array, design: Array | None = None) -> Residuals:
    """Contrasts of the data in which the means drop out, independent of each other.

    Parameters
    ----------
    y : (n,) array
        Data.
    covariance : (n, n) array
        Known covariance V.
    design : (n, p) array, optional
        X of full rank; one common mean by default.

    Returns
    -------
    Residuals
        n - p of them.
    """
    design = np.ones((len(y), 1)) if design is None else design
    basis, _ = np.linalg.qr(design, mode="complete")
    free = basis[:, design.shape[1] :]
    variances, turn = np.linalg.eigh(free.T @ covariance @ free)
    return Residuals((turn.T @ (free.T @ y)) ** 2, np.maximum(variances, 0.0))


def paule_mandel(found: Residuals) -> float:
    """tau^2 at which sum z^2 / (tau^2 + l) equals its expectation, the number of contrasts; 0 where none is.

    The sum falls and is convex in tau^2, so Newton's steps from the left never overshoot. Paule and Mandel, J. Res. NBS
    87 (1982) 377; for a full covariance the same equation in the contrasts.
    """
    if not found.freedom:
        return 0.0
    used = found.squares > 0.0
    z, known = found.squares[used], found.variances[used]
    if not len(z):
        return 0.0
    tau = max(0.0, float((z / found.freedom - known).max()))  # left of the root: this contrast alone exceeds the sum
    for _ in range(MOST_STEPS):
        total = tau + known
        if not (total > 0.0).all():
            tau = max(tau, float(z.max()) * 1e-300)
            continue
        parts = z / total
        step = (float(parts.sum()) - found.freedom) / float((parts / total).sum())
        if step <= SETTLED * tau:
            break
        tau += step
    return tau


def dersimonian_laird(found: Residuals) -> float:
    """tau^2 = max(0, (Q - n + p) / sum(1/l)). DerSimonian and Laird, Control. Clin. Trials 7 (1986) 177."""
    return max(0.0, (found.q - found.freedom) / float((1.0 / found.variances).sum()))


def restricted_likelihood(found: Residuals) -> float:
    """tau^2 at the maximum of -1/2 sum(ln(tau^2 + l) + z^2 / (tau^2 + l)), the likelihood of the contrasts (REML)."""
    if not found.freedom or not found.squares.any():
        return 0.0
    z, known = found.squares, found.variances
    top = float(z.sum()) + float(known.max())
    grid = np.concatenate([[0.0], np.geomspace(1e-9, 1.0, 200) * top])
    with np.errstate(divide="ignore", invalid="ignore"):
        total = grid[:, None] + known
        cost = np.where(total > 0.0, np.log(total) + z / total, np.inf).sum(axis=1)
    best = int(np.argmin(cost))
    low, high = grid[max(best - 1, 0)], grid[min(best + 1, len(grid) - 1)]

    def slope(tau: float) -> float:
        return float(((tau + known - z) / (tau + known) ** 2).sum())

    if best == 0 and (known == 0.0).any():
        low = grid[1] * 1e-6
    if slope(low) >= 0.0:
        return float(low) if best else 0.0
    return _root(slope, float(low), float(high))


def _root(rising: Callable[[float], float], low: float, high: float) -> float:
    """Where a function crosses zero from below, by halving: some 60 cheap steps, exact to the last digit."""
    while True:
        middle = 0.5 * (low + high)
        if not low < middle < high:
            return middle
        low, high = (middle, high) if rising(middle) < 0.0 else (low, middle)


def fixed(found: Residuals) -> float:
    """tau^2 = 0: nothing varies beyond the known covariance."""
    del found
    return 0.0


def consensus(y: Array, covariance: Array, estimator: Callable[[Residuals], float] = paule_mandel) -> Consensus:
    """Generalised least squares mean: mu = 1'W y / 1'W 1, W = (tau^2 I + V)^-1, u^2 = 1 / 1'W 1.

    Parameters
    ----------
    y : (n,) array
        Data, two or more.
    covariance : (n, n) array
        Their covariance.
    estimator : callable
        One of `paule_mandel`, `dersimonian_laird`, `restricted_likelihood`, `fixed`.

    Returns
    -------
    Consensus
        Mean and what it rests on.
    """
    found = residuals(y, covariance)
    tau_squared = estimator(found)
    weights = np.linalg.solve(covariance + tau_squared * np.eye(len(y)), np.ones(len(y)))
    total = float(weights.sum())
    return Consensus(
        float(weights @ y) / total, 1.0 / math.sqrt(total), tau_squared, found.q, found.freedom, weights / total
    )


def tau_squared_variance(found: Residuals, tau_squared: float) -> float:
    """Variance of the Paule-Mandel tau^2, 2 (n - p) / (sum 1/(tau^2 + l))^2, from the slope of its equation."""
    return 2.0 * found.freedom / float((1.0 / (tau_squared + found.variances)).sum()) ** 2
