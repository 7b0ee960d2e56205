"""An empty campaign with commented files, and one more session like another; nothing is ever overwritten."""

from __future__ import annotations

import textwrap
from pathlib import Path

import yaml

from reduction.contract import CAMPAIGN, DRIVE_VOLTAGES, FILES, ID, ID_WORDS, LOGS, READING_LOGS, SESSION, Key
from reduction.csvfile import SIZE_LIMIT
from reduction.errors import Fault, Faults, InputError, nearest
from reduction.logged import holds_text
from reduction.textfile import read_text
from reduction.units import QUANTITIES, range_text
from reduction.wording import CAUTIONS
from reduction.yamlfile import Mapping, plain, read_yaml

_WIDTH = 116
_SHARED = ("site", "gain", "offset", "reading", "instruments", "height_reading", "secular_reading")


def new_campaign(folder: Path | str) -> list[str]:
    """Write an empty campaign: campaign.yaml, one trap, one species and one session, with comments.

    It passes the check once the empty keys are filled in and a log has rows.

    Parameters
    ----------
    folder : Path
        A folder that is not there yet, or is empty.

    Returns
    -------
    list of str
        The files written, relative to `folder`.

    Raises
    ------
    InputError
        If the folder holds anything or cannot be written.
    """
    folder = Path(folder)
    if folder.exists() and (not folder.is_dir() or any(folder.iterdir())):
        _refuse(folder.name, "a file or a folder with files in it", "a new or empty folder", "Name another folder.")
    files = {
        "campaign.yaml": _campaign_text(),
        "traps/trap-a.yaml": _file_text("trap", "One trap: what its electrodes make of the voltages on them."),
        "species/lot-a.yaml": _file_text("species", "One lot of particles: what they have in common."),
    } | {f"sessions/s001/{name}": text for name, text in _session_files().items()}
    return _write(folder, files)


def new_session(folder: Path | str, session: str, like: str | None = None) -> list[str]:
    """Write one more session into a campaign: an empty one, or one with the settings of another.

    Of the other session come session.yaml, with an empty `date` and without `exclude` and `notes`, and the heads of its
    logs in their dialect, never a reading.

    Parameters
    ----------
    folder : Path
        The campaign.
    session : str
        Id of the new session.
    like : str, optional
        Id of the session to follow.

    Returns
    -------
    list of str
        The files written, relative to `folder`.

    Raises
    ------
    InputError
        If the session is there already, the other is not, or an id or file is not fit.
    """
    folder = Path(folder)
    if not (folder / "campaign.yaml").is_file():
        _refuse("campaign.yaml", "no such file", "a campaign folder", "Make one with motescale new.")
    if not ID.fullmatch(session):
        _refuse(f"sessions/{session}", f"the name {session}", ID_WORDS, "Choose another name.")
    place = folder / "sessions"
    there = sorted(path.name for path in place.iterdir() if path.is_dir()) if place.is_dir() else []
    for name in there:
        if name.casefold() == session.casefold():
            _refuse(f"sessions/{name}", "a session of that name", "a name that is new", "Choose another name.")
    if like is not None and like not in there:
        advice = nearest(like, there) if there else "There is no session yet."
        _refuse(f"sessions/{like}", "no such session", "a session to follow", advice)
    files = _session_files() if like is None else _files_like(folder, like)
    return _write(folder, {f"sessions/{session}/{name}": text for name, text in files.items()})


def _refuse(path: str, found: str, expected: str, advice: str) -> None:
    raise InputError([Fault(path, found=found, expected=expected, advice=advice)])


def _write(folder: Path, files: dict[str, str]) -> list[str]:
    for name, text in files.items():
        path = folder / name
        try:
            path.parent.mkdir(parents=True, exist_ok=True)
            with path.open("x", encoding="utf-8", newline="\n") as file:
                file.write(text)
        except OSError as error:
            _refuse(name, error.strerror or "an error of the file system", "a place to write a new file", "Look there.")
    return sorted(files)


def _comment(text: str, indent: str = "") -> str:
    prefix = f"{indent}# "
    return "\n".join(textwrap.wrap(text, _WIDTH, initial_indent=prefix, subsequent_indent=prefix))


_QUANTITIES = (
    "A quantity is written 61.3(9) or 1.310(20)e4, the standard uncertainty (k = 1) in the last digits in brackets; or "
    "{value: 20, u: 0.4, dof: 9}; or {value: 20, half_width: 0.5, shape: rectangular} (triangular, arcsine). A bare "
    "number counts as exact and the report lists it as such. Another unit may end a key: height_um, pressure_kPa."
)


DRAWN = """\
electrodes:
  dc_applied: both_plates
  departure: component
  dimensions_mm:
    ring_radius: 6.00(5)
    wire_radius: {value: 0.75, half_width: 0.02, shape: rectangular}
    plate_height: 4.50(5)
    plate_thickness: 1.50(2)
    hole_radius: 0.60(3)
    plate_radius: 9.0(1)
  conductors:
    ring:
      carries: drive
      circle: {centre: [ring_radius, 0], radius: wire_radius}
    plate:
      carries: dc_above
      mirrored: yes
      rectangle: {r: [hole_radius, plate_radius], z: [plate_height, [plate_height, plate_thickness]]}
    can:
      carries: ground
      outline: [[0, 30], [25, 30], [25, -30], [0, -30]]
"""
"""An invented trap, drawn: what the commented file of a new trap shows."""
_DRAWN_ABOUT = (
    "In place of the two constants: the electrodes, drawn in the half plane of radius r and height z, in mm, as for a "
    "lathe; the program then computes the constants, and each dimension is an input with its own uncertainty. A "
    "coordinate is a number, the name of a dimension, one with a minus, or a list of those that is summed. An outline "
    "is a list of points [r, z] and arcs {arc_to: [r, z], centre: [r, z], turning: anticlockwise} that comes back to "
    "its first point or begins and ends on the axis; circle and rectangle are outlines written short. What each "
    "carries: drive, dc_above, dc_below or ground; mirrored: yes adds its image below the middle plane, dc_above then "
    "being dc_below. dc_applied: both_plates (half on each) or one_plate. departure: component or corrected, of the "
    "field from the linear one. Delete the two constants above, and the # of these lines:"
)


def _key_lines(keys: tuple[Key, ...], indent: str = "", *, given: dict[str, str] | None = None) -> list[str]:
    """Lines for a table of keys: what is required stands empty, the rest is commented out."""
    given, lines = given or {}, []
    for key in keys:
        if key.name == "electrodes":
            lines += [_comment(_DRAWN_ABOUT), *(f"# {line}" for line in DRAWN.splitlines())]
            continue
        if key.kind == "mapping":
            needed = any(inner.required for inner in key.keys) or key.required
            mark = "" if needed else "# "
            lines += [_comment(key.about, indent), f"{indent}{mark}{key.name}:"]
            lines += _key_lines(key.keys, f"{indent}  " if needed else f"{indent}#   ")
            continue
        lines.append(_comment(_about(key), indent.replace("#", " ") if indent.startswith("#") else indent))
        value = given.get(key.name, "")
        mark = "" if key.required or value or indent.startswith("#") else "# "
        example = f" {value or key.default}" if value or key.default else ""
        lines.append(f"{indent}{mark}{key.name}:{example}")
    return lines


def _about(key: Key) -> str:
    about = key.about
    if key.words:
        about += f" {', '.join(key.words[:-1])} or {key.words[-1]}."
    if key.of:
        unit = key.name[len(key.stem) + 1 :] if QUANTITIES[key.of].dimension else ""
        bounds = range_text(QUANTITIES[key.of], unit)
        about += f" {bounds[0].upper()}{bounds[1:]}."
    return about


def _file_text(name: str, about: str) -> str:
    lines = [_comment(about), _comment(_QUANTITIES), "", *_key_lines(FILES[name])]
    return "\n".join(lines) + "\n"


def _cautions() -> list[str]:
    return [_comment("Before anyone sets this up:"), *(_comment(f"{title}: {text}") for title, text in CAUTIONS)]


def _campaign_text() -> str:
    options = tuple(key for key in CAMPAIGN if key.name != "every_session")
    shared = tuple(key for key in SESSION if key.name in _SHARED)
    lines = [_comment("Options of the campaign. Each line with # in front shows what holds if it is left out."), ""]
    lines += [*_cautions(), "", "title: A campaign"]
    for key in options:
        if key.name == "title":
            continue
        if key.kind == "mapping":
            lines += [_comment(key.about), f"# {key.name}:"]
            lines += [f"#   {inner.name}: {inner.words[0] if inner.words else inner.default}" for inner in key.keys]
            continue
        default = {"sessions": "all", "leave_out": "{}"}.get(key.name, key.words[0] if key.words else key.default)
        lines += [_comment(_about(key)), f"# {key.name}: {default}"]
    lines += [
        "",
        _comment("What holds for every session, unless its own session.yaml says otherwise."),
        _comment(_QUANTITIES),
    ]
    return "\n".join([*lines, "every_session:", *_key_lines(shared, "  ")]) + "\n"


def _session_files() -> dict[str, str]:
    own = tuple(key for key in SESSION if key.name not in _SHARED)
    head = [
        _comment("One session. Keys of every_session in campaign.yaml may be given here too, and then hold here."),
        "",
    ]
    head += [
        *_cautions(),
        "",
        _comment("True dc voltage = dc_polarity x (gain x reading + offset); heights are up positive."),
        "",
    ]
    lines = [*head, *_key_lines(own, given={"trap": "trap-a", "species": "lot-a"})]
    return {"session.yaml": "\n".join(lines) + "\n"} | {f"{log}.csv": _head(log) for log in LOGS}


def _head(log: str) -> str:
    names = [column.name for column in LOGS[log]]
    if log in READING_LOGS:
        names.insert(1, DRIVE_VOLTAGES[0].name)
    return ",".join(names) + "\n"


def _files_like(folder: Path, like: str) -> dict[str, str]:
    faults = Faults()
    name = f"sessions/{like}/session.yaml"
    mapping = read_yaml(folder / name, name, faults=faults)
    text = read_text(folder / name, name, faults=Faults(), limit=SIZE_LIMIT, lines=SIZE_LIMIT)
    if mapping is None or text is None:
        raise InputError(faults)
    note = _comment(
        f"Settings as in session {like}. Fill in the date, and read temperature, pressure and humidity anew."
    )
    files = {"session.yaml": f"{note}\n{_without(mapping, text.lines)}"}
    for log in LOGS:
        path = folder / "sessions" / like / f"{log}.csv"
        if path.is_file():
            files[f"{log}.csv"] = _head_like(path) or _head(log)
    return files


def _without(mapping: Mapping, lines: list[str]) -> str:
    """Text of a session without its date, reason to exclude and notes; comments are kept where that can be done."""
    dropped = [key for key in ("date", "exclude", "notes") if key in mapping.entries]
    starts = sorted(mapping.lines.values())
    if len(set(starts)) < len(starts) or any(lines[line - 1][:1] in (" ", "{", "?") for line in starts):
        rest = {key: plain(node) for key, node in mapping.entries.items() if key not in dropped}
        return "date:\n" + yaml.safe_dump(rest, sort_keys=False, allow_unicode=True, width=_WIDTH)
    out = set()
    for key in dropped:
        first = mapping.lines[key]
        following = [line for line in starts if line > first]
        last = following[0] - 1 if following else len(lines)
        while last > first and (not lines[last - 1].strip() or lines[last - 1].startswith("#")):
            last -= 1  # comments in front of the next key stay
        out |= set(range(first, last + 1))
    kept = [line for number, line in enumerate(lines, 1) if number not in out and line.strip() not in ("---", "...")]
    return "date:\n" + "\n".join(kept).strip("\n") + "\n"


def _head_like(path: Path) -> str:
    """Lines up to the head of a log: the stated separator and the names, in the dialect of the file."""
    text = read_text(path, path.name, faults=Faults(), limit=65_536, lines=65_536, head_only=True)
    if text is None:
        return ""
    taken = []
    for line in text.lines:
        if line.strip(' "').lower().startswith("sep="):
            taken.append(line)
        elif holds_text(line):
            return "\n".join([*taken, line.strip(" ")]) + "\n"
    return ""
