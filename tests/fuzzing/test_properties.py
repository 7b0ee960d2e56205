"""Properties that hold for any input, not for examples alone."""

from __future__ import annotations

import math
import os
import string
import unicodedata
from pathlib import Path

import pytest
from hypothesis import HealthCheck, example, given, settings
from hypothesis import strategies as st
from oddnumbers import ODD, meaning, shorthand
from sample import Dialect, localised, rendered
from small_campaign import BALANCE, FILES, write
from trial import alarm

from reduction.errors import Faults, InputError, printable
from reduction.logs import read_logs
from reduction.newcampaign import new_session
from reduction.quantity import QuantityError, read_number, read_quantity
from reduction.tables import cell_text, neutral, plain
from reduction.typeset import foreign, visible
from reduction.yamlfile import Mapping, read_yaml

quickly = settings(max_examples=150, deadline=None, suppress_health_check=[HealthCheck.function_scoped_fixture])
voltages = st.floats(-1e5, 1e5, allow_nan=False)
numberlike = st.one_of(
    st.text("0123456789+-.,eE()_ x\u2212\u0665", max_size=12), st.sampled_from(ODD), st.text(max_size=8)
)


@quickly
@given(
    readings=st.lists(st.tuples(st.floats(1e-3, 1e5), voltages), min_size=1, max_size=6),
    separator=st.sampled_from(",;\t"),
    comma=st.booleans(),
    end=st.sampled_from(["\n", "\r\n", "\r"]),
    quotes=st.booleans(),
    spaces=st.booleans(),
    encoding=st.sampled_from(["utf-8", "utf-8-sig", "utf-16"]),
    note=st.text(st.characters(exclude_categories=["Cc", "Cs", "Mn", "Mc"]), max_size=10),
)
def test_readings_come_back_from_every_dialect(
    tmp_path: Path, readings: list[tuple[float, float]], separator: str, comma: bool, end: str, quotes: bool,
    spaces: bool, encoding: str, note: str,
) -> None:  # fmt: skip
    how = Dialect(separator, "," if comma and separator != "," else ".", end, quotes, spaces)
    heads = ["particle", "drive_voltage_peak_V", "drive_frequency_Hz", "balance_voltage_V", "note"]
    rows = [["p01", *(localised(repr(one), how.mark) for one in (drive, 50.5, dc)), note] for drive, dc in readings]
    path = write(tmp_path) / BALANCE
    path.write_bytes(rendered(heads, rows, how).encode(encoding))
    faults = Faults()
    table = read_logs(tmp_path, "s001", faults=faults).tables["balance"]
    assert not len(faults), list(faults)
    assert table["drive_amplitude"].tolist() == [drive for drive, _ in readings]
    assert table["balance_voltage"].tolist() == [dc for _, dc in readings]
    assert set(table["note"]) == {unicodedata.normalize("NFC", note).strip()}


@quickly
@given(numberlike)
def test_a_text_is_a_number_by_one_grammar_alone(text: str) -> None:
    wanted = meaning(text)
    try:
        found = read_number(text)
    except QuantityError:
        assert wanted is None or math.isinf(float(wanted))
    else:
        assert wanted is not None
        assert found == float(wanted)


@quickly
@given(numberlike)
@example("1(1)e" + "9" * 5000)
@example("5.0(12)e3")
def test_a_text_is_a_quantity_by_one_grammar_alone(text: str) -> None:
    wanted = None if text.strip()[:1] in ("'", '"') else shorthand(text)
    try:
        found = read_quantity(text)
    except QuantityError:
        assert wanted is None or any(math.isinf(float(one)) for one in wanted)
    else:
        assert wanted is not None
        assert found.estimate == float(wanted[0])
        assert found.u == pytest.approx(float(wanted[1]), rel=1e-15)


@quickly
@given(
    figures=st.integers(-(10**9), 10**9), u=st.integers(1, 9999), decimals=st.integers(0, 9), power=st.integers(-30, 30)
)
def test_shorthand_means_what_its_digits_say(figures: int, u: int, decimals: int, power: int) -> None:
    digits = str(abs(figures)).rjust(decimals + 1, "0")
    at = len(digits) - decimals
    text = ("-" if figures < 0 else "") + digits[:at] + ("." + digits[at:] if decimals else "")
    found = read_quantity(f"{text}({u})e{power}")
    assert found.estimate == float(f"{figures}e{power - decimals}")
    assert found.u == float(f"{u}e{power - decimals}")


yaml_text = st.one_of(
    st.text(max_size=60),
    st.text("ab:-?[]{}&*!|>'\"%@#, \n\t~0<", max_size=60),
    st.lists(st.sampled_from([*"ab:-[]{}&*!|>'\"%#,\n ", "&a ", "*a", "!!python/name:os.system ", "<<: ", "\n  ", "- ",
                              "? ", "---\n", '"\\0"', "title: "]), max_size=25).map("".join),
)  # fmt: skip


@quickly
@given(yaml_text)
def test_any_text_is_a_mapping_or_a_fault_with_words(tmp_path: Path, text: str) -> None:
    path = tmp_path / "a.yaml"
    path.write_bytes(text.encode(errors="surrogatepass"))
    faults = Faults()
    with alarm(60.0):
        found = read_yaml(path, "a.yaml", faults=faults)
    assert isinstance(found, Mapping) or len(faults)
    assert all(fault.found and fault.expected and fault.path == "a.yaml" for fault in faults)


@quickly
@given(
    st.binary(max_size=80),
    st.sampled_from([BALANCE, "sessions/s001/session.yaml", "campaign.yaml"]),
    st.integers(0, 200),
)
def test_any_bytes_within_a_file_end_in_faults_at_worst(tmp_path: Path, data: bytes, name: str, at: int) -> None:
    root = write(tmp_path)
    good = FILES[name].encode()
    (root / name).write_bytes(good[:at] + data + good[at:])
    faults = Faults()
    read_logs(root, "s001", faults=faults)
    read_yaml(root / name, name, faults=faults)
    assert all(fault.found and fault.expected and fault.path for fault in faults)
    (root / name).write_bytes(good)


names = st.one_of(
    st.text(max_size=20),
    st.lists(st.sampled_from(["..", "/", "a", ".", "\x00", "~", "-", " ", "\\", "s001", "%", "é"]), max_size=5).map(
        "".join
    ),
)


@quickly
@given(names)
@example("../../outside")
@example("a" * 65)
def test_no_name_of_a_session_leads_out_of_its_folder(tmp_path: Path, name: str) -> None:
    root = tmp_path / "campaign"
    if not root.exists():
        write(root)
    before = {path for path in tmp_path.rglob("*") if "sessions" not in path.parts}
    try:
        written = new_session(root, name)
    except InputError:
        pass
    else:
        assert set(name) <= set(string.ascii_letters + string.digits + "_-")
        assert all(os.path.realpath(root / one).startswith(f"{root.resolve()}/sessions/{name}/") for one in written)
    assert {path for path in tmp_path.rglob("*") if "sessions" not in path.parts} == before


cells = st.one_of(
    st.text(max_size=12),
    st.text("=+-@\t\r' 1.e", max_size=8),
    st.floats(allow_nan=False, allow_infinity=False).map(repr),
)


@quickly
@given(cells)
def test_no_cell_is_a_formula_and_each_reads_back(text: str) -> None:
    written = neutral(text)
    assert plain(written) == text
    number = _finite(text)
    if number is not None and text == text.strip(" "):
        assert written == text  # negative numbers stay numbers
    bare = written.lstrip(" ")
    assert not bare.startswith(("=", "+", "-", "@", "\t", "\r")) or _finite(bare) is not None
    # Once neutral, a text stays harmless, however often it is written and read.
    assert plain(neutral(written)) == written


def _finite(text: str) -> float | None:
    wanted = meaning(text) if text.isascii() and text == text.strip() else None
    return None if wanted is None else float(wanted)


@quickly
@given(st.floats(allow_nan=False, allow_infinity=False))
def test_a_number_is_written_as_a_number_whatever_its_sign(number: float) -> None:
    assert neutral(cell_text("charge_C", number)) == cell_text("charge_C", number)
    assert float(cell_text("charge_C", number)) == number


@quickly
@given(st.text(max_size=80), st.integers(1, 30))
def test_text_on_a_page_holds_nothing_that_cannot_be_seen_and_loses_nothing(text: str, run: int) -> None:
    shown = foreign(text, run)
    assert shown.replace("\u200b", "") == visible(text).replace("\u200b", "")
    assert not {unicodedata.category(one) for one in shown} & {"Cc", "Cs", "Co"}
    assert not set(shown) & set("\u202a\u202b\u202c\u202d\u202e\u2066\u2067\u2068\u2069")


@quickly
@given(st.text(max_size=40))
def test_text_for_a_terminal_can_be_printed_anywhere(text: str) -> None:
    shown = printable(text)
    shown.encode()
    assert shown.isprintable()
    assert printable(shown) == shown
