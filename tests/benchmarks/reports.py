"""Cost of the reports: a session of ten particles, against bare matplotlib, and a campaign of two hundred sessions.

Run from the checkout: python tests/benchmarks/reports.py [RESULTS]. The campaign's is that of the results folder given;
without one, 200 sessions of four particles are simulated and reduced first, which takes some minutes.
"""

from __future__ import annotations

import io
import re
import sys
import tempfile
import time
from dataclasses import replace
from pathlib import Path

from matplotlib.figure import Figure

sys.path.insert(0, str(Path(__file__).resolve().parent.parent))
sys.path.insert(0, str(Path(__file__).resolve().parent.parent.parent))

from fake_record import write_record

from reduction import report, steps
from reduction.batches import Plan
from reduction.simulation import PLANS, simulate_campaign
from reduction.tables import read_table


def bare(folder: Path) -> None:
    """Draw heights, secular frequencies and balance voltages of each particle on a figure of its own."""
    readings = read_table(folder / "readings.csv")
    for _, own in readings.groupby("particle"):
        figure = Figure(figsize=(6.5, 2.6))
        panels = figure.subplots(2, 3)
        for panel, (log, x, y) in zip(
            panels.flat,
            [("height", "dc_voltage_V", "height_mm"), ("secular", "drive_voltage_peak_V", "secular_frequency_Hz"),
             ("balance", "time_s", "balance_voltage_V"), ("height", "dc_voltage_V", "residual"),
             ("secular", "drive_voltage_peak_V", "residual"), ("balance", "time_s", "residual")],
            strict=True,
        ):  # fmt: skip
            chosen = own[own["log"] == log]
            panel.errorbar(chosen[x], chosen[y], chosen["u_reading"], linestyle="none", marker="o")
        figure.savefig(io.BytesIO(), format="svg")


def simulated(folder: Path) -> Path:
    """Results of a simulated campaign of 200 sessions, reduced, without the sessions' reports."""
    plan = replace(PLANS["room_air_light"], sessions=200, particles=4)
    simulate_campaign(folder / "campaign", plan=plan, seed=3)
    results = folder / "results"
    for batch in steps.plan(folder / "campaign", results).batches:
        steps.reduce(folder / "campaign", results, batch)
    steps.tables(folder / "campaign", results)
    steps.comparison(results)
    return results


def whole(results: Path) -> None:
    """Print what the report of a campaign costs, to print and for a screen together, and how long it is."""
    made = Plan.load(results)
    records = dict(made.records(results))
    start = time.process_time()
    report.campaign_pages(results, records, digest=made.campaign, title=made.title)
    cost = time.process_time() - start
    pages = re.findall(rb"/Type ?/Page\b", (results / "report.pdf").read_bytes())
    print(f"campaign report, {len(made.sessions)} sessions: {cost:.2f} s of core time, {len(pages)} pages,")
    print(f"  page for a screen {(results / 'report.html').stat().st_size / 1e6:.1f} MB")


def main() -> None:
    """Print the costs of the session's report, their ratio, and those of the campaign's, from one run."""
    with tempfile.TemporaryDirectory() as name:
        folder = write_record(Path(name) / "record", particles=11)
        report.session_pdf(folder, Path(name) / "warm.pdf", digest="0" * 64)
        bare(folder)
        start = time.process_time()
        report.session_pdf(folder, Path(name) / "out.pdf", digest="0" * 64)
        ours = time.process_time() - start
        start = time.process_time()
        bare(folder)
        theirs = time.process_time() - start
    print(f"session report, 10 particles: {ours:.2f} s of core time")
    print(f"bare matplotlib, the same 10 figures alone: {theirs:.2f} s")
    print(f"ratio: {ours / theirs:.2f}")
    if len(sys.argv) > 1:
        whole(Path(sys.argv[1]))
        return
    with tempfile.TemporaryDirectory() as name:
        whole(simulated(Path(name)))


if __name__ == "__main__":
    main()
