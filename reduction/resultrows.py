"""Rows of the tables of one session: particles, methods, agreement and shared inputs."""

from __future__ import annotations

import math
from collections.abc import Iterator, Mapping
from typing import Any

from reduction.agreement import MethodEstimate
from reduction.agreement import agreement_rows as pairs_of
from reduction.charge import air_limit_ratio, electrons
from reduction.flags import joined
from reduction.methods import DRIFT, LOGS, ORIGIN
from reduction.outcome import CHARGE, DENSITY, DIAMETER, GAMMA, MASS, Outcome, S
from reduction.preparation import OBSERVED
from reduction.tables import COLUMNS


def particle_rows(outcome: Outcome) -> Iterator[dict[str, Any]]:
    """Rows of particles.csv."""
    for index, name in enumerate(outcome.prepared.names):
        row: dict[str, Any] = {column: math.nan for column in COLUMNS["particles"]}
        used = [log for log in LOGS if readings_used(outcome, log, index)]
        row |= {
            "session": outcome.session.id,
            "particle": name,
            "species": outcome.prepared.species[index],
            "charged_with": outcome.prepared.charged_with[index],
            "methods": ";".join(used),
            "readings": sum(readings_used(outcome, log, index) for log in OBSERVED),
            "mass_from": "",
            "status": status_of(outcome, index),
        }
        if index in outcome.place:
            row |= _numbers(outcome, index, outcome.place[index])
        row["flags"] = joined(outcome.reduced.flags[index])
        yield row
    for name, _ in sorted(outcome.prepared.excluded.items()):
        yield {column: math.nan for column in COLUMNS["particles"]} | {
            "session": outcome.session.id,
            "particle": name,
            "species": outcome.prepared.described[name][0],
            "charged_with": outcome.prepared.described[name][1],
            "status": "excluded",
            "flags": "",
            "methods": "",
            "mass_from": "",
            "readings": 0,
        }


def readings_used(outcome: Outcome, log: str, index: int) -> int:
    """How many readings of a log enter for one particle."""
    readings = outcome.reduced.model.logs.get(log)
    return 0 if readings is None else int((readings.particle == index).sum())


def status_of(outcome: Outcome, index: int) -> str:
    """Status of one particle that was not excluded."""
    if outcome.reduced.reasons[index] == "the adjustment did not settle":
        return "failed"
    if index not in outcome.place or not outcome.sure[outcome.place[index], 0] or outcome.reduced.open[index]:
        return "not_determined"
    return "ok"


def _numbers(outcome: Outcome, index: int, place: int) -> dict[str, Any]:
    """Results of one particle with their uncertainties; what is not determined stays empty."""
    flags, known = outcome.reduced.flags[index], outcome.known(place)
    if status_of(outcome, index) != "ok":
        return {}
    value, u, low, high = (one[place] for one in (outcome.results.value, outcome.results.u, outcome.low, outcome.high))
    alone = outcome.reduced.alone
    row: dict[str, Any] = {
        "charge_to_mass_C_per_kg": value[S],
        "u_charge_to_mass_C_per_kg": u[S],
        "charge_to_mass_low_C_per_kg": low[S],
        "charge_to_mass_high_C_per_kg": high[S],
        "chi_square": alone.cost[index] if outcome.reduced.dof[index] else math.nan,
        "degrees_of_freedom": int(outcome.reduced.dof[index]),
        "effective_degrees_of_freedom": outcome.dof[place, S],
    }
    if known[GAMMA]:
        row |= {"drag_rate_per_s": value[GAMMA], "u_drag_rate_per_s": u[GAMMA]}
    else:
        flags.add("drag_not_determined")
    if known[DIAMETER]:
        row |= {"diameter_um": value[DIAMETER] * 1e6, "u_diameter_um": u[DIAMETER] * 1e6}
    if known[MASS]:
        row |= {
            "mass_from": outcome.campaign.options.mass_from,
            "mass_kg": value[MASS],
            "u_mass_kg": u[MASS],
            "mass_low_kg": low[MASS],
            "mass_high_kg": high[MASS],
        }
    if known[CHARGE]:
        row |= {
            "charge_C": value[CHARGE],
            "u_charge_C": u[CHARGE],
            "charge_e": float(electrons(value[CHARGE])),
            "u_charge_e": float(electrons(u[CHARGE])),
            "charge_low_e": float(electrons(low[CHARGE])),
            "charge_high_e": float(electrons(high[CHARGE])),
            "surface_charge_density_C_per_m2": value[DENSITY],
            "u_surface_charge_density_C_per_m2": u[DENSITY],
        }
        if air_limit_ratio(value[DENSITY]) > 1.0:
            flags.add("above_air_limit")
    if outcome.reduced.model.drifting[index]:
        row |= {
            "charge_drift_per_s": outcome.adjusted.theta[place, DRIFT],
            "u_charge_drift_per_s": math.sqrt(outcome.adjusted.covariance[place, DRIFT, DRIFT]),
        }
    return row


def method_rows(outcome: Outcome) -> Iterator[dict[str, Any]]:
    """Rows of methods.csv: each method alone, then the adjusted values."""
    for index, name in enumerate(outcome.prepared.names):
        for method in LOGS:
            if method in outcome.reduced.fits and outcome.reduced.fits[method][index].readings:
                yield _method_row(outcome, index, name, method)
        yield _adjusted_row(outcome, index, name)


def _method_row(outcome: Outcome, index: int, name: str, method: str) -> dict[str, Any]:
    fit = outcome.reduced.fits[method][index]
    row: dict[str, Any] = {column: math.nan for column in COLUMNS["methods"]}
    row |= {
        "session": outcome.session.id,
        "particle": name,
        "method": method,
        "status": fit.status,
        "reason": fit.reason,
        "readings": fit.readings,
        "degrees_of_freedom": fit.dof,
        "chi_square": fit.chi_square if fit.dof else math.nan,
    }
    estimate = outcome.reduced.estimates[index].get(method)
    if estimate is None:
        return row
    u = estimate.u
    if estimate.known[0]:
        row |= {
            "charge_to_mass_C_per_kg": estimate.value[0],
            "u_charge_to_mass_C_per_kg": u[0],
            "u_random_charge_to_mass_C_per_kg": abs(estimate.value[0]) * estimate.private[0],
        }
    if estimate.known[1]:
        row |= {"drag_rate_per_s": estimate.value[1], "u_drag_rate_per_s": u[1]}
    row["normalized_residual"] = _normalized_residual(outcome, index, estimate)
    if method == "height" and fit.status == "ok":
        row["height_origin_mm"] = fit.theta[ORIGIN] * 1e3
        row["u_height_origin_mm"] = estimate.u_origin * 1e3
    return row


def _normalized_residual(outcome: Outcome, index: int, estimate: MethodEstimate) -> float:
    """(method - adjusted) / sqrt(u_method^2 - u_adjusted^2) in logarithms, of q/m, else of the drag rate.

    The method is part of the adjustment, so its variance less the adjusted one is that of the difference. Where the
    method alone fixes the adjusted value the difference says nothing.
    """
    if index not in outcome.place or status_of(outcome, index) != "ok":
        return math.nan
    place = outcome.place[index]
    for quantity, result in ((0, S), (1, GAMMA)):
        if estimate.known[quantity] and outcome.known(place)[result]:
            own = float(estimate.u[quantity] / abs(estimate.value[quantity]))
            variance = own**2 - float(outcome.results.variance[place, result])
            if variance < 0.02 * own**2:
                return math.nan
            difference = math.log(abs(float(estimate.value[quantity] / outcome.results.value[place, result])))
            return difference / math.sqrt(variance)
    return math.nan


def _adjusted_row(outcome: Outcome, index: int, name: str) -> dict[str, Any]:
    row: dict[str, Any] = {column: math.nan for column in COLUMNS["methods"]}
    status = status_of(outcome, index)
    row |= {
        "session": outcome.session.id,
        "particle": name,
        "method": "adjusted",
        "status": {"ok": "ok", "failed": "not_converged"}.get(status, "not_determined"),
        "reason": outcome.reduced.reasons[index],
        "readings": sum(readings_used(outcome, log, index) for log in LOGS),
        "degrees_of_freedom": int(outcome.reduced.dof[index]),
        "chi_square": outcome.reduced.alone.cost[index] if outcome.reduced.dof[index] else math.nan,
    }
    if status != "ok":
        if not row["reason"]:
            row["reason"] = "the readings do not determine the charge-to-mass ratio"
        return row
    place = outcome.place[index]
    value, u, known = outcome.results.value[place], outcome.results.u[place], outcome.known(place)
    private = math.sqrt(max(float(outcome.results.private[place, S, S]), 0.0))
    row |= {
        "charge_to_mass_C_per_kg": value[S],
        "u_charge_to_mass_C_per_kg": u[S],
        "u_random_charge_to_mass_C_per_kg": abs(value[S]) * private,
    }
    if known[GAMMA]:
        row |= {"drag_rate_per_s": value[GAMMA], "u_drag_rate_per_s": u[GAMMA]}
    if readings_used(outcome, "height", index):
        row |= {
            "height_origin_mm": outcome.adjusted.theta[place, ORIGIN] * 1e3,
            "u_height_origin_mm": math.sqrt(outcome.adjusted.covariance[place, ORIGIN, ORIGIN]) * 1e3,
        }
    return row


def agreement_rows(outcome: Outcome) -> Iterator[dict[str, Any]]:
    """Rows of agreement.csv."""
    for index, name in enumerate(outcome.prepared.names):
        yield from pairs_of(outcome.session.id, name, outcome.reduced.estimates[index])


def input_rows(outcome: Outcome) -> Iterator[dict[str, Any]]:
    """Rows of inputs.csv: prior and, where the readings of several particles were adjusted together, posterior."""
    adjusted = adjusted_inputs(outcome)
    pulls: dict[str, float] = {}
    if outcome.strain is not None:
        setting = outcome.adjusted.model.setting
        named = (setting.inputs[index].name for index in setting.uncertain)
        pulls = dict(zip(named, outcome.strain.pulls.tolist(), strict=True))
    for one in outcome.prepared.setting.inputs:
        estimate, u = adjusted.get(one.name, (math.nan, math.nan))
        yield {
            "input": one.name,
            "scope": one.scope,
            "owner": one.owner,
            "estimate": one.written,
            "u": one.written_u,
            "unit": one.unit,
            "shape": one.quantity.shape if one.quantity.u else "exact",
            "adjusted_estimate": estimate,
            "adjusted_u": u,
            "pull": pulls.get(one.name, math.nan),
        }


def adjusted_inputs(outcome: Outcome) -> Mapping[str, tuple[float, float]]:
    """Adjusted value and u of the shared inputs in the units of their keys; none where each particle is alone."""
    if outcome.alone:
        return {}
    setting = outcome.adjusted.model.setting
    found = {}
    for column, index in enumerate(setting.uncertain):
        one = setting.inputs[index]
        estimate = one.quantity.estimate + one.quantity.u * float(outcome.adjusted.xi[0, column])
        u = one.written_u * math.sqrt(max(float(outcome.adjusted.shared[0, column, column]), 0.0))
        found[one.name] = (one.in_unit(estimate), u)
    return found
