"""A small finished run of the real program, made step by step without Snakemake."""

from __future__ import annotations

from pathlib import Path

from reduction import steps
from reduction.simulation import simulate_campaign
from reduction.simulationplan import Plan


def finish(campaign: Path, results: Path) -> Path:
    """Run every step on a campaign, as the workflow would."""
    made = steps.plan(campaign, results)
    steps.check(campaign, results)
    for batch in made.batches:
        steps.reduce(campaign, results, batch)
        steps.session_reports(results, batch)
    steps.tables(campaign, results)
    steps.comparison(results)
    steps.report(results)
    steps.session_files(results)
    steps.tidy(results)
    steps.provenance(results)
    return results


def simulated(folder: Path, *, sessions: int = 3, seed: int = 5) -> Path:
    """Campaign of two materials and few particles."""
    plan = Plan(regimes=("room_air_light",), materials=("PTFE", "glass"), sessions=sessions, particles=2)
    simulate_campaign(folder, plan=plan, seed=seed)
    return folder
