"""Each criterion at its edges, what is carried forward, and marks set by hand.

Expected marks follow from the scheme by hand arithmetic; rounding of value and uncertainty together is GUM (JCGM
100:2008) 7.2.6. That claims on the same readings differ by choices of analysis alone is reasoned in the design, there
is no published rule for it.
"""

from __future__ import annotations

import json
import math
from collections.abc import Callable
from pathlib import Path

import pytest
from edited import Edited
from marked import claim, codes, mark, marked, references, scheme, write_marking

from reduction.benchreference import Component, ParticleReference, Reference
from reduction.claims import Claim, Override
from reduction.errors import Faults
from reduction.marking import LOOK_AT, MARKED, Recomputed, from_record, mark_bench, to_record
from reduction.markscheme import Scheme, read_scheme
from reduction.stateddigits import last_digit, rounded_together
from reduction.wholefile import json_text

S, U = 1e-3, 1e-5  # charge-to-mass ratio and its standard uncertainty, C/kg
MASS, U_MASS = 4e-12, 1e-13  # kg


def the_scheme(tmp_path: Path, *criteria: str, more: str = "") -> Scheme:
    """A scheme of four marks a criterion, read as the program reads it."""
    (tmp_path / "s").mkdir(exist_ok=True)
    faults = Faults()
    found = read_scheme(write_marking(tmp_path / "s", {"scheme.yaml": scheme(*criteria, more=more)}), faults=faults)
    assert found is not None, list(faults)
    return found


def reference(value: float, u: float) -> Reference:
    return Reference(value, u, (value,), u)


def particle(**changes: object) -> ParticleReference:
    """A particle of s = 1e-3 C/kg and m = 4e-12 kg."""
    given: dict[str, object] = {
        "status": "ok",
        "flags": (),
        "readings": {"balance": 8, "height": 18, "secular": 0},
        "quantities": {
            "charge_to_mass": reference(S, U),
            "diameter": reference(2e-5, 2e-7),
            "mass": reference(MASS, U_MASS),
            "charge": reference(S * MASS, S * U_MASS),
        },
        "agreement": {frozenset(("balance", "height")): 0.4},
        "budget": {
            "charge_to_mass": (
                Component("dc_field_per_volt_per_m", 0.008, 0.64),
                Component("stray_field_V_per_m", 0.005, 0.25),
                Component("balance", 0.003, 0.09),
                Component("temperature_degC", 0.0014, 0.02),
            )
        },
    }
    return ParticleReference(**(given | changes))  # type: ignore[arg-type]


def claimed(quantity: str, value: str, expanded: str = "", k: str = "2", unit: str = "", name: str = "p01") -> Claim:
    """A claim in SI units as the reader of claims.csv gives it."""
    shown = unit or {"mass": "kg", "charge": "C", "diameter": "m"}.get(quantity, "C_per_kg")
    u = float(expanded) if expanded else None
    factor = float(k) if k and expanded else None
    return Claim("b1", name, quantity, float(value), shown, True, u, factor, value, expanded, "f", 2)


def judged(rules: Scheme, *claims: Claim, overrides: tuple[Override, ...] = (), **particles: ParticleReference):
    recomputed = Recomputed(lambda name: [], lambda name, rate: math.nan)
    return mark_bench("b1", rules, claims, overrides, particles or {"p01": particle()}, recomputed)


VALUE = "value: {marks: 4, quantity: charge_to_mass, full_within: 1, none_beyond: 3}"


@pytest.mark.parametrize(
    ("value", "marks"),
    [
        ("1.0000000e-3", 4.0),
        ("1.0199999e-3", 4.0),  # 1 tolerance of 2 %
        ("0.9800001e-3", 4.0),
        ("1.0300000e-3", 3.0),  # 1.5 tolerances: three quarters of the way left
        ("1.0400000e-3", 2.0),
        ("0.9500000e-3", 1.0),
        ("1.0600001e-3", 0.0),
        ("2.0000000e-3", 0.0),
        ("1.1e-3", 0.0),  # rounding buys no more than 2 u: 10 % less 2 %
        ("1.06e-3", 0.5),  # 6 % less half a unit of 0.5 % are 2.75 tolerances
        ("0.0", 0.0),
    ],
)
def test_a_value_earns_all_within_the_tolerance_and_none_beyond_three(tmp_path: Path, value: str, marks: float) -> None:
    assert mark(judged(the_scheme(tmp_path, VALUE), claimed("charge_to_mass", value)), "value").marks == marks


@pytest.mark.parametrize("expanded", ["", "0.000020", "0.1", "1e-9"])
def test_a_claimed_uncertainty_has_no_say_in_the_value(tmp_path: Path, expanded: str) -> None:
    rules = the_scheme(tmp_path, VALUE)
    assert mark(judged(rules, claimed("charge_to_mass", "1.0400000e-3", expanded)), "value").marks == 2.0


def test_another_choice_of_method_is_as_right_as_the_adjusted_value(tmp_path: Path) -> None:
    both = particle(quantities={"charge_to_mass": Reference(S, U, (S, 1.05e-3), 3e-5)})
    rules = the_scheme(tmp_path, VALUE)
    assert mark(judged(rules, claimed("charge_to_mass", "1.0700000e-3"), p01=both), "value").marks == 4.0
    assert mark(judged(rules, claimed("charge_to_mass", "0.9300000e-3"), p01=both), "value").marks == 0.0


@pytest.mark.parametrize(
    ("ratio", "marks"),
    [(1.0, 4.0), (0.501, 4.0), (1.99, 4.0), (2.0 * math.sqrt(2.0), 2.0), (0.25 * math.sqrt(2.0), 2.0), (4.01, 0.0),
     (0.249, 0.0), (1e4, 0.0), (1e-4, 0.0)],
)  # fmt: skip
def test_an_uncertainty_is_marked_by_its_ratio_both_ways(tmp_path: Path, ratio: float, marks: float) -> None:
    rules = the_scheme(tmp_path, "uncertainty: {marks: 4, quantity: charge_to_mass, ratio_between: [0.5, 2.0]}")
    one = claimed("charge_to_mass", "1.000e-3", repr(2.0 * U * ratio))
    assert mark(judged(rules, one), "uncertainty").marks == pytest.approx(marks, abs=0.01)


def test_an_honest_large_uncertainty_is_not_punished(tmp_path: Path) -> None:
    poor = particle(quantities={"charge_to_mass": Reference(S, 2e-4, (S,), 2e-4)})
    rules = the_scheme(tmp_path, VALUE, "uncertainty: {marks: 4}")
    found = judged(rules, claimed("charge_to_mass", "1.00e-3", "0.40e-3"), p01=poor)
    assert found.marks == 8.0


def test_a_wrong_value_does_not_cost_its_uncertainty_too(tmp_path: Path) -> None:
    rules = the_scheme(tmp_path, VALUE, "uncertainty: {marks: 4}")
    found = judged(rules, claimed("charge_to_mass", "2.83e-3", "0.057e-3"))
    assert (mark(found, "value").marks, mark(found, "uncertainty").marks) == (0.0, 4.0)


@pytest.mark.parametrize(
    ("expanded", "k", "code"),
    [
        ("2.0e-5", "1", "expanded_as_standard"),
        ("1.0e-5", "2", "standard_as_expanded"),
        ("2.0e-5", "", "no_coverage_factor"),
        ("0.6e-5", "2", "scatter_only"),  # the readings alone cause 0.3 %
        ("9.0e-5", "2", "uncertainty_large"),
        ("0.1e-5", "2", "uncertainty_small"),
    ],
)
def test_what_is_wrong_with_an_uncertainty_is_named(tmp_path: Path, expanded: str, k: str, code: str) -> None:
    rules = the_scheme(tmp_path, "uncertainty: {marks: 4, quantity: charge_to_mass}")
    assert codes(judged(rules, claimed("charge_to_mass", "1.000e-3", expanded, k))) == {code}


@pytest.mark.parametrize(
    ("value", "expanded", "marks"),
    [
        ("1.234e-3", "0.022e-3", 4.0),
        ("1.23e-3", "0.02e-3", 4.0),
        ("1.234e-3", "2.2e-5", 4.0),
        ("0.001234", "0.000022", 4.0),
        ("1.23e-3", "0.022e-3", 2.0),  # value ends before its uncertainty
        ("1.23456e-3", "0.02e-3", 2.0),
        ("1.2345e-3", "0.0223e-3", 2.0),  # together, but three digits
        ("1.2e-3", "0.0223e-3", 0.0),
        ("1200", "30", 4.0),  # zeros at the end may count
        ("1234", "120", 2.0),
        ("1200", "100", 4.0),
    ],
)
def test_rounding_of_value_and_uncertainty_together(tmp_path: Path, value: str, expanded: str, marks: float) -> None:
    rules = the_scheme(tmp_path, "rounding: {marks: 4, quantity: charge_to_mass}")
    assert mark(judged(rules, claimed("charge_to_mass", value, expanded)), "rounding").marks == marks


def test_last_digits_follow_the_text() -> None:
    assert [last_digit(*texts) for texts in (("1.20", "0.15"), ("1200", ""), ("1200", "100"), ("12e2", "1e2"))] == [
        -2, 0, 2, 2,
    ]  # fmt: skip
    assert rounded_together("-2.31", "0.05") == (True, True)


def test_a_sign_costs_once(tmp_path: Path) -> None:
    wrong = claimed("charge_to_mass", "-1.000e-3", "0.020e-3")
    found = judged(the_scheme(tmp_path, VALUE, "sign: {marks: 4}"), wrong)
    assert (mark(found, "value").marks, mark(found, "sign").marks) == (4.0, 0.0)
    assert codes(found) == {"sign"}
    assert mark(judged(the_scheme(tmp_path, VALUE), wrong), "value").marks == 0.0


def test_a_sign_carried_into_the_charge_costs_once(tmp_path: Path) -> None:
    rules = the_scheme(tmp_path, VALUE, "value_charge: {marks: 4, quantity: charge}", "sign: {marks: 4}",
                       "sign_charge: {marks: 4}")  # fmt: skip
    found = judged(rules, claimed("charge_to_mass", "-1.000e-3"), claimed("charge", "-4.00e-15"))
    assert [one.marks for one in found.criteria] == [4.0, 4.0, 0.0, 4.0]


def test_a_wrong_prefix_costs_the_unit_and_not_the_value(tmp_path: Path) -> None:
    rules = the_scheme(tmp_path, VALUE, "unit: {marks: 4}")
    found = judged(rules, claimed("charge_to_mass", "1.000"))
    assert (mark(found, "value").marks, mark(found, "unit").marks) == (4.0, 0.0)
    assert codes(found) == {"unit_prefix"}


def test_a_unit_of_another_kind_costs_the_unit_and_not_the_value(tmp_path: Path) -> None:
    one = Claim("b1", "p01", "charge_to_mass", 1e-3, "C", False, None, None, "1.000e-3", "", "f", 2)
    found = judged(the_scheme(tmp_path, VALUE, "unit: {marks: 4}"), one)
    assert (mark(found, "value").marks, mark(found, "unit").marks) == (4.0, 0.0)
    assert mark(judged(the_scheme(tmp_path, VALUE), one), "value").marks == 0.0


CHAIN = (VALUE, "value_mass: {marks: 4, quantity: mass}", "value_charge: {marks: 4, quantity: charge}")


@pytest.mark.parametrize(
    ("ratio", "mass", "charge", "marks"),
    [
        ("1.000e-3", "4.00e-12", "4.00e-15", [4.0, 4.0, 4.0]),
        ("2.000e-3", "4.00e-12", "8.00e-15", [0.0, 4.0, 4.0]),  # follows from the wrong ratio
        ("2.000e-3", "4.00e-12", "4.00e-15", [0.0, 4.0, 4.0]),  # right all the same
        ("2.000e-3", "12.0e-12", "24.0e-15", [0.0, 0.0, 4.0]),  # follows from both
        ("2.000e-3", "4.00e-12", "2.00e-15", [0.0, 4.0, 0.0]),  # a second mistake
        ("1.000e-3", "4.00e-12", "8.00e-15", [4.0, 4.0, 0.0]),  # of its own
    ],
)
def test_a_mistake_carried_forward_costs_once(
    tmp_path: Path, ratio: str, mass: str, charge: str, marks: list[float]
) -> None:
    rows = [claimed("charge_to_mass", ratio), claimed("mass", mass), claimed("charge", charge)]
    for listed in (rows, rows[::-1]):  # in whatever order they are written
        assert [one.marks for one in judged(the_scheme(tmp_path, *CHAIN), *listed).criteria] == marks


def test_a_mistake_that_costs_nothing_earlier_costs_where_it_shows(tmp_path: Path) -> None:
    rules = the_scheme(tmp_path, "value: {marks: 4, quantity: charge}")
    found = judged(rules, claimed("charge_to_mass", "2.000e-3"), claimed("charge", "8.00e-15"))
    assert mark(found, "value").marks == 0.0


def test_a_mass_follows_from_a_wrong_diameter_as_its_cube(tmp_path: Path) -> None:
    rules = the_scheme(tmp_path, "value: {marks: 4, quantity: diameter}", "value_mass: {marks: 4, quantity: mass}")
    found = judged(rules, claimed("diameter", "4.00e-5"), claimed("mass", "32.0e-12"))
    assert [one.marks for one in found.criteria] == [0.0, 4.0]


@pytest.mark.parametrize(
    ("counts", "marks"), [((5, 12), 4.0), ((9, 30), 4.0), ((4, 12), 3.2), ((5, 6), 2.0), ((5, 0), 0.0)]
)
def test_readings_earn_in_proportion_to_those_asked_for(tmp_path: Path, counts: tuple[int, int], marks: float) -> None:
    rules = the_scheme(tmp_path, "readings: {marks: 4, balance_at_least: 5, height_at_least: 12}")
    logged = particle(readings={"balance": counts[0], "height": counts[1], "secular": 0})
    assert mark(judged(rules, p01=logged), "readings").marks == marks


@pytest.mark.parametrize(
    ("quantity", "value", "known", "marks"),
    [
        ("agreement_balance_height", 0.3, 0.4, 4.0),
        ("agreement_height_balance", -0.9, 0.4, 4.0),
        ("agreement_balance_height", 1.7, 0.4, 0.0),
        ("agreement_balance_height", 0.3, -3.0, 0.0),
        ("agreement_balance_height", 1.1, 0.95, 4.0),  # near the limit either verdict will do
    ],
)
def test_agreement_of_two_methods_is_judged_by_its_verdict(
    tmp_path: Path, quantity: str, value: float, known: float, marks: float
) -> None:
    rules = the_scheme(tmp_path, "agreement: {marks: 4, between: [balance, height]}")
    one = particle(agreement={frozenset(("height", "balance")): known})
    assert mark(judged(rules, claimed(quantity, repr(value), unit="1"), p01=one), "agreement").marks == marks


@pytest.mark.parametrize(
    ("named", "more", "marks"),
    [
        ({"dc_field_per_volt": "0.008", "stray_field": "0.005", "balance": "0.003"}, "", 4.0),  # 98 % of the variance
        ({"dc_field_per_volt_per_m": "0.008", "stray_field_V_per_m": "0.005"}, "", 3.96),  # 89 of 90 %
        ({"stray_field": "0.005"}, "", 1.11),
        ({"stray_field": "0.005", "operator": "0.5"}, "", 1.11),
        ({"dc_field_per_volt": "0.08", "stray_field": "0.005"}, ", ratio_between: [0.3, 3]", 1.11),
        ({}, "", 0.0),
    ],
)
def test_a_budget_is_as_complete_as_the_variance_its_components_account_for(
    tmp_path: Path, named: dict[str, str], more: str, marks: float
) -> None:
    rules = the_scheme(tmp_path, f"budget: {{marks: 4, quantity: charge_to_mass, share_at_least: 0.9{more}}}")
    rows = [claimed(f"component_{name}", value, unit="1") for name, value in named.items()]
    assert mark(judged(rules, *rows), "budget").marks == pytest.approx(marks, abs=0.006)


def test_a_particle_of_which_nothing_is_claimed_is_said_and_not_counted(tmp_path: Path) -> None:
    rules = the_scheme(tmp_path, VALUE)
    found = judged(rules, claimed("charge_to_mass", "1.000e-3"), p01=particle(), p02=particle())
    assert (found.status, mark(found, "value").marks) == (LOOK_AT, 4.0)
    assert "p02: no charge-to-mass ratio claimed, not counted" in mark(found, "value").words
    assert found.look_at == ("p02: measured, and nothing claimed",)
    nothing = judged(rules, p01=particle(), p02=particle())
    assert mark(nothing, "value").marks == 0.0
    assert "p01: no charge-to-mass ratio claimed" in mark(nothing, "value").words


def test_a_missing_claim_is_said_and_earns_nothing(tmp_path: Path) -> None:
    asked = ("uncertainty: {marks: 4}", "rounding: {marks: 4}", "sign: {marks: 4}")
    rules = the_scheme(tmp_path, VALUE, *asked, more="particles_at_least: 2\n")
    found = judged(rules, claimed("charge_to_mass", "1.000e-3"), p01=particle(), p02=particle())
    value, uncertainty, rounding, sign = found.criteria
    assert (value.marks, uncertainty.marks, rounding.marks, sign.marks) == (2.0, 0.0, 0.0, 2.0)
    assert "p02: no charge-to-mass ratio claimed" in value.words
    assert "p01: no expanded uncertainty of the charge-to-mass ratio claimed" in uncertainty.words
    assert "p01: no expanded uncertainty of the charge-to-mass ratio to round with" in rounding.words


def test_fewer_particles_count_where_the_scheme_asks_for_fewer(tmp_path: Path) -> None:
    three = {name: particle() for name in ("p01", "p02", "p03")}
    right, wrong = claimed("charge_to_mass", "1.000e-3"), claimed("charge_to_mass", "2.000e-3", name="p02")
    for least, rows, marks in ((1, [right], 4.0), (2, [right], 2.0), (1, [right, wrong], 2.0), (5, [right], 0.8)):
        rules = the_scheme(tmp_path, VALUE, more=f"particles_at_least: {least}\n")
        assert mark(judged(rules, *rows, **three), "value").marks == marks


def test_what_the_program_cannot_judge_is_left_to_a_person(tmp_path: Path) -> None:
    rules = the_scheme(tmp_path, VALUE)
    open_ = particle(status="not_determined", quantities={})
    row = claimed("charge_to_mass", "1.000e-3")
    found = judged(rules, row, claimed("charge_to_mass", "1.000e-3", name="p02"), p01=open_, p02=particle())
    assert (found.status, mark(found, "value").marks) == (LOOK_AT, 4.0)
    assert any(one.startswith("value, p01: charge-to-mass ratio claimed, but not determined") for one in found.look_at)
    alone = judged(rules, row, p01=open_)
    assert mark(alone, "value").marks is None
    assert alone.marks == 0.0
    assert "value: cannot be judged" in alone.look_at


def test_a_particle_that_nobody_can_determine_need_not_be_claimed(tmp_path: Path) -> None:
    open_ = particle(status="not_determined", quantities={})
    found = judged(the_scheme(tmp_path, VALUE), claimed("charge_to_mass", "1.000e-3"), p01=particle(), p02=open_)
    assert (found.status, mark(found, "value").marks) == (MARKED, 4.0)


def test_readings_that_behave_as_if_logged_wrongly_are_for_a_person(tmp_path: Path) -> None:
    odd = particle(flags=("factor_suspected",))
    found = judged(the_scheme(tmp_path, VALUE), claimed("charge_to_mass", "1.000e-3"), p01=odd)
    assert found.status == LOOK_AT


def test_marks_by_hand_count_and_the_automatic_ones_stay_known(tmp_path: Path) -> None:
    rules = the_scheme(tmp_path, VALUE, "rounding: {marks: 4}")
    by_hand = Override("b1", "value", 3.5, "lamp failed", "A. Tutor", 2)
    found = judged(rules, claimed("charge_to_mass", "2.000e-3", "0.020e-3"), overrides=(by_hand,))
    one = mark(found, "value")
    assert (one.marks, one.automatic, one.override) == (3.5, 0.0, by_hand)
    assert found.marks == 7.5
    assert found.status == MARKED  # somebody has looked already


def test_marks_are_the_same_read_back(tmp_path: Path) -> None:
    rules = the_scheme(tmp_path, VALUE, "rounding: {marks: 4}")
    by_hand = Override("b1", "value", 3.5, "lamp failed", "A. Tutor", 2)
    found = judged(rules, claimed("charge_to_mass", "2.000e-3", "0.0203e-3"), overrides=(by_hand,))
    assert from_record(json.loads(json_text(to_record(found)))) == found


def test_words_for_the_bench_hold_no_number_of_the_program_or_the_scheme(
    light: Path, edit: Callable[[Path], Edited]
) -> None:
    folder = edit(light).folder
    right = references(light)["p01"].quantities
    rows = [claim(quantity, one.value * 1.37, u=one.u) for quantity, one in right.items()]
    rules = scheme(
        *(f"value_{quantity.replace('_', '')}: {{marks: 4, quantity: {quantity}, full_within: 1.25, none_beyond: 3.75}}"
          for quantity in right),
        "readings: {marks: 4, balance_at_least: 77, height_at_least: 99}",
        "uncertainty_a: {marks: 4, quantity: charge_to_mass, ratio_between: [0.61, 1.61]}",
        tolerance=2.34,
    )  # fmt: skip
    found = marked(folder, rows, rules)
    words = " ".join([*(word for one in found.criteria for word in one.words), *(hint.text for hint in found.hints)])
    assert len(words) > 300
    for secret in ("1.25", "3.75", "77", "99", "0.61", "1.61", "2.34"):
        assert secret not in words
    for one in right.values():
        digits = f"{abs(one.value):.3e}"[:5].replace(".", "")
        assert digits not in words.replace(".", "")


def test_the_program_marks_its_own_results_full(dense: Path, edit: Callable[[Path], Edited]) -> None:
    known = references(dense)["p01"]
    rows = []
    for quantity, one in known.quantities.items():
        rows.append(claim(quantity, one.value, u=one.u))
    rules = scheme(*(f"{kind}_{place}: {{marks: 4, quantity: {quantity}}}" for place, quantity in
                     enumerate(known.quantities) for kind in ("value", "uncertainty", "unit")),
                   "readings: {marks: 4, balance_at_least: 8, height_at_least: 18, secular_at_least: 7}")  # fmt: skip
    found = marked(edit(dense).folder, rows, rules)
    assert found.marks == found.total
    assert not found.hints


def test_a_campaign_adjusted_otherwise_marks_each_bench_alone_all_the_same(
    light: Path, edit: Callable[[Path], Edited]
) -> None:
    right = references(light)["p01"].quantities["charge_to_mass"]
    rows = [claim("charge_to_mass", right.value * 1.041, u=right.u)]
    one = marked(edit(light).folder, rows)
    for adjust in ("particle", "campaign"):
        other = edit(light).campaign(adjust=adjust).folder
        assert marked(other, rows) == one
