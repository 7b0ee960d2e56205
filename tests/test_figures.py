"""The numbers drawn are the record's numbers; a drawing depends on nothing drawn before it."""

from __future__ import annotations

import math
import xml.etree.ElementTree as ElementTree
from typing import Any

import pytest
from fake_record import write_record

from reduction import figures, figurestyle
from reduction.sheets import rows_of
from reduction.tables import read_table
from reduction.wholefile import read_json

Held = tuple[list[dict[str, Any]], list[dict[str, Any]], dict[str, Any], list[dict[str, Any]]]
SVG = "{http://www.w3.org/2000/svg}"


@pytest.fixture(scope="module")
def held(tmp_path_factory: pytest.TempPathFactory) -> Held:
    folder = write_record(tmp_path_factory.mktemp("record"), particles=4)
    readings, agreement, methods = (
        rows_of(read_table(folder / f"{name}.csv")) for name in ("readings", "agreement", "methods")
    )
    return readings, agreement, read_json(folder / "session.json")["curves"], methods


def drawn(held: Held, particle: str, drawer: figures.ParticleFigures | None = None) -> figurestyle.Drawing:
    readings, agreement, curves, methods = held
    with figurestyle.styled():
        made = (drawer or figures.ParticleFigures()).draw(
            "s001", particle, [r for r in readings if r["particle"] == particle], curves.get(particle, {}),
            [a for a in agreement if a["particle"] == particle],
            [m for m in methods if m["particle"] == particle],
        )  # fmt: skip
    assert made is not None
    return made


@pytest.mark.parametrize(
    ("panel", "log", "column", "x"),
    [
        ("height", "height", "height_mm", "dc_voltage_V"),
        ("secular", "secular", "secular_frequency_Hz", "drive_voltage_peak_V"),
        ("balance", "balance", "balance_voltage_V", "time_s"),
    ],
)
def test_every_reading_is_drawn_where_the_record_has_it(held: Held, panel: str, log: str, column: str, x: str) -> None:
    twin = [row for row in drawn(held, "p02").rows if row[2] == panel and row[4] == "reading"]
    record = [r for r in held[0] if r["particle"] == "p02" and r["log"] == log]
    assert len(record) > 4
    assert [(row[5], row[7], row[8], row[10]) for row in twin] == [
        (r[x], r[column], r["u_reading"], r["status"]) for r in record
    ]


def test_height_residuals_are_the_adjusted_ones_of_the_record_in_micrometres(held: Held) -> None:
    twin = [row for row in drawn(held, "p02").rows if row[2] == "height_residual"]
    record = [r for r in held[0] if r["particle"] == "p02" and r["log"] == "height"]
    assert [row[7] for row in twin] == pytest.approx([1e3 * r["adjusted_residual"] for r in record], rel=1e-12)
    assert {row[9] for row in twin} == {"µm"}


def test_curves_drawn_are_those_of_the_record_with_gaps_where_no_frequency_exists(held: Held) -> None:
    rows = drawn(held, "p01").rows
    exact = [row for row in rows if row[2] == "secular" and row[3] == "exact"]
    stated = held[2]["p01"]["secular"]["frequency_Hz"]
    assert len(exact) == len(stated)
    assert any(value is None for value in stated)
    for row, value in zip(exact, stated, strict=True):
        assert math.isnan(row[7]) if value is None else row[7] == value, row
    lines = [row for row in rows if row[2] == "height" and row[4] == "curve"]
    assert len(lines) == sum(len(curve["dc_V"]) for curve in held[2]["p01"]["height"])


def test_pulls_drawn_are_those_of_the_tables(held: Held) -> None:
    rows = [row for row in drawn(held, "p03").rows if row[2] == "pulls"]
    pairs = [row[5] for row in rows if row[4] == "normalized_error"]
    assert pairs == [a["normalized_error"] for a in held[1] if a["particle"] == "p03"]
    alone = {row[3]: row[5] for row in rows if row[4] == "normalized_residual"}
    assert alone == {
        m["method"]: m["normalized_residual"]
        for m in held[3]
        if m["particle"] == "p03" and math.isfinite(m["normalized_residual"])
    }
    assert len(alone) == 4


def test_a_pair_is_marked_where_its_normalised_error_leaves_one(held: Held) -> None:
    """Twice the normalised error is drawn, so that the band of 2 holds what is within 1."""
    base = held[1][0]
    for error, marked in ((0.99, False), (1.01, True)):
        with figurestyle.styled():
            made = figures.ParticleFigures().draw(
                "s001", "p01", [r for r in held[0] if r["particle"] == "p01" and r["log"] == "balance"], {},
                [{**base, "normalized_error": error}],
            )  # fmt: skip
        assert made is not None
        name = f"{base['method_a']} \N{MINUS SIGN} {base['method_b']}"
        label = next(n for n in ElementTree.fromstring(made.svg).iter(f"{SVG}text") if n.text == name)
        assert (figurestyle.COLOURS[1].lower() in (label.get("style") or "").lower()) is marked


def test_readings_left_out_by_the_reduction_are_drawn_hollow_and_do_not_set_the_scale(held: Held) -> None:
    own = [dict(r) for r in held[0] if r["particle"] == "p02" and r["log"] == "secular"]
    hollow = "fill: #ffffff"
    with figurestyle.styled():
        kept = figures.ParticleFigures().draw("s001", "p02", own, {}, [])
        gone = figures.ParticleFigures().draw("s001", "p02", [{**r, "status": "left_out"} for r in own], {}, [])
    assert kept is not None
    assert gone is not None
    assert gone.svg.count(hollow) > kept.svg.count(hollow)
    assert {row[10] for row in gone.rows if row[4] == "reading"} == {"left_out"}


def test_a_drawing_does_not_depend_on_what_was_drawn_before(held: Held) -> None:
    drawer = figures.ParticleFigures()
    drawn(held, "p01", drawer)
    readings, agreement, curves, _ = held
    with figurestyle.styled():
        few = [r for r in readings if r["particle"] == "p03" and r["log"] == "balance"]
        drawer.draw("s001", "p03", few, {}, [])
        no_balance = [r for r in readings if r["particle"] == "p03" and r["log"] != "balance"]
        drawer.draw("s001", "p03", no_balance, curves["p03"], [])
    again, fresh = drawn(held, "p02", drawer), drawn(held, "p02")
    assert again.svg == fresh.svg
    assert again.alt == fresh.alt
    assert repr(again.rows) == repr(fresh.rows)


def test_settings_of_matplotlib_are_left_as_they_were(held: Held) -> None:
    import matplotlib

    before = dict(matplotlib.rcParams)
    drawn(held, "p01")
    assert dict(matplotlib.rcParams) == before


def test_alternative_text_states_counts_and_the_worst_disagreement(held: Held) -> None:
    alt = drawn(held, "p01").alt
    assert "18 readings at 3 drive voltages (400 V; 600 V; 800 V)" in alt
    worst = max(abs(a["normalized_error"]) for a in held[1] if a["particle"] == "p01")
    assert f"largest normalised error {worst:.2f}" in alt


def test_particle_without_readings_has_no_drawing() -> None:
    with figurestyle.styled():
        assert figures.ParticleFigures().draw("s001", "p09", [], {}, []) is None


@pytest.mark.parametrize(
    "logs", [("balance",), ("height",), ("secular",), ("balance", "height"), ("height", "secular")]
)
def test_any_subset_of_the_logs_can_be_drawn(held: Held, logs: tuple[str, ...]) -> None:
    readings, agreement, curves, _ = held
    own = [r for r in readings if r["particle"] == "p01" and r["log"] in logs]
    with figurestyle.styled():
        made = figures.ParticleFigures().draw("s001", "p01", own, curves["p01"], agreement[:1])
    assert made is not None
    assert {row[2] for row in made.rows if row[4] == "reading"} == set(logs)
    ElementTree.fromstring(made.svg)


def test_lettering_is_text_in_the_face_of_the_page(held: Held) -> None:
    svg = drawn(held, "p01").svg
    assert "Libertinus Serif" in svg
    assert "STIX" not in svg
    texts = [node.text for node in ElementTree.fromstring(svg).iter(f"{SVG}text")]
    assert "dc voltage / V" in texts
    assert "secular frequency / Hz" in texts


@pytest.mark.parametrize("low", [False, True])
def test_all_drawn_text_lies_inside_the_figure(held: Held, low: bool) -> None:
    """Text boxes as matplotlib measures them in the nearest face it has."""
    drawer = figures.ParticleFigures(low=low)
    drawn(held, "p01", drawer)
    for figure, axes in drawer._sheets.values():
        figure.canvas.draw()
        width, height = figure.bbox.width, figure.bbox.height
        for panel in axes.values():
            box = panel.get_tightbbox()
            assert box is not None
            assert box.x0 >= -1
            assert box.x1 <= width + 1
            assert box.y0 >= -1
            assert box.y1 <= height + 1


def test_labels_are_moved_apart_and_keep_their_order() -> None:
    # 0, 0.1 and 0.05 ask for more room than they have and are centred on their mean; 5 stays.
    assert figurestyle.spread([0.0, 0.1, 5.0, 0.05], 1.0) == pytest.approx([-0.95, 1.05, 5.0, 0.05])


def test_disagreement_off_the_scale_is_drawn_at_its_edge_and_printed(held: Held) -> None:
    far = {**held[1][0], "normalized_error": 37.25}
    with figurestyle.styled():
        made = figures.ParticleFigures().draw(
            "s001", "p01", [r for r in held[0] if r["particle"] == "p01"], held[2]["p01"], [far]
        )
    assert made is not None
    assert "+74.5" in made.svg
    assert [row[5] for row in made.rows if row[2] == "pulls"] == [37.25]
