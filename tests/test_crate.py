"""The research object beside the results: valid by the validator of its makers, complete, nothing personal.

Asked are `roc-validator`, which holds the shapes of RO-Crate 1.1 and of the profiles Workflow Run Crate 0.5, Process
Run Crate 0.5 and Workflow RO-Crate 1.0, and `rocrate`, which reads crates. No server is asked: the JSON-LD context is
the one `rocrate` brings (that of RO-Crate 1.3) with the four terms that RO-Crate 1.1 had under other addresses
(https://www.researchobject.org/ro-crate/specification/1.1/context.jsonld).
"""

from __future__ import annotations

import hashlib
import json
import os
import shutil
import warnings
from pathlib import Path
from typing import Any

import pytest

from reduction.crate import FILE, crate
from reduction.resultfiles import SUMS, every_file

rocrate = pytest.importorskip("rocrate.rocrate", reason="rocrate, of the extra `test`, is not installed")
pytest.importorskip("rocrate_validator", reason="roc-validator, of the extra `test`, is not installed")

_BIOSCHEMAS = "https://bioschemas.org/"
TERMS_OF_1_1 = {
    "ComputationalWorkflow": f"{_BIOSCHEMAS}ComputationalWorkflow",
    "FormalParameter": f"{_BIOSCHEMAS}FormalParameter",
    "input": f"{_BIOSCHEMAS}ComputationalWorkflow#input",
    "output": f"{_BIOSCHEMAS}ComputationalWorkflow#output",
}
NOT_STATED = {  # recommended, and left out
    "endTime", "agent", "author", "publisher", "README",  # not known, or not to be told
    "Application SHOULD have a url", "SoftwareApplication id",  # the workflow lies in the crate and has no address
}  # fmt: skip


@pytest.fixture
def offline(monkeypatch: pytest.MonkeyPatch) -> None:
    """Answer the validator's requests from what is installed."""
    import requests
    from rocrate_validator.utils.http import HttpRequester

    context = json.loads((Path(rocrate.__file__).parent / "data" / "ro-crate.jsonld").read_text())
    context["@context"] |= TERMS_OF_1_1

    def get(self: object, url: str, **_: object) -> requests.Response:
        found = requests.Response()
        found.url, found.status_code = url, 200 if url == "https://w3id.org/ro/crate/1.1/context" else 404
        found.headers["Content-Type"] = "application/ld+json"
        found._content = json.dumps(context).encode()
        return found

    monkeypatch.setattr(HttpRequester, "get", get, raising=False)


@pytest.fixture
def plain(finished_run: tuple[Path, Path], tmp_path: Path) -> Path:
    """A copy of the results where the path has no space, which the validator itself cannot read."""
    return shutil.copytree(finished_run[1], tmp_path / "results")


def issues(results: Path, severity: str = "REQUIRED") -> list[str]:
    """What the validator finds wrong."""
    from rocrate_validator import services

    with warnings.catch_warnings():
        warnings.simplefilter("ignore")  # of the libraries among themselves
        settings = services.ValidationSettings(
            rocrate_uri=str(results),
            profile_identifier="workflow-run-crate",
            requirement_severity=severity,
            offline=True,
        )
        return [f"{one.check.identifier}: {one.message}" for one in services.validate(settings).get_issues()]


def graph(results: Path) -> dict[str, dict[str, Any]]:
    """Entities of the crate by their ids."""
    return {one["@id"]: one for one in json.loads((results / FILE).read_text())["@graph"]}


@pytest.mark.usefixtures("offline")
def test_crate_is_valid_by_the_validator(plain: Path) -> None:
    assert issues(plain) == []
    left = [one for one in issues(plain, "RECOMMENDED") if not any(word in one for word in NOT_STATED)]
    assert left == []


@pytest.mark.usefixtures("offline")
@pytest.mark.parametrize(("entity", "key"), [("#run", "instrument"), ("./", "datePublished")])
def test_validator_misses_what_is_taken_away(plain: Path, entity: str, key: str) -> None:
    content = json.loads((plain / FILE).read_text())
    for one in content["@graph"]:
        if one["@id"] == entity:
            del one[key]
    (plain / FILE).write_text(json.dumps(content))
    assert issues(plain) != []


def test_crate_names_every_file_with_size_and_digest(finished_run: tuple[Path, Path]) -> None:
    results = finished_run[1]
    entities = graph(results)
    names = [name for name in every_file(results) if name not in (FILE, SUMS)]
    assert sorted(one["@id"] for one in entities["./"]["hasPart"]) == names
    for name in names:
        data = (results / name).read_bytes()
        assert entities[name]["sha256"] == hashlib.sha256(data).hexdigest()
        assert entities[name]["contentSize"] == str(len(data))
        assert entities[name]["description"]


def test_run_ties_inputs_and_settings_to_results(finished_run: tuple[Path, Path]) -> None:
    campaign, results = finished_run
    entities = graph(results)
    run = json.loads((results / "run.json").read_text())
    objects = {one["@id"] for one in entities["#run"]["object"]}
    assert objects >= {f"#campaign/{name}" for name in run["inputs"]}
    assert objects >= {f"#setting/{name}" for name in run["settings"]}
    for name, digest in run["inputs"].items():
        assert entities[f"#campaign/{name}"]["sha256"] == digest
        assert digest == hashlib.sha256((campaign / name).read_bytes()).hexdigest()
    assert {"@id": "particles.csv"} in entities["#run"]["result"]
    assert entities["#run"]["instrument"] == {"@id": "program/Snakefile"}


def test_crate_states_no_time_place_or_person(finished_run: tuple[Path, Path]) -> None:
    campaign, results = finished_run
    text = (results / FILE).read_text()
    machine = os.uname().nodename if len(os.uname().nodename) > 3 else "/tmp/"
    for word in ("startTime", "endTime", "agent", "author", str(campaign), str(results.parent), machine):
        assert word not in text
    newest = max(
        line.split()[1]
        for path in (campaign / "sessions").glob("*/session.yaml")
        for line in path.read_text().splitlines()
        if line.startswith("date:")
    )
    assert graph(results)["./"]["datePublished"] == newest.strip("'\"")[:10]


def test_crate_without_dates_says_so(finished_run: tuple[Path, Path]) -> None:
    run = json.loads((finished_run[1] / "run.json").read_text())
    for session in run["sessions"].values():
        session["date"] = ""
    root = crate(finished_run[1], ["program/Snakefile"], run, "")["@graph"][1]
    assert root["datePublished"] == "1970-01-01"
    assert "put where no session has a date" in root["description"]


def test_library_reads_the_crate(finished_run: tuple[Path, Path]) -> None:
    read = rocrate.ROCrate(str(finished_run[1]))
    assert read.mainEntity.id == "program/Snakefile"
    assert read.dereference("particles.csv") is not None
