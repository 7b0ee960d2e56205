"""What a campaign of hundreds of sessions costs: core time, memory, and what an edit makes anew.

    python tests/benchmarks/scale.py [help dry cost step growth]

Each part prints its figures beside what is aimed at; all of them take half an hour on two cores. Core time is that of
a whole run, every job and the start of every process in it; trust it and the ratios, not the wall time of a shared
machine. Memory is that of the largest process there was.
"""

from __future__ import annotations

import json
import math
import shutil
import subprocess
import sys
import tempfile
import time
from collections.abc import Callable
from dataclasses import dataclass, replace
from pathlib import Path

import bare

from reduction.batches import STATE, Plan, record_folder
from reduction.simulation import PLANS, simulate_campaign
from reduction.wholefile import write_json

ROOT = Path(__file__).resolve().parent.parent.parent
PLAN = PLANS["room_air_light"]


@dataclass(frozen=True)
class Cost:
    """What commands have cost."""

    core: float  # [s]
    wall: float  # [s]
    memory: float  # the largest process [MB]


def cost(*commands: list[str]) -> Cost:
    """Run commands in a process of its own, so that its children's use is that of these alone."""
    told = "import json, resource, subprocess, sys, time\nbegun = time.perf_counter()\n"
    told += (
        "for command in json.loads(sys.argv[1]):\n    subprocess.run(command, check=True, stdout=subprocess.DEVNULL)\n"
    )
    told += "used = resource.getrusage(resource.RUSAGE_CHILDREN)\n"
    told += "print(used.ru_utime + used.ru_stime, time.perf_counter() - begun, used.ru_maxrss / 1e3)"
    ran = subprocess.run(
        [sys.executable, "-c", told, json.dumps(commands)], capture_output=True, text=True, check=False
    )
    assert ran.returncode == 0, ran.stderr
    return Cost(*map(float, ran.stdout.split()))


def run(campaign: Path, results: Path) -> list[str]:
    """Command of a run."""
    return [sys.executable, "-m", "reduction.command", "run", "--quiet", "--cores", "2", str(campaign), str(results)]


def step(name: str, campaign: Path, results: Path) -> list[str]:
    """Command of one step."""
    where = ["--campaign", str(campaign), "--results", str(results)]
    return [sys.executable, "-m", "reduction.steps", name, *where]


def simulated(folder: Path, sessions: int, particles: int) -> Path:
    """Write a simulated campaign."""
    simulate_campaign(folder, plan=replace(PLAN, sessions=sessions, particles=particles), seed=4)
    return folder


def say(what: str, found: str, aim: str) -> None:
    """Print one line of the table."""
    print(f"| {what} | {found} | {aim} |", flush=True)


def measure_help(place: Path) -> None:
    """Print the time of the command's help."""
    command = [sys.executable, "-m", "reduction.command", "--help"]
    times = [cost(command) for _ in range(7)]
    found = f"{min(one.core for one in times):.2f} s core, {min(one.wall for one in times):.2f} s wall"
    say("`motescale --help`", found, "0.3 s")


def measure_dry(place: Path) -> None:
    """Print the time of a dry run of 2,000 sessions."""
    campaign = simulated(place / "dry", 2000, 1)
    snakemake = [sys.executable, "-m", "snakemake", "--snakefile", str(ROOT / "Snakefile"), "--cores", "2", "-n"]
    used = cost([*snakemake, "--config", f"campaign={campaign}", f"results={place / 'dry results'}"])
    say("dry run, 2,000 sessions", f"{used.core:.1f} s core, {used.wall:.1f} s wall", "10 s")


def measure_cost(place: Path) -> None:
    """Print what 200 sessions of 10 particles cost, again, after an edit and with one more."""
    campaign, results = simulated(place / "cost", 200, 10), place / "cost results"
    used = cost(run(campaign, results))
    begun = time.process_time()
    particles = len(list(bare.reduce(campaign)))
    yardstick = time.process_time() - begun
    say("200 sessions of 10 particles, all PDFs", f"{used.core:.0f} s core", "")
    say("the same by tests/benchmarks/bare.py", f"{yardstick:.0f} s core, {particles} particles", "")
    say("ratio of the two", f"{used.core / yardstick:.2f}", "4, better 2")
    say("largest process", f"{used.memory:.0f} MB", "500 MB")
    again = cost(run(campaign, results))
    say("no-op rerun, 200 sessions", f"{again.core:.1f} s core, {again.wall:.1f} s wall", "5 s")
    before = contents(results)
    edit(campaign / "sessions" / "s100" / "height.csv")
    used = cost(run(campaign, results))
    say("one session of 200 edited", f"{used.core:.1f} s core, {used.wall:.1f} s wall", "15 s")
    say("others whose files changed", f"{len(changed(before, contents(results), 's100'))}", "0")
    before = contents(results)
    shutil.copytree(campaign / "sessions" / "s100", campaign / "sessions" / "s100b")
    edit(campaign / "sessions" / "s100b" / "height.csv")
    used = cost(run(campaign, results))
    say("one session added to 200", f"{used.core:.1f} s core, {used.wall:.1f} s wall", "15 s")
    say("others whose files changed", f"{len(changed(before, contents(results), 's100b'))}", "0")


def contents(results: Path) -> dict[str, bytes]:
    """Every session's own files, and its rows of the tables of particles."""
    found = {f"{path.parent.name}/{path.stem}": path.read_bytes() for path in sorted(results.glob("[rs]*s/*.*"))}
    for name in ("particles", "methods", "agreement", "components", "budget"):
        for line in (results / f"{name}.csv").read_bytes().splitlines()[1:]:
            key = f"{name}/{line.split(b',')[0].decode()}"
            found[key] = found.get(key, b"") + line
    return found


def changed(before: dict[str, bytes], after: dict[str, bytes], session: str) -> list[str]:
    """What changed of other sessions."""
    return [key for key in before if after.get(key) != before[key] and key.split("/")[1] != session]


def edit(path: Path) -> None:
    """Change the last digit of the last number of a log."""
    text = path.read_text().rstrip("\n")
    path.write_text(text[:-1] + str((int(text[-1]) + 1) % 10) + "\n")


def measure_step(place: Path) -> None:
    """Print what the steps of a whole campaign cost with 10,000 particles: 20 sessions, each under fifty names."""
    campaign, results = simulated(place / "step", 20, 10), place / "step results"
    cost(run(campaign, results))
    many = place / "many results"
    made = Plan.load(results)
    names = {f"{name}x{copy:02d}": name for name in made.sessions for copy in range(50)}
    for name, source in names.items():
        record = record_folder(results, source, made.record_name(source))
        for path in record.iterdir():
            target = record_folder(many, name, "0") / path.name
            target.parent.mkdir(parents=True, exist_ok=True)
            target.write_text(path.read_text(encoding="utf-8").replace(source, name), encoding="utf-8")
    write_json(many / STATE / "plan.json", {
        "sessions": dict.fromkeys(names, "0"), "inputs": {}, "campaign": made.campaign, "code": made.code,
    })  # fmt: skip
    total = Cost(0, 0, 0)
    for name in ("tables", "comparison", "report"):
        used = cost(step(name, campaign, many))
        say(f"step {name}, 10,000 particles", f"{used.core:.1f} s core, {used.memory:.0f} MB", "")
        total = Cost(total.core + used.core, total.wall + used.wall, max(total.memory, used.memory))
    say("the three together", f"{total.core:.1f} s core, {total.memory:.0f} MB", "60 s, 500 MB")


def measure_growth(place: Path) -> None:
    """Print how core time grows from 100 to 1,000 sessions of one particle."""
    used = [
        cost(run(simulated(place / f"grown {sessions}", sessions, 1), place / f"grown {sessions} results"))
        for sessions in (100, 1000)
    ]
    growth = math.log10(used[1].core / used[0].core)
    say("100 and 1,000 sessions of one particle", f"{used[0].core:.0f} s, {used[1].core:.0f} s core", "")
    say("cost grows as sessions to the power", f"{growth:.3f}", "1.05")
    say("largest process, 1,000 sessions", f"{used[1].memory:.0f} MB", "500 MB")


PARTS: dict[str, Callable[[Path], None]] = {
    "help": measure_help, "dry": measure_dry, "cost": measure_cost, "step": measure_step, "growth": measure_growth,
}  # fmt: skip


def main() -> None:
    """Print the table."""
    print("| what | found | aim |\n|---|---|---|")
    with tempfile.TemporaryDirectory() as place:
        for name in sys.argv[1:] or PARTS:
            PARTS[name](Path(place))


if __name__ == "__main__":
    main()
