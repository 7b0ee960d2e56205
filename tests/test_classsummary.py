"""The summary of a class: what to settle first, how the class did, where it stumbled, and no names."""

from __future__ import annotations

from pathlib import Path

import pytest
from leaks import read_text
from test_report import info_of, needs_poppler, text_of, words_outside

from reduction import classfigures, classsummary
from reduction.markingfiles import Override
from reduction.markingpages import class_pdf
from reduction.markrecord import BenchMarks, CriterionMark, Hint

DIGEST = "ab" * 32


def bench(number: int, value: float | None, *codes: str, look_at: tuple[str, ...] = (), by_hand: bool = False):
    session = f"b{number:02d}"
    hints = tuple(Hint(code, f"Particle p01: {code}.") for code in codes)
    override = Override(session, "sign", 1.0, "the leads were swapped", "T. Utor", 2) if by_hand else None
    parts = (
        CriterionMark("value", value, 8.0, (), hints, None, value),
        CriterionMark("sign", 1.0 if by_hand else 2.0, 2.0, (), (), override, 2.0),
    )
    total = sum(one.marks or 0.0 for one in parts)
    return BenchMarks(session, "look_at" if look_at else "marked", parts, total, 10.0, look_at, ())


FAULT = "claims.csv line 4, value: found 4,2x; expected a number."
NOT_MARKED = BenchMarks("b09", "not_marked", (), None, 10.0, (FAULT,), ())
BENCHES = [
    bench(3, 8.0),
    bench(1, 8.0),
    bench(2, 2.0, "rms_as_peak", by_hand=True),
    bench(4, 0.0, "rms_as_peak", "rounding", look_at=("no factor explains it",)),
    NOT_MARKED,
]
UNKNOWN = {"b77": "no such bench"}


@pytest.fixture(scope="module")
def doc() -> dict[str, object]:
    return classsummary.content(BENCHES, digest=DIGEST, title="Spring", unknown=UNKNOWN)


def test_what_is_not_marked_comes_first_with_the_reason(doc: dict) -> None:
    assert doc["left_out"]["rows"] == [["b77", "no such bench"], ["b09", FAULT]]


def test_benches_to_look_at_and_marks_set_by_hand_are_listed(doc: dict) -> None:
    assert doc["look_at"]["rows"] == [["b04", "2 of 10", "no factor explains it"]]
    assert doc["overrides"]["rows"] == [["b02", "Sign", "2", "1", "the leads were swapped", "T. Utor"]]


def test_the_commonest_fault_comes_first_and_counts_once_a_bench(doc: dict) -> None:
    assert doc["faults"]["rows"] == [["Rms_as_peak.", "2", "b02, b04"], ["Rounding.", "1", "b04"]]


def test_the_statistics_are_those_of_the_benches_marked(doc: dict) -> None:
    facts = dict(doc["glance"])
    assert facts["Benches"] == "5"
    assert facts["Marked"] == "4"
    assert facts["Median"] == "6.5 of 10"  # of 10, 10, 3, 2
    assert facts["Mean"] == "6.25 of 10"
    assert facts["Lowest and highest"] == "2 and 10"
    assert facts["Standard deviation"] == "4.35"  # root of 56.75 / 3
    rows = {row[0]: row[1:] for row in doc["criteria"]["rows"]}
    assert rows["Value"] == ["8", "4.50", "5", "0", "8", "56 %"]


def test_the_list_of_marks_holds_every_bench_in_order(doc: dict) -> None:
    assert [row[0] for row in doc["marks"]["rows"]] == ["b01", "b02", "b03", "b04", "b09"]
    assert doc["marks"]["rows"][1] == ["b02", "2", "1*", "3"]
    assert doc["marks"]["rows"][4] == ["b09", "—", "—", "—"]


def test_benches_are_counted_by_how_they_met_a_criterion() -> None:
    found = classfigures.met("value", [8.0, 8.0, 2.0, 0.0, None], 8.0)
    assert (found.full, found.part, found.none, found.open, found.benches) == (2, 1, 1, 1, 5)


def test_the_distribution_says_aloud_what_it_shows() -> None:
    alt = classfigures.distribution([10.0, 10.0, 3.0, 2.0], 10.0).alt
    assert "2 to 3: 1; 3 to 4: 1; 9 to 10: 2." in alt
    assert "Median 6.5" in alt


@needs_poppler
@pytest.mark.parametrize("benches", [BENCHES, [NOT_MARKED], []], ids=["some", "none marked", "none"])
def test_the_summary_is_archival_tagged_and_says_whom_it_is_for(benches: list[BenchMarks], tmp_path: Path) -> None:
    out = tmp_path / "summary.pdf"
    class_pdf(benches, out, digest=DIGEST, title="Spring", unknown=UNKNOWN)
    assert info_of(out)["Tagged"] == "yes"
    assert b"<pdfuaid:part>1<" in out.read_bytes()
    text = text_of(out)
    assert "FOR THE STAFF ONLY" in text
    assert "Kilovolts can injure or kill" in text
    assert words_outside(out) == []
    if benches == BENCHES:
        assert text.index("settle these first") < text.index("at a glance") < text.index("Where the class stumbled")


@needs_poppler
def test_the_same_benches_in_another_order_give_the_same_bytes(tmp_path: Path) -> None:
    class_pdf(BENCHES, tmp_path / "a.pdf", digest=DIGEST)
    class_pdf(BENCHES[::-1], tmp_path / "b.pdf", digest=DIGEST)
    assert (tmp_path / "a.pdf").read_bytes() == (tmp_path / "b.pdf").read_bytes()
    assert "Number of benches by marks out of 10" in read_text(tmp_path / "a.pdf")
