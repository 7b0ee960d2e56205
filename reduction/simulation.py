"""A campaign with known truth, for planning, teaching and tests.

Everything uncertain is drawn from what the files state, each input once for what shares it; the particles then move
as the exact linear equation of motion says, and the readings scatter by their u. The truth is written beside the
campaign, never inside.
"""

from __future__ import annotations

import datetime
from dataclasses import dataclass
from pathlib import Path

from reduction.errors import ResultsError
from reduction.simulationexample import EXAMPLE_SEED, example_plan
from reduction.simulationfiles import (
    READING,
    truth_rows,
    write_campaign,
    write_log,
    write_lost,
    write_particles,
    write_session,
    write_species,
    write_trap,
    write_true_groups,
    write_true_inputs,
    write_truth,
)
from reduction.simulationplan import ALPHABET, DIALECTS, PLANS, REGIMES, Habits, Plan
from reduction.simulationreadings import CONVENTIONS, Bench, Log, measure, operating_reach
from reduction.simulationtruth import Particles, Setting, TrueInputs, draw_particles, draw_setting, material_charge

__all__ = [
    "EXAMPLE_SEED",
    "PLANS",
    "REGIMES",
    "Habits",
    "Plan",
    "Simulated",
    "example_plan",
    "simulate_campaign",
    "simulate_session",
]

FASTEST_DRIFT = 1e-4  # [1/s]: some 15 % while one particle is measured
FIRST_DAY = datetime.date(2024, 3, 4)  # an invented calendar: one session every other day


@dataclass(frozen=True)
class Simulated:
    """One simulated session in memory."""

    setting: Setting  # the apparatus as it truly is
    particles: Particles  # the true particles
    logs: dict[str, Log]
    bench: Bench


def simulate_session(plan: Plan, *, seed: int, number: int, taken: TrueInputs | None = None) -> Simulated:
    """Draw and measure one session of a plan; the other sessions make no difference to it.

    Parameters
    ----------
    plan : Plan
        The campaign it belongs to.
    seed : int
        Same plan, seed and number, same session.
    number : int
        Which session, counted from 0.
    taken : TrueInputs, optional
        Collects the true shared inputs of several sessions.

    Returns
    -------
    Simulated
        Truth and readings (SI).
    """
    regime = plan.regime_of(number)
    session = plan.session_ids()[number]
    habits = plan.habits_of(session)
    setting = draw_setting(taken if taken is not None else TrueInputs(seed), plan, seed, number)
    particles = draw_particles(setting, plan, seed, number, plan.particle_ids())
    bench = Bench(setting, regime, particles, habits, operating_reach(setting, regime, particles), session, seed)
    return Simulated(setting, particles, measure(bench, habits.logs or regime.logs), bench)


def simulate_campaign(folder: Path, *, plan: Plan, seed: int) -> Path:
    """Write a campaign into a new folder and its truth beside it.

    Parameters
    ----------
    folder : Path
        The campaign; made here, or there and empty.
    plan : Plan
        What to simulate; `PLANS` holds one for each regime.
    seed : int
        Same plan and seed, same bytes. A session does not depend on how many there are.

    Returns
    -------
    Path
        `<folder>.truth.csv`, true particles; beside it `<folder>.truth_inputs.csv` and `<folder>.truth_groups.csv`.

    Raises
    ------
    ResultsError
        If the folder holds anything, or the plan asks for what there is not.
    """
    _check(plan)
    folder = Path(folder)
    if folder.name in ("", ".."):  # such a path has no name to write the truth beside
        folder = folder.resolve()
    if folder.exists() and (not folder.is_dir() or any(folder.iterdir())):
        message = f"{folder.name} is there already and not empty. Name a new folder, or empty it first."
        raise ResultsError(message)
    folder.mkdir(parents=True, exist_ok=True)
    write_campaign(folder, plan)
    taken, rows = TrueInputs(seed), []
    for number, session in enumerate(plan.session_ids()):
        regime, habits = plan.regime_of(number), plan.habits_of(session)
        one = simulate_session(plan, seed=seed, number=number, taken=taken)
        place = folder / "sessions" / session
        date = FIRST_DAY + datetime.timedelta(days=2 * number)
        write_session(folder, plan, number, one.setting, habits, habits.logs or regime.logs, date.isoformat())
        write_trap(folder, plan.trap_of(number), regime, plan.drawings.get(plan.trap_of(number), ""))
        write_species(folder, regime)
        for log in one.logs.values():
            write_log(place / f"{log.name}.csv", log, one.particles.ids, habits, regime.reading["dc_voltage_V"])
        write_particles(place / "particles.csv", one.particles, one.setting, habits, seed, session)
        write_lost(place / "lost.csv", regime, habits, seed, session)
        gross = [name for log in one.logs.values() for name in log.gross]
        rows += truth_rows(session, regime.species, plan.material_of(number), regime.name, one.particles, gross)
    truth = beside(folder, "truth")
    write_truth(truth, rows)
    write_true_inputs(beside(folder, "truth_inputs"), taken.rows())
    write_true_groups(beside(folder, "truth_groups"), _groups(plan, seed))
    return truth


def beside(folder: Path, what: str) -> Path:
    """Table of the truth that lies beside a simulated campaign."""
    return folder.with_name(f"{folder.name}.{what}.csv")


def _groups(plan: Plan, seed: int) -> list[list[str]]:
    visits = [plan.visit(number) for number in range(plan.sessions)]
    spreads = [repr(plan.between_sessions), repr(plan.between_particles)]
    return [
        [name, material, repr(material_charge(seed, material) * REGIMES[name].charge_scale), *spreads]
        for name, material in sorted({(one.regime, one.material) for one in visits})
    ]


def _check(plan: Plan) -> None:
    """Refuse a plan that asks for something unknown."""
    habits = [plan.habits, *plan.differing.values()]
    words = [("regime", one, sorted(REGIMES)) for one in [*plan.regimes, *(visit.regime for visit in plan.schedule)]]
    words += [("session", one, list(plan.session_ids())) for one in plan.differing]
    for one in habits:
        words += [
            ("dialect", one.dialect, sorted(DIALECTS)),
            ("drive voltage", one.drive_voltage, sorted(CONVENTIONS)),
            ("height reading", one.height_reading, ["streak_middle", "time_average"]),
            ("secular reading", one.secular_reading, ["response_peak", "ring_down"]),
            *(("log", log, sorted(READING)) for log in one.logs),
            *(("particle", particle, list(plan.particle_ids())) for particle in one.excluded_particles),
        ]
        for name in [*one.outlier_readings, *one.excluded_readings]:
            log, particle, _ = (*name.split(":"), "", "")[:3]
            words += [("log", log, sorted(READING)), ("particle", particle, list(plan.particle_ids()))]
        if not (0.0 <= one.outliers <= 1.0 and 0.0 <= one.scatter < float("inf") and one.lost >= 0):
            raise ResultsError("outliers is a probability from 0 to 1; scatter and lost are 0 or more.")
        if not abs(one.charge_drift_per_s) <= FASTEST_DRIFT:
            raise ResultsError(
                f"found a charge drift of {one.charge_drift_per_s:g} per second; expected at most {FASTEST_DRIFT:g} "
                "either way, or the particle is lost before it is measured."
            )
    for what, word, known in words:
        if word not in known:
            raise ResultsError(f"there is no {what} {word}. Choose one of {', '.join(known)}.")
    if min(plan.sessions, plan.particles, plan.traps, len(plan.regimes), len(plan.materials)) < 1:
        raise ResultsError("a plan needs at least one regime, material, trap, session and particle.")
    if plan.traps > len(ALPHABET) or any(visit.trap not in range(len(ALPHABET)) for visit in plan.schedule):
        raise ResultsError(f"a plan has {len(ALPHABET)} traps of each regime at most.")
    if not all(plan.visit(number).material.strip() for number in range(plan.sessions)):
        raise ResultsError("a material has no name. Name materials with commas between, such as glass,wool.")
