"""What strains an adjustment: chi-square, pulls of the shared inputs, normalised residuals, the odd one out."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from scipy import stats

from reduction.adjustment import Adjusted, adjust_together
from reduction.methods import LN_GAMMA, LN_S, SHAPE, Array

NOTABLE_PULL = 2.0
NOTABLE_P = 0.01


@dataclass(frozen=True)
class Strain:
    """How well what was adjusted together fits together."""

    chi_square: float
    dof: int
    p: float
    pulls: Array  # (K,) of the session's uncertain inputs; nan where the readings say nothing of one
    by_particle: Array  # (N,) chi-square of each particle's readings at the adjusted values
    by_log: dict[str, Array]  # log: (N,) root mean square of the normalised residuals, nan without readings
    strains_most: int  # particle with the least likely chi-square, -1 where there is one particle only
    others_move: float  # by how many u the others move without it, at most
    sentences: tuple[str, ...]


def strain_of(adjusted: Adjusted, names: list[str], *, leave_one_out: bool) -> Strain:
    """Strain of one adjusted session; `leave_one_out` also adjusts again without the particle that strains most.

    pull = (adjusted - prior) / sqrt(u_prior^2 - u_adjusted^2), about unit normal where prior and readings agree.
    """
    xi, spread = adjusted.xi[0], np.clip(1.0 - np.einsum("kk->k", adjusted.shared[0]), 0.0, None)
    with np.errstate(divide="ignore", invalid="ignore"):
        pulls = np.where(spread > 1e-4, xi / np.sqrt(spread), np.nan)
    count = adjusted.model.particles
    by_particle, readings = adjusted.theta[:, SHAPE] ** 2, np.zeros(count, np.intp)
    by_log = {}
    for name, line in adjusted.lines.items():
        log = adjusted.model.logs[name]
        square = np.bincount(log.particle, line.residual**2, count)
        own = np.bincount(log.particle, minlength=count)
        with np.errstate(divide="ignore", invalid="ignore"):
            by_log[name] = np.where(own > 0, np.sqrt(square / own), np.nan)
        by_particle, readings = by_particle + square, readings + own
    free = _free(adjusted)
    dof = int(readings.sum() - free.sum())
    chi_square = float(by_particle.sum() + xi @ xi)
    p = float(stats.chi2.sf(chi_square, dof)) if dof > 0 else float("nan")
    odd, moves = _odd_one_out(adjusted, by_particle, readings - free) if leave_one_out else (-1, float("nan"))
    found = Strain(chi_square, dof, p, pulls, by_particle, by_log, odd, moves, ())
    return Strain(chi_square, dof, p, pulls, by_particle, by_log, odd, moves, tuple(_sentences(adjusted, found, names)))


def _free(adjusted: Adjusted) -> np.ndarray:
    """Unknowns of each particle that its readings fix, (N,)."""
    free = adjusted.model.active.copy()
    free[:, SHAPE] = False
    u = np.sqrt(np.clip(np.einsum("nii->ni", adjusted.covariance), 0.0, None))
    for unknown in (LN_S, LN_GAMMA):
        free[:, unknown] &= u[:, unknown] < 100.0
    count: np.ndarray = free.sum(axis=1)
    return count


def _odd_one_out(adjusted: Adjusted, by_particle: Array, dof: np.ndarray) -> tuple[int, float]:
    """Particle whose chi-square is least likely, and how far the others move in u when it is taken out."""
    count = adjusted.model.particles
    if count < 2:
        return -1, float("nan")
    odd = int(np.argmin(stats.chi2.logsf(by_particle, np.maximum(dof, 1))))
    rest = np.delete(np.arange(count, dtype=np.intp), odd)
    without = adjust_together([adjusted.model.subset(rest)], [adjusted.theta[rest]])[0]
    if not without.settled.all():
        return odd, float("nan")
    u = np.sqrt(np.clip(np.einsum("nii->ni", adjusted.covariance[rest]), 1e-300, None))
    moved = np.abs(without.theta - adjusted.theta[rest]) / u
    return odd, float(moved[:, [LN_S, LN_GAMMA]].max())


def _sentences(adjusted: Adjusted, strain: Strain, names: list[str]) -> list[str]:
    said = []
    if strain.dof > 0:
        verdict = "as expected" if strain.p >= NOTABLE_P else "more than the stated uncertainties explain"
        said.append(
            f"Chi-square of the adjustment is {strain.chi_square:.1f} for {strain.dof} degrees of freedom "
            f"(p = {strain.p:.2g}), {verdict}."
        )
    setting = adjusted.model.setting
    for column, index in enumerate(setting.uncertain):
        pull = strain.pulls[column]
        if np.isfinite(pull) and abs(pull) > NOTABLE_PULL:
            said.append(f"The readings pull {setting.inputs[index].name} by {pull:+.1f} of what it could move.")
    for name, size in strain.by_log.items():
        for place in np.flatnonzero(np.nan_to_num(size) > NOTABLE_PULL):
            said.append(f"The {name} log of particle {names[place]} misses the adjusted values by {size[place]:.1f} u.")
    if strain.strains_most >= 0 and np.isfinite(strain.others_move):
        said.append(
            f"Particle {names[strain.strains_most]} strains the adjustment most; without it the others would move by "
            f"{strain.others_move:.2g} u at most."
        )
    return said
