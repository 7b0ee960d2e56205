"""One session solved: methods alone, particles alone, all together."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, replace

import numpy as np
from scipy import stats

from reduction.adjustment import (
    Adjusted,
    adjust_alone,
    adjust_together,
    ranks,
)
from reduction.agreement import MethodEstimate
from reduction.fits import ROUNDING, UNDETERMINED, MethodFit, drift_asked_for, fit_method
from reduction.methods import (
    DRIFT,
    LN_GAMMA,
    LN_S,
    LOGS,
    ORIGIN,
    SHAPE,
    Array,
    Flags,
    Indices,
    Readings,
    linearise,
    predict,
    with_departure,
    with_reynolds,
)
from reduction.normalequations import Model, inverse_of, normal_equations
from reduction.preparation import Prepared, with_u
from reduction.slips import Slip, slips_of
from reduction.starts import Start, starts_of

DEPARTURE_ROUNDS = 3  # an error of the shift shrinks by its own relative size in each
OUTLIER = 4.0  # standard deviations from its method's fit beyond which a reading is flagged
POOR_P = 1e-3  # p of chi-square below which a secular log is doubted
DISTINCT = 0.3  # in ln s, beyond which two solutions differ however wide u is
DOUBLE = 4.0  # chi-square within which a second solution counts as equally good
ACTIVE = {"balance": (LN_S,), "height": (LN_S, LN_GAMMA, ORIGIN), "secular": (LN_S, LN_GAMMA), "diameter": (LN_GAMMA,)}


@dataclass
class Reduced:
    """A session while and after it is reduced; arrays and lists run over the particles."""

    prepared: Prepared
    model: Model
    fits: dict[str, list[MethodFit]]
    scatter: dict[str, float]  # log: degrees of freedom of the u taken from its scatter
    noise_dof: dict[str, float]  # the same, and of logs whose u was enlarged by their Birge ratios
    flags: list[set[str]]
    alone: Adjusted
    estimates: list[dict[str, MethodEstimate]]
    dof: Indices  # of each particle adjusted alone
    open: Flags  # particles with no single solution, left to themselves
    reasons: list[str]
    slips: list[Slip]


def _provisional(readings: Mapping[str, Readings], unstated: Mapping[str, Flags]) -> dict[str, Readings]:
    """A rough u, equal over the log, where none is stated: only its ratio to the others matters until the scatter."""
    found = {}
    for name, log in readings.items():
        rough = {"balance": 0.01, "height": 0.05, "secular": 0.01}.get(name, 0.0)
        least = {"balance": 1e-3, "height": 1e-6, "secular": 1e-3}.get(name, 1.0)
        size = float(np.median(np.abs(log.observed))) if len(log) else 0.0
        if name == "height" and len(log):
            size = float(np.ptp(log.observed))
        found[name] = with_u(log, np.where(unstated[name], max(rough * size, least), log.u))
    return found


def fit_session(prepared: Prepared, scatter_policy: str) -> Reduced:
    """Fit every method of every particle alone and adjust every particle alone."""
    count = len(prepared.names)
    logs = _provisional(prepared.logs, prepared.unstated)
    model = Model(prepared.setting, logs, np.ones(count), np.zeros(count, bool))
    drifting = _drifting(model, prepared)
    model = _with_drift(model, drifting)
    model, starts, theta = _started(model)
    model = _with_departures(model, theta)
    fits = _fit_methods(model, theta)
    scatter: dict[str, float] = {}
    if any(mask.any() for mask in prepared.unstated.values()):
        model, scatter = _from_scatter(model, prepared, fits)
        model, starts, theta = _started(model)
        model = _with_departures(model, theta)
        fits = _fit_methods(model, theta)
        _say_what_lacks_u(prepared, model, fits)
    flags = [_method_flags(fits, index, scatter) for index in range(count)]
    model = _possible(model, fits, starts, flags)
    alone, is_open, reasons = _alone(model, starts, theta, flags)
    alone = _without_impossible_secular(alone, fits, is_open, reasons, flags)
    noise_dof = dict(scatter)
    if scatter_policy == "inflate":
        inflated = _inflated(alone, fits, scatter, flags)
        if inflated is not alone.model:
            noise_dof |= _inflated_dof(alone, inflated, fits)
            alone = adjust_alone(inflated, alone.theta, near=True)
    dof = alone_dof(alone)
    for index in range(count):
        if not scatter and dof[index] > 0 and stats.chi2.sf(alone.cost[index], dof[index]) < 0.01:
            flags[index].add("chi_square")
        if drifting[index]:
            flags[index].add("charge_drift")
        if not prepared.setting.has_density[index]:
            flags[index].add("no_density")
    slips = [] if scatter else slips_of(alone, dof, theta)
    for slip in slips:
        flags[slip.particle].add("factor_suspected")
    estimates = _method_estimates(alone.model, fits)
    return Reduced(
        prepared, alone.model, fits, scatter, noise_dof, flags, alone, estimates, dof, is_open, reasons, slips
    )


def without_diameter(reduced: Reduced) -> Reduced:
    """The same with the diameter method out of the adjustment, to be compared with it."""
    model = reduced.model.without("diameter")
    if "height" in model.logs:  # shifts estimated with the diameter known must not stay
        height = model.logs["height"]
        none = np.zeros(len(height))
        model = replace(model, logs={**model.logs, "height": replace(height, reynolds=none, departure=none)})
    alone = _with_shifts(adjust_alone(model, reduced.alone.theta))
    return replace(reduced, model=alone.model, alone=alone, dof=alone_dof(alone))


def _started(model: Model) -> tuple[Model, list[list[Start]], Array]:
    """Starts of every particle, best first, and the model and unknowns that go with the best."""
    starts = [starts_of(model, index) for index in range(model.particles)]
    theta = np.array([one[0].theta if one else np.zeros(5) for one in starts]).reshape(model.particles, 5)
    return replace(model, sign=np.array([one[0].sign if one else 1.0 for one in starts])), starts, theta


def _with_drift(model: Model, drifting: Flags) -> Model:
    logs = {
        name: replace(log, elapsed=np.where(drifting[log.particle], log.elapsed, 0.0))
        for name, log in model.logs.items()
    }
    return replace(model, logs=logs, drifting=drifting)


def _drifting(model: Model, prepared: Prepared) -> Flags:
    """Particles whose balance log asks for a charge drift."""
    found = np.zeros(model.particles, bool)
    log = model.logs.get("balance")
    if log is None:
        return found
    for index in np.unique(log.particle[log.elapsed != 0.0]):
        scatter = bool(prepared.unstated["balance"][log.particle == index].any())
        found[index] = drift_asked_for(log.of(int(index)), scatter=scatter)
    return found


def _fit_methods(model: Model, theta: Array) -> dict[str, list[MethodFit]]:
    """Every method of every particle by itself, from theta on; a drift found in the balance applies to every log."""
    fits: dict[str, list[MethodFit]] = {}
    theta = theta.copy()
    for name in LOGS:
        if name not in model.logs:
            continue
        log = model.logs[name]
        fits[name] = []
        for index in range(model.particles):
            active = ACTIVE[name] + ((DRIFT,) if name == "balance" and model.drifting[index] else ())
            fit = fit_method(
                name, model.setting.of(index), log.of(index), theta[index], float(model.sign[index]), active
            )
            fits[name].append(_qualified(fit, log.of(index)))
            if DRIFT in active and np.isfinite(fit.theta[DRIFT]):
                theta[index, DRIFT] = fit.theta[DRIFT]
    return fits


def _say_what_lacks_u(prepared: Prepared, model: Model, fits: dict[str, list[MethodFit]]) -> None:
    """Give a reason to the methods whose readings have no u, stated or from scatter."""
    for name, before in prepared.logs.items():
        after = model.logs[name]
        for index, fit in enumerate(fits[name]):
            count = int((before.particle == index).sum())
            if count and not (after.particle == index).any():
                reason = "no uncertainty is stated, and there is no scatter to take one from"
                fits[name][index] = replace(fit, status="few_readings", reason=reason, readings=count)


def _qualified(fit: MethodFit, log: Readings) -> MethodFit:
    """Say what the rank test cannot: one drive voltage, one dc voltage, no sign."""
    if fit.method == "secular" and fit.status == "ok":
        return replace(fit, sign=0.0)
    if fit.method != "height" or not len(log) or fit.status not in ("ok", "not_determined"):
        return fit
    if np.ptp(log.voltage) == 0.0:
        return replace(
            fit,
            status="not_determined",
            determined=(False, False),
            reason="heights at one dc voltage have two solutions",
        )
    if np.ptp(log.amplitude / log.omega**2) == 0.0 and fit.status == "not_determined":
        return replace(fit, reason="one drive voltage gives a relation between charge-to-mass and drag rate only")
    return fit


def _from_scatter(
    model: Model, prepared: Prepared, fits: Mapping[str, list[MethodFit]]
) -> tuple[Model, dict[str, float]]:
    """Replace missing u by the scatter of each log about the methods' fits, pooled over the session.

    u^2 = sum of squared residuals / degrees of freedom; a log with none left cannot be used.
    """
    logs, scatter = dict(model.logs), {}
    for name, log in model.logs.items():
        missing = prepared.unstated[name]
        if not missing.any():
            continue
        total, dof = 0.0, 0.0
        for index, fit in enumerate(fits[name]):
            own = missing[log.particle == index]
            if fit.status in ("ok", "not_determined") and fit.dof > 0 and own.any():
                u = log.u[log.particle == index][own]
                total += float(((fit.residual[own] * u) ** 2).sum())
                dof += fit.dof * own.sum() / len(own)
        size = float(np.abs(log.observed).max())
        if dof < 1.0 or total <= dof * (ROUNDING * size) ** 2:
            logs[name] = log.select(~missing)
            continue
        logs[name] = with_u(log, np.where(missing, np.sqrt(total / dof), log.u))
        scatter[name] = dof
    return replace(model, logs=logs), scatter


def _method_flags(fits: Mapping[str, list[MethodFit]], index: int, scatter: Mapping[str, float]) -> set[str]:
    found = set()
    for name, own in fits.items():
        fit = own[index]
        if fit.status in ("no_oscillation", "unstable"):
            found.add(fit.status)
        if name in scatter and fit.status not in ("few_readings", "no_oscillation", "unstable"):
            found.add("u_from_scatter")
    return found


def _inflated(
    alone: Adjusted, fits: Mapping[str, list[MethodFit]], scatter: Mapping[str, float], flags: list[set[str]]
) -> Model:
    """Enlarge the u of a log's readings by the Birge ratio sqrt(chi2 / nu) where that exceeds 1.

    Chi-square is that of the adjusted values: a log is not to be blamed for errors of the shared inputs, which the
    method alone holds at their estimates.
    """
    logs, larger = dict(alone.model.logs), False
    for name, line in alone.lines.items():
        if name in scatter or name == "diameter":
            continue
        log = logs[name]
        chi_square = np.bincount(log.particle, line.residual**2, alone.model.particles)
        factor = np.ones(alone.model.particles)
        for index, fit in enumerate(fits[name]):
            if fit.dof > 0 and chi_square[index] > fit.dof:
                factor[index] = np.sqrt(chi_square[index] / fit.dof)
                flags[index].add("inflated")
                larger = True
        logs[name] = replace(log, u=log.u * factor[log.particle], u_voltage=log.u_voltage * factor[log.particle])
    return replace(alone.model, logs=logs) if larger else alone.model


def _inflated_dof(alone: Adjusted, inflated: Model, fits: Mapping[str, list[MethodFit]]) -> dict[str, float]:
    """Median degrees of freedom of the Birge ratios that enlarged each log's u: those of the enlarged u."""
    found = {}
    for name, log in inflated.logs.items():
        larger = np.unique(log.particle[np.asarray(log.u > alone.model.logs[name].u)])
        if len(larger):
            found[name] = float(np.median([fits[name][index].dof for index in larger.tolist()]))
    return found


def _left_out(fits: dict[str, list[MethodFit]], name: str, index: int, flags: list[set[str]]) -> None:
    """Say of one method that its readings ask for a motion the particle cannot have."""
    status = "no_oscillation" if name == "secular" else "unstable"
    reason = {
        "no_oscillation": "no secular oscillation exists at the particle's charge and drag; the log is left out",
        "unstable": "the readings lie outside the stable region at the particle's charge and drag; the log is left out",
    }[status]
    fits[name][index] = replace(fits[name][index], status=status, reason=reason, determined=(False, False))
    flags[index].add(status)


def _possible(
    model: Model, fits: dict[str, list[MethodFit]], starts: list[list[Start]], flags: list[set[str]]
) -> Model:
    """Without the logs whose readings no motion of the particle can give, and particles nothing can be said of."""
    logs = {}
    for name, log in model.logs.items():
        bad = []
        for index, fit in enumerate(fits[name]):
            impossible = bool(starts[index]) and name in starts[index][0].impossible
            if fit.status in ("no_oscillation", "unstable") or impossible:
                if impossible:
                    _left_out(fits, name, index, flags)
                bad.append(index)
            elif not starts[index]:
                bad.append(index)
        logs[name] = log.select(~np.isin(log.particle, bad))
    return replace(model, logs=logs)


def _without_impossible_secular(
    alone: Adjusted, fits: dict[str, list[MethodFit]], is_open: Flags, reasons: list[str], flags: list[set[str]]
) -> Adjusted:
    """Leave out secular logs that only a far-off compromise can accommodate.

    Where all logs together fit badly, the particle is adjusted without its secular log; if the motion then has no
    secular oscillation at the drives logged, the log cannot be what it says.
    """
    model = alone.model
    secular = model.logs.get("secular")
    if secular is None:
        return alone
    logged = np.isin(np.arange(model.particles), secular.particle)
    other = np.zeros(model.particles, bool)
    for name in ("balance", "height"):
        if name in model.logs:
            other |= np.isin(np.arange(model.particles), model.logs[name].particle)
    dof = alone_dof(alone)
    bad = ~alone.settled | (stats.chi2.sf(alone.cost, np.maximum(dof, 1)) < POOR_P)
    doubtful = np.flatnonzero(logged & other & bad).astype(np.intp)
    if not len(doubtful):
        return alone
    part = model.subset(doubtful).without("secular")
    part, starts, theta = _started(part)
    rest = adjust_alone(part, theta)
    asked = {"secular": model.subset(doubtful).logs["secular"]}
    readings = predict(part.setting, asked, rest.theta[None], part.sign, rest.xi[None])["secular"].reading[0]
    missing = np.bincount(asked["secular"].particle, ~np.isfinite(readings), len(doubtful)) > 0
    sure = np.asarray(
        is_determined(rest).all(axis=1)
    )  # where the drag is open, a motion without oscillation proves nothing
    gone = [int(index) for place, index in enumerate(doubtful) if missing[place] and sure[place]]
    if not gone:
        return alone
    theta_all, sign = alone.theta.copy(), model.sign.copy()
    for place, index in enumerate(doubtful.tolist()):
        if index in gone:
            theta_all[index], sign[index] = rest.theta[place], part.sign[place]
            is_open[index], reasons[index] = False, ""
            flags[index].discard("two_solutions")
            _left_out(fits, "secular", index, flags)
    kept = secular.select(~np.isin(secular.particle, gone))
    again = _with_shifts(adjust_alone(replace(model, sign=sign, logs={**model.logs, "secular": kept}), theta_all))
    for index in gone:
        if not again.settled[index]:
            is_open[index], reasons[index] = True, "the adjustment did not settle"
    return again


def _alone(
    model: Model, starts: list[list[Start]], theta: Array, flags: list[set[str]]
) -> tuple[Adjusted, Flags, list[str]]:
    """Each particle adjusted alone from every start; what fits equally well elsewhere is said, not chosen."""
    count = model.particles
    is_open, reasons = np.zeros(count, bool), [""] * count
    best = _with_shifts(adjust_alone(model, theta))
    sign, chosen, cost = model.sign.copy(), best.theta.copy(), best.cost.copy()
    rivals: list[list[tuple[float, float, Array]]] = [[] for _ in range(count)]
    for rank in range(1, max((len(one) for one in starts), default=0)):
        indices = np.array([index for index in range(count) if len(starts[index]) > rank], dtype=np.intp)
        part = model.subset(indices)
        part = replace(part, sign=np.array([starts[index][rank].sign for index in indices]))
        other = adjust_alone(part, np.array([starts[index][rank].theta for index in indices]))
        for place, index in enumerate(indices):
            rivals[index].append((float(other.cost[place]), float(part.sign[place]), other.theta[place]))
            if other.cost[place] < cost[index] - 0.01:
                rivals[index].append((float(cost[index]), float(sign[index]), chosen[index].copy()))
                cost[index], sign[index], chosen[index] = other.cost[place], part.sign[place], other.theta[place]
    if (sign != best.model.sign).any() or (chosen != best.theta).any():
        best = _with_shifts(adjust_alone(replace(model, sign=sign), chosen))
    u = np.sqrt(np.clip(np.einsum("nii->ni", best.covariance), 0.0, None))
    ranked = ranks(best)[1]
    for index in range(count):
        for rival_cost, rival_sign, rival in rivals[index]:
            apart = min(5.0 * u[index, LN_S], DISTINCT)
            same = rival_sign == sign[index] and abs(rival[LN_S] - best.theta[index, LN_S]) < apart
            if not same and rival_cost < best.cost[index] + DOUBLE:
                is_open[index], reasons[index] = True, "two solutions fit the readings equally well"
                flags[index].add("two_solutions")
        signed = any(
            len(log) and (log.particle == index).any()
            for name, log in best.model.logs.items()
            if name in ("balance", "height")
        )
        if not signed and starts[index]:
            flags[index].add("sign_undetermined")
        if not starts[index]:
            is_open[index], reasons[index] = True, "no log says anything of its charge-to-mass ratio"
        elif not ranked[index, LN_S]:
            is_open[index], reasons[index] = True, reasons[index] or "the readings leave the charge-to-mass ratio open"
        elif not best.settled[index] and not is_open[index]:
            is_open[index], reasons[index] = True, "the adjustment did not settle"
    return best, is_open, reasons


def _with_shifts(adjusted: Adjusted) -> Adjusted:
    """The same adjusted again with the shifts of heights that its values imply.

    Those of the Reynolds number are a component and estimated once; those of the field's departure may be corrected
    for, and are then estimated until the values they come from follow them no more.
    """
    model = adjusted.model
    if "height" not in model.logs:
        return adjusted
    for _ in range(1 if model.setting.field_map is None else DEPARTURE_ROUNDS):
        height = with_reynolds(model.setting, model.logs["height"], adjusted.theta, model.sign)
        height = with_departure(model.setting, height, adjusted.theta, model.sign)
        model = replace(model, logs={**model.logs, "height": height})
        adjusted = adjust_alone(model, adjusted.theta, near=True)
    return adjusted


def _with_departures(model: Model, theta: Array) -> Model:
    """The model with heights shifted as the field's departure has it at its starts, before anything is fitted."""
    if "height" not in model.logs or model.setting.field_map is None:
        return model
    height = with_departure(model.setting, model.logs["height"], theta, model.sign, observed=True)
    return replace(model, logs={**model.logs, "height": height})


def alone_dof(alone: Adjusted) -> Indices:
    """Readings less the unknowns they fix of each particle adjusted alone, (N,)."""
    readings = sum((normal.readings for normal in alone.normals.values()), np.zeros(alone.model.particles, np.intp))
    left: Indices = np.maximum(readings - ranks(alone)[0], 0)
    return left


def _method_estimates(model: Model, fits: Mapping[str, list[MethodFit]]) -> list[dict[str, MethodEstimate]]:
    """Value, own u and components by shared input of every method that determines something, by particle."""
    found: list[dict[str, MethodEstimate]] = [{} for _ in range(model.particles)]
    width = len(model.setting.uncertain)
    for name, log in model.logs.items():
        theta = np.zeros((model.particles, 5))
        active = np.zeros((model.particles, 5), bool)
        usable = []
        for index, fit in enumerate(fits[name]):
            if any(fit.determined) and (log.particle == index).any():
                usable.append(index)
                theta[index] = np.nan_to_num(fit.theta, nan=0.0)
                active[index, list(fit.active)] = True
                active[index, SHAPE] = name == "diameter" and model.setting.shape_spread[index] > 0.0
        if not usable:
            continue
        part = model.subset(np.array(usable, dtype=np.intp))
        theta, active = theta[usable], active[usable]
        line = linearise(part.setting, {name: part.logs[name]}, theta, part.sign, np.zeros((1, width)))[name]
        normal = normal_equations(part.logs[name], line, part.particles, active)
        square = normal.private.copy()
        diagonal = np.where(active, 0.0, 1.0) + np.where(active & (np.arange(5) == SHAPE), 1.0, 0.0)
        diagonal[:, [LN_S, LN_GAMMA]] += 1e-8
        square[:, np.arange(5), np.arange(5)] += diagonal
        inverse = inverse_of(square)
        response = -inverse @ normal.cross
        for place, index in enumerate(usable):
            fit = fits[name][index]
            sign = part.sign[place] if fit.sign else 1.0
            value = np.array([sign * np.exp(theta[place, LN_S]), np.exp(theta[place, LN_GAMMA])])
            private = np.sqrt(np.diag(inverse[place])[[LN_S, LN_GAMMA]])
            spread = private**2 + (response[place][[LN_S, LN_GAMMA]] ** 2).sum(axis=1)
            known = np.array(fit.determined, dtype=bool) & (np.sqrt(spread) <= UNDETERMINED)
            origin = inverse[place, ORIGIN, ORIGIN] + (response[place, ORIGIN] ** 2).sum()
            found[index][name] = MethodEstimate(
                value,
                private,
                response[place][[LN_S, LN_GAMMA]],
                known,
                bool(fit.sign),
                float(np.sqrt(origin)),
            )
    return found


def adjust_session(reduced: Reduced, adjust: str) -> tuple[Adjusted, Indices]:
    """Final adjustment of the particles that have one solution, and which those are.

    With `adjust: particle` each keeps to itself; else the session's particles pin the inputs they share.
    """
    chosen = np.flatnonzero(~reduced.open).astype(np.intp)
    if adjust == "particle" or not len(chosen):
        return reduced.alone, np.arange(reduced.model.particles, dtype=np.intp)
    model = reduced.model.subset(chosen)
    return adjust_together([model], [reduced.alone.theta[chosen]])[0], chosen


def is_determined(adjusted: Adjusted) -> Flags:
    """Whether charge-to-mass ratio and drag rate of each particle are determined, (N, 2): rank, and u(ln) <= 0.5."""
    u = np.sqrt(np.clip(np.einsum("nii->ni", adjusted.covariance), 0.0, None))
    sure: Flags = (u <= UNDETERMINED) & ranks(adjusted)[1] & adjusted.settled[:, None]
    return sure[:, [LN_S, LN_GAMMA]]
