"""Numbers and foreign text as they are set on a page: brackets, powers of ten, a true minus, nothing left to chance."""

from __future__ import annotations

import math
import re
import unicodedata
from collections.abc import Sequence
from decimal import Context, Decimal

from reduction.quantity import rounded

NONE = "\N{EM DASH}"
MINUS = "\N{MINUS SIGN}"
_RAISED = str.maketrans("-0123456789", "⁻⁰¹²³⁴⁵⁶⁷⁸⁹")
_EXACT = Context(prec=400)
_BIDI = frozenset("\u202a\u202b\u202c\u202d\u202e\u2066\u2067\u2068\u2069\ufeff")
_SPACE_TO_BREAK = "\u200b"


def power_of_ten(power: int) -> str:
    """`10⁻³`."""
    return "10" + str(power).translate(_RAISED)


def minus(text: str) -> str:
    """Text of a number with a true minus sign."""
    return text.replace("-", MINUS)


def bracketed(estimate: float, u: float, power: int) -> str:
    """Estimate with its uncertainty in brackets, in units of ten to `power`; an em dash where one is missing."""
    if not (math.isfinite(estimate) and math.isfinite(u)):
        return NONE
    value, uncertainty = (Decimal(text).scaleb(-power, _EXACT) for text in rounded(estimate, u))
    if u == 0.0:
        return minus(f"{value:f}")
    place = uncertainty.as_tuple().exponent
    decimals = max(0, -place) if isinstance(place, int) else 0
    figures = int(uncertainty.scaleb(decimals, _EXACT))
    return minus(f"{value:.{decimals}f}({figures})")


def bracketed_alone(estimate: float, u: float) -> str:
    """Estimate with its uncertainty in brackets and a power of ten of its own where it needs one."""
    if not (math.isfinite(estimate) and math.isfinite(u)):
        return NONE
    power = common_power([max(abs(estimate), abs(u))])
    return times(bracketed(estimate, u, power), power)


def times(mantissa: str, power: int) -> str:
    """`1.234(56) × 10⁻³`, or the mantissa alone where the power is 0."""
    return f"{mantissa}\u202f×\u202f{power_of_ten(power)}" if power and mantissa != NONE else mantissa


def common_power(values: Sequence[float]) -> int:
    """Power of ten, a multiple of 3, that suits a whole column of numbers."""
    sizes = sorted(abs(value) for value in values if math.isfinite(value) and value)
    if not sizes:
        return 0
    power = math.floor(math.log10(sizes[len(sizes) // 2]))
    return 0 if -1 <= power < 4 else 3 * (power // 3)


def wide(values: Sequence[float]) -> bool:
    """Whether a column spans too many decades for one power of ten."""
    sizes = [abs(value) for value in values if math.isfinite(value) and value]
    return bool(sizes) and max(sizes) > 1e4 * min(sizes)


def interval(low: float, high: float, u: float, power: int) -> str:
    """Both ends of an interval, to the place that `u` is rounded to, in units of ten to `power`."""
    if not (math.isfinite(low) and math.isfinite(high) and math.isfinite(u) and u > 0):
        return NONE
    ends = [bracketed(end, u, power).partition("(")[0] for end in (low, high)]
    return f"{ends[0]} to {ends[1]}"


def significant(value: float, digits: int = 3) -> str:
    """A number without an uncertainty of its own, to so many significant digits."""
    if not math.isfinite(value):
        return NONE
    mantissa, _, power = f"{value:.{digits - 1}e}".partition("e")
    if value == 0.0:
        return "0"
    if -4 <= int(power) < 5:
        return minus(f"{value:.{max(0, digits - 1 - int(power))}f}")
    return times(minus(mantissa), int(power))


def pair(estimate: float, u: float) -> tuple[str, str]:
    """Estimate and standard uncertainty, rounded together, for two cells of a table."""
    if not (math.isfinite(estimate) and math.isfinite(u)):
        return significant(estimate, 6), NONE if not math.isfinite(u) else significant(u, 2)
    both = rounded(estimate, u)
    size = max(abs(Decimal(text)) for text in both)
    if Decimal("1e-4") <= size < Decimal("1e6"):
        return minus(f"{Decimal(both[0]):f}"), minus(f"{Decimal(both[1]):f}")
    mantissas, powers = zip(*(text.partition("e")[::2] for text in both), strict=True)
    value, uncertainty = (times(minus(m), int(p or 0)) for m, p in zip(mantissas, powers, strict=True))
    return value, uncertainty


def moved(estimate: float, u: float, adjusted: float) -> str:
    """How far an input moved when adjusted, in units of its stated u."""
    if not (u > 0 and math.isfinite(adjusted)):
        return NONE
    return minus(f"{(adjusted - estimate) / u + 0.0:.2f}").replace(f"{MINUS}0.00", "0.00")


def chance(p: float) -> str:
    """A p-value to two digits; below a millionth only that it is, for no model holds so far out."""
    return f"< {power_of_ten(-6)}" if p < 1e-6 else significant(p, 2)


def percent(share: float) -> str:
    """A share of the variance in percent."""
    if not math.isfinite(share):
        return NONE
    if 0 < abs(share) < 0.0005:
        return "< 0.1"
    return minus(f"{100 * share:.1f}")


def _visible(character: str) -> str:
    if character in "\n\t\u2028\u2029":
        return " "
    kind = unicodedata.category(character)
    code = ord(character)
    if kind in ("Cc", "Co", "Cs") or character in _BIDI or (code & 0xFFFE) == 0xFFFE or 0xFDD0 <= code <= 0xFDEF:
        return f"[U+{code:04X}]"
    return character


_PLAIN = re.compile(
    "[^\x00-\u024f\u0370-\u052f\u05d0-\u05ea\u0620-\u064a\u1e00-\u1fff\u2000-\u20bf\u2100-\u22ff\u25a1]|[\u0300-\u036f]"
)


def spelled(text: str) -> str:
    """Text with all but the letters of Latin, Greek, Cyrillic, Hebrew and Arabic and common signs spelled out."""
    return _PLAIN.sub(lambda found: f"[U+{ord(found[0]):04X}]", unicodedata.normalize("NFC", text))


def lettered(drawing: str) -> str:
    """SVG text as it can be printed: letters one by one, a box for each that the page's faces lack.

    In a printed drawing each glyph needs a letter of its own, so marks that do not join theirs go; and one letter
    without a glyph would turn its whole label into boxes.
    """
    return re.sub(
        r"[^\x00-\x7f]+", lambda found: "".join(map(_letter, unicodedata.normalize("NFC", found[0]))), drawing
    )


def _letter(letter: str) -> str:
    if unicodedata.category(letter) in ("Mn", "Mc", "Me", "Cf"):
        return ""
    return _PLAIN.sub("\N{WHITE SQUARE}", letter)


def visible(text: str) -> str:
    """Text from outside with all that no page can show spelled out, for places that never break: titles, figures."""
    return "".join(_visible(character) for character in text)


def foreign(text: object, run: int = 18) -> str:
    """Text from outside, fit to be set: what no page can show is spelled out, long runs may break.

    Control characters, private-use and non-characters, and marks that turn the reading direction of what follows are
    written as `[U+202E]`. A word longer than `run` may break after `/`, `_` and every `run` characters.
    """
    shown = visible(str(text))
    return re.sub(rf"\S{{{run + 1},}}", lambda match: _breakable(match[0], run), shown)


def _breakable(word: str, run: int) -> str:
    out, since = [], 0
    for k, character in enumerate(word):
        out.append(character)
        since += 1
        follows_mark = k + 1 < len(word) and unicodedata.combining(word[k + 1])
        if (character in "/_" or since >= run) and k + 1 < len(word) and not follows_mark:
            out.append(_SPACE_TO_BREAK)
            since = 0
    return "".join(out)
