"""A copy of the program whose physics is replaced by a count of lines, so that many runs of the workflow stay quick.

What is under test then is the workflow itself: order, triggers, records, locks. The real path is run once, on the
example.
"""

from __future__ import annotations

import os
import shutil
import subprocess
import sys
import time
from dataclasses import dataclass
from pathlib import Path

ROOT = Path(__file__).resolve().parent.parent

MODULES = {
    "settings": """
from dataclasses import dataclass, field
from pathlib import Path
from reduction import digests

@dataclass(frozen=True)
class Options:
    title: str = ""
    seed: int = 1
    drag: str = "unsteady"
    adjust: str = "session"
    when_a_session_fails: str = "stop"
    coverage_probability: float = 0.95
    monte_carlo_trials: int = 1000
    compare: dict = field(default_factory=lambda: {"quantity": "charge_to_mass", "by": "charged_with"})

@dataclass(frozen=True)
class Campaign:
    folder: Path
    options: Options
    sessions: dict
    leave_out: dict
    faulty: dict = field(default_factory=dict)

def load_campaign(folder, *, faults, only=None, keep=None):
    given = digests.campaign_settings(folder)
    options = Options(**{k: v for k, v in given.items() if k in Options.__annotations__})
    names = digests.session_ids(folder)
    return Campaign(folder, options, {name: name for name in names}, given.get("leave_out", {}))
""",
    "logs": """
def read_logs(folder, session, *, faults):
    return (folder / "sessions" / session / "balance.csv").read_text()
""",
    "check": """
from reduction.errors import Faults
from reduction.settings import load_campaign
from reduction.logs import read_logs

def check_campaign(folder, *, keep=None):
    faults = Faults()
    campaign = load_campaign(folder, faults=faults)
    logs = {}
    for name in campaign.sessions:
        logs[name] = read_logs(folder, name, faults=faults)
        if "wrong" in logs[name]:
            own = Faults()
            own.add(f"sessions/{name}/balance.csv", line=2, column="balance_voltage_V", found="wrong",
                    expected="a number", advice="Write a number.")
            if campaign.options.when_a_session_fails == "leave_out":
                campaign.faulty[name] = list(own)
            else:
                faults.extend(own)
    return campaign, logs, faults

def faults_text(faults):
    return "\\n".join(map(str, faults))

def check_marking(campaign, logs, faults):
    return None

def report_text(campaign, logs, faults, marking):
    return faults_text(faults) + f"{len(campaign.sessions)} sessions, {len(faults)} faults"
""",
    "session": """
import os
import time
import pandas as pd
from reduction.records import SessionRecord
from reduction.tables import COLUMNS

def reduce_session(campaign, session, logs):
    with open(os.environ["STANDIN_CALLS"], "a") as calls:
        calls.write(f"reduce {session}\\n")
    time.sleep(float(os.environ.get("STANDIN_SECONDS", "0")))
    row = dict.fromkeys(COLUMNS["particles"]) | {"session": session, "particle": "1", "status": "ok"}
    row |= {"charge_to_mass_C_per_kg": float(len(logs)) * campaign.options.seed, "u_charge_to_mass_C_per_kg": 0.5}
    facts = {"session": session, "status": "ok", "reason": ""}
    return SessionRecord({"particles": pd.DataFrame([row])}, facts)

def reduce_campaign(campaign, logs):
    records = {session: reduce_session(campaign, session, text) for session, text in logs.items()}
    for record in records.values():
        record.tables["particles"]["charge_C"] = float(sum(map(len, logs.values())))
    return records
""".replace("* campaign.options.seed", "* int(campaign.options.seed)"),
    "report": """
import os
from reduction.wholefile import write_whole

def session_pdf(folder, out, *, digest, title):
    with open(os.environ["STANDIN_CALLS"], "a") as calls:
        calls.write(f"draw {folder.parent.name}\\n")
    write_whole(out, (folder / "particles.csv").read_bytes() + digest.encode() + title.encode())

def failed_session_pdf(session, faults_text, out, *, digest):
    write_whole(out, faults_text.encode() + digest.encode())

def campaign_pages(results, records, *, digest, title, traps):
    for end in ("pdf", "html"):
        data = (results / "comparison.csv").read_bytes() + digest.encode() + title.encode()
        write_whole(results / f"report.{end}", data)
""",
}


def checkout(folder: Path, *, real: bool = False) -> Path:
    """Copy the workflow and the package to `folder`, with the stand-ins in place of the physics unless it is `real`."""
    shutil.copytree(ROOT / "workflow", folder / "workflow")
    shutil.copytree(ROOT / "reduction", folder / "reduction", ignore=shutil.ignore_patterns("__pycache__"))
    for name in ("Snakefile", "pyproject.toml"):
        shutil.copy(ROOT / name, folder)
    shutil.copytree(ROOT / ".locks", folder / ".locks")
    metadata = folder / "motescale-0.dist-info" / "METADATA"  # this copy counts as the installed one
    metadata.parent.mkdir()
    metadata.write_text("Metadata-Version: 2.1\nName: motescale\nVersion: 0\n")
    for name, text in MODULES.items() if not real else ():
        (folder / "reduction" / f"{name}.py").write_text(text)
    return folder


def campaign(folder: Path, sessions: int = 3) -> Path:
    """Write a campaign of so many sessions, a file or two each."""
    for part in ("traps", "species", "sessions"):
        (folder / part).mkdir(parents=True)
    (folder / "campaign.yaml").write_text("title: Stand-in\nseed: 1\n")
    (folder / "traps" / "ring.yaml").write_text("dc_polarity: 1\n")
    (folder / "species" / "bead.yaml").write_text("density_kg_per_m3: 1050\n")
    (folder / "species" / "glass.yaml").write_text("density_kg_per_m3: 2500\n")
    for number in range(1, sessions + 1):
        add_session(folder, f"s{number:02d}")
    return folder


def add_session(folder: Path, name: str, rows: int = 2) -> Path:
    """Add one session to a campaign."""
    session = folder / "sessions" / name
    session.mkdir()
    (session / "session.yaml").write_text(f"trap: ring\nspecies: bead\nnotes: {name}\n")
    (session / "balance.csv").write_text("particle,balance_voltage_V\n" + f"1,{name}\n" * rows)
    return session


@dataclass(frozen=True)
class Bench:
    """A campaign, its results and the stand-in program to run on them as a user would."""

    program: Path
    campaign: Path
    results: Path

    @property
    def environment(self) -> dict[str, str]:
        """Environment of a run, without what the tests' own run needs."""
        kept = {name: value for name, value in os.environ.items() if not name.startswith(("PYTEST", "PYTHON"))}
        return kept | {"STANDIN_CALLS": str(self.calls)}

    @property
    def calls(self) -> Path:
        """Where the stand-ins note what they were asked to compute or draw."""
        return self.campaign.with_name("calls.txt")

    @property
    def done(self) -> list[str]:
        """What the last run really computed or drew."""
        return sorted(self.calls.read_text().splitlines())

    def plain(self, *options: str, campaign: str | None = None, results: str | None = None) -> list[str]:
        """Command line of a plain run."""
        config = [f"campaign={campaign or self.campaign}", f"results={results or self.results}"]
        snakefile = ["--snakefile", str(self.program / "Snakefile")]
        return [sys.executable, "-m", "snakemake", *snakefile, "--cores", "2", *options, "--config", *config]

    def run(self, *options: str, **folders: str) -> subprocess.CompletedProcess[str]:
        """Run the workflow to its end."""
        return self.finish(self.plain(*options, **folders))

    def finish(self, command: list[str], **environment: str) -> subprocess.CompletedProcess[str]:
        """Run a command to its end."""
        self.calls.write_text("")
        return subprocess.run(
            command,
            capture_output=True,
            text=True,
            timeout=300,
            check=False,
            env=self.environment | environment,
            cwd=self.campaign.parent,
        )

    def motescale(self, *arguments: str) -> subprocess.CompletedProcess[str]:
        """Run the command line of the stand-in program."""
        command = [sys.executable, "-m", "reduction.command", *arguments]
        return self.finish(command, PYTHONPATH=str(self.program), PYTHONSAFEPATH="1")

    def start(self, **environment: str) -> subprocess.Popen[str]:
        """Start a run in a process group of its own."""
        self.calls.write_text("")
        return subprocess.Popen(
            self.plain(),
            stdout=subprocess.PIPE,
            stderr=subprocess.STDOUT,
            text=True,
            env=self.environment | environment,
            cwd=self.campaign.parent,
            start_new_session=True,
        )

    def wait_for(self, word: str) -> None:
        """Wait until the run going on has come to a call that begins so."""
        for _ in range(600):
            if self.calls.exists() and word in self.calls.read_text():
                return
            time.sleep(0.05)
        message = f"the run never came to {word}"
        raise AssertionError(message)


def contents(results: Path) -> dict[str, bytes]:
    """Every file of the results, except the workflow's own state."""
    return {
        path.relative_to(results).as_posix(): path.read_bytes()
        for path in sorted(results.rglob("*"))
        if path.is_file() and not path.relative_to(results).parts[0].startswith(".")
    }
