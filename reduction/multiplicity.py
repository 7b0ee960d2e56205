"""Student's t for a given standing, Holm's correction, and the smallest p that few sessions can reach."""

from __future__ import annotations

import math
from typing import Any

import numpy as np
from numpy.typing import NDArray
from scipy.special import stdtr, stdtrit

Array = NDArray[np.floating[Any]]


def reach(freedom: float, coverage: float) -> float:
    """Student's t factor k of a two-sided interval, estimate +- k u."""
    return float(stdtrit(freedom, 0.5 + 0.5 * coverage))


def two_sided(t: float, freedom: float) -> float:
    """Probability of |T| beyond |t| by Student's distribution."""
    return 2.0 * float(stdtr(freedom, -abs(t)))


def holm(p: Array) -> Array:
    """Holm's adjusted p: in rising order the running maximum of (m - j) p_j, j from 0, at most 1; NaN passed over.

    Holm, Scand. J. Statist. 6 (1979) 65.
    """
    adjusted = np.full(len(p), math.nan)
    known = np.flatnonzero(~np.isnan(p))
    order = known[np.argsort(p[known], kind="stable")]
    adjusted[order] = np.minimum(np.maximum.accumulate(np.arange(len(order), 0, -1) * p[order]), 1.0)
    return adjusted


def smallest_p(sessions_a: int, sessions_b: int) -> float:
    """Smallest two-sided p by exchanging sessions between two groups: 2 / C(a + b, a).

    Whatever the data, no test that rests on the exchange of sessions alone can go below it.
    """
    return min(1.0, 2.0 / math.comb(sessions_a + sessions_b, sessions_a))
