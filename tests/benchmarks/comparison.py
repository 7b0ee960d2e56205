"""Time of comparing 10,000 particles in 200 sessions of 20 groups, chances of rank and histograms included.

    python tests/benchmarks/comparison.py [SESSIONS PARTICLES GROUPS]

With the package installed, or PYTHONPATH naming the checkout. Tables are made up in memory, then written and read, as
a campaign's step does it. One core: set OMP_NUM_THREADS=1. Trust the ratios, not the seconds.
"""

from __future__ import annotations

import sys
import tempfile
import time
from pathlib import Path

import numpy as np
import pandas as pd

from reduction.comparison import compare, comparison_rows, contrast_rows, session_rows, trend_rows
from reduction.comparisonwords import summary
from reduction.histogram import distribution_rows, distributions, histogram_rows, summary_rows
from reduction.tables import COLUMNS, read_table, write_table

SHARED = 14  # shared inputs of each result


def made_up(sessions: int, each: int, groups: int) -> tuple[pd.DataFrame, pd.DataFrame, dict[str, dict[str, object]]]:
    """Tables of a campaign with the shape of a real one."""
    rng = np.random.default_rng(5)
    rows, parts, facts = [], [], {}
    for s in range(sessions):
        session, group = f"s{s:03d}", f"material-{s % groups:02d}"
        air = {"relative_humidity_percent": f"{30 + s % 30}(2)", "temperature_degC": "21(1)"}
        date = f"2024-{1 + s // 28 % 12:02d}-{1 + s % 28:02d}"
        facts[session] = {"status": "ok", "date": date, "contacts": 10.0, "air": air}
        level = (s % groups) * 1e-4 + rng.normal(0, 2e-4)
        for p in range(each):
            value = level + rng.normal(0, 3e-4)
            row = dict.fromkeys(COLUMNS["particles"], np.nan)
            row |= {"session": session, "particle": f"p{p:03d}", "species": "bead", "charged_with": group,
                    "status": "ok", "flags": "", "methods": "balance", "mass_from": "adjusted",
                    "charge_to_mass_C_per_kg": value, "charge_e": value * 3e7, "mass_kg": 5e-12}  # fmt: skip
            rows.append(row)
            for result, scale in (("charge_to_mass", 1.0), ("charge", 3e7 * 1.602176634e-19)):
                head = {"session": session, "particle": f"p{p:03d}", "result": result, "unit": "x"}
                own = {"input": f"particle/{session}/p{p:03d}/1", "scope": "particle", "component": 1e-5 * scale}
                parts.append({**head, **own})
                for k in range(SHARED):
                    scope, owner = ("trap", "x") if k < 4 else ("session", session)
                    name = f"{scope}/{owner}/input{k}"
                    parts.append({**head, "input": name, "scope": scope, "component": 0.01 * value * scale})
    return pd.DataFrame(rows), pd.DataFrame(parts), facts


def main() -> None:
    """Print the time of each part and of the whole."""
    sessions, each, groups = (
        ([int(text) for text in sys.argv[1:]] + [200, 50, 20])[:3] if sys.argv[1:] else (200, 50, 20)
    )
    particles, components, facts = made_up(sessions, each, groups)
    with tempfile.TemporaryDirectory() as place:
        write_table(Path(place) / "particles.csv", COLUMNS["particles"], particles)
        write_table(Path(place) / "components.csv", COLUMNS["components"], components)
        begun = time.perf_counter()
        particles, components = (read_table(Path(place) / f"{name}.csv") for name in ("particles", "components"))
        read = time.perf_counter()
    found = compare(particles, components, facts)
    made = [list(rows(found)) for rows in (comparison_rows, contrast_rows, trend_rows, session_rows)]
    words = summary(found)
    compared = time.perf_counter()
    charges = distributions(particles, components, pd.DataFrame({"input": [], "estimate": []}), facts)
    drawn = [list(rows(charges)) for rows in (histogram_rows, distribution_rows, summary_rows)]
    done = time.perf_counter()
    print(f"{len(particles)} particles, {sessions} sessions, {groups} groups, {len(components)} components")
    print(f"reading the tables    {read - begun:6.2f} s")
    size = f"{sum(map(len, made))} rows, {len(words['statements'])} statements"
    print(f"comparison            {compared - read:6.2f} s ({size})")
    print(f"histograms            {done - compared:6.2f} s ({sum(map(len, drawn))} rows)")
    print(f"all                   {done - begun:6.2f} s; wanted: comparison below 20 s")


if __name__ == "__main__":
    main()
