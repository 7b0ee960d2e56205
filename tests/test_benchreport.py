"""The feedback of a bench: what it is told, and that it is told nothing else."""

from __future__ import annotations

import shutil
from dataclasses import replace
from pathlib import Path

import pytest
from fake_record import write_record
from leaks import all_bytes, digit_runs, read_text, told
from test_report import HOSTILE, info_of, needs_poppler, text_of, words_outside

from reduction import benchreport, records
from reduction.markingfiles import Override
from reduction.markingpages import bench_pdf
from reduction.markrecord import BenchMarks, CriterionMark, Hint, Judged
from reduction.sheets import rows_of
from reduction.tables import read_table, write_table
from reduction.wholefile import read_json, write_json

DIGEST = "0123456789abcdef" * 4
RESULTS = (
    "charge_to_mass_C_per_kg", "u_charge_to_mass_C_per_kg", "drag_rate_per_s", "u_drag_rate_per_s", "diameter_um",
    "u_diameter_um", "mass_kg", "u_mass_kg", "charge_C", "u_charge_C", "charge_e", "u_charge_e",
    "surface_charge_density_C_per_m2",
)  # fmt: skip
BY_HAND = Override("s001", "sign", 1.0, "leads swapped, said Quillon", "Professor Umbra", 4)


def marks(session: str = "s001", *, hint: str = "Particle p02: look at the drive voltage again.", **changes: object):
    slip = Hint("rms_as_peak", hint)
    parts = (
        CriterionMark("readings", 4.0, 4.0, ("Every particle has readings enough.",), (), None, 4.0),
        CriterionMark("value", 2.5, 8.0, ("One of three values holds up.",), (slip,), None, 2.5),
        CriterionMark("value_mass", None, 2.0, ("Nothing was claimed.",), (slip,), None, None),
        CriterionMark("sign", 1.0, 2.0, ("The sign is a statement about physics.",), (), BY_HAND, 2.0),
    )
    judged = (Judged("value", "p01", "charge_to_mass", 1.0, 7.654321e-4, 2.3e-5, 0.3, "misses by 4.56 tolerances"),)
    whole = BenchMarks(session, "look_at", parts, 7.5, 16.0, ("a factor of 1.37 that nothing explains",), judged)
    return replace(whole, **changes)


@pytest.fixture(scope="module")
def record(tmp_path_factory: pytest.TempPathFactory) -> Path:
    return write_record(tmp_path_factory.mktemp("record") / "rec", particles=4, notes="Quillon was ill",
                        operator="Quillon Invented")  # fmt: skip


@pytest.fixture(scope="module")
def page(record: Path) -> Path:
    out = record.with_name("s001.pdf")
    bench_pdf(marks(), record, out, digest=DIGEST, title="Spring course")
    return out


@needs_poppler
def test_a_bench_reads_its_marks_what_they_rest_on_and_the_hints(page: Path) -> None:
    text = text_of(page)
    for words in ("7.5 of 16 marks", "Enough readings", "4 of 4", "2.5 of 8", "One of three values holds up.",
                  "Value: mass", "— of 2", "look at the drive voltage again", "Spring course",
                  "A member of staff looked at this and set these marks by hand."):  # fmt: skip
        assert words in text, words
    assert text.count("look at the drive voltage again") == 1


@needs_poppler
def test_cautions_stand_where_a_bench_may_measure_again(page: Path) -> None:
    text = text_of(page)
    for words in ("Kilovolts can injure or kill", "Laser light can blind", "can burn, explode as a cloud",
                  "Local rules and qualified staff come first"):  # fmt: skip
        assert words in text


@needs_poppler
def test_nothing_that_is_for_the_staff_is_told(page: Path) -> None:
    text = read_text(page)
    for secret in ("Quillon", "Umbra", "swapped", "1.37", "4.56", "7654", "tolerance", "humidity_box"):
        assert secret not in text, secret
        if secret.isalpha():  # three digits stand among the coordinates of any drawing
            assert secret.encode() not in all_bytes(page), secret


@needs_poppler
def test_without_the_reduction_none_of_its_numbers_is_there(record: Path, page: Path) -> None:
    particles = rows_of(read_table(record / "particles.csv"))
    values = [float(row[name]) for row in particles for name in RESULTS if row[name] == row[name]]
    assert len(values) > 30
    doc = benchreport.content(marks(), record, digest=DIGEST, title="Spring course")
    figures = doc.pop("figures")
    assert told(values, str(doc)) == {}
    assert told(values, " ".join(one["alt"] + one["words"] for one in figures)) == {}
    readings = rows_of(read_table(record / "readings.csv"))
    own = set().union(*(digit_runs(f"{row['drive_voltage_peak_V']:g}") for row in readings))
    four = {value: {run for run in runs if len(run) > 3} for value, runs in told(values, read_text(page), own).items()}
    assert not any(four.values())  # three digits may stand on an axis of the bench's own readings by chance


@needs_poppler
def test_with_the_reduction_the_sessions_own_report_is_there(record: Path, tmp_path: Path) -> None:
    bench_pdf(marks(), record, tmp_path / "b.pdf", digest=DIGEST, show_reduction=True)
    text = read_text(tmp_path / "b.pdf")
    particles = rows_of(read_table(record / "particles.csv"))
    ratios = [row["charge_to_mass_C_per_kg"] for row in particles if row["status"] == "ok"]
    assert set(told(ratios, text)) == set(ratios)
    assert "How the program reduces your readings" in text
    assert "What makes the uncertainty" in text
    assert "Quillon" not in text


def test_what_the_reduction_thinks_of_a_reading_changes_nothing_that_a_bench_sees(
    record: Path, page: Path, tmp_path: Path
) -> None:
    other = tmp_path / "rec"
    shutil.copytree(record, other)
    frame = read_table(other / "readings.csv")
    for name in ("residual", "normalized_residual", "adjusted_residual", "u_reading"):
        frame[name] = 123.456
    frame.loc[frame["status"] == "flagged", "status"] = "used"
    frame["flags"] = ""
    write_table(other / "readings.csv", frame.columns.tolist(), frame)
    facts = read_json(other / records.FACTS)
    write_json(other / records.FACTS, {**facts, "curves": {}, "flagged": [], "strain": None})
    bench_pdf(marks(), other, tmp_path / "b.pdf", digest=DIGEST, title="Spring course")
    assert (tmp_path / "b.pdf").read_bytes() == page.read_bytes()


@needs_poppler
def test_the_page_is_archival_tagged_and_short(page: Path) -> None:
    info = info_of(page)
    assert info["Tagged"] == "yes"
    assert info["Title"] == "Feedback: s001"
    assert "Author" not in info or not info["Author"]
    assert int(info["Pages"]) <= 2
    assert "1970" in info["CreationDate"]
    assert b"<pdfaid:part>2</pdfaid:part>" in page.read_bytes()
    assert b"<pdfuaid:part>1<" in page.read_bytes()
    assert words_outside(page) == []


@needs_poppler
def test_every_figure_says_aloud_what_is_seen(page: Path) -> None:
    text = read_text(page)
    for name in ("p01", "p02", "p03"):
        assert f"Readings of particle {name}. Height against dc voltage: 18 readings at 3 drive voltages" in text
    assert "1 of them left out by the bench" in text


@needs_poppler
@pytest.mark.parametrize("words", HOSTILE.values(), ids=HOSTILE)
def test_words_from_outside_stand_there_as_words(words: str, record: Path, tmp_path: Path) -> None:
    bench_pdf(marks("b-1", hint=f"Particle p01: {words}"), record, tmp_path / "b.pdf", digest=DIGEST, title=words)
    assert info_of(tmp_path / "b.pdf")["Tagged"] == "yes"
    if words is HOSTILE["markup"]:
        assert '#import "x.typ": *' in text_of(tmp_path / "b.pdf")


@needs_poppler
def test_a_bench_that_is_not_marked_reads_what_to_put_right_and_no_blame(tmp_path: Path) -> None:
    faults = (
        "marking/register.csv\n  line 5, email: found quillon@x.example\n    expected an address\n\n"
        "sessions/s001/claims.csv\n  line 7, value: found about 0.4\n    expected a number\n    Write the number alone."
    )
    bare = marks(status="not_marked", marks=None, criteria=(), judged=(), look_at=(faults,))
    bench_pdf(bare, None, tmp_path / "b.pdf", digest=DIGEST)
    text = text_of(tmp_path / "b.pdf")
    assert "claims.csv, line 7, value: found about 0.4; expected a number. Write the number alone." in text
    assert "quillon" not in text
    assert "Something has to be settled by the staff first" in text
    assert "has not been marked yet" in text
    assert "says nothing about its worth" in text
    assert "of 16 marks" not in text


def test_a_bench_whose_session_was_left_out_has_a_page(tmp_path: Path) -> None:
    records.SessionRecord(facts={"session": "s009", "status": "left_out", "reason": "x"}).save(tmp_path / "rec")
    bare = marks("s009", status="not_marked", marks=None, criteria=(), judged=(), look_at=("x",))
    bench_pdf(bare, tmp_path / "rec", tmp_path / "b.pdf", digest=DIGEST, show_reduction=True)
    assert (tmp_path / "b.pdf").stat().st_size > 5000


def test_marks_are_printed_with_two_decimals_at_most() -> None:
    assert [benchreport.shown(one) for one in (4.0, 2.5, 1 / 3, None)] == ["4", "2.5", "0.33", "—"]
    assert benchreport.aligned([4.0, 2.5, None, 1 / 3]) == ["4.00", "2.50", "—", "0.33"]


def test_the_digest_on_the_page_has_no_digits() -> None:
    assert not any(letter.isdigit() for letter in benchreport.lettered(DIGEST))
    assert benchreport.lettered(DIGEST) != benchreport.lettered(DIGEST[::-1])
