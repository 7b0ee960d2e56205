"""Advice: something to try for everything a marker recognises, without a number that could give an answer away."""

from __future__ import annotations

import re

import pytest

from reduction.advice import ADVICE
from reduction.criteria import HINTS
from reduction.mistakes import TEXTS


def test_everything_recognised_has_advice_and_nothing_else_has() -> None:
    assert set(ADVICE) == {*HINTS, *TEXTS, "several_fit"}


@pytest.mark.parametrize("code", sorted(ADVICE))
def test_advice_is_a_short_sentence_without_blame(code: str) -> None:
    words = ADVICE[code]
    assert words[0].isupper()
    assert words.endswith(".")
    assert len(words) < 250
    assert not re.search(r"\d|wrong|mistake|fail|bad|careless|of course|simply|obvious", words)
