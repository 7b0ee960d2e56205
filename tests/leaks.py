"""All that can be read out of a PDF: its text, its metadata, its alternative texts, its streams laid open."""

from __future__ import annotations

import re
import subprocess
import zlib
from collections.abc import Iterable, Iterator
from pathlib import Path

from reduction.typeset import MINUS

_STREAM = re.compile(rb"stream\r?\n(.*?)\r?\nendstream", re.DOTALL)
_WIDE = re.compile(rb"\xfe\xff(?:[^()\\]|\\.)*", re.DOTALL)
_HEX = re.compile(rb"<(feff[0-9a-f\s]+)>", re.IGNORECASE)


def opened(pdf: Path) -> Iterator[bytes]:
    """The file itself and every stream of it that is packed, unpacked."""
    raw = pdf.read_bytes()
    yield raw
    for packed in _STREAM.findall(raw):
        try:
            yield zlib.decompress(packed)
        except zlib.error:
            continue


def _strings(data: bytes) -> Iterator[str]:
    """Strings of a PDF in two bytes a letter, as alternative texts and titles may be written."""
    for found in _WIDE.findall(data):
        bare = re.sub(rb"\\(.)", rb"\1", found, flags=re.DOTALL)
        yield bare[2:].decode("utf-16-be", errors="replace")
    for found in _HEX.findall(data):
        yield bytes.fromhex(found.decode())[2:].decode("utf-16-be", errors="replace")


def read_text(pdf: Path) -> str:
    """Text a reader sees or hears, and the metadata: pages, alternative texts, titles."""
    said = [subprocess.run(["pdftotext", "-layout", str(pdf), "-"], capture_output=True, check=True).stdout.decode()]
    said.append(subprocess.run(["pdfinfo", str(pdf)], capture_output=True, check=True).stdout.decode())
    for data in opened(pdf):
        said += _strings(data)
        said += [
            one.decode("latin-1") for one in re.findall(rb"/(?:Alt|Title|ActualText) ?\(((?:[^()\\]|\\.)*)\)", data)
        ]
    return "\n".join(said).replace("\u200b", "").replace("\u202f", " ").replace(MINUS, "-")


def all_bytes(pdf: Path) -> bytes:
    """The file and its unpacked streams in one piece."""
    return b"\n".join(opened(pdf))


def roundings(value: float, least: int = 3, most: int = 8) -> set[str]:
    """Digits of a number rounded to `least` and more significant digits, as they stand in any power of ten."""
    found = set()
    for digits in range(least, most + 1):
        mantissa = f"{abs(value):.{digits - 1}e}".partition("e")[0].replace(".", "")
        found.add(mantissa)
    return found


def digit_runs(text: str) -> set[str]:
    """Digits of every number in a text, its decimal point and leading zeros taken out."""
    numbers = re.findall(r"\d+(?:\.\d+)?", text)
    return {number.replace(".", "").lstrip("0") for number in numbers}


def told(values: Iterable[float], text: str, own: Iterable[str] = ()) -> dict[float, set[str]]:
    """Which values stand in a text in any rounding to three digits or more; `own` are numbers that may."""
    runs = digit_runs(text) - set(own)
    return {value: hits for value in values if value and (hits := runs & roundings(value))}
