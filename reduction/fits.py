"""Each method by itself, and the only door to lmfit: absolute weights, rank test instead of bounds."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass

import lmfit
import numpy as np
from scipy import stats

from reduction import drag
from reduction.methods import (
    DRIFT,
    LN_GAMMA,
    LN_S,
    ORIGIN,
    PREDICT,
    PRIVATE,
    SINGULAR,
    Array,
    Flags,
    Readings,
    Setting,
    Surroundings,
    effective_u,
    linearise,
    particle_properties,
    predict,
    surroundings,
)

UNDETERMINED = 0.5  # u of a logarithm beyond which a quantity counts as not determined
NEEDED_P = 0.01  # a charge drift is fitted where the data ask for it at this level
ROUNDING = 1e-9  # relative spread below which readings are equal but for rounding
BAD_READING = 1e3  # normalised residual standing in for a reading the motion cannot give


@dataclass(frozen=True)
class Fit:
    """Result of one least-squares fit with absolute weights; covariance is never rescaled by chi-square."""

    names: tuple[str, ...]
    values: Array
    covariance: Array  # nan where not determined
    residual: Array
    chi_square: float
    dof: int
    status: str  # ok, few_readings, not_determined, not_converged
    reason: str
    determined: Flags


def least_squares(
    residual: Callable[[Array], Array],
    start: Mapping[str, float],
    *,
    jacobian: Callable[[Array], Array] | None = None,
    scale: Mapping[str, float] | None = None,
) -> Fit:
    """Minimise the sum of squares of normalised residuals.

    chi2 = sum r_i^2, covariance (J'J)^-1 at the optimum, J by central differences unless given.

    Parameters
    ----------
    residual : callable
        From values (p,) to (reading - model) / u, shape (n,).
    start : mapping
        Name and start value of each parameter.
    jacobian : callable, optional
        From values (p,) to the derivatives of the residuals, shape (n, p).
    scale : mapping, optional
        Typical size of each parameter, for the steps of differences; default its start value.

    Returns
    -------
    Fit
        A quantity without rank has nan in the covariance and False in `determined`, never a number.
    """
    names = tuple(start)
    size = np.array([abs((scale or {}).get(name, start[name])) or 1.0 for name in names])

    def slopes(values: Array) -> Array:
        if jacobian is not None:
            return jacobian(values)
        columns = []
        for index in range(len(names)):
            step = np.zeros(len(names))
            step[index] = 1e-5 * max(abs(values[index]), 1e-3 * size[index])
            columns.append((residual(values + step) - residual(values - step)) / (2.0 * step[index]))
        return np.stack(columns, axis=1)

    first = residual(np.array([start[name] for name in names]))
    if len(first) < len(names):
        return Fit(
            names,
            np.array([start[name] for name in names]),
            np.full((len(names),) * 2, np.nan),
            first,
            float(first @ first),
            0,
            "few_readings",
            f"{len(first)} readings for {len(names)} unknowns",
            np.zeros(len(names), bool),
        )
    parameters = lmfit.Parameters()
    for name, one in zip(names, size, strict=True):
        parameters.add(name, value=start[name] / one)

    def scaled(trial: lmfit.Parameters) -> Array:
        found: Array = residual(np.array([trial[name].value for name in names]) * size)
        return found

    def scaled_slopes(trial: lmfit.Parameters) -> Array:
        found: Array = slopes(np.array([trial[name].value for name in names]) * size) * size
        return found

    minimizer = lmfit.Minimizer(scaled, parameters, scale_covar=False, calc_covar=False)
    outcome = minimizer.leastsq(Dfun=scaled_slopes, col_deriv=0, ftol=1e-13, xtol=1e-11, gtol=0.0, max_nfev=2000)
    values = np.array([outcome.params[name].value for name in names]) * size
    final = residual(values)
    covariance, determined = _covariance(slopes(values), size)
    status, reason = "ok", ""
    if not (outcome.success or outcome.ier in (1, 2, 3, 4, 6, 7, 8)) or not np.isfinite(final).all():
        status, reason = "not_converged", "the fit did not settle"
    elif not determined.all():
        loose = ", ".join(name for name, sure in zip(names, determined, strict=True) if not sure)
        status, reason = "not_determined", f"the readings leave open: {loose}"
    return Fit(
        names, values, covariance, final, float(final @ final), len(final) - len(names), status, reason, determined
    )


def _covariance(slopes: Array, size: Array) -> tuple[Array, Flags]:
    """(J'J)^-1 by singular values of the scaled Jacobian; parameters that a missing rank touches are nan."""
    scaled = slopes * size
    norm = np.linalg.norm(scaled, axis=0)
    if not np.isfinite(scaled).all():
        return np.full((len(size),) * 2, np.nan), np.zeros(len(size), bool)
    values, rows = np.linalg.svd(scaled, full_matrices=True)[1:]
    values = np.concatenate([values, np.zeros(len(size) - len(values))])
    kept = values > SINGULAR * values.max() if norm.max() > 0 else np.zeros(len(size), bool)
    determined = (np.abs(rows[~kept]) < 1e-3).all(axis=0)
    root = rows[kept].T / values[kept]
    covariance = root @ root.T * np.outer(size, size)
    covariance[~determined, :] = np.nan
    covariance[:, ~determined] = np.nan
    return covariance, determined


@dataclass(frozen=True)
class MethodFit:
    """One method of one particle, shared inputs held at their estimates."""

    method: str
    status: str
    reason: str
    sign: float  # 0 where the method leaves it open
    theta: Array  # (5,), nan where the method says nothing
    determined: tuple[bool, bool]  # charge-to-mass, drag rate
    residual: Array  # over u
    u: Array
    chi_square: float
    dof: int
    readings: int
    active: tuple[int, ...]  # private unknowns the method fits


@dataclass(frozen=True)
class Trial:
    """One method's equation for one particle with the surroundings fixed, as a function of the private unknowns."""

    method: str
    setting: Setting
    around: Surroundings
    log: Readings
    sign: float

    def residual(self, theta: Array) -> Array:
        """(reading - model) / u for theta (5,); a reading that the motion cannot give counts as far off."""
        shaped = theta[None, None, :]
        particle = particle_properties(self.setting, self.around, shaped, np.array([self.sign]))
        prediction = PREDICT[self.method](self.setting, self.around, particle, shaped, self.log)
        found: Array = (self.log.observed - prediction.reading[0]) / effective_u(self.log, prediction)
        return np.where(np.isfinite(found), found, BAD_READING)


def fit_method(
    method: str, setting: Setting, log: Readings, theta: Array, sign: float, active: tuple[int, ...]
) -> MethodFit:
    """Fit the active private unknowns of one particle to one log, from theta (5,) on."""
    if not len(log):
        return _unfitted(method, "few_readings", "no readings", active)
    index = list(active)
    fit = _fit_private(method, setting, log, theta, sign, index)
    full = np.full(5, np.nan)
    full[index] = fit.values
    status, reason = fit.status, fit.reason
    found = theta.copy()
    found[index] = fit.values
    u = _weights(method, setting, log, found, sign)
    if fit.status != "few_readings" and (np.abs(fit.residual) >= BAD_READING).any():
        status, reason = "no_oscillation", "no secular oscillation exists for the charge and drag that the log asks for"
        if method != "secular":
            status, reason = "unstable", "the readings ask for a motion outside the stable region"
    sure = dict(zip(active, fit.determined, strict=True))
    spread = dict(zip(active, np.sqrt(np.diag(fit.covariance)), strict=True))
    determined = tuple(
        bool(status in ("ok", "not_determined") and sure.get(one, False) and spread[one] <= UNDETERMINED)
        for one in (LN_S, LN_GAMMA)
    )
    if status == "ok" and not any(determined):
        status, reason = "not_determined", "charge-to-mass and drag rate are only tied to each other"
    elif status == "not_determined" and determined[0]:
        status, reason = "ok", ""
    return MethodFit(
        method,
        status,
        reason,
        sign,
        full,
        (determined[0], determined[1]),
        fit.residual,
        u,
        fit.chi_square,
        fit.dof,
        len(log),
        active,
    )


def _weights(method: str, setting: Setting, log: Readings, theta: Array, sign: float) -> Array:
    """Standard uncertainty of each reading with that of its dc voltage carried along the slope at theta."""
    if not (log.u_voltage > 0.0).any():
        return log.u
    nothing = np.zeros((1, 1, len(setting.uncertain)))
    prediction = predict(setting, {method: log}, theta[None, None], np.array([sign]), nothing)[method]
    return effective_u(log, prediction)


def _fit_private(method: str, setting: Setting, log: Readings, theta: Array, sign: float, index: list[int]) -> Fit:
    """Least squares of the private unknowns at `index`, the others held at theta."""
    nothing = np.zeros((1, 1, len(setting.uncertain)))
    trial = Trial(method, setting, surroundings(setting, nothing), log, sign)

    def filled(values: Array) -> Array:
        full = theta.copy()
        full[index] = values
        return full

    def jacobian(values: Array) -> Array:
        line = linearise(
            setting,
            {method: log},
            filled(values)[None],
            np.array([sign]),
            nothing[0],
            private=index,
            shared=False,
            around=trial.around,
        )
        slopes = -line[method].private[:, index]
        return np.where(np.isfinite(slopes), slopes, 0.0)

    start = {PRIVATE[one]: float(theta[one]) for one in index}
    scale = {
        PRIVATE[LN_S]: 1.0,
        PRIVATE[LN_GAMMA]: 1.0,
        PRIVATE[ORIGIN]: 1e-3,
        PRIVATE[DRIFT]: 1.0 / max(float(np.ptp(log.elapsed)), 1.0),
    }
    return least_squares(lambda values: trial.residual(filled(values)), start, scale=scale, jacobian=jacobian)


def _unfitted(method: str, status: str, reason: str, active: tuple[int, ...]) -> MethodFit:
    return MethodFit(
        method, status, reason, 0.0, np.full(5, np.nan), (False, False), np.zeros(0), np.zeros(0), 0.0, 0, 0, active
    )


def balance_start(setting: Setting, log: Readings) -> tuple[float, float]:
    """Sign and ln |s| from the mean balance voltage: s = g' / (D U + E)."""
    around = surroundings(setting, np.zeros((1, 1, len(setting.uncertain))))
    value = {role: float(one[0, 0]) for role, one in around.values.items()}
    true = setting.polarity * (value["gain_dc_voltage"] * log.observed.mean() + value["offset_dc_voltage"])
    field = value["dc_field"] * true + value["stray_field"]
    least = abs(value["dc_field"]) * 1e-6  # a field that a microvolt makes stands in for none
    if abs(field) < least:
        field = least
    s = float(around.gravity[0, 0]) / field
    return float(np.sign(s)), float(np.log(abs(s)))


def drift_asked_for(log: Readings, *, scatter: bool) -> bool:
    """Whether the balance readings of one particle ask for a charge drift at p < 0.01.

    The balance voltage goes as 1/s, so a drift shows as a slope in time. With stated u the drop of chi-square by the
    slope has one degree of freedom; with u from scatter it is an F test.
    """
    if len(log) < 4 or not np.ptp(log.elapsed) > 0.0 or np.ptp(log.observed) <= ROUNDING * np.abs(log.observed).max():
        return False
    weight = 1.0 / log.u
    readings = log.observed * weight
    flat = _squares(weight[:, None], readings)
    sloped = _squares(np.stack([weight, log.elapsed * weight], axis=1), readings)
    if not scatter:
        return bool(stats.chi2.sf(flat - sloped, 1) < NEEDED_P)
    if sloped == 0.0:
        return flat > 0.0
    return bool(stats.f.sf((flat - sloped) * (len(log) - 2) / sloped, 1, len(log) - 2) < NEEDED_P)


def _squares(design: Array, readings: Array) -> float:
    """Sum of squares that a linear model leaves."""
    left = readings - design @ np.linalg.lstsq(design, readings, rcond=None)[0]
    return float(left @ left)


def drag_rate_grid(setting: Setting, count: int = 40) -> Array:
    """Values of ln gamma for diameters of 0.2 um to 1 mm at the session's air, shape (count,)."""
    around = surroundings(setting, np.zeros((1, 1, len(setting.uncertain))))
    name = setting.species[0]
    density = around.values.get(f"density:{name}", np.full((1, 1), 1000.0))[0, 0]
    diameter = np.geomspace(0.2e-6, 1e-3, count)
    gamma = drag.drag_rate(
        diameter,
        density,
        around.values[f"shape_factor:{name}"][0, 0],
        around.viscosity[0, 0],
        around.mean_free_path[0, 0],
    )
    return np.log(gamma)
