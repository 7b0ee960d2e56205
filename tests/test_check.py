import random

import pytest
from small_campaign import BALANCE, FILES, HEIGHT, SESSION, changed, check, faults_of, only_fault

from reduction.check import check_campaign, faults_text, report_text
from reduction.errors import Fault


def sessions(*names, **changes):
    """Further sessions like the first."""
    return {
        path.replace("s001", name): text for name in names for path, text in FILES.items() if "s001" in path
    } | changes


def leave_out(text=FILES["campaign.yaml"]):
    return {"campaign.yaml": text + "when_a_session_fails: leave_out\n"}


def test_a_good_campaign_has_no_fault(tmp_path):
    campaign, logs, faults = check(tmp_path, sessions("s002"))
    assert list(faults) == []
    assert campaign.session_ids == ("s001", "s002")
    assert sorted(logs) == ["s001", "s002"]


def test_every_fault_of_the_whole_campaign_is_told_at_once(tmp_path):
    files = sessions("s002")
    files |= changed("campaign.yaml", "title", "titel") | changed("traps/ring-a.yaml", "61.3(9)", "0")
    files |= changed("species/bead.yaml", "1050", "x") | changed(SESSION, "time_average", "mean")
    files |= changed(HEIGHT, "-0.413", "low") | changed(BALANCE, "120.8,60", "120.8,0")
    files["sessions/s002/balance.csv"] = "particle\n"
    files["sessions/s002/session.yaml"] = "date: 2025-03-14\n"
    found = {(fault.path, fault.line, fault.column) for fault in faults_of(tmp_path, files)}
    assert found >= {
        ("campaign.yaml", 1, "titel"),
        ("traps/ring-a.yaml", 1, "dc_field_per_volt_per_m"),
        ("species/bead.yaml", 5, "density_kg_per_m3"),
        (SESSION, 5, "height_reading"),
        (HEIGHT, 2, "height_mm"),
        (BALANCE, 3, "particle"),
        ("sessions/s002/balance.csv", 1, "balance_voltage_V"),
        ("sessions/s002/session.yaml", 0, "charged_with"),
    }


def test_faults_come_in_a_fixed_order(tmp_path):
    files = changed(HEIGHT, "-0.413", "low") | changed("campaign.yaml", "title", "titel")
    paths = [fault.path for fault in faults_of(tmp_path, files)]
    assert paths == sorted(paths)


def test_a_species_in_particles_has_a_file(tmp_path):
    text = "particle,species\np01,bead\np02,beed\n"
    fault = only_fault(tmp_path, {"sessions/s001/particles.csv": text})
    assert (fault.path, fault.line, fault.column) == ("sessions/s001/particles.csv", 3, "species")
    assert fault.advice == "Did you mean bead?"


# Leaving faulty sessions out


@pytest.mark.parametrize(
    "spoilt",
    [
        changed(SESSION, "date: 2025-03-14", "date: today"),
        changed(SESSION, "ring-a", "ring-b"),
        changed(HEIGHT, "-0.413", "low"),
        {SESSION: None},
        {HEIGHT: b"\x00"},
        {"sessions/s001/particles.csv": "particle,species\np01,none\n"},
    ],
)
def test_a_session_with_faults_is_left_out_on_request(tmp_path, spoilt):
    assert len(faults_of(tmp_path / "stop", sessions("s002") | spoilt)) > 0
    campaign, logs, faults = check(tmp_path / "leave", sessions("s002") | spoilt | leave_out())
    assert list(map(str, faults)) == []
    assert campaign.session_ids == ("s002",)
    assert sorted(campaign.sessions) == sorted(logs) == ["s002"]
    assert list(campaign.faulty) == ["s001"]
    assert all(fault.path.startswith("sessions/s001") for fault in campaign.faulty["s001"])


def test_faults_of_settings_and_logs_of_a_left_out_session_are_told_together(tmp_path):
    spoilt = changed(SESSION, "date: 2025-03-14", "date: today") | changed(HEIGHT, "-0.413", "low")
    campaign, _, _ = check(tmp_path, sessions("s002") | spoilt | leave_out())
    assert {fault.path for fault in campaign.faulty["s001"]} == {SESSION, HEIGHT}


@pytest.mark.parametrize(
    "spoilt",
    [
        changed("traps/ring-a.yaml", "61.3(9)", "0"),
        changed("species/bead.yaml", "1050", "x"),
        {"campaign.yaml": FILES["campaign.yaml"].replace("title", "titel")},
        {"campaign.yaml": FILES["campaign.yaml"].replace("21.3(2)", "warm")},
    ],
)
def test_faults_of_campaign_trap_and_species_always_stop(tmp_path, spoilt):
    text = spoilt.get("campaign.yaml", FILES["campaign.yaml"])
    assert len(faults_of(tmp_path, sessions("s002") | spoilt | leave_out(text))) == 1


def test_a_campaign_with_faults_in_every_session_stops(tmp_path):
    campaign, _, faults = check(tmp_path, changed(HEIGHT, "-0.413", "low") | leave_out())
    assert {fault.path for fault in faults} == {HEIGHT, "sessions"}
    assert campaign.session_ids == ()


def test_no_damage_to_a_file_makes_a_traceback(tmp_path):
    chance = random.Random(11)
    pieces = [
        ",",
        ";",
        "\t",
        "\n",
        '"',
        "'",
        ":",
        "[",
        "{",
        "}",
        "#",
        "&a",
        "*a",
        "!",
        "\x00",
        "1,234",
        "nan",
        "1e999",
        "?",
        "(",
    ]
    spoilt = 0
    for trial in range(150):
        files = dict(FILES)
        name = chance.choice(sorted(files))
        text = files[name]
        at, to = sorted(chance.randrange(len(text) + 1) for _ in range(2))
        files[name] = chance.choice([text[:at] + chance.choice(pieces) + text[at:], text[:at] + text[to:], text[:at]])
        campaign, logs, faults = check(tmp_path / str(trial), files)
        assert all(fault.found and fault.expected for fault in faults)
        assert report_text(campaign, logs, faults)
        spoilt += bool(len(faults))
    assert spoilt > 75


# Instruments


@pytest.mark.parametrize(
    ("more", "column"),
    [
        ("gain: {dc_voltage: 1.003(1)}", "gain.dc_voltage"),
        ("gain: {dc_voltage: 1.002(2)}", "gain.dc_voltage"),
        ("gain: {height: {value: 1.000, u: 0.005, dof: 5}}", "gain.height"),
        ("offset: {dc_voltage_V: 0.1(3)}", "offset.dc_voltage"),
    ],
)
def test_one_instrument_with_two_values_is_a_fault_naming_both_places(tmp_path, more, column):
    path = "sessions/s002/session.yaml"
    files = sessions("s002") | {path: FILES[SESSION] + more + "\n"}
    fault = only_fault(tmp_path / "stop", files)
    assert (fault.path, fault.line, fault.column) == (path, 7, column)
    assert "campaign.yaml line" in fault.found
    assert len(faults_of(tmp_path / "leave", files | leave_out())) == 1


def test_the_same_value_in_another_unit_or_another_instrument_is_no_fault(tmp_path):
    path = "sessions/s002/session.yaml"
    same = sessions("s002") | {
        path: FILES[SESSION] + "offset: {dc_voltage_mV: 0(300)}\ngain: {dc_voltage: 1.0020(10)}\n"
    }
    assert faults_of(tmp_path / "same", same) == []
    other = sessions("s002") | {
        path: FILES[SESSION] + "gain: {dc_voltage: 1.1(1)}\ninstruments: {dc_voltage: supply-3}\n"
    }
    assert faults_of(tmp_path / "other", other) == []


def test_sessions_without_an_instrument_may_differ(tmp_path):
    path = "sessions/s002/session.yaml"
    assert faults_of(tmp_path, sessions("s002") | {path: FILES[SESSION] + "gain: {drive_voltage: 1.1(1)}\n"}) == []


# Words


def test_faults_are_told_by_file_with_line_column_found_expected_and_advice():
    faults = [
        Fault("b.csv", 2, "height_mm", "low", "a number", "Mend it."),
        Fault("a.yaml", 0, "", "no such file", "a file"),
        Fault("b.csv", 12, "", "3 fields", "5"),
    ]
    assert faults_text(faults) == (
        "a.yaml\n  whole file: found no such file\n    expected a file\n\n"
        "b.csv\n  line 2, height_mm: found low\n    expected a number\n    Mend it.\n"
        "  line 12: found 3 fields\n    expected 5"
    )


def test_the_report_says_how_files_were_read_and_what_was_not(tmp_path):
    text = (
        FILES[HEIGHT]
        .replace("height_mm\n", "height_mm,frame\n")
        .replace("413\n", "413,1\n")
        .replace("402\n", "402,2\n")
    )
    files = sessions("s002", "s003") | {HEIGHT: text} | changed(SESSION, "date: 2025-03-14", "date: today")
    files |= leave_out(FILES["campaign.yaml"] + "leave_out: {s003: fog}\n")
    files["sessions/s002/height.csv"] = text
    report = report_text(*check(tmp_path, files))
    assert "session s003: left out, fog" in report
    assert "session s001: left out for its faults" in report
    assert "  height.csv: 2 readings, comma, decimal point, UTF-8\n    columns not read: frame" in report
    assert report.endswith("1 session, 6 readings: fit to be reduced.")


def test_the_report_of_a_bad_campaign_ends_with_the_count(tmp_path):
    report = report_text(*check_campaign(tmp_path / "nowhere"))
    assert report.endswith("1 fault: nothing can be reduced until mended.")
    assert "fit to be reduced" not in report


def test_nothing_told_holds_the_path_of_the_folder(tmp_path):
    files = {HEIGHT: None, SESSION: "[", "traps/ring-a.yaml": b"\x00", BALANCE: "a\n"}
    assert str(tmp_path) not in report_text(*check(tmp_path, files))
    assert str(tmp_path) not in report_text(*check_campaign(tmp_path / "nowhere"))
