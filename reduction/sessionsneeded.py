"""How many sessions to plan: spreads from a campaign's results or stated, the answer in plain words."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import asdict, dataclass
from pathlib import Path

import numpy as np
from scipy.special import chdtri

from reduction.batches import Plan as RunPlan
from reduction.comparison import Comparison
from reduction.comparisontables import compared
from reduction.errors import ReductionError, ResultsError, nearest
from reduction.planning import Components, components_of, plan_sessions
from reduction.records import FACTS
from reduction.tables import read_table
from reduction.wholefile import read_json
from reduction.wording import RESULTS, counted, joined

SPREADS = {
    "between_sessions": "between sessions",
    "between_particles": "between particles of a session",
    "u_particle": "u of one particle, its own",
    "u_session": "u shared within a session",
    "u_shared": "u shared by one group, not the other",
}
"""Standard deviations that make a plan."""

TOO_FEW = 20  # sessions below which the spread between them may be half as large again as it shows


@dataclass(frozen=True)
class Basis:
    """Spreads a plan rests on, and where they come from."""

    components: Components
    unit: str
    particles: int  # in each session
    comparisons: int
    told: tuple[str, ...]


def comparison_of(results: Path) -> Comparison:
    """Repeat the comparison of a results folder from its tables.

    Raises
    ------
    ResultsError
        If the folder holds no finished run.
    """
    try:
        records = dict(RunPlan.load(results).records(results))
        facts = {name: read_json(folder / FACTS) for name, folder in records.items()}
        settings = read_json(results / "run.json")["settings"]
        particles, components = (read_table(results / f"{name}.csv") for name in ("particles", "components"))
    except (ResultsError, FileNotFoundError, NotADirectoryError):
        message = f"{results}: there is no finished run in this folder. Run it first: motescale run CAMPAIGN {results}"
        raise ResultsError(message) from None
    return compared(particles, components, facts, settings)


def basis_of(found: Comparison, group: str | None) -> Basis:
    """Spreads of one group of a comparison; the group may be left out where only one has two sessions."""
    tested = [found.means.groups[place].group for place in found.means.tested]
    names = [one.group for one in found.means.groups]
    if group is None and len(tested) != 1:
        choice = f"Say which with --group: {joined(tested)}" if tested else "State the spreads yourself"
        message = (
            f"{len(tested)} groups have two sessions or more; expected the one whose spreads to plan with. {choice}."
        )
        raise ReductionError(message)
    chosen = group if group is not None else tested[0]
    if chosen not in names:
        raise ReductionError(f"there is no group {chosen}. {nearest(chosen, names)}")
    components = components_of(found, chosen)
    one = found.means.groups[names.index(chosen)]
    what = RESULTS[found.quantity][0]
    told = [f"Spreads of {what} in {chosen}, from {counted(one.sessions, 'session')}."]
    if components.between_sessions == 0.0:
        told.append(
            f"No spread between sessions showed, which {counted(one.sessions, 'session')} cannot rule out: state one "
            "with --between-sessions, or the plan asks for too few sessions."
        )
    elif one.sessions < TOO_FEW:
        told.append(
            f"From {counted(one.sessions, 'session')} the spread between sessions is poorly known: the true one may be "
            f"{_times_larger(one.sessions - 1):.2g} times as large (one-sided 95 %). Try larger ones with "
            "--between-sessions."
        )
    size = max(round(float(np.mean(one.counts))), 1)
    return Basis(components, found.unit, size, max(sum(pair.tested for pair in found.pairs), 1), tuple(told))


def _times_larger(freedom: int) -> float:
    """Factor below which the true standard deviation lies with 95 %: sqrt(nu / chi-square_0.05(nu))."""
    return float(np.sqrt(freedom / chdtri(freedom, 0.95)))


def plan_text(
    basis: Basis | None, stated: Mapping[str, float], *, difference: float, power: float, level: float,
    particles: int | None, comparisons: int | None, trials: int, seed: int,
) -> str:  # fmt: skip
    """Number of sessions for a wanted difference, with what it rests on.

    Parameters
    ----------
    basis : Basis or None
        From earlier results; None where everything is stated.
    stated : mapping
        Spreads stated, by the names in `SPREADS`; they replace those found.
    difference, power, level, trials, seed
        As `planning.plan_sessions` has them.
    particles, comparisons : int or None
        Particles in each session and pairs tested together; None for those of the basis, else 20 and 1.

    Raises
    ------
    ReductionError
        If the spreads between sessions and between particles come from nowhere.
    """
    missing = [name for name in ("between_sessions", "between_particles") if name not in stated]
    if basis is None and missing:
        options = joined([f"--{name.replace('_', '-')}" for name in missing])
        raise ReductionError(f"no results to take spreads from; expected RESULTS, or {options}.")
    given = asdict(basis.components) if basis is not None else {}
    components = Components(**{**given, **stated})
    each = particles if particles is not None else basis.particles if basis is not None else 20
    pairs = comparisons if comparisons is not None else basis.comparisons if basis is not None else 1
    plan = plan_sessions(
        components, difference, power=power, particles=each, level=level, comparisons=pairs, trials=trials, seed=seed
    )
    unit = f" {basis.unit}" if basis is not None else ""
    lines = list(basis.told) if basis is not None else ["Spreads as stated, in the unit of the difference."]
    for name, words in SPREADS.items():
        source = "stated" if name in stated else "found" if basis is not None and name != "u_shared" else "not stated"
        lines.append(f"  {words}: {getattr(components, name):.4g}{unit} ({source})")
    if pairs > 1:
        lines.append(f"  {pairs} pairs of groups tested together, the level shared between them")
    return "\n".join([*lines, "", *plan.sentences()])
