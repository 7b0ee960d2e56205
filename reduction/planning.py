"""How many sessions a difference takes: power by simulation, judged by the code that judges real sessions."""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import asdict, dataclass, fields
from typing import Any

import numpy as np
from numpy.typing import NDArray
from scipy import sparse

from reduction.comparison import Comparison
from reduction.errors import ReductionError
from reduction.groupmeans import group_means
from reduction.multiplicity import smallest_p
from reduction.pairs import pairs_of
from reduction.sessionmeans import Cells
from reduction.shapes import stream

Array = NDArray[np.floating[Any]]
TRIALS = 2000
MOST_SESSIONS = 200


class PlanningError(ReductionError):
    """Guesses that make no plan."""


@dataclass(frozen=True)
class Components:
    """Standard deviations of what makes session means differ, all in the unit of the quantity, of one group."""

    between_sessions: float
    between_particles: float
    u_particle: float = 0.0  # of one particle, its own
    u_session: float = 0.0  # shared within a session, drawn anew in the next
    u_shared: float = 0.0  # shared by one group but not the other: of a species, a trap that serves one only

    def __post_init__(self) -> None:
        """Refuse what is no standard deviation."""
        for one in fields(self):
            found = getattr(self, one.name)
            if not (math.isfinite(found) and found >= 0.0):
                raise PlanningError(f"{one.name}: found {found:g}; expected a standard deviation, 0 or more.")


@dataclass(frozen=True)
class Plan:
    """Power by number of sessions in each group, and the smallest number that is enough (0 where none is)."""

    sessions: int
    wanted: float
    power: Mapping[int, float]
    particles: int
    difference: float
    level: float
    trials: int
    components: Components

    def u_power(self, sessions: int) -> float:
        """Standard uncertainty of a power, from the number of trials."""
        power = self.power[sessions]
        return math.sqrt(power * (1.0 - power) / self.trials)

    def record(self) -> dict[str, Any]:
        """The plan as a JSON object."""
        found = asdict(self)
        found["power"] = {str(count): one for count, one in sorted(self.power.items())}
        return found

    def sentences(self) -> list[str]:
        """The plan in plain words."""
        tried = ", ".join(f"{count} sessions {100 * self.power[count]:.0f} %" for count in sorted(self.power))
        found = [
            f"{self.sessions} sessions in each group, of {self.particles} particles each, would show a difference of "
            f"{self.difference:.4g} with a power of {100 * self.power[self.sessions]:.0f} % (wanted "
            f"{100 * self.wanted:.0f} %, level {100 * self.level:.3g} %)."
            if self.sessions
            else f"No number of sessions up to {max(self.power)} gives the power wanted."
        ]
        found.append(f"Power found by {self.trials} simulated campaigns each: {tried}.")
        if self.sessions:
            reached = smallest_p(self.sessions, self.sessions)
            found.append(f"Exchanging sessions alone could reach p = {reached:.2g} at the least with as many.")
        return found


def components_of(found: Comparison, group: str) -> Components:
    """Variance components of one group of a comparison, for planning more of the same.

    u of shared inputs is split by scope: those of a session are drawn anew with each, others are taken to cancel
    between groups; where they would not, state `u_shared`.
    """
    at = found.cells.of(group)
    places = {one.group: one for one in found.means.groups}
    if group not in places or not places[group].tested:
        raise PlanningError(f"group {group}: found fewer than two sessions; expected two or more, or stated guesses.")
    one = places[group]
    count = found.cells.count[at]
    session = np.flatnonzero([scope == "session" for scope in found.cells.scopes])
    own = float(np.average(found.cells.own[at] * count, weights=count))
    drawn = found.cells.shared[at][:, session]
    anew = float(drawn.multiply(drawn).sum()) / len(at)
    return Components(
        math.sqrt(one.tau_squared), math.sqrt(np.nan_to_num(one.particle_variance)), math.sqrt(own), math.sqrt(anew)
    )


def plan_sessions(
    components: Components, difference: float, *, power: float = 0.8, particles: int = 20, level: float = 0.05,
    comparisons: int = 1, most: int = MOST_SESSIONS, trials: int = TRIALS, seed: int = 1,
) -> Plan:  # fmt: skip
    """Number of sessions in each of two groups for a wanted difference at a wanted power.

    Parameters
    ----------
    components : Components
        Of both groups alike.
    difference : float
        True difference of the group means that shall be seen, in the unit of the components.
    power : float
        Wanted chance to find it [1].
    particles : int
        Particles in each session.
    level : float
        Level of the test [1]; shared by `comparisons` pairs as Holm's first step shares it.
    comparisons : int
        Pairs of groups that will be tested together.
    most : int
        Largest number of sessions tried.
    trials, seed : int
        Simulated campaigns for each number, and the seed.

    Returns
    -------
    Plan
        Numbers tried with their power; the answer is the smallest tried that suffices, found by doubling and halving.

    Raises
    ------
    PlanningError
        If a number asked for makes no sense.
    """
    _check(difference, power, particles, level, comparisons, most, trials)
    tried: dict[int, float] = {}

    def enough(sessions: int) -> bool:
        if sessions not in tried:
            tried[sessions] = power_of(components, difference, sessions, particles, level / comparisons, trials, seed)
        return tried[sessions] >= power

    low, high = 1, 2
    while not enough(high) and high < most:
        low, high = high, min(2 * high, most)
    if not enough(high):
        return Plan(0, power, tried, particles, difference, level, trials, components)
    while high - low > 1:
        middle = (low + high) // 2
        low, high = (low, middle) if enough(middle) else (middle, high)
    return Plan(high, power, tried, particles, difference, level, trials, components)


def _check(
    difference: float, power: float, particles: int, level: float, comparisons: int, most: int, trials: int
) -> None:
    wrong = [
        ("difference", difference, "a number other than 0", math.isfinite(difference) and difference != 0.0),
        ("power", power, "a probability between 0 and 1", 0.0 < power < 1.0),
        ("particles", particles, "1 or more in each session", particles >= 1),
        ("level", level, "a probability between 0 and 1", 0.0 < level < 1.0),
        ("comparisons", comparisons, "1 or more", comparisons >= 1),
        ("most sessions", most, "2 or more", most >= 2),
        ("trials", trials, "100 or more", trials >= 100),
    ]
    for what, found, expected, right in wrong:
        if not right:
            raise PlanningError(f"{what}: found {found:g}; expected {expected}.")


def power_of(
    components: Components, difference: float, sessions: int, particles: int, level: float, trials: int, seed: int
) -> float:
    """Share of simulated campaigns of two groups in which the difference has p below the level."""
    rng = stream(seed, f"plan/{sessions}/{particles}")
    hits = 0
    for _ in range(trials):
        cells = simulated_cells(rng, components, difference, sessions, particles)
        (pair,) = pairs_of(group_means(cells), coverage=1.0 - level)
        hits += bool(pair.p < level)
    return hits / trials


def simulated_cells(
    rng: np.random.Generator, components: Components, difference: float, sessions: int, particles: int
) -> Cells:
    """Session means of two groups as a campaign would find them, drawn from the components."""
    count, total = float(particles), 2 * sessions
    names = tuple(f"s{place:03d}" for place in range(total))
    group = ("a",) * sessions + ("b",) * sessions
    scatter = math.hypot(components.between_particles, components.u_particle)
    squares = scatter**2 * rng.chisquare(count - 1.0, total) if particles > 1 else np.zeros(total)
    shared = np.zeros((total, total + 2))
    shared[np.arange(total), np.arange(total)] = components.u_session
    shared[:sessions, total] = components.u_shared
    shared[sessions:, total + 1] = components.u_shared
    mean = (
        np.where(np.arange(total) < sessions, difference, 0.0)
        + components.between_sessions * rng.standard_normal(total)
        + scatter / math.sqrt(count) * rng.standard_normal(total)
        + shared @ rng.standard_normal(total + 2)
    )
    inputs = tuple(f"session/{name}/all" for name in names) + ("species/a/all", "species/b/all")
    own = components.u_particle**2
    return Cells(
        names, group, np.full(total, count), mean, squares, np.full(total, own * (count - 1.0)),
        np.full(total, own / count), sparse.csr_array(shared), inputs, ("session",) * total + ("species",) * 2,
    )  # fmt: skip
