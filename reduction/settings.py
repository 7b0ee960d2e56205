"""Settings of a campaign: its options, traps, species and sessions, typed and in SI, with the line of every entry."""

from __future__ import annotations

import math
import os
from collections.abc import Collection, Mapping
from dataclasses import dataclass, replace
from pathlib import Path
from typing import Any

from reduction import digests
from reduction.contract import CAMPAIGN, COMPARE, ID, ID_WORDS, SPECIES, TRAP, Key
from reduction.drawing import Drawing
from reduction.drawingfile import read_drawing
from reduction.entries import Entries, filled, read_entries, require, value_of
from reduction.errors import Fault, Faults, nearest
from reduction.fieldmap import FieldMap
from reduction.quantity import Quantity
from reduction.sessionfile import Air, Session, Site, read_session
from reduction.trapconstants import TrapConstants
from reduction.trapsolution import constants_of
from reduction.yamlfile import read_yaml

__all__ = ["Air", "Campaign", "Compare", "Options", "Session", "Site", "Species", "Trap", "load_campaign"]


@dataclass(frozen=True)
class Trap:
    """What the electrodes make of the voltages."""

    id: str
    dc_field_per_volt: Quantity  # [1/m]
    ac_gradient_per_volt: Quantity | None  # [1/m2]
    stray_field: Quantity  # [V/m] vertical, drawn anew each session
    dc_polarity: int  # 1 or -1
    usable_height: float | None  # [m]
    source: str
    drawing: Drawing | None = None  # of the electrodes, in place of the two constants
    constants: TrapConstants | None = None  # computed from the drawing

    @property
    def field_map(self) -> FieldMap | None:
        """How the constants follow from the dimensions, where the electrodes are drawn."""
        return self.constants.field_map if self.constants else None


@dataclass(frozen=True)
class Species:
    """What the particles of a lot have in common."""

    id: str
    shape_factor: Quantity  # [1] dynamic, on the drag
    shape_factor_spread: float | None  # [1] standard deviation between particles
    diameter: Quantity | None  # [m] mean, volume-equivalent
    diameter_spread: float | None  # [m] standard deviation between particles
    density: Quantity | None  # [kg/m3]


@dataclass(frozen=True)
class Compare:
    """What the comparison compares, and between which groups."""

    quantity: str
    by: str


@dataclass(frozen=True)
class Options:
    """Options of a campaign; each defaults to the first value the contract shows."""

    when_a_session_fails: str
    coverage_probability: float
    adjust: str
    drag: str
    mass_from: str
    lot: str
    scatter: str
    compare: Compare
    monte_carlo_trials: int
    seed: int


@dataclass(frozen=True)
class Campaign:
    """Everything but the logs."""

    folder: Path
    title: str
    session_ids: tuple[str, ...]  # sorted, to be reduced
    leave_out: dict[str, str]  # session: reason
    faulty: dict[str, list[Fault]]  # sessions left out for their faults
    options: Options
    traps: dict[str, Trap]
    species: dict[str, Species]
    sessions: dict[str, Session]


def load_campaign(
    folder: Path | str, *, faults: Faults, only: Collection[str] | None = None, keep: Path | None = None
) -> Campaign:
    """Read the settings of a campaign; every fault goes to `faults`.

    Entries of `every_session` hold where a session does not give them itself: entry by entry within `air`, `gain`,
    `offset`, `reading`, `instruments` and `attributes`, but `site` as a whole.

    Parameters
    ----------
    folder : Path
        The campaign.
    faults : Faults
        Collector; with `when_a_session_fails: leave_out` those of a session go to `Campaign.faulty` instead.
    only : collection of str, optional
        Read these sessions only.
    keep : Path, optional
        Folder of trap constants computed before from drawings, to be read and added to. The constants of a trap whose
        electrodes are drawn are computed if a session that is read names it; one that none names is left out.

    Returns
    -------
    Campaign
        With as much as could be read; whole only if no fault was added.
    """
    folder = Path(folder)
    chosen, every = _campaign_file(folder, faults)
    traps = _folder_of(folder, "traps", TRAP, _trap, faults)
    species = _folder_of(folder, "species", SPECIES, _species, faults)
    ids = _session_ids(folder, chosen, faults)
    options = _options(chosen)
    leave_out = value_of(chosen, "leave_out", {})
    sessions: dict[str, Session] = {}
    faulty: dict[str, list[Fault]] = {}
    for id_ in ids:
        if only is not None and id_ not in only:
            continue
        own = Faults()
        session = read_session(folder, id_, every, traps, species, own)
        if len(own) and options.when_a_session_fails == "leave_out":
            faulty[id_] = list(own)
        else:
            faults.extend(own)
            if session:
                sessions[id_] = session
    _check_groups(options, sessions, chosen, faults)
    kept = tuple(id_ for id_ in ids if id_ not in faulty)
    title = value_of(chosen, "title", "")
    named = {session.trap for session in sessions.values()}
    clean_traps = {id_: trap for id_, trap in traps.items() if trap and (trap.drawing is None or id_ in named)}
    for id_, trap in clean_traps.items():
        if trap.drawing is not None:
            clean_traps[id_] = solved(trap, folder / "traps" / f"{id_}.yaml", f"traps/{id_}.yaml", keep, faults=faults)
    clean_species = {id_: kind for id_, kind in species.items() if kind}
    return Campaign(folder, title, kept, leave_out, faulty, options, clean_traps, clean_species, sessions)


def _campaign_file(folder: Path, faults: Faults) -> tuple[Entries, Entries]:
    """Entries of the campaign itself, and those of every_session."""
    if not os.path.isdir(folder):
        advice = "Name the folder that holds campaign.yaml; motescale new makes one."
        faults.add("campaign.yaml", found=f"no folder {folder.name}", expected="a campaign folder", advice=advice)
        return {}, {}
    mapping = read_yaml(folder / "campaign.yaml", "campaign.yaml", faults=faults)
    if mapping is None:
        return {}, {}
    entries = filled(read_entries(mapping, CAMPAIGN, "campaign.yaml", faults=faults))
    prefix = "every_session."
    every = {stem.removeprefix(prefix): entry for stem, entry in entries.items() if stem.startswith(prefix)}
    return entries, every


def _defaults(keys: tuple[Key, ...]) -> dict[str, str]:
    return {key.stem: key.words[0] if key.words else key.default for key in keys}


def _options(entries: Entries) -> Options:
    default = _defaults(CAMPAIGN)
    compare = _defaults(COMPARE)
    words = {
        word: value_of(entries, word, default[word])
        for word in ("when_a_session_fails", "adjust", "drag", "mass_from", "lot", "scatter")
    }
    return Options(
        coverage_probability=float(value_of(entries, "coverage_probability", default["coverage_probability"])),
        compare=Compare(**{word: value_of(entries, f"compare.{word}", compare[word]) for word in compare}),
        monte_carlo_trials=int(value_of(entries, "monte_carlo_trials", default["monte_carlo_trials"])),
        seed=int(value_of(entries, "seed", default["seed"])),
        **words,
    )


def _folder_of(folder: Path, name: str, keys: tuple[Key, ...], make: Any, faults: Faults) -> dict[str, Any]:
    """Each YAML file of traps/ or species/; None for one with faults."""
    found: dict[str, Any] = {}
    for path in _listed(folder / name):
        label = f"{name}/{path.name}"
        if path.suffix == ".yml":
            faults.add(label, found="the ending .yml", expected="the ending .yaml", advice="Rename the file.")
        if path.suffix != ".yaml":
            continue
        if not ID.fullmatch(path.stem):
            faults.add(label, found=path.stem, expected=ID_WORDS, advice="Rename the file.")
            continue
        own = Faults()
        mapping = read_yaml(path, label, faults=own)
        if mapping is not None:
            entries = read_entries(mapping, keys, label, faults=own)
            require(entries, keys, label, faults=own, advice="Add the key.")
        found[path.stem] = make(path.stem, filled(entries), label, own) if mapping is not None else None
        faults.extend(own)
    _check_case(found, name, faults)
    return found


def _listed(folder: Path) -> list[Path]:
    try:
        return sorted(path for path in folder.iterdir() if not path.name.startswith("."))
    except OSError:
        return []


def _check_case(names: Collection[str], folder: str, faults: Faults) -> None:
    seen: dict[str, str] = {}
    for name in sorted(names):
        if name.casefold() in seen:
            found = f"{seen[name.casefold()]} and {name}"
            faults.add(folder, found=found, expected="names that differ by more than case", advice="Rename one.")
        seen[name.casefold()] = name


def _trap(id_: str, entries: Entries, path: str, faults: Faults) -> Trap | None:
    drawing = None
    if "electrodes" in entries:
        for stem in ("dc_field_per_volt", "ac_gradient_per_volt"):
            if stem in entries:
                faults.add(
                    path,
                    line=entries[stem].line,
                    column=stem,
                    found=f"{stem} beside electrodes",
                    expected="the constants, or the electrodes they follow from",
                    advice="Delete one or the other.",
                )
        if entries["electrodes"].value is not None:
            drawing = read_drawing(entries, path, faults=faults)
    if len(faults):
        return None
    return Trap(
        id_,
        value_of(entries, "dc_field_per_volt", Quantity(math.nan)),  # nan until it is computed
        value_of(entries, "ac_gradient_per_volt", Quantity(math.nan) if drawing else None),
        value_of(entries, "stray_field"),
        int(value_of(entries, "dc_polarity")),
        value_of(entries, "usable_height"),
        value_of(entries, "source", ""),
        drawing,
    )


def solved(trap: Trap, file: Path, path: str, keep: Path | None, *, faults: Faults) -> Trap:
    """The trap with the constants that its drawing makes, in place of the stated ones, and its usable height.

    Where they cannot be computed a fault says why, and the constants stay nan.
    """
    drawing = trap.drawing
    assert drawing is not None
    name = digests.drawing_digest(digests.content(file))
    constants = constants_of(drawing, path, faults=faults, keep=keep, name=name)
    if constants is None:
        return trap
    dc_field, ac_gradient = constants.quantities()
    usable = constants.usable_height if trap.usable_height is None else trap.usable_height
    return replace(
        trap,
        dc_field_per_volt=dc_field,
        ac_gradient_per_volt=ac_gradient,
        usable_height=usable,
        constants=constants,
    )


def load_trap(file: Path, *, faults: Faults, keep: Path | None = None) -> Trap | None:
    """One trap by itself, its constants computed if its electrodes are drawn; None, with the faults, if not fit."""
    mapping = read_yaml(file, file.name, faults=faults)
    if mapping is None:
        return None
    entries = read_entries(mapping, TRAP, file.name, faults=faults)
    require(entries, TRAP, file.name, faults=faults, advice="Add the key.")
    trap = _trap(file.stem, filled(entries), file.name, faults)
    if trap is not None and trap.drawing is not None:
        trap = solved(trap, file, file.name, keep, faults=faults)
    return None if len(faults) else trap


def _species(id_: str, entries: Entries, path: str, faults: Faults) -> Species | None:
    if len(faults):
        return None
    stems = ("shape_factor", "shape_factor_spread", "diameter", "diameter_spread", "density")
    return Species(id_, *(value_of(entries, stem) for stem in stems))


_UNKNOWN_SHOWN = 20  # sessions named that are not there
# A file with one of these endings beside the session folders is a log or session gone astray; any other is ignored.
_STRAY_ENDINGS = (".csv", ".yaml", ".yml", ".zip")


def _session_ids(folder: Path, chosen: Entries, faults: Faults) -> tuple[str, ...]:
    """Sessions to read: those asked for, less those left out."""
    if not os.path.isdir(folder):
        return ()
    listed = _listed(folder / "sessions")
    there = [path.name for path in listed if os.path.isdir(path)]
    known = set(there)
    for path in listed:
        if path.is_symlink() and not path.exists():
            advice = "Put the folder in its place, or delete the link."
            faults.add(f"sessions/{path.name}", found="a link that leads nowhere", expected="a folder", advice=advice)
        elif path.name not in known and path.suffix.lower() in _STRAY_ENDINGS:
            advice = "Move it into the folder of its session."
            faults.add(f"sessions/{path.name}", found="a file", expected="one folder per session", advice=advice)
    asked = value_of(chosen, "sessions", ())
    leave_out = value_of(chosen, "leave_out", {})
    for stem, names in (("sessions", asked), ("leave_out", leave_out)):
        strangers = [name for name in names if name not in known]
        for name in strangers[:_UNKNOWN_SHOWN]:
            faults.add(
                "campaign.yaml",
                line=chosen[stem].line,
                column=stem,
                found=f"{name}, which has no folder in sessions/",
                expected="sessions that are there",
                advice=nearest(name, there) if there else "Make a folder in sessions/ for each session.",
            )
        if len(strangers) > _UNKNOWN_SHOWN:
            found = f"{len(strangers) - _UNKNOWN_SHOWN} more that have no folder in sessions/"
            line = chosen[stem].line
            faults.add("campaign.yaml", line=line, column=stem, found=found, expected="sessions that are there")
    wanted = set(asked)
    kept = [name for name in there if (not wanted or name in wanted) and name not in leave_out]
    for name in kept:
        if not ID.fullmatch(name):
            faults.add(f"sessions/{name}", found=f"the name {name}", expected=ID_WORDS, advice="Rename the folder.")
    _check_case(kept, "sessions", faults)
    if not kept and wanted <= known:
        faults.add("sessions", found="no session", expected="a folder for each session", advice="Add a session.")
    return tuple(name for name in kept if ID.fullmatch(name))


def _check_groups(options: Options, sessions: Mapping[str, Session], chosen: Entries, faults: Faults) -> None:
    words = {"charged_with", "species", "trap"}.union(*(session.attributes for session in sessions.values()))
    if "compare.by" in chosen and sessions and options.compare.by not in words:
        faults.add(
            "campaign.yaml",
            line=chosen["compare.by"].line,
            column="compare.by",
            found=options.compare.by,
            expected="charged_with, species, trap, or a word under attributes of a session",
            advice=nearest(options.compare.by, words),
        )
