"""Text of a file a laboratory wrote, whatever its encoding and line ends, or the reason why there is none."""

from __future__ import annotations

import codecs
import os
import re
import stat
import unicodedata
from dataclasses import dataclass
from pathlib import Path, PurePosixPath

from reduction.errors import Faults

_MARKS = (
    (codecs.BOM_UTF8, "utf-8-sig", "UTF-8 with byte order mark"),
    (codecs.BOM_UTF16_LE, "utf-16", "UTF-16"),
    (codecs.BOM_UTF16_BE, "utf-16", "UTF-16"),
)
_CONTROL = frozenset(map(chr, range(32))) - {"\t", "\n"} | {"\x7f"}
_ACCENTS = 30  # on one letter, as in the stream-safe text of Unicode annex 15; ordering more takes time without bound
_NOT_ASCII_RUN = re.compile(rf"[^\x00-\x7f]{{{_ACCENTS + 1},}}")


@dataclass(frozen=True)
class Text:
    """Lines of a file, numbered from 1 in messages, and the name of its encoding."""

    lines: list[str]
    encoding: str


def read_text(path: Path, name: str, *, faults: Faults, limit: int, lines: int, head_only: bool = False) -> Text | None:
    """Read a file as text, or record under `name` why that cannot be done.

    A link is followed as long as it stays among the files that `name` is relative to.

    Parameters
    ----------
    path, name : Path, str
        The file, and how to call it in a fault: its path within the campaign.
    faults : Faults
        Collector.
    limit, lines : int
        Largest size [bytes] and number of lines read; beyond them the file is refused before it is decoded.
    head_only : bool
        Read the first `limit` bytes and drop the broken last line, instead of refusing a larger file.

    Returns
    -------
    Text or None
    """
    try:
        state = path.stat()
        if not stat.S_ISREG(state.st_mode):
            found = "a folder" if stat.S_ISDIR(state.st_mode) else "a device, pipe or socket"
            faults.add(name, found=found, expected="a file", advice="Move it away.")
            return None
        if _leads_out(path, name):
            advice = "Put a copy of the file in its place."
            faults.add(name, found="a link to a place outside", expected="a file of the campaign", advice=advice)
            return None
        data = b""
        if head_only or state.st_size <= limit:
            with path.open("rb") as file:
                data = file.read(limit if head_only else limit + 1)
        size = max(state.st_size, len(data))  # it may have grown
        if not head_only and size > limit:
            found = f"{size / 1e6:.0f} MB"
            faults.add(name, found=found, expected=f"at most {limit / 1e6:g} MB", advice="Split the session.")
            return None
    except FileNotFoundError:
        faults.add(name, found="no such file", expected="a file", advice="Add it.")
        return None
    except OSError as error:
        faults.add(name, found=error.strerror or "an error of the file system", expected="a readable file")
        return None
    if not head_only and max(data.count(b"\n"), data.count(b"\r")) > lines:
        faults.add(name, found=f"more than {lines:,} lines", expected=f"at most {lines:,}", advice="Split the session.")
        return None
    return _decoded(data, name, faults, head_only)


def _leads_out(path: Path, name: str) -> bool:
    """Whether a link on the way to a file leads out of the campaign, or in among the files of its staff."""
    depth = len(PurePosixPath(name).parts)
    root = os.path.realpath(path.parents[depth - 1])
    place = os.path.relpath(os.path.realpath(path), root)
    top = PurePosixPath(place).parts[0]
    return top == ".." or os.path.isabs(place) or (top == "marking" and PurePosixPath(name).parts[0] != "marking")


def _decoded(data: bytes, name: str, faults: Faults, head_only: bool) -> Text | None:
    encoding, shown = "utf-8", "UTF-8"
    for mark, codec, words in _MARKS:
        if data.startswith(mark):
            encoding, shown = codec, words
    if encoding == "utf-8" and b"\0" in data:
        line = data.count(b"\n", 0, data.index(b"\0")) + 1
        advice = "This is no text file, or it is damaged; export it again as UTF-8 text."
        faults.add(name, line=line, found="the control character U+0000", expected="text", advice=advice)
        return None
    try:
        text = data.decode(encoding, errors="ignore" if head_only else "strict")
    except UnicodeDecodeError as error:
        if encoding != "utf-8":
            line = data[: error.start].count(b"\n") + 1
            faults.add(
                name, line=line, found=f"bytes that are not {shown}", expected="text", advice="Save it as UTF-8."
            )
            return None
        text, shown = data.decode("cp1252", errors="replace"), "Windows-1252"
    text = text.replace("\r\n", "\n").replace("\r", "\n")
    odd = _CONTROL.intersection(text)
    if odd:
        at = min(text.index(character) for character in odd)
        faults.add(
            name,
            line=text.count("\n", 0, at) + 1,
            found=f"the control character U+{ord(text[at]):04X}",
            expected="text",
            advice="This is no text file, or it is damaged; export it again as UTF-8 text.",
        )
        return None
    if not text.isascii():  # so that a letter with its accent apart is the same letter
        if (pile := _pile_of_accents(text)) is not None:
            line = text.count("\n", 0, pile) + 1
            found, expected = f"more than {_ACCENTS} accents in a row", "text"
            faults.add(name, line=line, found=found, expected=expected, advice="Delete them.")
            return None
        text = unicodedata.normalize("NFC", text)
    lines = text.split("\n")
    if head_only and len(data) > 0 and not text.endswith("\n") and len(lines) > 1:
        lines.pop()
    return Text(lines, shown)


def _pile_of_accents(text: str) -> int | None:
    """Place of a run of combining characters longer than any script has; None where there is none."""
    for run in _NOT_ASCII_RUN.finditer(text):
        accents = 0
        for at, character in enumerate(run[0], run.start()):
            accents = accents + 1 if unicodedata.combining(character) else 0
            if accents > _ACCENTS:
                return at
    return None
