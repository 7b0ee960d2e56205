"""Results read back with their correlations, as uncertain numbers that share what they depend on.

components.csv is a square root of the covariance of all results. Each name in it becomes one independent variable of
unit standard deviation, so means, ratios and differences of results carry every correlation, within a session and
between sessions. `propagation.covariance` gives the covariance matrix of any of them.
"""

from __future__ import annotations

from collections.abc import Iterable
from pathlib import Path
from typing import Any

import numpy as np
from uncertainties import UFloat, ufloat

from reduction.tables import read_table

COLUMN = {
    "charge_to_mass": ("charge_to_mass_C_per_kg", 1.0),
    "drag_rate": ("drag_rate_per_s", 1.0),
    "diameter": ("diameter_um", 1e-6),
    "mass": ("mass_kg", 1.0),
    "charge": ("charge_C", 1.0),
    "surface_charge_density": ("surface_charge_density_C_per_m2", 1.0),
}
"""Column of particles.csv that holds each result, and its unit in SI."""

Key = tuple[str, str, str]


def read_results(folder: Path | str) -> dict[Key, UFloat]:
    """Every result of a results folder as an uncertain number, SI, by session, particle and result.

    x = estimate + sum of component_k z_k, the z_k independent with unit standard deviation, equal names equal z

    Parameters
    ----------
    folder : Path
        A results folder with particles.csv and components.csv.

    Returns
    -------
    dict
        (session, particle, result) to an uncertain number; results that are not determined are absent.
    """
    particles = read_table(Path(folder) / "particles.csv").to_dict("records")
    components = read_table(Path(folder) / "components.csv")
    parts: dict[Key, list[tuple[str, float]]] = {}
    columns = (components[name] for name in ("session", "particle", "result", "input", "component"))
    for session, particle, result, name, component in zip(*columns, strict=True):
        parts.setdefault((session, particle, result), []).append((name, float(component)))
    variables: dict[str, UFloat] = {}
    found: dict[Key, UFloat] = {}
    for row in particles:
        for result, (column, unit) in COLUMN.items():
            key = (str(row["session"]), str(row["particle"]), result)
            if key in parts and np.isfinite(row[column]):
                found[key] = float(row[column]) * unit + _combined(parts[key], variables)
    return found


def _combined(parts: Iterable[tuple[str, float]], variables: dict[str, UFloat]) -> Any:
    total: Any = 0.0
    for name, component in parts:
        if name not in variables:
            variables[name] = ufloat(0.0, 1.0, tag=name)
        total = total + component * variables[name]
    return total
