"""From settings and logs to the readings that enter: exclusions, own species, stated uncertainties, elapsed time."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from reduction.inputs import shared_inputs, species_of
from reduction.logs import Logs
from reduction.methods import Array, Readings, Setting, uncertain_inputs
from reduction.settings import Campaign, Session

EXACT = 1e-6  # relative u that stands in for none, small beside any other
OBSERVED = {"balance": "balance_voltage", "height": "height", "secular": "secular_frequency"}


@dataclass(frozen=True)
class Prepared:
    """Readings of one session ready to be fitted.

    `logs` hold elapsed times since each particle's mean balance time, 0 where they are not known; `unstated` marks
    readings without a stated u, per log; `by_particle` and `left_out` say what was excluded and why.
    """

    names: tuple[str, ...]
    species: tuple[str, ...]
    charged_with: tuple[str, ...]
    excluded: dict[str, str]  # particle: reason
    described: dict[str, tuple[str, str]]  # excluded particle: species, charged_with
    left_out: tuple[tuple[str, int, str, str], ...]  # log, line, particle, reason
    setting: Setting
    logs: dict[str, Readings]
    unstated: dict[str, NDArray[np.bool_]]


def prepare(campaign: Campaign, session: Session, logs: Logs) -> Prepared:
    """Readings of one session that enter, sorted by particle, and the setting they were taken in."""
    mentioned = {name for table in logs.tables.values() for name in table["particle"]}
    details = _details(logs.particles)
    excluded = {
        name: str(details[name]["exclude"]) for name in sorted(mentioned & details.keys()) if details[name]["exclude"]
    }
    if session.exclude:
        excluded |= {name: f"session: {session.exclude}" for name in sorted(mentioned - excluded.keys())}
    described = {
        name: (
            str(details.get(name, {}).get("species") or session.species),
            str(details.get(name, {}).get("charged_with") or session.charged_with),
        )
        for name in excluded
    }
    names = tuple(sorted(mentioned - excluded.keys()))
    species = tuple(str(details.get(name, {}).get("species") or session.species) for name in names)
    charged_with = tuple(str(details.get(name, {}).get("charged_with") or session.charged_with) for name in names)
    known = species_of(campaign, session, species)
    inputs = shared_inputs(campaign, session, known)
    by_name = {one.id: one for one in known}
    setting = Setting(
        inputs,
        campaign.traps[session.trap].dc_polarity,
        session.height_reading or "",
        session.secular_reading or "",
        campaign.options.drag == "unsteady",
        species,
        np.array([by_name[name].shape_factor_spread or 0.0 for name in species]),
        np.array([by_name[name].density is not None for name in species], dtype=bool),
        uncertain_inputs(inputs),
        campaign.traps[session.trap].field_map,
    )
    left_out: list[tuple[str, int, str, str]] = []
    readings, unstated = {}, {}
    mean_time = _mean_balance_times(logs, names)
    for log in OBSERVED:
        if log in logs.tables:
            table = logs.tables[log]
            left_out += [
                (log, int(line), str(name), str(reason))
                for line, name, reason in zip(table["line"], table["particle"], table["exclude"], strict=True)
                if reason
            ]
            found = _readings(log, table, names, session, mean_time)
            if len(found):
                readings[log] = found
                unstated[log] = ~np.isfinite(found.u)
    sizes = _diameters(campaign, names, species, details)
    if len(sizes):
        readings["diameter"] = sizes
        unstated["diameter"] = np.zeros(len(sizes), bool)
    return Prepared(names, species, charged_with, excluded, described, tuple(left_out), setting, readings, unstated)


def _details(table: pd.DataFrame | None) -> dict[str, dict[str, object]]:
    if table is None:
        return {}
    return {str(row["particle"]): {str(key): value for key, value in row.items()} for row in table.to_dict("records")}


def _used(table: pd.DataFrame, names: tuple[str, ...]) -> pd.DataFrame:
    return table[(table["exclude"] == "") & table["particle"].isin(names)]


def _mean_balance_times(logs: Logs, names: tuple[str, ...]) -> dict[str, float]:
    """Mean time of each particle's balance readings, where all of them carry one."""
    if "balance" not in logs.tables:
        return {}
    used = _used(logs.tables["balance"], names)
    found = {}
    for name, times in used.groupby("particle")["time"]:
        if times.notna().all():
            found[str(name)] = float(times.mean())
    return found


def _readings(
    log: str, table: pd.DataFrame, names: tuple[str, ...], session: Session, mean_time: dict[str, float]
) -> Readings:
    used = _used(table, names)
    place = {name: index for index, name in enumerate(names)}
    particle = np.array([place[name] for name in used["particle"]], dtype=np.intp)
    order = np.argsort(particle, kind="stable")
    column = OBSERVED[log]
    stated = session.reading.get(column)
    u = used[f"u_{column}"].to_numpy(float)
    u = np.where(np.isfinite(u), u, np.nan if stated is None else stated)
    count = len(used)
    voltage, u_voltage = np.zeros(count), np.zeros(count)
    if log == "height":
        voltage = used["dc_voltage"].to_numpy(float)
        u_voltage = used["u_dc_voltage"].to_numpy(float)
        shared = session.reading.get("dc_voltage")
        u_voltage = np.where(np.isfinite(u_voltage), u_voltage, 0.0 if shared is None else shared)
        # with u from scatter the noise of the voltage is in the scatter already
        u_voltage = np.where(np.isfinite(u), u_voltage, 0.0)
    times = used["time"].to_numpy(float)
    means = np.array([mean_time.get(name, np.nan) for name in used["particle"]], dtype=float)
    elapsed = np.nan_to_num(times - means, nan=0.0)
    return Readings(
        particle[order],
        used[column].to_numpy(float)[order],
        u[order],
        used["drive_amplitude"].to_numpy(float)[order],
        2.0 * np.pi * used["drive_frequency"].to_numpy(float)[order],
        voltage[order],
        u_voltage[order],
        elapsed[order],
        np.zeros(count, bool),
        used.index.to_numpy(np.intp)[order],
        np.zeros(count),
        np.zeros(count),
    )


def _diameters(
    campaign: Campaign,
    names: tuple[str, ...],
    species: tuple[str, ...],
    details: dict[str, dict[str, object]],
) -> Readings:
    """Own diameters, and the lot's distribution for particles without one, as rows of the diameter method."""
    rows: list[tuple[int, float, float, bool]] = []
    for index, (name, kind) in enumerate(zip(names, species, strict=True)):
        own = details.get(name, {})
        diameter, u = (float(own.get(key, np.nan)) for key in ("diameter", "u_diameter"))  # type: ignore[arg-type]
        if np.isfinite(diameter) and not np.isfinite(u):
            u = EXACT * diameter  # a diameter stated without u counts as exact
        lot = campaign.species[kind]
        if lot.density is None:
            continue
        if np.isfinite(diameter) and np.isfinite(u):
            rows.append((index, diameter, u, False))
        elif lot.diameter is not None and lot.diameter_spread is not None and campaign.options.lot == "prior":
            rows.append((index, 0.0, lot.diameter_spread / lot.diameter.estimate, True))
    count = len(rows)
    empty = np.zeros(count)
    return Readings(
        np.array([row[0] for row in rows], dtype=np.intp),
        np.array([row[1] for row in rows], dtype=float),
        np.array([row[2] for row in rows], dtype=float),
        empty,
        np.ones(count),
        empty,
        empty,
        empty,
        np.array([row[3] for row in rows], dtype=bool),
        np.full(count, -1, dtype=np.intp),
        empty,
        empty,
    )


def with_u(readings: Readings, u: Array) -> Readings:
    """The same readings with other standard uncertainties."""
    return replace(readings, u=u)
