"""What tells two results folders apart, in words: the largest move first, then what could have done it."""

from __future__ import annotations

import math
from collections import Counter
from collections.abc import Iterable, Sequence
from pathlib import Path

from reduction.resultsdiff import Difference, Move
from reduction.wording import counted

SHOWN = 12  # rows of each part unless all are asked for


def difference_text(found: Difference, a: Path, b: Path, *, everything: bool = False) -> str:
    """Plain text of what tells two results folders apart.

    Parameters
    ----------
    found : Difference
        As `difference` gives it.
    a, b : Path
        The folders, as they are to be named.
    everything : bool
        Whether every row is listed, instead of the first of each part.
    """
    if not found:
        return f"{a} and {b} are the same, file for file."
    most = 10**9 if everything else SHOWN
    lines = [f"A: {a}", f"B: {b}"]
    if found.moves:
        lines += ["", *_by_quantity(found.moves), "", *_listed(found.moves, most)]
    else:
        lines += ["", "No number moved."]
    for title, parts in (("Only in B", found.appeared), ("Only in A", found.vanished)):
        if parts:
            rows = [f"{_of(file)}{' '.join(key)}{', ' + name if name else ''}" for file, key, name in parts]
            lines += ["", f"{title}:", *_cut(rows, most)]
    if found.words:
        rows = [f"{_of(f)}{' '.join(k)}, {c}: {old or 'none'} -> {new or 'none'}" for f, k, c, old, new in found.words]
        lines += ["", "Words that changed:", *_cut(rows, most)]
    lines += ["", "What they were made from:"]
    lines += _cut(list(found.causes), most) if found.causes else ["  the same files, settings, versions and program"]
    if found.by_session:
        lines += ["", "Sessions with a difference, and what of this they depend on:"]
        lines += _cut([f"{name}: {'; '.join(why) or _NOTHING}" for name, why in found.by_session.items()], most)
    lines += ["", f"{counted(len(found.files), 'file')} {'differs' if len(found.files) == 1 else 'differ'}:"]
    lines += _cut(list(found.files), most)
    return "\n".join(lines)


_NOTHING = "nothing; compare the processors, and verify both folders"


def _of(file: str) -> str:
    return "" if file == "particles.csv" else f"{file}: "


def _by_quantity(moves: Sequence[Move]) -> list[str]:
    """Table of the quantities, the one with the largest move first."""
    largest: dict[tuple[str, str], Move] = {}
    for move in moves:
        largest.setdefault((move.file, move.quantity), move)
    count = Counter((move.file, move.quantity) for move in moves)
    rows = [("quantity", "table", "moved", "most", "u changed most by")]
    rows += [
        (name, file, str(count[file, name]), _in_u(largest[file, name]), _most_u(moves, file, name))
        for file, name in largest
    ]
    return _columns(rows, "<<>>>")


def _most_u(moves: Iterable[Move], file: str, name: str) -> str:
    change = max((move.u_change for move in moves if (move.file, move.quantity) == (file, name)), key=abs)
    return f"{100.0 * change:+.2g} %" if change else "-"


def _in_u(move: Move) -> str:
    if move.before == move.after:
        return "u only"
    return f"{move.by:+.2g} u" if math.isfinite(move.by) else "no u in A"


def _listed(moves: Sequence[Move], most: int) -> list[str]:
    rows = [("where", "quantity", "in A", "in B", "moved")]
    rows += [
        (_of(move.file) + " ".join(move.key), move.quantity, _shown(move.before, move.u_before),
         _shown(move.after, move.u_after), _in_u(move))
        for move in moves[:most]
    ]  # fmt: skip
    lines = _columns(rows, "<<>>>")
    if len(moves) > most:
        lines.append(f"  and {len(moves) - most} more, each by no more than {moves[most].size:.2g} u; --all lists them")
    return lines


def _shown(value: float, u: float) -> str:
    return f"{value:.6g} +- {u:.2g}" if math.isfinite(u) else f"{value:.6g}"


def _columns(rows: Sequence[Sequence[str]], sides: str) -> list[str]:
    widths = [max(map(len, column)) for column in zip(*rows, strict=True)]
    return [
        (
            "  " + "  ".join(f"{cell:{side}{width}}" for cell, side, width in zip(row, sides, widths, strict=True))
        ).rstrip()
        for row in rows
    ]


def _cut(rows: Sequence[str], most: int) -> list[str]:
    lines = [f"  {row}" for row in rows[:most]]
    if len(rows) > most:
        lines.append(f"  and {len(rows) - most} more; --all lists them")
    return lines
