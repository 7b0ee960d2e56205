"""Whether first-order intervals hold: compared with Monte Carlo as JCGM 101 has it, by refitting simulated readings."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass
from pathlib import Path

import numpy as np

from reduction import budget
from reduction.adjustment import adjust_alone
from reduction.budget import OwnSize
from reduction.check import check_campaign
from reduction.errors import InputError, ReductionError, nearest
from reduction.outcome import Outcome, outcome_of, own_sizes
from reduction.preparation import prepare
from reduction.refits import Trials, refits_alone, refits_together
from reduction.shapes import ends_u, symmetric_ends
from reduction.solution import adjust_session, fit_session

REPORTED = ("charge_to_mass", "drag_rate", "mass", "charge")
FEWEST = 200  # settled trials below which nothing is said
SURE = 2.0  # standard uncertainties by which a difference must clear the tolerance


def numerical_tolerance(u: float, digits: int = 2) -> float:
    """Half of the last digit of a standard uncertainty written with one or two digits.

    u = c 10^l with c of so many digits: delta = 10^l / 2

    Parameters
    ----------
    u : float
        Standard uncertainty, above 0.
    digits : int
        Significant digits of u that count, 1 or 2.

    Returns
    -------
    float
        delta in the unit of u.

    Notes
    -----
    JCGM 101:2008, 7.9.2.

    >>> numerical_tolerance(0.00035), numerical_tolerance(0.996, digits=1)
    (5e-06, 0.5)
    """
    if digits not in (1, 2):
        raise ValueError(f"digits {digits}: expected 1 or 2")
    power = int(f"{u:.{digits - 1}e}".partition("e")[2]) - (digits - 1)
    return float(f"5e{power - 1}")


@dataclass(frozen=True)
class Comparison:
    """A first-order interval beside one by Monte Carlo: differences of the ends, tolerance, and what follows."""

    low_difference: float
    high_difference: float
    tolerance: float
    u_low: float = 0.0  # what the number of trials leaves in each end
    u_high: float = 0.0

    @property
    def passes(self) -> bool:
        """Whether both ends agree within the tolerance."""
        return max(abs(self.low_difference), abs(self.high_difference)) <= self.tolerance

    @property
    def verdict(self) -> str:
        """`passes`, `fails`, or `undecided` where more trials could turn it."""
        ends = ((self.low_difference, self.u_low), (self.high_difference, self.u_high))
        if any(abs(difference) - SURE * u > self.tolerance for difference, u in ends):
            return "fails"
        return "passes" if all(abs(difference) + SURE * u <= self.tolerance for difference, u in ends) else "undecided"


def compare(
    first_order: tuple[float, float],
    monte_carlo: tuple[float, float],
    u: float,
    *,
    digits: int = 2,
    u_ends: tuple[float, float] = (0.0, 0.0),
) -> Comparison:
    """First-order interval against the Monte Carlo interval.

    |y -+ U_p - y_low,high| <= delta at both ends

    Parameters
    ----------
    first_order, monte_carlo : tuple of float
        Lower and upper end.
    u : float
        First-order standard uncertainty, which sets delta.
    digits : int
        Digits of u that count, 1 or 2.
    u_ends : tuple of float
        Standard uncertainty of the Monte Carlo ends from the number of trials.

    Returns
    -------
    Comparison
        Differences are first order less Monte Carlo.

    Notes
    -----
    JCGM 101:2008, 8.1 and 8.2.
    """
    low, high = (a - b for a, b in zip(first_order, monte_carlo, strict=True))
    return Comparison(low, high, numerical_tolerance(u, digits), *u_ends)


@dataclass(frozen=True)
class Verdict:
    """One result of one particle, first order and refitted, SI."""

    session: str
    particle: str
    result: str
    unit: str
    adjusted: str  # session or particle: what was adjusted together in every trial
    trials: int  # that settled
    unsettled: int
    value: float
    u: float
    low: float
    high: float
    mean: float
    sd: float
    refit_low: float
    refit_high: float
    comparison: Comparison


def refit(
    campaign_folder: Path | str, session: str, particle: str, trials: int, seed: int, *, digits: int = 1
) -> list[Verdict]:
    """Refit and readjust simulated readings of one particle, and compare with its reported intervals.

    Parameters
    ----------
    campaign_folder : path
        The campaign.
    session, particle : str
        Which particle.
    trials : int
        Number of trials, at least 200: thousands with `adjust: particle`; a few hundred with `adjust: session`, where
        each takes the adjustment of the whole session.
    seed : int
        Seed of the draws.
    digits : int
        Digits of u that the comparison takes seriously, 1 or 2; two take a hundred times the trials.

    Returns
    -------
    list of Verdict
        Charge-to-mass ratio, drag rate, mass and charge, as far as determined. With `adjust: campaign` the particle is
        validated as adjusted within its session.

    Raises
    ------
    InputError
        If the campaign has faults.
    ReductionError
        If there is no such particle, it has no result, or too few trials settle.
    """
    if trials < FEWEST:
        raise ReductionError(f"{trials} trials: expected at least {FEWEST}")
    campaign, logs, faults = check_campaign(campaign_folder)
    if len(faults):
        raise InputError(faults)
    if session not in logs:
        raise ReductionError(f"no session {session} to be reduced. {nearest(session, logs)}")
    prepared = prepare(campaign, campaign.sessions[session], logs[session])
    if particle not in prepared.names:
        raise ReductionError(f"session {session} has no particle {particle} to be reduced. "
                             f"{nearest(particle, prepared.names)}")  # fmt: skip
    reduced = fit_session(prepared, campaign.options.scatter)
    if campaign.options.mass_from != "adjusted":
        reduced.alone = adjust_alone(reduced.model.without("diameter"), reduced.alone.theta)
        reduced.model = reduced.alone.model
    adjusted, chosen = adjust_session(reduced, "particle" if campaign.options.adjust == "particle" else "session")
    outcome = outcome_of(campaign, campaign.sessions[session], logs[session], reduced, adjusted, chosen)
    return verdicts(outcome, particle, trials=trials, seed=seed, digits=digits)


def verdicts(outcome: Outcome, particle: str, *, trials: int, seed: int, digits: int = 1) -> list[Verdict]:
    """Refits of one particle of a reduced session; see `refit`."""
    if particle not in outcome.names:
        raise ReductionError(f"particle {particle} of session {outcome.session.id} has no result to validate")
    place = outcome.names.index(particle)
    if not any(outcome.known(place)):
        raise ReductionError(f"nothing is determined of particle {particle} of session {outcome.session.id}")
    size = None
    if outcome.campaign.options.mass_from == "diameter":
        size = own_sizes(outcome.prepared, np.array(sorted(outcome.place), dtype=np.intp))
    setting = outcome.adjusted.model.setting
    if outcome.alone:
        own = None if size is None else OwnSize(*(one[[place]] for one in (size.diameter, size.u, size.lot)))
        drawn = Trials(setting, outcome.session.id, [particle], outcome.reduced.scatter, trials, seed)
        logs = refits_alone(outcome.adjusted, place, drawn, own)
    else:
        drawn = Trials(setting, outcome.session.id, list(outcome.names), outcome.reduced.scatter, trials, seed)
        logs = refits_together(outcome.adjusted, place, drawn, size)
    found = []
    known = dict(zip(budget.RESULTS, outcome.known(place), strict=True))
    for result in REPORTED:
        if known[result]:
            found.append(_verdict(outcome, place, result, logs, digits))
    return found


def _verdict(outcome: Outcome, place: int, result: str, logs: np.ndarray, digits: int) -> Verdict:
    column = budget.RESULTS.index(result)
    value, u = float(outcome.results.value[place, column]), float(outcome.results.u[place, column])
    settled = np.isfinite(logs[:, column])
    sample = value * np.exp(logs[settled, column])
    if len(sample) < FEWEST:
        raise ReductionError(f"only {len(sample)} of {len(logs)} trials settled: expected at least {FEWEST}")
    coverage = outcome.campaign.options.coverage_probability
    ends = symmetric_ends(sample, coverage)
    low, high = (float(end[place, column]) for end in budget.interval(outcome.results, outcome.dof, coverage))
    return Verdict(
        outcome.session.id,
        outcome.names[place],
        result,
        budget.UNITS[result],
        "particle" if outcome.alone else "session",
        len(sample),
        int((~settled).sum()),
        value,
        u,
        low,
        high,
        float(sample.mean()),
        float(sample.std(ddof=1)),
        *ends,
        compare((low, high), ends, u, digits=digits, u_ends=ends_u(sample, coverage)),
    )


def report_text(found: Sequence[Verdict]) -> str:
    """Plain text of the verdicts on one particle, to be read in a terminal."""
    if not found:
        return "Nothing of this particle is determined.\n"
    first = found[0]
    how = "with its session" if first.adjusted == "session" else "alone"
    lines = [
        f"Session {first.session}, particle {first.particle}: {first.trials} sets of simulated readings, each fitted "
        f"and adjusted {how}.",
        "Weights, flags and exclusions as in the reduction.",
    ]
    if first.unsettled:
        lines.append(f"{first.unsettled} more did not settle and are left out.")
    for one in found:
        difference = one.comparison
        place = math.floor(math.log10(one.u)) - 2
        lines += ["", f"{one.result} [{one.unit}]: {difference.verdict}"]
        rows = (
            ("first order", one.value, one.u, one.low, one.high),
            ("refitted", one.mean, one.sd, one.refit_low, one.refit_high),
        )
        lines.append(f"  {'':12}{'value':>14}{'u':>14}{'low':>14}{'high':>14}")
        lines += [f"  {label:12}" + "".join(f"{_rounded(number, place):>14}" for number in row) for label, *row in rows]
        lines.append(
            f"  {'difference':12}{'':28}"
            + "".join(f"{number:>14.2g}" for number in (difference.low_difference, difference.high_difference))
        )
        lines.append(
            f"  {'its u':12}{'':28}" + "".join(f"{number:>14.2g}" for number in (difference.u_low, difference.u_high))
        )
        lines.append(f"  allowed at either end: {difference.tolerance:.2g}")
    if any(one.comparison.verdict == "undecided" for one in found):
        lines += ["", "Undecided: the difference cannot be told from the allowed one with so few trials."]
    return "\n".join(lines) + "\n"


def _rounded(number: float, place: int) -> str:
    """A number to the given power of ten, at most as many digits as it holds."""
    if number == 0.0:
        return "0"
    digits = max(math.floor(math.log10(abs(number))) - place, 1)
    return f"{number:.{digits}e}"
