"""Pseudonyms: the keyed hash as published, a key that is asked for where it is needed, and never shown."""

from __future__ import annotations

import hashlib
from pathlib import Path

import pytest

from reduction.benchrows import KEY
from reduction.claims import RegisterRow
from reduction.errors import Faults
from reduction.pseudonyms import asks, listed, pseudonym, read_key

KEY_TEXT = "0f" * 32


def person(name: str = "Ruta Invented", *, email: str = "", number: str = "", pseudonym: str = "yes", line: int = 2):
    return RegisterRow("b1", name, email, number, pseudonym, line)


def keyed(folder: Path, text: str | None) -> tuple[bytes, list[str]]:
    path = folder / KEY
    path.parent.mkdir(exist_ok=True)
    if text is not None:
        path.write_text(text, encoding="utf-8")
    faults = Faults()
    return read_key(folder, [person(line=7)], faults=faults), [str(one) for one in faults]


def by_hand(key: bytes, message: bytes) -> bytes:
    """HMAC-SHA-256 spelled out as RFC 2104 has it: H(K xor opad, H(K xor ipad, text)), block of 64 bytes."""
    block = key.ljust(64, b"\0")
    inner = hashlib.sha256(bytes(one ^ 0x36 for one in block) + message).digest()
    return hashlib.sha256(bytes(one ^ 0x5C for one in block) + inner).digest()


def test_a_pseudonym_is_the_keyed_hash_of_the_id_number() -> None:
    key = KEY_TEXT[:64].encode()
    bits = int.from_bytes(by_hand(key, b"id_number\n4711"), "big")
    letters = "".join("abcdefghijkmnpqrstuvwxyz23456789"[bits >> 5 * k & 31] for k in range(10))
    assert pseudonym(key, person(number="4711", email="r@x.example")) == f"{letters[:5]}-{letters[5:]}"


def test_the_same_person_has_the_same_pseudonym_at_every_bench_and_another_key_gives_another() -> None:
    one = person(number="4711")
    other = RegisterRow("b9", "R. Invented", "new@x.example", "4711", "please", 30)
    assert pseudonym(b"k" * 32, one) == pseudonym(b"k" * 32, other)
    assert pseudonym(b"k" * 32, one) != pseudonym(b"m" * 32, one)
    assert pseudonym(b"k" * 32, one) != pseudonym(b"k" * 32, person(number="4712"))


def test_email_then_name_stand_in_for_a_missing_number() -> None:
    assert pseudonym(b"k" * 32, person(email="R@x.example")) == pseudonym(b"k" * 32, person("X", email="r@x.example"))
    assert pseudonym(b"k" * 32, person("A")) != pseudonym(b"k" * 32, person("B"))


@pytest.mark.parametrize(
    ("said", "wanted"), [("", False), ("no", False), (" No ", False), ("yes", True), ("kite", True)]
)
def test_anything_but_no_asks_for_one(said: str, wanted: bool) -> None:
    assert asks(person(pseudonym=said)) is wanted


def test_a_good_key_is_read_whatever_its_case_and_comments(tmp_path: Path) -> None:
    assert keyed(tmp_path, f"# staff only\n{KEY_TEXT.upper()}\n") == (KEY_TEXT.encode(), [])


def test_a_missing_key_is_a_fault_that_says_how_to_make_one(tmp_path: Path) -> None:
    key, faults = keyed(tmp_path, None)
    assert key == b""
    assert len(faults) == 1
    assert faults[0].startswith(f"{KEY}: found marking/register.csv line 7 asks for a pseudonym, and there is no key;")
    assert "secrets.token_hex(32)" in faults[0]


@pytest.mark.parametrize("text", ["", "abc123\n", "not a key at all, but long enough to be one\n", f"{KEY_TEXT}\n" * 2])
def test_a_poor_key_is_a_fault_that_does_not_show_it(text: str, tmp_path: Path) -> None:
    key, faults = keyed(tmp_path, text)
    assert key == b""
    assert len(faults) == 1
    assert "expected one line of 32 or more hexadecimal digits" in faults[0]
    assert not text.strip() or text.split()[0] not in faults[0].replace("not ", "")


def test_no_key_is_asked_for_where_nobody_asks_for_a_pseudonym(tmp_path: Path) -> None:
    faults = Faults()
    assert read_key(tmp_path, [person(pseudonym="")], faults=faults) == b""
    assert len(faults) == 0


def test_only_those_who_ask_are_listed() -> None:
    register = {"b2": [person("B", number="2")], "b1": [person("A", number="1", pseudonym=""), person("C", number="3")]}
    rows = listed(b"k" * 32, register)
    assert [(session, name) for session, name, _ in rows] == [("b1", "C"), ("b2", "B")]
    assert len({alias for *_, alias in rows}) == 2
