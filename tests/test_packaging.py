"""The package: locks, licence, what README promises, and a wheel that brings the workflow along."""

from __future__ import annotations

import hashlib
import json
import os
import re
import subprocess
import sys
import tomllib
import zipfile
from pathlib import Path

import pytest
from standin import Bench, campaign, checkout, contents

from reduction import digests

ROOT = Path(__file__).resolve().parent.parent
LOCKS = [".locks/requirements.lock", ".locks/requirements-test.lock", ".locks/requirements-slurm.lock"]
INSTALL = [
    "python3 -m venv .venv",
    ".venv/bin/python -m pip install --require-hashes -r {lock}",
    ".venv/bin/python -m pip install --no-deps --no-build-isolation .",
]


def declared() -> dict[str, object]:
    return tomllib.loads((ROOT / "pyproject.toml").read_text())["project"]


def names(requirements: list[str]) -> set[str]:
    return {re.split(r"[^a-z0-9-]", text.lower().replace("_", "-"))[0] for text in requirements}


@pytest.mark.parametrize("lock", LOCKS)
def test_lock_pins_everything_with_hashes_and_names_no_host(lock: str) -> None:
    text = (ROOT / lock).read_text()
    entries = re.split(r"\n(?=[a-z0-9])", text.strip())
    for entry in entries:
        assert re.match(r"[a-z0-9.\-\[\]]+==[^ ]+( ; [^\\]+)? \\\n", entry), entry[:80]
        assert re.search(r"--hash=sha256:[0-9a-f]{64}", entry), entry[:80]
    assert not re.search(r"://|index|http|find-links", text)


def test_locks_hold_what_is_declared_and_agree() -> None:
    pins = [dict(re.findall(r"^([a-z0-9.\-]+)==(\S+)", (ROOT / lock).read_text(), re.MULTILINE)) for lock in LOCKS]
    project = declared()
    build = tomllib.loads((ROOT / "pyproject.toml").read_text())["build-system"]["requires"]
    assert names([*project["dependencies"], *build]) <= set(pins[0])
    assert names(project["optional-dependencies"]["test"]) <= set(pins[1])
    assert names(project["optional-dependencies"]["slurm"]) <= set(pins[2])
    assert pins[0].items() <= pins[1].items()
    assert pins[0].items() <= pins[2].items()


def test_every_declared_dependency_is_used() -> None:
    texts = [path.read_text() for path in (ROOT / "reduction").glob("*.py")]
    imported = set(re.findall(r"^\s*(?:import|from) (\w+)", "\n".join(texts), re.MULTILINE)) | {"snakemake"}
    assert names(declared()["dependencies"]) <= {{"yaml": "pyyaml"}.get(name, name.lower()) for name in imported}


def test_versions_of_all_that_jobs_import_are_stated() -> None:
    assert set(digests.LIBRARIES) == names(declared()["dependencies"]) - {"snakemake"}


def test_licence_is_the_three_clause_one_of_the_developers() -> None:
    text = (ROOT / "LICENSE").read_text()
    assert declared()["license"] == "BSD-3-Clause"
    assert "The Motescale developers" in text
    assert "Neither the name of the copyright holder" in text


def test_readme_gives_the_two_command_lines_and_ci_runs_the_second() -> None:
    readme = (ROOT / "README.md").read_text()
    run = " && ".join([*(step.format(lock=LOCKS[0]) for step in INSTALL), ".venv/bin/python -m snakemake --cores all"])
    test = " && ".join([*(step.format(lock=LOCKS[1]) for step in INSTALL), ".venv/bin/python -m pytest -n 2"])
    assert run in readme
    assert test in readme
    ci = (ROOT / ".ci" / "run").read_text().replace(" --quiet", "")
    assert all(step in ci for step in test.split(" && "))


def test_slurm_profile_says_what_each_line_is_for() -> None:
    lines = (ROOT / "workflow" / "profiles" / "slurm" / "config.yaml").read_text().splitlines()
    assert "executor: slurm" in lines
    assert "snakemake-executor-plugin-slurm" in names(declared()["optional-dependencies"]["slurm"])


@pytest.fixture(scope="module")
def wheel(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """The wheel, built with the build backend that is installed, without asking any server."""
    folder = tmp_path_factory.mktemp("wheel")
    command = [sys.executable, "-m", "pip", "wheel", "--quiet", "--no-deps", "--no-build-isolation", "--no-index"]
    ran = subprocess.run([*command, "-w", str(folder), str(ROOT)], capture_output=True, text=True, check=False)
    assert ran.returncode == 0, ran.stderr
    (path,) = folder.glob("*.whl")
    return path


@pytest.mark.packaging
def test_wheel_holds_package_and_workflow_and_nothing_else(wheel: Path) -> None:
    with zipfile.ZipFile(wheel) as archive:
        held = {name for name in archive.namelist() if ".dist-info/" not in name}
    expected = {f"reduction/{path.name}" for path in (ROOT / "reduction").glob("*.py")} | {"reduction/Snakefile"}
    expected |= {"reduction/.locks/requirements.lock"}
    files = [path for path in (ROOT / "workflow").rglob("*") if path.is_file() and "__pycache__" not in path.parts]
    expected |= {f"reduction/{path.relative_to(ROOT).as_posix()}" for path in files}
    assert held == expected


@pytest.mark.packaging
def test_installed_copy_runs_outside_the_checkout_and_gives_the_same_bytes(wheel: Path, tmp_path: Path) -> None:
    bench = Bench(checkout(tmp_path / "checkout"), campaign(tmp_path / "campaign", 2), tmp_path / "results")
    assert bench.run().returncode == 0
    installed = tmp_path / "site packages"
    with zipfile.ZipFile(wheel) as archive:
        archive.extractall(installed)
    for path in (bench.program / "reduction").glob("*.py"):  # the stand-ins of the physics
        (installed / "reduction" / path.name).write_bytes(path.read_bytes())
    other = tmp_path / "other"
    command = [sys.executable, "-m", "reduction.command", "run", str(bench.campaign), str(other)]
    ran = bench.finish(command, PYTHONPATH=str(installed), PYTHONSAFEPATH="1")
    assert ran.returncode == 0, ran.stdout + ran.stderr
    assert contents(other) == contents(bench.results)


@pytest.fixture
def installed(wheel: Path, tmp_path: Path) -> Path:
    """Folder the wheel is installed in, away from the checkout."""
    folder = tmp_path / "site packages"
    with zipfile.ZipFile(wheel) as archive:
        archive.extractall(folder)
    return folder


def outside(folder: Path, *argv: str, path: str) -> subprocess.CompletedProcess[str]:
    """Run a module in a folder away from the checkout, with modules from `path` first."""
    kept = {name: value for name, value in os.environ.items() if not name.startswith(("PYTEST", "PYTHON"))}
    return subprocess.run(
        [sys.executable, "-m", *argv], cwd=folder, capture_output=True, text=True, check=False, timeout=600,
        env=kept | {"PYTHONPATH": path, "PYTHONSAFEPATH": "1"},
    )  # fmt: skip


@pytest.mark.packaging
def test_installed_copy_draws_reports_and_verifies_outside_the_checkout(installed: Path, tmp_path: Path) -> None:
    where = tmp_path / "somewhere else"
    where.mkdir()
    asked = ["--sessions", "1", "--particles", "2"]
    for command in (
        ["simulate", "campaign", *asked],
        ["run", "campaign", "results", "--cores", "1"],
        ["verify", "results", "--campaign", "campaign"],
        ["pack", "results", "results.zip"],
        ["explain", "results", "s001", "p01"],
    ):
        ran = outside(where, "reduction.command", *command, path=str(installed))
        assert ran.returncode == 0, ran.stdout + ran.stderr
        assert str(ROOT) not in ran.stdout + ran.stderr
    for page in (where / "results" / "report.pdf", where / "results" / "sessions" / "s001.pdf"):
        assert page.read_bytes().startswith(b"%PDF-")
    run = json.loads((where / "results" / "run.json").read_text())
    assert run["lock"] == hashlib.sha256((ROOT / ".locks/requirements.lock").read_bytes()).hexdigest()


@pytest.mark.packaging
def test_installed_workflow_with_another_package_in_front_is_refused(installed: Path, tmp_path: Path) -> None:
    front = checkout(tmp_path / "checkout")
    command = ["snakemake", "--snakefile", str(installed / "reduction" / "Snakefile"), "--cores", "1", "--config"]
    config = [f"campaign={campaign(tmp_path / 'c', 1)}", f"results={tmp_path / 'r'}"]
    ran = outside(tmp_path, *command, *config, path=f"{front}{os.pathsep}{installed}")
    assert ran.returncode == 1
    assert f"but Python imports {front / 'reduction'}. Start it where it is installed." in ran.stderr
    assert not (tmp_path / "r" / "run.json").exists()
