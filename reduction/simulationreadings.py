"""Measure simulated particles as an operator would: settings within reach, then the exact motion, then the noise."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from reduction import drag, motion
from reduction.simulationplan import Habits, Regime
from reduction.simulationtruth import Array, Particles, Setting, stream

Index = NDArray[np.intp]
CONVENTIONS = {"peak": 1.0, "rms": float(np.sqrt(0.5)), "peak_to_peak": 2.0}  # logged over amplitude
REACH = 0.8  # of the drive at which the particle is lost
# Drive h at which a particle is lost, by b, steady drag: four times it is Mathieu's q on the edge of stability.
LOST_B = (0.0, 0.025, 0.05, 0.1, 0.25, 0.5, 0.75, 1.0, 1.5)
LOST_H = (0.22701, 0.22732, 0.22825, 0.23192, 0.25664, 0.33513, 0.44859, 0.59171, 0.97070)
CONFINED = 0.16  # h aimed at where the drive frequency can be chosen; q is four times that
SECULAR = (0.05, 0.40)  # secular over drive frequency: where an operator can see and trust it
PER_PARTICLE_S, PER_READING_S = 1800.0, 35.0


@dataclass(frozen=True)
class Log:
    """Rows of one log, sorted by particle; columns as read (SI), `sigma` the stated u of the reading."""

    name: str
    particle: Index
    number: Index  # of the reading within its particle, from 1
    drive_amplitude: Array
    drive_frequency: Array
    time: Array
    reading: Array
    sigma: float
    dc_voltage: Array  # nan where the log has none
    exclude: tuple[str, ...]
    gross: tuple[str, ...]  # log:particle:number of readings with a gross error

    def __len__(self) -> int:
        return len(self.particle)


@dataclass(frozen=True)
class Driven:
    """Scaled drive and drag of readings, and the drive's angular frequency."""

    h: Array
    b: Array
    added_mass: Array | float
    history: Array | float
    omega: Array

    @property
    def scaled(self) -> tuple[Array, Array, Array | float, Array | float]:
        """Arguments that the functions of the motion take."""
        return self.h, self.b, self.added_mass, self.history


def driven(
    setting: Setting, particles: Particles, index: Index, charge: Array, voltage: Array, frequency: Array
) -> Driven:
    """Scaled motion of particles `index` at true drive amplitude [V] and frequency [Hz], with s `charge` [C/kg]."""
    omega = 2.0 * np.pi * frequency
    h = charge * setting.ac_gradient * voltage / (2.0 * omega**2)
    b = particles.drag_rate[index] / omega
    if setting.steady_drag:
        return Driven(h, b, 0.0, 0.0, omega)
    added = np.full_like(h, drag.added_mass(setting.air_density, setting.density))
    history = np.asarray(drag.history(particles.diameter[index], omega, setting.air_density, setting.viscosity))
    return Driven(h, b, added, history, omega)


def weight_per_mass(setting: Setting) -> float:
    """Gravity less buoyancy, g' = g (1 - rho_air / rho) [m/s2]."""
    return setting.gravity * (1.0 - setting.air_density / setting.density)


def balance_voltage(setting: Setting, charge: Array) -> Array:
    """DC voltage [V], true, at which s (D U + E) = g'."""
    return np.asarray((weight_per_mass(setting) / charge - setting.stray_field) / setting.dc_field)


def dc_reading(setting: Setting, true: Array) -> Array:
    """Reading of the supply [V] at a true dc voltage, (polarity U - offset) / gain."""
    return np.asarray((setting.polarity * true - setting.offset) / setting.gain["dc_voltage"])


def true_height(setting: Setting, particles: Particles, index: Index, state: Driven, charge: Array, voltage: Array,
                height_reading: str) -> Array:  # fmt: skip
    """Height shown at a true dc voltage, before gain and noise.

    z0 + f [s (D U + E) - g'] / (Omega^2 K),  f = 1 for the time average, the streak factor for the middle of the streak

    Parameters
    ----------
    setting, particles : Setting, Particles
        What is true.
    index : ndarray of int, shape (n,)
        Particle of each reading.
    state : Driven
        Scaled motion of each reading.
    charge : ndarray, shape (n,)
        Charge-to-mass ratio s [C/kg] at the time of the reading.
    voltage : ndarray, shape (n,)
        True dc voltage U [V].
    height_reading : str
        `time_average` or `streak_middle`.

    Returns
    -------
    ndarray, shape (n,)
        Height [m].
    """
    force = charge * (setting.dc_field * voltage + setting.stray_field) - weight_per_mass(setting)
    displaced = force / (state.omega**2 * motion.stiffness(*state.scaled))
    if height_reading == "streak_middle":
        displaced = displaced * motion.streak_factor(*state.scaled)
    return np.asarray(particles.height_origin[index] + displaced)


def secular_ratio(state: Driven, secular_reading: str) -> Array:
    """Secular over drive frequency, nan where no oscillation or no peak exists."""
    function = motion.response_peak if secular_reading == "response_peak" else motion.ring_down
    ratio, code = function(*state.scaled)
    return np.where(np.asarray(code) == motion.OSCILLATES, ratio, np.nan)


@dataclass(frozen=True)
class Reach:
    """What an operator may set for each particle: drive frequency [Hz] and highest drive amplitude, as read [V]."""

    frequency: Array
    amplitude: Array


def operating_reach(setting: Setting, regime: Regime, particles: Particles) -> Reach:
    """Keep below the amplifier's limit and well below the loss of the particle.

    Beyond the strongest drag of the table its last drive serves; it lies below that of the stiffest trap, too.
    """
    count = len(particles.ids)
    limit = regime.drive_voltage_peak_V
    size = np.abs(particles.charge_to_mass) * setting.ac_gradient
    if np.isnan(setting.drive_frequency):
        omega = np.sqrt(size * limit / (2.0 * CONFINED))
        frequency = np.clip(np.round(omega / (2.0 * np.pi)), 30.0, 500.0)
    else:
        frequency = np.full(count, setting.drive_frequency)
    index = np.arange(count)
    state = driven(setting, particles, index, particles.charge_to_mass, np.ones(count), frequency)
    highest = REACH * np.interp(state.b, LOST_B, LOST_H) / np.abs(state.h) / setting.gain["drive_voltage"]
    return Reach(frequency, np.minimum(limit, highest))


def set_amplitude(wanted: Array, convention: str) -> Array:
    """Nearest amplitude [V] that is a whole number of volts (tenths below 1 kV) in the logged convention."""
    logged = wanted * CONVENTIONS[convention]
    return np.asarray(np.where(wanted < 1000.0, np.round(logged, 1), np.round(logged)) / CONVENTIONS[convention])


@dataclass(frozen=True)
class Bench:
    """One session at work: truth, reach, habits, and the seed that its noise comes from."""

    setting: Setting
    regime: Regime
    particles: Particles
    habits: Habits
    reach: Reach
    session: str
    seed: int

    def rows(self, fractions: Mapping[int, Array]) -> tuple[Index, Index, Array, Array]:
        """Particle, number, amplitude as read, frequency of each row; `fractions` of the highest, by particle."""
        counts = [len(part) for part in fractions.values()]
        index = np.repeat(np.array(list(fractions), dtype=np.intp), counts)
        number = np.array([row for count in counts for row in range(1, count + 1)], dtype=np.intp)
        fraction = np.array([one for part in fractions.values() for one in part], dtype=np.float64)
        amplitude = set_amplitude(fraction * self.reach.amplitude[index], self.habits.drive_voltage)
        return index, number, amplitude, self.reach.frequency[index]

    def noise(self, log: str, index: Index, number: Index, kind: str = "reading") -> Array:
        """Noise of each row in units of sigma; a particle's does not depend on the others."""
        values = np.empty(len(index))
        for one in np.unique(index):
            chosen = index == one
            rng = stream(self.seed, "noise", self.session, self.particles.ids[one], log, kind)
            values[chosen] = rng.standard_normal(int(number[chosen].max()))[number[chosen] - 1]
        return values * self.habits.scatter

    def state(self, index: Index, amplitude: Array, frequency: Array, charge: Array) -> Driven:
        """Scaled motion of rows at amplitudes as read."""
        return driven(
            self.setting, self.particles, index, charge, amplitude * self.setting.gain["drive_voltage"], frequency
        )

    def sigma(self, key: str) -> float:
        """Uncertainty u of one reading, in the unit of its key."""
        return self.regime.reading[key]


def _gross(bench: Bench, log: str, index: Index, number: Index) -> tuple[Array, tuple[str, ...], tuple[str, ...]]:
    """Gross errors in units of sigma, the readings that have one, and the reasons for leaving readings out."""
    habits, names = bench.habits, []
    size, excluded = np.zeros(len(index)), []
    for row, (one, count) in enumerate(zip(index, number, strict=True)):
        particle = bench.particles.ids[one]
        name = f"{log}:{particle}:{count}"
        reason = habits.excluded_readings.get(name, "")
        excluded.append(reason)
        rng = stream(bench.seed, "gross", bench.session, name)
        if name in habits.outlier_readings or reason or rng.random() < habits.outliers:
            size[row] = float(rng.choice([-1.0, 1.0]) * rng.uniform(8.0, 12.0))
            names.append(name)
    return size, tuple(names), tuple(excluded)


def _log(bench: Bench, name: str, index: Index, number: Index, amplitude: Array, frequency: Array, time: Array,
         true: Array, sigma: float, dc_voltage: Array) -> Log:  # fmt: skip
    gross, names, excluded = _gross(bench, name, index, number)
    reading = true + sigma * (bench.noise(name, index, number) + gross)
    return Log(name, index, number, amplitude, frequency, time, reading, sigma, dc_voltage, excluded, names)


def _times(index: Index, number: Index, earlier: Array) -> Array:
    """Time of each row [s]: particles one after the other, readings one after the other, after those before."""
    return index * PER_PARTICLE_S + (earlier[index] + number) * PER_READING_S


def _charge(bench: Bench, index: Index, time: Array, mean_time: Array) -> Array:
    """Charge-to-mass ratio of each row; it refers to the particle's mean balance time."""
    drift = bench.particles.charge_drift[index]
    return np.asarray(bench.particles.charge_to_mass[index] * np.exp(drift * (time - mean_time[index])))


def measure(bench: Bench, logs: tuple[str, ...]) -> dict[str, Log]:
    """Take the logs of one session in the order balance, height, secular, on one clock."""
    count = len(bench.particles.ids)
    earlier, mean_time = np.zeros(count), np.zeros(count)
    found: dict[str, Log] = {}
    if "balance" in logs:
        found["balance"], mean_time = _balance(bench, earlier)
        earlier = earlier + bench.habits.balance_readings
    if "height" in logs:
        found["height"] = _height(bench, earlier, mean_time)
        earlier = earlier + bench.habits.height_drives * bench.habits.height_readings
    if "secular" in logs:
        found["secular"] = _secular(bench, earlier, mean_time)
    return found


def _balance(bench: Bench, earlier: Array) -> tuple[Log, Array]:
    habits = bench.habits
    levels = np.linspace(0.55, 1.0, habits.balance_drives)
    fractions = np.resize(levels, habits.balance_readings)
    index, number, amplitude, frequency = bench.rows({one: fractions for one in range(len(bench.particles.ids))})
    time = _times(index, number, earlier)
    mean_time = np.array([time[index == one].mean() for one in range(len(bench.particles.ids))])
    charge = _charge(bench, index, time, mean_time)
    reading = dc_reading(bench.setting, balance_voltage(bench.setting, charge))
    sigma = bench.sigma("balance_voltage_V")
    log = _log(bench, "balance", index, number, amplitude, frequency, time, reading, sigma, np.full(len(index), np.nan))
    kept = [np.array([not log.exclude[row] for row in np.flatnonzero(index == one)]) for one in range(len(mean_time))]
    if not all(part.all() for part in kept):  # what is left out takes no part in the mean time
        mean_time = np.array([time[index == one][part].mean() for one, part in enumerate(kept)])
        charge = _charge(bench, index, time, mean_time)
        shift = dc_reading(bench.setting, balance_voltage(bench.setting, charge)) - reading
        log = replace(log, reading=log.reading + shift)
    return log, mean_time


def _height(bench: Bench, earlier: Array, mean_time: Array) -> Log:
    habits, setting, particles = bench.habits, bench.setting, bench.particles
    levels = np.repeat(np.linspace(0.6, 1.0, habits.height_drives), habits.height_readings)
    index, number, amplitude, frequency = bench.rows({one: levels for one in range(len(particles.ids))})
    time = _times(index, number, earlier)
    charge = _charge(bench, index, time, mean_time)
    state = bench.state(index, amplitude, frequency, charge)
    # the knob is turned until the particle has moved about as far as wanted
    there = np.tile(np.linspace(-1.0, 1.0, habits.height_readings), habits.height_drives)
    travel = 1e-3 * bench.regime.travel_mm * there
    wanted = np.tile(travel, len(particles.ids)) * state.omega**2 * motion.stiffness(*state.scaled)
    voltage = balance_voltage(setting, charge) + wanted / (charge * setting.dc_field)
    sigma = bench.sigma("dc_voltage_V")
    shown = np.round(dc_reading(setting, voltage) + sigma * bench.noise("height", index, number, "dc voltage"), 6)
    true = true_height(setting, particles, index, state, charge, voltage, habits.height_reading)
    height = true / setting.gain["height"]
    return _log(
        bench, "height", index, number, amplitude, frequency, time, height, 1e-3 * bench.sigma("height_mm"), shown
    )


def _secular(bench: Bench, earlier: Array, mean_time: Array) -> Log:
    habits, count = bench.habits, len(bench.particles.ids)
    trial = np.linspace(0.25, 1.0, 61)
    index = np.repeat(np.arange(count), len(trial))
    amplitude = np.tile(trial, count) * bench.reach.amplitude[index]
    charge = bench.particles.charge_to_mass[index]
    state = bench.state(index, amplitude, bench.reach.frequency[index], charge)
    ratio = secular_ratio(state, habits.secular_reading).reshape(count, len(trial))
    fractions: dict[int, Array] = {}
    for one in range(count):
        seen = trial[(ratio[one] > SECULAR[0]) & (ratio[one] < SECULAR[1])]
        # where an oscillation is hardly seen nobody logs its frequency
        if len(seen) >= 4:
            fractions[one] = np.linspace(seen[1], seen[-1], habits.secular_readings)
    index, number, amplitude, frequency = bench.rows(fractions)
    time = _times(index, number, earlier)
    charge = _charge(bench, index, time, mean_time)
    state = bench.state(index, amplitude, frequency, charge)
    true = secular_ratio(state, habits.secular_reading) * frequency
    sigma = bench.sigma("secular_frequency_Hz")
    return _log(bench, "secular", index, number, amplitude, frequency, time, true, sigma, np.full(len(index), np.nan))
