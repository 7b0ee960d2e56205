"""Draw what is true in a simulated campaign: shared inputs around what the files state, then the particles."""

from __future__ import annotations

import hashlib
import math
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
import yaml
from numpy.typing import NDArray

from reduction import air, drag, gravity
from reduction.quantity import Quantity, read_quantity, shorthand
from reduction.simulationplan import MATERIALS, Habits, Plan, Regime

Array = NDArray[np.float64]

ELEMENTARY_CHARGE = 1.602176634e-19  # [C], exact (SI)
CELSIUS_ZERO = 273.15
U_GAIN = {"dc_voltage": 0.002, "drive_voltage": 0.005, "height": 0.004, "diameter": 0.004}
DRAWS = 2000  # attempts at a particle the trap can hold


def stream(seed: int, *names: str) -> np.random.Generator:
    """Random numbers of one name; other names and how many there are change nothing in it."""
    digest = hashlib.sha256("/".join(names).encode()).digest()
    words = [int.from_bytes(digest[start : start + 4], "big") for start in range(0, 16, 4)]
    return np.random.default_rng(np.random.SeedSequence([seed, *words]))


def standard_draw(rng: np.random.Generator, shape: str, dof: float) -> float:
    """Draw of mean 0 in the stated shape; its standard deviation is 1 (with finite dof, the scaled t has more)."""
    if shape == "rectangular":
        return float(rng.uniform(-math.sqrt(3.0), math.sqrt(3.0)))
    if shape == "triangular":
        return float(rng.triangular(-math.sqrt(6.0), 0.0, math.sqrt(6.0)))
    if shape == "arcsine":
        return float(math.sqrt(2.0) * math.sin(rng.uniform(-math.pi, math.pi)))
    return float(rng.standard_normal() if math.isinf(dof) else rng.standard_t(dof))


@dataclass(frozen=True)
class Stated:
    """An input as it stands in a file, and what that says, in the unit of its key."""

    text: str
    quantity: Quantity


def stated(text: str) -> Stated:
    """Read an input as the program reads it from a file: the shorthand, or a flow mapping."""
    return Stated(text, read_quantity(yaml.safe_load(text) if text.startswith("{") else text))


@dataclass(frozen=True)
class TrueInput:
    """True value of one shared input beside what the files state, both SI."""

    name: str
    session: str  # named where the same error meets different estimates
    estimate: float
    u: float
    true: float
    unit: str


class TrueInputs:
    """Shared inputs drawn so far; each name has one error, whichever session asks for it."""

    def __init__(self, seed: int) -> None:
        self._seed = seed
        self._rows: dict[tuple[str, str], TrueInput] = {}

    def take(
        self, name: str, quantity: Quantity, *, unit: str, factor: float = 1.0, zero: float = 0.0, session: str = ""
    ) -> float:
        """Draw the true value (SI) of input `name`; `quantity` is what is stated, SI = zero + factor * written."""
        error = quantity.u * standard_draw(stream(self._seed, name), quantity.shape, quantity.dof)
        estimate = zero + factor * quantity.estimate
        row = TrueInput(name, session, estimate, abs(factor) * quantity.u, estimate + factor * error, unit)
        self._rows[name, session] = row
        return row.true

    def rows(self) -> list[TrueInput]:
        """All inputs, by name."""
        return [self._rows[key] for key in sorted(self._rows)]


@dataclass(frozen=True)
class Setting:
    """The apparatus of one session as it truly is (SI), with what its files state of gains, offset and air."""

    dc_field: float  # [1/m]
    ac_gradient: float  # [1/m2]
    stray_field: float  # [V/m]
    polarity: int
    gain: dict[str, float]
    offset: float  # [V]
    gravity: float  # [m/s2]
    air_density: float  # [kg/m3]
    viscosity: float  # [Pa s]
    mean_free_path: float  # [m]
    slip_scale: float  # factor on C - 1
    density: float  # [kg/m3]
    shape_factor: float
    lot_diameter: float  # [m]
    drive_frequency: float  # [Hz], nan where it is chosen for each particle
    steady_drag: bool
    gain_texts: dict[str, str]
    offset_text: str
    air_texts: dict[str, str]


@dataclass(frozen=True)
class Particles:
    """True particles of one session, arrays over particles (SI)."""

    ids: tuple[str, ...]
    diameter: Array
    mass: Array
    drag_rate: Array
    charge_to_mass: Array
    charge_drift: Array
    height_origin: Array

    @property
    def charge(self) -> Array:
        """Charge [C]."""
        return self.charge_to_mass * self.mass

    @property
    def surface_charge_density(self) -> Array:
        """Charge over the surface of the sphere [C/m2]."""
        return self.charge / (np.pi * self.diameter**2)


def material_charge(seed: int, material: str) -> float:
    """Mean surface charge density [C/m2] that small beads take from a material; drawn for one not in the table."""
    if material in MATERIALS:
        return MATERIALS[material]
    rng = stream(seed, "material", material)
    return float(rng.choice([-1.0, 1.0]) * rng.uniform(1.8e-6, 5.0e-6))


def _gains(taken: TrueInputs, seed: int, session: str, habits: Habits) -> tuple[dict[str, float], dict[str, str]]:
    kinds = ["dc_voltage", "drive_voltage", "height"] + (["diameter"] if habits.own_diameters else [])
    true, texts = {}, {}
    for kind in kinds:
        owner = _owner(habits, session, kind)
        wanted = 1.0 + U_GAIN[kind] * float(stream(seed, "stated", owner, f"gain_{kind}").standard_normal())
        texts[kind] = shorthand(wanted, U_GAIN[kind])
        true[kind] = taken.take(f"{owner}/gain_{kind}", stated(texts[kind]).quantity, unit="1")
    return true, texts


def _owner(habits: Habits, session: str, kind: str) -> str:
    name = habits.instruments.get(kind, "")
    return f"instrument/{name}" if name else f"session/{session}"


def _air(
    taken: TrueInputs, seed: int, session: str, habits: Habits, regime: Regime
) -> tuple[dict[str, str], tuple[float, float, float], tuple[float, float]]:
    """Texts of the air readings, their true values (SI), and the estimates of temperature and pressure (SI)."""
    rng = stream(seed, "air", session)
    low, high, u = regime.temperature_degC
    texts = {"temperature_degC": shorthand(rng.uniform(low, high), u, digits=1)}
    low, high, relative = regime.pressure_hPa
    pressure = math.exp(rng.uniform(math.log(low), math.log(high)))
    texts["pressure_hPa"] = shorthand(pressure, relative * pressure)
    low, high, half_width = regime.relative_humidity_percent
    humidity = f"value: {rng.uniform(low, high):.0f}, half_width: {half_width:g}"
    texts["relative_humidity_percent"] = f"{{{humidity}, shape: rectangular}}"
    owner = _owner(habits, session, "air")
    own = session if owner.startswith("instrument/") else ""
    units = {
        "temperature_degC": ("K", 1.0, CELSIUS_ZERO),
        "pressure_hPa": ("Pa", 100.0, 0.0),
        "relative_humidity_percent": ("1", 0.01, 0.0),
    }
    true, estimate = {}, {}
    for key, (unit, factor, zero) in units.items():
        quantity = stated(texts[key]).quantity
        estimate[key] = zero + factor * quantity.estimate
        true[key] = taken.take(f"{owner}/{key}", quantity, unit=unit, factor=factor, zero=zero, session=own)
    return (
        texts,
        (true["temperature_degC"], true["pressure_hPa"], true["relative_humidity_percent"]),
        (estimate["temperature_degC"], estimate["pressure_hPa"]),
    )


def _gravity(taken: TrueInputs, session: str, site: dict[str, str]) -> float:
    if "gravity_m_per_s2" in site:
        return taken.take(f"session/{session}/gravity_m_per_s2", stated(site["gravity_m_per_s2"]).quantity, unit="m/s2")
    degree = math.pi / 180.0
    latitude = taken.take(
        f"session/{session}/latitude_deg", stated(site["latitude_deg"]).quantity, unit="rad", factor=degree
    )
    elevation = taken.take(f"session/{session}/elevation_m", stated(site["elevation_m"]).quantity, unit="m")
    scale = taken.take("campaign//normal_gravity_formula", Quantity(1.0, gravity.RELATIVE_U), unit="1")
    return float(gravity.normal_gravity(latitude, elevation)) * scale


def draw_setting(taken: TrueInputs, plan: Plan, seed: int, number: int) -> Setting:
    """Draw the apparatus of session `number` (from 0): each input once per trap, species, instrument or session."""
    session, regime, trap = plan.session_ids()[number], plan.regime_of(number), plan.trap_of(number)
    habits = plan.habits_of(session)

    def shared(scope: str, owner: str, key: str, text: str, unit: str, factor: float = 1.0) -> float:
        return taken.take(f"{scope}/{owner}/{key}", stated(text).quantity, unit=unit, factor=factor)

    gain, gain_texts = _gains(taken, seed, session, habits)
    owner = _owner(habits, session, "dc_voltage")
    wanted = regime.u_offset_V * float(stream(seed, "stated", owner, "offset").standard_normal())
    offset_text = shorthand(wanted, regime.u_offset_V, digits=1)
    offset = taken.take(f"{owner}/offset_dc_voltage_V", stated(offset_text).quantity, unit="V")
    air_texts, (temperature, pressure, humidity), at = _air(taken, seed, session, habits, regime)
    viscosity_scale = taken.take(
        "campaign//viscosity_formula", Quantity(1.0, float(air.viscosity_relative_u(at[0]))), unit="1", session=session
    )
    density_scale = taken.take(
        "campaign//air_density_formula", Quantity(1.0, float(air.density_relative_u(*at))), unit="1", session=session
    )
    frequency = regime.drive_frequency_Hz + 0.02 * float(stream(seed, "mains", session).standard_normal())
    return Setting(
        dc_field=shared("trap", trap, "dc_field_per_volt_per_m", regime.dc_field_per_volt_per_m, "1/m"),
        ac_gradient=shared("trap", trap, "ac_gradient_per_volt_per_m2", regime.ac_gradient_per_volt_per_m2, "1/m2"),
        stray_field=shared("session", session, "stray_field_V_per_m", regime.stray_field_V_per_m, "V/m"),
        polarity=polarity_of(trap),
        gain=gain,
        offset=offset,
        gravity=_gravity(taken, session, dict(plan.site)),
        air_density=float(air.density(temperature, pressure, humidity)) * density_scale,
        viscosity=float(air.viscosity(temperature)) * viscosity_scale,
        mean_free_path=float(air.mean_free_path(temperature, pressure)),
        slip_scale=taken.take("campaign//slip_formula", Quantity(1.0, float(drag.SLIP_RELATIVE_U)), unit="1"),
        density=shared("species", regime.species, "density_kg_per_m3", regime.density_kg_per_m3, "kg/m3"),
        shape_factor=shared("species", regime.species, "shape_factor", regime.shape_factor, "1"),
        lot_diameter=shared("species", regime.species, "diameter_um", regime.diameter_um, "m", 1e-6),
        drive_frequency=round(frequency, 2),
        steady_drag=plan.drag == "steady",
        gain_texts=gain_texts,
        offset_text=offset_text,
        air_texts=air_texts,
    )


def polarity_of(trap: str) -> int:
    """Sign of the field that a positive reading makes: the second trap of a kind is wired the other way round."""
    return -1 if trap.endswith("-b") else 1


def true_drag_rate(setting: Setting, diameter: Array, shape_factor: Array) -> Array:
    """Drag rate of true particles, with the drawn error of the slip formula.

    gamma = 18 eta chi / (rho d^2 C'),  C' - 1 = slip_scale (C - 1)

    Parameters
    ----------
    setting : Setting
        True air and density.
    diameter : ndarray
        Volume-equivalent diameter [m].
    shape_factor : ndarray
        Dynamic shape factor chi [1].

    Returns
    -------
    ndarray
        Drag rate [1/s].
    """
    slip = 1.0 + (drag.slip_correction(diameter, setting.mean_free_path) - 1.0) * setting.slip_scale
    return np.asarray(18.0 * setting.viscosity * shape_factor / (setting.density * diameter**2 * slip))


def draw_particles(setting: Setting, plan: Plan, seed: int, number: int, ids: Sequence[str]) -> Particles:
    """Draw the particles of a session: sizes from the lot, charges from the material, kept if the trap can hold them.

    The charge is the material's, times a factor of the session and one of the particle (both of a normal logarithm).
    """
    session, regime = plan.session_ids()[number], plan.regime_of(number)
    habits = plan.habits_of(session)
    mean = material_charge(seed, plan.material_of(number)) * regime.charge_scale
    mean *= math.exp(plan.between_sessions * float(stream(seed, "session charge", session).standard_normal()))
    weight = setting.gravity * (1.0 - setting.air_density / setting.density)
    low, high = regime.balance_voltage_V
    rows = []
    for particle in ids:
        rng = stream(seed, "particle", session, particle)
        spread = 1e-6 * regime.diameter_spread_um
        diameter = setting.lot_diameter + spread * float(np.clip(rng.standard_normal(), -4.0, 4.0))
        shape = setting.shape_factor + regime.shape_factor_spread * float(rng.standard_normal())
        origin = 0.05e-3 * float(rng.standard_normal())
        drift = habits.charge_drift_per_s * (1.0 + 0.3 * float(rng.standard_normal()))
        for _ in range(DRAWS):
            density = mean * math.exp(plan.between_particles * float(rng.standard_normal()))
            ratio = 6.0 * density / (setting.density * diameter)
            if low <= abs(weight / ratio - setting.stray_field) / setting.dc_field <= high:
                break
        rows.append((diameter, shape, origin, drift, ratio))
    diameters, shapes, origins, drifts, ratios = (np.array(column) for column in zip(*rows, strict=True))
    return Particles(
        ids=tuple(ids),
        diameter=diameters,
        mass=setting.density * np.pi * diameters**3 / 6.0,
        drag_rate=true_drag_rate(setting, diameters, shapes),
        charge_to_mass=ratios,
        charge_drift=drifts,
        height_origin=origins,
    )
