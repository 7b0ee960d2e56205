"""Session means of one quantity: the data of a comparison, with all that their errors have in common."""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass, field
from functools import cached_property
from typing import Any

import numpy as np
import pandas as pd
from numpy.typing import NDArray
from scipy import sparse

from reduction.units import ELEMENTARY_CHARGE

Array = NDArray[np.floating[Any]]
Facts = Mapping[str, Mapping[str, Any]]


@dataclass(frozen=True)
class Compared:
    """One quantity that can be compared: its columns, its unit, and the unit its components are in."""

    column: str
    result: str
    unit: str
    component_factor: float = 1.0


QUANTITIES = {
    "charge_to_mass": Compared("charge_to_mass_C_per_kg", "charge_to_mass", "C/kg"),
    "charge": Compared("charge_e", "charge", "e", 1.0 / ELEMENTARY_CHARGE),
    "surface_charge_density": Compared("surface_charge_density_C_per_m2", "surface_charge_density", "C/m2"),
}

JOINT = " / "
PARTICLE_WORDS = ("species", "charged_with")
SESSION_WORDS = ("species", "charged_with", "trap", "date", "operator")

LEFT_OUT = {
    "excluded": "excluded",
    "not_determined": "the quantity is not determined",
    "sign_undetermined": "the sign of the charge is not determined",
    "no_group": "no word tells the group",
}
"""Why a particle stays out of a comparison."""


@dataclass(frozen=True)
class Sample:
    """Particles with a signed value. Variance of particle i: own[i] + sum_k shared[i, k]^2, covariances by column."""

    unit: str
    session: NDArray[np.str_]
    particle: NDArray[np.str_]
    group: NDArray[np.str_]
    value: Array
    own: Array  # variance from what is the particle's alone
    shared: sparse.csr_array  # components by shared input
    names: tuple[str, ...]  # of the shared inputs
    scopes: tuple[str, ...]  # and what shares each
    left_out: Mapping[str, Mapping[str, int]] = field(default_factory=dict)  # group: reason: particles

    @property
    def u(self) -> Array:
        """Standard uncertainty of each value."""
        return np.asarray(np.sqrt(self.own + _squares(self.shared)))

    def take(self, chosen: NDArray[np.bool_]) -> Sample:
        """The chosen particles only."""
        return Sample(
            self.unit, self.session[chosen], self.particle[chosen], self.group[chosen], self.value[chosen],
            self.own[chosen], self.shared[chosen], self.names, self.scopes, self.left_out,
        )  # fmt: skip


@dataclass(frozen=True)
class Cells:
    """Means of the particles of one session and group, sorted by group, then session; all arrays by cell."""

    session: tuple[str, ...]
    group: tuple[str, ...]
    count: Array  # particles
    mean: Array  # unweighted
    squares: Array  # sum of squares about the mean
    noise: Array  # what measurement error makes of that sum on average
    own: Array  # variance of the mean from what is each particle's alone
    shared: sparse.csr_array  # (cells, inputs) components of the mean by shared input
    names: tuple[str, ...] = ()
    scopes: tuple[str, ...] = ()

    @cached_property
    def shared_variance(self) -> Array:
        """Variance of each mean by the shared inputs."""
        return _squares(self.shared)

    def of(self, group: str) -> NDArray[np.intp]:
        """Places of the cells of one group."""
        return np.array([place for place, name in enumerate(self.group) if name == group], dtype=np.intp)


def group_word(row: Mapping[str, Any], fact: Mapping[str, Any], by: str | tuple[str, ...]) -> str:
    """Group of one particle: its own word, else its session's, else the session's attribute of that name.

    A word that is none of `SESSION_WORDS` is an attribute, whatever else the session's facts hold under that name.

    With several words asked for they are joined by `JOINT`; "" where one is missing.
    """
    if not isinstance(by, str):
        words = [group_word(row, fact, one) for one in by]
        return JOINT.join(words) if all(words) else ""
    own = row.get(by, "") if by in PARTICLE_WORDS else ""
    session = fact.get(by, "") if by in SESSION_WORDS else ""
    for word in (own, session, (fact.get("attributes") or {}).get(by, "")):
        if isinstance(word, str) and word:
            return word
        if isinstance(word, int | float) and not isinstance(word, bool) and math.isfinite(word):
            return repr(word)
    return ""


def gather(
    particles: pd.DataFrame, components: pd.DataFrame, facts: Facts, *, quantity: str = "charge_to_mass",
    by: str | tuple[str, ...] = "charged_with",
) -> Sample:  # fmt: skip
    """Particles of a campaign that enter a comparison.

    Parameters
    ----------
    particles, components : DataFrame
        particles.csv and components.csv as `tables.read_table` gives them.
    facts : mapping
        Session: content of its session.json.
    quantity : str
        One of `QUANTITIES`.
    by : str or tuple of str
        Column of particles.csv, fact of a session, or word under its attributes; with several, their combinations.

    Returns
    -------
    Sample
        In the order of the table; what was left out is counted by group and reason.
    """
    what = QUANTITIES[quantity]
    rows = particles[["session", "particle", "species", "charged_with", "status", "flags", what.column]]
    groups: list[str] = []
    taken: list[bool] = []
    left_out: dict[str, dict[str, int]] = {}
    records: list[dict[str, Any]] = rows.to_dict("records")  # type: ignore[assignment]
    for row in records:
        fact = facts.get(row["session"], {})
        group = group_word(row, fact, by)
        reason = why_not(row, fact, what.column) or ("" if group else "no_group")
        groups.append(group)
        taken.append(not reason)
        if reason:
            counts = left_out.setdefault(group, {})
            counts[reason] = counts.get(reason, 0) + 1
    kept = np.array(taken, dtype=bool)
    chosen = rows[kept]
    session, particle = (chosen[name].to_numpy(dtype=np.str_) for name in ("session", "particle"))
    own, shared, names, scopes = _components(components, session, particle, what)
    return Sample(
        what.unit, session, particle, np.array(groups, dtype=np.str_)[kept],
        chosen[what.column].to_numpy(dtype=float), own, shared, names, scopes,
        {group: dict(sorted(left_out[group].items())) for group in sorted(left_out)},
    )  # fmt: skip


def why_not(row: Mapping[str, Any], fact: Mapping[str, Any], column: str) -> str:
    """Why a particle stays out of a comparison of one column; "" where it does not."""
    if row["status"] == "excluded" or fact.get("status", "ok") != "ok":
        return "excluded"
    if row["status"] != "ok" or not math.isfinite(row[column]):
        return "not_determined"
    return "sign_undetermined" if "sign_undetermined" in row["flags"].split(";") else ""


def _components(
    components: pd.DataFrame, session: NDArray[np.str_], particle: NDArray[np.str_], what: Compared
) -> tuple[Array, sparse.csr_array, tuple[str, ...], tuple[str, ...]]:
    """Own variances, components by shared input, their names and scopes."""
    chosen = components[components["result"] == what.result]
    place = {key: index for index, key in enumerate(zip(session.tolist(), particle.tolist(), strict=True))}
    at = np.array(
        [place.get(key, -1) for key in zip(chosen["session"], chosen["particle"], strict=True)], dtype=np.intp
    )
    component = chosen["component"].to_numpy(dtype=float) * what.component_factor
    private = (chosen["scope"] == "particle").to_numpy(dtype=bool)
    mine = private & (at >= 0)
    own = np.bincount(at[mine], weights=component[mine] ** 2, minlength=len(session)).astype(float)
    kept = ~private & (at >= 0)
    inputs = chosen.loc[kept, ["input", "scope"]]
    code, names = pd.factorize(inputs["input"], sort=True)
    scope_of = dict(zip(inputs["input"], inputs["scope"], strict=True))
    shape = (len(session), len(names))
    shared = sparse.csr_array((component[kept], (at[kept], code)), shape=shape)
    listed = tuple(str(name) for name in names)
    return own, shared, listed, tuple(str(scope_of[name]) for name in listed)


def _squares(shared: sparse.csr_array) -> Array:
    """Sum of squares of each row."""
    return np.asarray(shared.multiply(shared).sum(axis=1), dtype=float).ravel()


def cells_of(sample: Sample) -> Cells:
    """Unweighted means by session and group, with their covariance.

    Weights 1/u^2 with u in proportion to the value would pull a mean low; the particles of a cell count alike.
    """
    keys = list(zip(sample.group.tolist(), sample.session.tolist(), strict=True))
    places = {key: place for place, key in enumerate(sorted(set(keys)))}
    at = np.array([places[key] for key in keys], dtype=np.intp)
    width = len(places)
    count = np.bincount(at, minlength=width).astype(float)
    gathering = sparse.csr_array((np.ones(len(at)), (at, np.arange(len(at)))), shape=(width, len(at)))
    mean = gathering @ sample.value / np.maximum(count, 1.0)
    squares = gathering @ (sample.value - mean[at]) ** 2
    own = gathering @ sample.own
    shared = sparse.csr_array((gathering @ sample.shared).multiply(1.0 / np.maximum(count, 1.0)[:, None]))
    scattered = gathering @ _squares(sample.shared)
    noise = own * (1.0 - 1.0 / count) + scattered - count * _squares(shared)
    return Cells(
        tuple(session for _, session in places), tuple(group for group, _ in places), count, mean, squares,
        np.maximum(noise, 0.0), own / count**2, shared, sample.names, sample.scopes,
    )  # fmt: skip
