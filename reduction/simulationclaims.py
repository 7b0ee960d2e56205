"""What the people at a simulated bench claim: their own analysis of their own readings, right or with one mistake."""

from __future__ import annotations

import math
from dataclasses import dataclass, replace

import numpy as np

from reduction import air, drag, gravity, motion
from reduction.quantity import rounded
from reduction.simulation import Simulated
from reduction.simulationfiles import read_diameters
from reduction.simulationplan import Plan
from reduction.simulationreadings import Index, Log
from reduction.simulationtruth import stated, stream
from reduction.units import to_unit

UNITS = {"charge_to_mass": "mC/kg", "mass": "ng", "charge": "fC"}
COLUMNS = ("session", "particle", "quantity", "value", "unit", "expanded_uncertainty", "coverage_factor")
NOMINAL_MAINS_HZ = 50.0

# Factors on a charge-to-mass ratio from a secular frequency, s = sqrt(2) Omega omega / (A V) for small drive.
FACTORS = {
    "rms_as_peak": math.sqrt(2.0),
    "peak_to_peak_as_peak": 0.5,
    "peak_to_peak_as_rms": 1.0 / (2.0 * math.sqrt(2.0)),
    "hertz_as_radians": 1.0 / (2.0 * math.pi),
    "wrong_sign": -1.0,
}


@dataclass(frozen=True)
class Found:
    """One result as a bench finds it (SI), with its standard uncertainty."""

    value: float
    u: float

    def times(self, factor: float) -> Found:
        """The result with a wrong factor."""
        return Found(self.value * factor, self.u * abs(factor))


@dataclass(frozen=True)
class Habit:
    """Choices that are the bench's own and none of them wrong."""

    middle: str  # mean or median of the balance readings
    digits: int  # of the expanded uncertainty
    width: float  # of the uncertainty over that of the full budget: judgement


def habit_of(seed: int, session: str) -> Habit:
    """Draw the choices of one bench."""
    rng = stream(seed, "student", session)
    middle = ("mean", "median")[int(rng.integers(2))]
    return Habit(middle, int(rng.integers(1, 3)), float(rng.uniform(0.9, 1.15)))


class Notebook:
    """One bench's analysis, from what its files state and read, with the textbook's formulas.

    Balance: s = g (1 - rho_air / rho) / (D U + E); mass: pi rho d^3 / 6 with the diameter under the microscope;
    charge: s m.
    """

    def __init__(self, simulated: Simulated, plan: Plan, number: int, seed: int) -> None:
        self.simulated, self.regime = simulated, plan.regime_of(number)
        self.session, self.seed = plan.session_ids()[number], seed
        self.habit, self.habits = habit_of(seed, self.session), plan.habits_of(self.session)
        setting = simulated.setting
        self.gain = {name: stated(text).quantity for name, text in setting.gain_texts.items()}
        self.offset = stated(setting.offset_text).quantity
        self.density = stated(self.regime.density_kg_per_m3).quantity
        self.field = stated(self.regime.dc_field_per_volt_per_m).quantity
        self.gradient = stated(self.regime.ac_gradient_per_volt_per_m2).quantity
        celsius, hectopascals, humidity = (
            stated(setting.air_texts[key]).quantity.estimate
            for key in ("temperature_degC", "pressure_hPa", "relative_humidity_percent")
        )
        kelvin, pascals = celsius + 273.15, 100.0 * hectopascals
        rho = float(air.density(kelvin, pascals, 0.01 * humidity))
        self.air = kelvin, pascals, rho
        site = [stated(plan.site[key]).quantity.estimate for key in ("latitude_deg", "elevation_m")]
        self.weight = float(gravity.normal_gravity(math.radians(site[0]), site[1])) * (
            1.0 - rho / self.density.estimate
        )
        self.diameters = read_diameters(simulated.particles, setting, self.habits, seed, self.session)

    def charge_to_mass(self, particle: int) -> Found:
        """Charge-to-mass ratio [C/kg] of particle `particle` (its place) from its balance voltages."""
        own = self._rows("balance", particle)
        read = self.simulated.logs["balance"].reading[own]
        middle = float(np.median(read) if self.habit.middle == "median" else read.mean())
        gain = self.gain["dc_voltage"]
        volts = self.simulated.setting.polarity * (gain.estimate * middle + self.offset.estimate)
        field, stray = self.field.estimate * volts, stated(self.regime.stray_field_V_per_m).quantity.u
        scatter = float(read.std(ddof=1)) / math.sqrt(len(read)) if len(read) > 1 else 0.0
        u = math.hypot(
            self.field.u / self.field.estimate,
            gain.u / gain.estimate,
            math.hypot(self.offset.u, scatter) / abs(volts),
            stray / abs(field),
        )
        ratio = self.weight / field
        return Found(ratio, abs(ratio) * u * self.habit.width)

    def mass(self, particle: int) -> Found:
        """Mass [kg] of a sphere with the diameter read."""
        gain = self.gain["diameter"]
        diameter = gain.estimate * float(self.diameters[particle])
        mass = math.pi / 6.0 * self.density.estimate * diameter**3
        u_read = 1e-6 * self.habits.u_diameter_um / float(self.diameters[particle])
        u = math.hypot(3.0 * u_read, 3.0 * gain.u, self.density.u / self.density.estimate)
        return Found(mass, mass * u * self.habit.width)

    def drag_free(self, particle: int) -> float:
        """Charge-to-mass ratio [C/kg] that the slopes of height against dc voltage give if the air is forgotten.

        Without drag and for small drive dz/dU = 2 Omega^2 D / (s A^2 V^2); mean over the drive voltages.
        """
        log, own = self.simulated.logs["height"], self._rows("height", particle)
        found = []
        for amplitude in np.unique(log.drive_amplitude[own]):
            rows = own[log.drive_amplitude[own] == amplitude]
            slope = self._slope(log, rows)
            omega = 2.0 * math.pi * float(log.drive_frequency[rows][0])
            drive = self.gradient.estimate * self.gain["drive_voltage"].estimate * float(amplitude)
            found.append(2.0 * omega**2 * self.field.estimate / (slope * drive**2))
        return float(np.mean(found))

    def _slope(self, log: Log, rows: Index) -> float:
        volts = self.simulated.setting.polarity * self.gain["dc_voltage"].estimate * log.dc_voltage[rows]
        return float(np.polyfit(volts, self.gain["height"].estimate * log.reading[rows], 1)[0])

    def at_mains_frequency(self, particle: int) -> float:
        """Charge-to-mass ratio [C/kg], its size, from secular frequencies with the mains taken for the drive.

        Each reading is looked up on the exact curve of secular over drive frequency against the scaled drive
        h = s A V / (2 Omega^2), drawn for the drag of a sphere of the diameter read; mean over the readings.
        """
        log, own = self.simulated.logs["secular"], self._rows("secular", particle)
        omega = 2.0 * math.pi * NOMINAL_MAINS_HZ
        temperature, pressure, rho = self.air
        diameter = self.gain["diameter"].estimate * float(self.diameters[particle])
        viscosity, path = float(air.viscosity(temperature)), float(air.mean_free_path(temperature, pressure))
        rate = float(drag.drag_rate(diameter, self.density.estimate, 1.0, viscosity, path))
        trial = np.linspace(0.01, 0.225, 400)
        ratio, code = motion.ring_down(
            trial,
            rate / omega,
            drag.added_mass(rho, self.density.estimate),
            drag.history(diameter, omega, rho, viscosity),
        )
        seen = np.asarray(code) == motion.OSCILLATES
        h = np.interp(log.reading[own] / NOMINAL_MAINS_HZ, np.asarray(ratio)[seen], trial[seen])
        drive = self.gradient.estimate * self.gain["drive_voltage"].estimate * log.drive_amplitude[own]
        return float(np.mean(2.0 * h * omega**2 / drive))

    def _rows(self, name: str, particle: int) -> Index:
        return np.asarray(np.flatnonzero(self.simulated.logs[name].particle == particle))


@dataclass(frozen=True)
class Claim:
    """One claim before it is written down."""

    particle: str
    quantity: str
    found: Found
    unit: str
    digits: int
    stated_factor: float = 2.0  # coverage factor as it is written
    width: float = 1.0  # of the expanded uncertainty over what it should be

    def row(self, session: str, spoiled: str = "") -> list[str]:
        """Cells of claims.csv."""
        value, expanded = (float(to_unit(one, _plain(self.unit))) for one in (self.found.value, 2.0 * self.found.u))
        expanded *= self.width
        if spoiled == "bad_rounding":
            texts = [f"{value:.9g}", f"{expanded:.6g}"]
        else:
            texts = list(rounded(value, expanded, self.digits))
        return [session, self.particle, self.quantity, texts[0], self.unit, texts[1], f"{self.stated_factor:g}"]


def _plain(unit: str) -> str:
    return unit.replace("/", "_per_")


def claims_of(notebook: Notebook, mistake: str) -> list[list[str]]:
    """Rows of claims.csv of one bench: charge-to-mass ratio, mass and charge of every particle.

    Parameters
    ----------
    notebook : Notebook
        The bench's analysis.
    mistake : str
        The planted one, or `none`.

    Returns
    -------
    list of list of str
        Cells in the order of `COLUMNS`.
    """
    rows = []
    for place, particle in enumerate(notebook.simulated.particles.ids):
        if mistake == "missing_claims" and place % 2:
            continue
        ratio, mass = notebook.charge_to_mass(place), notebook.mass(place)
        if mistake in FACTORS:
            ratio = ratio.times(FACTORS[mistake])
        elif mistake == "nominal_mains":
            ratio = ratio.times(notebook.at_mains_frequency(place) / abs(ratio.value))
        elif mistake == "drag_free":
            ratio = ratio.times(notebook.drag_free(place) / ratio.value)
        if mistake == "diameter_for_radius":
            mass = mass.times(8.0)
        charge = Found(ratio.value * mass.value, 0.0)
        charge = replace(charge, u=abs(charge.value) * math.hypot(ratio.u / ratio.value, mass.u / mass.value))
        for quantity, found in (("charge_to_mass", ratio), ("mass", mass), ("charge", charge)):
            claim = Claim(particle, quantity, found, UNITS[quantity], notebook.habit.digits)
            rows.append(_written(claim, mistake, notebook.session))
    return rows


def _written(claim: Claim, mistake: str, session: str) -> list[str]:
    if mistake == "k_two_as_one":
        claim = replace(claim, stated_factor=1.0)
    elif mistake == "huge_uncertainty":
        claim = replace(claim, width=15.0)
    elif mistake == "tiny_uncertainty":
        claim = replace(claim, width=0.1)
    row = claim.row(session, mistake)
    if mistake == "power_of_ten" and claim.quantity == "charge_to_mass":
        row[4] = "C/kg"  # the number is that of millicoulombs
    if mistake == "unreadable" and claim.quantity == "charge_to_mass" and claim.particle.endswith("2"):
        row[3] = "about " + row[3]
    return row
