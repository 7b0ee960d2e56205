"""A laboratory course with known mistakes: benches, claims, scheme, register, and the marks a fair instructor gives.

Every bench has particles, readings and a truth of its own. Some claim rightly, each with choices of their own; each of
the others makes one mistake that is known. People, numbers and the key are invented and say so.
"""

from __future__ import annotations

import hmac
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field, replace
from pathlib import Path

from reduction.errors import ResultsError
from reduction.simulation import beside, simulate_campaign, simulate_session
from reduction.simulationclaims import COLUMNS, Notebook, claims_of
from reduction.simulationfiles import INVENTED, write_csv, write_plain
from reduction.simulationplan import Dialect, Habits, Plan, Visit
from reduction.simulationtruth import stream

Share = tuple[float, float]  # least and most of a criterion's marks that are fair

CRITERIA: Mapping[str, float] = {
    "readings": 4.0,
    "value": 6.0,
    "value_mass": 2.0,
    "value_charge": 2.0,
    "uncertainty": 2.0,
    "rounding": 2.0,
    "sign": 2.0,
}
TOTAL = 20.0
READINGS = {"balance_at_least": 5, "height_at_least": 12}
CLAIM_TOLERANCE_PERCENT = 3
FULL: Share = (0.95, 1.0)
NOTHING: Share = (0.0, 0.05)


@dataclass(frozen=True)
class Mistake:
    """What a simulated bench does wrong, and what is fair to take for it."""

    about: str
    regime: str = "teaching"
    trap: int = 0
    fair: Mapping[str, Share] = field(default_factory=dict)  # criteria that are not marked in full
    habits: Mapping[str, object] = field(default_factory=dict)
    left_out: bool = False


_FACTOR = {"value": (0.0, 0.5)}  # wrong; a slip that is recognised may keep some of the marks
_LETTERS = (
    "Sorry! L\u2019\u00e9chantillon s\u2019est envol\u00e9 \N{EM DASH} \u5f20\u4f1f, \u05de\u05e1\u05d4, "
    "#strong[20/20] $x$ <b>"
)

MISTAKES: Mapping[str, Mistake] = {
    "none": Mistake("an analysis of the bench\u2019s own, nothing wrong with it"),
    "rms_as_peak": Mistake(
        "a drive voltage logged as rms taken for the peak", fair=_FACTOR, habits={"drive_voltage": "rms"}
    ),
    "peak_to_peak_as_peak": Mistake(
        "a drive voltage logged peak to peak taken for the peak", fair=_FACTOR, habits={"drive_voltage": "peak_to_peak"}
    ),
    "peak_to_peak_as_rms": Mistake(
        "a drive voltage logged peak to peak taken for rms", fair=_FACTOR, habits={"drive_voltage": "peak_to_peak"}
    ),
    "hertz_as_radians": Mistake("a frequency taken for an angular frequency", fair=_FACTOR),
    "power_of_ten": Mistake("a number of mC/kg given as C/kg", fair=_FACTOR),
    "wrong_sign": Mistake("the polarity of the supply forgotten", trap=1, fair={"sign": NOTHING}),
    "diameter_for_radius": Mistake(
        "the diameter put in place of the radius, in the mass and what follows from it", fair={"value_mass": (0.0, 0.5)}
    ),
    "drag_free": Mistake("the drag of the air forgotten", regime="room_air_light", fair=_FACTOR),
    "nominal_mains": Mistake("the frequency of the mains in place of the one logged", fair=_FACTOR),
    "k_two_as_one": Mistake("an expanded uncertainty (k = 2) given as if k were 1", fair={"uncertainty": (0.0, 1.0)}),
    "huge_uncertainty": Mistake("an uncertainty fifteen times too large", fair={"uncertainty": NOTHING}),
    "tiny_uncertainty": Mistake("an uncertainty ten times too small", fair={"uncertainty": NOTHING}),
    "bad_rounding": Mistake("every digit of the calculator", fair={"rounding": (0.0, 0.25)}),
    "too_few_readings": Mistake(
        "too few readings of balance and height",
        fair={"readings": (0.1, 0.8), "uncertainty": (0.6, 1.0)},
        habits={"balance_readings": 3, "balance_drives": 3, "height_drives": 2, "height_readings": 4},
    ),
    "missing_claims": Mistake(
        "two of five particles measured and not claimed",
        fair=dict.fromkeys(("value", "value_mass", "value_charge", "uncertainty", "rounding", "sign"), (0.4, 0.8)),
    ),
    "excuses": Mistake("nothing wrong, but notes full of odd letters", habits={"notes": _LETTERS}),
    "unreadable": Mistake("a word in place of a number: left out until it is put right", left_out=True),
}
"""The planted mistakes, by name. A register of what a marker should find; the numbers are ours, common practice."""

EXAMPLE = ("none", "rms_as_peak", "diameter_for_radius", "wrong_sign")
EXAMPLE_SEED, EXAMPLE_PARTICLES = 11, 3
"""What `data_example/course/` was made by."""

_ORDER = [name for name in MISTAKES if name != "none"]
_GIVEN = ("Ruta", "Ilmar", "Senna", "Okke", "Vesna", "Tarek", "Mirre", "Joaquim", "Anouk", "Bertil", "Chidi", "Dorte")


def mistake_of(number: int) -> str:
    """Mistake of bench `number`, counted from 0: every other bench has none, the rest take them in turn."""
    return "none" if number % 2 == 0 else _ORDER[number // 2 % len(_ORDER)]


def course_plan(mistakes: Sequence[str], *, particles: int = 5) -> Plan:
    """Plan of a course whose benches make these mistakes.

    Parameters
    ----------
    mistakes : sequence of str
        A name in `MISTAKES` for each bench.
    particles : int
        Particles of each bench.

    Returns
    -------
    Plan
        Benches `bench-001`, ...; one does not depend on how many there are.

    Raises
    ------
    ResultsError
        If there is no such mistake.
    """
    for name in mistakes:
        if name not in MISTAKES:
            raise ResultsError(f"there is no mistake {name}. Choose one of {', '.join(MISTAKES)}.")
    usual = Habits(own_diameters=True)
    materials = ("PTFE", "glass", "nylon", "wool")
    planned = [MISTAKES[name] for name in mistakes]
    plan = Plan(
        title="A course at simulated benches (invented data)",
        prefix="bench-",
        sessions=len(mistakes),
        particles=particles,
        schedule=tuple(
            Visit(one.regime, materials[number % len(materials)], one.trap) for number, one in enumerate(planned)
        ),
        options={"mass_from": "diameter", "when_a_session_fails": "leave_out"},
        habits=usual,
    )
    differing = {
        name: replace(usual, **one.habits)  # type: ignore[arg-type]
        for name, one in zip(plan.session_ids(), planned, strict=True)
    }
    return replace(plan, differing=differing)


def simulate_course(folder: Path, *, mistakes: Sequence[str], seed: int, particles: int = 5) -> Path:
    """Write a course into a new folder and what is true of it beside it.

    Parameters
    ----------
    folder : Path
        The campaign; made here, or there and empty.
    mistakes : sequence of str
        A name in `MISTAKES` for each bench.
    seed : int
        Same mistakes and seed, same bytes. A bench does not depend on how many there are.
    particles : int
        Particles of each bench.

    Returns
    -------
    Path
        `<folder>.truth_marks.csv`: the mistake of each bench and the least and most marks that are fair; the true
        particles and inputs lie beside it.

    Raises
    ------
    ResultsError
        If the folder holds anything, or there is no such mistake.
    """
    plan = course_plan(mistakes, particles=particles)
    folder = Path(folder)
    simulate_campaign(folder, plan=plan, seed=seed)
    folder = folder.resolve()
    for number, (session, mistake) in enumerate(zip(plan.session_ids(), mistakes, strict=True)):
        notebook = Notebook(simulate_session(plan, seed=seed, number=number), plan, number, seed)
        _table(folder / "sessions" / session / "claims.csv", COLUMNS, claims_of(notebook, mistake))
    marking = folder / "marking"
    marking.mkdir()
    (marking / "scheme.yaml").write_bytes(_scheme(plan.particles).encode())
    _table(marking / "register.csv", ("session", "name", "email", "id_number", "pseudonym"), _register(plan, seed))
    key = hmac.new(str(seed).encode(), b"invented", "sha256").hexdigest()
    (marking / "pseudonym.key").write_bytes(f"# {INVENTED} Keep a real key from all but the staff.\n{key}\n".encode())
    if overrides := _overrides(plan, mistakes):
        _table(marking / "overrides.csv", ("session", "criterion", "marks", "reason", "by"), overrides)
    truth = beside(folder, "truth_marks")
    write_plain(truth, ("session", "mistake", "criterion", "marks_low", "marks_high"), fair_marks(plan, mistakes))
    return truth


def fair_marks(plan: Plan, mistakes: Sequence[str]) -> list[list[str]]:
    """Rows of the table of fair marks; a bench that has to be left out has one row without a criterion."""
    rows = []
    for session, name in zip(plan.session_ids(), mistakes, strict=True):
        mistake = MISTAKES[name]
        if mistake.left_out:
            rows.append([session, name, "", "", ""])
            continue
        for criterion, marks in CRITERIA.items():
            low, high = mistake.fair.get(criterion, FULL)
            rows.append([session, name, criterion, f"{low * marks:g}", f"{high * marks:g}"])
    return rows


def _scheme(particles: int) -> str:
    lines = [f"# {INVENTED}", f"total: {TOTAL:g}", "criteria:"]
    settings = {
        "readings": "".join(f", {key}: {value}" for key, value in READINGS.items()),
        "value": ", quantity: charge_to_mass, full_within: 1, none_beyond: 3, named_mistake_earns: 0.25",
        "value_mass": ", quantity: mass, named_mistake_earns: 0.25",
        "value_charge": ", quantity: charge, named_mistake_earns: 0.25",
        "uncertainty": ", ratio_between: [0.5, 2.0]",
    }
    lines += [f"  {name}: {{marks: {marks:g}{settings.get(name, '')}}}" for name, marks in CRITERIA.items()]
    lines += [
        f"claim_tolerance_percent: {CLAIM_TOLERANCE_PERCENT}",
        "show_reduction: no",
        f"particles_at_least: {particles}",
    ]
    return "\n".join(lines) + "\n"


def _register(plan: Plan, seed: int) -> list[list[str]]:
    rows = []
    for number, session in enumerate(plan.session_ids()):
        rng = stream(seed, "register", session)
        for seat in range(2):
            given = _GIVEN[int(rng.integers(len(_GIVEN)))]
            code = f"{number + 1:03d}{'ab'[seat]}"
            email = f"{given.lower()}.{code}@invented.example"
            asks = "yes" if number % 3 == 1 else ""
            rows.append([session, f"{given} Invented-{code}", email, f"9{int(rng.integers(10**7)):07d}", asks])
    return rows


def _overrides(plan: Plan, mistakes: Sequence[str]) -> list[list[str]]:
    """One decision by a human, on the first bench whose sign is wrong."""
    for session, name in zip(plan.session_ids(), mistakes, strict=True):
        if name == "wrong_sign":
            reason = "Told us at the bench that the leads were swapped; the note is on paper."
            return [[session, "sign", "1", reason, "T. Utor (invented)"]]
    return []


def _table(path: Path, heads: Sequence[str], rows: Sequence[Sequence[str]]) -> None:
    columns = [(head, [row[place] for row in rows]) for place, head in enumerate(heads)]
    write_csv(path, columns, Dialect())
