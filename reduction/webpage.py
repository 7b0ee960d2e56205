"""The campaign's report as one page for a screen: no network, no frame, nothing needed but the page."""

from __future__ import annotations

import base64
import hashlib
import re
import unicodedata
from collections.abc import Mapping
from functools import lru_cache
from pathlib import Path
from typing import Any
from urllib.parse import quote

import jinja2
from markupsafe import Markup, escape

from reduction import places, webfigure, webfont

Row = Mapping[str, Any]
_RIGHT_TO_LEFT = ("R", "AL")
_BREAK = "\u200b"  # where a long run of text may break
_TAG = re.compile(r"<[^>]*>")


def page(doc: Row, faces: Path) -> bytes:
    """The report as HTML.

    Parameters
    ----------
    doc : mapping
        What `campaignreport.content` returns, the same that is printed.
    faces : Path
        Folder of the font files.
    """
    templates = _templates()
    body = templates.get_template("campaign.html").render(doc=doc)
    style = "\n".join([webfont.style(faces, _TAG.sub("", body)), _text_of("page.css")])
    script = _text_of("sort.js")
    whole = templates.get_template("screen.html").render(
        title=doc["title"],
        body=Markup(body),
        style=Markup(style),
        script=Markup(script),
        style_hash=_hash(style),
        script_hash=_hash(script),
    )
    return whole.encode("utf-8")


def _hash(text: str) -> str:
    """What a content security policy names an inline text by."""
    return "sha256-" + base64.b64encode(hashlib.sha256(text.encode("utf-8")).digest()).decode()


def _text_of(name: str) -> str:
    return (_folder() / name).read_text(encoding="utf-8")


def _folder() -> Path:
    return places.workflow_folder() / "report"


@lru_cache(maxsize=1)
def _templates() -> jinja2.Environment:
    made = jinja2.Environment(
        loader=jinja2.FileSystemLoader(_folder()), autoescape=True, undefined=jinja2.StrictUndefined,
        keep_trailing_newline=True,
    )  # fmt: skip
    made.filters.update(shown=shown, address=address, drawn=_drawn)
    return made


def _drawn(figure: Row, name: str) -> Markup:
    return Markup(webfigure.inline(figure["svg"], name, figure["alt"]))


def address(path: str) -> str:
    """A path below the results folder as the address of a link."""
    return quote(path)


def shown(text: str) -> Markup:
    """Text as a page shows it: escaped, breaks where it may break, each run from right to left kept to itself.

    A name in Hebrew or Arabic letters must not turn round the numbers and names beside it.
    """
    out = Markup()
    for run, turned in _runs(str(text)):
        part = Markup("<wbr>").join(escape(one) for one in run.split(_BREAK))
        out += Markup("<bdi>{}</bdi>").format(part) if turned else part
    return out


def _runs(text: str) -> list[tuple[str, bool]]:
    """Stretches of a text from its first to its last letter written from right to left, and what is between them."""
    turned = [unicodedata.bidirectional(letter) in _RIGHT_TO_LEFT for letter in text]
    if not any(turned):
        return [(text, False)]
    spans: list[tuple[int, int]] = []
    for at, one in enumerate(turned):
        if not one:
            continue
        between = text[spans[-1][1] : at] if spans else ""
        if spans and not any(unicodedata.bidirectional(letter) in ("L", "EN", "AN") for letter in between):
            spans[-1] = (spans[-1][0], at + 1)
        else:
            spans.append((at, at + 1))
    out, last = [], 0
    for start, end in spans:
        out += [(text[last:start], False), (text[start:end], True)]
        last = end
    return [(run, one) for run, one in [*out, (text[last:], False)] if run]
