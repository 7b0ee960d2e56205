"""Mistakes of a constant factor, recognised by what putting them right would do to chi-square; never applied."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
from scipy import stats

from reduction.adjustment import Adjusted, adjust_alone
from reduction.normalequations import Model

SUSPECT = 1e-3  # p of chi-square below which a particle's readings are searched for a slip
CURED = 0.01  # p above which a factor counts as an explanation
GAIN = 12.0  # chi-square that it must gain over the readings as they stand and over every other factor

ROOT_TWO = float(np.sqrt(2.0))


@dataclass(frozen=True)
class Slip:
    """A factor that would bring the readings of one particle together."""

    particle: int
    text: str
    chi_square: float


@dataclass(frozen=True)
class Candidate:
    """One mistake: the log it sits in, what it multiplies, and how to name it."""

    logs: tuple[str, ...]
    column: str
    factor: float
    text: str


CANDIDATES = (
    Candidate(("height", "secular"), "amplitude", ROOT_TWO,
              "the drive voltage behaves like an rms value logged as a peak value (factor root two)"),
    Candidate(("height", "secular"), "amplitude", 1.0 / ROOT_TWO,
              "the drive voltage behaves like a peak value logged as an rms value (factor root two)"),
    Candidate(("height", "secular"), "amplitude", 0.5,
              "the drive voltage behaves like a peak-to-peak value logged as a peak value (factor two)"),
    Candidate(("height", "secular"), "amplitude", 2.0,
              "the drive voltage behaves like a peak value logged as a peak-to-peak value (factor two)"),
    Candidate(("height", "secular"), "amplitude", 1.0 / (2.0 * ROOT_TWO),
              "the drive voltage behaves like a peak-to-peak value logged as an rms value (factor two root two)"),
    Candidate(("height", "secular"), "amplitude", 2.0 * ROOT_TWO,
              "the drive voltage behaves like an rms value logged as a peak-to-peak value (factor two root two)"),
    Candidate(("secular",), "observed", 1.0 / (2.0 * np.pi),
              "the secular frequency behaves like an angular frequency (factor two pi)"),
    Candidate(("secular",), "observed", 2.0 * np.pi,
              "the secular frequency behaves like a frequency divided by two pi once too often"),
)  # fmt: skip


def slips_of(alone: Adjusted, dof: np.ndarray, starts: np.ndarray) -> list[Slip]:
    """Slips that explain particles whose readings disagree badly, at most one for each particle.

    Parameters
    ----------
    alone : Adjusted
        The particles adjusted alone.
    dof : ndarray, shape (N,)
        Their degrees of freedom.
    starts : ndarray, shape (N, 5)
        Where their adjustment began.

    Returns
    -------
    list of Slip
        Those a single factor of `CANDIDATES` brings to p above 0.01, better than any other by 12 of chi-square.
    """
    bad = np.flatnonzero((dof > 0) & (stats.chi2.sf(alone.cost, np.maximum(dof, 1)) < SUSPECT)).astype(np.intp)
    if not len(bad):
        return []
    part = alone.model.subset(bad)
    costs = []
    for candidate in CANDIDATES:
        if any(name in part.logs and len(part.logs[name]) for name in candidate.logs):
            costs.append(_cost(_corrected(part, candidate), starts[bad]))
        else:
            costs.append(np.full(len(bad), np.inf))
    table = np.array(costs)
    found = []
    for place, index in enumerate(bad.tolist()):
        order = np.argsort(table[:, place], kind="stable")
        best, rival = table[order[0], place], table[order[1], place]
        cured = stats.chi2.sf(best, dof[index]) > CURED and best + GAIN < min(float(alone.cost[index]), rival)
        if cured:
            found.append(Slip(index, CANDIDATES[order[0]].text, float(best)))
    return found


def _corrected(model: Model, candidate: Candidate) -> Model:
    logs = dict(model.logs)
    for name in candidate.logs:
        if name in logs:
            log = logs[name]
            changes = {candidate.column: getattr(log, candidate.column) * candidate.factor}
            if candidate.column == "observed":
                changes["u"] = log.u * candidate.factor
            logs[name] = replace(log, **changes)
    return replace(model, logs=logs)


def _cost(model: Model, start: np.ndarray) -> np.ndarray:
    """Chi-square of each particle, infinite where the correction asks for a motion that does not exist."""
    cost: np.ndarray = adjust_alone(model, start).cost
    return np.where(np.isfinite(cost), cost, np.inf)
