"""YAML as data: texts, mappings and lists that know their line, with nothing guessed from how a text looks.

Every scalar stays the text that was written, so that an id `0812`, `1e3` or `no` and a date stay what they are; the
reader of a key decides whether a number belongs there. Anchors, aliases, tags and repeated keys are faults.
"""

from __future__ import annotations

import re
from collections.abc import Iterator
from dataclasses import dataclass, field
from pathlib import Path

import yaml

from reduction.errors import Faults
from reduction.textfile import read_text

SIZE_LIMIT = 1_000_000  # [bytes]; a hand-written file is a thousand times smaller
_DEPTH_LIMIT = 12
_NODE_LIMIT = 100_000  # thousands of sessions may be listed
_KEY_LIMIT = 200  # characters
_REPEATS_SHOWN = 10  # of keys in one mapping
_CONTROL = re.compile("[\x00-\x08\x0b-\x1f\x7f-\x84\x86-\x9f\ud800-\udfff]")
_LOADER: type = getattr(yaml, "CSafeLoader", yaml.SafeLoader)
_NULLS = ("", "~", "null", "Null", "NULL")


@dataclass(frozen=True)
class Scalar:
    """A text and where it stands."""

    text: str
    line: int
    quoted: bool

    @property
    def empty(self) -> bool:
        """Whether nothing was written."""
        return not self.quoted and self.text in _NULLS


@dataclass(frozen=True)
class Sequence:
    """A list and where it starts."""

    items: list[Node]
    line: int


@dataclass(frozen=True)
class Mapping:
    """Keys in the order written, with the line of each."""

    entries: dict[str, Node] = field(default_factory=dict)
    lines: dict[str, int] = field(default_factory=dict)
    line: int = 1


Node = Scalar | Sequence | Mapping


class _Refused(Exception):
    def __init__(self, line: int, found: str, expected: str, advice: str = "") -> None:
        self.line, self.found, self.expected, self.advice = line, found, expected, advice
        super().__init__(found)


def read_yaml(path: Path, name: str, *, faults: Faults) -> Mapping | None:
    """Read the mapping in a YAML file, an empty file holding an empty one; None, with a fault under `name`, if none."""
    text = read_text(path, name, faults=faults, limit=SIZE_LIMIT, lines=SIZE_LIMIT)
    if text is None:
        return None
    try:
        return _document(_events("\n".join(text.lines)), name, faults)
    except _Refused as refused:
        faults.add(name, line=refused.line, found=refused.found, expected=refused.expected, advice=refused.advice)
    except yaml.MarkedYAMLError as error:
        mark = error.problem_mark or error.context_mark
        problem = " ".join(str(part) for part in (error.problem, error.context) if part)
        advice = "Put one space after each colon, indent with spaces, and quote texts that hold a colon or #."
        line = mark.line + 1 if mark else 0
        faults.add(name, line=line, found=f"text that is not YAML ({problem})", expected="key: value", advice=advice)
    except (yaml.YAMLError, ValueError, RecursionError) as error:
        faults.add(name, found=f"text that is not YAML ({type(error).__name__})", expected="key: value")
    return None


def _events(text: str) -> list[yaml.Event]:
    """Events of a text, given up where they nest or number more than any file of ours: the parser knows no bounds."""
    events: list[yaml.Event] = []
    depth = 0
    for event in yaml.parse(text, Loader=_LOADER):
        depth += isinstance(event, yaml.CollectionStartEvent) - isinstance(event, yaml.CollectionEndEvent)
        if depth > _DEPTH_LIMIT + 1:
            raise _Refused(_line(event), f"more than {_DEPTH_LIMIT} levels", "a few levels of keys")
        if len(events) > _NODE_LIMIT:
            raise _Refused(_line(event), f"more than {_NODE_LIMIT:,} keys and values", "a file written by hand")
        events.append(event)
    return events


def _document(events: list[yaml.Event], name: str, faults: Faults) -> Mapping:
    documents = [event for event in events if isinstance(event, yaml.DocumentStartEvent)]
    if len(documents) > 1:
        line = _line(documents[1])
        raise _Refused(line, "a second document after ---", "one document in a file", "Split the file.")
    if not documents:
        return Mapping()
    content = iter(event for event in events if isinstance(event, yaml.NodeEvent | yaml.CollectionEndEvent))
    node = _node(next(content), content, name, faults)
    if isinstance(node, Scalar) and node.empty:
        return Mapping()
    if not isinstance(node, Mapping):
        kind = "a list" if isinstance(node, Sequence) else f"the text {shown(node)}"
        raise _Refused(node.line, kind, "lines of the form key: value")
    return node


def _line(event: yaml.Event) -> int:
    return event.start_mark.line + 1 if event.start_mark else 0


def _node(event: yaml.Event, events: Iterator[yaml.Event], name: str, faults: Faults) -> Node:
    line = _line(event)
    if isinstance(event, yaml.AliasEvent) or getattr(event, "anchor", None):
        sign = "*" if isinstance(event, yaml.AliasEvent) else "&"
        raise _Refused(
            line,
            f"the anchor or alias {sign}{getattr(event, 'anchor', '')}",
            "plain values",
            "Write the value out, or quote the text.",
        )
    tag = getattr(event, "tag", None)
    if tag and tag != "!":
        raise _Refused(line, f"the tag {tag}", "plain values", "Leave the tag out.")
    if isinstance(event, yaml.ScalarEvent):
        if odd := _CONTROL.search(event.value):
            found = f"the control character U+{ord(odd[0]):04X}"
            raise _Refused(line, found, "text", "Leave it out.")
        return Scalar(event.value.strip(), line, event.style not in (None, ""))
    if isinstance(event, yaml.SequenceStartEvent):
        items = []
        while not isinstance(following := next(events), yaml.SequenceEndEvent):
            items.append(_node(following, events, name, faults))
        return Sequence(items, line)
    mapping, repeats = Mapping(line=line), 0
    while not isinstance(following := next(events), yaml.MappingEndEvent):
        key = _node(following, events, name, faults)
        value = _node(next(events), events, name, faults)
        if not isinstance(key, Scalar):
            raise _Refused(key.line, "a list or mapping as key", "a word as key")
        if len(key.text) > _KEY_LIMIT:
            raise _Refused(key.line, f"a key of {len(key.text)} characters", f"at most {_KEY_LIMIT}")
        if key.text in mapping.entries:
            repeats += 1
            if repeats <= _REPEATS_SHOWN:
                found = f"{key.text} again, first on line {mapping.lines[key.text]}"
                faults.add(
                    name, line=key.line, column=key.text, found=found, expected="each key once", advice="Delete one."
                )
            continue
        mapping.entries[key.text] = value
        mapping.lines[key.text] = key.line
    return mapping


def shown(node: Node) -> str:
    """Short text for a node in a fault."""
    if isinstance(node, Scalar):
        if node.empty:
            return "nothing"
        return node.text if len(node.text) <= 60 else node.text[:57] + "..."
    return "a list" if isinstance(node, Sequence) else "a mapping"


def plain(node: Node) -> object:
    """Texts, lists and dicts without lines; a scalar with nothing in it is None."""
    if isinstance(node, Scalar):
        return None if node.empty else node.text
    if isinstance(node, Sequence):
        return [plain(item) for item in node.items]
    return {key: plain(value) for key, value in node.entries.items()}
