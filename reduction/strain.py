"""What strains an adjustment: chi-square, pulls of the shared inputs, normalised residuals, the odd one out."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np
from scipy import stats

from reduction.adjustment import Adjusted, adjust_together, ranks
from reduction.methods import LN_GAMMA, LN_S, SHAPE, Array, Indices

NOTABLE_PULL = 2.0
NOTABLE_P = 0.01


@dataclass(frozen=True)
class OddOneOut:
    """The particle of all adjusted together whose chi-square is least likely."""

    member: int  # place of its session among those adjusted together
    particle: int  # its place in the session
    name: str  # as a reader knows it
    others_move: float  # by how many u the others move without it, at most


@dataclass(frozen=True)
class Strain:
    """How well what was adjusted together fits together."""

    chi_square: float
    dof: int
    p: float
    pulls: Array  # (K,) of the session's uncertain inputs; nan where the readings say nothing of one
    by_particle: Array  # (N,) chi-square of each particle's readings at the adjusted values
    by_log: dict[str, Array]  # log: (N,) root mean square of the normalised residuals, nan without readings
    odd: OddOneOut | None
    sentences: tuple[str, ...]


def strain_of(adjusted: Adjusted, names: Sequence[str], odd: OddOneOut | None) -> Strain:
    """Strain of one adjusted session; `odd` is that of `odd_one_out` for all that was adjusted with it.

    pull = (adjusted - prior) / sqrt(u_prior^2 - u_adjusted^2), about unit normal where prior and readings agree.
    """
    xi, spread = adjusted.xi[0], np.clip(1.0 - np.einsum("kk->k", adjusted.shared[0]), 0.0, None)
    with np.errstate(divide="ignore", invalid="ignore"):
        pulls = np.where(spread > 1e-4, xi / np.sqrt(spread), np.nan)
    by_log = {}
    for name, line in adjusted.lines.items():
        log = adjusted.model.logs[name]
        square = np.bincount(log.particle, line.residual**2, adjusted.model.particles)
        own = np.bincount(log.particle, minlength=adjusted.model.particles)
        with np.errstate(divide="ignore", invalid="ignore"):
            by_log[name] = np.where(own > 0, np.sqrt(square / own), np.nan)
    by_particle, spare = _by_particle(adjusted)
    dof = int(spare.sum())
    chi_square = float(by_particle.sum() + xi @ xi)
    p = float(stats.chi2.sf(chi_square, dof)) if dof > 0 else float("nan")
    found = Strain(chi_square, dof, p, pulls, by_particle, by_log, odd, ())
    return replace(found, sentences=tuple(_sentences(adjusted, found, names)))


def _by_particle(adjusted: Adjusted) -> tuple[Array, Indices]:
    """Chi-square of each particle's readings at the adjusted values, and its readings less its unknowns, (N,)."""
    count = adjusted.model.particles
    total, readings = adjusted.theta[:, SHAPE] ** 2, np.zeros(count, np.intp)
    for name, line in adjusted.lines.items():
        log = adjusted.model.logs[name]
        total = total + np.bincount(log.particle, line.residual**2, count)
        readings = readings + np.bincount(log.particle, minlength=count)
    spare: Indices = readings - ranks(adjusted)[0]
    return total, spare


def odd_one_out(group: Sequence[Adjusted], names: Sequence[Sequence[str]]) -> OddOneOut | None:
    """The particle that strains what was adjusted together most, and how far the others move in u without it.

    Parameters
    ----------
    group : sequence of Adjusted
        One session, or all sessions of a campaign, as `adjust_together` gave them.
    names : sequence of sequence of str
        Names of their particles.

    Returns
    -------
    OddOneOut or None
        None where there is one particle only, or where the others alone do not settle.
    """
    likelihood, places = [], []
    for member, adjusted in enumerate(group):
        total, spare = _by_particle(adjusted)
        for particle, value in enumerate(np.asarray(stats.chi2.logsf(total, np.maximum(spare, 1))).tolist()):
            likelihood.append(value)
            places.append((member, particle))
    if len(places) < 2:
        return None
    member, particle = places[int(np.argmin(likelihood))]
    kept = [np.arange(one.model.particles, dtype=np.intp) for one in group]
    kept[member] = np.delete(kept[member], particle)
    left = [(one, rest) for one, rest in zip(group, kept, strict=True) if len(rest)]
    without = adjust_together([one.model.subset(rest) for one, rest in left], [one.theta[rest] for one, rest in left])
    if not all(one.settled.all() for one in without):
        return None
    moved = 0.0
    for (one, rest), other in zip(left, without, strict=True):
        u = np.sqrt(np.clip(np.einsum("nii->ni", one.covariance[rest]), 1e-300, None))
        moved = max(moved, float((np.abs(other.theta - one.theta[rest]) / u)[:, [LN_S, LN_GAMMA]].max()))
    return OddOneOut(member, particle, names[member][particle], moved)


def _sentences(adjusted: Adjusted, strain: Strain, names: Sequence[str]) -> list[str]:
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
        for place in np.flatnonzero(np.nan_to_num(size) > NOTABLE_PULL).tolist():
            said.append(f"The {name} log of particle {names[place]} misses the adjusted values by {size[place]:.1f} u.")
    if strain.odd is not None:
        said.append(
            f"Particle {strain.odd.name} strains the adjustment most; without it the others would move by "
            f"{strain.odd.others_move:.2g} u at most."
        )
    return said
