"""Files that mean harm, or look as if they did: each is refused at once, with words, and nothing else happens."""

from __future__ import annotations

import os
import re
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest
from small_campaign import BALANCE, FILES, HEIGHT, SESSION, check, faults_of, only_fault, write
from trial import alarm

from reduction import csvfile, session, textfile
from reduction.batches import make_plan
from reduction.check import check_campaign, report_text
from reduction.errors import Fault, Faults, ReductionError, printable
from reduction.quantity import QuantityError, read_quantity
from reduction.tables import neutral
from reduction.textfile import read_text
from reduction.units import split_name

SOON = 60.0  # beyond any load of the machine; what is tested here took minutes to hours, or never ended [s]


def faults(root: Path) -> list[Fault]:
    with alarm(SOON):
        return list(check_campaign(root)[2])


# Files that are none


@pytest.mark.parametrize("name", ["campaign.yaml", "traps/ring-a.yaml", SESSION, BALANCE])
def test_a_pipe_in_place_of_a_file_is_not_waited_for(tmp_path: Path, name: str) -> None:
    root = write(tmp_path)
    (root / name).unlink()
    os.mkfifo(root / name)
    found = [fault for fault in faults(root) if fault.path == name]
    assert found[0].found == "a device, pipe or socket"
    with alarm(SOON):
        make_plan(root)


def test_an_endless_device_is_not_read(tmp_path: Path) -> None:
    root = write(tmp_path)
    (root / BALANCE).unlink()
    (root / BALANCE).symlink_to("/dev/zero")
    (fault,) = faults(root)
    assert fault.found == "a device, pipe or socket"


# Links


@pytest.mark.parametrize("name", ["campaign.yaml", "species/bead.yaml", SESSION, HEIGHT])
def test_a_link_out_of_the_campaign_is_refused_and_its_content_not_told(tmp_path: Path, name: str) -> None:
    root = write(tmp_path / "campaign")
    (tmp_path / "secret").write_text("secret-of-another\n")
    (root / name).unlink()
    (root / name).symlink_to(tmp_path / "secret")
    campaign, logs, found = check_campaign(root)
    assert [fault.found for fault in found if fault.path == name] == ["a link to a place outside"]
    assert "secret-of-another" not in report_text(campaign, logs, found)


@pytest.mark.parametrize("folder", ["sessions/s001", "sessions", "traps"])
def test_a_linked_folder_out_of_the_campaign_is_refused(tmp_path: Path, folder: str) -> None:
    root = write(tmp_path / "campaign")
    (root / folder).rename(tmp_path / "elsewhere")
    (root / folder).symlink_to(tmp_path / "elsewhere")
    assert {"a link to a place outside"} == {fault.found for fault in faults(root) if "link" in fault.found}


def test_a_link_within_the_campaign_is_read_as_the_file_it_leads_to(tmp_path: Path) -> None:
    plain = check(tmp_path / "plain")[1]["s001"]
    root = write(tmp_path / "campaign")
    (root / BALANCE).rename(root / "balance of the day.csv")
    (root / BALANCE).symlink_to("../../balance of the day.csv")
    linked, found = check_campaign(root)[1:]
    assert not len(found)
    assert linked["s001"].tables["balance"].equals(plain.tables["balance"])


def test_a_campaign_reached_by_a_link_is_read(tmp_path: Path) -> None:
    write(tmp_path / "real")
    (tmp_path / "campaign").symlink_to("real")
    assert not faults(tmp_path / "campaign")


def test_a_link_to_the_files_of_the_staff_is_refused(tmp_path: Path) -> None:
    root = write(tmp_path, {"marking/register.csv": "session,student\ns001,A. Nonym\n"})
    (root / BALANCE).unlink()
    (root / BALANCE).symlink_to("../../marking/register.csv")
    (fault,) = faults(root)
    assert fault.found == "a link to a place outside"


def test_links_that_go_round_or_nowhere_are_faults(tmp_path: Path) -> None:
    root = write(tmp_path)
    (root / "sessions/s002").symlink_to("nowhere")
    (root / "sessions/s003").symlink_to("s003")
    (root / HEIGHT).unlink()
    (root / HEIGHT).symlink_to("height.csv")
    assert {fault.path for fault in faults(root)} == {"sessions/s002", "sessions/s003", HEIGHT}


def test_a_session_that_is_the_whole_campaign_again_does_not_go_round(tmp_path: Path) -> None:
    root = write(tmp_path)
    (root / "sessions/s002").symlink_to("..")
    assert any(fault.path == "sessions/s002/session.yaml" for fault in faults(root))


# Sizes


@pytest.mark.parametrize("end", [b"\n", b"\r", b"\r\n"])
def test_five_million_rows_are_refused_unread(tmp_path: Path, monkeypatch: pytest.MonkeyPatch, end: bytes) -> None:
    root = write(tmp_path)
    (root / BALANCE).write_bytes(b"particle,height_mm" + end + (b"p01,1" + end) * 5_000_001)
    monkeypatch.setattr(textfile, "_decoded", lambda *_: pytest.fail("it was decoded"))
    found: Faults = Faults()
    csvfile.read_sheet(root / BALANCE, BALANCE, faults=found, knows=lambda _: True)
    (root / BALANCE).unlink()
    assert [fault.found for fault in found] == ["more than 5,000,000 lines"]


def test_a_terabyte_is_refused_unread(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    root = write(tmp_path)
    with (root / BALANCE).open("wb") as file:
        file.truncate(10**12)  # takes no room
    monkeypatch.setattr(Path, "open", lambda *_: pytest.fail("it was opened"))
    found: Faults = Faults()
    assert read_text(root / BALANCE, BALANCE, faults=found, limit=200_000_000, lines=10) is None
    (root / BALANCE).unlink()
    assert [fault.found for fault in found] == ["1000000 MB"]


def test_a_file_that_grows_while_it_is_read_is_not_cut(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    path = tmp_path / "a.csv"
    path.write_bytes(b"x" * 50)
    small = path.stat()
    path.write_bytes(b"x" * 200)
    monkeypatch.setattr(Path, "stat", lambda *_, **__: small)
    found: Faults = Faults()
    assert read_text(path, "a.csv", faults=found, limit=100, lines=10) is None
    assert len(found) == 1


# Texts that took time without bound


@pytest.mark.parametrize(
    "text",
    [
        "[" * 400_000,
        "title: " + "{a: " * 200_000,
        "- " * 400_000,
        "? " * 400_000,
        "shape_factor: " + "1" * 900_000 + "x",
        "shape_factor: 1(1)e" + "9" * 9_000,
        "? a" + " " * 500_000 + "b\n: 1\n",
        "title: a" + "\u0315\u0300" * 150_000,
        "sessions: [" + "s001," * 90_000 + "]",
        "sessions: [" + ",".join(f"t{k}" for k in range(90_000)) + "]",
        "".join(f"key{k}:\n" for k in range(45_000)),
        "title: a\n" * 45_000,
        "".join(f"{chr(97 + k)}: &{chr(97 + k)} [*{chr(96 + k)}, *{chr(96 + k)}]\n" for k in range(1, 20)),
    ],
    ids=range(13),
)
def test_yaml_that_explodes_is_refused_soon_and_in_few_words(tmp_path: Path, text: str) -> None:
    root = write(tmp_path, {"campaign.yaml": text, "species/bead.yaml": text})
    found = faults(root)
    assert {"campaign.yaml", "species/bead.yaml"} <= {fault.path for fault in found}
    assert len(found) < 100
    assert len("".join(map(str, found))) < 30_000


@pytest.mark.parametrize(
    "content",
    [
        "particle,note\np01," + "1" * 130_000 + "x\n",
        "particle,height_mm\np01," + "1" * 130_000 + "x\n",
        "particle,a" + " " * 130_000 + "b\n1,2\n",
        "particle" + ",nearly_a_height" * 1_500 + "\n",
        "particle,note\np01,a" + "\u0315\u0300" * 60_000 + "\n",
    ],
    ids=range(5),
)
def test_csv_that_takes_time_is_refused_soon(tmp_path: Path, content: str) -> None:
    root = write(tmp_path, {HEIGHT: content})
    assert HEIGHT in {fault.path for fault in faults(root)}


def test_no_pattern_takes_time_without_bound() -> None:
    with alarm(SOON):
        for text in ("1" * 10**6 + "x", "1." + "1" * 10**6 + "x", "a" + " " * 10**6 + "b", "_" * 10**6):
            assert neutral("-" + text) == "'-" + text
            assert split_name(text) == (text, "")
            with pytest.raises(QuantityError):
                read_quantity(text)


def test_a_power_of_thousands_of_digits_is_no_quantity() -> None:
    with pytest.raises(QuantityError, match="expected a number"):
        read_quantity("1(1)e" + "9" * 5000)


def test_many_particles_that_no_log_has_are_summed_up(tmp_path: Path) -> None:
    text = "particle\n" + "".join(f"q{k}\n" for k in range(20_000))
    found = [fault.found for fault in faults(write(tmp_path, {"sessions/s001/particles.csv": text}))]
    assert len(found) == 11
    assert found[-1] == "19990 more particles that no log has, from here on"


# Texts that mean something elsewhere


@pytest.mark.parametrize("value", [r'"\0"', r'"\e[2J"', r'"a\rb"', r'"\x9b"'])
def test_control_characters_that_yaml_can_spell_are_faults(tmp_path: Path, value: str) -> None:
    fault = only_fault(tmp_path, {SESSION: FILES[SESSION] + f"operator: {value}\n"})
    assert fault.line == FILES[SESSION].count("\n") + 1
    assert "control character" in fault.found


def test_line_breaks_in_a_yaml_text_are_kept(tmp_path: Path) -> None:
    campaign, _, found = check(tmp_path, {SESSION: FILES[SESSION] + "notes: |\n  one\n  two\tthree\n"})
    assert not len(found)
    assert campaign.sessions["s001"].notes == "one\ntwo\tthree"


def test_a_name_that_is_no_utf8_or_steers_a_terminal_is_told_in_plain_characters(tmp_path: Path) -> None:
    root = write(tmp_path)
    os.mkdir(os.fsencode(root / "sessions") + b"/\xff\x1b[2J")
    os.mkdir(root / "sessions" / "a\nb")
    campaign, logs, found = check_campaign(root)
    text = report_text(campaign, logs, found)
    text.encode()
    assert text.replace("\n", "").isprintable()
    assert {fault.path for fault in found} == {r"sessions/\udcff\x1b[2J", r"sessions/a\nb"}
    assert "s001" in make_plan(root).sessions  # the run comes as far as the check, too


def test_what_can_be_seen_stays_as_it_is() -> None:
    assert printable("Gerät 3, 20 µm – “x” 😀") == "Gerät 3, 20 µm – “x” 😀"
    assert printable("a\u202eb\u200bc\x1b") == r"a\u202eb\u200bc\x1b"


def test_heads_that_steer_a_terminal_are_told_in_plain_characters(tmp_path: Path) -> None:
    text = FILES[BALANCE].replace("time_s", "time_s,of our own\u202e\u009b2J").replace(",0\n", ",0,1\n")
    text = text.replace(",60\n", ",60,1\n").replace(",120\n", ",120,1\n")
    campaign, logs, found = check(tmp_path, {BALANCE: text})
    assert not len(found)
    assert re.search(r"columns not read: of our own\\u202e\\x9b2J", report_text(campaign, logs, found))


# Readings


def test_a_reading_behind_a_quoted_cell_that_looks_like_a_comment_is_not_lost(tmp_path: Path) -> None:
    rows = [line.split(",") for line in FILES[BALANCE].splitlines()]
    text = "\n".join(
        ",".join([mark, *row]) for mark, row in zip(["remark", '"#1"', '"# two"', "three"], rows, strict=True)
    )
    _, logs, found = check(tmp_path / "a", {BALANCE: text + "\n"})
    plain = check(tmp_path / "b")[1]
    assert not len(found)
    assert logs["s001"].tables["balance"].equals(plain["s001"].tables["balance"])


def test_a_comment_that_a_spreadsheet_has_quoted_is_one(tmp_path: Path) -> None:
    text = '"# made on a Friday; 1,5"\n' + FILES[BALANCE].replace("\np02", '\n"# then, a break",,,,\n"# so"\np02')
    assert not faults_of(tmp_path, {BALANCE: text})


# Numbers beyond all use


@pytest.mark.parametrize("name", ["traps/ring-a.yaml", "species/bead.yaml"])
def test_an_uncertainty_whose_square_is_no_number_is_a_fault(tmp_path: Path, name: str) -> None:
    key = "stray_field_V_per_m: 0(30)" if name.startswith("traps") else "shape_factor: 1.02(1)"
    new = f"{key.partition(':')[0]}: {{value: 1, u: 1e300}}"
    fault = only_fault(tmp_path, {name: FILES[name].replace(key, new)})
    assert fault.found == "the uncertainty 1e+300"


def test_arithmetic_that_breaks_down_is_told_in_words(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    campaign, logs, _ = check(tmp_path)

    def broken(*_: object) -> None:
        raise np.linalg.LinAlgError("Eigenvalues did not converge")

    monkeypatch.setattr(session, "fit_session", broken)
    with pytest.raises(ReductionError, match="session s001: the arithmetic broke down .Eigenvalues did not converge"):
        session.reduce_session(campaign, "s001", logs["s001"])
    together = replace(campaign, options=replace(campaign.options, adjust="campaign"))
    with pytest.raises(ReductionError, match="the sessions together: the arithmetic broke down"):
        session.reduce_campaign(together, logs)


@pytest.mark.parametrize("name", [BALANCE, HEIGHT])
def test_an_empty_drive_voltage_is_a_fault(tmp_path: Path, name: str) -> None:
    fault = only_fault(tmp_path, {name: FILES[name].replace("p01,400", "p01,", 1)})
    assert (fault.line, fault.column, fault.found) == (2, "drive_voltage_peak_V", "nothing")
