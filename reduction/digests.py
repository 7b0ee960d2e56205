"""Digests of files, of the package and of what one session's result depends on; light, for use before any job runs."""

from __future__ import annotations

import hashlib
import json
import os
import platform
import re
import stat
import tomllib
from collections.abc import Iterable, Mapping
from functools import cache
from importlib import metadata
from pathlib import Path
from typing import Any

import yaml

from reduction import benchrows, places

ID = re.compile(r"[A-Za-z0-9][A-Za-z0-9_-]{0,63}")
SESSION_FILES = ("session.yaml", "balance.csv", "secular.csv", "height.csv", "particles.csv", "lost.csv")
LIBRARIES = (
    "fonttools", "jinja2", "lmfit", "markupsafe", "matplotlib", "numpy", "pandas", "pyyaml", "scipy", "typst",
    "uncertainties",
)  # fmt: skip

LARGEST = 200 * 2**20  # beyond it a file is refused by the check; it is not read here [bytes]
DEEPEST = 40  # levels of YAML beyond which a file is taken as it is

NOT_IN_NUMBERS = frozenset(["title", "sessions", "leave_out", "every_session", "compare"])
"""Keys of campaign.yaml that no session's own numbers depend on; `every_session` counts session by session."""


def digest(*parts: str | bytes) -> str:
    """SHA-256 of the parts, each told apart from its neighbours, as hexadecimal text."""
    total = hashlib.sha256()
    for part in parts:
        # surrogates stand for bytes of a file's name that are no UTF-8
        data = part.encode(errors="surrogatepass") if isinstance(part, str) else part
        total.update(len(data).to_bytes(8, "big"))
        total.update(data)
    return total.hexdigest()


def content(path: Path) -> bytes | None:
    """Bytes of a regular file of acceptable size; None where there is none, a remark where it is too large or odd."""
    try:
        state = path.stat()
        if not stat.S_ISREG(state.st_mode):
            return b"no regular file"
        if state.st_size > LARGEST:
            return b"too large: %d" % state.st_size
        return path.read_bytes()
    except FileNotFoundError:
        return None
    except OSError as error:
        return f"cannot be read: {error.strerror}".encode()


def file_digest(path: Path) -> str:
    """SHA-256 of the content of one file, as `sha256sum` prints it."""
    return hashlib.sha256(content(path) or b"").hexdigest()


@cache
def package_digest(package: Path = places.PACKAGE, workflow: Path | None = None) -> str:
    """Digest of the package's modules, the report's templates and the schemas: of all that computes or draws."""
    workflow = workflow or places.workflow_folder()
    files = [(f"reduction/{path.name}", path) for path in package.glob("*.py")]
    for folder in ("report", "schemas"):
        files += [
            (path.relative_to(workflow).as_posix(), path) for path in (workflow / folder).rglob("*") if path.is_file()
        ]
    return digest(*(part for name, path in sorted(files) for part in (name, path.read_bytes())))


@cache
def versions() -> Mapping[str, str]:
    """Versions of Python, this package and the libraries that numbers or pages pass through."""
    found = {"motescale": _own_version(), "python": platform.python_version()}
    for name in LIBRARIES:
        try:
            found[name] = metadata.version(name)
        except metadata.PackageNotFoundError:
            found[name] = "not installed"
    return found


def _own_version() -> str:
    project = places.root() / "pyproject.toml"
    if project.is_file():  # a checkout, installed or not
        return str(tomllib.loads(project.read_text(encoding="utf-8"))["project"]["version"])
    return metadata.version("motescale")


def lock_digest() -> str:
    """SHA-256 of the lock the program was released with; "" where it came without one."""
    return file_digest(places.lock()) if places.lock().is_file() else ""


@cache
def definition_digest() -> str:
    """Digest of the files that define the workflow."""
    return digest(*(part for name, path in places.definition() for part in (name, path.read_bytes())))


def code_digest() -> str:
    """Digest of the package and of the versions of its libraries."""
    used = {name: version for name, version in versions().items() if name != "motescale"}
    return digest(package_digest(), json.dumps(used, sort_keys=True))


def yaml_strings(data: bytes | None) -> Any:
    """YAML with every scalar left as text; None where it is no plain YAML (the check says what is wrong with it).

    Built from parser events without recursion, and without aliases, so that no file can make it run away.
    """
    top: list[Any] = []
    open_: list[list[Any] | dict[str, Any]] = []
    keys: list[str | None] = []
    try:
        for event in yaml.parse(data or b"", Loader=getattr(yaml, "CBaseLoader", yaml.BaseLoader)):
            if isinstance(event, yaml.AliasEvent) or len(open_) > DEEPEST:
                return None
            if isinstance(event, yaml.CollectionEndEvent):
                open_.pop()
                keys.pop()
                continue
            if not isinstance(event, yaml.NodeEvent):
                continue
            value: Any = {} if isinstance(event, yaml.MappingStartEvent) else []
            if scalar := isinstance(event, yaml.ScalarEvent):
                value = event.value
            parent = open_[-1] if open_ else top
            if isinstance(parent, list):
                parent.append(value)
            elif keys[-1] is None:
                if not scalar:
                    return None
                keys[-1] = value
            else:
                parent[keys[-1]] = value
                keys[-1] = None
            if not scalar:
                open_.append(value)
                keys.append(None)
    except (yaml.YAMLError, ValueError):
        return None
    return top[0] if top else None


def drawing_digest(data: bytes | None) -> str:
    """Digest of the electrodes in a trap file and of the program; empty where there are none.

    What the constants do not depend on has no part in it; the order of the conductors has.
    """
    drawn = _mapping(_mapping(yaml_strings(data)).get("electrodes"))
    drawn.pop("departure", None)
    return digest("drawing", json.dumps(drawn), code_digest()) if drawn else ""


def drawings(folder: Path) -> dict[str, str]:
    """Each trap of a campaign whose electrodes are drawn, and the digest of its drawing."""
    found = {path.stem: drawing_digest(content(path)) for path in sorted((folder / "traps").glob("*.yaml"))}
    return {name: one for name, one in found.items() if one}


def _mapping(value: Any) -> dict[str, Any]:
    return value if isinstance(value, dict) else {}


def campaign_settings(folder: Path) -> dict[str, Any]:
    """Keys and texts of campaign.yaml, empty where there is nothing to be read."""
    return _mapping(yaml_strings(content(folder / "campaign.yaml")))


def session_ids(folder: Path) -> list[str]:
    """Ids of the sessions a campaign reduces, sorted: those in its folder that it lists and does not leave out."""
    return _session_ids(folder, campaign_settings(folder))


def _session_ids(folder: Path, settings: Mapping[str, Any]) -> list[str]:
    try:
        found = {name for name in os.listdir(folder / "sessions") if ID.fullmatch(name)}
        found = {name for name in found if os.path.isdir(folder / "sessions" / name)}
    except OSError:
        return []
    listed = settings.get("sessions")
    if isinstance(listed, list):
        found &= {name for name in listed if isinstance(name, str)}
    return sorted(found - set(_mapping(settings.get("leave_out"))))


def input_files(folder: Path) -> list[str]:
    """Files of a campaign that are read, relative to it, sorted."""
    settings = campaign_settings(folder)
    marked = benchrows.is_marked(folder)
    names = ["campaign.yaml"] if os.path.isfile(folder / "campaign.yaml") else []
    names += [name for name in benchrows.FILES if marked and os.path.isfile(folder / name)]
    for part in ("traps", "species"):
        names += [f"{part}/{path.name}" for path in (folder / part).glob("*.yaml") if os.path.isfile(path)]
    for session in _session_ids(folder, settings):
        own = [f"sessions/{session}/{name}" for name in SESSION_FILES]
        own += [benchrows.own_claims(session)] if marked else []
        names += [name for name in own if os.path.isfile(folder / name)]
    return sorted(names)


def input_digests(folder: Path) -> dict[str, str]:
    """SHA-256 of each file `input_files` names."""
    return {name: file_digest(folder / name) for name in input_files(folder)}


def session_files(folder: Path, sessions: Iterable[str]) -> dict[str, str]:
    """Digest of each session's own files."""
    return {
        name: digest(*(content(folder / "sessions" / name / file) or b"" for file in SESSION_FILES))
        for name in sessions
    }


def session_inputs(folder: Path, sessions: Iterable[str]) -> dict[str, str]:
    """Digest of what each session's result depends on in the campaign's files, and of nothing else.

    Its own files; the trap and species it names; the options that change numbers; the keys of `every_session` it does
    not give itself.
    """
    raw = content(folder / "campaign.yaml")
    settings = _mapping(yaml_strings(raw))
    options = {key: value for key, value in settings.items() if key not in NOT_IN_NUMBERS}
    shared = _mapping(settings.get("every_session"))
    options_text = json.dumps(options, sort_keys=True) if settings or not raw else raw.hex()
    species = {path.stem: content(path) or b"" for path in sorted((folder / "species").glob("*.yaml"))}
    traps = {path.stem: content(path) or b"" for path in sorted((folder / "traps").glob("*.yaml"))}
    found = {}
    for session in sessions:
        own = {name: content(folder / "sessions" / session / name) for name in SESSION_FILES}
        given = _mapping(yaml_strings(own["session.yaml"]))
        left = {key: value for key, value in shared.items() if key not in given or isinstance(given[key], dict)}
        named = str(given.get("species", shared.get("species", "")))
        table = own["particles.csv"] or b""
        parts: list[str | bytes] = [session, options_text, json.dumps(left, sort_keys=True)]
        for name, data in own.items():
            parts += [name, b"absent" if data is None else b"present" + data]
        trap = str(given.get("trap", shared.get("trap", "")))
        parts += ["trap", trap, traps.get(trap, b"")]
        for name, data in species.items():
            if name == named or name.encode() in table:
                parts += ["species", name, data]
        found[session] = digest(*parts)
    return found


def mark_inputs(folder: Path, sessions: Mapping[str, str]) -> dict[str, str]:
    """Digest of what each bench's marks depend on, and of nothing else; empty where the campaign is not marked.

    Its own reduction's inputs, its rows in the tables of marking or the claims in its folder, the scheme.

    Parameters
    ----------
    folder : Path
        The campaign.
    sessions : mapping
        Session to the digest of what its reduction depends on.
    """
    if not benchrows.is_marked(folder):
        return {}
    scheme = content(folder / benchrows.SCHEME) or b""
    texts = benchrows.bench_texts(folder, sorted(sessions))
    return {session: digest("marks", own, scheme, texts[session]) for session, own in sorted(sessions.items())}
