"""Uncertainty of every reported number: results, their components, their budgets and their degrees of freedom.

Everything is carried in logarithms; a component in the unit of a result is its value times the component of its
logarithm. With r = R(theta, xi), T = dR/dxi + dR/dtheta S and C the covariance of the shared inputs' deviations,

    cov(i, j) = dR_i P_i dR_i' [i = j] + T_i C T_j',

and T C T' splits into what each input's own error causes, T F F' T' over the inputs, and what the readings cause.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass

import numpy as np

from reduction.adjustment import Adjusted
from reduction.methods import (
    LN_GAMMA,
    LN_S,
    SHAPE,
    STEP,
    Array,
    Setting,
    Surroundings,
    particle_properties,
    surroundings,
)
from reduction.propagation import coverage_factor, welch_satterthwaite

RESULTS = ("charge_to_mass", "drag_rate", "diameter", "mass", "charge", "surface_charge_density")
UNITS = {
    "charge_to_mass": "C/kg",
    "drag_rate": "1/s",
    "diameter": "m",
    "mass": "kg",
    "charge": "C",
    "surface_charge_density": "C/m2",
}
SMALLEST = 1e-7  # of u: components below are left out, which moves no covariance by more than some 1e-6 of u1 u2
OTHERS = "other particles' readings"


@dataclass(frozen=True)
class OwnSize:
    """Size taken from the diameter method alone: reading or lot mean [m], its u, and which it is, each (N,)."""

    diameter: Array
    u: Array
    lot: Array


@dataclass(frozen=True)
class Results:
    """Results of the particles of one session and how they depend on what was adjusted.

    `value` (N, 6) signed, SI, in the order of `RESULTS`; `private` (N, 6, 6) covariance of the logarithms from the
    particle's private unknowns; `by_input` (N, 6, G) components of the logarithms by shared input; `by_readings`
    (N, 6, R) those by the readings through the shared inputs; `own` components by own log and `others` variances.
    """

    adjusted: Adjusted
    value: Array
    private: Array
    by_input: Array
    by_readings: Array
    own: Mapping[str, Array]  # log: variance (N, 6)
    log_total: Mapping[str, Array]  # log: variance (N, 6) from all particles of the session
    alone: bool

    @property
    def variance(self) -> Array:
        """Variance of the logarithms, (N, 6)."""
        spread: Array = (
            np.einsum("nrr->nr", self.private) + (self.by_input**2).sum(axis=2) + (self.by_readings**2).sum(axis=2)
        )
        return spread

    @property
    def u(self) -> Array:
        """Standard uncertainty of each result, SI, (N, 6)."""
        return np.abs(self.value) * np.sqrt(self.variance)


def result_logarithms(
    setting: Setting, around: Surroundings, theta: Array, size: OwnSize | None, deviation: Array | float = 0.0
) -> Array:
    """Ln of the size of each result at many rows of the unknowns and of the shared inputs.

    Parameters
    ----------
    setting : Setting
        Of the session.
    around : Surroundings
        Shared inputs, (P, N or 1).
    theta : ndarray, shape (P, N, 5)
        Private unknowns.
    size : OwnSize or None
        Where the size comes from the diameter method alone.
    deviation : ndarray or float
        How far that diameter lies from its reading or from the lot's mean [m], (P, N).

    Returns
    -------
    ndarray, shape (P, N, 6)
        In the order of `RESULTS`; nan where it takes a density that is not given.
    """
    particle = particle_properties(setting, around, theta, np.ones(theta.shape[1]))
    ln_s = np.broadcast_to(theta[..., LN_S], particle.diameter.shape)
    ln_d = np.log(particle.diameter)
    if size is not None:
        gain = around.values["gain_diameter"]
        own = np.where(size.lot, 1.0, gain) * (size.diameter + deviation)
        for name in set(setting.species):
            role = f"lot_diameter:{name}"
            if role in around.values:
                which = np.array([one == name for one in setting.species]) & size.lot.astype(bool)
                own = np.where(which, around.values[role] + deviation, own)
        ln_d = np.broadcast_to(np.log(own), ln_s.shape)
    ln_rho = np.log(particle.density)
    ln_m = np.log(np.pi / 6.0) + ln_rho + 3.0 * ln_d
    ln_gamma = np.broadcast_to(theta[..., LN_GAMMA], ln_s.shape)
    stacked: Array = np.stack([ln_s, ln_gamma, ln_d, ln_m, ln_s + ln_m, ln_s + ln_rho + ln_d - np.log(6.0)], axis=-1)
    return stacked


def _logarithms(adjusted: Adjusted, theta: Array, xi: Array, size: OwnSize | None) -> Array:
    setting = adjusted.model.setting
    return result_logarithms(setting, surroundings(setting, xi), theta, size)


def results_of(adjusted: Adjusted, *, alone: bool, size: OwnSize | None = None) -> Results:
    """Charge-to-mass, drag rate, diameter, mass, charge and surface charge density with all that moves them.

    m = pi/6 rho d^3, q = s m, q / (pi d^2) = s rho d / 6, d from the adjusted drag rate, or from `size`.
    """
    theta, xi = adjusted.theta, adjusted.xi
    count, wide = theta.shape[1], xi.shape[1]
    rows = 1 + 2 * (count + wide)
    thetas, xis = np.repeat(theta[None], rows, axis=0), np.repeat(xi[None], rows, axis=0)
    for index in range(count + wide):
        target = thetas[..., index] if index < count else xis[..., index - count]
        target[1 + 2 * index] += STEP
        target[2 + 2 * index] -= STEP
    logs = _logarithms(adjusted, thetas, xis, size)
    slopes = np.moveaxis((logs[1::2] - logs[2::2]) / (2.0 * STEP), 0, 2)  # (N, 6, 5 + K)
    by_private, by_shared = slopes[:, :, :count], slopes[:, :, count:]
    sign = adjusted.model.sign[:, None] * np.array([1.0, 0.0, 0.0, 0.0, 1.0, 1.0]) + np.array([0, 1, 1, 1, 0, 0])
    total = by_shared + by_private @ adjusted.response
    private = by_private @ adjusted.private @ np.swapaxes(by_private, 1, 2)
    if size is not None:
        on_size = np.array([0.0, 0.0, 1.0, 3.0, 3.0, 1.0])
        private = private + (np.nan_to_num(size.u) / size.diameter)[:, None, None] ** 2 * np.outer(on_size, on_size)
    by_input = total @ adjusted.from_priors
    by_readings = total @ adjusted.from_readings
    own, log_total = _by_log(adjusted, by_private, total, size)
    return Results(adjusted, sign * np.exp(logs[0]), private, by_input, by_readings, own, log_total, alone)


def _by_log(
    adjusted: Adjusted, by_private: Array, total: Array, size: OwnSize | None
) -> tuple[dict[str, Array], dict[str, Array]]:
    """Variance of each result's logarithm by the noise of each log: the particle's own, and the whole session's.

    With v = N^-1 (dR/dtheta, dR/dxi) of the joint normal matrix N, the noise of a log with normal matrix N_m
    contributes v' N_m v.
    """
    on_shared = total @ adjusted.shared  # (N, 6, K)
    on_private = by_private @ adjusted.private + on_shared @ np.swapaxes(adjusted.response, 1, 2)
    own, whole = {}, {}
    for name, normal in adjusted.normals.items():
        private = np.einsum("nri,nij,nrj->nr", on_private, normal.private, on_private)
        cross = np.einsum("nri,nik,nrk->nr", on_private, normal.cross, on_shared)
        shared = np.einsum("nrk,nkl,nrl->nr", on_shared, normal.shared, on_shared)
        own[name] = private + 2.0 * cross + shared
        through = np.swapaxes(adjusted.response, 1, 2)
        mixed = through @ normal.cross
        carried = through @ normal.private @ adjusted.response + mixed + np.swapaxes(mixed, 1, 2) + normal.shared
        if len(adjusted.shared) > 1 or adjusted.model.particles == 1:
            whole[name] = own[name]
        else:
            others = carried.sum(axis=0) - carried
            whole[name] = own[name] + np.einsum("nrk,nkl,nrl->nr", on_shared, others, on_shared)
    if (adjusted.model.setting.shape_spread > 0.0).any():
        own["shape_factor_spread"] = on_private[:, :, SHAPE] ** 2 * adjusted.model.active[:, SHAPE, None]
    if size is not None:
        own["diameter"] = (np.nan_to_num(size.u) / size.diameter)[:, None] ** 2 * np.array(
            [0.0, 0.0, 1.0, 9.0, 9.0, 1.0]
        )
    return own, whole


def effective_dof(results: Results, log_dof: Mapping[str, float]) -> Array:
    """Welch-Satterthwaite degrees of freedom of each result, (N, 6).

    nu = u^4 / sum(u_k^4 / nu_k); what rests on one variance estimate (the noise of a log with u from scatter, over all
    particles) is summed before the fourth power. GUM G.4.
    """
    logs = list(results.log_total)
    noise = [np.sqrt(np.clip(results.log_total[name], 0.0, None))[:, :, None] for name in logs]
    dofs = [log_dof.get(name, np.inf) for name in logs] + [one.quantity.dof for one in results.adjusted.group]
    return welch_satterthwaite(np.concatenate([*noise, results.by_input], axis=2), dofs, results.variance)


def interval(results: Results, dof: Array, coverage: float) -> tuple[Array, Array]:
    """Coverage interval of each result, (N, 6) each: value exp(+-t u) by Student's t, low below high."""
    factor = coverage_factor(np.maximum(dof, 1.0), coverage)
    spread = np.minimum(factor * np.sqrt(results.variance), 300.0)  # of what is not determined, and not reported
    ends = results.value * np.exp(-spread), results.value * np.exp(spread)
    return np.minimum(*ends), np.maximum(*ends)


def component_rows(
    results: Results, session: str, names: list[str], *, pooled: bool = False
) -> Iterator[dict[str, object]]:
    """Rows of components.csv: a square root of the covariance of the results.

    The covariance of any two results is the sum of products over equal names, of one session or of several. `pooled`
    says that sessions were adjusted together, so that the readings' part is the campaign's.
    """
    scope, owner = ("campaign", "") if pooled else ("session", session)
    together = not results.alone
    for index, name in enumerate(names):
        block = results.private[index]
        if not together:
            block = block + results.by_readings[index] @ results.by_readings[index].T
        u = np.sqrt(results.variance[index])
        known = np.isfinite(u) & (u > 0.0)
        columns = _root(np.where(np.outer(known, known), block, 0.0))
        parts = [
            (f"particle/{session}/{name}/{place + 1}", "particle", column) for place, column in enumerate(columns.T)
        ]
        parts += [
            (one.name, one.scope, results.by_input[index, :, place]) for place, one in enumerate(results.adjusted.group)
        ]
        if together:
            parts += [
                (f"{scope}/{owner}/readings/{place + 1}", scope, column)
                for place, column in enumerate(results.by_readings[index].T)
            ]
        for place, result in enumerate(RESULTS):
            if not known[place]:
                continue
            for label, shared_by, column in parts:
                if abs(column[place]) > SMALLEST * u[place]:
                    yield {
                        "session": session,
                        "particle": name,
                        "result": result,
                        "input": label,
                        "scope": shared_by,
                        "component": column[place] * results.value[index, place],
                        "unit": UNITS[result],
                    }


def _root(square: Array) -> Array:
    """Square root of a covariance by its eigenvectors, columns from large to small, each largest entry positive."""
    values, vectors = np.linalg.eigh(square)
    order = np.argsort(values)[::-1]
    columns = vectors[:, order] * np.sqrt(np.clip(values[order], 0.0, None))
    largest = columns[np.abs(columns).argmax(axis=0), np.arange(columns.shape[1])]
    root: Array = columns * np.where(largest < 0.0, -1.0, 1.0)
    return root[:, np.abs(largest) > 1e-9 * np.sqrt(max(float(values.max(initial=0.0)), 1e-300))]


def budget_rows(
    results: Results, session: str, names: list[str], scatter: Mapping[str, float], *, pooled: bool = False
) -> Iterator[dict[str, object]]:
    """Rows of budget.csv: each u broken down by physical input, own logs and, last, the other particles' readings."""
    for index, name in enumerate(names):
        for place, result in enumerate(RESULTS):
            variance, value = results.variance[index, place], results.value[index, place]
            if not np.isfinite(variance) or variance <= 0.0:
                continue
            head = {"session": session, "particle": name, "result": result}
            for column, one in enumerate(results.adjusted.group):
                part = results.by_input[index, place, column]
                if abs(part) > 1e-4 * np.sqrt(variance):
                    component = part * value
                    yield head | {
                        "input": one.name,
                        "estimate": one.written,
                        "u": one.written_u,
                        "shape": one.quantity.shape,
                        "evaluation": "A" if np.isfinite(one.quantity.dof) else "B",
                        "sensitivity": component / one.written_u,
                        "component": component,
                        "share": part**2 / variance,
                        "scope": one.scope,
                        "degrees_of_freedom": one.quantity.dof,
                    }
            left = variance - float((results.by_input[index, place] ** 2).sum())
            for log, parts in results.own.items():
                part = parts[index, place]
                left -= part
                if part > 1e-8 * variance:
                    yield head | {
                        "input": f"particle/{session}/{name}/{log}",
                        "estimate": np.nan,
                        "u": np.nan,
                        "shape": "normal",
                        "evaluation": "A" if log in scatter else "B",
                        "sensitivity": np.nan,
                        "component": np.sqrt(part) * abs(value),
                        "share": part / variance,
                        "scope": "particle",
                        "degrees_of_freedom": scatter.get(log, np.inf),
                    }
            if not results.alone:
                part = max(left, 0.0)
                yield head | {
                    "input": OTHERS,
                    "estimate": np.nan,
                    "u": np.nan,
                    "shape": "normal",
                    "evaluation": "A",
                    "sensitivity": np.nan,
                    "component": np.sqrt(part) * abs(value),
                    "share": part / variance,
                    "scope": "campaign" if pooled else "session",
                    "degrees_of_freedom": np.inf,
                }
