"""Figures inside a page on a screen: the drawing of the printed report, fit for a strict page and for a dark one."""

from __future__ import annotations

import re
from html import escape
from xml.etree import ElementTree

_SVG = "{http://www.w3.org/2000/svg}"
_HREF = "{http://www.w3.org/1999/xlink}href"
_LONG = re.compile(r"(\d+\.\d{2})\d+")
_DROPPED = {"metadata", "style"}
_EMPTY = {"path", "rect", "use"}
_LEFT_TO_PAGE = {"font-family"}  # the page's faces


def inline(svg: str, name: str, spoken: str) -> str:
    """SVG text of a drawing as an element of a page.

    Styles become attributes, which a page that allows no style of its own accepts and the page's style sheet may
    change; names within the drawing are kept apart from those of other drawings; what is drawn is told in words.

    Parameters
    ----------
    svg : str
        What `figurestyle.svg` returned.
    name : str
        Of the figure, unique on the page; letters, digits and hyphens.
    spoken : str
        Alternative text.
    """
    root = ElementTree.fromstring(svg)
    used = {target for node in root.iter() for target in _targets(node)}
    _, _, width, height = root.attrib["viewBox"].split()
    head = {
        "role": "img",
        "aria-label": spoken,
        "viewBox": f"0 0 {width} {height}",
        "width": f"{float(width):.0f}",
        "height": f"{float(height):.0f}",
    }
    inside = "".join(_written(child, name, used) for child in root)
    return f"<svg{_attributes(head)}>{inside}</svg>"


def _targets(node: ElementTree.Element) -> list[str]:
    """Names of other parts of the drawing that an element refers to."""
    found = re.fullmatch(r"url\(#(.+)\)", node.get("clip-path", ""))
    return ([found[1]] if found else []) + ([node.attrib[_HREF][1:]] if _HREF in node.attrib else [])


def _written(node: ElementTree.Element, name: str, used: set[str]) -> str:
    tag = node.tag.removeprefix(_SVG)
    if tag in _DROPPED:
        return ""
    given: dict[str, str] = {}
    for key, value in node.attrib.items():
        if key == "style":
            pairs = [part.split(":", 1) for part in value.split(";") if ":" in part]
            given |= {one.strip(): other.strip() for one, other in pairs if one.strip() not in _LEFT_TO_PAGE}
        elif key == "id":
            given |= {"id": f"{name}-{value}"} if value in used else {}
        elif key == _HREF:
            given["href"] = f"#{name}-{value[1:]}"
        elif key == "clip-path":
            given[key] = value.replace("url(#", f"url(#{name}-")
        elif key == "d":
            given[key] = _LONG.sub(r"\1", " ".join(value.split()))
        elif key in ("x", "y", "width", "height"):
            given[key] = _LONG.sub(r"\1", value)
        elif not (key == "transform" and value.startswith("rotate(-0 ")):
            given[key] = value
    inside = "".join(_written(child, name, used) for child in node)
    if tag == "g" and not given:
        return inside
    if tag == "defs" and not inside:
        return ""
    text = escape(node.text or "", quote=False) if tag == "text" else ""
    return f"<{tag}{_attributes(given)}/>" if tag in _EMPTY else f"<{tag}{_attributes(given)}>{text}{inside}</{tag}>"


def _attributes(given: dict[str, str]) -> str:
    return "".join(f' {key}="{escape(value, quote=True)}"' for key, value in given.items())
