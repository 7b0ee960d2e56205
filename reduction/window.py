"""What a session could have held: the charge-to-mass ratios its drive and dc supply reached, and the particles lost.

A particle that lost its balance below the voltage the supply gave, or left the stable region, is never seen. The
window says where the seen ones end for want of volts, so that the end of a histogram is not taken for nature's.
"""

from __future__ import annotations

import math
from typing import Any

import numpy as np
from numpy.typing import NDArray

from reduction import gravity, motion
from reduction.logs import Logs
from reduction.settings import Session, Site, Trap

Array = NDArray[np.floating[Any]]
DRIVEN = ("balance", "secular", "height")


def window_record(session: Session, trap: Trap, logs: Logs, drag_rate: float) -> dict[str, Any]:
    """Charge-to-mass ratios that the voltages logged in a session could have balanced and held, for session.json.

    Least: |q/m| = g / (D |U|) at the largest true dc voltage of the sign that lifts it. Largest: the end of the first
    stable region, q/m = 2 Omega^2 h_lim(gamma / Omega) / (A V), at the gentlest drive logged. Lost particles' last
    voltages count, for the supply gave them.

    Parameters
    ----------
    session, trap : Session, Trap
        Settings.
    logs : Logs
        Its logs, as read.
    drag_rate : float
        Typical drag rate of its particles [1/s]; NaN: taken without drag.

    Returns
    -------
    dict
        `positive_C_per_kg` and `negative_C_per_kg`: [least, largest] in size, None where no voltage of that sign was
        logged, an end None where nothing sets it; `drive_V` and `dc_V`: [least, largest] logged.
    """
    tables = [logs.tables[name] for name in DRIVEN if name in logs.tables] + ([] if logs.lost is None else [logs.lost])
    raw = [table[name] for table in tables for name in ("balance_voltage", "dc_voltage") if name in table]
    voltage = _joined([column.to_numpy(dtype=float) for column in raw])
    true = trap.dc_polarity * (session.gain["dc_voltage"].estimate * voltage + _offset(session))
    amplitude = _joined([table["drive_amplitude"].to_numpy(dtype=float) for table in tables])
    largest = _stable_end(session, trap, logs, drag_rate)
    reach = local_gravity(session.site) / trap.dc_field_per_volt.estimate
    found: dict[str, Any] = {"drive_V": _ends(amplitude), "dc_V": _ends(true)}
    for word, sign in (("positive", 1.0), ("negative", -1.0)):
        most = float((sign * true).max()) if len(true) else 0.0
        found[f"{word}_C_per_kg"] = [reach / most, largest] if most > 0.0 else None
    return found


def _stable_end(session: Session, trap: Trap, logs: Logs, drag_rate: float) -> float | None:
    if trap.ac_gradient_per_volt is None:
        return None
    logged = [logs.tables[name] for name in DRIVEN if name in logs.tables]
    gain = session.gain.get("drive_voltage")
    amplitude = _joined([t["drive_amplitude"].to_numpy(dtype=float) for t in logged], finite=False)
    frequency = _joined([t["drive_frequency"].to_numpy(dtype=float) for t in logged], finite=False)
    known = np.isfinite(amplitude) & np.isfinite(frequency) & (amplitude > 0.0)
    if not known.any():
        return None
    settings = np.unique(np.column_stack([amplitude[known], frequency[known]]), axis=0)
    omega = 2.0 * math.pi * settings[:, 1]
    limit = motion.stability_limit((drag_rate if math.isfinite(drag_rate) else 0.0) / omega)
    volts = settings[:, 0] * (gain.estimate if gain is not None else 1.0)
    ends = 2.0 * omega**2 * np.asarray(limit) / (trap.ac_gradient_per_volt.estimate * volts)
    return float(np.max(ends)) if np.isfinite(ends).all() else None


def local_gravity(site: Site) -> float:
    """Gravity of a site as stated or by the normal formula [m/s2]."""
    if site.gravity is not None:
        return site.gravity.estimate
    assert site.latitude is not None  # the check demands one form or the other
    assert site.elevation is not None
    return float(gravity.normal_gravity(site.latitude.estimate, site.elevation.estimate))


def _offset(session: Session) -> float:
    offset = session.offset.get("dc_voltage")
    return offset.estimate if offset is not None else 0.0


def _joined(columns: list[Array], *, finite: bool = True) -> Array:
    joined = np.concatenate([np.zeros(0), *columns])
    return joined[np.isfinite(joined)] if finite else joined


def _ends(values: Array) -> list[float] | None:
    return [float(values.min()), float(values.max())] if len(values) else None


def lost_record(session: Session, logs: Logs) -> list[dict[str, Any]]:
    """Particles lost in a session, for session.json: what they were, why they were lost, their last voltages."""
    if logs.lost is None:
        return []
    own: dict[str, dict[str, Any]] = {}
    if logs.particles is not None:
        own = {str(row["particle"]): dict(row) for row in logs.particles.to_dict("records")}  # type: ignore[arg-type]
    rows = []
    for row in logs.lost.to_dict("records"):
        known = own.get(str(row["particle"]), {})
        rows.append(
            {
                "particle": str(row["particle"]),
                "reason": str(row["reason"]),
                "species": known.get("species") or session.species,
                "charged_with": known.get("charged_with") or session.charged_with,
                "drive_V": _plain(row["drive_amplitude"]),
                "dc_V": _plain(row["dc_voltage"]),
            }
        )
    return rows


def _plain(value: float) -> float | None:
    return float(value) if math.isfinite(value) else None
