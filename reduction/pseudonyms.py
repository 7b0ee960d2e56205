"""Names that tell nothing: a keyed hash of a person's entry in the register, for lists that others may see.

A plain hash of a short number is found by trying all numbers; with a key that only the staff have, it is not (HMAC,
RFC 2104). The key is in a file of its own beside the register and goes into nothing that is written.
"""

from __future__ import annotations

import hmac
import re
from collections.abc import Iterable, Mapping, Sequence
from pathlib import Path

from reduction.benchrows import KEY, REGISTER
from reduction.claims import RegisterRow
from reduction.errors import Faults

SHORTEST = 32  # hexadecimal digits, 128 bits
_LENGTH = 10  # letters of a pseudonym, 50 bits: two alike are not to be expected among a thousand
_LETTERS = "abcdefghijkmnpqrstuvwxyz23456789"  # 32 of them, none that is taken for another
_NO = frozenset(["", "no", "n", "0", "false"])
_WANTED = f"one line of {SHORTEST} or more hexadecimal digits"
_ADVICE = f'Make one: python3 -c "import secrets; print(secrets.token_hex(32))" > {KEY}'


def asks(row: RegisterRow) -> bool:
    """Whether a person asks to be listed under a pseudonym: anything in that column but `no`."""
    return row.pseudonym.strip().lower() not in _NO


def read_key(folder: Path, register: Iterable[RegisterRow], *, faults: Faults) -> bytes:
    """Key of the campaign in `folder`; empty where nobody asks for a pseudonym, or where it is not to be used.

    A key that is missing or too short is a fault if anyone in the register asks for a pseudonym.
    """
    asking = [row for row in register if asks(row)]
    if not asking:
        return b""
    path = Path(folder) / KEY
    try:
        lines = path.read_text(encoding="ascii").splitlines()
    except FileNotFoundError:
        found = f"{REGISTER} line {asking[0].line} asks for a pseudonym, and there is no key"
        faults.add(KEY, found=found, expected="a key that only the staff have", advice=_ADVICE)
        return b""
    except (OSError, UnicodeDecodeError):
        faults.add(KEY, found="a file that cannot be read as text", expected=_WANTED, advice=_ADVICE)
        return b""
    held = [(at, line.strip()) for at, line in enumerate(lines, 1) if line.strip() and not line.startswith("#")]
    if len(held) != 1 or not re.fullmatch(r"[0-9a-fA-F]+", held[0][1]) or len(held[0][1]) < SHORTEST:
        faults.add(KEY, found="something else", expected=_WANTED, advice=_ADVICE)  # the key itself is never shown
        return b""
    return held[0][1].lower().encode()


def pseudonym(key: bytes, row: RegisterRow) -> str:
    """Pseudonym of one person: the first letters of HMAC-SHA-256 of the id number, else of email, else of the name.

    The same key and person give the same pseudonym in every campaign, whatever the bench.

    Source: RFC 2104 (HMAC), FIPS 180-4 (SHA-256).
    """
    for kind, entry in (("id_number", row.id_number), ("email", row.email.casefold()), ("name", row.name)):
        if entry.strip():
            total = hmac.new(key, f"{kind}\n{entry.strip()}".encode(), "sha256").digest()
            bits = int.from_bytes(total, "big")
            letters = "".join(_LETTERS[bits >> (5 * place) & 31] for place in range(_LENGTH))
            return f"{letters[:5]}-{letters[5:]}"
    return ""


def listed(key: bytes, register: Mapping[str, Sequence[RegisterRow]]) -> list[tuple[str, str, str]]:
    """Session, name and pseudonym of everyone who asks for one, in the order of the sessions and the register."""
    return [
        (session, row.name, pseudonym(key, row))
        for session, rows in sorted(register.items())
        for row in rows
        if key and asks(row)
    ]
