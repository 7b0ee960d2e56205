"""The faces of a page on a screen: those its figures were measured with, cut down to the letters the page has."""

from __future__ import annotations

import base64
import io
import logging
from pathlib import Path

from fontTools import subset

_RAISED = "⁰¹²³⁴⁵⁶⁷⁸⁹⁻"  # from one face all of them, since the other has but three
_ALWAYS = "".join(map(chr, range(0x20, 0x7F)))
FACES = (  # name, weight and style in the style sheet, file, whether it lends the raised figures alone
    ("Plate", "400", "normal", "STIXGeneral.ttf", False),
    ("Plate", "400", "italic", "STIXGeneralItalic.ttf", False),  # for the symbols of quantities
    ("Plate", "700", "normal", "STIXGeneralBol.ttf", False),
    ("Plate raised", "400 700", "normal", "DejaVuSerif.ttf", True),
)

logging.getLogger("fontTools").setLevel(logging.ERROR)  # tables of a font's editor that it drops


def style(folder: Path, text: str) -> str:
    """Style rules that bring the faces along, with the letters of a text.

    Parameters
    ----------
    folder : Path
        Where the font files lie.
    text : str
        All that the page shows; letters no face has are left to the reader's own faces.
    """
    letters = set(text) | set(_ALWAYS)
    rules = []
    for name, weight, slope, file, raised in FACES:
        wanted = "".join(sorted(letters & set(_RAISED) if raised else letters - set(_RAISED)))
        if wanted:
            data = base64.b64encode(_cut(folder / file, wanted)).decode()
            rules.append(
                f'@font-face{{font-family:"{name}";font-weight:{weight};font-style:{slope};font-display:block;'
                f'src:url(data:font/woff;base64,{data}) format("woff")}}'
            )
    return "\n".join(rules)


def _cut(path: Path, letters: str) -> bytes:
    """A font file with so many letters, compressed; the same bytes for the same letters."""
    options = subset.Options()
    options.flavor = "woff"
    options.recalc_timestamp = False
    options.layout_features = ["kern"]
    options.name_IDs = []
    options.hinting = False
    options.notdef_outline = True
    cutter = subset.Subsetter(options)
    cutter.populate(text=letters)
    out = io.BytesIO()
    with subset.load_font(str(path), options) as font:
        cutter.subset(font)
        subset.save_font(font, out, options)
    return out.getvalue()
