"""The data contract as two tables: the keys of each YAML file and the columns of each CSV file.

Settings, logs, the JSON Schemas and the commented files of a new campaign are all read off these tables.
"""

from __future__ import annotations

import re
from dataclasses import dataclass

from reduction.units import split_name

ID = re.compile(r"[A-Za-z0-9][A-Za-z0-9_-]{0,63}", re.ASCII)
ID_WORDS = "1 to 64 letters, digits, - or _, the first a letter or digit"


@dataclass(frozen=True)
class Key:
    """One key of a YAML file."""

    name: str  # with its customary unit
    # quantity, number, integer, text, id, date, word, reason, sessions, mapping, texts, names, pair, word_pair,
    # dimensions, conductors
    kind: str
    about: str
    required: bool = False
    of: str = ""  # row of units.QUANTITIES that gives unit and range
    words: tuple[str, ...] = ()  # allowed words, the default first
    keys: tuple[Key, ...] = ()  # of a mapping
    bounds: tuple[float, float] = (0.0, 0.0)  # of an integer or number without a row in QUANTITIES
    default: str = ""  # of a campaign option that is no word
    instead: str = ""  # key that may stand in place of this one, never beside it

    @property
    def stem(self) -> str:
        """Name without its unit."""
        return split_name(self.name)[0] if self.of else self.name


def _quantity(name: str, of: str, about: str, required: bool = False, instead: str = "") -> Key:
    return Key(name, "quantity", about, required, of, instead=instead)


AIR = (
    _quantity("temperature_degC", "temperature", "Temperature of the air around the trap.", True),
    _quantity("pressure_hPa", "pressure", "Pressure in the chamber, not reduced to sea level.", True),
    _quantity("relative_humidity_percent", "relative_humidity", "Relative humidity of the air.", True),
)
SITE = (
    _quantity("gravity_m_per_s2", "gravity", "Local acceleration of free fall; or give latitude and elevation."),
    _quantity("latitude_deg", "latitude", "Geographic latitude, north positive."),
    _quantity("elevation_m", "elevation", "Height above sea level."),
)
GAIN = (
    _quantity("dc_voltage", "gain", "True voltage between the plates per volt read, before the offset.", True),
    _quantity("drive_voltage", "gain", "True drive voltage per volt read.", True),
    _quantity("height", "gain", "True height per height read; needed with height.csv."),
    _quantity("diameter", "gain", "True diameter per diameter read; exactly 1 where it is left out."),
    _quantity("drive_frequency", "gain", "True drive frequency per hertz read; exactly 1 where it is left out."),
)
OFFSET = (_quantity("dc_voltage_V", "offset_dc_voltage", "Added to gain x reading of every dc voltage.", True),)
READING = tuple(
    Key(name, "number", f"Standard uncertainty of one reading in {log}; estimated from the scatter if left out.", of=of)
    for name, of, log in (
        ("balance_voltage_V", "u_balance_voltage", "balance.csv"),
        ("dc_voltage_V", "u_dc_voltage", "the dc voltage of height.csv"),
        ("secular_frequency_Hz", "u_secular_frequency", "secular.csv"),
        ("height_mm", "u_height", "height.csv"),
    )
)
INSTRUMENTS = tuple(
    Key(name, "id", f"Instrument behind {what}; sessions that name the same one share one error.")
    for name, what in (
        ("dc_voltage", "balance and dc voltages"),
        ("drive_voltage", "the drive voltage"),
        ("height", "the heights"),
        ("diameter", "the diameters"),
        ("drive_frequency", "the drive frequency"),
        ("air", "temperature, pressure and humidity"),
    )
)

SESSION = (
    Key("date", "date", "Day of the session, 2025-03-14, with a time of day if you like.", True),
    Key("trap", "id", "Name of the file in traps/, without its ending.", True),
    Key("species", "id", "Name of the file in species/, without its ending.", True),
    Key("charged_with", "text", "What the particles were charged with or against.", True),
    Key("air", "mapping", "Air around the trap.", True, keys=AIR),
    Key("site", "mapping", "Where the trap stands: gravity, or latitude and elevation.", True, keys=SITE),
    Key("gain", "mapping", "True value per value read.", True, keys=GAIN),
    Key("offset", "mapping", "What is added to gain x reading.", True, keys=OFFSET),
    Key(
        "secular_reading",
        "word",
        "How secular frequencies were read: ringing freely, or from the largest response; needed with secular.csv.",
        words=("ring_down", "response_peak"),
    ),
    Key(
        "height_reading",
        "word",
        "How heights were read: the mean in time, or the middle of the streak; needed with height.csv.",
        words=("time_average", "streak_middle"),
    ),
    Key("operator", "text", "Who measured."),
    Key("reading", "mapping", "Standard uncertainties of single readings.", keys=READING),
    Key("instruments", "mapping", "Names of instruments.", keys=INSTRUMENTS),
    Key("contacts", "number", "Number of charging contacts.", of="contacts"),
    Key("attributes", "texts", "Further words about the session, each with a value."),
    Key("exclude", "reason", "Reason to leave the session out of all results; leave the key out to keep it."),
    Key("notes", "text", "Anything worth keeping."),
)
ELECTRODES = (
    Key("dc_applied", "word", "How dc is applied: half on each plate, or all on one with the other grounded.",
        words=("both_plates", "one_plate")),
    Key("departure", "word", "What the field's departure from the linear one does: a component of the uncertainty of "
        "each height, or a correction of it.", words=("component", "corrected")),
    Key("dimensions_mm", "dimensions", "Names of your own, each with its length or place and uncertainty in mm."),
    Key("conductors", "conductors", "Names of your own, each with what it carries and its outline in (r, z), mm."),
)  # fmt: skip
TRAP = (
    _quantity(
        "dc_field_per_volt_per_m",
        "dc_field_per_volt",
        "Axial field at the centre per volt dc.",
        True,
        instead="electrodes",
    ),
    _quantity(
        "ac_gradient_per_volt_per_m2",
        "ac_gradient_per_volt",
        "Axial field gradient at the centre per volt of drive amplitude; needed with height.csv and secular.csv.",
        instead="electrodes",
    ),
    Key(
        "electrodes",
        "mapping",
        "Drawing of the electrodes, in place of the two constants, which are then computed.",
        keys=ELECTRODES,
    ),
    _quantity("stray_field_V_per_m", "stray_field", "Vertical stray field, drawn anew each session.", True),
    Key("dc_polarity", "word", "1 if a positive reading makes an upward field, else -1.", True, words=("1", "-1")),
    Key("usable_height_mm", "number", "Greatest height either way at which the field is known.", of="usable_height"),
    Key("source", "text", "Where the constants come from."),
)
SPECIES = (
    _quantity("shape_factor", "shape_factor", "Dynamic shape factor, on the drag; 1 for a sphere.", True),
    Key("shape_factor_spread", "number", "Standard deviation between particles.", of="shape_factor_spread"),
    _quantity("diameter_um", "diameter", "Mean volume-equivalent diameter of the lot."),
    Key("diameter_spread_um", "number", "Standard deviation between particles of the lot.", of="diameter_spread"),
    _quantity("density_kg_per_m3", "density", "Particle density; without it there is no mass, and no buoyancy."),
)
COMPARE = (
    Key("quantity", "word", "What is compared.", words=("charge_to_mass", "charge", "surface_charge_density")),
    Key(
        "by",
        "text",
        "What makes a group: charged_with, species, trap, or a word under attributes.",
        default="charged_with",
    ),
)
EVERY_SESSION = tuple(
    Key(
        key.name,
        key.kind,
        key.about,
        False,
        key.of,
        key.words,
        tuple(Key(**{**vars(k), "required": False}) for k in key.keys),
    )
    for key in SESSION
)
CAMPAIGN = (
    Key("title", "text", "Title of the report."),
    Key("sessions", "sessions", "all, or a list of sessions."),
    Key("leave_out", "names", "Sessions to leave out, each with a reason."),
    Key("when_a_session_fails", "word", "What faults within a session do.", words=("stop", "leave_out")),
    Key("coverage_probability", "number", "Of every interval.", bounds=(0.0, 1.0), default="0.95"),
    Key("adjust", "word", "What is adjusted together.", words=("session", "campaign", "particle")),
    Key("drag", "word", "Drag law: with added mass and history force, or without.", words=("unsteady", "steady")),
    Key("mass_from", "word", "Which diameter the mass rests on.", words=("adjusted", "drag", "diameter")),
    Key("lot", "word", "Whether the lot's diameter is used.", words=("prior", "unused")),
    Key("scatter", "word", "Whether stated uncertainties are enlarged to the scatter.", words=("stated", "inflate")),
    Key("compare", "mapping", "What the comparison compares.", keys=COMPARE),
    Key("monte_carlo_trials", "integer", "Number of draws.", bounds=(100, 10_000_000), default="20000"),
    Key("seed", "integer", "Seed of the draws.", bounds=(0, 2**63 - 1), default="1"),
    Key("every_session", "mapping", "Any key of a session, which a session may give for itself.", keys=EVERY_SESSION),
)
FILES: dict[str, tuple[Key, ...]] = {"campaign": CAMPAIGN, "trap": TRAP, "species": SPECIES, "session": SESSION}


@dataclass(frozen=True)
class Column:
    """One column of a CSV file."""

    name: str  # with its customary unit
    kind: str  # id, quantity, count, text, reason
    required: bool = False
    of: str = ""  # row of units.QUANTITIES
    target: str = ""  # name in the SI table, the stem where empty
    multiple: float = 1.0  # SI value per reading in SI

    @property
    def stem(self) -> str:
        """Name without its unit."""
        return split_name(self.name)[0] if self.of else self.name

    @property
    def field(self) -> str:
        """Name in the SI table."""
        return self.target or self.stem


def _reading(name: str, required: bool = False, of: str = "") -> Column:
    return Column(name, "quantity", required, of or split_name(name)[0])


_PARTICLE = Column("particle", "id", required=True)
_EXCLUDE = Column("exclude", "reason")
_NOTE = Column("note", "text")
_DRIVE = (_PARTICLE, _reading("drive_frequency_Hz", True))
# Sine amplitude per unit of each convention.
DRIVE_VOLTAGES = tuple(
    Column(f"drive_voltage_{convention}_V", "quantity", of="drive_voltage", target="drive_amplitude", multiple=multiple)
    for convention, multiple in (("peak", 1.0), ("rms", 2.0**0.5), ("peak_to_peak", 0.5))
)
LOGS: dict[str, tuple[Column, ...]] = {
    "balance": (
        *_DRIVE,
        _reading("balance_voltage_V", True),
        _reading("time_s"),
        _reading("u_balance_voltage_V"),
        Column("particles_in_trap", "count", of="particles_in_trap"),
        _reading("nearest_mm"),
        _EXCLUDE,
        _NOTE,
    ),
    "secular": (
        *_DRIVE,
        _reading("secular_frequency_Hz", True),
        _reading("time_s"),
        _reading("u_secular_frequency_Hz"),
        _reading("dc_voltage_V"),
        _EXCLUDE,
        _NOTE,
    ),
    "height": (
        *_DRIVE,
        _reading("dc_voltage_V", True),
        _reading("height_mm", True),
        _reading("time_s"),
        _reading("u_height_mm"),
        _reading("u_dc_voltage_V"),
        _EXCLUDE,
        _NOTE,
    ),
    "particles": (
        _PARTICLE,
        Column("species", "optional_id"),
        Column("charged_with", "text"),
        _reading("diameter_um"),
        _reading("u_diameter_um"),
        Column("contacts", "number", of="contacts"),
        _EXCLUDE,
    ),
    "lost": (_PARTICLE, Column("reason", "text", required=True), _reading("dc_voltage_V"), _NOTE),
}
READING_LOGS = ("balance", "secular", "height")
"""The logs a method reads."""
MARKING: dict[str, tuple[Column, ...]] = {
    "claims": (
        Column("session", "id", required=True),  # may be left out in a session's own folder
        Column("particle", "id", required=True),
        Column("quantity", "text", required=True),
        Column("value", "text", required=True),  # kept as written too: its digits are judged
        Column("unit", "text", required=True),
        Column("expanded_uncertainty", "text", required=True),
        Column("coverage_factor", "text", required=True),
    ),
    "register": (
        Column("session", "id", required=True),
        Column("name", "text", required=True),
        Column("email", "text"),
        Column("id_number", "text"),
        Column("pseudonym", "text"),
    ),
    "overrides": tuple(
        Column(name, "id" if name == "session" else "text", required=True)
        for name in ("session", "criterion", "marks", "reason", "by")
    ),
}
"""The tables of a marked campaign."""
