"""Random draws in the shape an input is stated in, and what a sample of draws says: interval, mean, spread."""

from __future__ import annotations

import hashlib

import numpy as np
from numpy.typing import NDArray

from reduction.quantity import SHAPES, Quantity

Array = NDArray[np.float64]


def stream(seed: int, name: str) -> np.random.Generator:
    """Generator of the random numbers that belong to one name, whatever else is drawn.

    Parameters
    ----------
    seed : int
        Seed of the whole run.
    name : str
        What is drawn, such as the name of an input.

    Returns
    -------
    numpy.random.Generator
        PCG64, seeded by the SHA-256 of seed and name.
    """
    digest = hashlib.sha256(f"{seed}\n{name}".encode()).digest()
    return np.random.Generator(np.random.PCG64(np.random.SeedSequence(int.from_bytes(digest, "big"))))


def draws(quantity: Quantity, *, seed: int, name: str, trials: int) -> Array:
    """Deviations of an input from its estimate in units of its u, drawn in its shape.

    (X - x) / u; more trials continue the same sequence.

    Parameters
    ----------
    quantity : Quantity
        The input; only its shape and degrees of freedom matter.
    seed : int
        Seed of the whole run.
    name : str
        Name of the input: equal names give equal draws, in every session.
    trials : int
        Number of draws.

    Returns
    -------
    ndarray, shape (trials,)
        Standard deviation 1 [1], but for a normal shape with nu degrees of freedom, which is drawn as Student's t and
        spreads by sqrt(nu / (nu - 2)).

    Notes
    -----
    JCGM 101:2008, 6.4.2 (rectangular), 6.4.5 (triangular), 6.4.6 (arcsine), 6.4.7 (normal), 6.4.9 (scaled and
    shifted t).
    """
    source = stream(seed, name)
    if quantity.shape == "normal":
        if np.isfinite(quantity.dof):
            return source.standard_t(quantity.dof, trials)
        return source.standard_normal(trials)
    if quantity.shape == "rectangular":
        unit = 2.0 * source.random(trials) - 1.0
    elif quantity.shape == "triangular":
        unit = source.random((trials, 2)).sum(axis=1) - 1.0
    elif quantity.shape == "arcsine":
        unit = np.sin(np.pi * (source.random(trials) - 0.5))
    else:
        raise ValueError(f"shape {quantity.shape}: expected one of {', '.join(sorted(SHAPES))}")
    return unit * SHAPES[quantity.shape]


def spread_factor(dof: float, *, seed: int, name: str, trials: int) -> Array:
    """Factor that turns normal draws into Student's t for all that rests on one variance estimate.

    sqrt(nu / chi2_nu), one a trial

    Parameters
    ----------
    dof : float
        Degrees of freedom nu of the variance [1].
    seed, name, trials
        As in `draws`.

    Returns
    -------
    ndarray, shape (trials,)
        Factor [1].
    """
    return np.sqrt(dof / stream(seed, name).chisquare(dof, trials))


def _places(trials: int, coverage: float) -> tuple[int, int]:
    """Draws within the interval, and how many lie below it when both tails hold the same number."""
    inside = min(int(coverage * trials + 0.5), trials - 1)
    return inside, (trials - inside + 1) // 2


def symmetric_ends(sample: Array, coverage: float) -> tuple[float, float]:
    """Probabilistically symmetric coverage interval: as much probability below it as above.

    Parameters
    ----------
    sample : ndarray, shape (M,)
        Draws, in any order.
    coverage : float
        Coverage probability p [1].

    Returns
    -------
    tuple of float
        y_(r) and y_(r + q) of the sorted draws, q = p M, r = (M - q) / 2; nan for an empty sample.

    Notes
    -----
    JCGM 101:2008, 7.7.
    """
    if not len(sample):
        return np.nan, np.nan
    inside, below = _places(len(sample), coverage)
    first = max(below - 1, 0)
    ordered = np.partition(sample, [first, first + inside])
    return float(ordered[first]), float(ordered[first + inside])


def shortest_ends(sample: Array, coverage: float) -> tuple[float, float]:
    """Shortest coverage interval: the q = p M neighbouring draws that lie closest together.

    Parameters
    ----------
    sample : ndarray, shape (M,)
        Draws, in any order.
    coverage : float
        Coverage probability p [1].

    Returns
    -------
    tuple of float
        Ends of the interval; nan for an empty sample.

    Notes
    -----
    JCGM 101:2008, 7.7.4.
    """
    if not len(sample):
        return np.nan, np.nan
    inside, _ = _places(len(sample), coverage)
    ordered = np.sort(sample)
    first = int(np.argmin(ordered[inside:] - ordered[: len(ordered) - inside]))
    return float(ordered[first]), float(ordered[first + inside])


def ends_u(sample: Array, coverage: float) -> tuple[float, float]:
    """Standard uncertainty that the number of draws leaves in the ends of the symmetric interval.

    Half the distance between the draws that stand sqrt(M p (1 - p)) places on either side, p the tail's probability.

    Parameters
    ----------
    sample : ndarray, shape (M,)
        Draws, in any order.
    coverage : float
        Coverage probability [1].

    Returns
    -------
    tuple of float
        Of the lower and of the upper end, in the unit of the sample; nan where it has fewer than 100 draws.
    """
    count = len(sample)
    if count < 100:
        return np.nan, np.nan
    ordered = np.sort(sample)
    tail = (1.0 - coverage) / 2.0
    places = int(np.ceil(np.sqrt(count * tail * (1.0 - tail))))
    found = []
    for place in (int(tail * count), int((1.0 - tail) * count)):
        low, high = max(place - places, 0), min(place + places, count - 1)
        found.append(float(ordered[high] - ordered[low]) * places / (high - low))
    return found[0], found[1]
