"""What a session logged, told from the heads of its files, so that settings know what they need."""

from __future__ import annotations

import os
from dataclasses import dataclass
from pathlib import Path

from reduction.contract import READING_LOGS
from reduction.errors import Faults
from reduction.textfile import read_text

_GLANCE = 65_536  # [bytes]


@dataclass(frozen=True)
class Logged:
    """Logs that hold a row, and whether any holds dc voltages."""

    logs: tuple[str, ...]
    dc_voltage: bool


def logged_in(folder: Path) -> Logged:
    """Look for the logs of one session; a file with nothing below its head counts as absent, a damaged one as there."""
    logs, dc_voltage = [], False
    for log in READING_LOGS:
        path = folder / f"{log}.csv"
        if not os.path.lexists(path):
            continue
        name = f"sessions/{folder.name}/{log}.csv"
        text = read_text(path, name, faults=Faults(), limit=_GLANCE, lines=_GLANCE, head_only=True)
        rows = [line for line in text.lines if holds_text(line)] if text else []
        if text is None or len(rows) > 1:
            logs.append(log)
            dc_voltage |= log != "secular" or text is None or "dc_voltage" in rows[0]
    return Logged(tuple(logs), dc_voltage)


def holds_text(line: str) -> bool:
    """Whether a line is neither blank, nor a comment, nor separators alone, nor the line that names the separator."""
    plain = line.strip(' \t\ufeff\u00a0",;')
    return bool(plain) and not plain.startswith("#") and not plain.lower().startswith("sep=")
