"""Time per evaluation of the motion, against stepping through time to the same accuracy.

Run with `python tests/benchmarks/motion.py` from the project's root. Prints one table; the ratios are of one run on one
machine, both sides in one thread, in processor time.
"""

import time

import numpy as np
from scipy.integrate import solve_ivp

from reduction import motion

ACCURACY = 1e-9


def seconds(function, *arguments, least=0.3):
    """Shortest processor time of one call, over at least `least` seconds of calls."""
    function(*arguments)
    best, begun = np.inf, time.process_time()
    while time.process_time() - begun < least:
        start = time.process_time()
        function(*arguments)
        best = min(best, time.process_time() - start)
    return best


def stepped(h, b, rtol):
    """Stiffness and half trace from the periodic motion and the monodromy, by time integration."""

    def rate(t, y):
        push = 2.0 * h * np.cos(t)
        return [y[1], -b * y[1] - push * y[0], y[3], -b * y[3] - push * y[2], y[5], 1 - b * y[5] - push * y[4]]

    start = [1.0, 0.0, 0.0, 1.0, 0.0, 0.0]
    run = solve_ivp(rate, (0, 2 * np.pi), start, method="DOP853", rtol=rtol, atol=1e-3 * rtol, dense_output=True)
    end = run.y[:, -1]
    monodromy = np.array([[end[0], end[2]], [end[1], end[3]]])
    first = np.linalg.solve(np.eye(2) - monodromy, end[4:])
    y = run.sol(np.arange(64) / 64 * 2 * np.pi)
    mean = np.mean(first[0] * y[0] + first[1] * y[2] + y[4])
    return 1.0 / mean, 0.5 * np.trace(monodromy) * np.exp(np.pi * b)


def tolerance_for(h, b):
    """Loosest tolerance of the integrator that gives the stiffness to the accuracy asked for."""
    exact = motion.stiffness(h, b)
    for rtol in 10.0 ** np.arange(-6.0, -13.5, -0.5):
        if abs(stepped(h, b, rtol)[0] / exact - 1.0) < ACCURACY:
            return rtol
    return 1e-13


def main():
    """Print the table."""
    h, b = 0.15, 0.2
    rtol = tolerance_for(h, b)
    slow = seconds(stepped, h, b, rtol)
    print(
        f"time integration (DOP853, rtol {rtol:.0e}): {slow * 1e3:.2f} ms for stiffness and half trace of one reading"
    )
    rng = np.random.default_rng(1)
    count = 10_000
    h, b = rng.uniform(0.02, 0.2, count), rng.uniform(0.01, 0.4, count)
    history = rng.uniform(0.1, 0.6, count)
    print(f"{'evaluated for 10,000 readings':34s} {'ms':>8s} {'us each':>8s} {'times faster':>13s}")
    for name, function, arguments in [
        ("stiffness, steady drag", motion.stiffness, (h, b)),
        ("stiffness, unsteady drag", motion.stiffness, (h, b, 1e-3, history)),
        ("streak_factor, unsteady drag", motion.streak_factor, (h, b, 1e-3, history)),
        ("ring_down, steady drag", motion.ring_down, (h, b)),
        ("ring_down, unsteady drag", motion.ring_down, (h, b, 1e-3, history)),
        ("response_peak, unsteady drag", motion.response_peak, (h, b, 1e-3, history)),
    ]:
        took = seconds(function, *arguments)
        each = took / count
        print(f"{name:34s} {took * 1e3:8.2f} {each * 1e6:8.3f} {slow / each:13,.0f}")


if __name__ == "__main__":
    main()
