"""Noise of the readings as it moves what was adjusted, by the logs whose variances are known alike: square roots."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from reduction.adjustment import Adjusted
from reduction.methods import LN_GAMMA, LN_S, SHAPE, Array

ROWS = [LN_S, LN_GAMMA, SHAPE]  # private unknowns that results depend on
NEGLIGIBLE = 1e-9  # of u: what contributes less is not drawn
LEAST_PIVOT = 1e-11  # of a variance, left over: below it is rounding
KNOWN = "known"  # group of the logs with stated u, and of the private unknowns' priors


@dataclass(frozen=True)
class Noise:
    """Noise of one particle's readings of one group of logs: y, normal, of its own, and a rest.

    The gradient of its private unknowns is `gradient` y (5, r), what the shared inputs get of it, those freed, is
    `onto` y (K, r) and a rest independent of it, of covariance `rest` (K, K).
    """

    gradient: Array
    onto: Array
    rest: Array


def noise_by_group(adjusted: Adjusted, index: int, groups: Sequence[str]) -> dict[str, Noise]:
    """Noise by group of logs; the private unknowns' priors count with the logs whose u is stated.

    With A, B, C of the group's normal equations: g = A^(1/2) y, f = B' A^-1 g + rest of covariance C - B' A^-1 B; the
    shared inputs, private unknowns freed, get S' g + f.
    """
    response, normals = adjusted.response[index], adjusted.normals
    whole = np.linalg.inv(adjusted.private[index])
    parts = {
        log: (normals[log].private[index], normals[log].cross[index], normals[log].shared[index]) for log in groups
    }
    stated = [normals[log].shared[index] for log in normals if log not in groups]
    left = (
        whole - sum(one[0] for one in parts.values()),
        -whole @ response - sum(one[1] for one in parts.values()),
        sum(stated, np.zeros((response.shape[1],) * 2)),
    )
    found = {}
    for group, (square, cross, shared) in ({KNOWN: left} | parts).items():
        size = np.sqrt(np.clip(np.diag(square), 0.0, None))
        scale = np.where(size > 0.0, size, 1.0)
        values, vectors = np.linalg.eigh(square / np.outer(scale, scale))
        kept = values > 1e-12
        root = np.sqrt(values[kept])
        inverse = cross.T @ (vectors[:, kept] / scale[:, None] / root)
        gradient = scale[:, None] * vectors[:, kept] * root
        found[group] = Noise(gradient, inverse + response.T @ gradient, shared - inverse @ inverse.T)
    return found


def noise_together(adjusted: Adjusted, index: int, groups: Sequence[str]) -> list[tuple[str, Array]]:
    """Noise of a particle's own readings in its unknowns, the shared inputs held, by group of logs: P g."""
    private = adjusted.private[index]
    if not groups:
        return [(KNOWN, covariance_root(private[np.ix_(ROWS, ROWS)]))]
    found = noise_by_group(adjusted, index, groups)
    return [(group, private[ROWS] @ noise.gradient) for group, noise in found.items()]


def noise_alone(
    adjusted: Adjusted, index: int, at: int, needed: Sequence[int], groups: Sequence[str]
) -> list[tuple[str, Array]]:
    """Noise of a particle's own readings in its unknowns and in its copy of the shared inputs, by group of logs.

    N^-1 N_l N^-1 for the log l with normal matrix N_l out of N; the rest belongs to the logs with stated u.
    """
    private, response, shared = adjusted.private[index], adjusted.response[index], adjusted.shared[at]
    on_shared = np.concatenate([response[ROWS] @ shared, shared[needed]])
    on_private = on_shared @ response.T
    on_private[: len(ROWS)] += private[ROWS]
    through = np.concatenate([response[ROWS], np.eye(shared.shape[0])[needed]]) @ adjusted.from_readings[at]
    left = through @ through.T
    left[: len(ROWS), : len(ROWS)] += private[np.ix_(ROWS, ROWS)]
    found = []
    for log in groups:
        normal = adjusted.normals[log]
        cross = on_private @ normal.cross[index] @ on_shared.T
        part = on_private @ normal.private[index] @ on_private.T + cross + cross.T
        part += on_shared @ normal.shared[index] @ on_shared.T
        left = left - part
        found.append((log, covariance_root(part)))
    return [(KNOWN, covariance_root(left)), *found]


def covariance_root(square: Array) -> Array:
    """Lower triangular square root of a covariance whose rows have different units, without its empty columns.

    Unlike a root by eigenvectors it follows small changes of the covariance: equal draws give nearly equal results.
    """
    size = np.sqrt(np.clip(np.diag(square), 0.0, None))
    scale = np.where(size > 0.0, size, 1.0)
    left, columns = square / np.outer(scale, scale), []
    for place in range(len(left)):
        if left[place, place] > LEAST_PIVOT:
            column = left[:, place] / np.sqrt(left[place, place])
            column[:place] = 0.0
            left = left - np.outer(column, column)
            columns.append(column)
    root: Array = scale[:, None] * np.array(columns).reshape(-1, len(left)).T
    return root
