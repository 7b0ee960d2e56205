"""The files of the last step: definition of the workflow, data package, research object, checksums of everything."""

from __future__ import annotations

from collections.abc import Mapping
from pathlib import Path
from typing import Any

from reduction import places
from reduction.checksums import marking_files, write_sums
from reduction.crate import write_crate
from reduction.datapackage import write_data_package
from reduction.resultfiles import MARKING, PROGRAM, SUMS, made_files
from reduction.wholefile import write_whole


def write_provenance(results: Path, run: Mapping[str, Any], title: str) -> int:
    """Write what tells how the results came about, and the checksums of all files of the run.

    Parameters
    ----------
    results : Path
        A results folder in which all else is finished.
    run : mapping
        Content of run.json.
    title : str
        Title of the campaign.

    Returns
    -------
    int
        Number of files with a checksum.
    """
    sessions = list(run["sessions"])
    definition = {f"{PROGRAM}/{name}": path for name, path in places.definition()}
    for name in made_files(results, sessions):
        if name.startswith(f"{PROGRAM}/") and name not in definition:
            (results / name).unlink()  # of an earlier version
    for name, path in definition.items():
        (results / name).parent.mkdir(parents=True, exist_ok=True)
        write_whole(results / name, path.read_bytes())
    write_data_package(results, made_files(results, sessions), run, title)
    write_crate(results, made_files(results, sessions), run, title)
    made = made_files(results, sessions)
    write_sums(results, made)
    own = marking_files(results)
    if own:
        write_sums(results / MARKING, own)
    else:
        (results / MARKING / SUMS).unlink(missing_ok=True)
    return len(made) + len(own)
