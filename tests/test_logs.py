import math
import random

import numpy as np
import pytest
from small_campaign import BALANCE, FILES, HEIGHT, changed, check, faults_of, only_fault, write

import reduction.csvfile
from reduction.errors import Faults
from reduction.logs import read_logs

PARTICLES, LOST, SECULAR = (f"sessions/s001/{name}.csv" for name in ("particles", "lost", "secular"))
ROWS = [("p01", "400.5", "50", "100.25", "-0.4135"), ("p01", "400.5", "50", "-140", "0.4")]
HEAD = ["particle", "drive_voltage_peak_V", "drive_frequency_Hz", "dc_voltage_V", "height_mm"]


def table(root, text, log="height", **more):
    """One log of the small campaign read from a text, which must be without fault."""
    name = f"sessions/s001/{log}.csv"
    _, logs, faults = check(root, {name: text} | more)
    assert list(map(str, faults)) == []
    return logs["s001"].tables[log]


def written(separator=",", mark=".", head=HEAD, rows=ROWS, end="\n"):
    lines = [separator.join(head), *(separator.join(cells).replace(".", mark) for cells in rows)]
    return end.join(lines) + end


def assert_same_readings(read):
    assert list(read["particle"]) == ["p01", "p01"]
    np.testing.assert_array_equal(read["drive_amplitude"], [400.5, 400.5])
    np.testing.assert_array_equal(read["drive_frequency"], [50.0, 50.0])
    np.testing.assert_array_equal(read["dc_voltage"], [100.25, -140.0])
    np.testing.assert_allclose(read["height"], [-0.4135e-3, 0.4e-3], rtol=1e-15)


# Dialects


@pytest.mark.parametrize(
    ("text", "dialect"),
    [
        (written(), "comma, decimal point, UTF-8"),
        (written(";", ","), "semicolon, decimal comma, UTF-8"),
        (written(";"), "semicolon, decimal point, UTF-8"),
        (written("\t", ","), "tab, decimal comma, UTF-8"),
        (written("\t"), "tab, decimal point, UTF-8"),
        (written(end="\r\n"), "comma, decimal point, UTF-8"),
        (written(end="\r"), "comma, decimal point, UTF-8"),
        (written().rstrip("\n"), "comma, decimal point, UTF-8"),
        ("\ufeff" + written(";", ","), "semicolon, decimal comma, UTF-8 with byte order mark"),
        ("\ufeff# note\n" + written(), "comma, decimal point, UTF-8 with byte order mark"),
        (("\ufeff" + written("\t", ",")).encode("utf-16-le"), "tab, decimal comma, UTF-16"),
        (("\ufeff" + written()).encode("utf-16-be"), "comma, decimal point, UTF-16"),
        ("sep=;\n" + written(";", ","), "semicolon, decimal comma, UTF-8"),
        ("\ufeffsep=,\r\n" + written(end="\r\n"), "comma, decimal point, UTF-8 with byte order mark"),
        ('"sep=;"\n' + written(";", ","), "semicolon, decimal comma, UTF-8"),
        ("sep=\t\n" + written("\t"), "tab, decimal point, UTF-8"),
        (
            "\n\n# a comment, with; marks\n\n" + written().replace("\np", "\n\n  # p\n   \n,,,,\np"),
            "comma, decimal point, UTF-8",
        ),
        ('"# a quoted comment, with commas"\n' + written(), "comma, decimal point, UTF-8"),
        (written().replace("\n", ",,\n"), "comma, decimal point, UTF-8"),
        (written(";", ",").replace("\n", ";\n", 2), "semicolon, decimal comma, UTF-8"),
        (written(" , "), "comma, decimal point, UTF-8"),
        (written(" \t "), "tab, decimal point, UTF-8"),
        ('"' + written('","').replace("\n", '"\n"').removesuffix('"'), "comma, decimal point, UTF-8"),
        (written(", ").replace("p01", '"p01"'), "comma, decimal point, UTF-8"),
        (written(";", ",").replace("-", "\N{MINUS SIGN}"), "semicolon, decimal comma, UTF-8"),
        (written().replace("-", "\N{MINUS SIGN}"), "comma, decimal point, UTF-8"),
        (written().replace("400.5", "4.005e2").replace("-140", "-1.4E+02"), "comma, decimal point, UTF-8"),
    ],
)
def test_a_log_is_read_as_laboratories_write_it(tmp_path, text, dialect):
    _, logs, faults = check(tmp_path, {HEIGHT: text})
    assert list(map(str, faults)) == []
    assert_same_readings(logs["s001"].tables["height"])
    assert logs["s001"].dialects["height"] == dialect


@pytest.mark.parametrize("encoding", ["utf-8", "cp1252", "utf-16"])
def test_heads_and_notes_of_any_usual_encoding_are_read(tmp_path, encoding):
    text = written(head=[*HEAD[:4], "height [µm]"], rows=[(*row[:4], f"{float(row[4]) * 1000:g}") for row in ROWS])
    text = text.replace("\n", ",note\n", 1).replace("\np01", "\n# Größe\np01").replace("-413.5", "-413.5,Störung")
    text = text.replace("400\n", "400,\n")
    read = table(tmp_path, text.encode(encoding))
    assert_same_readings(read)
    assert list(read["note"]) == ["Störung", ""]


def test_any_mixture_of_dialect_order_and_units_gives_the_same_readings(tmp_path):
    chance = random.Random(5)
    scales = {
        "drive_voltage_peak_V": ("drive_voltage_peak_kV", 1e-3),
        "height_mm": ("height/um", 1e3),
        "dc_voltage_V": ("dc_voltage [mV]", 1e3),
        "drive_frequency_Hz": ("drive_frequency_kHz", 1e-3),
    }
    for trial in range(60):
        separator, mark = chance.choice([(",", "."), (";", ","), (";", "."), ("\t", ","), ("\t", ".")])
        order = chance.sample(range(5), 5)
        other = {name for name in scales if chance.random() < 0.5}
        head = [scales[name][0] if name in other else name for name in HEAD]
        factors = [scales[name][1] if name in other else 1.0 for name in HEAD[1:]]
        rows = []
        for particle, *cells in ROWS:
            numbers = [round(float(cell) * factor, 9) for cell, factor in zip(cells, factors, strict=True)]
            row = [particle, *(repr(number).removesuffix(".0") for number in numbers)]
            rows.append([row[i] for i in order])
        text = written(separator, mark, [head[i] for i in order], rows, chance.choice(["\n", "\r\n"]))
        faults = Faults()
        root = write(tmp_path / str(trial), {HEIGHT: chance.choice(["", "\ufeff"]) + text})
        read = read_logs(root, "s001", faults=faults).tables["height"]
        assert list(map(str, faults)) == [], text
        expected = [[400.5, 400.5], [50.0, 50.0], [100.25, -140.0], [-0.4135e-3, 0.4e-3]]
        for name, values in zip(("drive_amplitude", "drive_frequency", "dc_voltage", "height"), expected, strict=True):
            np.testing.assert_allclose(read[name], values, rtol=1e-15)


def test_lines_are_those_of_the_file(tmp_path):
    text = f'# one\n\n{",".join(HEAD)},note\np,1,50,1,1,"two\nlines"\n\n#\np,1,50,2,2,\n'
    read = table(tmp_path, text)
    assert list(read["line"]) == [4, 8]
    assert list(read["note"]) == ["two\nlines", ""]


# The decimal mark


def semicolons(*cells, extra=()):
    rows = [("p01", "400", "50", cell, "1") for cell in cells]
    text = written(";", ".", HEAD, rows)
    if extra:
        lines = text.split("\n")
        lines[0] += ";my_column"
        for number, cell in enumerate(extra, 1):
            lines[number] += f";{cell}"
        text = "\n".join(lines)
    return text


def test_a_number_that_nothing_settles_is_a_fault_with_both_readings(tmp_path):
    fault = only_fault(tmp_path, {HEIGHT: semicolons("1,234")})
    assert (fault.path, fault.line, fault.column, fault.found) == (HEIGHT, 2, "dc_voltage_V", "1,234")
    assert "1.234 or 1234" in fault.advice


@pytest.mark.parametrize("settling", ["8,41", "0,123", "1234,567", "1,2345", "-0,5", ",5", "5,", "1,234e1", "01,234"])
def test_one_cell_settles_the_decimal_comma_of_the_whole_file(tmp_path, settling):
    values = list(table(tmp_path, semicolons("1,234", settling))["dc_voltage"])
    assert values == [1.234, float(settling.replace(",", "."))]


def test_a_column_that_is_not_read_may_settle_it(tmp_path):
    assert list(table(tmp_path, semicolons("1,234", extra=["0,5"]))["dc_voltage"]) == [1.234]
    assert only_fault(tmp_path, {HEIGHT: semicolons("1,234", extra=["2,345"])}).found == "1,234"


@pytest.mark.parametrize("point", ["8.41", "1.234"])
def test_a_decimal_point_elsewhere_makes_the_comma_a_fault(tmp_path, point):
    fault = only_fault(tmp_path, {HEIGHT: semicolons(point, "1,234")})
    assert (fault.line, fault.found) == (3, "1,234")
    assert f"{point} on line 2" in fault.expected


def test_two_decimal_marks_in_one_file_are_a_fault_naming_both(tmp_path):
    fault = only_fault(tmp_path, {HEIGHT: semicolons("8.5", "8,41")})
    assert (fault.line, fault.found) == (2, "8.5, with 8,41 on line 3")


@pytest.mark.parametrize("quoted", ['"8,413"', '"8,41"', '"0,5"'])
def test_a_quoted_decimal_comma_between_commas_is_a_fault(tmp_path, quoted):
    fault = only_fault(tmp_path, {HEIGHT: written().replace("100.25", quoted)})
    assert (fault.line, fault.column, fault.found) == (2, "dc_voltage_V", quoted.strip('"'))
    assert "semicolons" in fault.advice


def test_decimal_commas_between_commas_are_a_fault_in_every_row(tmp_path):
    faults = faults_of(tmp_path, {HEIGHT: written(",", ",")})
    assert [(fault.line, fault.found) for fault in faults] == [(2, "8 fields"), (3, "7 fields")]
    assert all("semicolons" in fault.advice for fault in faults)


@pytest.mark.parametrize(
    ("text", "cell"),
    [(written(";"), "1.234.567"), (written(";", ","), "1.234,5"), (written(), "1 234.5"), (written(), "1'234")],
)
def test_separators_between_thousands_are_a_fault(tmp_path, text, cell):
    fault = only_fault(tmp_path, {HEIGHT: text.replace("-140", cell)})
    assert (fault.line, fault.found) == (3, cell)
    assert "thousands" in fault.advice


def test_whole_numbers_need_no_decimal_mark(tmp_path):
    assert list(table(tmp_path, semicolons("1234", "5"))["dc_voltage"]) == [1234.0, 5.0]


# Columns


@pytest.mark.parametrize(
    ("name", "reading", "amplitude"),
    [
        ("drive_voltage_peak_V", "400", 400.0),
        ("drive_voltage_rms_V", "400", 400.0 * math.sqrt(2)),
        ("drive_voltage_peak_to_peak_V", "400", 200.0),
        ("drive_voltage_peak_to_peak_kV", "150", 75e3),
        ("drive_voltage_rms [V]", "400", 400.0 * math.sqrt(2)),
        ("drive_voltage_peak/mV", "400", 0.4),
    ],
)
def test_the_drive_amplitude_follows_from_the_convention_in_the_name(tmp_path, name, reading, amplitude):
    text = FILES[SECULAR].replace("drive_voltage_peak_V", name).replace(",400,", f",{reading},")
    assert table(tmp_path, text, "secular")["drive_amplitude"][0] == pytest.approx(amplitude, rel=1e-15)


@pytest.mark.parametrize("name", ["drive_voltage_V", "drive_voltage", "drive_voltage [V]", "drive_voltage_kV"])
def test_a_drive_voltage_without_convention_is_explained(tmp_path, name):
    fault = only_fault(tmp_path, {HEIGHT: FILES[HEIGHT].replace("drive_voltage_peak_V", name)})
    assert (fault.path, fault.line, fault.column) == (HEIGHT, 1, name)
    assert "convention" in fault.found
    assert "drive_voltage_rms_V" in fault.expected


def test_the_drive_voltage_of_a_lost_particle_has_a_convention_too(tmp_path):
    fault = only_fault(tmp_path, {LOST: "particle,reason,drive_voltage_V\np9,fell,100\n"})
    assert (fault.path, fault.column) == (LOST, "drive_voltage_V")


def test_there_is_one_drive_voltage(tmp_path):
    text = "particle,drive_voltage_peak_V,drive_voltage_rms_V,drive_frequency_Hz,dc_voltage_V,height_mm\np,1,1,1,1,1\n"
    assert "second drive voltage" in only_fault(tmp_path / "two", {HEIGHT: text}).found
    fault = only_fault(tmp_path / "none", {HEIGHT: text.replace("drive_voltage_peak_V,drive_voltage_rms_V", "a,b")})
    assert fault.found == "no drive voltage"


@pytest.mark.parametrize("name", ["balance", "secular", "height"])
def test_every_required_column_is_missed(tmp_path, name):
    path = f"sessions/s001/{name}.csv"
    head, *rows = FILES[path].rstrip("\n").split("\n")
    for index, column in enumerate(head.split(",")):
        if column.startswith("time"):
            continue
        lines = [",".join(cell for at, cell in enumerate(line.split(",")) if at != index) for line in (head, *rows)]
        fault = only_fault(tmp_path, {path: "\n".join(lines)})
        assert (fault.path, fault.line, fault.column) == (path, 1, column)


def test_every_optional_column_is_read(tmp_path):
    files = {
        BALANCE: "particle,drive_voltage_peak_V,drive_frequency_Hz,balance_voltage_V,time_min,u_balance_voltage_mV,"
        "particles_in_trap,nearest_um,exclude,note\np01,400,50,120.5,2,300,2,900,spark,a\np01,400,50,120.5,,,,,,\n",
        SECULAR: "particle,drive_voltage_peak_V,drive_frequency_Hz,secular_frequency_Hz,time_s,u_secular_frequency_Hz,"
        "dc_voltage_kV,exclude,note\np01,400,50,11,3,0.2,0.1,x,y\n",
        HEIGHT: "particle,drive_voltage_peak_V,drive_frequency_Hz,dc_voltage_V,height_mm,time_s,u_height_um,"
        "u_dc_voltage_V,exclude,note\np01,400,50,11,0.5,3,4,0.5,x,y\n",
        PARTICLES: "particle,species,charged_with,diameter_nm,u_diameter_nm,contacts,exclude\n"
        "p01,bead,glass,20000,500,3,dirty\np02,,,,,,\n",
        LOST: "particle,reason,drive_voltage_rms_V,dc_voltage_V,note\np02,fell,100,-20,n\np03,jumped,,,\n",
    }
    _, logs, faults = check(tmp_path, files)
    assert list(map(str, faults)) == []
    read = logs["s001"]
    balance = read.tables["balance"].to_dict("records")
    assert balance[0] == {
        "line": 2,
        "particle": "p01",
        "drive_amplitude": 400.0,
        "drive_frequency": 50.0,
        "balance_voltage": 120.5,
        "time": 120.0,
        "u_balance_voltage": 0.3,
        "particles_in_trap": 2.0,
        "nearest": 9e-4,
        "exclude": "spark",
        "note": "a",
    }
    assert np.isnan([balance[1][name] for name in ("time", "u_balance_voltage", "particles_in_trap", "nearest")]).all()
    assert (balance[1]["exclude"], balance[1]["note"]) == ("", "")
    assert read.tables["secular"].to_dict("records")[0] == {
        "line": 2,
        "particle": "p01",
        "drive_amplitude": 400.0,
        "drive_frequency": 50.0,
        "secular_frequency": 11.0,
        "time": 3.0,
        "u_secular_frequency": 0.2,
        "dc_voltage": 100.0,
        "exclude": "x",
        "note": "y",
    }
    assert read.tables["height"].to_dict("records")[0] == {
        "line": 2,
        "particle": "p01",
        "drive_amplitude": 400.0,
        "drive_frequency": 50.0,
        "dc_voltage": 11.0,
        "height": 5e-4,
        "time": 3.0,
        "u_height": 4e-6,
        "u_dc_voltage": 0.5,
        "exclude": "x",
        "note": "y",
    }
    assert read.particles.to_dict("records")[0] == {
        "line": 2,
        "particle": "p01",
        "species": "bead",
        "charged_with": "glass",
        "diameter": 2e-5,
        "u_diameter": 5e-7,
        "contacts": 3.0,
        "exclude": "dirty",
    }
    assert list(read.particles["species"]) == ["bead", ""]
    assert read.lost["drive_amplitude"][0] == pytest.approx(100 * math.sqrt(2))
    assert list(read.lost["reason"]) == ["fell", "jumped"]
    assert np.isnan(read.lost["dc_voltage"][1])


def test_every_column_is_there_even_if_the_file_has_none(tmp_path):
    read = check(tmp_path)[1]["s001"]
    assert list(read.tables["height"].columns) == [
        "line", "particle", "drive_amplitude", "drive_frequency", "dc_voltage", "height", "time", "u_height",
        "u_dc_voltage", "exclude", "note",
    ]  # fmt: skip
    assert read.tables["height"]["time"].isna().all()
    assert (read.tables["height"]["note"] == "").all()
    assert read.tables["height"]["line"].dtype == np.int64
    assert read.particles is None
    assert read.lost is None


def test_ids_stay_texts(tmp_path):
    text = FILES[HEIGHT].replace("p01", "0812", 1).replace("p01", "1e3")
    assert list(table(tmp_path, text)["particle"]) == ["0812", "1e3"]


OWN = [
    "frame",
    "comment",
    "notes",
    "temperature_degC",
    "time_of_day",
    "time_zone",
    "clock",
    "camera_file",
    "operator",
    "dc_voltage_set_V",
    "width_um",
    "height_raw_px",
    "drive_voltage_set_V",
    "height_um_raw",
    "u_time_s",
    "balance_voltage_V",
    "nearest_mm",
    "height_px",
]


@pytest.mark.parametrize("name", OWN)
def test_columns_of_ones_own_are_listed_and_ignored(tmp_path, name):
    text = (
        FILES[HEIGHT]
        .replace("height_mm\n", f"height_mm,{name}\n")
        .replace("413\n", "413,12:30\n")
        .replace("402\n", "402,\n")
    )
    _, logs, faults = check(tmp_path, {HEIGHT: text})
    assert list(map(str, faults)) == []
    assert logs["s001"].extra_columns["height"] == [name]


@pytest.mark.parametrize(
    ("log", "name", "meant"),
    [
        ("height", "u_heigth_mm", "u_height_mm"),
        ("height", "u_heigth_um", "u_height_mm"),
        ("height", "exlude", "exclude"),
        ("height", "excluded", "exclude"),
        ("height", "Time_s", "time_s"),
        ("height", "u_height", "u_height_mm"),
        ("height", "u_height_furlong", "u_height_mm"),
        ("height", "u_height_V", "u_height_mm"),
        ("height", "u_height [pixel]", "u_height_mm"),
        ("height", "time_sec", "time_s"),
        ("height", "time", "time_s"),
        ("height", "time [h:m]", "time_s"),
        ("height", "u_dc_voltage_v", "u_dc_voltage_V"),
        ("balance", "nearest", "nearest_mm"),
        ("balance", "particle_in_trap", "particles_in_trap"),
        ("secular", "dc_voltage", "dc_voltage_V"),
    ],
)
def test_a_slip_in_an_optional_name_is_no_column_of_ones_own(tmp_path, log, name, meant):
    path = f"sessions/s001/{log}.csv"
    lines = (
        FILES[path]
        .replace(",time_s", "")
        .replace("0.5,0\n", "0.5\n")
        .replace("0.8,60\n", "0.8\n")
        .replace("8.1,120\n", "8.1\n")
    )
    lines = "\n".join(f"{line},{1 if at else name}" for at, line in enumerate(lines.rstrip("\n").split("\n")))
    fault = only_fault(tmp_path, {path: lines})
    assert (fault.path, fault.line, fault.column) == (path, 1, name)
    assert meant in fault.advice


@pytest.mark.parametrize(
    "name", ["hieght_mm", "Height_mm", "height", "height_furlong", "height [px]", "height_V", "heights_mm"]
)
def test_a_slip_in_a_required_name_is_one_fault(tmp_path, name):
    fault = only_fault(tmp_path, {HEIGHT: FILES[HEIGHT].replace("height_mm", name)})
    assert (fault.line, fault.column) == (1, name)
    assert "height_mm" in fault.advice


def test_a_column_twice_is_a_fault(tmp_path):
    text = (
        FILES[HEIGHT]
        .replace("height_mm\n", "height_mm,height_um\n")
        .replace("413\n", "413,-413\n")
        .replace("402\n", "402,402\n")
    )
    assert "again" in only_fault(tmp_path, {HEIGHT: text}).found


def test_a_column_without_a_name_is_a_fault_only_if_it_holds_anything(tmp_path):
    text = FILES[HEIGHT].replace("particle,", ",particle,").replace("p01", ",p01")
    assert faults_of(tmp_path / "a", {HEIGHT: text}) == []
    assert only_fault(tmp_path / "b", {HEIGHT: text.replace(",p01", "x,p01", 1)}).found == "no name above column 1"


# Cells


@pytest.mark.parametrize(
    ("old", "new", "column", "found"),
    [
        ("-0.413", "low", "height_mm", "low"),
        ("-0.413", "", "height_mm", "nothing"),
        ("-0.413", "nan", "height_mm", "nan"),
        ("-0.413", "NA", "height_mm", "NA"),
        ("-0.413", "inf", "height_mm", "inf"),
        ("-0.413", "1e999", "height_mm", "1e999"),
        ("-0.413", "1_000", "height_mm", "1_000"),
        ("-0.413", "0x1", "height_mm", "0x1"),
        ("-0.413", "-0.413 mm", "height_mm", "-0.413 mm"),
        ("-0.413", "--4", "height_mm", "--4"),
        ("-0.413", "4-", "height_mm", "4-"),
        ("-0.413", "e5", "height_mm", "e5"),
        ("-0.413", "١", "height_mm", "١"),
        ("-0.413", "true", "height_mm", "true"),
        ("-0.413", "1000.1", "height_mm", "1000.1"),
        ("-0.413", "=1+1", "height_mm", "=1+1"),
        ("p01,400,50,100", "p01,0,50,100", "drive_voltage_peak_V", "0"),
        ("p01,400,50,100", "p01,-400,50,100", "drive_voltage_peak_V", "-400"),
        ("p01,400,50,100", "p01,100001,50,100", "drive_voltage_peak_V", "100001"),
        ("p01,400,50,100", "p01,400,0,100", "drive_frequency_Hz", "0"),
        ("p01,400,50,100", "p01,400,1e9,100", "drive_frequency_Hz", "1e9"),
        ("p01,400,50,100", "p01,400,50,100001", "dc_voltage_V", "100001"),
        ("p01,400,50,100", ",400,50,100", "particle", "nothing"),
        ("p01,400,50,100", "p 01,400,50,100", "particle", "p 01"),
        ("p01,400,50,100", "../p,400,50,100", "particle", "../p"),
        ("p01,400,50,100", "-p,400,50,100", "particle", "-p"),
        ("p01,400,50,100", f"{'p' * 65},400,50,100", "particle", "p" * 57 + "..."),
    ],
)
def test_a_bad_cell_is_told_with_row_column_and_value(tmp_path, old, new, column, found):
    fault = only_fault(tmp_path, changed(HEIGHT, old, new))
    assert (fault.path, fault.line, fault.column, fault.found) == (HEIGHT, 2, column, found)
    assert fault.expected


@pytest.mark.parametrize(
    ("head", "cell"),
    [
        ("u_height_mm", "0"),
        ("u_height_mm", "-0.1"),
        ("u_dc_voltage_V", "0"),
        ("time_s", "noon"),
        ("exclude", "no"),
        ("exclude", "FALSE"),
        ("exclude", "0"),
    ],
)
def test_a_bad_cell_of_an_optional_column_is_a_fault(tmp_path, head, cell):
    text = f"{','.join(HEAD)},{head}\np01,400,50,1,1,{cell}\np01,400,50,1,1,\n"
    fault = only_fault(tmp_path, {HEIGHT: text})
    assert (fault.line, fault.column, fault.found) == (2, head, cell)


@pytest.mark.parametrize("cell", ["0", "1.5", "-1", "two"])
def test_particles_in_the_trap_are_counted_in_whole_numbers(tmp_path, cell):
    text = (
        f"particle,drive_voltage_peak_V,drive_frequency_Hz,balance_voltage_V,particles_in_trap\np01,400,50,1,{cell}\n"
    )
    assert only_fault(tmp_path, {BALANCE: text}).found == cell


def test_limits_are_told_in_the_convention_and_unit_of_the_column(tmp_path):
    text = FILES[HEIGHT].replace("drive_voltage_peak_V", "drive_voltage_peak_to_peak_kV").replace(",400,", ",201,", 1)
    fault = only_fault(tmp_path / "a", {HEIGHT: text.replace(",400,", ",1,")})
    assert (fault.found, fault.expected) == ("201", "above 0, to 200 kV")
    assert faults_of(tmp_path / "b", {HEIGHT: text.replace(",201,", ",200,").replace(",400,", ",1,")}) == []


def test_rows_of_another_length_are_faults(tmp_path):
    text = written() + "p01,400,50,1\np01,400,50,1,1,1\n"
    faults = faults_of(tmp_path, {HEIGHT: text})
    assert [(fault.line, fault.found, fault.expected) for fault in faults] == [
        (4, "4 fields", "5 as in the head"),
        (5, "6 fields", "5 as in the head"),
    ]


def test_many_faults_of_one_sort_are_summed_up(tmp_path):
    rows = [("p01", "400", "50", "x", "1")] * 500
    faults = faults_of(tmp_path, {HEIGHT: written(rows=rows)})
    assert len(faults) == 11
    assert faults[-1].found == "490 more cells like these from here on"


@pytest.mark.parametrize(
    ("content", "found"),
    [
        (b"", "no line"),
        (b"\n\n# only\n", "no line"),
        (b"\xef\xbb\xbf", "no line"),
        (b",,,\n1,2,3,4\n", "no column names"),
        (b"\x00\x01\x02\xff", "control character"),
        (b"particle\x00,a\n", "control character"),
        ("particle,x\n".encode("utf-16-le"), "control character"),
        (b"\xff\xfea", "UTF-16"),
        (b'particle,drive_voltage_peak_V\n"p01,1\np02,2\n', "quotes"),
        (b'particle,drive_voltage_peak_V\n"p01"x,1\n', "quotes"),
        (b"particle," + b"x" * 200_010 + b"\n", "a line of 200,020 characters"),
        (b"particle," + b"x" * 300 + b"\n", "a column name of 300 characters"),
        (b"particle" + b",x" * 1000 + b"\n", "1,001 columns"),
        (b"particle,note\np01," + b"x" * 200_000 + b"\n", "a cell of more than 131,072 characters"),
        (b"sep=|\nparticle|height_mm\n", "sep=|"),
        (b"PK\x03\x04" + b"\x00" * 50, "control character"),
    ],
)
def test_what_is_no_table_is_a_fault_and_no_traceback(tmp_path, content, found):
    faults = [fault for fault in faults_of(tmp_path, {HEIGHT: content}) if fault.path == HEIGHT]
    assert len(faults) == 1, faults
    assert found in faults[0].found


def test_a_folder_or_a_dead_link_in_place_of_a_log_is_a_fault(tmp_path):
    write(tmp_path, {HEIGHT: None, SECULAR: None})
    (tmp_path / HEIGHT).mkdir()
    (tmp_path / SECULAR).symlink_to(tmp_path / "nowhere")
    faults = Faults()
    read_logs(tmp_path, "s001", faults=faults)
    assert [(fault.path, fault.found) for fault in faults] == [(HEIGHT, "a folder"), (SECULAR, "no such file")]


def test_files_beyond_the_limits_are_refused_before_they_are_read(tmp_path, monkeypatch):
    write(tmp_path)
    with (tmp_path / HEIGHT).open("r+b") as file:
        file.truncate(200_000_001)  # sparse: nothing is written
    faults = Faults()
    read_logs(tmp_path, "s001", faults=faults)
    assert [(fault.path, fault.found, fault.expected) for fault in faults] == [(HEIGHT, "200 MB", "at most 200 MB")]
    assert reduction.csvfile.ROW_LIMIT == 5_000_000
    monkeypatch.setattr(reduction.csvfile, "ROW_LIMIT", 3)
    monkeypatch.setattr(reduction.csvfile, "_rows", None)  # would fail if it were called
    faults = Faults()
    read_logs(write(tmp_path / "rows", {HEIGHT: None, SECULAR: None}), "s001", faults=faults)
    assert [(fault.path, fault.found) for fault in faults] == [(BALANCE, "more than 3 lines")]


# Rows and particles


def test_a_repeated_time_stamp_names_both_lines(tmp_path):
    fault = only_fault(tmp_path, changed(BALANCE, "120.8,60", "120.8,0"))
    assert (fault.path, fault.line, fault.column) == (BALANCE, 3, "particle")
    assert fault.found == "particle p01 at 0 s again, first on line 2"


def test_equal_times_of_two_particles_and_rows_without_time_are_no_repeats(tmp_path):
    files = changed(BALANCE, "-88.1,120", "-88.1,60")
    files |= {HEIGHT: FILES[HEIGHT] + "p01,400,50,140,0.402\n"}
    assert faults_of(tmp_path, files) == []


def test_a_particle_has_one_row_in_particles(tmp_path):
    fault = only_fault(tmp_path, {PARTICLES: "particle\np01\np02\np01\n"})
    assert (fault.line, fault.found) == (4, "particle p01 again, first on line 2")


def test_a_particle_that_no_log_has_is_a_fault(tmp_path):
    fault = only_fault(tmp_path, {PARTICLES: "particle,exclude\np01,\np10,x\n"})
    assert (fault.path, fault.line, fault.found) == (PARTICLES, 3, "p10, which no log has")
    assert "Did you mean p0" in fault.advice


def test_a_lost_particle_may_stand_in_particles(tmp_path):
    assert faults_of(tmp_path, {PARTICLES: "particle\np10\n", LOST: "particle,reason\np10,fell\n"}) == []


def test_a_lost_particle_has_a_reason(tmp_path):
    fault = only_fault(tmp_path, {LOST: "particle,reason\np10,\n"})
    assert (fault.line, fault.column, fault.found) == (2, "reason", "nothing")


def test_a_log_with_a_head_alone_counts_as_absent(tmp_path):
    heads = {name: text.partition("\n")[0] + "\n" for name, text in FILES.items() if name.endswith(".csv")}
    _, logs, faults = check(tmp_path / "a", {HEIGHT: heads[HEIGHT]})
    assert list(faults) == []
    assert sorted(logs["s001"].tables) == ["balance", "secular"]
    assert [fault.found for fault in faults_of(tmp_path / "b", heads)] == ["no reading"]


def test_a_session_needs_a_log(tmp_path):
    gone = dict.fromkeys((BALANCE, HEIGHT, SECULAR))
    assert [(fault.path, fault.found) for fault in faults_of(tmp_path, gone)] == [("sessions/s001", "no reading")]


@pytest.mark.parametrize("name", ["heights.csv", "Height.csv", "height.txt", "hight.csv"])
def test_a_log_under_a_name_nearly_right_is_a_fault(tmp_path, name):
    fault = only_fault(tmp_path, {HEIGHT: None, f"sessions/s001/{name}": FILES[HEIGHT]})
    assert (fault.path, fault.expected) == (f"sessions/s001/{name}", "height.csv")


def test_other_files_of_a_session_are_ignored(tmp_path):
    others = {
        f"sessions/s001/{name}": b"\x00"
        for name in ("photo.jpg", "height.png", "notes.txt", "camera.csv", ".height.csv")
    }
    assert faults_of(tmp_path, others) == []
