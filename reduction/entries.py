"""Entries of a YAML mapping read against its table of keys: each value checked, each with the line it stands on."""

from __future__ import annotations

import re
from collections.abc import Callable, Iterable, Mapping
from dataclasses import dataclass
from datetime import date
from typing import Any

from reduction.contract import ID, ID_WORDS, Key
from reduction.errors import Faults, nearest
from reduction.quantity import QuantityError, read_number, read_quantity
from reduction.units import QUANTITIES, UNITS, from_unit, range_text, split_name, units_of
from reduction.yamlfile import Mapping as YamlMapping
from reduction.yamlfile import Node, Scalar, Sequence, plain, shown

NOT_A_REASON = frozenset(("no", "n", "false", "0", "none", "off", "nan", "-"))
"""Words that people write for "do not exclude", where only a reason to exclude belongs."""
_TEXT_LIMIT = 10_000
_LARGEST_U = 1e30  # its square must be a number still, also beside small ones
_UNKNOWN_SHOWN = 20  # unknown keys of one mapping, each compared with all that are known
_DATE = re.compile(r"\d{4}-\d{2}-\d{2}(?:[T ]\d{2}:\d{2}(?::\d{2})?(?:Z|[+-]\d{2}:\d{2})?)?", re.ASCII)


@dataclass(frozen=True)
class Entry:
    """A value read; or the place of one that had a fault (None) or of a key with nothing after it (BLANK)."""

    value: object
    path: str
    line: int


BLANK = object()
Entries = dict[str, Entry]
"""Entries by stem, those of nested mappings as `air.temperature`."""


class _Bad(ValueError):
    def __init__(self, found: str, expected: str, advice: str = "") -> None:
        self.found, self.expected, self.advice = found, expected, advice
        super().__init__(found)


def read_entries(
    mapping: YamlMapping, keys: tuple[Key, ...], path: str, *, faults: Faults, above: str = "", shown_above: str = ""
) -> Entries:
    """Read each key of a mapping; unknown keys, units and values become faults under `path`.

    A key with nothing after it counts as left out; `filled` drops those.
    """
    entries: Entries = {}
    stems = {key.stem: key for key in keys}
    strangers = 0
    for name, node in mapping.entries.items():
        line, column = mapping.lines[name], shown_above + name
        key, unit = _known(name, stems)
        if key is None:
            strangers += 1
            if strangers > _UNKNOWN_SHOWN:
                continue
            found, expected, advice = _unknown(name, keys)
            faults.add(path, line=line, column=column, found=found, expected=expected, advice=advice)
            for spoilt in stems:
                if _spoils(name, spoilt):  # not missing as well
                    entries.setdefault(above + spoilt, Entry(None, path, line))
            continue
        stem = above + key.stem
        if stem in entries and entries[stem].value is not None:
            found = f"{key.stem} again, first on line {entries[stem].line}"
            faults.add(path, line=line, column=column, found=found, expected="each quantity once", advice="Delete one.")
            continue
        if isinstance(node, Scalar) and node.empty:
            entries[stem] = Entry(BLANK, path, line)
            continue
        if key.kind == "mapping":
            if not isinstance(node, YamlMapping):
                inner = ", ".join(inner.name for inner in key.keys[:3])
                faults.add(path, line=line, column=column, found=shown(node), expected=f"keys below it such as {inner}")
                entries[stem] = Entry(None, path, line)
                continue
            entries[stem] = Entry({}, path, line)
            entries |= read_entries(
                node, key.keys, path, faults=faults, above=f"{stem}.", shown_above=f"{shown_above}{name}."
            )
            continue
        try:
            value = _READERS[key.kind](node, key, unit)
        except (_Bad, QuantityError) as bad:
            faults.add(path, line=line, column=column, found=bad.found, expected=bad.expected, advice=bad.advice)
            value = None
        entries[stem] = Entry(value, path, line)
    if strangers > _UNKNOWN_SHOWN:
        found = f"{strangers - _UNKNOWN_SHOWN} more unknown keys"
        faults.add(path, line=mapping.line, column=shown_above.rstrip("."), found=found, expected="keys of this file")
    return entries


def filled(entries: Entries) -> Entries:
    """Entries without those of keys with nothing after them."""
    return {stem: entry for stem, entry in entries.items() if entry.value is not BLANK}


def value_of(entries: Mapping[str, Entry], stem: str, default: Any = None) -> Any:
    """Value read for a stem, or the default where it is left out or had a fault."""
    entry = entries.get(stem)
    return default if entry is None or entry.value is None or entry.value is BLANK else entry.value


def require(
    entries: Entries, keys: Iterable[Key], path: str, *, faults: Faults, advice: str, above: str = "", shown: str = ""
) -> None:
    """Record a fault for each required key that is neither there nor already at fault."""
    for key in keys:
        stem, column = above + key.stem, shown + key.name
        if key.kind == "mapping" and (stem not in entries or entries[stem].value is not None):
            require(entries, key.keys, path, faults=faults, advice=advice, above=f"{stem}.", shown=f"{column}.")
        elif (
            key.required
            and key.kind != "mapping"
            and value_of(entries, key.instead, BLANK) is BLANK
            and (stem not in entries or entries[stem].value is BLANK)
        ):
            place = entries.get(stem) or entries.get(above[:-1])
            line = place.line if place and place.path == path else 0
            faults.add(
                path, line=line, column=column, found="nothing", expected=_one_sentence(key.about), advice=advice
            )


def _known(name: str, stems: Mapping[str, Key]) -> tuple[Key | None, str]:
    key = stems.get(name)
    if key is not None and (not key.of or not QUANTITIES[key.of].dimension):
        return key, ""
    stem, unit = split_name(name) if "[" not in name and "/" not in name and "(" not in name else (name, "")
    key = stems.get(stem)
    if key is None or not key.of or not unit or UNITS[unit].dimension != QUANTITIES[key.of].dimension:
        return None, ""
    return key, unit


def _spoils(name: str, stem: str) -> bool:
    """Whether an unknown key is meant for a known one: misspelt, without its unit or with a wrong one."""
    return _lacks_unit(name, stem) or nearest(name, [stem]).startswith("Did you mean")


def _lacks_unit(name: str, stem: str) -> bool:
    return name == stem or name.startswith(stem + "_")


def _unknown(name: str, keys: tuple[Key, ...]) -> tuple[str, str, str]:
    for key in sorted(keys, key=lambda key: -len(key.stem)):
        dimension = QUANTITIES[key.of].dimension if key.of else ""
        if dimension and _lacks_unit(name, key.stem):
            found = "no unit" if name == key.stem else f"the ending {name[len(key.stem) + 1 :]}"
            return found, f"one of the units {', '.join(units_of(dimension))}", f"Write {key.name}, say."
        if key.kind == "mapping":
            for inner in key.keys:
                if name == inner.name and not any(other.name == name for other in keys):
                    return "a key that is unknown here", f"{name} under {key.name}", f"Move it below {key.name}:."
    return "an unknown key", "a key of this file", nearest(name, [key.name for key in keys])


def _text(node: Node, expected: str = "a text") -> str:
    if not isinstance(node, Scalar):
        raise _Bad(shown(node), expected, "Put the text in quotes.")
    if not node.text:
        raise _Bad("nothing", expected)
    if len(node.text) > _TEXT_LIMIT:
        raise _Bad(f"{len(node.text)} characters", f"at most {_TEXT_LIMIT}")
    return node.text


def _read_text(node: Node, key: Key, unit: str) -> str:
    return _text(node)


def _read_reason(node: Node, key: Key, unit: str) -> str:
    text = _text(node, "a reason")
    if text.casefold() in NOT_A_REASON:
        raise _Bad(text, "a reason to leave the session out", "Leave the key out to keep the session.")
    return text


def _read_id(node: Node, key: Key, unit: str) -> str:
    text = _text(node, "a name")
    if not ID.fullmatch(text):
        raise _Bad(text, ID_WORDS)
    return text


def _read_date(node: Node, key: Key, unit: str) -> str:
    text = _text(node, "a date")
    try:
        if not _DATE.fullmatch(text):
            raise ValueError
        date.fromisoformat(text[:10])
    except ValueError:
        raise _Bad(text, "a date such as 2025-03-14", "Write year, month, day.") from None
    return text


def _read_word(node: Node, key: Key, unit: str) -> str:
    text = _text(node, f"one of {', '.join(key.words)}").removeprefix("+")
    if text not in key.words:
        raise _Bad(text, f"one of {', '.join(key.words)}", nearest(text, key.words) if text[:1].isalpha() else "")
    return text


def _read_integer(node: Node, key: Key, unit: str) -> int:
    low, high = (int(bound) for bound in key.bounds)
    expected = f"a whole number from {low} to {high}"
    text = _text(node, expected)
    if not re.fullmatch(r"[+-]?\d{1,25}", text, re.ASCII) or not low <= int(text) <= high:
        raise _Bad(text if len(text) < 60 else "a very long text", expected)
    return int(text)


def _read_number(node: Node, key: Key, unit: str) -> float:
    try:
        number = read_number(plain(node))
    except QuantityError as error:
        found = shown(node)
        advice = "No uncertainty belongs here." if "(" in found or isinstance(node, YamlMapping) else error.advice
        raise _Bad(found, "a number", advice) from None
    if key.of:
        kind = QUANTITIES[key.of]
        si = from_unit(number, unit) if unit else number
        if not kind.contains(si):
            raise _Bad(f"{shown(node)}, out of range", range_text(kind, unit))
        return si
    low, high = key.bounds
    if not low < number < high:
        raise _Bad(f"{shown(node)}, out of range", f"above {low:g} and below {high:g}")
    return number


def _read_quantity(node: Node, key: Key, unit: str) -> object:
    if isinstance(node, Sequence):
        raise _Bad("a list", "a number such as 20, 61.3(9), or {value: 20, u: 0.4}")
    quantity = read_quantity(plain(node), unit)
    kind = QUANTITIES[key.of]
    if not kind.contains(quantity.estimate):
        raise _Bad(f"{_estimate(node)}, out of range", range_text(kind, unit))
    if quantity.u > _LARGEST_U:
        raise _Bad(f"the uncertainty {quantity.u:g}", f"at most {_LARGEST_U:g} in SI", "Correct its power of ten.")
    return quantity


def _estimate(node: Node) -> str:
    return shown(node.entries["value"]) if isinstance(node, YamlMapping) else shown(node)


def _read_texts(node: Node, key: Key, unit: str) -> dict[str, str]:
    if not isinstance(node, YamlMapping):
        raise _Bad(shown(node), "lines of the form word: value")
    for name, value in node.entries.items():
        if not ID.fullmatch(name):
            raise _Bad(f"the word {name}", ID_WORDS)
        if not isinstance(value, Scalar) or not value.text:
            raise _Bad(f"{name}: {shown(value)}", "a text after each word")
    return {name: value.text for name, value in node.entries.items() if isinstance(value, Scalar)}


def _read_names(node: Node, key: Key, unit: str) -> dict[str, str]:
    if not isinstance(node, YamlMapping):
        raise _Bad(shown(node), "lines of the form session: reason")
    for name, value in node.entries.items():
        if not isinstance(value, Scalar) or value.empty or not value.text or value.text.casefold() in NOT_A_REASON:
            raise _Bad(f"{name}: {shown(value)}", "a reason after each session")
    return {name: value.text for name, value in node.entries.items() if isinstance(value, Scalar)}


def _read_sessions(node: Node, key: Key, unit: str) -> tuple[str, ...]:
    """List the sessions named; none stands for all."""
    if isinstance(node, Scalar) and node.text == "all":
        return ()
    if not isinstance(node, Sequence):
        raise _Bad(shown(node), "all, or a list of sessions", "Write [a, b], or all.")
    names = [item.text if isinstance(item, Scalar) else shown(item) for item in node.items]
    if not names:
        raise _Bad("an empty list", "all, or a list of sessions", "Write all.")
    seen: set[str] = set()
    for name in names:
        if name in seen:
            raise _Bad(f"{name} twice", "each session once")
        seen.add(name)
    return tuple(names)


def _read_node(node: Node, key: Key, unit: str) -> Node:
    """A mapping of the user's own words, read by who knows what they stand for."""
    if not isinstance(node, YamlMapping):
        raise _Bad(shown(node), "lines of the form name: ...")
    return node


def _read_pair(node: Node, key: Key, unit: str) -> tuple[float, float]:
    """Two numbers within the bounds, the first the smaller."""
    low, high = key.bounds
    expected = f"two numbers such as [0.5, 2], the first the smaller, above {low:g} and below {high:g}"
    texts = [plain(item) for item in node.items] if isinstance(node, Sequence) else []
    try:
        numbers = [read_number(text) for text in texts]
    except QuantityError as error:
        raise _Bad(error.found, expected, error.advice) from None
    if len(numbers) != 2 or not low < numbers[0] < numbers[1] < high:
        raise _Bad(", ".join(map(str, texts)) or shown(node), expected)
    return numbers[0], numbers[1]


def _read_word_pair(node: Node, key: Key, unit: str) -> tuple[str, str]:
    """Two different words of those allowed."""
    expected = f"two of {', '.join(key.words)}, as in [{', '.join(key.words[:2])}]"
    words = [item.text if isinstance(item, Scalar) else "" for item in node.items] if isinstance(node, Sequence) else []
    for word in words:
        if word not in key.words:
            raise _Bad(word or shown(node), expected, nearest(word, key.words))
    if len(words) != 2 or words[0] == words[1]:
        raise _Bad(", ".join(words) or shown(node), expected)
    return words[0], words[1]


def _one_sentence(about: str) -> str:
    return about[:1].lower() + about[1:].rstrip(".")


_READERS: dict[str, Callable[[Node, Key, str], object]] = {
    "text": _read_text,
    "reason": _read_reason,
    "id": _read_id,
    "date": _read_date,
    "word": _read_word,
    "integer": _read_integer,
    "number": _read_number,
    "quantity": _read_quantity,
    "texts": _read_texts,
    "names": _read_names,
    "sessions": _read_sessions,
    "dimensions": _read_node,
    "conductors": _read_node,
    "pair": _read_pair,
    "word_pair": _read_word_pair,
}
