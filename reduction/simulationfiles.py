"""Write a simulated campaign as the files a laboratory would bring, and the truth as tables beside it."""

from __future__ import annotations

import csv
import io
import json
import math
from collections.abc import Iterable, Mapping, Sequence
from pathlib import Path

import numpy as np

from reduction.simulationplan import DIALECTS, Dialect, Habits, Plan, Regime
from reduction.simulationreadings import CONVENTIONS, Log
from reduction.simulationtruth import (
    ELEMENTARY_CHARGE,
    Array,
    Particles,
    Setting,
    TrueInput,
    polarity_of,
    stream,
)
from reduction.units import to_unit

INVENTED = "Invented data: made by a simulation, not measured."
READING = {"balance": "balance_voltage", "height": "height", "secular": "secular_frequency"}
UNIT = {
    "balance_voltage": "V", "dc_voltage": "V", "drive_frequency": "Hz", "secular_frequency": "Hz", "height": "mm",
    "diameter": "um", "time": "s",
}  # fmt: skip
LOST_REASONS = (
    "left the trap while the dc voltage was raised",
    "struck an electrode",
    "lost while the lamp was changed",
)

Column = tuple[str, Sequence[str]]


def decimals(step: float) -> int:
    """Decimals that show a step of this size, at least none."""
    return max(0, -math.floor(math.log10(step) + 1e-9))


def _numbers(values: Iterable[float], places: int) -> list[str]:
    return ["" if math.isnan(value) else f"{value:.{places}f}" for value in values]


def _head(stem: str, unit: str, dialect: Dialect) -> str:
    if not unit:
        return stem
    return {"plain": f"{stem}_{unit}", "bracket": f"{stem} [{unit}]", "slash": f"{stem}/{unit}"}[dialect.heads]


def write_csv(path: Path, columns: Sequence[Column], dialect: Dialect) -> None:
    """Write columns of texts in a dialect; a comment line on top says that the data are invented."""
    out = io.StringIO()
    out.write(f"# {INVENTED}{dialect.line_end}")
    writer = csv.writer(out, delimiter=dialect.separator, lineterminator=dialect.line_end)
    writer.writerow([head for head, _ in columns])
    for row in zip(*(cells for _, cells in columns), strict=True):
        writer.writerow(row)
    path.write_bytes((b"\xef\xbb\xbf" if dialect.byte_order_mark else b"") + out.getvalue().encode())


class Table:
    """Columns of one file, spelled as the habits of its session say."""

    def __init__(self, habits: Habits) -> None:
        self._habits, self._dialect = habits, DIALECTS[habits.dialect]
        self._columns: list[Column] = []

    def texts(self, head: str, cells: Sequence[str]) -> None:
        """Add a column without a unit."""
        self._columns.append((head, cells))

    def numbers(self, stem: str, values: Array, step: float, *, kind: str = "") -> None:
        """Add a column of SI values in the unit of its kind, with the decimals that show `step` (SI)."""
        unit = self._habits.units.get(kind or stem, UNIT.get(kind or stem, "V"))
        shown, size = np.asarray(to_unit(values, unit)), float(to_unit(step, unit))
        cells = [cell.replace(".", self._dialect.decimal) for cell in _numbers(shown, decimals(size))]
        self._columns.append((_head(stem, unit, self._dialect), cells))

    def drive(self, amplitude: Array) -> None:
        """Add the drive voltage in the convention of the session."""
        convention = self._habits.drive_voltage
        step = 0.1 if (amplitude < 1000.0).any() else 1.0
        self.numbers(f"drive_voltage_{convention}", amplitude * CONVENTIONS[convention], step, kind="drive_voltage")

    def write(self, path: Path) -> None:
        """Write the file, if it has rows."""
        if self._columns and len(self._columns[0][1]):
            write_csv(path, self._columns, self._dialect)


def write_log(path: Path, log: Log, ids: Sequence[str], habits: Habits, u_dc_voltage: float) -> None:
    """Write one log: balance.csv, height.csv or secular.csv."""
    table, quantity = Table(habits), READING[log.name]
    table.texts("particle", [ids[one] for one in log.particle])
    if habits.times:
        table.numbers("time", log.time, 1.0)
    table.drive(log.drive_amplitude)
    table.numbers("drive_frequency", log.drive_frequency, 0.01)
    if log.name == "height":
        table.numbers("dc_voltage", log.dc_voltage, u_dc_voltage / 5.0)
    table.numbers(quantity, log.reading, log.sigma / 5.0)
    if habits.u_in_logs and f"{quantity}_{UNIT[quantity]}" not in habits.unstated:
        table.numbers(f"u_{quantity}", np.full(len(log), log.sigma), log.sigma / 10.0, kind=quantity)
        if log.name == "height":
            table.numbers("u_dc_voltage", np.full(len(log), u_dc_voltage), u_dc_voltage / 10.0, kind="dc_voltage")
    if any(log.exclude):
        table.texts("exclude", log.exclude)
    table.write(path)


def read_diameters(particles: Particles, setting: Setting, habits: Habits, seed: int, session: str) -> Array:
    """Diameters [m] of the particles as read under a microscope, before the gain."""
    noise = [float(stream(seed, "noise", session, one, "diameter").standard_normal()) for one in particles.ids]
    u = 1e-6 * habits.u_diameter_um
    return np.asarray(particles.diameter / setting.gain["diameter"] + u * habits.scatter * np.array(noise))


def write_particles(
    path: Path, particles: Particles, setting: Setting, habits: Habits, seed: int, session: str
) -> None:
    """Write particles.csv where there is something to say in it: own diameters, exclusions."""
    if not habits.own_diameters and not habits.excluded_particles:
        return
    table, sigma = Table(habits), 1e-6 * habits.u_diameter_um
    table.texts("particle", particles.ids)
    if habits.own_diameters:
        shown = read_diameters(particles, setting, habits, seed, session)
        table.numbers("diameter", shown, sigma / 5.0)
        table.numbers("u_diameter", np.full(len(shown), sigma), sigma / 10.0, kind="diameter")
    if habits.excluded_particles:
        table.texts("exclude", [habits.excluded_particles.get(one, "") for one in particles.ids])
    table.write(path)


def write_lost(path: Path, regime: Regime, habits: Habits, seed: int, session: str) -> None:
    """Write lost.csv: particles that left the trap before anything was logged."""
    if not habits.lost:
        return
    rng, count = stream(seed, "lost", session), habits.lost
    table = Table(habits)
    table.texts("particle", [f"x{number:02d}" for number in range(1, count + 1)])
    table.texts("reason", [LOST_REASONS[int(rng.integers(len(LOST_REASONS)))] for _ in range(count)])
    table.drive(np.round(regime.drive_voltage_peak_V * rng.uniform(0.5, 1.0, count), -1))
    low, high = regime.balance_voltage_V
    table.numbers("dc_voltage", np.round(rng.uniform(low, high, count), 1), 0.1)
    table.write(path)


def _text(value: str) -> str:
    """Text as a quoted YAML scalar."""
    return json.dumps(value, ensure_ascii=False)


def _flow(entries: Mapping[str, str]) -> str:
    return "{" + ", ".join(f"{key}: {value}" for key, value in entries.items()) + "}"


def _lines(path: Path, lines: Iterable[str]) -> None:
    path.parent.mkdir(parents=True, exist_ok=True)
    path.write_bytes(("\n".join([f"# {INVENTED}", *lines]) + "\n").encode())


def write_campaign(folder: Path, plan: Plan) -> None:
    """Write campaign.yaml."""
    lines = [f"title: {_text(plan.title)}", f"drag: {plan.drag}"]
    lines += [f"{key}: {value}" for key, value in plan.options.items()]
    _lines(folder / "campaign.yaml", [*lines, "every_session:", f"  site: {_flow(plan.site)}"])


def write_trap(folder: Path, trap: str, regime: Regime, drawing: str = "") -> None:
    """Write traps/<trap>.yaml, its two constants stated or, with a drawing, left to the program."""
    stated = [
        f"dc_field_per_volt_per_m: {regime.dc_field_per_volt_per_m}",
        f"ac_gradient_per_volt_per_m2: {regime.ac_gradient_per_volt_per_m2}",
    ]
    _lines(folder / "traps" / f"{trap}.yaml", [
        *(drawing.splitlines() if drawing else stated),
        f"stray_field_V_per_m: {regime.stray_field_V_per_m}",
        f"dc_polarity: {polarity_of(trap)}",
        f"usable_height_mm: {regime.usable_height_mm}",
        f"source: {_text('invented, for a simulation')}",
    ])  # fmt: skip


def write_species(folder: Path, regime: Regime) -> None:
    """Write species/<species>.yaml."""
    lines = [f"shape_factor: {regime.shape_factor}"]
    if regime.shape_factor_spread:
        lines.append(f"shape_factor_spread: {regime.shape_factor_spread}")
    _lines(folder / "species" / f"{regime.species}.yaml", [
        *lines,
        f"density_kg_per_m3: {regime.density_kg_per_m3}",
        f"diameter_um: {regime.diameter_um}",
        f"diameter_spread_um: {regime.diameter_spread_um}",
    ])  # fmt: skip


def write_session(
    folder: Path, plan: Plan, number: int, setting: Setting, habits: Habits, logs: Sequence[str], date: str
) -> None:
    """Write sessions/<session>/session.yaml."""
    session, regime = plan.session_ids()[number], plan.regime_of(number)
    lines = [
        f"date: {date}",
        f"trap: {plan.trap_of(number)}",
        f"species: {regime.species}",
        f"charged_with: {_text(plan.material_of(number))}",
        f"air: {_flow(setting.air_texts)}",
        f"gain: {_flow(setting.gain_texts)}",
        f"offset: {{dc_voltage_V: {setting.offset_text}}}",
    ]
    if "secular" in logs:
        lines.append(f"secular_reading: {habits.secular_reading}")
    if "height" in logs:
        lines.append(f"height_reading: {habits.height_reading}")
    needed = {f"{READING[log]}_{UNIT[READING[log]]}" for log in logs}
    if "height" in logs:
        needed.add("dc_voltage_V")
    stated = {key: f"{u:g}" for key, u in regime.reading.items() if key in needed and key not in habits.unstated}
    if stated and not habits.u_in_logs:
        lines.append(f"reading: {_flow(stated)}")
    if habits.instruments:
        lines.append(f"instruments: {_flow(habits.instruments)}")
    if habits.contacts:
        lines.append(f"contacts: {habits.contacts}")
    if habits.attributes:
        lines.append(f"attributes: {_flow({key: _text(value) for key, value in habits.attributes.items()})}")
    if habits.notes:
        lines.append(f"notes: {_text(habits.notes)}")
    _lines(folder / "sessions" / session / "session.yaml", lines)


TRUTH = (
    "session", "particle", "species", "charged_with", "regime", "charge_to_mass_C_per_kg", "drag_rate_per_s",
    "diameter_um", "mass_kg", "charge_C", "charge_e", "surface_charge_density_C_per_m2", "charge_drift_per_s",
    "height_origin_mm", "gross_readings",
)  # fmt: skip


def truth_rows(
    session: str, species: str, material: str, regime: str, particles: Particles, gross: Sequence[str]
) -> list[list[str]]:
    """Rows of the table of true particles; numbers with as many digits as it takes to read them back."""
    rows = []
    for index, particle in enumerate(particles.ids):
        values = (
            particles.charge_to_mass, particles.drag_rate, particles.diameter * 1e6, particles.mass, particles.charge,
            particles.charge / ELEMENTARY_CHARGE, particles.surface_charge_density, particles.charge_drift,
            particles.height_origin * 1e3,
        )  # fmt: skip
        wrong = ";".join(name for name in gross if name.split(":")[1] == particle)
        rows.append([session, particle, species, material, regime, *(repr(float(one[index])) for one in values), wrong])
    return rows


def write_truth(path: Path, rows: Iterable[Sequence[str]]) -> None:
    """Write the table of true particles."""
    write_plain(path, TRUTH, rows)


def write_true_inputs(path: Path, inputs: Sequence[TrueInput]) -> None:
    """Write true values of the shared inputs (SI); the session is named only where the value depends on it."""
    rows: dict[tuple[str, str], list[str]] = {}
    for name in sorted({one.name for one in inputs}):
        same = [one for one in inputs if one.name == name]
        alike = len({(one.estimate, one.u, one.true) for one in same}) == 1
        for one in same[:1] if alike else same:
            numbers = [repr(float(value)) for value in (one.true, one.estimate, one.u)]
            rows[name, one.session] = [name, "" if alike else one.session, *numbers, one.unit]
    write_plain(path, ("input", "session", "true_value", "estimate", "u", "unit"), rows.values())


def write_true_groups(path: Path, rows: Iterable[Sequence[str]]) -> None:
    """Write what the charges were drawn from: median surface charge density, spreads of its logarithm."""
    heads = ("regime", "charged_with", "surface_charge_density_C_per_m2", "between_sessions", "between_particles")
    write_plain(path, heads, rows)


def write_plain(path: Path, heads: Sequence[str], rows: Iterable[Sequence[str]]) -> None:
    """Write a table for programs: commas, no comment."""
    out = io.StringIO()
    writer = csv.writer(out, lineterminator="\n")
    writer.writerow(heads)
    writer.writerows(rows)
    path.write_bytes(out.getvalue().encode())
