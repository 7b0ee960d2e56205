"""What a bench is told: marks, what they rest on, hints, and its own readings; nothing of anyone or anything else."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from pathlib import Path
from typing import Any

from reduction import benchfigures, figurestyle, records, sessionreport, tables
from reduction.advice import ADVICE
from reduction.benchrows import CLAIMS
from reduction.campaigntables import NOT_TAKEN
from reduction.markrecord import NOT_MARKED, BenchMarks, CriterionMark
from reduction.sheets import rows_of
from reduction.typeset import NONE, foreign
from reduction.wholefile import read_json
from reduction.wording import CAUTIONS, RESULTS, joined

Row = Mapping[str, Any]
KINDS = {
    "readings": "Enough readings",
    "value": "Value",
    "uncertainty": "Uncertainty",
    "rounding": "Rounding",
    "sign": "Sign",
    "unit": "Unit",
    "agreement": "Agreement of methods",
    "budget": "Uncertainty budget",
}
_TONE = (
    (0.95, "Very good work. Your analysis of your own readings holds up."),
    (0.80, "Good work. One or two things below are worth a second look."),
    (0.50, "A good part of this is right. The hints below say where marks went, and what to try."),
    (0.0, "There is something to find here, and the hints below are meant to help you find it. A single slip can run "
     "through every value; begin with the first hint."),
)  # fmt: skip
_UNMARKED = (
    "Your work has not been marked yet, and that says nothing about its worth: something in the files could not be "
    "read with certainty, and it would not be fair to guess. Put right what is listed here and hand in again; it "
    "will be marked like any other."
)
EVERY = "All particles"
_STAFF = "Something has to be settled by the staff first; they know, and there is nothing you need do about that part."
_TOLD = ("date", "trap", "species", "charged_with", "contacts", "air", "height_reading", "secular_reading")
_HIDDEN = ("operator", "session_notes", "attributes")  # facts of a session that may name people


def content(
    marks: BenchMarks,
    record_folder: Path | None,
    *,
    digest: str,
    title: str = "",
    show_reduction: bool = False,
) -> dict[str, Any]:
    """Everything the template of a bench's feedback sets.

    Parameters
    ----------
    marks : BenchMarks
        Its marks; what is for the staff in them is not looked at.
    record_folder : Path or None
        The bench's record, adjusted within the bench alone; None where its logs could not be reduced.
    digest : str
        Digest of all that the page depends on.
    title : str
        The campaign's title.
    show_reduction : bool
        Whether the bench may see the program's own numbers.
    """
    facts = read_json(record_folder / records.FACTS) if record_folder is not None else {}
    readings = rows_of(tables.read_table(record_folder / "readings.csv")) if record_folder is not None else []
    names = list(dict.fromkeys(str(row["particle"]) for row in readings))
    marked = marks.status != NOT_MARKED and marks.marks is not None
    return {
        **frame(marks.session, digest, title),
        "marked": marked,
        "marks": shown(marks.marks),
        "total": shown(marks.total),
        "said": _tone(marks) if marked else _UNMARKED,
        "criteria": [_criterion(one, names) for one in marks.criteria] if marked else [],
        "hints": _hints(marks, names) if marked else [],
        "faults": [foreign(one) for one in told_faults(marks)] if not marked else [],
        "setup": _setup(facts) if readings else "",
        "figures": _figures(names, readings),
        "reduction": _reduction(record_folder, facts, digest) if show_reduction and record_folder else None,
        "cautions": [list(words) for words in CAUTIONS],
    }


def frame(session: str, digest: str, title: str) -> dict[str, Any]:
    """What the page itself needs: title, running head, digest."""
    campaign = foreign(title)
    return {
        "title": f"Feedback: {session}",
        "kind": "Feedback",
        "headline": bench_words(session),
        "subline": campaign,
        "running": bench_words(session),
        "digest": lettered(digest),
        "digest_word": "What this page was made from, in short:",
    }


def aligned(marks: Sequence[float | None]) -> list[str]:
    """A column of marks with as many decimals as the longest of them needs."""
    needed = [len(shown(one).partition(".")[2]) for one in marks]
    places = max(needed, default=0)
    return [NONE if one is None or not math.isfinite(one) else f"{round(one, 2) + 0.0:.{places}f}" for one in marks]


def bench_words(session: str) -> str:
    """Name of a bench as a headline."""
    name = foreign(session)
    return name if name.lower().startswith("bench") else f"Bench {name}"


def lettered(digest: str, length: int = 20) -> str:
    """The beginning of a hexadecimal digest in letters, so that it cannot be read as a number."""
    return digest[:length].translate(str.maketrans("0123456789abcdef", "bcdfghjklmnpqrst"))


def shown(marks: float | None) -> str:
    """Marks as they are printed: two decimals at most."""
    return NONE if marks is None or not math.isfinite(marks) else f"{round(marks, 2):g}"


def criterion_words(name: str) -> str:
    """A criterion in words: `value_mass` gives `Value: mass`."""
    kind, _, rest = name.partition("_")
    head = KINDS.get(kind, kind.capitalize())
    if not rest:
        return head
    return f"{head}: {RESULTS[rest][0] if rest in RESULTS else rest.replace('_', ' ')}"


def told_faults(marks: BenchMarks) -> list[str]:
    """What a bench that is not marked has to put right in its own files; the rest is for the staff."""
    own = (f"sessions/{marks.session}/", CLAIMS)
    found: list[str] = []
    staff = False
    for reason in marks.look_at:
        for block in reason.split("\n\n"):
            path, *lines = block.split("\n")
            if not path.startswith(own):
                staff = True
                continue
            name = path.rpartition("/")[2]
            for line in lines:
                words = line.strip()
                if line.startswith("    ") and found:
                    found[-1] += f"; {words}" if words.startswith("expected ") else f". {words}"
                else:
                    found.append(f"{name}, {words}")
    return [closed(one) for one in found] + ([_STAFF] if staff or not found else [])


def _tone(marks: BenchMarks) -> str:
    share = (marks.marks or 0.0) / marks.total if marks.total else 0.0
    return next(words for least, words in _TONE if share >= least)


def grouped(sentences: Sequence[str], names: Sequence[str]) -> list[tuple[str, str]]:
    """Sentences that begin with a particle and a colon, the same ones of several particles put together.

    Returns who it is about (all particles, or those named) and what is said.
    """
    who: dict[str, list[str]] = {}
    for sentence in sentences:
        particle, mark, rest = sentence.partition(": ")
        who.setdefault(rest if mark else sentence, []).extend([particle] if mark else [])
    found = []
    for said, particles in who.items():
        named = list(dict.fromkeys(particles))
        every = len(named) > 1 and set(named) >= set(names)
        found.append((EVERY if every else joined([foreign(name) for name in named]), foreign(said)))
    return found


def _hints(marks: BenchMarks, names: Sequence[str]) -> list[list[str]]:
    """Who a hint is about, what was found, what to try; each piece of advice once."""
    found: list[list[str]] = []
    given: set[str] = set()
    for code in dict.fromkeys(hint.code for hint in marks.hints):
        about = grouped([hint.text for hint in marks.hints if hint.code == code], names)
        advice = ADVICE.get(code, "")
        for place, (who, said) in enumerate(about):
            last = place + 1 == len(about) and advice not in given
            found.append([who, sentence(said) if who == "" else closed(said), advice if last else ""])
        given.add(advice)
    return found


def closed(words: str) -> str:
    """Words with a full stop."""
    return words if words.endswith((".", "!", "?")) else f"{words}."


def sentence(words: str) -> str:
    """Words with a capital first letter and a full stop."""
    return closed(words[:1].upper() + words[1:])


def _criterion(one: CriterionMark, names: Sequence[str]) -> dict[str, Any]:
    said = [
        sentence(words) if who in ("", EVERY) else f"{who}: {closed(words)}" for who, words in grouped(one.words, names)
    ]
    if one.override is not None:
        said.append("A member of staff looked at this and set these marks by hand.")
    if one.marks is None:
        said.append("The program cannot tell; a member of staff will look at it.")
    share = 0.0 if one.marks is None or not one.available else min(max(one.marks / one.available, 0.0), 1.0)
    return {
        "name": criterion_words(one.criterion),
        "marks": f"{shown(one.marks)} of {shown(one.available)}",
        "share": round(share, 4),
        "said": said,
    }


def _setup(facts: Row) -> str:
    """What was set up, in one sentence."""
    pairs = sessionreport.fact_pairs({key: facts[key] for key in _TOLD if key in facts})
    said = ", ".join(f"{label[0].lower()}{label[1:]} {value}" for label, value in pairs)
    return f"{said[0].upper()}{said[1:]}." if said else ""


def _counted(own: Sequence[Row]) -> str:
    """How many readings of each kind there are of one particle."""
    count = {log: sum(row["log"] == log for row in own) for log in ("balance", "height", "secular")}
    said = joined([f"{n} {log}" for log, n in count.items() if n])
    out = sum(row["status"] == "excluded" for row in own)
    return f"{said} {'reading' if len(own) == 1 else 'readings'}" + (f", {out} left out by you" if out else "")


def _figures(names: Sequence[str], readings: Sequence[Row]) -> list[dict[str, Any]]:
    found = []
    with figurestyle.styled():
        pen = benchfigures.BenchFigures()
        for name in names:
            own = [row for row in readings if row["particle"] == name]
            drawing = pen.draw(name, own)
            if drawing is not None:
                found.append(
                    {
                        "title": f"Particle {foreign(name)}",
                        "words": _counted(own),
                        "svg": drawing.svg,
                        "alt": drawing.alt,
                        "width": benchfigures.WIDTH,
                        "caption": "",
                    }
                )
    return found


def _reduction(folder: Path, facts: Row, digest: str) -> dict[str, Any] | None:
    """Content of the session's own report, without what may name people."""
    if facts.get("status") in NOT_TAKEN:
        return None
    return sessionreport.content(folder, digest=digest, hidden=_HIDDEN)[0]
