"""The check of a whole campaign: every fault at once, and the words for them."""

from __future__ import annotations

import math
from collections.abc import Iterable, Mapping
from dataclasses import replace
from itertools import chain, groupby
from pathlib import Path

from reduction.errors import Fault, Faults, nearest, printable
from reduction.logs import Logs, read_logs
from reduction.markingfiles import MarkingFiles, read_marking
from reduction.pseudonyms import read_key
from reduction.quantity import Quantity, shorthand
from reduction.settings import Campaign, load_campaign

_SPECIES_SHOWN = 20  # that have no file
_SHARED = {"dc_voltage": ("gain.dc_voltage", "offset.dc_voltage")}


def check_campaign(folder: Path | str, *, keep: Path | None = None) -> tuple[Campaign, dict[str, Logs], Faults]:
    """Read settings and logs of a whole campaign and find every fault in them.

    `keep` is the folder of trap constants computed before, as for `load_campaign`.

    With `when_a_session_fails: leave_out` a session with faults of its own is left out: they stand in
    `Campaign.faulty`. Faults of the campaign, its traps and species, and instruments that sessions disagree about,
    always stand in the faults returned.

    Returns
    -------
    campaign : Campaign
        The settings, `session_ids` being the sessions to reduce.
    logs : dict
        Logs of each session to reduce.
    faults : Faults
        Whatever stops the reduction; empty if the campaign is fit to be reduced.
    """
    folder = Path(folder)
    faults = Faults()
    campaign = load_campaign(folder, faults=faults, keep=keep)
    faulty = dict(campaign.faulty)
    logs: dict[str, Logs] = {}
    leave_out = campaign.options.when_a_session_fails == "leave_out"
    # The logs of a session whose settings have faults are read too: every fault at once.
    for id_ in sorted({*campaign.session_ids, *faulty}):
        own = Faults()
        logs[id_] = read_logs(folder, id_, faults=own)
        _check_species(campaign, id_, logs[id_], own)
        if len(own) and leave_out:
            faulty[id_] = sorted({*faulty.get(id_, []), *own})
        else:
            faults.extend(own)
    kept = tuple(id_ for id_ in campaign.session_ids if id_ not in faulty)
    sessions = {id_: session for id_, session in campaign.sessions.items() if id_ not in faulty}
    campaign = replace(campaign, session_ids=kept, sessions=sessions, faulty=faulty)
    _check_instruments(campaign, faults)
    if faulty and not kept:
        for listed in faulty.values():
            faults.extend(listed)
        faults.add("sessions", found="faults in every session", expected="one session fit to be reduced")
    return campaign, {id_: logs[id_] for id_ in kept}, faults


def check_marking(campaign: Campaign, logs: Mapping[str, Logs], faults: Faults) -> MarkingFiles | None:
    """Read the files of marking of a checked campaign; what stops the run goes to `faults`.

    Returns
    -------
    MarkingFiles or None
        None where the campaign is not marked, or its scheme has faults.
    """
    known = {id_: _particles(logs[id_]) if id_ in logs else None for id_ in campaign.session_ids}
    leave_out = campaign.options.when_a_session_fails == "leave_out"
    found = read_marking(campaign.folder, known, faults=faults, leave_out=leave_out)
    if found is not None:
        read_key(campaign.folder, chain.from_iterable(found.register.values()), faults=faults)
    return found


def _particles(logs: Logs) -> set[str] | None:
    """Particles of a session's logs; None where a log could not be read, so that nothing is unknown."""
    return {name for table in logs.tables.values() for name in table["particle"] if name} or None


def _check_species(campaign: Campaign, id_: str, logs: Logs, faults: Faults) -> None:
    """Species named in particles.csv have a file."""
    if logs.particles is None:
        return
    there = {path.stem for path in (campaign.folder / "species").glob("*.yaml")}
    wrong: set[str] = set()  # each told once, where it stands first
    for line, name in zip(logs.particles["line"], logs.particles["species"], strict=True):
        if name and name not in there and name not in wrong and len(wrong) < _SPECIES_SHOWN:
            wrong.add(name)
            faults.add(
                f"sessions/{id_}/particles.csv",
                line=int(line),
                column="species",
                found=f"{name}, which has no file species/{name}.yaml",
                expected="the name of a file in species/, or nothing for that of the session",
                advice=nearest(name, there) if there else "Add the file to species/.",
            )


def _check_instruments(campaign: Campaign, faults: Faults) -> None:
    """One instrument has one gain and one offset."""
    first: dict[tuple[str, str], tuple[str, Quantity]] = {}
    for id_, session in sorted(campaign.sessions.items()):
        values = {f"gain.{stem}": value for stem, value in session.gain.items()}
        values |= {f"offset.{stem}": value for stem, value in session.offset.items()}
        for what, instrument in sorted(session.instruments.items()):
            for stem in _SHARED.get(what, (f"gain.{what}",)):
                if stem not in values:
                    continue
                other, value = first.setdefault((instrument, stem), (id_, values[stem]))
                if _same(value, values[stem]):
                    continue
                path, line = session.where.get(stem, (f"sessions/{id_}/session.yaml", 0))
                there, at = campaign.sessions[other].where.get(stem, (f"sessions/{other}/session.yaml", 0))
                faults.add(
                    path,
                    line=line,
                    column=stem,
                    found=f"{_shown(values[stem])} for the instrument {instrument}, "
                    f"which has {_shown(value)} in {there}" + (f" line {at}" if at else ""),
                    expected="one value for one instrument",
                    advice="Correct one, or give the instruments two names.",
                )


def _same(one: Quantity, other: Quantity) -> bool:
    """Whether two stated quantities agree to the last digit a conversion of units leaves."""
    return one.shape == other.shape and all(
        math.isclose(a, b, rel_tol=1e-12)
        for a, b in ((one.estimate, other.estimate), (one.u, other.u), (one.dof, other.dof))
    )


def _shown(value: Quantity) -> str:
    text = shorthand(value.estimate, value.u)
    details = [] if value.shape == "normal" else [value.shape]
    details += [f"dof {value.dof:g}"] if value.dof < float("inf") else []
    return f"{text} ({', '.join(details)})" if details else text


def faults_text(faults: Iterable[Fault]) -> str:
    """Faults for the terminal, grouped by file, a few lines each."""
    blocks = []
    for path, listed in groupby(sorted(set(faults)), key=lambda fault: fault.path):
        lines = [path]
        for fault in listed:
            where = ", ".join(part for part in (f"line {fault.line}" if fault.line else "", fault.column) if part)
            lines.append(f"  {where or 'whole file'}: found {fault.found or 'nothing'}")
            if fault.expected:
                lines.append(f"    expected {fault.expected}")
            if fault.advice:
                lines.append(f"    {fault.advice}")
        blocks.append("\n".join(lines))
    return "\n\n".join(blocks)


def report_text(
    campaign: Campaign, logs: Mapping[str, Logs], faults: Faults, marking: MarkingFiles | None = None
) -> str:
    """What the check found, for the terminal: faults, what is left out for its own, and how each file was read."""
    parts = []
    if len(faults):
        count = len(faults)
        parts += [faults_text(faults), f"{count} fault{'s' if count > 1 else ''}: nothing can be reduced until mended."]
    for id_, reason in sorted(campaign.leave_out.items()):
        parts.append(f"session {printable(id_)}: left out, {printable(reason)}")
    for id_, listed in sorted(campaign.faulty.items()):
        indented = "\n".join(f"  {line}" if line else "" for line in faults_text(listed).split("\n"))
        parts.append(f"session {id_}: left out for its faults\n{indented}")
    for id_, own in sorted(marking.faulty.items()) if marking and not len(faults) else []:
        indented = "\n".join(f"  {line}" if line else "" for line in faults_text(own).split("\n"))
        parts.append(f"bench {id_}: not marked for its faults\n{indented}")
    if not len(faults):
        parts += ["\n".join(_session_lines(id_, logs[id_], campaign)) for id_ in campaign.session_ids if id_ in logs]
        if marking:
            parts.append(_marking_line(marking))
        readings = sum(len(table) for one in logs.values() for table in one.tables.values())
        count = len(campaign.session_ids)
        parts.append(f"{count} session{'s' if count != 1 else ''}, {readings} readings: fit to be reduced.")
    return "\n\n".join(parts)


def _marking_line(marking: MarkingFiles) -> str:
    claims = sum(len(own) for own in marking.claims.values())
    people = sum(len(own) for own in marking.register.values())
    by_hand = sum(len(own) for own in marking.overrides.values())
    criteria = ", ".join(f"{one.name} {one.marks:g}" for one in marking.scheme.criteria.values())
    counts = f"{claims} claims, {people} people, {by_hand} marks by hand"
    return f"marking: {counts}; {criteria}; {marking.scheme.total:g} in all"


def _session_lines(id_: str, logs: Logs, campaign: Campaign) -> list[str]:
    session = campaign.sessions.get(id_)
    particles = {name for table in logs.tables.values() for name in table["particle"]}
    lines = [f"session {id_}: {len(particles)} particle{'s' if len(particles) != 1 else ''}"]
    if session and session.exclude:
        lines[0] += f", excluded: {printable(session.exclude)}"
    for log, dialect in sorted(logs.dialects.items()):
        rows = f"{len(logs.tables[log])} readings, " if log in logs.tables else ""
        lines.append(f"  {log}.csv: {rows}{dialect}")
        if logs.extra_columns.get(log):
            lines.append(f"    columns not read: {printable(', '.join(logs.extra_columns[log]))}")
    return lines
