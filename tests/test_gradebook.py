"""Marks into an exported gradebook: named columns filled, every other byte as it was, nobody guessed at."""

from __future__ import annotations

from pathlib import Path

import pytest

from reduction.command import main
from reduction.fieldspans import ExportError, read_spans
from reduction.gradebook import fill, fills_of
from reduction.tables import write_table

SHEET = ("session", "value", "marks", "total", "hints", "status")
PEOPLE = ("session", "name", "email", "id_number", "pseudonym")
EXPORT = """First name,"Surname","ID number",Email address,"Assignment: Trap (Real)",Last downloaded
Ada,"Example, the first","0041",ada@uni.example,-,1700000000
Bo,Ünal,"0042",Bo@Uni.example,,1700000000
Cy,Quote "Q",0043,cy@uni.example,12.00,1700000000
Di,Stranger,0099,di@uni.example,,1700000000
"""
GRADE = "Assignment: Trap (Real)"


@pytest.fixture
def results(tmp_path: Path) -> Path:
    folder = tmp_path / "results" / "marking" / "staff"
    folder.mkdir(parents=True)
    rows = [
        {"session": "b1", "value": 8.0, "marks": 16.5, "hints": 'p01: a sign; p02: fine, "so"', "status": "marked"},
        {"session": "b2", "value": 0.0, "marks": 12.0, "hints": "=2+2", "status": "look_at"},
        {"session": "b3", "value": None, "marks": None, "hints": "", "status": "not_marked"},
    ]
    write_table(folder / "marks.csv", SHEET, ({"total": 20.0} | row for row in rows))
    people = [("b1", "Ada", "ada@uni.example", "0041"), ("b1", "Bo", "bo@uni.example", "0042"),
              ("b2", "Cy", "cy@uni.example", "0043"), ("b3", "Ed", "ed@uni.example", "0044")]  # fmt: skip
    write_table(folder / "register.csv", PEOPLE, (dict(zip(PEOPLE, (*one, ""), strict=True)) for one in people))
    return tmp_path / "results"


def exported(folder: Path, text: str | bytes = EXPORT) -> Path:
    path = folder / "export.csv"
    path.write_bytes(text if isinstance(text, bytes) else text.encode())
    return path


def test_every_person_of_a_bench_gets_its_marks_and_nothing_else_changes(results: Path, tmp_path: Path) -> None:
    found = fill(results, exported(tmp_path), match="ID number", fills={GRADE: "marks"})
    expected = EXPORT.replace("ada@uni.example,-,", "ada@uni.example,16.5,")
    expected = expected.replace("Bo@Uni.example,,", "Bo@Uni.example,16.5,").replace(",12.00,", ",12,")
    assert found.data == expected.encode()
    assert [(one.line, one.key, one.before, one.after) for one in found.changes] == [
        (2, "0041", "-", "16.5"), (3, "0042", "", "16.5"), (4, "0043", "12.00", "12"),
    ]  # fmt: skip
    assert found.not_in_register == ("line 5: 0099",)
    assert found.not_in_export == ("0044, bench b3",)
    assert found.look_at == ("b2",)


@pytest.mark.parametrize(
    "text",
    [
        EXPORT.encode("utf-8-sig"),
        b"\xff\xfe" + EXPORT.encode("utf-16-le"),
        EXPORT.encode("latin-1"),
        EXPORT.replace("\n", "\r\n").encode(),
        EXPORT.removesuffix("\n").encode(),
        ("\n" + EXPORT).encode(),
        EXPORT.replace('"Example, the first"', '"Example\nthe ""first"""').encode(),
    ],
    ids=["mark", "utf-16", "latin-1", "crlf", "no last line end", "blank line first", "line end in a cell"],
)
def test_only_the_filled_cells_differ_byte_for_byte(results: Path, tmp_path: Path, text: bytes) -> None:
    path = exported(tmp_path, text)
    found = fill(results, path, match="Email address", fills={GRADE: "marks"})
    assert len(found.changes) == 3
    spans = read_spans(path, ["Email address"])
    back = {(one.row, one.column): one.before for one in found.changes}
    out = tmp_path / "out.csv"
    out.write_bytes(found.data)
    assert read_spans(out, ["Email address"]).replaced(back) == text
    assert spans.replaced({}) == text


def test_semicolons_decimal_commas_and_other_columns_of_the_sheet(results: Path, tmp_path: Path) -> None:
    path = exported(tmp_path, "id;grade;words;more\n0041;;;x\n0043;;;y\n")
    fills = fills_of(["grade", "words=hints"])
    assert fills == {"grade": "marks", "words": "hints"}
    found = fill(results, path, match="id", fills=fills, decimal=",")
    assert (
        found.data.decode() == 'id;grade;words;more\n0041;16,5;"p01: a sign; p02: fine, ""so""";x\n0043;12;\'=2+2;y\n'
    )


def test_a_cell_that_holds_its_mark_already_is_no_change(results: Path, tmp_path: Path) -> None:
    found = fill(results, exported(tmp_path, "id,grade\n0041,16.5\n"), match="id", fills={"grade": "marks"})
    assert (found.changes, found.same) == ((), 1)


def test_a_bench_without_marks_leaves_the_cells_as_they_are(results: Path, tmp_path: Path) -> None:
    found = fill(results, exported(tmp_path, "id,grade\n0044,7\n"), match="id", fills={"grade": "marks"})
    assert (found.changes, found.without_marks) == ((), ("b3",))


@pytest.mark.parametrize(
    ("text", "match", "fills", "told"),
    [
        (EXPORT, "ID", {GRADE: "marks"}, "found no column ID; there are First name, Surname"),
        (EXPORT, "ID number", {"Mark": "marks"}, "found no column Mark"),
        (EXPORT, "ID number", {GRADE: "mark"}, "no column mark to fill"),
        (EXPORT, "ID number", {"ID number": "marks"}, "cannot be filled"),
        ("id,id,grade\n0041,1,2\n", "id", {"grade": "marks"}, "line 1: the column id stands there twice"),
        ("id,grade\n0041,1\n0041,2\n", "id", {"grade": "marks"}, "0041 on lines 2 and 3"),
        ("id,grade\n41,1\n", "id", {"grade": "marks"}, "no cell of id is a person's id_number"),
        ('id,grade\n"0041,1\n', "id", {"grade": "marks"}, "line 2: a quotation mark that is not closed"),
        ('id,grade\n"0041"x,1\n', "id", {"grade": "marks"}, "line 2: text after a closing quotation mark"),
        ("id,grade\n0041,1,2\n", "id", {"grade": "marks"}, "line 2: found 3 fields; expected 2"),
        ("", "id", {"grade": "marks"}, "found no column id"),
    ],
)
def test_what_cannot_be_told_apart_is_refused(
    results: Path, tmp_path: Path, text: str, match: str, fills: dict[str, str], told: str
) -> None:
    with pytest.raises(ExportError) as caught:
        fill(results, exported(tmp_path, text), match=match, fills=fills)
    assert told in str(caught.value)


def test_zeros_a_spreadsheet_has_dropped_are_pointed_out(results: Path, tmp_path: Path) -> None:
    found = fill(results, exported(tmp_path, "id,grade\n0041,1\n42,2\n"), match="id", fills={"grade": "marks"})
    assert "0042, bench b1; the export has 42, which differs in the zeros in front" in found.not_in_export


def test_two_people_of_one_name_are_refused(results: Path, tmp_path: Path) -> None:
    staff = results / "marking" / "staff"
    rows = [dict.fromkeys(PEOPLE, "") | {"session": bench, "name": "Jo Same"} for bench in ("b1", "b2")]
    write_table(staff / "register.csv", PEOPLE, rows)
    path = exported(tmp_path, "name,grade\nJo Same,1\n")
    with pytest.raises(ExportError, match="the same name twice: Jo Same of bench b2 and of bench b1"):
        fill(results, path, match="name", fills={"grade": "marks"}, by="name")
    with pytest.raises(ExportError, match="the register has no id_number"):
        fill(results, path, match="name", fills={"grade": "marks"})


def test_results_without_marks_or_register_are_refused(results: Path, tmp_path: Path) -> None:
    path = exported(tmp_path)
    with pytest.raises(ExportError, match=r"no marking/staff/marks\.csv"):
        fill(tmp_path, path, match="ID number", fills={GRADE: "marks"})
    write_table(results / "marking" / "staff" / "register.csv", PEOPLE, [])
    with pytest.raises(ExportError, match="nobody can be matched"):
        fill(results, path, match="ID number", fills={GRADE: "marks"})


def test_the_command_shows_the_changes_and_writes_only_where_told(
    results: Path, tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    path = exported(tmp_path)
    asked = ["gradebook", str(results), str(path), "--match", "ID number", "--fill", GRADE]
    before = sorted(tmp_path.rglob("*"))
    assert main(asked) == 0
    said = capsys.readouterr().out
    assert f"line 2, 0041, {GRADE}: - -> 16.5" in said
    assert "not in the export" in said
    assert "not in the register" in said
    assert "Nothing is written" in said
    assert sorted(tmp_path.rglob("*")) == before
    assert path.read_text() == EXPORT
    out = tmp_path / "new.csv"
    assert main([*asked, "--write", str(out)]) == 0
    assert b"ada@uni.example,16.5," in out.read_bytes()
    assert main([*asked, "--write", str(path)]) == 1
    assert "this is the export itself" in capsys.readouterr().err
    assert path.read_text() == EXPORT


def test_the_command_refuses_in_one_message(results: Path, tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    assert main(["gradebook", str(results), str(tmp_path / "none.csv"), "--match", "a", "--fill", "b"]) == 1
    assert "none.csv: No such file or directory. Give the file" in capsys.readouterr().err
