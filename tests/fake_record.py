"""A made-up session record with the look of a real one, for tests of figures and reports.

The numbers follow the steady-drag, small-drive forms of the measurement equations closely enough to be drawn; nothing
here is a reduction, and no test takes them for one.
"""

from __future__ import annotations

import json
import math
from pathlib import Path
from typing import Any

import numpy as np

from reduction.tables import COLUMNS, write_table

D, A, G, E_CHARGE = 61.3, 1.31e4, 9.81, 1.602176634e-19
INPUTS = (
    ("trap/ring-a/dc_field_per_volt_per_m", 61.3, 0.9, "1/m", 61.1, 0.7),
    ("trap/ring-a/ac_gradient_per_volt_per_m2", 1.31e4, 200.0, "1/m2", 1.322e4, 90.0),
    ("session/{s}/stray_field_V_per_m", 0.0, 40.0, "V/m", 12.0, 9.0),
    ("session/{s}/gain_dc_voltage", 1.0, 0.002, "1", 1.0001, 0.002),
    ("campaign//viscosity_formula", 1.0, 0.004, "1", 1.0005, 0.0039),
    ("species/lycopod/shape_factor", 1.08, 0.03, "1", 1.07, 0.02),
)


def _rows(name: str, rows: list[dict[str, Any]]) -> list[dict[str, Any]]:
    return [{column: row.get(column) for column in COLUMNS[name]} for row in rows]


def write_record(
    folder: Path, session: str = "s001", *, particles: int = 4, seed: int = 7, date: str = "2026-03-04",
    charged_with: str = "ptfe", species: str = "lycopod", sign: int = -1, notes: str = "Quiet afternoon.",
    operator: str = "bench 3", reason: str = "touched the ring", secular: bool = True, ids: list[str] | None = None,
) -> Path:  # fmt: skip
    """Write a whole record folder and return it."""
    rng = np.random.default_rng(seed)
    folder.mkdir(parents=True, exist_ok=True)
    names = ids or [f"p{k:02d}" for k in range(1, particles + 1)]
    tables: dict[str, list[dict[str, Any]]] = {name: [] for name in COLUMNS}
    curves: dict[str, Any] = {}
    for k, particle in enumerate(names):
        head = {"session": session, "particle": particle}
        if k == len(names) - 1 and len(names) > 1:
            tables["particles"].append(
                {**head, "species": species, "charged_with": charged_with, "status": "excluded", "flags": "",
                 "methods": "", "readings": 6, "mass_from": ""}
            )  # fmt: skip
            continue
        s = sign * 1.2e-3 * float(rng.lognormal(0, 0.3))
        gamma = 900.0 * float(rng.lognormal(0, 0.15))
        d = 27e-6 * (900.0 / gamma) ** 0.5
        mass = math.pi / 6 * 1050 * d**3
        charge = s * mass
        u_s, u_g = 0.014 * abs(s), 0.03 * gamma
        tables["particles"].append(
            {**head, "species": species, "charged_with": charged_with, "status": "ok",
             "flags": "outlier_reading" if k == 0 else "", "charge_to_mass_C_per_kg": s,
             "u_charge_to_mass_C_per_kg": u_s, "charge_to_mass_low_C_per_kg": s - 1.98 * u_s,
             "charge_to_mass_high_C_per_kg": s + 1.98 * u_s, "methods": "balance;height;secular;diameter",
             "readings": 38, "chi_square": 31.2, "degrees_of_freedom": 33, "effective_degrees_of_freedom": 120.0,
             "drag_rate_per_s": gamma, "u_drag_rate_per_s": u_g, "diameter_um": d * 1e6,
             "u_diameter_um": 0.016 * d * 1e6, "mass_from": "adjusted", "mass_kg": mass, "u_mass_kg": 0.05 * mass,
             "mass_low_kg": 0.91 * mass, "mass_high_kg": 1.11 * mass, "charge_C": charge,
             "u_charge_C": 0.052 * abs(charge), "charge_e": charge / E_CHARGE,
             "u_charge_e": 0.052 * abs(charge) / E_CHARGE,
             "charge_low_e": min(0.9 * charge, 1.1 * charge) / E_CHARGE,
             "charge_high_e": max(0.9 * charge, 1.1 * charge) / E_CHARGE,
             "surface_charge_density_C_per_m2": charge / (math.pi * d * d),
             "u_surface_charge_density_C_per_m2": 0.03 * abs(charge) / (math.pi * d * d)}
        )  # fmt: skip
        _readings(rng, tables, curves, head, s, gamma, k, secular)
        _methods(rng, tables, head, s, gamma, u_s, u_g, secular)
        _budget(tables, head, session, s, gamma, d, mass, charge)
    for name, estimate, u, unit, adjusted, adjusted_u in INPUTS:
        full = name.format(s=session)
        scope, owner, _ = full.split("/")
        tables["inputs"].append(
            {"input": full, "scope": scope, "owner": owner, "estimate": estimate, "u": u, "unit": unit,
             "shape": "normal", "adjusted_estimate": adjusted, "adjusted_u": adjusted_u,
             "pull": (adjusted - estimate) / math.sqrt(u**2 - adjusted_u**2) if adjusted_u < u else None}
        )  # fmt: skip
    for name in ("particles", "methods", "agreement", "inputs", "components", "budget", "readings"):
        write_table(folder / f"{name}.csv", COLUMNS[name], _rows(name, tables[name]))
    facts = {
        "session": session,
        "status": "ok",
        "reason": "",
        "date": date,
        "trap": "ring-a",
        "species": species,
        "charged_with": charged_with,
        "operator": operator,
        "contacts": 12,
        "attributes": {"lot": "B7", "humidity_box": "open"},
        "air": {"temperature_degC": "22.4(3)", "pressure_hPa": "1004.2(5)", "relative_humidity_percent": "41(2)"},
        "site": {"gravity_m_per_s2": "9.8127(1)"},
        "session_notes": notes,
        "notes": [],
        "exact_inputs": [["gain/drive_frequency", "1", "1"], ["offset/dc_voltage_V", "0.0", "V"]],
        "left_out": [["height.csv", 14, names[0], reason], ["particles.csv", 5, names[-1], "touched the ring"]],
        "flagged": [["height.csv", 9, names[0], "4.6 standard deviations from the fit"]],
        "curves": curves,
        "stray_field": {"estimate": 0.0, "u": 40.0, "adjusted": 12.0 + 10 * math.sin(seed), "adjusted_u": 9.0},
        "dc_polarity": 1,
        "strain": {
            "chi_square": 131.4,
            "degrees_of_freedom": 118,
            "p": 0.188,
            "strains_most": names[0],
            "others_move_u": 0.21,
            "sentences": [f"The height log of particle {names[0]} misses the adjusted values by 2.2 u."],
        }
        if len(names) > 2
        else None,
        "adjust": "session",
        "coverage_probability": 0.95,
    }
    (folder / "session.json").write_text(json.dumps(facts, ensure_ascii=False), encoding="utf-8")
    return folder


def _readings(
    rng: np.random.Generator, tables: dict[str, list[dict[str, Any]]], curves: dict[str, Any],
    head: dict[str, Any], s: float, gamma: float, k: int, secular: bool,
) -> None:  # fmt: skip
    omega = 2 * math.pi * 50.0
    null = G / (abs(s) * D) * (1 if s > 0 else -1)
    heights, line = [], 2 + 30 * k

    def slope(drive: float) -> float:  # [mm/V]
        h = abs(s) * A * drive / (2 * omega**2)
        return abs(s) * D / (omega**2 * 2 * h * h / (1 + (gamma / omega) ** 2)) * 1e3

    for drive in (400.0, 600.0, 800.0):
        spans = np.linspace(null - 0.45 / slope(600.0), null + 0.45 / slope(600.0), 6)
        for dc in spans:
            value = (1 if s > 0 else -1) * slope(drive) * (dc - null)
            noise = float(rng.normal(0, 0.004))
            if k == 0 and drive == 600.0 and dc == spans[3]:
                noise = 0.0184
            status = "flagged" if abs(noise) > 0.015 else "excluded" if (k == 0 and line % 30 == 14) else "used"
            tables["readings"].append(
                {**head, "log": "height", "line": line, "status": status,
                 "flags": "outlier_reading" if status == "flagged" else "",
                 "exclude": "touched the ring" if status == "excluded" else "", "drive_voltage_peak_V": drive,
                 "drive_frequency_Hz": 50.0, "dc_voltage_V": float(dc), "height_mm": value + noise,
                 "time_s": 60.0 * line, "u_reading": 0.004, "residual": noise, "normalized_residual": noise / 0.004,
                 "adjusted_residual": noise * 0.9}
            )  # fmt: skip
            line += 1
        grid = np.linspace(null - 0.5 / slope(600.0), null + 0.5 / slope(600.0), 9)
        heights.append(
            {"drive_V": drive, "drive_Hz": 50.0, "dc_V": grid.tolist(),
             "height_mm": [(1 if s > 0 else -1) * slope(drive) * float(v - null) for v in grid]}
        )  # fmt: skip
    for n in range(5):
        noise = float(rng.normal(0, 0.05))
        tables["readings"].append(
            {**head, "log": "balance", "line": 2 + 5 * k + n, "status": "used", "flags": "", "exclude": "",
             "drive_voltage_peak_V": 600.0, "drive_frequency_Hz": 50.0, "balance_voltage_V": null + noise,
             "time_s": 300.0 * n, "u_reading": 0.05, "residual": noise, "normalized_residual": noise / 0.05,
             "adjusted_residual": noise}
        )  # fmt: skip
    entry: dict[str, Any] = {"height": heights}
    if secular:

        def frequency(drive: float) -> float:
            h = abs(s) * A * drive / (2 * omega**2)
            return 50.0 * math.sqrt(2) * h

        for n, drive in enumerate(np.linspace(300, 900, 6)):
            noise = float(rng.normal(0, 0.03))
            tables["readings"].append(
                {**head, "log": "secular", "line": 2 + 6 * k + n, "status": "used", "flags": "", "exclude": "",
                 "drive_voltage_peak_V": float(drive), "drive_frequency_Hz": 50.0,
                 "secular_frequency_Hz": 0.93 * frequency(drive) + noise, "u_reading": 0.03, "residual": noise,
                 "normalized_residual": noise / 0.03, "adjusted_residual": noise}
            )  # fmt: skip
        grid = np.linspace(200, 950, 25)
        entry["secular"] = {
            "drive_Hz": 50.0, "drive_V": grid.tolist(),
            "frequency_Hz": [None if v < 240 else 0.93 * frequency(v) for v in grid],
            "drag_free_Hz": [frequency(v) for v in grid],
        }  # fmt: skip
    curves[str(head["particle"])] = entry


def _methods(
    rng: np.random.Generator, tables: dict[str, list[dict[str, Any]]], head: dict[str, Any], s: float, gamma: float,
    u_s: float, u_g: float, secular: bool,
) -> None:  # fmt: skip
    gives = {"balance": (True, False), "height": (True, True), "secular": (True, False), "diameter": (False, True)}
    for method, (has_s, has_g) in gives.items():
        ok = method != "secular" or secular
        row = {**head, "method": method, "status": "ok" if ok else "no_oscillation",
               "reason": "" if ok else "the drag is too high for a secular oscillation", "readings": 6,
               "chi_square": 4.2, "degrees_of_freedom": 4,
               "normalized_residual": float(rng.normal()) if ok else None}  # fmt: skip
        if has_s and ok:
            row |= {"charge_to_mass_C_per_kg": s * (1 + float(rng.normal(0, 0.01))),
                    "u_charge_to_mass_C_per_kg": 1.6 * u_s, "u_random_charge_to_mass_C_per_kg": 0.3 * u_s}  # fmt: skip
        if has_g:
            row |= {"drag_rate_per_s": gamma * (1 + float(rng.normal(0, 0.03))), "u_drag_rate_per_s": 1.5 * u_g}
        tables["methods"].append(row)
    tables["methods"].append(
        {**head, "method": "adjusted", "status": "ok", "reason": "", "charge_to_mass_C_per_kg": s,
         "u_charge_to_mass_C_per_kg": u_s, "drag_rate_per_s": gamma, "u_drag_rate_per_s": u_g, "readings": 30,
         "chi_square": 31.2, "degrees_of_freedom": 33}
    )  # fmt: skip
    pairs = [("balance", "height", "charge_to_mass", "C/kg", u_s), ("height", "diameter", "drag_rate", "1/s", u_g)]
    if secular:
        pairs.insert(1, ("balance", "secular", "charge_to_mass", "C/kg", u_s))
    for a, b, quantity, unit, u in pairs:
        difference = float(rng.normal(0, u))
        tables["agreement"].append(
            {**head, "method_a": a, "method_b": b, "quantity": quantity, "difference": difference, "u_difference": u,
             "unit": unit, "normalized_error": difference / (2 * u)}
        )  # fmt: skip


def _budget(
    tables: dict[str, list[dict[str, Any]]], head: dict[str, Any], session: str, s: float, gamma: float, d: float,
    mass: float, charge: float,
) -> None:  # fmt: skip
    results = {"charge_to_mass": (s, 0.014, "C/kg"), "drag_rate": (gamma, 0.03, "1/s"), "diameter": (d, 0.016, "m"),
               "mass": (mass, 0.05, "kg"), "charge": (charge, 0.052, "C"),
               "surface_charge_density": (charge / (math.pi * d * d), 0.03, "C/m2")}  # fmt: skip
    weights = np.array([0.62, 0.05, 0.55, 0.1, 0.2, 0.3, 0.4])
    weights /= math.sqrt(float(weights @ weights))
    for result, (value, relative, unit) in results.items():
        total = relative * abs(value)
        names = [*INPUTS, (f"particle/{session}/{head['particle']}/1", 0.0, 1.0, "1", 0.0, 1.0)]
        for weight, (name, estimate, u, _, _, _) in zip(weights, names, strict=True):
            full = name.format(s=session)
            component = float(weight * total)
            tables["budget"].append(
                {**head, "result": result, "input": full, "estimate": estimate, "u": u, "shape": "normal",
                 "evaluation": "A" if full.startswith("particle") else "B", "sensitivity": component / u,
                 "component": component, "share": float(weight**2)}
            )  # fmt: skip
            tables["components"].append(
                {**head, "result": result, "input": full, "scope": full.split("/")[0], "component": component,
                 "unit": unit}
            )  # fmt: skip
