"""How often two groups that do not differ are said to differ: sessions as the unit against particles as the unit.

    python tests/studies/false_alarms.py [TRIALS]

With the package installed, or PYTHONPATH naming the checkout; minutes. Prints a table for the documentation. Groups of
a few sessions of 20 or 50 particles with a share of the variance between sessions (intraclass correlation); nominal
level 5 %.
"""

from __future__ import annotations

import math
import sys

import numpy as np
from scipy import sparse, stats

from reduction.groupmeans import group_means
from reduction.pairs import pairs_of
from reduction.sessionmeans import Cells

CASES = [(k, n, r) for k, n in ((2, 20), (3, 20), (3, 50), (5, 20), (8, 20)) for r in (0.0, 0.1, 0.3, 0.5)]


def alarms(sessions: int, particles: int, correlation: float, trials: int, rng: np.random.Generator) -> list[float]:
    """Share of trials below 5 %: ours, Welch on session means, Welch and rank sum on particles."""
    total, hits = 2 * sessions, np.zeros(4)
    names = tuple(f"s{k}" for k in range(total))
    groups = ("a",) * sessions + ("b",) * sessions
    count, nothing = np.full(total, float(particles)), np.zeros(total)
    for _ in range(trials):
        x = math.sqrt(correlation) * rng.standard_normal((total, 1))
        x = x + math.sqrt(1.0 - correlation) * rng.standard_normal((total, particles))
        mean = x.mean(axis=1)
        squares = ((x - mean[:, None]) ** 2).sum(axis=1)
        cells = Cells(names, groups, count, mean, squares, nothing, nothing, sparse.csr_array((total, 0)))
        (pair,) = pairs_of(group_means(cells), coverage=0.95)
        a, b = x[:sessions].ravel(), x[sessions:].ravel()
        p = [pair.p, stats.ttest_ind(mean[:sessions], mean[sessions:], equal_var=False).pvalue,
             stats.ttest_ind(a, b, equal_var=False).pvalue, stats.mannwhitneyu(a, b).pvalue]  # fmt: skip
        hits += np.array(p) < 0.05
    return (100.0 * hits / trials).tolist()


def main() -> None:
    """Print the table."""
    trials = int(sys.argv[1]) if len(sys.argv) > 1 else 4000
    rng = np.random.default_rng(2024)
    print(f"False alarms in percent at a nominal 5 %, {trials} trials, u {100 * math.sqrt(0.05 * 0.95 / trials):.1f}\n")
    heads = ["sessions", "particles each", "correlation", "this program", "Welch, session means", "Welch, particles"]
    print(f"| {' | '.join([*heads, 'rank sum, particles'])} |")
    print("|--:|--:|--:|--:|--:|--:|--:|")
    for sessions, particles, correlation in CASES:
        shares = " | ".join(f"{share:.1f}" for share in alarms(sessions, particles, correlation, trials, rng))
        print(f"| {sessions} | {particles} | {correlation:g} | {shares} |", flush=True)


if __name__ == "__main__":
    main()
