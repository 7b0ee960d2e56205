"""Files that are there whole or not at all: written under a name beside, flushed to disk, renamed."""

from __future__ import annotations

import json
import os
import secrets
from collections.abc import Iterator, Mapping
from contextlib import contextmanager, suppress
from pathlib import Path
from typing import IO, Any


def part_of(path: Path) -> Path:
    """Name beside a file or folder to make it under: no two writers, on one machine or on several, share it."""
    return path.with_name(f".{path.name}.{secrets.token_hex(4)}.part")


@contextmanager
def whole_file(path: Path | str) -> Iterator[IO[bytes]]:
    """Open a file to write that appears under its name only once it is complete and on the disk."""
    path = Path(path)
    part = part_of(path)
    try:
        with open(part, "wb") as handle:
            yield handle
            handle.flush()
            os.fsync(handle.fileno())
        os.replace(part, path)
    except BaseException:
        with suppress(OSError):
            part.unlink(missing_ok=True)
        raise


def write_whole(path: Path | str, data: bytes) -> None:
    """Write a file from its bytes."""
    with whole_file(path) as handle:
        handle.write(data)


def json_text(value: Mapping[str, Any]) -> str:
    """JSON text with sorted keys; NaN and infinities are refused, so that any reader can read it."""
    return json.dumps(value, sort_keys=True, indent=1, ensure_ascii=False, allow_nan=False) + "\n"


def write_json(path: Path | str, value: Mapping[str, Any]) -> None:
    """Write a JSON object."""
    write_whole(path, json_text(value).encode())


def read_json(path: Path | str) -> dict[str, Any]:
    """Read a JSON object."""
    with open(path, encoding="utf-8") as handle:
        return dict(json.load(handle))
