"""One session: its settings, with what `every_session` gives filled in, and what its logs need."""

from __future__ import annotations

from collections.abc import Collection, Mapping
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

from reduction.contract import SESSION, Key
from reduction.entries import BLANK, Entries, Entry, filled, read_entries, require, value_of
from reduction.errors import Faults, nearest
from reduction.logged import Logged, logged_in
from reduction.quantity import Quantity
from reduction.yamlfile import read_yaml


@dataclass(frozen=True)
class Air:
    """Air around the trap."""

    temperature: Quantity  # [K]
    pressure: Quantity  # [Pa]
    relative_humidity: Quantity  # [1]


@dataclass(frozen=True)
class Site:
    """Where the trap stands: gravity, or latitude and elevation."""

    gravity: Quantity | None  # [m/s2]
    latitude: Quantity | None  # [rad]
    elevation: Quantity | None  # [m]


@dataclass(frozen=True)
class Session:
    """One session, with what `every_session` gives filled in."""

    id: str
    date: str
    trap: str
    species: str
    charged_with: str
    air: Air
    site: Site
    gain: dict[str, Quantity]  # dc_voltage, drive_voltage, height as far as logged; always diameter, drive_frequency
    offset: dict[str, Quantity]  # dc_voltage [V], as far as logged
    reading: dict[str, float | None]  # balance_voltage [V], dc_voltage [V], secular_frequency [Hz], height [m]
    secular_reading: str | None
    height_reading: str | None
    operator: str
    instruments: dict[str, str]
    contacts: float | None
    attributes: dict[str, str]
    exclude: str  # reason, "" where the session counts
    notes: str
    where: dict[str, tuple[str, int]] = field(default_factory=dict, compare=False, repr=False)  # key: file, line


def read_session(
    folder: Path, id_: str, every: Entries, traps: Mapping[str, Any], species: Mapping[str, Any], faults: Faults
) -> Session | None:
    """Read session.yaml over `every`, the entries of every_session; None if anything is at fault or missing."""
    path = f"sessions/{id_}/session.yaml"
    mapping = read_yaml(folder / path, path, faults=faults)
    if mapping is None:
        return None
    entries = _merged(every, read_entries(mapping, SESSION, path, faults=faults))
    logged = logged_in(folder / "sessions" / id_)
    advice = "Add it here, or under every_session in campaign.yaml."
    require(entries, needed(logged), path, faults=faults, advice=advice)
    entries = filled(entries)
    _check_site(entries, path, faults)
    for stem, known, name in (("trap", traps, "traps"), ("species", species, "species")):
        entry = entries.get(stem)
        if entry and entry.value is not None and entry.value not in known:
            found = f"{entry.value}, which has no file {name}/{entry.value}.yaml"
            near = nearest(str(entry.value), known) if known else f"Add the file to {name}/."
            faults.add(path, line=entry.line if entry.path == path else 0, column=stem, found=found,
                       expected=f"the name of a file in {name}/", advice=near)  # fmt: skip
    _check_gradient(entries, logged, traps, path, faults)
    if len(faults) or any(entry.value is None for entry in entries.values()):
        return None
    return _made(id_, entries)


def _merged(every: Entries, own: Entries) -> Entries:
    """Entries of a session over those of every_session."""
    whole = tuple(f"{stem}." for stem in ("site",) if any(key.startswith(f"{stem}.") for key in own))
    below = {stem: entry for stem, entry in every.items() if not (whole and stem.startswith(whole))}
    merged = below | {stem: entry for stem, entry in own.items() if entry.value is not BLANK or stem not in below}
    words = [value_of(entries, "attributes") for entries in (below, own)]
    if all(isinstance(word, dict) for word in words):
        merged["attributes"] = Entry(words[0] | words[1], own["attributes"].path, own["attributes"].line)
    return merged


def needed(logged: Logged) -> tuple[Key, ...]:
    """Keys of a session, each required if something logged needs it."""
    wanted = {
        "height_reading": "height" in logged.logs,
        "secular_reading": "secular" in logged.logs,
        "gain.height": "height" in logged.logs,
        "gain.dc_voltage": logged.dc_voltage,
        "offset.dc_voltage": logged.dc_voltage,
    }

    def marked(key: Key, above: str = "") -> Key:
        keys = tuple(marked(inner, f"{key.stem}.") for inner in key.keys)
        required = wanted.get(above + key.stem, key.required)
        return Key(key.name, key.kind, key.about, required, key.of, key.words, keys, key.bounds, key.default)

    return tuple(marked(key) for key in SESSION)


def _check_site(entries: Entries, path: str, faults: Faults) -> None:
    given = [stem for stem in ("gravity", "latitude", "elevation") if f"site.{stem}" in entries]
    if ("site" in entries and entries["site"].value is None) or given in (["gravity"], ["latitude", "elevation"]):
        return
    entry = entries.get("site")
    line = entry.line if entry and entry.path == path else 0
    found = " and ".join(given) or "nothing"
    expected = "gravity_m_per_s2 alone, or latitude_deg with elevation_m"
    faults.add(path, line=line, column="site", found=found, expected=expected, advice="Give one or the other.")


def _check_gradient(entries: Entries, logged: Logged, traps: Mapping[str, Any], path: str, faults: Faults) -> None:
    trap = traps.get(str(value_of(entries, "trap")))
    if trap is not None and trap.ac_gradient_per_volt is None and {"height", "secular"} & set(logged.logs):
        log = "height.csv" if "height" in logged.logs else "secular.csv"
        faults.add(
            path,
            line=entries["trap"].line if entries["trap"].path == path else 0,
            column="trap",
            found=f"{trap.id}, whose file has no ac_gradient_per_volt_per_m2, with {log}",
            expected="a trap whose axial field gradient is known",
            advice=f"Add ac_gradient_per_volt_per_m2 to traps/{trap.id}.yaml.",
        )


def _made(id_: str, entries: Entries) -> Session:
    def group(name: str, stems: Collection[str]) -> dict[str, Any]:
        return {stem: value for stem in stems if (value := value_of(entries, f"{name}.{stem}")) is not None}

    exact = {"diameter": Quantity(1.0), "drive_frequency": Quantity(1.0)}
    texts = {stem: value_of(entries, stem, "") for stem in ("operator", "exclude", "notes")}
    instruments = {key.stem for key in SESSION if key.stem == "instruments" for key in key.keys}
    return Session(
        id=id_,
        **{stem: value_of(entries, stem) for stem in ("date", "trap", "species", "charged_with")},
        air=Air(**group("air", ("temperature", "pressure", "relative_humidity"))),
        site=Site(*(value_of(entries, f"site.{stem}") for stem in ("gravity", "latitude", "elevation"))),
        gain=exact | group("gain", ("dc_voltage", "drive_voltage", "height", "diameter", "drive_frequency")),
        offset=group("offset", ("dc_voltage",)),
        reading={
            stem: value_of(entries, f"reading.{stem}")
            for stem in ("balance_voltage", "dc_voltage", "secular_frequency", "height")
        },
        secular_reading=value_of(entries, "secular_reading"),
        height_reading=value_of(entries, "height_reading"),
        instruments=group("instruments", sorted(instruments)),
        contacts=value_of(entries, "contacts"),
        attributes=dict(value_of(entries, "attributes", {})),
        where={stem: (entry.path, entry.line) for stem, entry in sorted(entries.items())},
        **texts,
    )
