"""The research object of a results folder: files, inputs, program and the run that ties them together.

RO-Crate 1.1; profiles Workflow Run Crate 0.5, Process Run Crate 0.5 and Workflow RO-Crate 1.0. Start, end, user and
machine of the run, which the profiles recommend, are left out: the same inputs give the same bytes. `datePublished`,
which every crate must have, is the day of the newest session.
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from pathlib import Path
from typing import Any

from reduction.checksums import file_sum
from reduction.resultfiles import PROGRAM, kind_of
from reduction.wholefile import json_text, write_json

FILE = "ro-crate-metadata.json"
_SPECIFICATION = "https://w3id.org/ro/crate/1.1"
_PROFILES = {
    "https://w3id.org/ro/wfrun/process/0.5": ("Process Run Crate", "0.5"),
    "https://w3id.org/ro/wfrun/workflow/0.5": ("Workflow Run Crate", "0.5"),
    "https://w3id.org/workflowhub/workflow-ro-crate/1.0": ("Workflow RO-Crate", "1.0"),
}
_SHA256 = "https://w3id.org/ro/terms/workflow-run#sha256"
_WORKFLOW = f"{PROGRAM}/Snakefile"
_UNDATED = "1970-01-01"  # day put where no session has one that can be read
_LICENSE = "#licence"
_HOMES = {
    "lmfit": "https://lmfit.github.io/lmfit-py/",
    "matplotlib": "https://matplotlib.org/",
    "numpy": "https://numpy.org/",
    "pandas": "https://pandas.pydata.org/",
    "python": "https://www.python.org/",
    "pyyaml": "https://pyyaml.org/",
    "scipy": "https://scipy.org/",
    "typst": "https://typst.app/",
    "uncertainties": "https://uncertainties.readthedocs.io/",
}
"""Python and the libraries whose versions run.json states, by their home pages."""

Entity = dict[str, Any]


def write_crate(results: Path, made: Iterable[str], run: Mapping[str, Any], title: str) -> None:
    """Write the research object of a results folder; see `crate`."""
    write_json(results / FILE, crate(results, made, run, title))


def crate(results: Path, made: Iterable[str], run: Mapping[str, Any], title: str) -> dict[str, Any]:
    """Content of ro-crate-metadata.json.

    Parameters
    ----------
    results : Path
        The folder.
    made : iterable of str
        Paths of the files the run has made.
    run : mapping
        Content of run.json.
    title : str
        Title of the campaign.
    """
    files = [_file(results, name) for name in made if name != FILE]
    outputs = [file["@id"] for file in files if not file["@id"].startswith(f"{PROGRAM}/")]
    inputs = [_input(name, digest) for name, digest in sorted(run["inputs"].items())]
    settings = [_setting(name, value) for name, value in sorted(run["settings"].items())]
    parameters = _parameters(inputs, settings, outputs)
    newest = max((str(one["date"])[:10] for one in run["sessions"].values() if one.get("date")), default="")
    root = {
        "@id": "./",
        "@type": "Dataset",
        "name": title or "Results of Motescale",
        "description": _description(run, newest),
        "datePublished": newest or _UNDATED,
        "license": _one(_LICENSE),
        "identifier": f"sha256:{run['digest']}",
        "conformsTo": _all(_PROFILES),
        "hasPart": _all(file["@id"] for file in files),
        "mainEntity": _one(_WORKFLOW),
        "mentions": [_one("#run"), _one("#campaign")],
        "exampleOfWork": _one("#parameter/results"),
    }
    graph = [
        {
            "@id": FILE,
            "@type": "CreativeWork",
            "about": _one("./"),
            "conformsTo": [_one(_SPECIFICATION), _one(list(_PROFILES)[2])],
        },
        root,
        *(_workflow(file, run, parameters) if file["@id"] == _WORKFLOW else file for file in files),
        *_context(run),
        *parameters,
        _campaign(inputs),
        *inputs,
        *settings,
        _run(run, [one["@id"] for one in (*inputs, *settings)], outputs),
    ]
    return {"@context": [f"{_SPECIFICATION}/context", {"sha256": _SHA256}], "@graph": graph}


def _one(name: str) -> Entity:
    return {"@id": name}


def _all(names: Iterable[str]) -> list[Entity]:
    return [_one(name) for name in names]


def _description(run: Mapping[str, Any], newest: str) -> str:
    day = "the day of the newest session" if newest else "put where no session has a date"
    return (
        "Charge-to-mass ratio, mass and charge of single trapped particles, reduced from laboratory logs: "
        f"{len(run['sessions'])} sessions. datePublished is {day}; no clock was read, so that the same logs give the "
        "same files."
    )


def _file(results: Path, name: str) -> Entity:
    kind = kind_of(name)
    path = results / name
    return {
        "@id": name,
        "@type": "File",
        "name": name,
        "description": kind.about if kind else "",
        "encodingFormat": kind.media if kind else "application/octet-stream",
        "contentSize": str(path.stat().st_size),
        "sha256": file_sum(path),
    }


def _input(name: str, digest: str) -> Entity:
    """Input file: it lies in the campaign's folder and not in the crate, and is told by its digest."""
    return {
        "@id": f"#campaign/{name}",
        "@type": "CreativeWork",
        "name": name,
        "description": "Input file, in the campaign's folder.",
        "sha256": digest,
    }


def _setting(name: str, value: object) -> Entity:
    text = (
        value if isinstance(value, str) else json_text({name: value}).strip() if isinstance(value, dict) else str(value)
    )
    return {
        "@id": f"#setting/{name}",
        "@type": "PropertyValue",
        "name": name,
        "value": text,
        "exampleOfWork": _one(f"#parameter/{name}"),
    }


def _parameters(inputs: list[Entity], settings: list[Entity], outputs: list[str]) -> list[Entity]:
    """Formal parameters of the workflow: the campaign and its settings in, the results out."""
    found = [_parameter("campaign", "Collection", "#campaign")]
    found += [_parameter(str(one["name"]), "PropertyValue", one["@id"]) for one in settings]
    return [*found, _parameter("results", "Dataset", "./")]


def _parameter(name: str, kind: str, example: str) -> Entity:
    return {
        "@id": f"#parameter/{name}",
        "@type": "FormalParameter",
        "conformsTo": _one("https://bioschemas.org/profiles/FormalParameter/1.0-RELEASE"),
        "name": name,
        "additionalType": kind,
        "workExample": _one(example),
    }


def _workflow(file: Entity, run: Mapping[str, Any], parameters: list[Entity]) -> Entity:
    names = [one["@id"] for one in parameters]
    return {
        **file,
        "@type": ["File", "SoftwareSourceCode", "ComputationalWorkflow"],
        "conformsTo": _one("https://bioschemas.org/profiles/ComputationalWorkflow/1.0-RELEASE"),
        "name": "Motescale",
        "description": "From the logs of a campaign to its tables and reports.",
        "version": run["versions"]["motescale"],
        "programmingLanguage": _one("#snakemake"),
        "softwareRequirements": _all(_HOMES[name] for name in sorted(_HOMES) if name in run["versions"]),
        "license": _one("https://spdx.org/licenses/BSD-3-Clause"),
        "input": _all(names[:-1]),
        "output": _one(names[-1]),
    }


def _context(run: Mapping[str, Any]) -> list[Entity]:
    """Profiles, language, licences and libraries the other entities refer to."""
    found: list[Entity] = [
        {"@id": name, "@type": "CreativeWork", "name": words[0], "version": words[1]}
        for name, words in _PROFILES.items()
    ]
    found += [
        {
            "@id": "#snakemake",
            "@type": "ComputerLanguage",
            "name": "Snakemake",
            "identifier": _one("https://doi.org/10.1093/bioinformatics/bts480"),
            "url": _one("https://snakemake.github.io"),
        },
        {
            "@id": _LICENSE,
            "@type": "CreativeWork",
            "name": "No licence stated",
            "description": "Nothing is stated on how these results may be used. Ask those who measured them.",
        },
        {
            "@id": "https://spdx.org/licenses/BSD-3-Clause",
            "@type": "CreativeWork",
            "name": "BSD-3-Clause",
            "description": "Licence of the program, not of the results.",
        },
    ]
    found += [
        {"@id": home, "@type": "SoftwareApplication", "name": name, "url": _one(home), "softwareVersion": version}
        for name, home in sorted(_HOMES.items())
        if (version := run["versions"].get(name))
    ]
    return found


def _campaign(inputs: list[Entity]) -> Entity:
    return {
        "@id": "#campaign",
        "@type": "Collection",
        "name": "Campaign",
        "description": "The input files, each told by its SHA-256; they are not part of the results.",
        "hasPart": _all(one["@id"] for one in inputs),
        "mainEntity": _one("#campaign/campaign.yaml"),
        "exampleOfWork": _one("#parameter/campaign"),
    }


def _run(run: Mapping[str, Any], objects: list[str], outputs: list[str]) -> Entity:
    left = len(run["left_out"])
    return {
        "@id": "#run",
        "@type": "CreateAction",
        "name": "Run of Motescale",
        "description": f"{len(run['sessions'])} sessions"
        + (f", {left} left out for reasons given in run.json." if left else "."),
        "identifier": f"sha256:{run['digest']}",
        "instrument": _one(_WORKFLOW),
        "object": _all(["#campaign", *objects]),
        "result": _all(["./", *outputs]),
        "actionStatus": "http://schema.org/CompletedActionStatus",
    }
