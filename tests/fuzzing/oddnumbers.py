"""Texts in place of a number, and what each means by a grammar of its own, written without the program's patterns."""

from __future__ import annotations

import random
from decimal import Decimal

_DIGITS = frozenset("0123456789")

ODD = (
    "nan", "NaN", "inf", "-inf", "Infinity", "0x1F", "0b101", "0o17", "1_000", "1 000", "1\u00a0000", "1\u202f000",
    "1'000", "1,234", "1.234,5", "1,234.5", "1.234.567", "12,34,567", "1e400", "-1e400", "1e-400", "1e", "e5", "1e5.5",
    "1d5", "1f", "5L", "--5", "+-5", "5-", "\u20135", "\u22125.1", "\u20145", "- 5", "5 V", "5%", "1/2", "2*3", "=1+1",
    "=A1", "@5", "+5.0", "-5.0", "true", "yes", "1:30", "12:30:00", "2024-01-01", "", " ", "\u00a05.25", "5\u200b",
    "\uff15", "\u0665", "5\u0665", "1\u066b5", "\u00bd", "5\u0301", "\u2167", "5\u037e5", "(5)", "5(1)", "5.0(12)",
    "5.1(1)e2", "5 (1)", "5\u00b11", "5+-1", "$5", "None", "null", "~", "1e99999999999999999999", "9" * 400,
    "0." + "0" * 400 + "1", "1" * 3000 + "x", "1" * 5000, "5.", ".5", "+.5", ".", "-", "+", "00012.50", "5E+1", "5e-1",
    "1e+", "\ufeff5", "5\t", "5;5", "5\n", "0", "-0", "-0.0", "1e-320", "1.7976931348623157e308", "4.9e-324",
    "1(1)e" + "9" * 4500, "5.0(1)e-9999999999", "{value: 5}", "{value: 5, u: -1}", "{value: 5, u: 1, dof: 0}",
    "{value: nan}", "{value: 5, half_width: 1}", "{value: 5, u: 1e400}", "[5]", "[5, 6]", "'5.5'", '"5.5(2)"',
)  # fmt: skip


def drawn(chance: random.Random) -> str:
    """A number, well or badly written."""
    if chance.random() < 0.6:
        return chance.choice(ODD)
    digits = "".join(chance.choice("0123456789") for _ in range(chance.randint(1, 12)))
    at = chance.randint(0, len(digits))
    text = chance.choice(["", "", "-", "+"]) + digits[:at] + chance.choice(["", ".", "."]) + digits[at:]
    return text + chance.choice(["", "", "", f"e{chance.randint(-9, 9)}", f"E+{chance.randint(0, 3)}"])


def meaning(text: str, mark: str = ".") -> Decimal | None:
    """The number a text stands for: sign, digits, one decimal mark, power of ten; nothing else is one."""
    text = text.strip().replace("\u2212", "-")
    mantissa, power = text, ""
    for letter in "eE":
        if letter in text:
            mantissa, _, power = text.partition(letter)
            if not _signed(power):
                return None
            break
    bare = mantissa[1:] if mantissa[:1] in ("+", "-") else mantissa
    whole, found, fraction = bare.partition(mark)
    if not (whole or fraction) or not _DIGITS.issuperset(whole + fraction) or (found and mark in fraction):
        return None
    if len(power) > 12:
        return None
    return Decimal(f"{mantissa.replace(mark, '.')}e{power or 0}")


def _signed(power: str) -> bool:
    digits = power[1:] if power[:1] in ("+", "-") else power
    return bool(digits) and _DIGITS.issuperset(digits)


def shorthand(text: str) -> tuple[Decimal, Decimal] | None:
    """Estimate and standard uncertainty of `5.0(12)e3` or of a bare number."""
    text = text.strip()
    if text[:1] in ("'", '"') and text[-1:] == text[:1] and len(text) > 1:
        text = text[1:-1].strip()
    number = meaning(text)
    if number is not None:
        return number, Decimal(0)
    before, opened, rest = text.partition("(")
    inner, closed, after = rest.partition(")")
    if not (opened and closed) or "e" in before.lower() or inner[:1] in ("+", "-") or "e" in inner.lower():
        return None
    estimate, figures = meaning(before.removesuffix(" ")), meaning(inner)
    if (
        estimate is None
        or figures is None
        or before.endswith("  ")
        or before != before.lstrip()
        or inner != inner.strip()
    ):
        return None
    if after and (after[0] not in "eE" or not _signed(after[1:]) or len(after) > 12):
        return None
    scale = Decimal(10) ** int(after[1:]) if after and abs(int(after[1:])) < 1000 else (None if after else Decimal(1))
    if scale is None:
        return None
    decimals = len(before.strip().partition(".")[2])
    place = Decimal(1) if "." in inner else Decimal(10) ** -decimals
    return estimate * scale, figures * place * scale
