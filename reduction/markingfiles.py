"""What a marked campaign brings besides its logs, all of it read and checked at once."""

from __future__ import annotations

from collections.abc import Collection, Mapping
from dataclasses import dataclass
from pathlib import Path

from reduction.benchrows import CLAIMS, FILES, OVERRIDES, REGISTER, SCHEME, is_marked
from reduction.claims import BenchFaults, Claim, Override, RegisterRow, read_claims, read_overrides, read_register
from reduction.errors import Fault, Faults
from reduction.markscheme import Criterion, Scheme, read_scheme

__all__ = [
    "CLAIMS",
    "FILES",
    "OVERRIDES",
    "REGISTER",
    "SCHEME",
    "Claim",
    "Criterion",
    "MarkingFiles",
    "Override",
    "RegisterRow",
    "Scheme",
    "is_marked",
    "read_marking",
    "read_scheme",
]


@dataclass(frozen=True)
class MarkingFiles:
    """Everything under marking/ and the claims in the sessions' folders."""

    scheme: Scheme
    claims: Mapping[str, tuple[Claim, ...]]  # by session
    register: Mapping[str, tuple[RegisterRow, ...]]  # by session, empty where there is no register
    overrides: Mapping[str, tuple[Override, ...]]  # by session
    faulty: Mapping[str, tuple[Fault, ...]]  # by bench, or by a name that is none; not marked until mended


def read_marking(
    folder: Path | str,
    sessions: Mapping[str, Collection[str] | None],
    *,
    faults: Faults,
    leave_out: bool = False,
) -> MarkingFiles | None:
    """Read scheme, claims, register and overrides of a campaign; None where it is not marked or the scheme has faults.

    Parameters
    ----------
    folder : Path
        The campaign.
    sessions : mapping
        Sessions that are reduced, each with the particles of its logs, or None where those are not known.
    faults : Faults
        Collector of what stops the run: faults of the scheme and of whole files, and without `leave_out` every fault.
    leave_out : bool
        With it the faults of one bench stand in `MarkingFiles.faulty` and stop nobody else's marks.
    """
    folder = Path(folder)
    if not is_marked(folder):
        there = [name for name in FILES if (folder / name).exists()]
        if there:
            faults.add(SCHEME, found=f"no such file, but {there[0]}", expected="a scheme", advice="Add the scheme.")
        return None
    scheme = read_scheme(folder, faults=faults)
    found = BenchFaults()
    try:
        benches = {path.name for path in (folder / "sessions").iterdir() if path.is_dir()}
    except OSError:
        benches = set()
    claims = read_claims(folder, sessions, benches, found)
    register = read_register(folder, sessions, benches, found)
    overrides = read_overrides(folder, sessions, benches, scheme, found) if scheme else {}
    faulty = found.all()
    for bench, listed in faulty.items():
        if not leave_out or not bench:
            faults.extend(listed)
    if scheme is None:
        return None
    return MarkingFiles(scheme, claims, register or {}, overrides, {b: listed for b, listed in faulty.items() if b})
