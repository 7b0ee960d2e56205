"""The measurement equations of one particle with its numbers filled in, as lines of plain text."""

from __future__ import annotations

import math
import textwrap
from collections.abc import Callable, Iterator, Mapping
from dataclasses import dataclass
from typing import Any

import numpy as np
import pandas as pd

from reduction import air, charge, drag, gravity, motion
from reduction.findings import Findings
from reduction.quantity import shorthand

WIDTH = 100
CELSIUS_ZERO = 273.15


def wrapped(text: str, indent: str = "") -> list[str]:
    """Text in lines of at most `WIDTH` columns."""
    return textwrap.wrap(text, WIDTH, initial_indent=indent, subsequent_indent=indent)


def with_u(value: Any, u: Any = math.nan, unit: str = "") -> str:
    """Value with its standard uncertainty in the last digits, or six digits where none is known."""
    value, u = float(value), float(u)
    if math.isnan(value):
        return "not determined"
    return f"{shorthand(value, u) if u > 0.0 else f'{value:.6g}'} {'' if unit == '1' else unit}".rstrip()


def filled(symbol: str, formula: str, numbers: str, result: str, indent: str = "  ") -> list[str]:
    """One equation: in symbols, in numbers, and what comes out; on one line where it fits."""
    whole = f"{indent}{symbol} = {formula} = {numbers} = {result}"
    if len(whole) <= WIDTH:
        return [whole]
    pad = indent + " " * (len(symbol) + 1)
    return [f"{indent}{symbol} = {formula}", f"{pad}= {numbers}", f"{pad}= {result}"]


def signed(value: float) -> str:
    """A number to be added: `+ 1.5` or `- 1.5`."""
    return f"{'-' if value < 0 else '+'} {abs(value):.4g}"


@dataclass(frozen=True)
class Around:
    """Air and gravity at the values used, SI; `weight` is g', apparent gravity."""

    density: float
    viscosity: float
    mean_free_path: float
    gravity: float
    weight: float


def around(found: Findings) -> Around:
    """Air and gravity of the session at the values used."""
    kelvin, pascal = found.value("temperature_degC") + CELSIUS_ZERO, found.value("pressure_hPa") * 100.0
    local = found.value("gravity_m_per_s2")
    if math.isnan(local):
        normal = gravity.normal_gravity(math.radians(found.value("latitude_deg")), found.value("elevation_m"))
        local = float(normal) * found.value("normal_gravity_formula")
    rho_air = float(air.density(kelvin, pascal, found.value("relative_humidity_percent") / 100.0))
    rho_air *= found.value("air_density_formula")
    density = found.value("density_kg_per_m3")
    return Around(
        density=rho_air,
        viscosity=float(air.viscosity(kelvin)) * found.value("viscosity_formula"),
        mean_free_path=float(air.mean_free_path(kelvin, pascal)) * found.value("slip_formula"),
        gravity=local,
        weight=local * (1.0 if math.isnan(density) else 1.0 - rho_air / density),
    )


def air_lines(found: Findings) -> list[str]:
    """Air density, viscosity, mean free path, and apparent gravity g'."""
    here, density = around(found), found.value("density_kg_per_m3")
    lines = [
        f"  air at {found.value('temperature_degC'):.6g} degC, {found.value('pressure_hPa'):.6g} hPa, "
        f"{found.value('relative_humidity_percent'):.4g} % relative humidity:",
        f"  density rho_air = {here.density:.6g} kg/m3, viscosity eta = {here.viscosity:.6g} Pa s,",
        f"  mean free path lambda = {here.mean_free_path * 1e9:.5g} nm; gravity g = {here.gravity:.7g} m/s2",
    ]
    if math.isnan(density):
        return [*lines, "  no density stated: buoyancy neglected, g' = g; no diameter, mass or charge"]
    numbers = f"{here.gravity:.7g} (1 - {here.density:.6g}/{density:.6g})"
    return lines + filled("g'", "g (1 - rho_air/rho)", numbers, f"{here.weight:.7g} m/s2")


def true_voltage(found: Findings, reading: float) -> tuple[int, float]:
    """Polarity of the trap, and the true dc voltage [V] that goes with a reading."""
    polarity = int(found.facts["dc_polarity"])
    return polarity, polarity * (found.gain("dc_voltage") * reading + found.value("offset_dc_voltage_V"))


def balance_lines(found: Findings) -> list[str]:
    """Charge-to-mass ratio s from the mean balance voltage, inputs at their estimates."""
    found, table = found.as_stated(), found.used("balance")
    if not (len(table) and math.isfinite(found.row["charge_to_mass_C_per_kg"])):
        return []
    reading = float(table["balance_voltage_V"].mean())
    polarity, true = true_voltage(found, reading)
    gain, offset = found.gain("dc_voltage"), found.value("offset_dc_voltage_V")
    field, stray = found.value("dc_field_per_volt_per_m"), found.value("stray_field_V_per_m")
    weight = around(found).weight
    numbers = f"{polarity:+d} ({gain:.6g} x {reading:.6g} {signed(offset)})"
    mean = f"{true:.6g} V, mean of {len(table)} readings"
    lines = filled("U", "polarity (gain reading + offset)", numbers, mean, "    ")
    numbers = f"{weight:.7g}/({field:.6g} x {true:.6g} {signed(stray)})"
    return lines + filled("s", "g'/(D U + E)", numbers, f"{weight / (field * true + stray):.6g} C/kg", "    ")


@dataclass(frozen=True)
class Drive:
    """One drive setting in true values, and the scaled motion that goes with it."""

    volts: float
    omega: float
    h: float
    b: float
    added: float
    history: float

    @property
    def hertz(self) -> float:
        """Drive frequency [Hz]."""
        return self.omega / (2.0 * math.pi)

    def of(self, function: Callable[..., Any]) -> float:
        """A function of the motion at this drive."""
        return float(np.squeeze(function(self.h, self.b, self.added, self.history)))


def drives(found: Findings, table: pd.DataFrame) -> Iterator[tuple[Drive, pd.DataFrame]]:
    """Each drive setting of a log with its readings, at the adjusted charge-to-mass ratio and drag rate."""
    s, gamma = float(found.row["charge_to_mass_C_per_kg"]), float(found.row["drag_rate_per_s"])
    here, density = around(found), found.value("density_kg_per_m3")
    unsteady = found.facts["drag"] == "unsteady" and not math.isnan(density)
    settings = table[["drive_voltage_peak_V", "drive_frequency_Hz"]].drop_duplicates()
    for read, frequency in sorted(settings.itertuples(index=False, name=None)):
        rows = table[(table["drive_voltage_peak_V"] == read) & (table["drive_frequency_Hz"] == frequency)]
        volts = found.gain("drive_voltage") * float(read)
        omega = 2.0 * math.pi * found.gain("drive_frequency") * float(frequency)
        h = s * found.value("ac_gradient_per_volt_per_m2") * volts / (2.0 * omega**2)
        added = float(drag.added_mass(here.density, density)) if unsteady else 0.0
        diameter = float(found.row["diameter_um"]) * 1e-6
        history = float(drag.history(diameter, omega, here.density, here.viscosity)) if unsteady else 0.0
        yield Drive(volts, omega, h, gamma / omega, added, history), rows


def _scaled(found: Findings, drive: Drive, indent: str) -> list[str]:
    s, gradient = float(found.row["charge_to_mass_C_per_kg"]), found.value("ac_gradient_per_volt_per_m2")
    numbers = f"{s:.6g} x {gradient:.6g} x {drive.volts:.6g}/(2 x ({drive.omega:.6g})^2)"
    lines = filled("h", "s A V/(2 Omega^2)", numbers, f"{drive.h:.6g}", indent)
    numbers = f"{found.row['drag_rate_per_s']:.6g}/{drive.omega:.6g}"
    return lines + filled("b", "gamma/Omega", numbers, f"{drive.b:.6g}", indent)


def _known(found: Findings) -> bool:
    return all(math.isfinite(found.row[name]) for name in ("charge_to_mass_C_per_kg", "drag_rate_per_s"))


def height_lines(found: Findings) -> list[str]:
    """Slope of height against dc voltage at each drive, from the exact motion and from the readings."""
    table = found.used("height")
    if not (_known(found) and len(table)):
        return []
    streak = found.facts["height_reading"] == "streak_middle"
    scale = int(found.facts["dc_polarity"]) * found.gain("dc_voltage") / found.gain("height") * 1e3
    force = float(found.row["charge_to_mass_C_per_kg"]) * found.value("dc_field_per_volt_per_m")
    lines = ["    height = origin + [s (D U + E) - g']/(Omega^2 K); slopes at the adjusted s and gamma:"]
    for drive, rows in drives(found, table):
        stiffness, factor = drive.of(motion.stiffness), drive.of(motion.streak_factor) if streak else 1.0
        lines.append(f"    drive {drive.volts:.6g} V peak, {drive.hertz:.6g} Hz, {len(rows)} readings")
        lines += _scaled(found, drive, " " * 6)
        middle = f"; streak middle over mean height {factor:.5g}" if streak else ""
        lines.append(f"      K = 2 h Re r_1 = {stiffness:.6g}{middle}")
        slope = force * factor / (drive.omega**2 * stiffness) * scale
        lines.append(f"      s D/(Omega^2 K), as read: {slope:.5g} mm/V{_measured_slope(rows)}")
    return lines


def _measured_slope(rows: pd.DataFrame) -> str:
    x, y = rows["dc_voltage_V"].to_numpy(np.float64), rows["height_mm"].to_numpy(np.float64)
    away = x - x.mean()
    if len(x) < 2 or not np.any(away):
        return ""
    return f"; straight line through the readings: {float(away @ y / (away @ away)):.5g} mm/V"


def secular_lines(found: Findings) -> list[str]:
    """Secular frequency at each drive, from the exact motion and from the readings."""
    table = found.used("secular")
    if not (_known(found) and len(table)):
        return []
    kind = str(found.facts["secular_reading"])
    function = motion.ring_down if kind == "ring_down" else motion.response_peak
    lines = [f"    {kind.replace('_', ' ')} of the exact motion at the adjusted s and gamma:"]
    for drive, rows in drives(found, table):
        nu, code = (np.squeeze(one) for one in function(drive.h, drive.b, drive.added, drive.history))
        reason = motion.REGIME_REASONS[int(code)] if not np.isfinite(nu) else ""
        said = reason or f"nu f = {nu:.6g} x {drive.hertz:.6g} = {nu * drive.hertz:.5g} Hz"
        lines += wrapped(
            f"drive {drive.volts:.6g} V peak, h = {drive.h:.4g}, b = {drive.b:.4g}: {said}; "
            f"read {rows['secular_frequency_Hz'].mean():.5g} Hz",
            "    ",
        )
    return lines


def diameter_lines(found: Findings) -> list[str]:
    """Drag rate from the particle's own diameter or the lot's mean, inputs at their estimates."""
    found = found.as_stated()
    rows = found.methods[found.methods["method"] == "diameter"]
    gamma, density, lot = (
        float(rows["drag_rate_per_s"].iloc[0]), found.value("density_kg_per_m3"), found.value("diameter_um"),
    )  # fmt: skip
    if not (math.isfinite(gamma) and math.isfinite(density)):
        return []
    here, factor = around(found), found.value("shape_factor")
    d = float(drag.diameter_from_drag_rate(gamma, density, factor, here.viscosity, here.mean_free_path))
    whose = "the mean of the lot" if math.isclose(d * 1e6, lot, rel_tol=1e-6) else "the particle's own diameter"
    return [f"    d = {d * 1e6:.6g} um, {whose}", *_drag_rate(found, d, f"{gamma:.6g} 1/s", "    ")]


def _drag_rate(found: Findings, d: float, result: str, indent: str = "  ") -> list[str]:
    here, density = around(found), found.value("density_kg_per_m3")
    slip = float(drag.slip_correction(d, here.mean_free_path))
    numbers = f"18 x {here.viscosity:.6g} x {found.value('shape_factor'):.6g}/"
    numbers += f"({density:.6g} x ({d:.6g})^2 x {slip:.6g})"
    return filled("gamma", "18 eta chi/(rho d^2 C(d))", numbers, result, indent)


EQUATIONS: Mapping[str, Callable[[Findings], list[str]]] = {
    "balance": balance_lines,
    "height": height_lines,
    "secular": secular_lines,
    "diameter": diameter_lines,
}
"""Method: its equation filled in."""


def sphere_lines(found: Findings) -> list[str]:
    """Drag rate to diameter, mass, charge, electrons and surface charge density."""
    row, here = found.row, around(found)
    density, factor = found.value("density_kg_per_m3"), found.value("shape_factor")
    if not (math.isfinite(row["diameter_um"]) and math.isfinite(row["mass_kg"])):
        return ["  The readings and inputs give no diameter, so no mass and no charge."]
    d, s, mass = (float(row[name]) for name in ("diameter_um", "charge_to_mass_C_per_kg", "mass_kg"))
    d *= 1e-6
    gamma = float(drag.drag_rate(d, density, factor, here.viscosity, here.mean_free_path))
    size = f"{gamma:.6g} 1/s at d = {with_u(row['diameter_um'], row['u_diameter_um'], 'um')}"
    lines = _drag_rate(found, d, size)
    lines += wrapped(f"mass from: {row['mass_from']}", "  ")
    numbers = f"{density:.6g} x pi x ({d:.6g})^3/6"
    lines += filled(
        "m", "rho pi d^3/6", f"{numbers} = {charge.sphere_mass(d, density):.6g} kg", _interval(row, "mass", "kg")
    )
    q = float(row["charge_C"])
    lines += filled("q", "s m", f"{s:.6g} x {mass:.6g}", with_u(q, row["u_charge_C"], "C"))
    lines += filled("N", "q/e", f"{q:.6g}/{charge.ELEMENTARY_CHARGE:.10g}", _interval(row, "charge", "e"))
    lines += _drawn(found)
    area = row["surface_charge_density_C_per_m2"], row["u_surface_charge_density_C_per_m2"]
    return lines + filled("sigma", "q/(pi d^2)", f"{q:.6g}/(pi x ({d:.6g})^2)", with_u(*area, "C/m2"))


def _drawn(found: Findings) -> list[str]:
    if not math.isfinite(found.row["charge_low_e"]):
        return []
    trials = f"{found.trials} joint draws" if found.trials else "joint draws"
    return wrapped(
        f"intervals: {coverage(found)} coverage, of m and N by Monte Carlo (JCGM 101): {trials} of adjusted values and "
        "inputs in their stated shapes, taken exactly through drag, diameter, mass and charge; their ends need not lie "
        "evenly about the value.",
        "  ",
    )


def coverage(found: Findings) -> str:
    """Coverage probability of the intervals, as `95 %`."""
    return f"{100.0 * float(found.facts['coverage_probability']):g} %"


def _interval(row: Mapping[str, Any], name: str, unit: str) -> str:
    text = with_u(row[f"{name}_{unit}"], row[f"u_{name}_{unit}"], unit)
    low, high = row[f"{name}_low_{unit}"], row[f"{name}_high_{unit}"]
    return text + (f", interval {low:.6g} to {high:.6g}" if math.isfinite(low) and math.isfinite(high) else "")
