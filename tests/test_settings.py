import math

import pytest
from small_campaign import FILES, SESSION, changed, check, faults_of, only_fault, write

from reduction.errors import Faults
from reduction.quantity import Quantity
from reduction.settings import Air, Compare, Options, Session, Site, Species, Trap, load_campaign


def test_a_campaign_is_read_in_si(tmp_path):
    faults = Faults()
    campaign = load_campaign(write(tmp_path), faults=faults)
    assert list(faults) == []
    assert campaign.title == "Invented"
    assert campaign.session_ids == ("s001",)
    assert campaign.traps == {
        "ring-a": Trap("ring-a", Quantity(61.3, 0.9), Quantity(13100, 200), Quantity(0, 30), -1, 1.5e-3, "invented")
    }
    lot = Quantity(20.3 / 1e6, 0.2 / 1e6)
    density = Quantity(1050, 10 / math.sqrt(3), "rectangular")
    assert campaign.species == {"bead": Species("bead", Quantity(1.02, 0.01), 0.01, lot, 0.4 / 1e6, density)}
    air = Air(Quantity(294.45, 0.2), Quantity(100320, 50), Quantity(0.41, 0.03))
    assert campaign.sessions["s001"] == Session(
        id="s001",
        date="2025-03-14",
        trap="ring-a",
        species="bead",
        charged_with="nylon",
        air=air,
        site=Site(Quantity(9.8067, 0.0002), None, None),
        gain={
            "diameter": Quantity(1),
            "drive_frequency": Quantity(1),
            "dc_voltage": Quantity(1.002, 0.001),
            "drive_voltage": Quantity(1, 0.01),
            "height": Quantity(1, 0.005),
        },
        offset={"dc_voltage": Quantity(0, 0.3)},
        reading={"balance_voltage": None, "dc_voltage": None, "secular_frequency": None, "height": None},
        secular_reading="ring_down",
        height_reading="time_average",
        operator="",
        instruments={"dc_voltage": "supply-2", "height": "camera-1"},
        contacts=None,
        attributes={},
        exclude="",
        notes="",
    )


def test_options_default_to_the_first_value_of_the_contract(tmp_path):
    campaign, _, _ = check(tmp_path)
    assert campaign.options == Options(
        when_a_session_fails="stop",
        coverage_probability=0.95,
        adjust="session",
        drag="unsteady",
        mass_from="adjusted",
        lot="prior",
        scatter="stated",
        compare=Compare("charge_to_mass", "charged_with"),
        monte_carlo_trials=20000,
        seed=1,
    )


def test_options_are_read(tmp_path):
    text = FILES["campaign.yaml"] + (
        "when_a_session_fails: leave_out\ncoverage_probability: 0.99\nadjust: campaign\ndrag: steady\n"
        "mass_from: diameter\nlot: unused\nscatter: inflate\ncompare: {quantity: charge, by: coating}\n"
        "monte_carlo_trials: 1000\nseed: 7\n"
    )
    session = FILES[SESSION] + "attributes: {coating: gold}\n"
    campaign, _, faults = check(tmp_path, {"campaign.yaml": text, SESSION: session})
    assert list(faults) == []
    assert campaign.options == Options(
        "leave_out", 0.99, "campaign", "steady", "diameter", "unused", "inflate", Compare("charge", "coating"), 1000, 7
    )


def test_everything_optional_in_a_session_is_read(tmp_path):
    text = FILES[SESSION] + (
        "operator: A. N. Other\ngain: {diameter: 1.01(1), drive_frequency: 1.0001}\n"
        "reading: {balance_voltage_mV: 300, height_um: 3, secular_frequency_Hz: 0.1, dc_voltage_V: 0.02}\n"
        "instruments: {air: station-1}\ncontacts: 12\nattributes: {step: 2}\nexclude: smoke\n"
        "notes: |\n  two\n  lines\n"
    )
    session = check(tmp_path, {SESSION: text})[0].sessions["s001"]
    assert session.operator == "A. N. Other"
    assert session.gain["diameter"] == Quantity(1.01, 0.01)
    assert session.gain["drive_frequency"] == Quantity(1.0001)
    assert session.gain["dc_voltage"] == Quantity(1.002, 0.001)  # of every_session
    assert session.reading == {
        "balance_voltage": 0.3,
        "height": 3e-6,
        "secular_frequency": 0.1,
        "dc_voltage": 0.02,
    }
    assert session.instruments == {"air": "station-1", "dc_voltage": "supply-2", "height": "camera-1"}
    assert (session.contacts, session.attributes, session.exclude) == (12.0, {"step": "2"}, "smoke")
    assert session.notes == "two\nlines"


def test_keys_may_end_in_other_units(tmp_path):
    files = changed("campaign.yaml", "temperature_degC: 21.3(2), pressure_hPa: 1003.2(5)",
                    "temperature_K: 294.45(20), pressure_kPa: 100.32(5)")  # fmt: skip
    files |= changed("traps/ring-a.yaml", "usable_height_mm: 1.5", "usable_height_um: 1500")
    files |= {"species/bead.yaml": "shape_factor: 1\ndensity_g_per_cm3: 1.050(6)\ndiameter_nm: 20300(200)\n"}
    campaign, _, faults = check(tmp_path, files)
    assert list(faults) == []
    assert campaign.sessions["s001"].air.temperature == Quantity(294.45, 0.2)
    assert campaign.sessions["s001"].air.pressure.estimate == pytest.approx(100320, rel=1e-15)
    assert campaign.traps["ring-a"].usable_height == pytest.approx(1.5e-3, rel=1e-15)
    assert campaign.species["bead"].density == Quantity(1050, 6)
    assert campaign.species["bead"].diameter.u == pytest.approx(0.2e-6)


def test_texts_stay_what_was_written(tmp_path):
    files = {name.replace("s001", "0812"): text for name, text in FILES.items() if "s001" in name}
    files |= {name: None for name in FILES if "s001" in name}
    session = files["sessions/0812/session.yaml"].replace("ring-a", "1e3").replace("bead", "no").replace("nylon", "012")
    files["sessions/0812/session.yaml"] = session + "operator: 1:30\nnotes: null-like\nattributes: {day: 2025-03-14}\n"
    files |= {"traps/1e3.yaml": FILES["traps/ring-a.yaml"], "species/no.yaml": FILES["species/bead.yaml"]}
    campaign, _, faults = check(tmp_path, files)
    assert list(faults) == []
    session = campaign.sessions["0812"]
    assert (session.id, session.trap, session.species, session.charged_with) == ("0812", "1e3", "no", "012")
    assert (session.date, session.operator, session.attributes) == ("2025-03-14", "1:30", {"day": "2025-03-14"})


# every_session


def test_a_session_overrides_single_entries_of_every_session(tmp_path):
    text = FILES[SESSION] + "air: {temperature_K: 300}\ngain:\n  height: 0.99(1)\noffset:\n"
    session = check(tmp_path, {SESSION: text})[0].sessions["s001"]
    assert session.air == Air(Quantity(300), Quantity(100320, 50), Quantity(0.41, 0.03))
    assert session.gain["height"] == Quantity(0.99, 0.01)
    assert session.gain["dc_voltage"] == Quantity(1.002, 0.001)
    assert session.offset["dc_voltage"] == Quantity(0, 0.3)


def test_a_session_overrides_its_site_as_a_whole(tmp_path):
    text = FILES[SESSION] + "site: {latitude_deg: 47.0(1), elevation_m: 400(20)}\n"
    site = check(tmp_path, {SESSION: text})[0].sessions["s001"].site
    assert site.gravity is None
    assert site.latitude.estimate == pytest.approx(math.radians(47))
    assert site.elevation == Quantity(400, 20)


def test_attributes_are_joined(tmp_path):
    files = {
        "campaign.yaml": FILES["campaign.yaml"] + "  attributes: {a: 1, b: 2}\n",
        SESSION: FILES[SESSION] + "attributes: {b: 3}\n",
    }
    assert check(tmp_path, files)[0].sessions["s001"].attributes == {"a": "1", "b": "3"}


def test_any_key_of_a_session_may_stand_in_every_session(tmp_path):
    files = changed(SESSION, "trap: ring-a\nspecies: bead\ncharged_with: nylon\n", "")
    files["campaign.yaml"] = FILES["campaign.yaml"] + "  trap: ring-a\n  species: bead\n  charged_with: nylon\n"
    campaign, _, faults = check(tmp_path, files)
    assert list(faults) == []
    assert campaign.sessions["s001"].charged_with == "nylon"


def test_a_fault_in_every_session_is_told_once(tmp_path):
    files = changed("campaign.yaml", "21.3(2)", "warm") | {
        name.replace("s001", "s002"): text for name, text in FILES.items() if "s001" in name
    }
    fault = only_fault(tmp_path, files)
    assert (fault.path, fault.line, fault.column) == ("campaign.yaml", 3, "every_session.air.temperature_degC")


def test_where_each_entry_stands_is_kept(tmp_path):
    where = check(tmp_path)[0].sessions["s001"].where
    assert where["gain.height"] == ("campaign.yaml", 5)
    assert where["trap"] == (SESSION, 2)


# What is needed


@pytest.mark.parametrize(
    ("name", "line", "column"),
    [
        ("traps/ring-a.yaml", "dc_field_per_volt_per_m: 61.3(9)\n", "dc_field_per_volt_per_m"),
        ("traps/ring-a.yaml", "stray_field_V_per_m: 0(30)\n", "stray_field_V_per_m"),
        ("traps/ring-a.yaml", "dc_polarity: -1\n", "dc_polarity"),
        ("species/bead.yaml", "shape_factor: 1.02(1)\n", "shape_factor"),
        (SESSION, "date: 2025-03-14\n", "date"),
        (SESSION, "trap: ring-a\n", "trap"),
        (SESSION, "species: bead\n", "species"),
        (SESSION, "charged_with: nylon\n", "charged_with"),
        (SESSION, "height_reading: time_average\n", "height_reading"),
        (SESSION, "secular_reading: ring_down\n", "secular_reading"),
    ],
)
def test_a_required_key_is_missed_in_its_file(tmp_path, name, line, column):
    fault = only_fault(tmp_path, changed(name, line, ""))
    assert (fault.path, fault.column) == (name, column)


@pytest.mark.parametrize(
    ("old", "new", "columns"),
    [
        ("temperature_degC: 21.3(2), ", "", ["air.temperature_degC"]),
        ("pressure_hPa: 1003.2(5), ", "", ["air.pressure_hPa"]),
        (", relative_humidity_percent: 41(3)", "", ["air.relative_humidity_percent"]),
        ("  site: {gravity_m_per_s2: 9.8067(2)}\n", "", ["site"]),
        ("gravity_m_per_s2: 9.8067(2)", "latitude_deg: 47", ["site"]),
        ("gravity_m_per_s2: 9.8067(2)", "gravity_m_per_s2: 9.8, latitude_deg: 47, elevation_m: 1", ["site"]),
        ("dc_voltage: 1.002(1), ", "", ["gain.dc_voltage"]),
        ("drive_voltage: 1.00(1), ", "", ["gain.drive_voltage"]),
        (", height: 1.000(5)", "", ["gain.height"]),
        ("  offset: {dc_voltage_V: 0.0(3)}\n", "", ["offset.dc_voltage_V"]),
        ("  offset: {dc_voltage_V: 0.0(3)}\n", "  offset:\n", ["offset.dc_voltage_V"]),
    ],
)
def test_no_physical_quantity_has_a_default(tmp_path, old, new, columns):
    faults = faults_of(tmp_path, changed("campaign.yaml", old, new))
    assert [(fault.path, fault.column) for fault in faults] == [(SESSION, column) for column in columns]


@pytest.mark.parametrize(
    ("absent", "not_needed"),
    [
        ("height.csv", ("height_reading: time_average\n", ", height: 1.000(5)")),
        ("secular.csv", ("secular_reading: ring_down\n", "")),
    ],
)
def test_what_no_log_needs_may_be_left_out(tmp_path, absent, not_needed):
    files = changed(SESSION, not_needed[0], "") | {f"sessions/s001/{absent}": None}
    if not_needed[1]:
        files |= changed("campaign.yaml", not_needed[1], "")
    assert faults_of(tmp_path, files) == []


def test_balance_alone_needs_no_gradient(tmp_path):
    files = changed("traps/ring-a.yaml", "ac_gradient_per_volt_per_m2: 1.310(20)e4\n", "")
    gone = {"sessions/s001/height.csv": None, "sessions/s001/secular.csv": None}
    assert faults_of(tmp_path / "a", files | gone) == []
    fault = only_fault(tmp_path / "b", files)
    assert (fault.path, fault.column) == (SESSION, "trap")
    assert "ac_gradient_per_volt_per_m2" in fault.found


def test_secular_alone_needs_a_dc_gain_only_for_dc_voltages(tmp_path):
    files = changed("campaign.yaml", "gain: {dc_voltage: 1.002(1), ", "gain: {")
    files["campaign.yaml"] = files["campaign.yaml"].replace("  offset: {dc_voltage_V: 0.0(3)}\n", "")
    files |= {"sessions/s001/height.csv": None, "sessions/s001/balance.csv": None}
    assert faults_of(tmp_path / "a", files) == []
    files["sessions/s001/secular.csv"] = (
        "particle,drive_voltage_peak_V,drive_frequency_Hz,secular_frequency_Hz,dc_voltage_V\np,1,50,2,3\n"
    )
    columns = [fault.column for fault in faults_of(tmp_path / "b", files)]
    assert columns == ["gain.dc_voltage", "offset.dc_voltage_V"]


# What is refused


@pytest.mark.parametrize(
    ("name", "old", "new", "line", "column", "found", "advice"),
    [
        ("campaign.yaml", "title: Invented", "titel: Invented", 1, "titel", "unknown key", "Did you mean title?"),
        ("campaign.yaml", "title: Invented", "adjust: sesion", 1, "adjust", "sesion", "Did you mean session?"),
        ("campaign.yaml", "title: Invented", "drag: true", 1, "drag", "true", ""),
        ("campaign.yaml", "title: Invented", "coverage_probability: 95", 1, "coverage_probability", "out of range", ""),
        ("campaign.yaml", "title: Invented", "coverage_probability: 1", 1, "coverage_probability", "out of range", ""),
        ("campaign.yaml", "title: Invented", "coverage_probability: .nan", 1, "coverage_probability", ".nan", ""),
        ("campaign.yaml", "title: Invented", "seed: 1.5", 1, "seed", "1.5", ""),
        ("campaign.yaml", "title: Invented", "seed: 1_000", 1, "seed", "1_000", ""),
        ("campaign.yaml", "title: Invented", "seed: -1", 1, "seed", "-1", ""),
        ("campaign.yaml", "title: Invented", "monte_carlo_trials: 1e4", 1, "monte_carlo_trials", "1e4", ""),
        ("campaign.yaml", "title: Invented", "monte_carlo_trials: [1]", 1, "monte_carlo_trials", "a list", ""),
        ("campaign.yaml", "title: Invented", "sessions: s001", 1, "sessions", "s001", "[a, b]"),
        ("campaign.yaml", "title: Invented", "sessions: [s01]", 1, "sessions", "s01", "Did you mean s001?"),
        ("campaign.yaml", "title: Invented", "sessions: [s001, s001]", 1, "sessions", "s001 twice", ""),
        ("campaign.yaml", "title: Invented", "sessions: []", 1, "sessions", "an empty list", ""),
        ("campaign.yaml", "title: Invented", "leave_out: [s001]", 1, "leave_out", "a list", ""),
        ("campaign.yaml", "title: Invented", "leave_out: {s01: fog}", 1, "leave_out", "s01", "Did you mean s001?"),
        ("campaign.yaml", "title: Invented", "leave_out: {s001: }", 1, "leave_out", "nothing", ""),
        ("campaign.yaml", "title: Invented", "title: [a]", 1, "title", "a list", ""),
        ("campaign.yaml", "title: Invented", "compare: {by: colour}", 1, "compare.by", "colour", ""),
        ("campaign.yaml", "title: Invented", "compare: {quantity: mass}", 1, "compare.quantity", "mass", ""),
        ("campaign.yaml", "title: Invented", "compare: charge", 1, "compare", "charge", ""),
        ("campaign.yaml", "title: Invented", "title: a\ntitle: b", 2, "title", "first on line 1", "Delete one."),
        (
            "campaign.yaml",
            "pressure_hPa: 1003.2(5)",
            "pressure_psi: 14.5",
            3,
            "every_session.air.pressure_psi",
            "psi",
            "pressure_hPa",
        ),
        (
            "campaign.yaml",
            "pressure_hPa: 1003.2(5)",
            "pressure: 1003",
            3,
            "every_session.air.pressure",
            "no unit",
            "pressure_hPa",
        ),
        ("campaign.yaml", "pressure_hPa: 1003.2(5)", "pressure_mm: 760", 3, "every_session.air.pressure_mm", "mm", ""),
        (
            "campaign.yaml",
            "pressure_hPa: 1003.2(5)",
            "pressure_hPa: 100320(5)",
            3,
            "every_session.air.pressure_hPa",
            "out of range",
            "",
        ),
        (
            "campaign.yaml",
            "pressure_hPa: 1003.2(5)",
            "pressure_hPa: 1003.2(5), pressure_Pa: 1",
            3,
            "every_session.air.pressure_Pa",
            "again",
            "",
        ),
        (
            "campaign.yaml",
            "humidity_percent: 41(3)",
            "humidity_percent: 141",
            3,
            "every_session.air.relative_humidity_percent",
            "141",
            "",
        ),
        ("campaign.yaml", "height: 1.000(5)", "heigth: 1", 5, "every_session.gain.heigth", "unknown key", "height"),
        (
            "campaign.yaml",
            "drive_voltage: 1.00(1)",
            "drive_voltage: 0",
            5,
            "every_session.gain.drive_voltage",
            "out of range",
            "",
        ),
        (
            "campaign.yaml",
            "drive_voltage: 1.00(1)",
            'drive_voltage: "1,00(1)"',
            5,
            "every_session.gain.drive_voltage",
            "1,00(1)",
            "decimal point",
        ),
        (
            "campaign.yaml",
            "height: camera-1",
            "height: camera 1",
            7,
            "every_session.instruments.height",
            "camera 1",
            "",
        ),
        (
            "campaign.yaml",
            "height: camera-1",
            "camera: camera-1",
            7,
            "every_session.instruments.camera",
            "unknown key",
            "",
        ),
        ("traps/ring-a.yaml", "61.3(9)", "-61.3(9)", 1, "dc_field_per_volt_per_m", "out of range", ""),
        ("traps/ring-a.yaml", "1.310(20)e4", "0", 2, "ac_gradient_per_volt_per_m2", "out of range", ""),
        ("traps/ring-a.yaml", "dc_polarity: -1", "dc_polarity: 0", 4, "dc_polarity", "0", ""),
        ("traps/ring-a.yaml", "1.5", "1.5(1)", 5, "usable_height_mm", "1.5(1)", "No uncertainty"),
        ("traps/ring-a.yaml", "source: invented", "sources: x", 6, "sources", "unknown key", "Did you mean source?"),
        ("species/bead.yaml", "density_kg_per_m3", "density_kg", 5, "density_kg", "kg", "density_kg_per_m3"),
        ("species/bead.yaml", "1050", "1.05", 5, "density_kg_per_m3", "1.05, out of range", ""),
        ("species/bead.yaml", "shape: rectangular", "shape: box", 5, "density_kg_per_m3", "shape box", ""),
        (
            "species/bead.yaml",
            "half_width",
            "halfwidth",
            5,
            "density_kg_per_m3",
            "halfwidth",
            "Did you mean half_width?",
        ),
        ("species/bead.yaml", "20.3(2)", "20.3 mm", 3, "diameter_um", "20.3 mm", ""),
        ("species/bead.yaml", "20.3(2)", "0.0001", 3, "diameter_um", "out of range", ""),
        (SESSION, "2025-03-14", "14.03.2025", 1, "date", "14.03.2025", "year"),
        (SESSION, "2025-03-14", "2025-02-30", 1, "date", "2025-02-30", ""),
        (SESSION, "ring-a", "ring-b", 2, "trap", "ring-b", "Did you mean ring-a?"),
        (SESSION, "ring-a", "../ring-a", 2, "trap", "../ring-a", ""),
        (SESSION, "species: bead", "species: bead2", 3, "species", "bead2", "Did you mean bead?"),
        (SESSION, "time_average", "mean", 5, "height_reading", "mean", ""),
        (SESSION, "charged_with: nylon", "charged_with: nylon\nexclude: no", 5, "exclude", "no", "Leave the key out"),
        (SESSION, "charged_with: nylon", "charged_with: nylon\ncontacts: -1", 5, "contacts", "out of range", ""),
        (
            SESSION,
            "charged_with: nylon",
            "charged_with: nylon\ntemperature_degC: 20",
            5,
            "temperature_degC",
            "unknown here",
            "below air",
        ),
        (
            SESSION,
            "charged_with: nylon",
            "charged_with: nylon\nreading: {height_mm: 0}",
            5,
            "reading.height_mm",
            "out of range",
            "",
        ),
        (
            SESSION,
            "charged_with: nylon",
            "charged_with: nylon\nreading: {height_mm: 3(1)}",
            5,
            "reading.height_mm",
            "3(1)",
            "",
        ),
        (SESSION, "charged_with: nylon", "charged_with: nylon\nair: 20", 5, "air", "20", ""),
        (SESSION, "charged_with: nylon", "charged_with: nylon\nattributes: {a: [1]}", 5, "attributes", "a list", ""),
        (SESSION, "charged_with: nylon", "charged_with: &x nylon", 4, "", "anchor", ""),
        (SESSION, "charged_with: nylon", "charged_with: !!str nylon", 4, "", "tag", ""),
    ],
)
def test_a_fault_is_told_with_its_place(tmp_path, name, old, new, line, column, found, advice):
    fault = only_fault(tmp_path, changed(name, old, new))
    assert (fault.path, fault.line, fault.column) == (name, line, column)
    assert found in fault.found
    assert advice in fault.advice
    assert fault.expected


@pytest.mark.parametrize(
    ("content", "found"),
    [
        ("- a\n- b\n", "a list"),
        ("just text\n", "just text"),
        ("a: [1\nb: 2\n", "not YAML"),
        ("a: b: c\n", "not YAML"),
        ("\ta: b\n", "not YAML"),
        ("a: &a [x]\nb: [*a, *a]\n", "anchor"),
        ("a: *nowhere\n", "alias"),
        ("a: !!python/object/apply:os.system [ls]\n", "tag"),
        ("a: 1\n---\nb: 2\n", "second document"),
        ("[" * 100_000, ""),
        ("a: " * 5_000, ""),
        ("{a: " * 2_000, ""),
        ("? [x]\n: 1\n", "list or mapping as key"),
        (b"\x00\x01\x02", "control character"),
        (b"\xff\xfe\x00", "UTF-16"),
        (b"\x89PNG\r\n\x1a\n\x00\x00", "control character"),
        ("x" * 2_000_000, "MB"),
        (None, "no such file"),
    ],
)
def test_what_is_no_mapping_is_a_fault_and_no_traceback(tmp_path, content, found):
    for name in ("campaign.yaml", "traps/ring-a.yaml", SESSION):
        faults = faults_of(tmp_path / name.replace("/", "-"), {name: content})
        expected = [fault for fault in faults if fault.path == name]
        if content is None and name.startswith("traps"):
            assert [fault.path for fault in faults] == [SESSION]
            continue
        assert len(expected) == 1, name
        assert found in expected[0].found


def test_an_empty_campaign_file_is_all_defaults(tmp_path):
    session = FILES[SESSION] + FILES["campaign.yaml"].partition("every_session:\n")[2].replace(
        "\n  ", "\n"
    ).removeprefix("  ")
    for number, text in enumerate(("", "# nothing\n", "---\n", "every_session:\n", "\ufefftitle: x\r\n")):
        assert faults_of(tmp_path / str(number), {"campaign.yaml": text, SESSION: session}) == []


@pytest.mark.parametrize("encoding", ["utf-8", "utf-8-sig", "utf-16", "cp1252"])
def test_yaml_of_any_usual_encoding_is_read(tmp_path, encoding):
    text = FILES["campaign.yaml"].replace("Invented", "Größe µ")
    campaign, _, faults = check(tmp_path, {"campaign.yaml": text.replace("\n", "\r\n").encode(encoding)})
    assert list(faults) == []
    assert campaign.title == "Größe µ"


def test_a_letter_with_its_accent_apart_is_the_same_letter(tmp_path):
    text = FILES[SESSION].replace("nylon", "verre fume\u0301")
    assert check(tmp_path, {SESSION: text})[0].sessions["s001"].charged_with == "verre fum\u00e9"


def test_a_folder_in_place_of_a_file_is_a_fault(tmp_path):
    write(tmp_path, {"campaign.yaml": None, SESSION: None})
    (tmp_path / "campaign.yaml").mkdir()
    (tmp_path / SESSION).mkdir()
    faults = Faults()
    load_campaign(tmp_path, faults=faults)
    assert [(fault.path, fault.found) for fault in faults] == [("campaign.yaml", "a folder"), (SESSION, "a folder")]


def test_no_campaign_at_all_is_one_fault(tmp_path):
    (tmp_path / "file").write_text("x")
    for name in ("nowhere", "file"):
        faults = Faults()
        campaign = load_campaign(tmp_path / name, faults=faults)
        assert [(fault.path, fault.found) for fault in faults] == [("campaign.yaml", f"no folder {name}")]
        assert campaign.session_ids == ()


# Which sessions


def two(**more):
    return {name.replace("s001", "s002"): text for name, text in FILES.items() if "s001" in name} | more


def test_sessions_are_chosen_and_left_out(tmp_path):
    base = FILES["campaign.yaml"]
    assert check(tmp_path / "a", two())[0].session_ids == ("s001", "s002")
    assert check(tmp_path / "b", two() | {"campaign.yaml": base + "sessions: [s002]\n"})[0].session_ids == ("s002",)
    campaign, _, faults = check(
        tmp_path / "c", two() | {"campaign.yaml": base + "leave_out: {s001: fog}\n", SESSION: "junk"}
    )
    assert (campaign.session_ids, campaign.leave_out, list(faults)) == (("s002",), {"s001": "fog"}, [])


def test_hidden_names_and_notes_among_the_sessions_are_ignored(tmp_path):
    files = {"sessions/.trash/session.yaml": "junk", "sessions/.DS_Store": b"\x00", "sessions/README.md": "notes"}
    assert faults_of(tmp_path, files | {"traps/.x.yaml": "junk", "traps/photo.jpg": b"\xff"}) == []


def test_a_log_among_the_session_folders_is_a_fault(tmp_path):
    fault = only_fault(tmp_path, {"sessions/balance.csv": "particle\n"})
    assert fault.path == "sessions/balance.csv"


def test_names_of_folders_and_files_are_ids(tmp_path):
    for number, name in enumerate(("a b", "-a", "ü", "a" * 65, "a.b")):
        paths = [fault.path for fault in faults_of(tmp_path / str(number), two() | {f"sessions/{name}/x.txt": ""})]
        assert f"sessions/{name}" in paths
    fault = only_fault(tmp_path / "t", {"traps/ring b.yaml": FILES["traps/ring-a.yaml"]})
    assert fault.path == "traps/ring b.yaml"
    assert only_fault(tmp_path / "y", {"species/b.yml": "x"}).found == "the ending .yml"


def test_names_that_differ_by_case_alone_are_a_fault(tmp_path):
    files = {name.replace("s001", "S001"): text for name, text in FILES.items() if "s001" in name}
    fault = only_fault(tmp_path, files)
    assert (fault.path, fault.found) == ("sessions", "S001 and s001")


def test_a_campaign_without_sessions_is_a_fault(tmp_path):
    files = {name: None for name in FILES if "s001" in name}
    assert [fault.found for fault in faults_of(tmp_path, files)] == ["no session"]


def test_unused_traps_and_species_are_checked_too(tmp_path):
    faults = faults_of(tmp_path, {"traps/spare.yaml": "dc_polarity: 1\n"})
    assert {fault.path for fault in faults} == {"traps/spare.yaml"}
    assert {fault.column for fault in faults} == {"dc_field_per_volt_per_m", "stray_field_V_per_m"}
