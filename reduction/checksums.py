"""Checksums of the files of a run, in the form `sha256sum --check` reads, and what no longer fits them."""

from __future__ import annotations

import hashlib
import os
import re
from collections.abc import Callable, Iterable, Iterator, Mapping
from dataclasses import dataclass
from pathlib import Path, PurePosixPath

from reduction import digests
from reduction.batches import STATE
from reduction.errors import ResultsError
from reduction.resultfiles import CAMPAIGN, MARKING, SUMS, every_file, kind_of
from reduction.wholefile import read_json, write_whole

_LINE = re.compile(r"([0-9a-f]{64})  (\S.*)", re.ASCII)
SHOWN = 20  # files listed one by one
LARGE = 2**24  # beyond it a table is looked into only where it is newer than its checksum [bytes]


def file_sum(path: Path) -> str:
    """SHA-256 of a file of any size, as `sha256sum` prints it; "" where there is no such file that can be read."""
    try:
        with open(path, "rb") as handle:
            return hashlib.file_digest(handle, "sha256").hexdigest()
    except OSError:
        return ""


def write_sums(folder: Path, names: Iterable[str]) -> None:
    """Write the checksums of files of a folder beside them."""
    lines = [f"{file_sum(folder / name)}  {name}\n" for name in sorted(names)]
    write_whole(folder / SUMS, "".join(lines).encode())


def read_sums(folder: Path) -> dict[str, str]:
    """Read the checksums of a folder's files.

    Raises
    ------
    ResultsError
        If there are none, or a line is no checksum of a file inside the folder.
    """
    try:
        text = (folder / SUMS).read_text(encoding="utf-8")
    except (FileNotFoundError, NotADirectoryError):
        message = f"{folder}: there is no finished run in this folder (no {SUMS}). Expected a results folder."
        raise ResultsError(message) from None
    except (OSError, UnicodeDecodeError) as error:
        message = f"{folder / SUMS}: cannot be read ({error}). Run again: motescale run CAMPAIGN {folder}"
        raise ResultsError(message) from None
    found = {}
    for number, line in enumerate(text.splitlines(), 1):
        split = _LINE.fullmatch(line)
        if not split or not inside(split[2]):
            message = (
                f"{folder / SUMS} line {number}: found {line[:80]!r}; expected a SHA-256, two spaces and the path of "
                "a file of the results."
            )
            raise ResultsError(message)
        found[split[2]] = split[1]
    return found


def inside(name: str) -> bool:
    """Whether a path with forward slashes stays in the folder it is taken from."""
    path = PurePosixPath(name)
    return not path.is_absolute() and ".." not in path.parts and "\\" not in name and str(path) == name


@dataclass(frozen=True)
class Findings:
    """Files that are not those of the run."""

    missing: tuple[str, ...] = ()
    changed: tuple[str, ...] = ()
    extra: tuple[str, ...] = ()

    def __bool__(self) -> bool:
        return bool(self.missing or self.changed or self.extra)

    def lines(self) -> Iterator[str]:
        """One line for each file, in plain words."""
        for word, names in (("missing", self.missing), ("changed", self.changed), ("not of the run", self.extra)):
            for name in names[:SHOWN]:
                yield f"  {word}: {name}"
            if len(names) > SHOWN:
                yield f"  {word}: and {len(names) - SHOWN} more"


def findings(folder: Path, expected: Mapping[str, str], there: Iterable[str]) -> Findings:
    """Compare files with their checksums.

    Parameters
    ----------
    folder : Path
        Where they lie.
    expected : mapping
        Path in the folder: SHA-256.
    there : iterable of str
        Paths of the files that are in the folder.
    """
    names = set(there)
    changed = [name for name in sorted(set(expected) & names) if file_sum(folder / name) != expected[name]]
    return Findings(tuple(sorted(set(expected) - names)), tuple(changed), tuple(sorted(names - set(expected))))


def verify_results(results: Path) -> tuple[Findings, int]:
    """Files of a results folder that are not those of its run, and how many are to be there.

    Files of the marking have checksums of their own, because they are handed out apart. Input files in a bundle are
    left to `verify_inputs`.
    """
    expected = read_sums(results)
    there = [name for name in every_file(results) if name != SUMS and not name.startswith(f"{CAMPAIGN}/")]
    found = findings(results, expected, there)
    count = len(expected)
    marking = results / MARKING
    if (marking / SUMS).is_file():
        own = read_sums(marking)
        more = findings(marking, own, marking_files(results))
        count += len(own)
        found = Findings(
            *(
                (*getattr(found, part), *(f"{MARKING}/{name}" for name in getattr(more, part)))
                for part in ("missing", "changed", "extra")
            )
        )
    return found, count


def marking_files(results: Path) -> list[str]:
    """Paths of the files of the marking within its folder, sorted; none where nothing was marked."""
    folder = results / MARKING
    found = [path.relative_to(folder).as_posix() for path in folder.rglob("*") if path.is_file()]
    return sorted(name for name in found if name != SUMS)


def verify_inputs(results: Path, campaign: Path, *, shared: bool = False) -> tuple[Findings, int]:
    """Input files of a campaign that are not those the results were made from, and how many are to be there.

    Parameters
    ----------
    results, campaign : Path
        The folders.
    shared : bool
        Whether the campaign is the part of one that a bundle holds.
    """
    if not campaign.is_dir():
        message = f"{campaign}: there is no such folder. Give the campaign's folder, which holds campaign.yaml."
        raise ResultsError(message)
    inputs = read_json(results / "run.json")["inputs"]
    expected = {name: str(inputs[name]) for name in sorted(inputs) if not shared or may_be_shared(name)}
    there = set(every_file(campaign) if shared else digests.input_files(campaign))
    there |= {name for name in expected if (campaign / name).is_file()}
    return findings(campaign, expected, there), len(expected)


def may_be_shared(name: str) -> bool:
    """Whether an input file may go to somebody else: what is there to be marked, and the names of people, may not."""
    parts = PurePosixPath(name).parts
    return not {"marking", "staff"} & set(parts) and parts[-1] not in ("claims.csv", "register.csv", "overrides.csv")


def verification(results: Path, campaign: Path | None = None) -> tuple[str, bool]:
    """Plain text of what was verified of a results folder, and whether all of it holds.

    Parameters
    ----------
    results : Path
        A results folder, or a bundle that was unpacked.
    campaign : Path, optional
        The campaign it was made from; in a bundle that holds one it is looked at without being asked for.

    Raises
    ------
    ResultsError
        If the folder holds no finished run.
    """
    found, count = verify_results(results)
    lines = [_verdict(results, _counted(count, "file") + " of the run", found, "as it left them"), *found.lines()]
    good = not found
    if yours := [name for name in found.extra if kind_of(name) is None]:
        lines.append(f"  ({_counted(len(yours), 'file')} of no kind a run makes: keep your own files elsewhere)")
    bundled = results / CAMPAIGN
    for folder, shared in ((campaign, False), (bundled if bundled.is_dir() else None, True)):
        if folder is None:
            continue
        if "run.json" in (*found.missing, *found.changed):
            lines.append(f"{folder}: not compared, because run.json is not that of the run.")
            continue
        other, count = verify_inputs(results, folder, shared=shared)
        lines += [
            _verdict(folder, _counted(count, "input file"), other, "as the results were made from"),
            *other.lines(),
        ]
        good = good and not other
    if good:
        lines.append(f"SHA-256 of {SUMS}, to be noted elsewhere: {file_sum(results / SUMS)}")
    return "\n".join(lines), good


def _counted(number: int, word: str) -> str:
    return f"{number} {word}" if number == 1 else f"{number} {word}s"


def _verdict(folder: Path, what: str, found: Findings, how: str) -> str:
    return f"{folder}: {what}, {'not all' if found else 'all'} {how}."


def set_edited_aside(results: Path, tell: Callable[[str], object]) -> None:
    """Set results aside that are not as the last finished run left them, so that they are made again.

    The campaign's tables are told by their content; session files, on which nothing else rests, and tables too large to
    be read before every run, by content where they are newer than the checksums. The checksums go, too: without them
    the workflow looks for every file.
    """
    try:
        sums = read_sums(results)
        written = (results / SUMS).stat().st_mtime_ns
    except (ResultsError, OSError):
        (results / SUMS).unlink(missing_ok=True)
        return
    for name, expected in sums.items():
        path, kind = results / name, kind_of(name)
        if path.is_file():
            state = path.stat()
            aside = "/" in name or state.st_size > LARGE
            if (aside and state.st_mtime_ns <= written) or file_sum(path) == expected:
                continue
            kept = results / STATE / "edited" / name
            kept.parent.mkdir(parents=True, exist_ok=True)
            os.replace(path, kept)
            tell(f"{name} was changed after the run that made it: made again; the changed one is kept as {kept}\n")
        if kind is not None and kind.maker:
            (results / kind.maker).unlink(missing_ok=True)
        (results / SUMS).unlink(missing_ok=True)
