"""How a reduction fails: one fault record, one collector, a small family of exceptions."""

from __future__ import annotations

import difflib
from collections.abc import Iterable, Iterator
from dataclasses import dataclass

_FOUND_LIMIT = 300  # characters


def printable(text: str) -> str:
    r"""Text from outside, fit for a terminal and any encoding: what cannot be seen is spelled out, as in `\\x1b`."""
    if text.isprintable():
        return text
    return "".join(one if one.isprintable() else one.encode("unicode_escape").decode() for one in text)


@dataclass(frozen=True, order=True)
class Fault:
    """One thing wrong with what the user brought; texts that stem from it are made printable."""

    path: str  # file, relative to the campaign folder, with forward slashes
    line: int = 0  # line in the file, 0 where none applies
    column: str = ""  # column or key, "" where none applies
    found: str = ""  # what stands there
    expected: str = ""  # what should
    advice: str = ""  # what to do

    def __post_init__(self) -> None:
        for name in ("path", "column", "found", "expected", "advice"):
            object.__setattr__(self, name, printable(getattr(self, name)))
        if len(self.found) > _FOUND_LIMIT:
            object.__setattr__(self, "found", self.found[: _FOUND_LIMIT - 3] + "...")

    def __str__(self) -> str:
        where = self.path + (f" line {self.line}" if self.line else "") + (f", {self.column}" if self.column else "")
        what = f"found {self.found}" if self.found else ""
        if self.expected:
            what += ("; " if what else "") + f"expected {self.expected}"
        return f"{where}: {what}." + (f" {self.advice}" if self.advice else "")


class Faults:
    """Faults collected while reading on, so that all are reported at once."""

    def __init__(self) -> None:
        self._faults: list[Fault] = []

    def add(
        self, path: str, *, line: int = 0, column: str = "", found: str = "", expected: str = "", advice: str = ""
    ) -> None:
        """Record one fault."""
        self._faults.append(Fault(path, line, column, found, expected, advice))

    def extend(self, faults: Iterable[Fault]) -> None:
        """Take over faults recorded elsewhere."""
        self._faults.extend(faults)

    def __iter__(self) -> Iterator[Fault]:
        return iter(sorted(set(self._faults)))

    def __len__(self) -> int:
        return len(set(self._faults))


class ReductionError(Exception):
    """Base of everything this package raises on purpose; the message is fit to print."""


class InputError(ReductionError, ValueError):
    """What the user brought has faults; `faults` lists them all."""

    def __init__(self, faults: Iterable[Fault]) -> None:
        self.faults = tuple(faults)
        super().__init__("\n".join(str(fault) for fault in self.faults))


class ResultsError(ReductionError, RuntimeError):
    """A results folder cannot be used as asked."""


def nearest(word: str, known: Iterable[str]) -> str:
    """Advice naming the known word closest to `word`, or listing the known words."""
    words = sorted(known)
    close = difflib.get_close_matches(word, words, n=1, cutoff=0.6)
    return f"Did you mean {close[0]}?" if close else f"Known here: {', '.join(words)}."
