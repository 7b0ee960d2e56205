"""Who has which pseudonym, for the staff, and the marks by pseudonym, fit to be posted."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from pathlib import Path

from reduction.claims import RegisterRow
from reduction.markrecord import BenchMarks
from reduction.pseudonyms import listed
from reduction.tables import write_table

PEOPLE = ("session", "name", "pseudonym")
POSTED = ("pseudonym", "marks", "total")


def write_lists(
    folder: Path, key: bytes, register: Mapping[str, Sequence[RegisterRow]], benches: Mapping[str, BenchMarks]
) -> None:
    """Write who has which pseudonym, for the staff, and a list of marks by pseudonym that may be shown.

    Only those who ask for a pseudonym are on either. The list to be shown is in the order of the pseudonyms, which
    tells nothing of benches or names; a bench that is not marked has an empty cell.

    Parameters
    ----------
    folder : Path
        results/marking/staff.
    key : bytes
        Of the campaign; empty where nobody asks.
    register : mapping
        Session to its people.
    benches : mapping
        Session to its marks.
    """
    people = listed(key, register)
    rows = [dict(zip(PEOPLE, person, strict=True)) for person in people]
    write_table(folder / "pseudonyms.csv", PEOPLE, rows)
    posted = sorted((alias, session) for session, _, alias in people if session in benches)
    shown = [dict(zip(POSTED, (alias, benches[one].marks, benches[one].total), strict=True)) for alias, one in posted]
    write_table(folder / "posted_marks.csv", POSTED, shown)
