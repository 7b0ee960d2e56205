"""Time per evaluation of the motion, against stepping through time to the same accuracy.

Run with `python tests/benchmarks/motion.py` from the project's root. The ratios are of one run on one machine, both
sides in one thread, in processor time. Both ways of stepping use the loosest tolerance of DOP853 that gives 1e-9:

(a) one drive period: the cleverest use, periodic motion and Floquet exponent from three solutions over one period
(b) trajectory: the plain use, the damped particle followed until its motion repeats to 1e-9 (stiffness, streak), and
    the free particle until its swing has faded to 1e-9 (secular frequency)

Stepping has steady drag throughout, the history force would cost it more. For the response peak it is given the settled
motion at one frequency only, where a search takes several.
"""

import time

import numpy as np
from scipy.integrate import solve_ivp

from reduction import motion

ACCURACY = 1e-9
PERIOD = 2 * np.pi
H, B = 0.15, 0.2


def seconds(function, *arguments, least=0.3, **options):
    """Shortest processor time of one call, over at least `least` seconds of calls."""
    function(*arguments, **options)
    best, begun = np.inf, time.process_time()
    while time.process_time() - begun < least:
        start = time.process_time()
        function(*arguments, **options)
        best = min(best, time.process_time() - start)
    return best


def integrated(force, start, span, rtol, **options):
    """One trajectory under a constant or time-dependent force."""

    def rate(t, y):
        return [y[1], force(t) - B * y[1] - 2.0 * H * np.cos(t) * y[0]]

    return solve_ivp(rate, span, start, method="DOP853", rtol=rtol, atol=1e-3 * rtol, **options)


def over_one_period(rtol):
    """(a) Stiffness and secular frequency from the periodic motion and the monodromy."""

    def rate(t, y):
        push = 2.0 * H * np.cos(t)
        return [y[1], -B * y[1] - push * y[0], y[3], -B * y[3] - push * y[2], y[5], 1 - B * y[5] - push * y[4]]

    start = [1.0, 0.0, 0.0, 1.0, 0.0, 0.0]
    run = solve_ivp(rate, (0, PERIOD), start, method="DOP853", rtol=rtol, atol=1e-3 * rtol, dense_output=True)
    end = run.y[:, -1]
    monodromy = np.array([[end[0], end[2]], [end[1], end[3]]])
    first = np.linalg.solve(np.eye(2) - monodromy, end[4:])
    y = run.sol(np.arange(64) / 64 * PERIOD)
    mean = np.mean(first[0] * y[0] + first[1] * y[2] + y[4])
    return 1.0 / mean, np.arccos(0.5 * np.trace(monodromy) * np.exp(np.pi * B)) / PERIOD


def until_periodic(rtol):
    """(b) Stiffness and streak factor from a trajectory followed until it repeats to 1e-9."""
    state, change = np.array([1.0 / motion.stiffness(H, B), 0.0]), np.inf
    while change > 0.1 * ACCURACY * abs(state[0]):
        run = integrated(lambda t: 1.0, state, (0, PERIOD), rtol, dense_output=True)
        state, change = run.y[:, -1], np.max(np.abs(run.y[:, -1] - state))
    z = run.sol(np.arange(64) / 64 * PERIOD)[0]
    ends = []
    for best in (np.argmax(z), np.argmin(z)):
        fine = np.linspace(best - 1, best + 1, 9) / 64 * PERIOD
        ends.append(np.polynomial.Chebyshev.fit(fine, run.sol(fine % PERIOD)[0], 8)(_turning(fine, run)))
    return 1.0 / np.mean(z), 0.5 * sum(ends) / np.mean(z)


def _turning(fine, run):
    speed = np.polynomial.Chebyshev.fit(fine, run.sol(fine % PERIOD)[1], 8).roots()
    real = speed[np.abs(speed.imag) < 1e-9].real
    return real[np.argmin(np.abs(real - fine[4]))]


def until_faded(rtol):
    """(b) Secular frequency from a swing seen once a period until it has faded to 1e-9."""
    count = int(np.ceil(-np.log(ACCURACY) / (0.5 * B) / PERIOD))
    seen = np.arange(count + 1) * PERIOD
    z = integrated(lambda t: 0.0, [1.0, 0.0], (0, seen[-1]), rtol, t_eval=seen).y[0]
    twice, once = np.linalg.lstsq(np.column_stack((z[1:-1], z[:-2])), z[2:], rcond=None)[0]
    return np.angle(np.roots([1.0, -twice, -once])[0]) % PERIOD / PERIOD


def until_settled(rtol):
    """(b) Response at one frequency of a scan, commensurate with the drive, followed until it repeats to 1e-9."""
    state, change = np.zeros(2), np.inf
    while change > 0.1 * ACCURACY * max(np.max(np.abs(state)), 1e-300):
        run = integrated(lambda t: np.cos(0.2 * t), state, (0, 5 * PERIOD), rtol, dense_output=True)
        state, change = run.y[:, -1], np.max(np.abs(run.y[:, -1] - state))
    t = np.arange(320) / 64 * PERIOD
    return 2.0 * abs(np.mean(run.sol(t)[0] * np.exp(-0.2j * t)))


def cost(stepped, exact):
    """Processor time at the loosest tolerance good enough, and that tolerance."""
    for rtol in 10.0 ** np.arange(-6.0, -13.5, -0.5):
        if np.all(np.abs(np.asarray(stepped(rtol)) / exact - 1.0) < ACCURACY):
            return seconds(stepped, rtol), rtol
    raise SystemExit(f"{stepped.__name__}: no tolerance gives {ACCURACY:.0e}")


def main():
    """Print the tables."""
    stiffness, streak, nu = motion.stiffness(H, B), motion.streak_factor(H, B), motion.ring_down(H, B)[0]
    ways = {
        "one period": (over_one_period, (stiffness, nu)),
        "until periodic": (until_periodic, (stiffness, streak)),
        "until faded": (until_faded, nu),
        "until settled": (until_settled, abs(motion.response(0.2, H, B))),
    }
    slow = {}
    print(f"stepping through time, one reading at h = {H}, b = {B}, to {ACCURACY:.0e}")
    for name, (stepped, exact) in ways.items():
        slow[name], rtol = cost(stepped, exact)
        print(f"  {name:16s} {slow[name] * 1e3:9.2f} ms   rtol {rtol:.0e}")
    rng = np.random.default_rng(1)
    count = 10_000
    h, b, history = rng.uniform(0.02, 0.2, count), rng.uniform(0.01, 0.4, count), rng.uniform(0.1, 0.6, count)
    steady, unsteady = (h, b), (h, b, 1e-3, history)
    print(f"{'evaluated for 10,000 readings':32s} {'ms':>8s} {'us each':>8s} {'times faster than (a)':>22s}", end="")
    print(f" {'than (b)':>12s}  (b) is")
    for name, function, arguments, plain in [
        ("stiffness, steady drag", motion.stiffness, steady, "until periodic"),
        ("stiffness, unsteady drag", motion.stiffness, unsteady, "until periodic"),
        ("streak_factor, steady drag", motion.streak_factor, steady, "until periodic"),
        ("streak_factor, unsteady drag", motion.streak_factor, unsteady, "until periodic"),
        ("ring_down, steady drag", motion.ring_down, steady, "until faded"),
        ("ring_down, unsteady drag", motion.ring_down, unsteady, "until faded"),
        ("response_peak, steady drag", motion.response_peak, steady, "until settled"),
        ("response_peak, unsteady drag", motion.response_peak, unsteady, "until settled"),
    ]:
        took = seconds(function, *arguments)
        each = took / count
        ratios = f"{slow['one period'] / each:22,.0f} {slow[plain] / each:12,.0f}  {plain}"
        print(f"{name:32s} {took * 1e3:8.2f} {each * 1e6:8.3f} {ratios}")
    few = (rng.uniform(0.1, 0.2, 7), np.full(7, 0.1), 6e-4, 0.5)
    print("evaluated for 7 readings of one particle, unsteady drag: ms")
    for function in (motion.stiffness, motion.streak_factor, motion.on_branch):
        print(f"  {function.__name__:16s} {seconds(function, *few) * 1e3:7.3f}")
    for function in (motion.ring_down, motion.response_peak):
        near = function(*few)[0] * 1.01
        plain, guessed = seconds(function, *few), seconds(function, *few, near=near)
        print(f"  {function.__name__:16s} {plain * 1e3:7.3f}   {guessed * 1e3:7.3f} with a guess 1 % off")


if __name__ == "__main__":
    main()
