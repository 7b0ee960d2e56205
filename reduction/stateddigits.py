"""The digits of a number as it was written: where its last one stands, and whether a value and its U go together."""

from __future__ import annotations

from dataclasses import dataclass
from decimal import Decimal


@dataclass(frozen=True)
class Stated:
    """A decimal number as written.

    The last digit that counts stands at 10^`place`; zeros at the end of a whole number may count or not, so that it
    stands anywhere from `place` to `highest`.
    """

    number: Decimal
    place: int
    highest: int

    def digits(self, place: int) -> int:
        """Significant digits where the last one stands at 10^place; 0 for zero."""
        return self.number.adjusted() - place + 1 if self.number else 0


def stated(text: str) -> Stated:
    """Read a plain decimal number, with a point and perhaps a power of ten.

    >>> stated("2.30e-3").place, stated("1200").place, stated("1200").highest
    (-5, 0, 2)
    """
    number = Decimal(text)
    exponent = int(number.as_tuple().exponent)
    mantissa = text.lower().partition("e")[0].lstrip("+-")
    zeros = len(mantissa) - len(mantissa.rstrip("0")) if "." not in mantissa and number else 0
    return Stated(number, exponent, exponent + zeros)


def last_digit(value: str, uncertainty: str) -> int:
    """Power of ten of the last digit of a value; zeros that may count or not do as the uncertainty's digits say."""
    own = stated(value)
    if not uncertainty:
        return own.place
    other = stated(uncertainty)
    return max(own.place, min(own.highest, other.highest))


def rounded_together(value: str, uncertainty: str) -> tuple[bool, bool]:
    """Whether the last digits of value and uncertainty stand at one place, and whether the latter has one or two.

    One or two digits of the uncertainty, and the value to the same place: JCGM 100:2008 (GUM), 7.2.6.

    >>> rounded_together("2.31e-3", "0.05e-3"), rounded_together("2.3123", "0.05"), rounded_together("2.312", "0.051")
    ((True, True), (False, True), (True, True))
    """
    one, other = stated(value), stated(uncertainty)
    few = any(1 <= other.digits(place) <= 2 for place in range(other.place, other.highest + 1))
    places = [
        place
        for place in range(max(one.place, other.place), min(one.highest, other.highest) + 1)
        if not few or 1 <= other.digits(place) <= 2
    ]
    return bool(places), few
