"""What marking a bench found: marks, words, hints, and what staff should look at; to JSON and back."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import asdict, dataclass
from typing import Any

from reduction.markingfiles import Override

MARKED, LOOK_AT, NOT_MARKED = "marked", "look_at", "not_marked"


@dataclass(frozen=True)
class Hint:
    """One mistake recognised, or advice."""

    code: str  # a word for counting, the same for every bench
    text: str  # a sentence for the bench, with the particle in front


@dataclass(frozen=True)
class CriterionMark:
    """Marks of one criterion."""

    criterion: str
    marks: float | None  # as they count, by hand where there is an override; None where they cannot be told
    available: float
    words: tuple[str, ...]  # sentences the bench may read: no value of the program's own, no tolerance
    hints: tuple[Hint, ...]
    override: Override | None
    automatic: float | None  # before the override


@dataclass(frozen=True)
class Judged:
    """One claim held against the program's own reduction; staff only, never in a bench's file."""

    criterion: str
    particle: str
    quantity: str
    claimed: float | None  # SI
    reference: float | None  # SI
    u_reference: float | None  # SI
    share: float | None  # of the criterion's marks that this particle earns
    text: str


@dataclass(frozen=True)
class BenchMarks:
    """Marks of one bench."""

    session: str
    status: str  # marked, look_at (marked, and worth a look), not_marked
    criteria: tuple[CriterionMark, ...]
    marks: float | None  # earned; None where the bench is not marked
    total: float  # available
    look_at: tuple[str, ...]  # staff only: why a person should look
    judged: tuple[Judged, ...]  # staff only

    @property
    def hints(self) -> tuple[Hint, ...]:
        """Hints of all criteria, each once."""
        return tuple(dict.fromkeys(hint for one in self.criteria for hint in one.hints))


def to_record(marks: BenchMarks) -> dict[str, Any]:
    """The marks as plain data for JSON."""
    return asdict(marks)


def from_record(record: Mapping[str, Any]) -> BenchMarks:
    """Read back what `to_record` gave."""
    criteria = tuple(
        CriterionMark(
            **{
                **one,
                "words": tuple(one["words"]),
                "hints": tuple(Hint(**hint) for hint in one["hints"]),
                "override": Override(**one["override"]) if one["override"] else None,
            }
        )
        for one in record["criteria"]
    )
    judged = tuple(Judged(**one) for one in record["judged"])
    return BenchMarks(**{**record, "criteria": criteria, "judged": judged, "look_at": tuple(record["look_at"])})
