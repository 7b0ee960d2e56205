"""How often the stated intervals hold the truth, and how wide they are, over many campaigns drawn independently.

    python tests/studies/coverage.py [CAMPAIGNS [CORES]]

With the package installed, or PYTHONPATH naming the checkout; some ten minutes on two cores. Prints a table for the
documentation. Every campaign has a truth of its own, shared inputs and all, drawn from what its files state
(simulated, invented), and goes through the reduction as a user's does. Particles of one campaign share inputs, so the
u of a coverage is taken from the scatter between campaigns.
"""

from __future__ import annotations

import math
import os
import sys
import tempfile
from collections.abc import Mapping
from concurrent.futures import ProcessPoolExecutor
from dataclasses import dataclass, field, replace
from pathlib import Path

import numpy as np
import pandas as pd
from scipy import stats

from reduction.check import check_campaign
from reduction.session import reduce_campaign, reduce_session
from reduction.settings import Campaign
from reduction.simulation import Habits, simulate_campaign
from reduction.simulationplan import REGIMES, Plan
from reduction.simulationtruth import ELEMENTARY_CHARGE

PULLED = ("charge_to_mass_C_per_kg", "drag_rate_per_s", "mass_kg", "charge_e")
INTERVALS = {
    "charge_to_mass_C_per_kg": ("charge_to_mass_low_C_per_kg", "charge_to_mass_high_C_per_kg"),
    "mass_kg": ("mass_low_kg", "mass_high_kg"),
    "charge_e": ("charge_low_e", "charge_high_e"),
}
JOINT = {"charge_to_mass": "charge_to_mass_C_per_kg", "charge": "charge_C"}
SHAPES = {  # the largest contributions of room air, in shapes other than normal
    "dc_field_per_volt_per_m": "{value: 61.3, half_width: 1.6, shape: rectangular}",
    "ac_gradient_per_volt_per_m2": "{value: 1.31e4, half_width: 283, shape: arcsine}",
    "density_kg_per_m3": "{value: 1050, half_width: 24, shape: triangular}",
    "stray_field_V_per_m": "{value: 0, u: 30, dof: 6}",
    "shape_factor": "{value: 1, half_width: 0.01, shape: rectangular}",
}

COARSE = {"reading": {"balance_voltage_V": 0.4, "dc_voltage_V": 0.03, "height_mm": 0.01, "secular_frequency_Hz": 0.1}}


@dataclass(frozen=True)
class Case:
    """One way to measure and to reduce: a plan of one regime, options of the campaign, inputs stated otherwise."""

    title: str
    regime: str
    sessions: int = 1
    particles: int = 4
    options: Mapping[str, str] = field(default_factory=dict)
    habits: Habits = Habits()
    stated: Mapping[str, object] = field(default_factory=dict)  # fields of the regime

    def simulate(self, folder: Path, seed: int) -> pd.DataFrame:
        """Write one campaign of this kind; its true particles, by session and particle."""
        plan = Plan(
            regimes=(self.regime,), sessions=self.sessions, particles=self.particles, habits=self.habits,
            options=self.options,
        )  # fmt: skip
        usual = REGIMES[self.regime]
        try:
            REGIMES[self.regime] = replace(usual, **self.stated)  # type: ignore[index]
            truth = simulate_campaign(folder, plan=plan, seed=seed)
        finally:
            REGIMES[self.regime] = usual  # type: ignore[index]
        table = pd.read_csv(truth, comment="#", dtype={"session": str, "particle": str})
        return table.set_index(["session", "particle"])

    def reduced(self, folder: Path, seed: int, adjust: tuple[str, ...] = ("",)) -> list[pd.DataFrame]:
        """Particles of one campaign beside their truth, once for each way to adjust ('' being the campaign's own)."""
        truth = self.simulate(folder, seed)
        campaign, logs, faults = check_campaign(folder)
        assert not list(faults), "\n".join(map(str, faults))
        found = []
        for word in adjust:
            chosen = replace(campaign, options=replace(campaign.options, adjust=word)) if word else campaign
            particles, components = tables_of(chosen, logs)
            rows = particles.set_index(["session", "particle"]).join(truth.add_prefix("true_"), how="inner")
            square, count = joint_chi_square(rows, components)
            found.append(rows.assign(campaign=seed, joint=square / len(rows), joint_dof=count / len(rows)))
        return found


def tables_of(campaign: Campaign, logs: Mapping[str, object]) -> tuple[pd.DataFrame, pd.DataFrame]:
    """particles.csv and components.csv of a checked campaign, as tables."""
    if campaign.options.adjust == "campaign":
        records = list(reduce_campaign(campaign, logs).values())
    else:
        records = [reduce_session(campaign, session, logs[session]) for session in campaign.session_ids]
    return tuple(pd.concat([one.tables[name] for one in records]) for name in ("particles", "components"))


def joint_chi_square(rows: pd.DataFrame, components: pd.DataFrame) -> tuple[float, int]:
    """e' V^-1 e of a whole campaign, e the errors of ln q/m and ln q, V the covariance that components.csv holds.

    For a determined campaign it is chi-square with as many degrees of freedom as there are results, whatever the
    particles share; so every particle counts.
    """
    errors, sizes, keys = [], [], []
    for (session, particle), row in rows.iterrows():
        for result, column in JOINT.items():
            if np.isfinite(row[f"u_{column}"]):
                true = row[f"true_{column}"] if result == "charge_to_mass" else row["true_charge_e"] * ELEMENTARY_CHARGE
                errors.append(math.log(row[column] / true))
                sizes.append(row[column])
                keys.append((session, particle, result))
    wide = components[components["result"].isin(list(JOINT))].pivot_table(
        index=["session", "particle", "result"], columns="input", values="component", fill_value=0.0
    )
    root = wide.loc[keys].to_numpy() / np.array(sizes)[:, None]
    return float(np.array(errors) @ np.linalg.solve(root @ root.T, np.array(errors))), len(errors)


def pulls(rows: pd.DataFrame, column: str) -> pd.Series:
    """Logarithm of estimate over truth in units of its uncertainty."""
    return np.log(rows[column] / rows[f"true_{column}"]) / (rows[f"u_{column}"] / rows[column].abs())


def held(rows: pd.DataFrame, column: str) -> pd.Series:
    """Whether the interval of each particle holds the truth; the drag rate has none in the tables, k is 1.96 there."""
    if column not in INTERVALS:
        return pulls(rows, column).abs() <= stats.norm.ppf(0.975)
    low, high = (rows[name] for name in INTERVALS[column])
    return (low <= rows[f"true_{column}"]) & (rows[f"true_{column}"] <= high)


def independent(rows: pd.DataFrame) -> pd.DataFrame:
    """One particle of each campaign, in turn: those of one campaign share its inputs."""
    place = rows.groupby("campaign").cumcount()
    size = rows.groupby("campaign")["campaign"].transform("size")
    return rows[place == rows["campaign"] % size]


SCATTER = Habits(unstated=("balance_voltage_V", "height_mm", "secular_frequency_Hz"), balance_readings=4)
ALONE = {"adjust": "particle"}
CASES = [
    *(Case("session", regime) for regime in REGIMES),
    *(Case("particle", regime, options=ALONE) for regime in REGIMES),
    *(Case("campaign of 2 sessions", regime, 2, 3, {"adjust": "campaign"}) for regime in REGIMES),
    *(Case("session, u from scatter", regime, habits=SCATTER) for regime in REGIMES),
    *(Case("session, scatter twice the stated, inflate", regime, options={"scatter": "inflate"},
           habits=Habits(scatter=2.0)) for regime in REGIMES),
    Case("session, inputs not normal", "room_air_light", stated=SHAPES),
    Case("session of 8", "room_air_dense", particles=8),
    Case("8, particle", "room_air_dense", particles=8, options=ALONE),
    Case("session of 8, coarse readings, no lot", "room_air_dense", 1, 8, {"lot": "unused"}, stated=COARSE),
    Case("8, particle, coarse readings, no lot", "room_air_dense", 1, 8, {"lot": "unused"} | ALONE, stated=COARSE),
]  # fmt: skip


def one_campaign(work: tuple[int, int]) -> pd.DataFrame:
    """Particles of one campaign of one case."""
    case, seed = CASES[work[0]], work[1]
    with tempfile.TemporaryDirectory() as place:
        return case.reduced(Path(place) / "campaign", seed)[0]


def line(case: Case, rows: pd.DataFrame) -> str:
    """One row of the table."""
    whole = rows.groupby("campaign")
    campaigns, cells = len(whole), [case.regime, case.title, str(len(whole)), str(len(rows))]
    known = rows[rows["status"] == "ok"]
    for column in PULLED:
        # an interval that is not given holds nothing and is not counted
        share = held(known, column).where(known[f"u_{column}"].notna()).astype(float).groupby(known["campaign"]).mean()
        cells.append(f"{100 * share.mean():.1f} ± {100 * share.std() / math.sqrt(campaigns):.1f}")
    for column in ("charge_to_mass_C_per_kg", "charge_e"):
        own = pulls(independent(known), column).dropna()
        cells.append(f"{own.mean():+.2f}, {own.std():.2f}")
    for column in ("charge_to_mass_C_per_kg", "charge_e"):
        cells.append(f"{100 * (known[f'u_{column}'] / known[column].abs()).median():.2f}")
    cells.append(f"{known['chi_square'].sum() / known['degrees_of_freedom'].sum():.3f}")
    cells.append(f"{known['joint'].sum() / known['joint_dof'].sum():.3f}")
    return f"| {' | '.join(cells)} |"


def main() -> None:
    """Print the table."""
    campaigns = int(sys.argv[1]) if len(sys.argv) > 1 else 180
    cores = int(sys.argv[2]) if len(sys.argv) > 2 else min(2, os.cpu_count() or 1)
    print(f"Intervals of 95 %: how often they hold the truth [%], {campaigns} campaigns a row\n")
    heads = ["regime", "reduced as", "campaigns", "particles", "q/m", "drag", "mass", "charge", "pull of q/m: mean, sd"]
    heads += ["pull of charge: mean, sd", "median u of q/m [%]", "median u of charge [%]", "chi-square / dof"]
    heads += ["joint errors: chi-square / dof"]
    print(f"| {' | '.join(heads)} |")
    print(f"|--|--|{'--:|' * (len(heads) - 2)}")
    with ProcessPoolExecutor(cores) as pool:
        for place, case in enumerate(CASES):
            # the same seeds in every row: the same truths where only the reduction differs
            found = pool.map(one_campaign, [(place, 5000 + seed) for seed in range(campaigns)], chunksize=8)
            print(line(case, pd.concat(list(found))), flush=True)


if __name__ == "__main__":
    main()
