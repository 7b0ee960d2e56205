"""An input with its uncertainty, read from the shorthand `61.3(9)`; the one rounding rule for print."""

from __future__ import annotations

import math
import re
from collections.abc import Mapping
from dataclasses import dataclass, replace
from decimal import ROUND_HALF_EVEN, Context, Decimal

from reduction.errors import nearest
from reduction.units import UNITS, from_unit

SHAPES = {"normal": 1.0, "rectangular": math.sqrt(3.0), "triangular": math.sqrt(6.0), "arcsine": math.sqrt(2.0)}
"""Half width over standard uncertainty of each shape, GUM 4.3.7 and 4.3.9; normal has no half width."""

# Each digit can be taken in one way only: a text of a million digits that is no number is refused at once.
_NUMBER = re.compile(r"[+-]?(?:\d+(?:\.\d*)?|\.\d+)(?:[eE][+-]?\d+)?", re.ASCII)
_SHORTHAND = re.compile(
    r"(?P<estimate>[+-]?(?:\d+(?:\.\d*)?|\.\d+)) ?\((?P<u>\d+(?:\.\d*)?|\.\d+)\)(?P<power>[eE][+-]?\d{1,9})?",
    re.ASCII,
)
_EXPECTED = "a number such as 20, 61.3(9), 1.310(20)e4, or {value: 20, u: 0.4}"
_EXACT = Context(prec=400, rounding=ROUND_HALF_EVEN)


@dataclass(frozen=True)
class Quantity:
    """An input with its uncertainty, in SI."""

    estimate: float
    u: float = 0.0  # standard uncertainty, 0 = exact
    shape: str = "normal"  # a word of SHAPES; normal with finite dof is a scaled and shifted t
    dof: float = math.inf  # degrees of freedom of u

    @property
    def exact(self) -> bool:
        """Whether no uncertainty was stated."""
        return self.u == 0.0

    def from_unit(self, unit: str) -> Quantity:
        """Quantity in SI where `self` is in `unit`; an offset such as that of degC moves the estimate alone."""
        known = UNITS[unit]
        return replace(self, estimate=from_unit(self.estimate, unit), u=self.u * known.times / known.over)


class QuantityError(ValueError):
    """A text is no quantity; `found`, `expected` and `advice` say why."""

    def __init__(self, found: str, expected: str = _EXPECTED, advice: str = "") -> None:
        self.found, self.expected, self.advice = found, expected, advice
        super().__init__(f"found {found}; expected {expected}. {advice}".rstrip())


def read_number(value: object) -> float:
    """Finite number from a text or number; true, 1_000, 1:30, nan, inf and 1e999 are none.

    Raises
    ------
    QuantityError
        If `value` is anything but one finite decimal number.
    """
    if isinstance(value, bool) or not isinstance(value, str | int | float):
        raise QuantityError(_shown(value), "a number")
    text = _plain(value)
    if not _NUMBER.fullmatch(text):
        raise QuantityError(_shown(value), "a number", _advice(text))
    number = float(text)
    if not math.isfinite(number):
        raise QuantityError(_shown(value), "a finite number")
    return number


def read_quantity(value: object, unit: str = "") -> Quantity:
    """Quantity from `61.3(9)`, a bare number (exact), or a mapping with `value` and `u` or `half_width`.

    The figure in brackets is the standard uncertainty in units of the last digit, or, with a decimal point of its own,
    in the unit of the value. u = half_width / sqrt(3), sqrt(6), sqrt(2) for rectangular, triangular, arcsine.

    Parameters
    ----------
    value : object
        Text, number, or mapping of `value`, `u`, `dof`, `half_width`, `shape` to such.
    unit : str
        Spelling of the unit the text is in; SI where it is left out.

    Returns
    -------
    Quantity
        In SI.

    Raises
    ------
    QuantityError
        If the text is no quantity.

    Notes
    -----
    Source: JCGM 100:2008 (GUM), 4.3 for the shapes, 7.2.2 for the shorthand.

    >>> read_quantity("1.310(20)e4")
    Quantity(estimate=13100.0, u=200.0, shape='normal', dof=inf)
    """
    read = _from_mapping(value) if isinstance(value, Mapping) else _from_shorthand(value)
    read = read.from_unit(unit) if unit else read
    if not (math.isfinite(read.estimate) and math.isfinite(read.u)):
        raise QuantityError(_shown(value), "a finite number")
    return read


def _from_shorthand(value: object) -> Quantity:
    if isinstance(value, bool) or not isinstance(value, str | int | float):
        raise QuantityError(_shown(value))
    text = _plain(value)
    written = _SHORTHAND.fullmatch(text)
    if not written:
        try:
            return Quantity(read_number(value))
        except QuantityError as error:
            raise QuantityError(error.found, _EXPECTED, error.advice) from None
    power = written["power"] or ""
    decimals = len(written["estimate"].partition(".")[2])
    # Texts, not products: 61.3(9) must be the very 0.9 that {value: 61.3, u: 0.9} is.
    u = (
        float(written["u"] + power)
        if "." in written["u"]
        else float(f"{written['u']}e{int(power[1:] or 0) - decimals}")
    )
    return Quantity(float(written["estimate"] + power), u)


def _from_mapping(value: Mapping[object, object]) -> Quantity:
    known = ("value", "u", "dof", "half_width", "shape")
    for key in value:
        if key not in known:
            raise QuantityError(
                f"the key {key}", "value with u, or value with half_width and shape", nearest(str(key), known)
            )
    if "value" not in value:
        raise QuantityError("no key value", advice="Add value: the estimate.")
    estimate = read_number(value["value"])
    if "half_width" in value:
        return _from_half_width(estimate, value)
    shape = str(value.get("shape", "normal"))
    if shape not in SHAPES:
        raise QuantityError(f"shape {shape}", f"one of {', '.join(sorted(SHAPES))}", nearest(shape, SHAPES))
    if "u" not in value:
        if "dof" in value or "shape" in value:
            raise QuantityError("no key u", advice="Add u: the standard uncertainty.")
        return Quantity(estimate)
    u = read_number(value["u"])
    if u < 0.0:
        raise QuantityError(f"u {_shown(value['u'])}", "a standard uncertainty of 0 or more")
    dof = math.inf
    if "dof" in value:
        dof = read_number(value["dof"])
        if dof <= 0.0:
            raise QuantityError(f"dof {_shown(value['dof'])}", "degrees of freedom above 0")
        if shape != "normal":
            raise QuantityError(f"dof with shape {shape}", "degrees of freedom only with the normal shape")
    return Quantity(estimate, u, shape, dof)


def _from_half_width(estimate: float, value: Mapping[object, object]) -> Quantity:
    for key in ("u", "dof"):
        if key in value:
            raise QuantityError(
                f"half_width together with {key}", "u with dof, or half_width with shape", "Leave one out."
            )
    bounded = sorted(shape for shape in SHAPES if shape != "normal")
    shape = str(value.get("shape", ""))
    if shape not in bounded:
        raise QuantityError(
            f"shape {shape}" if shape else "no key shape", f"one of {', '.join(bounded)} with half_width"
        )
    half_width = read_number(value["half_width"])
    if half_width <= 0.0:
        raise QuantityError(f"half_width {_shown(value['half_width'])}", "a half width above 0")
    return Quantity(estimate, half_width / SHAPES[shape], shape)


def _plain(value: str | int | float) -> str:
    return str(value).strip().replace("\N{MINUS SIGN}", "-")


def _shown(value: object) -> str:
    text = "nothing" if value is None or value == "" else str(value)
    return text if len(text) <= 60 else text[:57] + "..."


def _advice(text: str) -> str:
    if "±" in text or "+-" in text or "+/-" in text:
        return "Write the standard uncertainty as 61.3(9) or {value: 61.3, u: 0.9}."
    if "," in text:
        return "Write a decimal point, and no separators between thousands."
    if "_" in text or ":" in text:
        return "Write plain digits."
    if "(" in text:
        return "In brackets belongs the standard uncertainty in the last digits, then a power of ten if any."
    if "%" in text:
        return "Write the number alone; the unit belongs at the end of the key."
    return ""


def rounded_text(estimate: float, u: float, digits: int = 2) -> tuple[str, int]:
    """Mantissa and power of ten of the shorthand: `("1.235(78)", 5)` for 123500 with u 7800.

    u is rounded to `digits` significant digits and the estimate to the same place, half to even, in decimal arithmetic
    on the shortest decimal of each number. The power is 0 from 0.001 on as long as the last digit stands at or
    after the unit. Where u is 0 the estimate is printed in full; where a number is missing the text is empty.
    """
    if not (math.isfinite(estimate) and math.isfinite(u)):
        return "", 0
    if u == 0.0:
        return _exact_text(estimate)
    value, uncertainty, place = _rounded_decimals(estimate, abs(u), digits)
    power = _power(value, uncertainty, place)
    figures = int(uncertainty.scaleb(-place, _EXACT))
    return f"{_fixed(value.scaleb(-power, _EXACT), power - place)}({figures})", power


def shorthand(estimate: float, u: float, digits: int = 2) -> str:
    """Estimate with its standard uncertainty in brackets, for print; see `rounded_text` for the rule.

    >>> shorthand(0.0123456, 0.000995), shorthand(123456.0, 7800.0), shorthand(-2.5, 0.0)
    ('0.0123(10)', '1.235(78)e5', '-2.5')
    """
    return _joined(*rounded_text(estimate, u, digits))


def rounded(estimate: float, u: float, digits: int = 2) -> tuple[str, str]:
    """Estimate and standard uncertainty as two texts, rounded together as `shorthand` rounds them.

    >>> rounded(123456.0, 7800.0), rounded(9.80665, 0.00042)
    (('1.235e5', '0.078e5'), ('9.80665', '0.00042'))
    """
    if not (math.isfinite(estimate) and math.isfinite(u)):
        return "", ""
    if u == 0.0:
        return _joined(*_exact_text(estimate)), "0"
    value, uncertainty, place = _rounded_decimals(estimate, abs(u), digits)
    power = _power(value, uncertainty, place)
    value_text, u_text = (_fixed(number.scaleb(-power, _EXACT), power - place) for number in (value, uncertainty))
    return _joined(value_text, power), _joined(u_text, power)


def _rounded_decimals(estimate: float, u: float, digits: int) -> tuple[Decimal, Decimal, int]:
    """Both numbers rounded, and the power of ten of their last digit."""
    exact = Decimal(repr(float(u)))
    place = exact.adjusted() - digits + 1
    uncertainty = exact.quantize(Decimal(1).scaleb(place), context=_EXACT)
    if uncertainty.adjusted() - place >= digits:  # 0.0995 became 0.100: one digit too many
        place += 1
        uncertainty = exact.quantize(Decimal(1).scaleb(place), context=_EXACT)
    return Decimal(repr(float(estimate))).quantize(Decimal(1).scaleb(place), context=_EXACT), uncertainty, place


def _power(value: Decimal, uncertainty: Decimal, place: int) -> int:
    leading = max(number.adjusted() for number in (value, uncertainty) if number)
    return 0 if place <= 0 and leading >= -3 else leading


def _fixed(number: Decimal, decimals: int) -> str:
    text = f"{number:.{max(decimals, 0)}f}"
    return text[1:] if text.startswith("-") and not number else text  # no minus before zero


def _exact_text(estimate: float) -> tuple[str, int]:
    number = Decimal(repr(float(estimate))).normalize(_EXACT)
    if not number:
        return "0", 0
    power = 0 if -4 < number.adjusted() < 16 else number.adjusted()
    return f"{number.scaleb(-power, _EXACT):f}", power


def _joined(mantissa: str, power: int) -> str:
    return f"{mantissa}e{power}" if power else mantissa
