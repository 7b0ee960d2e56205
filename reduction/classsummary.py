"""What the staff see of a whole class: what to decide by hand first, then how the class did, and where it stumbled."""

from __future__ import annotations

import statistics
from collections import Counter
from collections.abc import Mapping, Sequence
from typing import Any

from reduction import classfigures, figurestyle
from reduction.benchreport import aligned, criterion_words, shown
from reduction.markrecord import LOOK_AT, NOT_MARKED, BenchMarks
from reduction.sheets import Sheet, sheet
from reduction.typeset import NONE, foreign
from reduction.wording import CAUTIONS, counted

_MOST_NAMED = 12  # benches listed beside one fault


def content(
    benches: Sequence[BenchMarks], *, digest: str, title: str = "", unknown: Mapping[str, str] | None = None
) -> dict[str, Any]:
    """Everything the template of the class summary sets.

    Parameters
    ----------
    benches : sequence of BenchMarks
        All benches, marked or not.
    digest : str
        Digest of all that the summary depends on.
    title : str
        The campaign's title.
    unknown : mapping of str to str
        Names in the files of marking that are no bench, and what is wrong with each.
    """
    ordered = sorted(benches, key=lambda one: one.session)
    marked = [one for one in ordered if one.status != NOT_MARKED and one.marks is not None]
    left = [one for one in ordered if one not in marked]
    return {
        **_frame(digest, title),
        "glance": _glance(ordered, marked, left),
        "left_out": _left_out(left, unknown or {}),
        "look_at": _look_at(marked),
        "overrides": _overrides(ordered),
        "figures": _figures(marked),
        "criteria": _criteria(marked),
        "faults": _common(marked),
        "marks": _mark_list(ordered),
        "cautions": [list(words) for words in CAUTIONS],
    }


def _frame(digest: str, title: str) -> dict[str, Any]:
    campaign = foreign(title)
    return {
        "title": "Class summary, for the staff",
        "kind": "For the staff only",
        "headline": "Class summary",
        "subline": campaign,
        "running": "Class summary" + (f" \N{MIDDLE DOT} {campaign}" if 0 < len(campaign) <= 70 else ""),
        "digest": digest,
        "digest_word": "Inputs and program",
    }


def _glance(ordered: Sequence[BenchMarks], marked: Sequence[BenchMarks], left: Sequence[BenchMarks]) -> list[list[str]]:
    earned = [one.marks for one in marked if one.marks is not None]
    by_hand = sum(any(part.override for part in one.criteria) for one in ordered)
    total = shown(marked[0].total) if marked else NONE
    pairs = [
        ["Benches", str(len(ordered))],
        ["Marked", str(len(marked))],
        ["Not marked", str(len(left))],
        ["To look at by hand", str(sum(one.status == LOOK_AT for one in marked))],
        ["With marks set by hand", str(by_hand)],
    ]
    if earned:
        spread = statistics.stdev(earned) if len(earned) > 1 else None
        pairs += [
            ["Median", f"{shown(statistics.median(earned))} of {total}"],
            ["Mean", f"{shown(statistics.fmean(earned))} of {total}"],
            ["Standard deviation", shown(spread)],
            ["Lowest and highest", f"{shown(min(earned))} and {shown(max(earned))}"],
        ]
    return pairs


def _left_out(left: Sequence[BenchMarks], unknown: Mapping[str, str]) -> Sheet | None:
    why = dict(sorted(unknown.items())) | {one.session: "\n".join(one.look_at) or NONE for one in left}
    if not why:
        return None
    cells = ["\n".join(foreign(line.strip()) for line in text.split("\n") if line.strip()) for text in why.values()]
    return sheet(["Bench", "Why it is not marked"], [[foreign(name) for name in why], cells], "ll", [0, 1])


def _look_at(marked: Sequence[BenchMarks]) -> Sheet | None:
    chosen = [one for one in marked if one.look_at]
    if not chosen:
        return None
    columns = [
        [foreign(one.session) for one in chosen],
        [f"{shown(one.marks)} of {shown(one.total)}" for one in chosen],
        ["\n".join(_gathered(one.look_at)) for one in chosen],
    ]
    return sheet(["Bench", "Marks", "Why"], columns, "lrl", [0, 0, 1])


def _gathered(reasons: Sequence[str]) -> list[str]:
    """Reasons that differ only in whom they are about, put together."""
    who: dict[str, list[str]] = {}
    for reason in reasons:
        about, mark, why = reason.partition(": ")
        who.setdefault(why if mark else reason, []).extend([about] if mark else [])
    return [foreign(f"{', '.join(about)}: {why}" if about else why) for why, about in who.items()]


def _overrides(ordered: Sequence[BenchMarks]) -> Sheet | None:
    rows = [
        (
            foreign(bench.session),
            criterion_words(one.criterion),
            shown(one.automatic),
            shown(one.marks),
            foreign(one.override.reason),
            foreign(one.override.by),
        )
        for bench in ordered
        for one in bench.criteria
        if one.override is not None
    ]
    if not rows:
        return None
    heads = ["Bench", "Criterion", "Program", "By hand", "Reason", "By"]
    return sheet(heads, [list(column) for column in zip(*rows, strict=True)], "llrrll", [0, 0, 0, 0, 3, 1])


def _names(marked: Sequence[BenchMarks]) -> list[tuple[str, float]]:
    """Criteria with the marks available, in the order of the scheme."""
    return list(dict.fromkeys((one.criterion, one.available) for bench in marked for one in bench.criteria))


def _earned(marked: Sequence[BenchMarks], criterion: str) -> list[float | None]:
    return [one.marks for bench in marked for one in bench.criteria if one.criterion == criterion]


def _figures(marked: Sequence[BenchMarks]) -> dict[str, Any]:
    if not marked:
        return {}
    found = [
        classfigures.met(criterion_words(name), _earned(marked, name), available) for name, available in _names(marked)
    ]
    with figurestyle.styled():
        drawings = {
            "distribution": classfigures.distribution([one.marks or 0.0 for one in marked], marked[0].total),
            "criteria": classfigures.criteria(found),
        }
    return {
        name: {"svg": one.svg, "alt": one.alt, "width": classfigures.WIDTH, "caption": ""}
        for name, one in drawings.items()
    }


def _criteria(marked: Sequence[BenchMarks]) -> Sheet | None:
    found = []
    for name, available in _names(marked):
        known = [one for one in _earned(marked, name) if one is not None]
        if known:
            ends = (statistics.fmean(known), statistics.median(known), min(known), max(known))
            found.append((name, available, *ends))
    if not found:
        return None
    names, available_marks, means, *others = (list(column) for column in zip(*found, strict=True))
    shares = [f"{100 * m / a:.0f} %" if a else NONE for m, a in zip(means, available_marks, strict=True)]
    columns = [[criterion_words(name) for name in names], *(aligned(one) for one in (available_marks, means, *others))]
    heads = ["Criterion", "Available", "Mean", "Median", "Lowest", "Highest", "Mean share"]
    return sheet(heads, [*columns, shares], "lrrrrrr", [2, 1, 1, 1, 1, 1, 1])


def _common(marked: Sequence[BenchMarks]) -> Sheet | None:
    """The faults found, the commonest first, with the benches that have them."""
    having: dict[str, list[str]] = {}
    said: dict[str, Counter[str]] = {}
    for bench in marked:
        for hint in bench.hints:
            said.setdefault(hint.code, Counter())[hint.text.partition(": ")[2] or hint.text] += 1
        for code in dict.fromkeys(hint.code for hint in bench.hints):
            having.setdefault(code, []).append(bench.session)
    if not having:
        return None
    codes = sorted(having, key=lambda code: (-len(having[code]), code))
    words = [min(said[code], key=lambda text, code=code: (-said[code][text], text)) for code in codes]  # type: ignore[misc]
    columns = [
        [foreign(one[:1].upper() + one[1:]) for one in words],
        [str(len(having[code])) for code in codes],
        [_listed(having[code]) for code in codes],
    ]
    return sheet(["What was found", "Benches", "Which"], columns, "lrl", [6, 0, 5])


def _listed(names: Sequence[str]) -> str:
    shown_names = ", ".join(foreign(name) for name in names[:_MOST_NAMED])
    rest = len(names) - _MOST_NAMED
    return shown_names + (f" and {counted(rest, 'other')}" if rest > 0 else "")


def _mark_list(ordered: Sequence[BenchMarks]) -> Sheet | None:
    """The marks of every bench; an asterisk where a person set them."""
    names = [name for name, _ in _names(ordered)]
    if not ordered:
        return None
    columns = [[foreign(bench.session) for bench in ordered]]
    for name in names:
        own = [next((one for one in bench.criteria if one.criterion == name), None) for bench in ordered]
        cells = aligned([one.marks if one else None for one in own])
        stars = ["*" if one and one.override else "" for one in own]
        columns.append([f"{cell}{star}" for cell, star in zip(cells, stars, strict=True)])
    columns.append(aligned([bench.marks for bench in ordered]))
    heads = ["Bench", *(criterion_words(name).replace(": ", ":\n") for name in names), "Marks"]
    return sheet(heads, columns, "l" + "r" * (len(heads) - 1), [0, *([1] * (len(heads) - 1))])
