"""One session of a group that is adjusted together: its normal equations with the private unknowns eliminated.

With A = J'WJ of a particle's private unknowns and B its cross term with the shared inputs, P = A^-1 and S = -P B, the
particles leave to the shared inputs the information sum of J_k'WJ_k + B'S (a Schur complement) and a right-hand side.
"""

from __future__ import annotations

from collections.abc import Mapping

import numpy as np

from reduction.methods import LN_GAMMA, LN_S, SHAPE, Array, Indices, Linearised
from reduction.normalequations import (
    Model,
    Normal,
    assemble,
    data_cost,
    evaluate,
    inverse_of,
    joined,
    line_cost,
    lines_of,
    normals_of,
    residuals_at,
)

BLOCK = 48  # particles linearised at a time, so that what is needed stays in the cache
LONGEST = 1.0  # longest step in a logarithm
FARTHEST = 4.0  # longest step of a shared input, in its u, while a particle is adjusted alone
FOLLOWED = 2  # corrections of the private unknowns after each step of the inputs


def shortened(step: Array) -> Array:
    """Factor that keeps the longest step in ln s, ln gamma and, behind the private ones, xi in bounds, by particle."""
    longest = np.abs(step[:, [LN_S, LN_GAMMA]]).max(axis=1)
    longest = np.maximum(longest, np.abs(step[:, 5:]).max(axis=1, initial=0.0) * LONGEST / FARTHEST)
    factor: Array = np.minimum(1.0, LONGEST / np.maximum(longest, 1e-300))
    return factor


class Member:
    """A session in a group, at its private unknowns `theta` (N, 5) and the inputs `xi` it was last moved to.

    `columns` tells where its inputs stand among the group's. Jacobians (`lines`, `normals`, `inverse` P, `response` S,
    `information`), `own`, the step of the private unknowns where the inputs stay, `promised` by it, `right` and the
    `cost` are those of the last `renew`. `weight` is how many particles each stands for.
    """

    def __init__(self, model: Model, theta: Array, columns: Indices, xi: Array, weight: float = 1.0) -> None:
        self.model, self.theta, self.columns, self.weight = model, theta, columns, weight
        count = model.particles
        starts = range(0, count, BLOCK) if count > BLOCK else ()
        self._blocks = [model.subset(np.arange(one, min(one + BLOCK, count), dtype=np.intp)) for one in starts]
        self.lines: Mapping[str, Linearised] = {}
        self.normals: Mapping[str, Normal] = {}
        self.renew(xi)

    def renew(self, xi: Array) -> None:
        """Linearise at theta and the group's xi."""
        own = xi[None, self.columns]
        if self._blocks:
            found = [
                lines_of(block, self.theta[place * BLOCK : place * BLOCK + block.particles], own)
                for place, block in enumerate(self._blocks)
            ]
            names = [name for name, log in self.model.logs.items() if len(log)]
            self.lines = {name: joined([lines[name] for lines in found if name in lines]) for name in names}
            self.normals = normals_of(self.model, self.lines)
        else:
            self.lines, self.normals = evaluate(self.model, self.theta, own)
        private, self._cross, shared, gradient, right = assemble(self.model, self.theta, self.normals)
        self.inverse = inverse_of(private)
        self.response: Array = -self.inverse @ self._cross
        turned = np.swapaxes(self._cross, 1, 2)
        self.information: Array = self.weight * (shared.sum(axis=0) + (turned @ self.response).sum(axis=0))
        self._eliminate(gradient, right.sum(axis=0))
        self.cost = self.weight * float(line_cost(self.model, self.theta, self.lines).sum())

    def _eliminate(self, gradient: Array, right: Array) -> None:
        self.own: Array = (self.inverse @ gradient[:, :, None])[:, :, 0]
        self.right: Array = self.weight * (right - np.einsum("njk,nj->k", self._cross, self.own))
        self.promised = self.weight * float((gradient * self.own).sum())

    def _private_gradient(self, theta: Array, residuals: Mapping[str, Array]) -> Array:
        active = self.model.active
        gradient = np.zeros((self.model.particles, 5))
        gradient[:, SHAPE] -= np.where(active[:, SHAPE], theta[:, SHAPE], 0.0)
        for name, residual in residuals.items():
            particle = self.model.logs[name].particle
            for column in np.flatnonzero(active.any(axis=0)):
                slope = self.lines[name].private[:, column] * active[particle, column]
                gradient[:, column] += np.bincount(particle, slope * residual, self.model.particles)
        return gradient

    def follow(self, theta: Array, xi: Array) -> Array:
        """Private unknowns near theta brought towards their least squares at the group's xi, by the last Jacobians.

        Their way is curved, and with many particles a straight step of the inputs soon costs more than it gains.
        """
        own = xi[None, self.columns]
        for _ in range(FOLLOWED):
            gradient = self._private_gradient(theta, residuals_at(self.model, theta, own, self.lines))
            step = (self.inverse @ gradient[:, :, None])[:, :, 0]
            theta = theta + step * shortened(step)[:, None]
        return theta

    def cost_at(self, theta: Array, xi: Array) -> float:
        """Chi-square of the readings at theta and the group's xi."""
        return self.weight * float(data_cost(self.model, theta, xi[None, self.columns]).sum())
