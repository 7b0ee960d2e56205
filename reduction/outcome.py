"""One session solved and turned into results: what every table and the report of the session are written from."""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass, field

import numpy as np

from reduction import budget
from reduction.adjustment import Adjusted, adjust_alone
from reduction.budget import OwnSize, Results, results_of
from reduction.logs import Logs
from reduction.methods import Array, Flags, Indices
from reduction.montecarlo import result_intervals
from reduction.preparation import Prepared
from reduction.settings import Campaign, Session
from reduction.solution import Reduced, is_determined
from reduction.strain import OddOneOut, Strain, odd_one_out, strain_of

S, GAMMA, DIAMETER, MASS, CHARGE, DENSITY = range(6)  # places of the results, in the order of budget.RESULTS

DRAWN = (DIAMETER, MASS, CHARGE, DENSITY)  # results whose intervals come from Monte Carlo


@dataclass(frozen=True)
class Outcome:
    """A reduced session; `place` leads from a particle to its row in the adjustment and in the results."""

    campaign: Campaign
    session: Session
    logs: Logs
    prepared: Prepared
    reduced: Reduced
    adjusted: Adjusted
    place: Mapping[int, int]
    names: tuple[str, ...]  # of the particles adjusted, in their order
    alone: bool  # each particle kept to itself
    results: Results
    dof: Array
    low: Array
    high: Array
    sure: Flags  # (N, 2), charge-to-mass ratio and drag rate
    sized: Flags  # (N,), diameter
    reading_words: dict[tuple[str, int], list[str]] = field(default_factory=dict)  # log and row: flags
    flagged: list[list[object]] = field(default_factory=list)  # log, line, particle, text
    strain: Strain | None = None  # of the session adjusted together
    drag_alone: Adjusted | None = None  # particles adjusted alone without the diameter method, all of the session

    def known(self, place: int) -> list[bool]:
        """Which of the results of one row of the adjustment are determined."""
        s, gamma = self.sure[place]
        sized = bool(self.sized[place]) and bool(np.isfinite(self.results.value[place, MASS]))
        return [bool(s), bool(gamma), sized, sized, bool(s) and sized, bool(s) and sized]


def outcome_of(
    campaign: Campaign,
    session: Session,
    logs: Logs,
    reduced: Reduced,
    adjusted: Adjusted,
    chosen: Indices,
    odd: OddOneOut | None = None,
) -> Outcome:
    """Results, degrees of freedom and intervals of the `chosen` particles, as they were adjusted.

    `odd` is the particle that strains a whole campaign most; for a session adjusted by itself it is found here.
    """
    prepared, options = reduced.prepared, campaign.options
    names = [prepared.names[index] for index in chosen]
    alone = options.adjust == "particle" or adjusted is reduced.alone
    size = own_sizes(prepared, chosen) if options.mass_from == "diameter" else None
    results = results_of(adjusted, alone=alone, size=size)
    dof = budget.effective_dof(results, reduced.noise_dof)
    low, high = budget.interval(results, dof, options.coverage_probability)
    drawn = result_intervals(
        results,
        session=session.id,
        names=names,
        log_dof=reduced.noise_dof,
        trials=options.monte_carlo_trials,
        seed=options.seed,
        coverage=options.coverage_probability,
        size=size,
        pooled=options.adjust == "campaign",
    )
    for result in DRAWN:  # these depend on the size, whose powers are skewed
        known = np.isfinite(drawn.low[:, result]) & np.isfinite(drawn.high[:, result])
        low[:, result] = np.where(known, drawn.low[:, result], low[:, result])
        high[:, result] = np.where(known, drawn.high[:, result], high[:, result])
    sure = is_determined(adjusted)
    drag_alone = reduced.alone
    if "diameter" in drag_alone.model.logs:
        drag_alone = adjust_alone(drag_alone.model.without("diameter"), drag_alone.theta, near=True)
    _flag_sizes_from_lot(reduced, drag_alone)
    return Outcome(
        campaign,
        session,
        logs,
        prepared,
        reduced,
        adjusted,
        {int(index): place for place, index in enumerate(chosen)},
        tuple(names),
        alone,
        results,
        dof,
        low,
        high,
        sure,
        sure[:, 1] if size is None else np.isfinite(size.u),
        drag_alone=drag_alone,
        strain=None if alone else strain_of(adjusted, names, odd or odd_one_out([adjusted], [names])),
    )


def _flag_sizes_from_lot(reduced: Reduced, drag_alone: Adjusted) -> None:
    """Flag particles whose size only the lot's mean and spread fix."""
    log = reduced.model.logs.get("diameter")
    if log is None:
        return
    open_without = ~is_determined(drag_alone)[:, 1]
    for index in log.particle[log.lot & open_without[log.particle]].tolist():
        reduced.flags[index].add("size_from_lot")


def own_sizes(prepared: Prepared, chosen: Indices) -> OwnSize:
    """Own diameter, else the lot's mean with its spread, of the chosen particles; u is nan where there is neither."""
    count = len(chosen)
    diameter, u, lot = np.ones(count), np.full(count, math.nan), np.zeros(count, bool)
    log = prepared.logs.get("diameter")
    if log is None:
        return OwnSize(diameter, u, lot)
    place = {int(index): row for row, index in enumerate(chosen)}
    estimate = {one.role: one.quantity.estimate for one in prepared.setting.inputs}
    for at, index in enumerate(log.particle):
        row = place.get(int(index))
        if row is not None:
            lot[row] = log.lot[at]
            kind = prepared.species[int(index)]
            diameter[row] = estimate[f"lot_diameter:{kind}"] if log.lot[at] else log.observed[at]
            u[row] = log.u[at] * (diameter[row] if log.lot[at] else 1.0)
    return OwnSize(diameter, u, lot)
