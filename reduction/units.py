"""The closed table of units, names that carry a unit, and the range each quantity may lie in."""

from __future__ import annotations

import math
import re
from dataclasses import dataclass
from typing import TypeVar

import numpy as np
from numpy.typing import NDArray

Number = TypeVar("Number", float, NDArray[np.float64])


@dataclass(frozen=True)
class Unit:
    """A unit as a multiple of the coherent SI unit of its dimension: SI = reading x times / over + offset.

    Two whole factors rather than one rounded quotient: a reading in mm divided by 1000 is the nearest number there is.
    """

    dimension: str
    times: float = 1.0
    over: float = 1.0
    offset: float = 0.0

    @property
    def factor(self) -> float:
        """Size of the unit in SI."""
        return self.times / self.over


_PREFIXES = {
    "a": (1.0, 1e18), "f": (1.0, 1e15), "p": (1.0, 1e12), "n": (1.0, 1e9), "u": (1.0, 1e6), "m": (1.0, 1e3),
    "": (1.0, 1.0), "h": (1e2, 1.0), "k": (1e3, 1.0), "M": (1e6, 1.0),
}  # fmt: skip
ELEMENTARY_CHARGE = 1.602176634e-19  # [C] exact by the definition of the SI, BIPM brochure, 9th edition


def _prefixed(dimension: str, symbol: str, prefixes: str, over: float = 1.0) -> dict[str, Unit]:
    """Units of one symbol with each of the prefixes and without; `over` is how many `symbol` make the SI unit."""
    return {
        prefix + symbol: Unit(dimension, times, divisor * over)
        for prefix, (times, divisor) in _PREFIXES.items()
        if prefix in prefixes or not prefix
    }


UNITS: dict[str, Unit] = {
    **_prefixed("voltage", "V", "umkM"),
    **_prefixed("frequency", "Hz", "mkM"),
    **_prefixed("length", "m", "numk"),
    "cm": Unit("length", over=1e2),
    **_prefixed("time", "s", "um"),
    "min": Unit("time", times=60.0),
    "h": Unit("time", times=3600.0),
    "per_s": Unit("rate"),
    "per_ms": Unit("rate", times=1e3),
    "per_min": Unit("rate", over=60.0),
    "per_h": Unit("rate", over=3600.0),
    **_prefixed("pressure", "Pa", "numhkM"),
    "mbar": Unit("pressure", times=1e2),
    "bar": Unit("pressure", times=1e5),
    "atm": Unit("pressure", times=101325.0),
    "Torr": Unit("pressure", times=101325.0, over=760.0),
    "mTorr": Unit("pressure", times=101325.0, over=760e3),
    "K": Unit("temperature"),
    "degC": Unit("temperature", offset=273.15),
    "percent": Unit("ratio", over=1e2),
    "kg_per_m3": Unit("density"),
    "g_per_cm3": Unit("density", times=1e3),
    "g_per_mL": Unit("density", times=1e3),
    "g_per_L": Unit("density"),
    "kg_per_L": Unit("density", times=1e3),
    "m_per_s2": Unit("acceleration"),
    "cm_per_s2": Unit("acceleration", over=1e2),
    "rad": Unit("angle"),
    "deg": Unit("angle", times=math.pi, over=180.0),
    "per_m": Unit("inverse_length"),
    "per_cm": Unit("inverse_length", times=1e2),
    "per_mm": Unit("inverse_length", times=1e3),
    "per_m2": Unit("inverse_area"),
    "per_cm2": Unit("inverse_area", times=1e4),
    "per_mm2": Unit("inverse_area", times=1e6),
    "V_per_m": Unit("field"),
    "mV_per_m": Unit("field", over=1e3),
    "kV_per_m": Unit("field", times=1e3),
    "MV_per_m": Unit("field", times=1e6),
    "V_per_cm": Unit("field", times=1e2),
    "kV_per_cm": Unit("field", times=1e5),
    "V_per_mm": Unit("field", times=1e3),
    "kV_per_mm": Unit("field", times=1e6),
    "kg": Unit("mass"),
    **_prefixed("mass", "g", "fpnum", over=1e3),
    **_prefixed("charge", "C", "afpnum"),
    "e": Unit("charge", times=ELEMENTARY_CHARGE),
    **{f"{symbol}_per_kg": Unit("charge_to_mass", unit.times, unit.over)
       for symbol, unit in _prefixed("", "C", "pnum").items()},
    **{f"{symbol}_per_g": Unit("charge_to_mass", unit.times * 1e3, unit.over)
       for symbol, unit in _prefixed("", "C", "pnum").items()},
    **{f"{symbol}_per_m2": Unit("surface_charge_density", unit.times, unit.over)
       for symbol, unit in _prefixed("", "C", "pnum").items()},
    **{f"{symbol}_per_cm2": Unit("surface_charge_density", unit.times * 1e4, unit.over)
       for symbol, unit in _prefixed("", "C", "pnum").items()},
    "e_per_um2": Unit("surface_charge_density", times=ELEMENTARY_CHARGE * 1e12),
}  # fmt: skip


_SLACK = 1e-12


@dataclass(frozen=True)
class Kind:
    """What a named quantity is: its dimension, SI unit and the closed or half-open range it may lie in."""

    dimension: str  # "" for a number without a unit
    unit: str  # of the range, as printed
    low: float = -math.inf
    high: float = math.inf
    above_low: bool = False  # the lower end itself is out of range

    def contains(self, value: float) -> bool:
        """Whether one SI value lies in the range; not a number never does."""
        return not bool(self.outside(np.asarray(value)))

    def outside(self, values: NDArray[np.float64]) -> NDArray[np.bool_]:
        """Tell which SI values lie out of range; the ends give way by 1e-12, so that 0.001 um counts as 1 nm."""
        low, high = self.low - _SLACK * abs(self.low), self.high + _SLACK * abs(self.high)
        below = values <= self.low if self.above_low else values < low
        return below | (values > high) | ~np.isfinite(values)


def _positive(dimension: str, unit: str, high: float = math.inf) -> Kind:
    return Kind(dimension, unit, 0.0, high, above_low=True)


# Ranges in SI. They keep slips of unit and decimal mark out; they say nothing about what is good practice.
QUANTITIES: dict[str, Kind] = {
    "drive_voltage": _positive("voltage", "V", 1e5),  # of the amplitude, whatever the convention it is logged in
    "dc_voltage": Kind("voltage", "V", -1e5, 1e5),
    "balance_voltage": Kind("voltage", "V", -1e5, 1e5),
    "drive_frequency": _positive("frequency", "Hz", 1e8),
    "secular_frequency": _positive("frequency", "Hz", 1e8),
    "height": Kind("length", "m", -1.0, 1.0),
    "usable_height": _positive("length", "m", 1.0),
    "nearest": _positive("length", "m", 1.0),
    "time": Kind("time", "s"),
    "diameter": Kind("length", "m", 1e-9, 1e-2),
    "diameter_spread": _positive("length", "m", 1e-2),
    "density": Kind("density", "kg/m3", 10.0, 3e4),
    "shape_factor": _positive("", ""),
    "shape_factor_spread": Kind("", "", 0.0),
    "temperature": Kind("temperature", "K", 1.0, 1e3),
    "pressure": Kind("pressure", "Pa", 1e-7, 2e5),
    "relative_humidity": Kind("ratio", "", 0.0, 1.0),
    "gravity": _positive("acceleration", "m/s2"),
    "latitude": Kind("angle", "rad", -math.pi / 2, math.pi / 2),
    "elevation": Kind("length", "m", -1.2e4, 1e5),
    "dc_field_per_volt": _positive("inverse_length", "1/m"),
    "ac_gradient_per_volt": _positive("inverse_area", "1/m2"),
    "stray_field": Kind("field", "V/m"),
    "gain": _positive("", ""),
    "offset_dc_voltage": Kind("voltage", "V", -1e5, 1e5),
    "u_balance_voltage": _positive("voltage", "V", 1e5),
    "u_dc_voltage": _positive("voltage", "V", 1e5),
    "u_secular_frequency": _positive("frequency", "Hz", 1e8),
    "u_height": _positive("length", "m", 1.0),
    "u_diameter": _positive("length", "m", 1e-2),
    "contacts": Kind("", "", 0.0),
    "particles_in_trap": Kind("", "", 1.0),
}

_SIGNS = str.maketrans({"µ": "u", "μ": "u", "²": "2", "³": "3", "−": "-", "⁻": "-", "¹": "1", "·": " ", "*": " "})
_INVERSE = re.compile(r"([A-Za-z]+)\^?-([123])$")


def unit_spelling(text: str) -> str:
    """One spelling of a unit as the table writes it: `kg/m^3`, `kg m-3`, `1/m`, `°C`, `%`, `µm` all have one.

    What is no unit comes back as it is, apart from the micro sign.

    >>> unit_spelling("kg m^-3"), unit_spelling("°C"), unit_spelling("1/m²")
    ('kg_per_m3', 'degC', 'per_m2')
    """
    plain = " ".join(text.translate(_SIGNS).replace("°C", "degC").replace("°", "deg").replace("%", "percent").split())
    if plain in UNITS:
        return plain
    above, slash, below = plain.partition("/")
    if slash:
        parts = [above.strip(), below.strip(" ()")]
    else:
        factors = plain.split(" ")
        inverse = _INVERSE.fullmatch(factors[-1])
        if not inverse or len(factors) > 2:
            return plain
        parts = [" ".join(factors[:-1]), inverse[1] + ("" if inverse[2] == "1" else inverse[2])]
    numerator = "" if parts[0] in ("", "1") else parts[0] + "_"
    quotient = f"{numerator}per_{parts[1].replace('^', '')}"
    return quotient if quotient in UNITS else plain


_NAME_LIMIT = 500
_BRACKETS = re.compile(r"(?P<stem>[^\[\](/]+?)\s*(?:\[(?P<square>[^\[\]]*)\]|\((?P<round>[^()]*)\)|/\s*(?P<slash>.+))")


def split_name(name: str) -> tuple[str, str]:
    """Stem and unit of a name such as `height_um`, `height [um]` or `height/um`; the unit is "" where there is none.

    After an underscore the longest ending that is a unit counts. In brackets or after a stroke whatever stands there is
    the unit, known or not.

    >>> split_name("dc_field_per_volt_per_m"), split_name("charge_to_mass [C/kg]"), split_name("height/µm")
    (('dc_field_per_volt', 'per_m'), ('charge_to_mass', 'C_per_kg'), ('height', 'um'))
    """
    name = name.strip()
    if len(name) > _NAME_LIMIT:  # no column or key is that long, and the pattern would take its time
        return name, ""
    written = _BRACKETS.fullmatch(name)
    if written:
        unit = written["square"] or written["round"] or (written["slash"] or "").strip()
        if written["slash"] and unit.startswith("(") and unit.endswith(")"):
            unit = unit[1:-1]
        return written["stem"], unit_spelling(unit)
    plain = name.translate(_SIGNS)
    at = plain.find("_", 1)
    while at > 0:
        if plain[at + 1 :] in UNITS:
            return plain[:at], plain[at + 1 :]
        at = plain.find("_", at + 1)
    return name, ""


def from_unit(value: Number, unit: str) -> Number:
    """Value in SI of a reading in `unit`.

    >>> from_unit(8.413, "mm"), from_unit(20.0, "degC")
    (0.008413, 293.15)
    """
    known = UNITS[unit]
    return value * known.times / known.over + known.offset


def to_unit(value: Number, unit: str) -> Number:
    """Convert a value in SI to `unit`."""
    known = UNITS[unit]
    return (value - known.offset) * known.over / known.times


def units_of(dimension: str) -> list[str]:
    """Spellings of all units of one dimension."""
    return sorted(spelling for spelling, unit in UNITS.items() if unit.dimension == dimension)


def range_text(kind: Kind, unit: str = "", multiple: float = 1.0) -> str:
    """Words for the range of a quantity in `unit`, where the SI value is `multiple` times the reading in SI.

    >>> range_text(QUANTITIES["height"], "mm"), range_text(QUANTITIES["gain"])
    ('from -1000 to 1000 mm', 'above 0')
    """
    ends = (to_unit(end / multiple, unit) if unit else end / multiple for end in (kind.low, kind.high))
    low, high = (re.sub(r"e([+-])0*", lambda power: "e" + power[1].strip("+"), f"{end:.6g}") for end in ends)
    printed = f" {unit}" if unit else ""
    if math.isinf(kind.high):
        bound = "above" if kind.above_low else "at least"
        return "a finite number" if math.isinf(kind.low) else f"{bound} {low}{printed}"
    return f"above {low}, to {high}{printed}" if kind.above_low else f"from {low} to {high}{printed}"
