"""A simulated course: benches with known mistakes in their claims, fair marks beside them."""

from __future__ import annotations

import csv
import math
from pathlib import Path

import pytest

from reduction.check import check_campaign
from reduction.digests import input_files
from reduction.errors import ResultsError
from reduction.simulationcourse import (
    CRITERIA,
    EXAMPLE,
    EXAMPLE_PARTICLES,
    EXAMPLE_SEED,
    MISTAKES,
    mistake_of,
    simulate_course,
)
from reduction.units import from_unit

ALL = list(MISTAKES)
HERE = Path(__file__).resolve().parent
COURSE = HERE.parent / "data_example" / "course"


def rows_of(path: Path) -> list[dict[str, str]]:
    return list(csv.DictReader(line for line in path.read_text(encoding="utf-8").splitlines() if line[:1] != "#"))


def files_of(folder: Path) -> dict[str, bytes]:
    return {path.relative_to(folder).as_posix(): path.read_bytes() for path in folder.rglob("*") if path.is_file()}


def bench(number: int) -> str:
    return f"bench-{number + 1:03d}"


@pytest.fixture(scope="module")
def course(tmp_path_factory: pytest.TempPathFactory) -> Path:
    folder = tmp_path_factory.mktemp("course") / "course"
    simulate_course(folder, mistakes=ALL, seed=4)
    return folder


@pytest.fixture(scope="module")
def ratios(course: Path) -> dict[tuple[str, str, str], float]:
    """Claimed over true value, by mistake, particle and quantity."""
    truth = {(row["session"], row["particle"]): row for row in rows_of(course.with_name("course.truth.csv"))}
    columns = {"charge_to_mass": "charge_to_mass_C_per_kg", "mass": "mass_kg", "charge": "charge_C"}
    found = {}
    for number, mistake in enumerate(ALL):
        if MISTAKES[mistake].left_out:
            continue
        for row in rows_of(course / "sessions" / bench(number) / "claims.csv"):
            true = float(truth[bench(number), row["particle"]][columns[row["quantity"]]])
            value = from_unit(float(row["value"]), row["unit"].replace("/", "_per_"))
            found[mistake, row["particle"], row["quantity"]] = value / true
    return found


def test_the_readings_of_every_bench_are_fit_to_be_reduced(course: Path) -> None:
    campaign, logs, faults = check_campaign(course)
    assert [str(fault) for fault in faults] == []
    assert set(logs) == set(campaign.sessions) == {bench(number) for number in range(len(ALL))}


@pytest.mark.parametrize(
    "mistake", ["none", "k_two_as_one", "huge_uncertainty", "bad_rounding", "too_few_readings", "excuses"]
)
def test_a_right_analysis_comes_out_near_the_truth(mistake: str, ratios: dict[tuple[str, str, str], float]) -> None:
    own = {key[1:]: ratio for key, ratio in ratios.items() if key[0] == mistake}
    assert len(own) == 15
    for (_, quantity), ratio in own.items():
        # three standard uncertainties: of the field per volt for q/m, of a diameter to the third power for mass
        assert abs(ratio - 1.0) < (0.06 if quantity == "charge_to_mass" else 0.16)


@pytest.mark.parametrize(
    ("mistake", "factor"),
    [
        ("rms_as_peak", math.sqrt(2.0)),
        ("peak_to_peak_as_peak", 0.5),
        ("peak_to_peak_as_rms", 0.5 / math.sqrt(2.0)),
        ("hertz_as_radians", 0.5 / math.pi),
        ("power_of_ten", 1000.0),
        ("wrong_sign", -1.0),
    ],
)
def test_a_planted_factor_is_there(mistake: str, factor: float, ratios: dict[tuple[str, str, str], float]) -> None:
    own = [ratio for key, ratio in ratios.items() if key[0] == mistake and key[2] == "charge_to_mass"]
    assert own == pytest.approx([factor] * 5, rel=0.06)


def test_the_mains_frequency_in_place_of_the_drive_makes_the_charge_smaller_but_not_quite_in_proportion(
    ratios: dict[tuple[str, str, str], float],
) -> None:
    """s is as Omega omega for a weak drive; at a given omega the curve rises faster the stronger the drive."""
    own = [ratio for key, ratio in ratios.items() if key[0] == "nominal_mains" and key[2] == "charge_to_mass"]
    assert all(0.7 < ratio < 50.0 / 58.0 * 1.05 for ratio in own)


def test_the_wrong_factor_is_carried_on_to_the_charge_but_not_to_the_mass(
    ratios: dict[tuple[str, str, str], float],
) -> None:
    for name in ("p01", "p05"):
        assert ratios["rms_as_peak", name, "charge"] == pytest.approx(math.sqrt(2.0), rel=0.16)
        assert ratios["rms_as_peak", name, "mass"] == pytest.approx(1.0, rel=0.16)
        assert ratios["diameter_for_radius", name, "mass"] == pytest.approx(8.0, rel=0.16)
        assert ratios["diameter_for_radius", name, "charge_to_mass"] == pytest.approx(1.0, rel=0.06)


def test_forgetting_the_drag_of_air_divides_the_charge_of_a_light_bead_by_several(
    course: Path, ratios: dict[tuple[str, str, str], float]
) -> None:
    """1 + (gamma / Omega)^2, for small drive and steady drag: the stiffness of the drive is less by that factor."""
    truth = {
        row["particle"]: float(row["drag_rate_per_s"])
        for row in rows_of(course.with_name("course.truth.csv"))
        if row["session"] == bench(ALL.index("drag_free"))
    }
    for name, gamma in truth.items():
        factor = 1.0 + (gamma / (2.0 * math.pi * 50.0)) ** 2
        assert factor > 3.0
        assert ratios["drag_free", name, "charge_to_mass"] * factor == pytest.approx(1.0, rel=0.2)


def test_uncertainties_digits_and_gaps_are_as_planted(course: Path) -> None:
    claims = {
        mistake: rows_of(course / "sessions" / bench(number) / "claims.csv") for number, mistake in enumerate(ALL)
    }
    relative = {
        mistake: float(rows[0]["expanded_uncertainty"]) / abs(float(rows[0]["value"]))
        for mistake, rows in claims.items()
        if mistake != "unreadable"
    }
    assert 0.015 < relative["none"] < 0.05
    assert relative["huge_uncertainty"] > 0.2
    assert relative["tiny_uncertainty"] < 0.006
    assert {row["coverage_factor"] for row in claims["k_two_as_one"]} == {"1"}
    assert all(len(row["value"].replace(".", "").strip("-0")) >= 8 for row in claims["bad_rounding"])
    assert {row["particle"] for row in claims["missing_claims"]} == {"p01", "p03", "p05"}
    assert [row["value"].startswith("about ") for row in claims["unreadable"]].count(True) == 1


def test_fair_marks_stand_beside_the_course_and_add_up_to_no_more_than_there_are(course: Path) -> None:
    rows = rows_of(course.with_name("course.truth_marks.csv"))
    assert not (course / "course.truth_marks.csv").exists()
    for number, mistake in enumerate(ALL):
        own = [row for row in rows if row["session"] == bench(number)]
        assert {row["mistake"] for row in own} == {mistake}
        if MISTAKES[mistake].left_out:
            assert [row["criterion"] for row in own] == [""]
            continue
        assert [row["criterion"] for row in own] == list(CRITERIA)
        assert all(0.0 <= float(row["marks_low"]) <= float(row["marks_high"]) for row in own)
        assert sum(float(row["marks_high"]) for row in own) <= 20.0
        full = sum(float(row["marks_high"]) for row in own) == 20.0
        lost = any(high < 1.0 for _, high in MISTAKES[mistake].fair.values())
        assert full == (not lost)


def test_a_bench_does_not_depend_on_how_many_there_are(course: Path, tmp_path: Path) -> None:
    simulate_course(tmp_path / "few", mistakes=ALL[:3], seed=4)
    for number in range(3):
        part = f"sessions/{bench(number)}"
        assert files_of(tmp_path / "few" / part) == files_of(course / part)


def test_the_register_is_of_invented_people_only(course: Path) -> None:
    rows = rows_of(course / "marking" / "register.csv")
    assert len(rows) == 2 * len(ALL)
    assert all(" Invented-" in row["name"] and row["email"].endswith("@invented.example") for row in rows)
    assert len({row["email"] for row in rows}) == len(rows)
    assert {row["pseudonym"] for row in rows} == {"", "yes"}


def test_the_example_for_instructors_is_what_the_generator_makes(tmp_path: Path) -> None:
    truth = simulate_course(tmp_path / "course", mistakes=EXAMPLE, seed=EXAMPLE_SEED, particles=EXAMPLE_PARTICLES)
    assert files_of(COURSE) == files_of(tmp_path / "course")
    assert (HERE / "reference" / "course_truth_marks.csv").read_bytes() == truth.read_bytes()
    assert all(b"nvented" in data for data in files_of(COURSE).values())


def test_the_course_in_the_example_is_no_part_of_the_example() -> None:
    assert not [name for name in input_files(COURSE.parent) if "course" in name]
    assert input_files(COURSE)


def test_every_mistake_has_its_turn_beside_right_benches() -> None:
    sixty = [mistake_of(number) for number in range(60)]
    assert set(sixty) == set(MISTAKES)
    assert sixty.count("none") == 30


def test_a_mistake_nobody_knows_is_refused(tmp_path: Path) -> None:
    with pytest.raises(ResultsError, match=r"no mistake forgot_it\. Choose one of none"):
        simulate_course(tmp_path / "x", mistakes=["forgot_it"], seed=1)
    assert not (tmp_path / "x").exists()
