"""A campaign through the Slurm profile, on a cluster of two nodes that this test starts and stops on one machine.

What is expected is the project's own contract: a job that is killed and a node that is lost cost time and nothing else.
"""

from __future__ import annotations

import os
import signal
import subprocess
import sys
import tempfile
import time
from collections.abc import Callable, Iterator
from dataclasses import dataclass, field, replace
from pathlib import Path

import pytest
from cluster import Cluster, missing
from standin import ROOT, checkout, contents

from reduction.simulation import PLANS, simulate_campaign

OWN = ROOT / ".venv-slurm" / "bin" / "python"  # an environment of its own: the plugin makes every start slower
PYTHON = str(OWN) if OWN.is_file() else sys.executable


def why_not() -> str:
    if sys.platform != "linux":
        return "Slurm runs on Linux"
    if lacking := missing():
        return f"of Slurm there is no {lacking} here (apt-get install slurm-wlm munge)"
    found = subprocess.run([PYTHON, "-c", "import snakemake_executor_plugin_slurm"], capture_output=True, check=False)
    return "the plugin is not installed (pip install -r .locks/requirements-slurm.lock)" if found.returncode else ""


REASON = why_not()
pytestmark = [pytest.mark.slurm, pytest.mark.skipif(bool(REASON), reason=REASON or "all there")]


@pytest.fixture(scope="module")
def cluster() -> Iterator[Cluster]:
    with tempfile.TemporaryDirectory(prefix="slurm-") as folder:  # a socket's path must be short
        made = Cluster(Path(folder))
        try:
            made.start()
            yield made
        finally:
            made.stop()


@dataclass(frozen=True)
class Laboratory:
    """A campaign, the program, and what a local run makes of them."""

    folder: Path
    expected: dict[str, bytes] = field(repr=False)

    def command(self, results: str) -> list[str]:
        """Plain command of a run on the cluster, with relative paths as a person would type them."""
        profile = ["--profile", "program/workflow/profiles/slurm", "--snakefile", "program/Snakefile"]
        here = ["--slurm-status-command", "squeue", "--slurm-init-seconds-before-status-checks", "6"]  # no accounting
        return [PYTHON, "-m", "snakemake", *profile, *here, "--config", "campaign=raw data", f"results={results}"]

    def start(self, cluster: Cluster, results: str) -> subprocess.Popen[str]:
        """Start a run on the cluster, in a process group of its own."""
        kept = {name: value for name, value in os.environ.items() if not name.startswith(("PYTEST", "PYTHON"))}
        with open(self.folder / f"{results}.log", "a") as log:
            return subprocess.Popen(
                self.command(results), cwd=self.folder, env=kept | cluster.environment, stdout=log,
                stderr=subprocess.STDOUT, text=True, start_new_session=True,
            )  # fmt: skip

    def told(self, results: str) -> str:
        """What the runs have said so far."""
        return (self.folder / f"{results}.log").read_text()

    def finish(self, going: subprocess.Popen[str], results: str) -> None:
        """Wait for a run's good end."""
        try:
            status = going.wait(240)
        finally:
            if going.poll() is None:
                os.killpg(going.pid, signal.SIGKILL)
        assert status == 0, self.told(results)
        assert "Traceback" not in self.told(results)


@pytest.fixture(scope="module")
def laboratory(tmp_path_factory: pytest.TempPathFactory) -> Laboratory:
    folder = tmp_path_factory.mktemp("cluster")
    program = checkout(folder / "program", real=True)
    plan = replace(PLANS["room_air_light"], sessions=10, particles=1)
    simulate_campaign(folder / "raw data", plan=plan, seed=8)
    local = [sys.executable, "-m", "snakemake", "--snakefile", str(program / "Snakefile"), "--cores", "2", "--config"]
    ran = subprocess.run(
        [*local, "campaign=raw data", "results=local"], cwd=folder, capture_output=True, text=True, check=False
    )
    assert ran.returncode == 0, ran.stdout + ran.stderr
    return Laboratory(folder, contents(folder / "local"))


def wait_until(seen: Callable[[], object], told: Callable[[], str], seconds: float = 120) -> None:
    deadline = time.monotonic() + seconds
    while not seen():
        assert time.monotonic() < deadline, told()
        time.sleep(0.2)


def at_work(cluster: Cluster, results: Path, step: str) -> list[tuple[str, str]]:
    """Jobs of a step that have begun with a session, and the nodes they are on."""
    found = []
    for job, (_, node, about) in cluster.jobs("running").items():
        batch = about.rpartition("_")[2]
        log = results / ".motescale" / "logs" / f"{step}-{batch}.log"
        if step in about and log.is_file() and "session" in log.read_text():
            found.append((job, node))
    return found


def test_killed_job_and_lost_node_cost_nothing(cluster: Cluster, laboratory: Laboratory) -> None:
    name, results = "after faults", laboratory.folder / "after faults"
    going = laboratory.start(cluster, name)
    wait_until(lambda: at_work(cluster, results, "reduce"), lambda: laboratory.told(name))
    job, _ = at_work(cluster, results, "reduce")[0]
    cluster.ask("scancel", job)
    wait_until(lambda: cluster.jobs()[job][0] == "CANCELLED", lambda: laboratory.told(name))
    wait_until(lambda: at_work(cluster, results, "session_reports"), lambda: laboratory.told(name))
    job, node = at_work(cluster, results, "session_reports")[0]
    cluster.lose_node(node)
    wait_until(lambda: cluster.jobs()[job][0] == "PENDING", lambda: laboratory.told(name))  # and put in the queue again
    assert cluster.states()[node].startswith("down")
    cluster.ask("scontrol", "update", f"JobId={job}", "StartTime=now")  # which else is some minutes from now
    laboratory.finish(going, name)
    cluster.start_node(node)
    assert contents(results) == laboratory.expected


def test_killed_workflow_leaves_jobs_that_do_no_harm_and_the_same_command_goes_on(
    cluster: Cluster, laboratory: Laboratory
) -> None:
    name, results = "after a kill", laboratory.folder / "after a kill"
    wait_until(lambda: set(cluster.states().values()) == {"idle"}, lambda: str(cluster.states()))
    cluster.ask("scontrol", "update", "NodeName=n2", "State=drain", "Reason=test")
    going = laboratory.start(cluster, name)
    wait_until(lambda: at_work(cluster, results, "reduce"), lambda: laboratory.told(name))
    (queued,) = cluster.jobs("pending")
    os.killpg(going.pid, signal.SIGKILL)
    going.wait(10)
    again = laboratory.start(cluster, name)
    wait_until(lambda: cluster.jobs()[queued][0] == "FAILED", lambda: laboratory.told(name))
    cluster.ask("scontrol", "update", "NodeName=n2", "State=resume")
    (log,) = (results / ".snakemake" / "slurm_logs").rglob(f"{queued}.log")
    assert "the run this job belongs to is over and another has begun. Nothing was done." in log.read_text()
    laboratory.finish(again, name)
    assert "waiting for a job of an earlier run that was killed" in laboratory.told(name)
    assert contents(results) == laboratory.expected
