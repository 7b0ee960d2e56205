"""Cost of adjusting many particles together: seconds and memory for 10,000 particles with some 300 shared inputs.

Run as `python tests/benchmarks/adjustment.py [SESSIONS [PARTICLES]]` from the checkout. The particles are simulated
(invented), each with balance and height logs; the adjustment starts from the true values of the particles and the stated
estimates of the inputs.
"""

from __future__ import annotations

import resource
import sys
import tempfile
import time
from pathlib import Path

import numpy as np

from reduction.adjustment import Model, adjust_together
from reduction.errors import Faults
from reduction.logs import read_logs
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
            starts.append(theta)
    before = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / 1024.0
    start = time.process_time()
    adjusted = adjust_together(models, starts)
    spent = time.process_time() - start
    peak = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / 1024.0
    shared = len(adjusted[0].group)
    print(f"{sessions * particles} particles, {shared} shared inputs: {spent:.1f} s of core time, "
          f"settled {all(one.settled.all() for one in adjusted)}, memory {before:.0f} MB before, {peak:.0f} MB at most")  # fmt: skip


if __name__ == "__main__":
    asked = [int(one) for one in sys.argv[1:]]
    main(*(asked + [25, 400][len(asked) :]))
