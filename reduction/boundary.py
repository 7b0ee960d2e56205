"""Potential of charge on the panels: the ring kernel, its integrals near and at its logarithm, the dense matrix.

A ring of charge q and radius r' at z' has at (r, z) the potential q G / (4 pi eps0),

    G = (2/pi) K(m) / R,   R^2 = (r + r')^2 + (z - z')^2,   1 - m = ((r - r')^2 + (z - z')^2) / R^2,

K the complete elliptic integral of the first kind (Smythe, Static and Dynamic Electricity, section 5.35, from memory).
The charge per t of a panel is a polynomial, known by its values at Gauss-Legendre nodes: q_j, charge per t x weight.
Far panels are summed at their nodes; near ones are halved until their parts are far; a panel seen from its own node is
graded towards it.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from functools import cached_property

import numpy as np
from numpy.polynomial.legendre import leggauss, legvander
from scipy.linalg import lu_factor, lu_solve
from scipy.special import ellipkm1

from reduction.conductors import Array, Indices
from reduction.meridian import Panels

FAR = 1.0  # distance in t beyond which a panel's own nodes do
LEAF = 0.75  # distance over length of a part of a panel, beyond which its Gauss-Legendre rule does
LEAF_NODES = 16
DEEPEST = 48  # times a near panel is halved at most: a point on a panel's end, to rounding
COINCIDENT = 1e-13  # of the size of the drawing: nearer points are one, to rounding
LEAST = 1e-32  # of 1 - m, for the same reason
POINTS = 1000  # seen at a time, for the sake of memory
HALVINGS = 8  # of a panel towards its own node, before the rule for the logarithm


Kernel = Callable[[Array, Array, Array, Array], Array]


def kernel(r: Array, z: Array, rs: Array, zs: Array) -> Array:
    """G [1/m] at (r, z) of unit rings at (rs, zs) [m]."""
    dz2 = (z - zs) ** 2
    wide = (r + rs) ** 2 + dz2
    return (2.0 / np.pi) * ellipkm1(np.maximum(((r - rs) ** 2 + dz2) / wide, LEAST)) / np.sqrt(wide)


def axial_field(r: Array, z: Array, rs: Array, zs: Array) -> Array:
    """-dG/dz [1/m2] on the axis, r = 0."""
    dz = z - zs
    return dz / (rs * rs + dz * dz) ** 1.5 + 0.0 * r


def axial_gradient(r: Array, z: Array, rs: Array, zs: Array) -> Array:
    """Slope of the axial field, -d2G/dz2 [1/m3], on the axis, r = 0."""
    dz2, rs2 = (z - zs) ** 2, rs * rs
    return (rs2 - 2.0 * dz2) / (rs2 + dz2) ** 2.5 + 0.0 * r


@dataclass(frozen=True)
class Boundary:
    """Panels with `order` Gauss-Legendre nodes each."""

    panels: Panels
    order: int

    @cached_property
    def nodes(self) -> tuple[Array, Array]:
        """Gauss-Legendre nodes and weights on 0 to 1."""
        x, w = leggauss(self.order)
        return 0.5 * (x + 1.0), 0.5 * w

    @cached_property
    def _placed(self) -> tuple[Array, Array, Array]:
        t = np.broadcast_to(self.nodes[0], (len(self.panels), self.order))
        return self.panels.at(np.arange(len(self.panels)), t)

    @property
    def r(self) -> Array:
        """Radii of the nodes [m], panel after panel."""
        return self._placed[0].ravel()

    @property
    def z(self) -> Array:
        """Heights of the nodes [m]."""
        return self._placed[1].ravel()

    @cached_property
    def _to_nodes(self) -> Array:
        """From moments with Legendre polynomials to factors of the q_j, shape (order, order)."""
        t, w = self.nodes
        factors: Array = np.linalg.inv(legvander(2.0 * t - 1.0, self.order - 1)) / w
        return factors

    def spectrum(self, q: Array) -> Array:
        """Legendre coefficients of charge per t, shape (panels, order, ...), from node charges, shape (nodes, ...)."""
        whole = q.reshape(len(self.panels), self.order, -1)
        coefficients: Array = np.einsum("kj,pjm->pkm", self._to_nodes, whole)
        return coefficients

    def finer(self, q: Array, parts: int) -> tuple[Array, Array, Array]:
        """Radii, heights [m] and charges of more rings that say the same: each panel in `parts`."""
        t, w = self.nodes
        t, w = (np.arange(parts)[:, None] + t).ravel() / parts, np.tile(w, parts) / parts
        r, z, _ = self.panels.at(np.arange(len(self.panels)), np.broadcast_to(t, (len(self.panels), len(t))))
        charges = np.einsum("tk,pkm->ptm", w[:, None] * legvander(2.0 * t - 1.0, self.order - 1), self.spectrum(q))
        return r.ravel(), z.ravel(), charges.reshape(r.size, -1)

    def matrix(self) -> Array:
        """G between all nodes, so that potential x 4 pi eps0 = matrix @ q at the nodes."""
        order, own = self.order, self._own()
        matrix = np.empty((len(self.r), len(self.r)))
        few = max(1, POINTS // order)  # panels at a time
        for k in range(0, len(self.panels), few):
            rows = slice(k * order, (k + few) * order)
            matrix[rows] = self._seen(self.r[rows], self.z[rows], kernel, k)
        for k, block in enumerate(own):
            matrix[k * order : (k + 1) * order, k * order : (k + 1) * order] = block
        return matrix

    def unit_charges(self, count: int) -> Array:
        """Charges of the nodes over 4 pi eps0 [m] per volt on each of `count` conductors, shape (nodes, count).

        Raises
        ------
        LinAlgError, ValueError
            Where the matrix is singular or not finite.
        """
        volts = np.repeat(np.eye(count)[self.panels.conductor], self.order, axis=0)
        charges: Array = lu_solve(lu_factor(self.matrix(), overwrite_a=True), volts)
        return charges

    def rows(self, r: Array, z: Array, *, of: Kernel = kernel) -> Array:
        """G, or another kernel, from all nodes to points (r, z) [m], shape (points, nodes)."""
        starts = range(0, max(len(r), 1), POINTS)
        return np.concatenate([self._seen(r[k : k + POINTS], z[k : k + POINTS], of, None) for k in starts])

    def _seen(self, r: Array, z: Array, of: Kernel, first: int | None) -> Array:
        """Some rows; `first`: the points are the nodes of this panel and the next ones, and own panels are left."""
        count, order = len(self.panels), self.order
        rows = of(r[:, None], z[:, None], self.r, self.z)
        near2 = (r[:, None] - self.r) ** 2 + (z[:, None] - self.z) ** 2
        near = (near2 / self._placed[2].ravel() ** 2).reshape(len(r), count, order).min(axis=2) < FAR**2
        if first is not None:
            near[np.arange(len(r)), first + np.arange(len(r)) // order] = False
        point, panel = np.nonzero(near)
        if len(point):
            rows.reshape(len(r), count, order)[point, panel] = self._near(r[point], z[point], panel, of)
        return rows

    def _near(self, r: Array, z: Array, panel: Indices, of: Kernel) -> Array:
        """Factors of the q_j of one near panel for each point, shape (points, order)."""
        x, w = leggauss(LEAF_NODES)
        x, w = 0.5 * (x + 1.0), 0.5 * w
        moments, size = np.zeros((len(r), self.order)), np.hypot(self.r, self.z).max()
        pair, start, wide = np.arange(len(r)), np.zeros(len(r)), np.ones(len(r))
        for level in range(DEEPEST + 1):
            t = start[:, None] + wide[:, None] * x
            rs, zs, speed = self.panels.at(panel[pair], t)
            near2 = (r[pair, None] - rs) ** 2 + (z[pair, None] - zs) ** 2
            done = near2.min(axis=1) >= (LEAF * wide * speed.max(axis=1)) ** 2
            done |= (level == DEEPEST) | (near2.max(axis=1) <= (COINCIDENT * size) ** 2)
            value = of(r[pair[done], None], z[pair[done], None], rs[done], zs[done]) * w * wide[done, None]
            part = np.einsum("pq,pqk->pk", value, legvander(2.0 * t[done] - 1.0, self.order - 1))
            np.add.at(moments, pair[done], part)
            left = ~done
            if not left.any():
                break
            half = 0.5 * wide[left]
            pair, start = np.repeat(pair[left], 2), np.column_stack([start[left], start[left] + half]).ravel()
            wide = np.repeat(half, 2)
        factors: Array = moments @ self._to_nodes
        return factors

    def _own(self) -> Array:
        """Factors within each panel, shape (panels, order, order): point, then source."""
        x, w = _towards_zero()
        every, own = np.arange(len(self.panels)), np.empty((len(self.panels), self.order, self.order))
        for i, ti in enumerate(self.nodes[0]):
            t = np.concatenate([ti - ti * x, ti + (1.0 - ti) * x])
            weight = np.concatenate([ti * w, (1.0 - ti) * w])
            rs, zs, _ = self.panels.at(every, np.broadcast_to(t, (len(every), len(t))))
            value = kernel(self._placed[0][:, i, None], self._placed[1][:, i, None], rs, zs)
            own[:, i] = (value * weight) @ legvander(2.0 * t - 1.0, self.order - 1) @ self._to_nodes
        return own


def _towards_zero() -> tuple[Array, Array]:
    """Nodes and weights on 0 to 1 for a logarithm at 0: halved towards it, then x = u^4."""
    x, w = leggauss(12)
    x, w = 0.5 * (x + 1.0), 0.5 * w
    size = 0.5 ** np.arange(1, HALVINGS + 1)[:, None]
    u, v = leggauss(20)
    u, v, last = 0.5 * (u + 1.0), 0.5 * v, 0.5**HALVINGS
    nodes = np.concatenate([(size * (1.0 + x)).ravel(), last * u**4])
    return nodes, np.concatenate([(size * w).ravel(), last * 4.0 * u**3 * v])
