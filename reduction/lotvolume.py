"""How a lot's prior pulls on shared inputs once the particles' own sizes are averaged over, not maximised.

With the sizes of N particles drawn from a lot, the density of the shared inputs xi alone is

    p(xi) ~ exp(-chi_square(xi) / 2) product of sqrt(P_i(xi)),

chi_square being least in the private unknowns at given xi and P_i the variance of ln gamma of particle i at given xi
(Laplace's approximation of the integral over the private unknowns; Tierney and Kadane, J. Am. Stat. Assoc. 81, 1986,
82).
Least squares alone leaves the product out. It hardly matters for a few particles, but it grows with their number while
the width of p does not: inputs then settle where every particle's size is fixed worst or best. The gradient of its
logarithm enters the normal equations of the shared inputs.
"""

from __future__ import annotations

import numpy as np

from reduction.methods import LN_GAMMA, LN_S, Array, Indices, linearise
from reduction.normalequations import Model, assemble, free_unknowns, inverse_of, normals_of

STEP = 0.003  # of differences, the largest change of a logarithm
ENOUGH = 24  # particles of a session that stand for all of its lot, evenly chosen
MATTERS = 0.02  # directions that move the particles by a smaller share of what the first one does are left out


def volume_gradient(model: Model, theta: Array, xi: Array, response: Array, shared: Array) -> Array:
    """Gradient by xi of -1/2 sum of ln P_i over the particles whose size the lot gives, the particles following.

    Taken by central differences along the few directions of the shared inputs' covariance that move the particles.

    Parameters
    ----------
    model : Model
        Readings of one session.
    theta : ndarray, shape (N, 5)
        Private unknowns, at their least squares for xi.
    xi : ndarray, shape (K,)
        Deviations of the session's inputs, in their u.
    response : ndarray, shape (N, 5, K)
        S, how theta follows xi.
    shared : ndarray, shape (K, K)
        C, covariance of xi.

    Returns
    -------
    ndarray, shape (K,)
        Zeros where no particle has its size from the lot.
    """
    lot = of_the_lot(model)
    if not len(lot) or not len(xi):
        return np.zeros(len(xi))
    chosen = lot[:: -(-len(lot) // ENOUGH)]
    weight = len(lot) / len(chosen)
    part, start, follow = model.subset(chosen), theta[chosen], response[chosen]
    values, vectors = np.linalg.eigh(shared)
    scale = np.sqrt(np.maximum(values, 1e-12))
    moved = follow[:, [LN_S, LN_GAMMA]] @ (vectors * scale)
    spread = np.sqrt((moved**2).sum(axis=2) + 1e-30)
    share, turn = np.linalg.eigh(np.einsum("njk,nj,njl->kl", moved, 1.0 / spread**2, moved))
    gradient = np.zeros(len(xi))
    for column in np.flatnonzero(share > MATTERS * share[-1]):
        direction = (vectors * scale) @ turn[:, column]
        length = STEP / max(float(np.abs(follow[:, [LN_S, LN_GAMMA]] @ direction).max()), 1e-12)
        step = length * direction
        sides = [_logarithm(part, start + side * follow @ step, xi + side * step) for side in (1.0, -1.0)]
        slope = -0.5 * weight * (sides[0] - sides[1]) / (2.0 * length)
        gradient += slope * (vectors / scale) @ turn[:, column]
    return gradient


def of_the_lot(model: Model) -> Indices:
    """Particles whose size comes from the lot."""
    log = model.logs.get("diameter")
    found: Indices = np.unique(log.particle[log.lot]) if log is not None else np.zeros(0, np.intp)
    return found


def _logarithm(model: Model, theta: Array, xi: Array) -> float:
    """Sum of ln P_i."""
    lines = linearise(
        model.setting, model.logs, theta, model.sign, xi[None], private=free_unknowns(model), shared=False
    )
    private = assemble(model, theta, normals_of(model, lines))[0]
    return float(np.log(inverse_of(private)[:, LN_GAMMA, LN_GAMMA]).sum())
