import re
from pathlib import Path

import pytest
from drawn import OTHER, read
from small_campaign import BALANCE, FILES, HEIGHT, SESSION, write
from test_schemas import EditorLoader

from reduction.check import check_campaign
from reduction.errors import Faults, InputError
from reduction.newcampaign import DRAWN, new_campaign, new_session
from reduction.settings import load_campaign

FILLED = {
    "campaign.yaml": {
        "# gravity_m_per_s2:": "gravity_m_per_s2: 9.81",
        "    dc_voltage:\n": "    dc_voltage: 1.0(1)\n",
        "    drive_voltage:\n": "    drive_voltage: 1.0(1)\n",
        "# height:\n    # True diameter": "height: 1\n    # True diameter",
        "dc_voltage_V:\n  # How": "dc_voltage_V: 0\n  # How",
        "# height_reading:": "height_reading: time_average",
    },
    "traps/trap-a.yaml": {
        "dc_field_per_volt_per_m:": "dc_field_per_volt_per_m: 60(1)",
        "dc_polarity:": "dc_polarity: 1",
        "# ac_gradient_per_volt_per_m2:": "ac_gradient_per_volt_per_m2: 1.3(1)e4",
        "stray_field_V_per_m:": "stray_field_V_per_m: 0(30)",
    },
    "species/lot-a.yaml": {"\nshape_factor:": "\nshape_factor: 1"},
    "sessions/s001/session.yaml": {
        "\ndate:": "\ndate: 2025-03-14",
        "charged_with:": "charged_with: glass",
        "temperature_degC:": "temperature_degC: 20",
        "pressure_hPa:": "pressure_hPa: 1000",
        "humidity_percent:": "humidity_percent: 40",
    },
}


def filled_in(root):
    for name, changes in FILLED.items():
        text = (root / name).read_text()
        for old, new in changes.items():
            assert text.count(old) == 1, (name, old, text.count(old))
            text = text.replace(old, new)
        (root / name).write_text(text)
    with (root / "sessions/s001/balance.csv").open("a") as log:
        log.write("p01,400,50,120,0,,,,,\n")
    with (root / "sessions/s001/height.csv").open("a") as log:
        log.write("p01,400,50,120,0.1,0,,,,\n")


def test_a_new_campaign_names_only_what_is_to_be_filled_in(tmp_path):
    names = new_campaign(tmp_path / "c")
    assert names == sorted(str(path.relative_to(tmp_path / "c")) for path in (tmp_path / "c").rglob("*.*"))
    _, _, faults = check_campaign(tmp_path / "c")
    assert {fault.found for fault in faults} == {"nothing", "no reading"}
    assert {fault.path for fault in faults} >= {"traps/trap-a.yaml", "species/lot-a.yaml", SESSION, "sessions/s001"}


def test_a_new_campaign_filled_in_is_fit_to_be_reduced(tmp_path):
    new_campaign(tmp_path)
    filled_in(tmp_path)
    campaign, logs, faults = check_campaign(tmp_path)
    assert list(map(str, faults)) == []
    assert sorted(logs["s001"].tables) == ["balance", "height"]
    assert campaign.sessions["s001"].charged_with == "glass"


def test_the_trap_drawn_in_the_comments_is_fit_to_be_computed(tmp_path):
    new_campaign(tmp_path)
    path = tmp_path / "traps/trap-a.yaml"
    shown = [line.removeprefix("# ") for line in path.read_text().splitlines() if line.startswith("# ")]
    at = shown.index("electrodes:")
    drawn = "\n".join(shown[at : at + len(DRAWN.splitlines())]) + "\n"
    assert drawn == DRAWN
    drawing, faults = read(tmp_path / "drawn", OTHER + drawn)
    assert faults == []
    assert len(drawing.electrodes(drawing.nominal).conductors) == 4


def test_options_shown_are_the_defaults(tmp_path):
    new_campaign(tmp_path)
    before = load_campaign(tmp_path, faults=Faults()).options
    path = tmp_path / "campaign.yaml"
    head, _, rest = path.read_text().partition("every_session:")
    lines = [
        line.removeprefix("# ")
        for line in head.split("\n")
        if line.startswith(("# ", "title")) and ": " in line or line == "# compare:"
    ]
    known = [
        line
        for line in lines
        if line.split(":")[0].strip().replace("_", "").islower() and len(line) < 50 and "," not in line
    ]
    path.write_text("\n".join(known) + "\nevery_session:" + rest)
    faults = Faults()
    after = load_campaign(tmp_path, faults=faults).options
    assert [fault for fault in faults if fault.path == "campaign.yaml"] == []
    assert after == before
    assert len(known) > 12


def test_commented_keys_may_be_uncommented(tmp_path):
    new_campaign(tmp_path)
    for name in ("traps/trap-a.yaml", "species/lot-a.yaml", "sessions/s001/session.yaml"):
        text = (tmp_path / name).read_text()
        lines = [
            line.removeprefix("# ") if line.startswith("# ") and line.endswith(":") and " " not in line[2:] else line
            for line in text.split("\n")
        ]
        (tmp_path / name).write_text("\n".join(lines))
    faults = Faults()
    load_campaign(tmp_path, faults=faults)
    assert {fault.found for fault in faults} == {"nothing"}


@pytest.mark.parametrize("name", ["campaign.yaml", "sessions/s001/session.yaml"])
def test_whoever_sets_up_a_measurement_reads_the_cautions(tmp_path, name):
    new_campaign(tmp_path)
    text = " ".join((tmp_path / name).read_text().replace("\n#", " ").split())
    for word in ("injure or kill", "can blind", "can burn", "inhaled", "qualified staff come first"):
        assert word in text


def test_a_folder_with_anything_in_it_is_left_alone(tmp_path):
    (tmp_path / "note.txt").write_text("mine")
    with pytest.raises(InputError, match="files in it"):
        new_campaign(tmp_path)
    with pytest.raises(InputError, match="files in it"):
        new_campaign(tmp_path / "note.txt")
    assert [path.name for path in tmp_path.iterdir()] == ["note.txt"]
    with pytest.raises(InputError, match="note.txt|campaign.yaml"):
        new_campaign(tmp_path / "note.txt" / "c")


def test_an_empty_folder_may_be_used_and_texts_do_not_depend_on_it(tmp_path):
    (tmp_path / "a").mkdir()
    names = new_campaign(tmp_path / "a")
    assert names == new_campaign(tmp_path / "deep" / "b")
    for name in names:
        assert (tmp_path / "a" / name).read_bytes() == (tmp_path / "deep/b" / name).read_bytes()


# One more session


def test_a_session_like_another_has_its_settings_and_no_reading(tmp_path):
    text = (
        "# bench two\n"
        + FILES[SESSION]
        + "exclude: smoke\nnotes: |\n  long\n  story\n# air of the day\nair: {temperature_degC: 20}\n"
    )
    height = (
        "\ufeffsep=;\r\n# c\r\nparticle;drive_voltage_rms_V;drive_frequency_Hz;dc_voltage_V;height [µm]\r\n"
        "p;1;50;1;1\r\n"
    )
    write(tmp_path, {SESSION: text, HEIGHT: height, BALANCE: None})
    names = new_session(tmp_path, "s002", like="s001")
    assert names == [f"sessions/s002/{name}" for name in ("height.csv", "secular.csv", "session.yaml")]
    made = (tmp_path / "sessions/s002/session.yaml").read_text()
    assert EditorLoader(made).get_single_data() == {
        "date": None,
        "trap": "ring-a",
        "species": "bead",
        "charged_with": "nylon",
        "height_reading": "time_average",
        "secular_reading": "ring_down",
        "air": {"temperature_degC": 20},
    }
    assert "# bench two" in made
    assert "# air of the day" in made
    assert "s001" in made.split("\n")[0]
    head = (tmp_path / "sessions/s002/height.csv").read_text()
    assert head == "sep=;\nparticle;drive_voltage_rms_V;drive_frequency_Hz;dc_voltage_V;height [µm]\n"


def test_a_session_like_another_asks_for_its_date_and_readings(tmp_path):
    new_session(write(tmp_path), "s002", like="s001")
    faults = check_campaign(tmp_path)[2]
    assert [(fault.path, fault.column, fault.found) for fault in faults] == [
        ("sessions/s002", "", "no reading"),
        ("sessions/s002/session.yaml", "date", "nothing"),
    ]


@pytest.mark.parametrize(
    "text",
    [
        "{date: 2025-03-14, trap: ring-a, charged_with: 012}\n",
        "---\ndate: 2025-03-14\ntrap: ring-a\ncharged_with: 012\n...\n",
    ],
)
def test_any_way_of_writing_a_session_can_be_followed(tmp_path, text):
    write(tmp_path, {SESSION: text})
    new_session(tmp_path, "s002", like="s001")
    path = tmp_path / "sessions/s002/session.yaml"
    path.write_text(path.read_text().replace("date:", "date: 2025-03-15"))
    faults = Faults()
    load_campaign(tmp_path, faults=faults)
    missed = {fault.column for fault in faults if fault.path.startswith("sessions/s002")}
    assert missed == {"species"}  # the logs have heads alone, so nothing else is needed
    path.write_text(path.read_text() + "species: bead\n")
    faults = Faults()
    campaign = load_campaign(tmp_path, faults=faults)
    assert campaign.sessions["s002"].charged_with == "012"


def test_a_session_of_its_own_is_empty(tmp_path):
    names = new_session(write(tmp_path), "s002")
    assert len(names) == 6
    assert (tmp_path / "sessions/s002/balance.csv").read_text().startswith("particle,drive_voltage_peak_V,")


@pytest.mark.parametrize(
    ("session", "like", "words"),
    [
        ("s001", None, "a session of that name"),
        ("S001", None, "a session of that name"),
        ("s002", "s01", "Did you mean s001"),
        ("../s2", None, "the name"),
        ("", None, "the name"),
        (".s", None, "the name"),
    ],
)
def test_nothing_is_overwritten_or_written_elsewhere(tmp_path, session, like, words):
    write(tmp_path / "c")
    before = {path: path.read_bytes() for path in tmp_path.rglob("*") if path.is_file()}
    with pytest.raises(InputError, match=words):
        new_session(tmp_path / "c", session, like)
    assert {path: path.read_bytes() for path in tmp_path.rglob("*") if path.is_file()} == before


def test_a_session_needs_a_campaign_and_a_readable_one_to_follow(tmp_path):
    with pytest.raises(InputError, match=r"campaign\.yaml"):
        new_session(tmp_path, "s001")
    write(tmp_path, {SESSION: "["})
    with pytest.raises(InputError, match="not YAML"):
        new_session(tmp_path, "s002", like="s001")


def test_the_drawing_in_the_how_to_is_fit_to_be_computed(tmp_path):
    text = (Path(__file__).parents[1] / "data_example" / "measuring-your-trap.md").read_text()
    block = text.partition("```yaml\n")[2].partition("```")[0]
    drawing, faults = read(tmp_path, OTHER + block)
    assert faults == []
    assert drawing.names[0] == "hole_radius"
    names = {
        "lower": "plate_height", "upper": "[plate_height, 2]", "rod_radius": "hole_radius",
        "ball_radius": "hole_radius", "height": "[plate_height, hole_radius]", "h": "plate_height", "a": "hole_radius",
    }  # fmt: skip
    rows = re.findall(r"`((?:circle|rectangle|outline): .*?[}\]])`", text)
    assert len(rows) == 6
    for row in rows:
        form, _, rest = row.partition(":")
        shown = re.sub(rf"\b({'|'.join(names)})\b", lambda word: names[word[1]], rest)
        head = block[: block.index("    plate:")]
        alone = f"{head}    shown:\n      carries: ground\n      {form}:{shown}\n"
        assert [fault for fault in read(tmp_path, OTHER + alone)[1] if "shown" in fault.column] == [], row
