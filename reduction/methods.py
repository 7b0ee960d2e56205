"""The measurement equations: what each log should read, given a particle and the shared inputs.

Private unknowns of a particle, in this order (`PRIVATE`): ln of the size of the charge-to-mass ratio s [C/kg], ln of
the drag rate gamma [1/s], height origin [m], relative charge drift [1/s], and the deviation of its shape factor from
the species' in units of the spread [1]. Shared inputs enter as xi, their deviation from the estimate in units of u.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass, field, replace
from typing import Any

import numpy as np
from numpy.typing import NDArray

from reduction import air, drag, gravity, motion
from reduction.fieldmap import FieldMap, height_shift, shift_at
from reduction.inputs import DIMENSION, Input

Array = NDArray[np.floating[Any]]
Flags = NDArray[np.bool_]
Indices = NDArray[np.intp]
PRIVATE = ("ln_charge_to_mass", "ln_drag_rate", "height_origin", "charge_drift", "shape_deviation")
LN_S, LN_GAMMA, ORIGIN, DRIFT, SHAPE = range(5)
STEP = 1e-5  # of central differences in logarithms and in xi: truncation and rounding both near 1e-10
SIGNED = (
    "stray_field", "offset_dc_voltage", "humidity", "latitude", "elevation", "finite_reynolds", "field_departure",
)  # fmt: skip
LEAST = 0.02  # of its estimate, the least a positive input is tried at
SINGULAR = 1e-6  # smallest singular value of a scaled Jacobian over the largest, below which rank is missing
REACH = 60.0  # ln s and ln gamma beyond this are tried as this
LOGS = ("balance", "height", "secular", "diameter")


@dataclass(frozen=True)
class Readings:
    """The readings of one log that enter, sorted by particle.

    `observed` is the reading itself, uncorrected; `u` its standard uncertainty without that of the dc voltage;
    `elapsed` the time since the particle's mean balance time [s], 0 where the charge is taken as constant.
    For the diameter, `lot` marks rows that stand for the lot's distribution instead of an own diameter; those are in
    logarithms: a plain difference would shrink with the scale of sizes, and many particles would pull that down.
    """

    particle: NDArray[np.intp]
    observed: Array
    u: Array
    amplitude: Array
    omega: Array
    voltage: Array
    u_voltage: Array
    elapsed: Array
    lot: NDArray[np.bool_]
    row: NDArray[np.intp]
    reynolds: Array  # relative shift of each height by its finite Reynolds number, 0 until estimated
    departure: Array  # shift of each height by the field's departure from the linear one [m], 0 until estimated

    def select(self, chosen: Flags | Indices) -> Readings:
        """Only the readings where `chosen` holds, or those it numbers, in its order."""
        return Readings(**{name: getattr(self, name)[chosen] for name in self.__dataclass_fields__})

    def of(self, index: int) -> Readings:
        """Only those of one particle, renumbered as particle 0."""
        chosen = self.select(self.particle == index)
        return replace(chosen, particle=np.zeros_like(chosen.particle))

    def __len__(self) -> int:
        return len(self.observed)


@dataclass(frozen=True)
class Setting:
    """What is fixed while a session is reduced: inputs, polarity, reading kinds and the particles' species."""

    inputs: tuple[Input, ...]
    polarity: int
    height_reading: str
    secular_reading: str
    unsteady: bool
    species: tuple[str, ...]  # of each particle
    shape_spread: Array  # of each particle, 0 where none is stated
    has_density: NDArray[np.bool_]  # of each particle
    uncertain: tuple[int, ...] = field(default=())  # indices of the inputs with u above zero
    field_map: FieldMap | None = None  # of a trap whose constants follow from the dimensions of its electrodes

    def of(self, index: int) -> Setting:
        """The same for one particle alone."""
        one = slice(index, index + 1)
        return replace(
            self, species=self.species[one], shape_spread=self.shape_spread[one], has_density=self.has_density[one]
        )


def uncertain_inputs(inputs: Sequence[Input]) -> tuple[int, ...]:
    """Indices of the inputs that are not exact; xi has one column for each."""
    return tuple(index for index, one in enumerate(inputs) if one.quantity.u > 0.0)


@dataclass(frozen=True)
class Surroundings:
    """Everything the equations need besides the particle; arrays (P, N) or (P, 1): displacement by particle."""

    values: Mapping[str, Array]
    air_density: Array
    viscosity: Array
    mean_free_path: Array
    gravity: Array


def surroundings(setting: Setting, xi: Array) -> Surroundings:
    """Shared inputs at the deviations xi, shape (P, N or 1, K), and the air and gravity that follow from them."""
    shape = xi.shape[:2]
    values: dict[str, Array] = {}
    columns = {index: column for column, index in enumerate(setting.uncertain)}
    for index, one in enumerate(setting.inputs):
        value = np.full(shape, one.quantity.estimate)
        if index in columns:
            value = value + one.quantity.u * xi[:, :, columns[index]]
            # a wild trial step must not ask for a negative density
            if one.role not in SIGNED and not one.role.startswith(DIMENSION):
                value = np.maximum(value, LEAST * one.quantity.estimate)
        values[one.role] = value
    if setting.field_map is not None:
        values["dc_field"], values["ac_gradient"] = setting.field_map.constants(values)
    temperature, pressure = values["temperature"], values["pressure"]
    rho = air.density(temperature, pressure, values["humidity"]) * values["air_density_formula"]
    eta = air.viscosity(temperature) * values["viscosity_formula"]
    path = air.mean_free_path(temperature, pressure)
    if "gravity" in values:
        local = values["gravity"]
    else:
        local = gravity.normal_gravity(values["latitude"], values["elevation"]) * values["gravity_formula"]
    return Surroundings(values, rho, eta, path, local)


@dataclass(frozen=True)
class Particle:
    """A particle's properties as the equations see them, arrays (P, N)."""

    charge_to_mass: Array
    drag_rate: Array
    diameter: Array  # nan without a density
    density: Array  # nan without one
    weight: Array  # g' = g (1 - rho_air / rho)


def particle_properties(setting: Setting, around: Surroundings, theta: Array, sign: Array) -> Particle:
    """Diameter, density and apparent gravity that go with theta, shape (P, N, 5)."""
    shape = np.broadcast_shapes(theta.shape[:2], around.gravity.shape)
    gamma = np.broadcast_to(np.exp(np.clip(theta[..., LN_GAMMA], -REACH, REACH)), shape)
    density, factor = np.full(shape, np.nan), np.ones(shape)
    for name in set(setting.species):
        own = np.array([one == name for one in setting.species])
        chi = around.values[f"shape_factor:{name}"] + theta[..., SHAPE] * setting.shape_spread
        factor = np.where(own, chi, factor)
        if f"density:{name}" in around.values:
            density = np.where(own, around.values[f"density:{name}"], density)
    known = setting.has_density
    diameter = np.full(shape, np.nan)
    if known.any():
        solved = drag.diameter_from_drag_rate(
            gamma[:, known],
            density[:, known],
            factor[:, known],
            _columns(around.viscosity, shape)[:, known],
            _columns(around.mean_free_path, shape)[:, known],
            _columns(around.values["slip_formula"], shape)[:, known],
        )
        diameter[:, known] = solved
    lightness = np.where(known, around.air_density / np.where(known, density, 1.0), 0.0)
    return Particle(
        sign * np.exp(np.clip(theta[..., LN_S], -REACH, REACH)),
        gamma,
        diameter,
        density,
        around.gravity * (1.0 - lightness),
    )


def _columns(values: Array, shape: tuple[int, ...]) -> Array:
    return np.broadcast_to(values, shape)


@dataclass(frozen=True)
class Scaled:
    """Drive, drag, added mass and history of each reading in the scaled equation of motion, arrays (P, n)."""

    drive: Array
    drag: Array
    added_mass: Array
    history: Array
    omega: Array


def scaled_motion(setting: Setting, around: Surroundings, particle: Particle, theta: Array, log: Readings) -> Scaled:
    """H = s A V / (2 Omega^2), b = gamma / Omega, rho_air / (2 rho), (d/2) sqrt(Omega rho_air / eta)."""
    at = log.particle
    omega = log.omega * _at(around.values["gain_drive_frequency"], at)
    amplitude = log.amplitude * _at(around.values["gain_drive_voltage"], at)
    s = _at(particle.charge_to_mass, at) * np.exp(_at(theta[..., DRIFT], at) * log.elapsed)
    drive = s * _at(around.values["ac_gradient"], at) * amplitude / (2.0 * omega**2)
    damping = _at(particle.drag_rate, at) / omega
    heavy = setting.has_density[None, at]
    if setting.unsteady and heavy.any():
        rho_air, density = _at(around.air_density, at), np.where(heavy, _at(particle.density, at), 1.0)
        added = np.where(heavy, rho_air / (2.0 * density), 0.0)
        radius = np.where(heavy, _at(particle.diameter, at), 0.0) / 2.0
        history = radius * np.sqrt(omega * rho_air / _at(around.viscosity, at))
    else:
        added = history = np.zeros(np.broadcast_shapes(drive.shape, damping.shape))
    return Scaled(*np.broadcast_arrays(drive, damping, added, history, omega))


def _at(values: Array, at: NDArray[np.intp]) -> Array:
    """Values by particle (P, N) or shared (P, 1), laid out by reading (P, n)."""
    return values[:, at] if values.shape[1] != 1 else values


def carried(function: Callable[..., Array], scaled: Scaled) -> Array:
    """A function of the scaled motion at the first row, carried to the others by its first derivatives.

    Rows beyond the first are small displacements for central differences, in which second order cancels; so nine
    evaluations serve any number of them. With one row it is evaluated as it stands.
    """
    base = [scaled.drive[0], scaled.drag[0], scaled.added_mass[0], scaled.history[0]]
    if len(scaled.drive) == 1:
        return np.atleast_2d(function(*base))
    rows = [scaled.drive, scaled.drag, scaled.added_mass, scaled.history]
    moved = [bool((row != row[:1]).any()) for row in rows]
    steps = [STEP * np.where(one == 0.0, 1.0, np.abs(one)) for one in base]
    stack = [list(base)]
    for index, moves in enumerate(moved):
        if moves:
            for side in (1.0, -1.0):
                displaced = list(base)
                displaced[index] = base[index] + side * steps[index]
                stack.append(displaced)
    values = np.asarray(function(*(np.stack(column) for column in zip(*stack, strict=True))))
    result = np.repeat(values[:1], len(scaled.drive), axis=0)
    place = 1
    for index, moves in enumerate(moved):
        if moves:
            slope = (values[place] - values[place + 1]) / (2.0 * steps[index])
            result = result + slope * (rows[index] - base[index])
            place += 2
    return result


@dataclass(frozen=True)
class Prediction:
    """What a log should read (P, n), and the slope against its dc voltage (n,)."""

    reading: Array
    slope: Array | None = None


def predict_balance(
    setting: Setting, around: Surroundings, particle: Particle, theta: Array, log: Readings
) -> Prediction:
    """Balance voltage [V] that reads where s (D U + E) = g', U = polarity (gain reading + offset)."""
    at, value = log.particle, around.values
    s = _at(particle.charge_to_mass, at) * np.exp(_at(theta[..., DRIFT], at) * log.elapsed)
    true = (_at(particle.weight, at) / s - _at(value["stray_field"], at)) / _at(value["dc_field"], at)
    offset = _at(value["offset_dc_voltage"], at)
    return Prediction((setting.polarity * true - offset) / _at(value["gain_dc_voltage"], at))


def predict_height(
    setting: Setting, around: Surroundings, particle: Particle, theta: Array, log: Readings
) -> Prediction:
    """Height [m] that reads: origin + [s (D U + E) - g'] / (Omega^2 K), as time average or streak middle."""
    at, value = log.particle, around.values
    scaled = scaled_motion(setting, around, particle, theta, log)
    stiffness = carried(motion.stiffness, scaled)
    true = setting.polarity * (_at(value["gain_dc_voltage"], at) * log.voltage + _at(value["offset_dc_voltage"], at))
    s = _at(particle.charge_to_mass, at) * np.exp(_at(theta[..., DRIFT], at) * log.elapsed)
    per_volt = s * _at(value["dc_field"], at) / (scaled.omega**2 * stiffness)
    force = s * (_at(value["dc_field"], at) * true + _at(value["stray_field"], at)) - _at(particle.weight, at)
    mean = force / (scaled.omega**2 * stiffness)
    shown = carried(motion.streak_factor, scaled) if setting.height_reading == "streak_middle" else 1.0
    gain = _at(value["gain_height"], at)
    reynolds = _at(value["finite_reynolds"], at) * log.reynolds
    height = mean * shown * (1.0 + reynolds)
    if "field_departure" in value:
        height = height + _at(value["field_departure"], at) * log.departure * shown
    reading = (_at(theta[..., ORIGIN], at) + height) / gain
    dc_gain = _at(value["gain_dc_voltage"], at)
    slope = (setting.polarity * dc_gain * per_volt * shown * (1.0 + reynolds) / gain)[0]
    return Prediction(reading, slope)


def with_reynolds(setting: Setting, log: Readings, theta: Array, sign: Array) -> Readings:
    """Heights with the relative shift that the finite Reynolds number of their micromotion would cause.

    Estimated once, at theta (N, 5) and the inputs' estimates; it is not corrected for but enters as a component.
    """
    around = surroundings(setting, np.zeros((1, 1, len(setting.uncertain))))
    particle = particle_properties(setting, around, theta[None], sign)
    scaled = scaled_motion(setting, around, particle, theta[None], log)
    diameter = np.broadcast_to(_at(particle.diameter, log.particle)[0], len(log))
    known = np.isfinite(diameter)
    shift = np.zeros(len(log))
    if known.any():
        rho, eta = float(around.air_density[0, 0]), float(around.viscosity[0, 0])
        h, b, added, history, omega = (
            getattr(scaled, name)[0][known] for name in ("drive", "drag", "added_mass", "history", "omega")
        )
        gain = float(around.values["gain_height"][0, 0])
        linear = replace(log, reynolds=np.zeros(len(log)), departure=np.zeros(len(log)))
        height = predict_height(setting, around, particle, theta[None], linear).reading[0]
        mean = (gain * height - _at(theta[None, :, ORIGIN], log.particle)[0])[known]
        found = motion.reynolds_shift(mean, h, b, omega, diameter[known], rho, eta, added, history)
        shift[known] = np.where(np.isfinite(found), found, 0.0)
    return replace(log, reynolds=shift)


def with_departure(setting: Setting, log: Readings, theta: Array, sign: Array, *, observed: bool = False) -> Readings:
    """Heights with the shift that the field's departure from the linear one causes, at theta (N, 5).

    As with the Reynolds number it is estimated once; the input `field_departure` says what is made of it. With
    `observed` the height is taken from the reading, which is the better guess while theta is still a rough one.
    """
    field_map = setting.field_map
    if field_map is None:
        return log
    around = surroundings(setting, np.zeros((1, 1, len(setting.uncertain))))
    particle = particle_properties(setting, around, theta[None], sign)
    scaled = scaled_motion(setting, around, particle, theta[None], log)
    value = {name: one[0, 0] for name, one in around.values.items()}
    with np.errstate(all="ignore"):
        per_force = 1.0 / (scaled.omega[0] ** 2 * carried(motion.stiffness, scaled)[0])
        true = setting.polarity * (value["gain_dc_voltage"] * log.voltage + value["offset_dc_voltage"])
        s = particle.charge_to_mass[0, log.particle] * np.exp(theta[log.particle, DRIFT] * log.elapsed)
        lift = s * value["dc_field"] * true * per_force
        if observed:
            shown = carried(motion.streak_factor, scaled)[0] if setting.height_reading == "streak_middle" else 1.0
            height = (value["gain_height"] * log.observed - theta[log.particle, ORIGIN]) / shown
            shift = shift_at(height, lift, field_map.drive, field_map.dc)
        else:
            linear = lift + (s * value["stray_field"] - particle.weight[0, log.particle]) * per_force
            shift = height_shift(linear, lift, field_map.drive, field_map.dc)
    return replace(log, departure=np.where(np.isfinite(shift), shift, 0.0))


def predict_secular(
    setting: Setting, around: Surroundings, particle: Particle, theta: Array, log: Readings
) -> Prediction:
    """Secular frequency [Hz], nan where the exact motion has none."""
    scaled = scaled_motion(setting, around, particle, theta, log)
    function = motion.ring_down if setting.secular_reading == "ring_down" else motion.response_peak
    observed = 2.0 * np.pi * log.observed / log.omega  # near the answer as a rule, and checked where it is used
    nu = carried(lambda *point: function(*point, near=observed)[0], scaled)
    return Prediction(nu * scaled.omega / (2.0 * np.pi))


def predict_diameter(
    setting: Setting, around: Surroundings, particle: Particle, theta: Array, log: Readings
) -> Prediction:
    """Own diameter [m] that reads, or how far the particle's lies from the lot's mean, ln(d / mean) [1]."""
    at = log.particle
    diameter = _at(particle.diameter, at)
    reading = diameter / _at(around.values["gain_diameter"], at)
    for name in set(setting.species):
        role = f"lot_diameter:{name}"
        own = log.lot & np.array([setting.species[one] == name for one in at], dtype=bool)
        if own.any():
            reading = np.where(own, np.log(diameter / _at(around.values[role], at)), reading)
    return Prediction(reading)


PREDICT = {
    "balance": predict_balance,
    "height": predict_height,
    "secular": predict_secular,
    "diameter": predict_diameter,
}


def predict(
    setting: Setting,
    logs: Mapping[str, Readings],
    theta: Array,
    sign: Array,
    xi: Array,
    around: Surroundings | None = None,
) -> dict[str, Prediction]:
    """What every log should read; theta (P, N, 5), sign (N,), xi (P, N or 1, K), `around` where it is known already."""
    around = surroundings(setting, xi) if around is None else around
    particle = particle_properties(setting, around, theta, sign)
    return {name: PREDICT[name](setting, around, particle, theta, log) for name, log in logs.items() if len(log)}


@dataclass(frozen=True)
class Linearised:
    """Residuals of one log over u, and minus their derivatives: (n,), (n, 5), (n, K)."""

    residual: Array
    private: Array
    shared: Array
    u: Array
    prediction: Array


def linearise(
    setting: Setting,
    logs: Mapping[str, Readings],
    theta: Array,
    sign: Array,
    xi: Array,
    *,
    private: Sequence[int] = range(5),
    shared: bool = True,
    around: Surroundings | None = None,
) -> dict[str, Linearised]:
    """Predictions and central-difference Jacobians at theta (N, 5) and xi (N or 1, K), for all logs at once.

    Only the given private unknowns are varied, and the shared inputs only if `shared`; other derivatives are 0.
    Without `shared`, `around` may hold the surroundings at xi.
    """
    varied = [*private, *(5 + column for column in range(xi.shape[1] if shared else 0))]
    steps = np.full(5 + xi.shape[1], STEP)
    steps[ORIGIN], steps[DRIFT] = 1e-6, STEP * 1e-3  # metres; per second over minutes to hours
    thetas = np.repeat(theta[None], 1 + 2 * len(varied), axis=0)
    xis = np.repeat(xi[None], 1 + 2 * len(varied), axis=0) if shared else xi[None]
    for place, index in enumerate(varied):
        target = thetas[..., index] if index < 5 else xis[..., index - 5]
        target[1 + 2 * place] += steps[index]
        target[2 + 2 * place] -= steps[index]
    base = {}
    noisy = {name: log for name, log in logs.items() if (log.u_voltage > 0.0).any()}
    if noisy:
        base = predict(setting, noisy, theta[None], sign, xi[None], around)
        logs = {**logs, **{name: at_likely_voltage(log, base[name]) for name, log in noisy.items()}}
    found = {}
    for name, prediction in predict(setting, logs, thetas, sign, xis, around).items():
        log, reading = logs[name], prediction.reading
        u = effective_u(log, prediction)
        slopes = np.zeros((len(log), len(steps)))
        slopes[:, varied] = ((reading[1::2] - reading[2::2]) / (2.0 * steps[varied][:, None]) / u).T
        read = base[name].reading[0] if name in base else reading[0]
        found[name] = Linearised((log.observed - read) / u, slopes[:, :5], slopes[:, 5:], u, read)
    return found


def at_likely_voltage(log: Readings, prediction: Prediction) -> Readings:
    """Readings at the dc voltages most likely to have been there: V + u_V^2 slope (reading - predicted) / u_eff^2.

    Slopes taken at the voltages as read would be correlated with their noise and pull the fit towards flat lines.
    """
    if prediction.slope is None:
        return log
    u = effective_u(log, prediction)
    with np.errstate(invalid="ignore"):
        shift = log.u_voltage**2 * prediction.slope * (log.observed - prediction.reading[0]) / u**2
    return replace(log, voltage=log.voltage + np.where(np.isfinite(shift), shift, 0.0))


def effective_u(log: Readings, prediction: Prediction) -> Array:
    """Standard uncertainty of a reading with that of its dc voltage carried along the slope (effective variance)."""
    if prediction.slope is None:
        return log.u
    along = np.where((log.u_voltage > 0.0) & np.isfinite(prediction.slope), prediction.slope * log.u_voltage, 0.0)
    return np.hypot(log.u, along)
