"""What a simulated campaign is to be: regimes, materials, and how each session is measured and written down."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field

ALPHABET = "abcdefghijklmnopqrstuvwxyz"


@dataclass(frozen=True)
class Regime:
    """An invented apparatus and bead: stated inputs as they stand in the YAML files, and the range an operator uses."""

    name: str
    trap: str  # a letter follows
    dc_field_per_volt_per_m: str
    ac_gradient_per_volt_per_m2: str
    stray_field_V_per_m: str
    u_offset_V: float  # of the dc supply
    usable_height_mm: float
    species: str
    shape_factor: str
    shape_factor_spread: float
    density_kg_per_m3: str
    diameter_um: str
    diameter_spread_um: float
    temperature_degC: tuple[float, float, float]  # from, to, u
    pressure_hPa: tuple[float, float, float]  # from, to, relative u; drawn evenly in the logarithm
    relative_humidity_percent: tuple[float, float, float]  # from, to, half width of a rectangle
    drive_voltage_peak_V: float  # the largest amplitude the amplifier gives
    drive_frequency_Hz: float  # nan: chosen for each particle
    balance_voltage_V: tuple[float, float]  # the magnitudes between which a particle is kept
    travel_mm: float  # how far from the centre heights are read
    charge_scale: float  # surface charge density over that of the material on small beads
    logs: tuple[str, ...]
    reading: Mapping[str, float]  # u of one reading, in the unit of its key


REGIMES: Mapping[str, Regime] = {
    one.name: one
    for one in (
        Regime(
            name="room_air_light", trap="lantern", dc_field_per_volt_per_m="61.3(9)",
            ac_gradient_per_volt_per_m2="1.310(20)e4", stray_field_V_per_m="0(40)", u_offset_V=0.4,
            usable_height_mm=0.6, species="resin-20", shape_factor="1.000(5)", shape_factor_spread=0.0,
            density_kg_per_m3="1050(10)", diameter_um="20.10(30)", diameter_spread_um=0.5,
            temperature_degC=(19.0, 24.0, 0.3), pressure_hPa=(990.0, 1025.0, 5e-4),
            relative_humidity_percent=(25.0, 55.0, 5.0),
            drive_voltage_peak_V=4000.0, drive_frequency_Hz=50.0, balance_voltage_V=(60.0, 900.0), travel_mm=0.28,
            charge_scale=1.0, logs=("balance", "height"),
            reading={"balance_voltage_V": 0.3, "dc_voltage_V": 0.02, "height_mm": 0.006, "secular_frequency_Hz": 0.05},
        ),
        Regime(
            name="room_air_dense", trap="basket", dc_field_per_volt_per_m="94.0(12)",
            ac_gradient_per_volt_per_m2="3.15(4)e4", stray_field_V_per_m="0(60)", u_offset_V=0.4,
            usable_height_mm=0.5, species="dense-60", shape_factor="1.000(5)", shape_factor_spread=0.0,
            density_kg_per_m3="2480(20)", diameter_um="60.5(8)", diameter_spread_um=1.2,
            temperature_degC=(19.0, 24.0, 0.3), pressure_hPa=(990.0, 1025.0, 5e-4),
            relative_humidity_percent=(25.0, 55.0, 5.0),
            drive_voltage_peak_V=4500.0, drive_frequency_Hz=50.0, balance_voltage_V=(60.0, 900.0), travel_mm=0.25,
            charge_scale=2.2, logs=("balance", "height", "secular"),
            reading={"balance_voltage_V": 0.4, "dc_voltage_V": 0.03, "height_mm": 0.005, "secular_frequency_Hz": 0.03},
        ),
        # Amplitudes stay below 300 V: air of a few hectopascal breaks down from about 330 V on, whatever the gap
        # (least voltage of Paschen's curve for air; from memory).
        Regime(
            name="low_pressure", trap="thimble", dc_field_per_volt_per_m="352(4)",
            ac_gradient_per_volt_per_m2="2.24(3)e5", stray_field_V_per_m="0(30)", u_offset_V=0.02,
            usable_height_mm=0.3, species="resin-30", shape_factor="1.000(5)", shape_factor_spread=0.0,
            density_kg_per_m3="1050(10)", diameter_um="30.20(40)", diameter_spread_um=0.6,
            temperature_degC=(20.0, 25.0, 0.5), pressure_hPa=(0.8, 3.0, 0.02),
            relative_humidity_percent=(8.0, 15.0, 5.0),
            drive_voltage_peak_V=290.0, drive_frequency_Hz=float("nan"), balance_voltage_V=(8.0, 250.0),
            travel_mm=0.10, charge_scale=1.3, logs=("balance", "secular"),
            reading={"balance_voltage_V": 0.03, "dc_voltage_V": 0.01, "height_mm": 0.002, "secular_frequency_Hz": 0.05},
        ),
        # For a course: large beads in room air, so that every log can be taken, and a drive that is not of the mains.
        Regime(
            name="teaching", trap="cradle", dc_field_per_volt_per_m="94.0(12)",
            ac_gradient_per_volt_per_m2="3.15(4)e4", stray_field_V_per_m="0(60)", u_offset_V=0.4,
            usable_height_mm=0.5, species="dense-60", shape_factor="1.000(5)", shape_factor_spread=0.0,
            density_kg_per_m3="2480(20)", diameter_um="60.5(8)", diameter_spread_um=1.2,
            temperature_degC=(19.0, 24.0, 0.3), pressure_hPa=(990.0, 1025.0, 5e-4),
            relative_humidity_percent=(25.0, 55.0, 5.0),
            drive_voltage_peak_V=4500.0, drive_frequency_Hz=58.0, balance_voltage_V=(60.0, 900.0), travel_mm=0.25,
            charge_scale=2.2, logs=("balance", "height", "secular"),
            reading={"balance_voltage_V": 0.4, "dc_voltage_V": 0.03, "height_mm": 0.005, "secular_frequency_Hz": 0.03},
        ),
    )
}  # fmt: skip
RESEARCH = ("room_air_light", "room_air_dense", "low_pressure")
"""Regimes of a research campaign."""

# Invented: mean surface charge density [C/m2] that a small bead takes from a surface of the material.
MATERIALS: Mapping[str, float] = {"PTFE": 4.4e-6, "glass": -3.2e-6, "nylon": -4.6e-6, "wool": -2.1e-6}


@dataclass(frozen=True)
class Dialect:
    """How a table is written: separators, spelling of its heads, line ends."""

    separator: str = ","
    decimal: str = "."
    heads: str = "plain"  # plain height_mm, bracket height [mm], slash height/mm
    line_end: str = "\n"
    byte_order_mark: bool = False


DIALECTS: Mapping[str, Dialect] = {
    "comma": Dialect(),
    "semicolon": Dialect(";", ",", "bracket", "\r\n", byte_order_mark=True),
    "tab": Dialect("\t", ".", "slash"),
}


@dataclass(frozen=True)
class Habits:
    """How a session is measured and written down; a session may differ from the rest of its campaign."""

    logs: tuple[str, ...] = ()  # none named: those of the regime
    height_reading: str = "time_average"
    secular_reading: str = "ring_down"
    balance_readings: int = 8
    balance_drives: int = 4
    height_drives: int = 3
    height_readings: int = 6  # dc voltages at each drive voltage
    secular_readings: int = 7
    scatter: float = 1.0  # true scatter of the readings over the stated u
    outliers: float = 0.0  # probability that a reading is grossly wrong
    outlier_readings: tuple[str, ...] = ()  # log:particle:number, gross errors at these readings
    charge_drift_per_s: float = 0.0
    own_diameters: bool = False
    u_diameter_um: float = 0.25
    lost: int = 0
    excluded_particles: Mapping[str, str] = field(default_factory=dict)  # particle: reason
    excluded_readings: Mapping[str, str] = field(default_factory=dict)  # log:particle:number: reason
    unstated: tuple[str, ...] = ()  # keys of `reading` left out, to be found from the scatter
    u_in_logs: bool = False  # u beside each reading instead of in the session file
    times: bool = True
    dialect: str = "comma"
    drive_voltage: str = "peak"  # peak, rms, peak_to_peak
    units: Mapping[str, str] = field(default_factory=dict)  # quantity: unit, as height: um
    instruments: Mapping[str, str] = field(default_factory=dict)
    contacts: int = 0  # 0 leaves it out
    attributes: Mapping[str, str] = field(default_factory=dict)
    notes: str = ""


@dataclass(frozen=True)
class Visit:
    """What one session is about: regime, material, and which trap of its kind."""

    regime: str
    material: str
    trap: int = 0


@dataclass(frozen=True)
class Plan:
    """A whole campaign: its sessions follow the schedule, or take regimes, materials and traps in turn."""

    regimes: tuple[str, ...] = ("room_air_light",)
    materials: tuple[str, ...] = ("PTFE", "glass", "nylon", "wool")
    sessions: int = 4
    particles: int = 5
    traps: int = 1  # of each regime
    between_sessions: float = 0.12  # standard deviation of the logarithm of the charge
    between_particles: float = 0.25
    habits: Habits = Habits()
    differing: Mapping[str, Habits] = field(default_factory=dict)  # session: habits of its own
    schedule: tuple[Visit, ...] = ()
    title: str = "Simulated campaign (invented data)"
    drag: str = "unsteady"
    options: Mapping[str, str] = field(default_factory=dict)  # further lines of campaign.yaml
    drawings: Mapping[str, str] = field(default_factory=dict)  # trap: its electrodes as YAML, in place of the constants
    site: Mapping[str, str] = field(default_factory=lambda: {"latitude_deg": "51.20(2)", "elevation_m": "35(5)"})
    prefix: str = "s"  # of the sessions' ids

    def session_ids(self) -> tuple[str, ...]:
        """Ids s001, s002, ... ; they don't depend on how many there are."""
        return tuple(f"{self.prefix}{number:03d}" for number in range(1, self.sessions + 1))

    def particle_ids(self) -> tuple[str, ...]:
        """Ids p01, p02, ... ."""
        return tuple(f"p{number:02d}" for number in range(1, self.particles + 1))

    def visit(self, number: int) -> Visit:
        """Regime, material and trap of session `number`, counted from 0."""
        if self.schedule:
            return self.schedule[number % len(self.schedule)]
        turn, regime = divmod(number, len(self.regimes))
        turn, material = divmod(turn, len(self.materials))
        return Visit(self.regimes[regime], self.materials[material], turn % self.traps)

    def regime_of(self, number: int) -> Regime:
        """Regime of session `number`, counted from 0."""
        return REGIMES[self.visit(number).regime]

    def material_of(self, number: int) -> str:
        """Material of session `number`, counted from 0."""
        return self.visit(number).material

    def trap_of(self, number: int) -> str:
        """Trap of session `number`, counted from 0."""
        return f"{self.regime_of(number).trap}-{ALPHABET[self.visit(number).trap]}"

    def habits_of(self, session: str) -> Habits:
        """Habits of a session."""
        return self.differing.get(session, self.habits)


PLANS: Mapping[str, Plan] = {
    **{name: Plan(regimes=(name,)) for name in REGIMES},
    "all": Plan(regimes=RESEARCH, sessions=12),
    "drifting": Plan(habits=Habits(charge_drift_per_s=-3e-5)),
    "untidy": Plan(
        regimes=RESEARCH,
        sessions=6,
        habits=Habits(outliers=0.02, scatter=1.3, lost=2, dialect="semicolon", drive_voltage="rms"),
    ),
}
