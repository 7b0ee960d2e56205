"""Core time of the reduction: 200 particles of 24 readings fitted, adjusted and written, against the bare script.

    python tests/benchmarks/cost.py [REGIME]

With the package installed, or PYTHONPATH naming the checkout. Both reduce the same simulated campaign in this one
process, imports not counted; trust the ratio, not the seconds.
"""

from __future__ import annotations

import sys
import tempfile
import time
from dataclasses import replace
from pathlib import Path

import bare

from reduction.errors import Faults
from reduction.logs import read_logs
from reduction.session import reduce_session
from reduction.settings import load_campaign
from reduction.simulation import PLANS, Habits, simulate_campaign

SESSIONS, PARTICLES = 10, 20
HABITS = {  # 24 readings a particle
    "room_air_light": Habits(balance_readings=6, height_drives=3, height_readings=6),
    "room_air_dense": Habits(balance_readings=5, height_drives=2, height_readings=6, secular_readings=7),
    "low_pressure": Habits(balance_readings=12, secular_readings=12),
}


def ours(folder: Path, results: Path) -> tuple[float, int, int]:
    """Core seconds, particles and readings of the program's own reduction, from reading the logs to written records."""
    begun = time.process_time()
    campaign = load_campaign(folder, faults=Faults())
    particles = readings = 0
    for session in campaign.session_ids:
        record = reduce_session(campaign, session, read_logs(folder, session, faults=Faults()))
        record.save(results / session)
        particles += len(record.tables["particles"])
        readings += len(record.tables["readings"])
    return time.process_time() - begun, particles, readings


def main() -> None:
    """Print core time, cost per particle and the ratio to the bare script."""
    regime = sys.argv[1] if len(sys.argv) > 1 else "room_air_light"
    with tempfile.TemporaryDirectory() as place:
        folder = Path(place) / "campaign"
        plan = replace(PLANS[regime], sessions=SESSIONS, particles=PARTICLES, habits=HABITS[regime])
        simulate_campaign(folder, plan=plan, seed=3)
        spent, particles, readings = ours(folder, Path(place))
        begun = time.process_time()
        compared = len(list(bare.reduce(folder)))
        yardstick = time.process_time() - begun
    print(f"{regime}: {particles} particles, {readings / particles:.3g} readings each, {SESSIONS} sessions")
    print(f"program: {spent:6.2f} s core time in all, {1e3 * spent / particles:6.1f} ms per particle")
    print(f"bare:    {yardstick:6.2f} s core time in all, {1e3 * yardstick / compared:6.1f} ms per particle")
    print(f"program over bare, per particle: {spent / particles / (yardstick / compared):.3f}")


if __name__ == "__main__":
    main()
