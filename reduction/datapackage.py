"""The data package of a results folder: every table with the type, unit and meaning of each of its columns.

Data Package and Table Schema, version 2.0 (Frictionless Data). What they have no word for has a property of our own:
`unit` of a column, `uncertaintyOf` for the column whose standard uncertainty it is, `run` for the digest of the run.
"""

from __future__ import annotations

import csv
from collections.abc import Iterable, Mapping
from pathlib import Path
from typing import Any

from reduction import columns
from reduction.checksums import file_sum
from reduction.resultfiles import kind_of
from reduction.tables import COLUMNS
from reduction.wholefile import write_json

FILE = "datapackage.json"
READINGS = "readings.schema.json"  # the columns of every readings/SESSION.csv, written down once
_PROFILE = "https://datapackage.org/profiles/2.0/"


def write_data_package(results: Path, made: Iterable[str], run: Mapping[str, Any], title: str) -> None:
    """Write the data package of a results folder.

    Parameters
    ----------
    results : Path
        The folder.
    made : iterable of str
        Paths of the files the run has made; those that are tables go in.
    run : mapping
        Content of run.json.
    title : str
        Title of the campaign.
    """
    write_json(
        results / READINGS, {"$schema": _PROFILE + "tableschema.json"} | columns.schema("readings", COLUMNS["readings"])
    )
    write_json(results / FILE, data_package(results, made, run, title))


def data_package(results: Path, made: Iterable[str], run: Mapping[str, Any], title: str) -> dict[str, Any]:
    """Content of datapackage.json; see `write_data_package`."""
    resources = [_resource(results, name) for name in made if name.endswith(".csv")]
    return {
        "$schema": _PROFILE + "datapackage.json",
        "name": "motescale-results",
        "title": title or "Results",
        "description": "Charge-to-mass ratio, mass and charge of single trapped particles, from laboratory logs.",
        "version": run["versions"]["motescale"],
        "run": run["digest"],
        "resources": resources,
    }


def _resource(results: Path, name: str) -> dict[str, Any]:
    kind = kind_of(name)
    folder, _, file = name.removesuffix(".csv").rpartition("/")
    path = results / name
    readings = folder == "readings"
    return {
        "name": f"{folder}-{file}" if folder else file,
        "path": name,
        "type": "table",
        "title": kind.about if kind else "",
        "format": "csv",
        "mediatype": "text/csv",
        "encoding": "utf-8",
        "bytes": path.stat().st_size,
        "hash": f"sha256:{file_sum(path)}",
        "schema": READINGS if readings else columns.schema(f"{folder}/{file}" if folder else file, _head(path)),
    }


def _head(path: Path) -> list[str]:
    with open(path, encoding="utf-8", newline="") as handle:
        return next(csv.reader(handle))
