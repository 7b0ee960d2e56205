"""Cost of adjusting many particles together: seconds and memory for 10,000 particles with some 300 shared inputs.

    python tests/benchmarks/adjustment.py [SESSIONS [PARTICLES]]

With the package installed, or PYTHONPATH naming the checkout; a minute. The particles are simulated (invented), each
with balance and height logs; the adjustment starts, as in a run, from each particle adjusted alone. Prints what it took
and where it went: how often the Jacobian was renewed, its share of the time, and how many evaluations of the readings
one renewal costs, a ratio within one run. Aim: below 10 s and 1 GB.
"""

from __future__ import annotations

import resource
import sys
import tempfile
import time
from collections.abc import Callable
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np

from reduction import adjustment, normalequations
from reduction.adjustment import adjust_together
from reduction.errors import Faults
from reduction.logs import read_logs
from reduction.methods import linearise, predict
from reduction.normalequations import Model
from reduction.preparation import prepare
from reduction.settings import load_campaign
from reduction.simulation import simulate_campaign
from reduction.simulationplan import Plan
from reduction.tables import read_table


def main(sessions: int, particles: int) -> None:
    """Simulate, adjust, print."""
    with tempfile.TemporaryDirectory() as place:
        folder = Path(place) / "campaign"
        simulate_campaign(folder, plan=Plan(sessions=sessions, particles=particles), seed=5)
        faults = Faults()
        campaign = load_campaign(folder, faults=faults)
        truth = read_table(Path(f"{folder}.truth.csv"))
        models, starts = [], []
        for session in campaign.session_ids:
            prepared = prepare(campaign, campaign.sessions[session], read_logs(folder, session, faults=faults))
            own = truth[truth["session"] == session].set_index("particle").loc[list(prepared.names)]
            s = own["charge_to_mass_C_per_kg"].to_numpy(float)
            theta = np.zeros((len(own), 5))
            theta[:, 0], theta[:, 1] = np.log(np.abs(s)), np.log(own["drag_rate_per_s"].to_numpy(float))
            theta[:, 2] = own["height_origin_mm"].to_numpy(float) * 1e-3
            models.append(Model(prepared.setting, prepared.logs, np.sign(s), np.zeros(len(own), bool)))
            starts.append(adjustment.adjust_alone(models[-1], theta).theta)
    before = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / 1024.0
    clock = Clock()
    normalequations.linearise = clock.timed(linearise)
    start = time.process_time()
    adjusted = adjust_together(models, starts)
    spent = time.process_time() - start
    normalequations.linearise = linearise
    peak = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / 1024.0
    shared = len(adjusted[0].group)
    settled = all(one.settled.all() for one in adjusted)
    print(f"{sessions * particles} particles, {shared} shared inputs: {spent:.1f} s of core time, settled {settled}")
    print(f"memory: {before:.0f} MB before, {peak:.0f} MB at most")
    print(f"Jacobians of blocks: {clock.calls / sessions:.0f} a session, {100 * clock.spent / spent:.0f} % of the time")
    pull = max(float(np.abs(one.xi).max()) for one in adjusted)
    print(f"largest move of an input from its estimate: {pull:.1f} u")
    model, theta, xi = models[0], starts[0], np.zeros((1, len(models[0].setting.uncertain)))
    whole = seconds(lambda: linearise(model.setting, model.logs, theta, model.sign, xi))
    once = seconds(lambda: predict(model.setting, model.logs, theta[None], model.sign, xi[None]))
    print(f"one Jacobian costs as much as {whole / once:.0f} evaluations of the readings")


@dataclass
class Clock:
    """Core time and calls of one function."""

    calls: int = 0
    spent: float = 0.0

    def timed(self, function: Callable[..., Any]) -> Callable[..., Any]:
        """The function, timed."""

        def run(*given: Any, **named: Any) -> Any:
            start = time.process_time()
            result = function(*given, **named)
            self.spent += time.process_time() - start
            self.calls += 1
            return result

        return run


def seconds(function: Callable[[], object]) -> float:
    """Least core time of a few runs."""
    found = []
    for _ in range(5):
        start = time.process_time()
        function()
        found.append(time.process_time() - start)
    return min(found)


if __name__ == "__main__":
    asked = [int(one) for one in sys.argv[1:]]
    main(*(asked + [25, 400][len(asked) :]))
