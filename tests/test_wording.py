"""Closed words as the reader meets them."""

from __future__ import annotations

import pytest

from reduction import wording
from reduction.flags import FLAGS


@pytest.mark.parametrize(
    ("name", "what", "whose"),
    [
        ("trap/ring-a/dc_field_per_volt_per_m", "dc field per volt", "trap ring-a"),
        ("trap/ring-a/ac_gradient_per_volt_per_m2", "ac gradient per volt", "trap ring-a"),
        ("session/s003/stray_field_V_per_m", "stray field", "session s003"),
        ("session/s003/gain_drive_voltage", "gain drive voltage", "session s003"),
        ("campaign//viscosity_formula", "viscosity formula", "campaign"),
        ("particle/s003/p07/balance", "own balance readings", "particle p07"),
        ("particle/s003/p07/1", "own readings, part 1", "particle p07"),
        ("other particles' readings", "other particles' readings", ""),
    ],
)
def test_input_names_read_as_words(name: str, what: str, whose: str) -> None:
    assert wording.input_words(name) == (what, whose)


@pytest.mark.parametrize(
    ("unit", "text"),
    [("V/m", "V m⁻¹"), ("V_per_m", "V m⁻¹"), ("1/m2", "m⁻²"), ("kg/m3", "kg m⁻³"), ("C/kg", "C kg⁻¹"), ("1", ""),
     ("degC", "°C"), ("percent", "%"), ("um", "µm"), ("m2", "m²")],
)  # fmt: skip
def test_units_are_printed_with_negative_powers(unit: str, text: str) -> None:
    assert wording.unit_words(unit) == text


def test_every_flag_has_its_sentence_and_an_unknown_one_its_own_words() -> None:
    assert wording.flag_words(";".join(FLAGS)) == list(FLAGS.values())
    assert wording.flag_words("made_up") == ["made up"]
    assert wording.flag_words("") == []


def test_counts_and_lists_are_grammatical() -> None:
    assert wording.counted(1, "particle") == "1 particle"
    assert wording.counted(3, "particle") == "3 particles"
    assert wording.joined(["a"]) == "a"
    assert wording.joined(["a", "b", "c"]) == "a, b and c"
    assert wording.joined([]) == ""


def test_cautions_name_each_danger_and_who_decides() -> None:
    text = " ".join(words for _, words in wording.CAUTIONS)
    for danger in ("Kilovolts can injure or kill", "Laser light can blind", "can burn", "be inhaled",
                   "Local rules and qualified staff come first"):  # fmt: skip
        assert danger in text
