"""Cost and accuracy of trap constants from a drawing: a wire ring, two plates with holes, a can (invented).

    python tests/benchmarks/electrodes.py [TRIALS]

With the package installed, or PYTHONPATH naming the checkout; OPENBLAS_NUM_THREADS=1 for one core; half a minute.
Prints, in one run: the time of one solution and what it says of its error; the true error, against the same drawing
with every panel halved and more nodes; how the error falls with nodes; the time of the tolerance budget,
also over that of one solution; that of Monte Carlo draws. Aims: 1e-6 within 10 s, the budget within a minute.
"""

from __future__ import annotations

import sys
import time
from collections.abc import Callable
from pathlib import Path
from typing import TypeVar

import numpy as np

sys.path.insert(0, str(Path(__file__).resolve().parents[1]))
from electrodes_drawn import NOMINAL, TOLERANCES, block, can, ring_and_plates

from reduction.conductors import Electrodes
from reduction.electrodes import Solution, solution, solve
from reduction.tolerances import monte_carlo, tolerance_budget
from reduction.trapfield import TrapField

T = TypeVar("T")


def timed(work: Callable[[], T]) -> tuple[T, float]:
    """Result and seconds of core time."""
    start = time.process_time()
    result = work()
    return result, time.process_time() - start


def error(found: TrapField | Solution, exact: Solution) -> float:
    """Larger relative error of D and A."""
    if isinstance(found, TrapField):
        d, a = found.dc_field_per_volt, found.ac_gradient_per_volt
    else:
        d, a = found.dc[0], abs(found.drive[1])
    return float(max(abs(d / exact.dc[0] - 1.0), abs(a / abs(exact.drive[1]) - 1.0)))


def square_ring() -> Electrodes:
    """Everything with square edges."""
    plates = (block("upper", "dc_above", 0.5, 10, 4, 5.5), block("lower", "dc_below", 0.5, 10, -5.7, -4.2))
    return Electrodes((block("ring", "drive", 5, 9, -1, 1), *plates, can(25, 20)))


def main(trials: int) -> None:
    """Measure and print."""
    for name, drawn in (("wire ring", ring_and_plates(NOMINAL)), ("square ring", square_ring())):
        field, spent = timed(lambda drawn=drawn: solve(drawn))
        exact = solution(drawn, field.mesh.halved(np.arange(len(field.boundary.panels))), 20, near=field.centre)
        print(
            f"{name}, plates, can: {spent:.2f} s of core time, {len(field.charges)} nodes, "
            f"error of D and A stated {field.numerical_u:.0e}, true {error(field, exact):.0e}"
        )
        for order in (4, 6, 8, 10, 13, 16):
            found, spent = timed(lambda drawn=drawn, m=field.mesh, order=order: solution(drawn, m, order))
            print(f"  {order:2d} nodes a panel: {spent:.3f} s, error {error(found, exact):.0e}")
    field, once = timed(lambda: solve(ring_and_plates(NOMINAL)))
    budget, spent = timed(lambda: tolerance_budget(ring_and_plates, NOMINAL, TOLERANCES))
    print(f"tolerance budget of {len(NOMINAL)} dimensions: {spent:.1f} s, {spent / once:.1f} solutions")
    print("u of ln D, ln A [1], centre [mm]: {:.2e} {:.2e} {:.2e}".format(*(budget.u_results * [1.0, 1.0, 1e3])))
    draws = NOMINAL + TOLERANCES * np.random.default_rng(1).standard_normal((trials, len(NOMINAL)))
    results, spent = timed(lambda: monte_carlo(ring_and_plates, draws, field=field))
    ratios = results.std(axis=0, ddof=1) / budget.u_results
    print(f"Monte Carlo: {1e3 * spent / trials:.0f} ms a draw; its u over that of the budget, {trials} draws:", end=" ")
    print(" ".join(f"{ratio:.3f}" for ratio in ratios), f"(+- {1.0 / np.sqrt(2.0 * trials):.3f})")


if __name__ == "__main__":
    main(int(sys.argv[1]) if len(sys.argv) > 1 else 300)
