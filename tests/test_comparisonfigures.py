"""The figures of a comparison: their numbers are the tables' numbers, and their words fit the paper."""

from __future__ import annotations

import math
import xml.etree.ElementTree as ElementTree
from collections.abc import Iterator
from typing import Any

import numpy as np
import pytest
from matplotlib.figure import Figure

from reduction import chargefigures, comparisonfigures, figurestyle

Row = dict[str, Any]
SPACE = "{http://www.w3.org/2000/svg}"


@pytest.fixture(autouse=True)
def style() -> Iterator[None]:
    with figurestyle.styled():
        yield


@pytest.fixture
def drawn(monkeypatch: pytest.MonkeyPatch) -> list[Figure]:
    """Figures as they were when turned into SVG."""
    found: list[Figure] = []
    real = figurestyle.svg

    def kept(figure: Figure) -> str:
        found.append(figure)
        return real(figure)

    for module in (chargefigures, comparisonfigures):
        monkeypatch.setattr(module, "svg", kept)
    return found


def texts(svg: str) -> list[str]:
    return [node.text or "" for node in ElementTree.fromstring(svg).iter(f"{SPACE}text")]


def group(name: str, mean: float, reach: float = 0.5, sessions: int = 2, **ranks: float) -> Row:
    return {"group": name, "sessions": sessions, "particles": 4, "mean": mean, "u_mean": 0.1, "low": mean - reach,
            "high": mean + reach, "median": mean, **ranks}  # fmt: skip


def sessions(*names: str) -> list[Row]:
    return [
        {"group": name, "session": f"{name}{k}", "mean": 1.0 + k, "u_measurement": 0.01, "u_particles": 0.1,
         "relative_humidity_percent": 40.0 + k, "temperature_degC": 21.0, "session_order": float(k),
         "contacts": math.nan}
        for name in names for k in (1, 2, 3)
    ]  # fmt: skip


def particles(*names: str, far: float = 1.0) -> list[Row]:
    return [
        {"group": name, "session": f"{name}{k}", "particle": f"p{n}", "value": (1.0 + 0.1 * n) * (far if n == k else 1),
         "u": 0.02}
        for name in names for k in (1, 2, 3) for n in (2, 3, 4, 5)
    ]  # fmt: skip


def strip(*names: str, far: float = 1.0) -> figurestyle.Drawing:
    made = comparisonfigures.by_group("charge", "e", 2.0, [group(name, 1.5) for name in names], sessions(*names),
                                      particles(*names, far=far))  # fmt: skip
    assert made is not None
    return made


def test_strip_has_every_particle_and_both_kinds_of_mean_in_the_unit_drawn() -> None:
    rows = strip("a", "b").rows
    values = [row[4] for row in rows if row[3] == "particle"]
    assert values == pytest.approx([2.0 * row["value"] for row in particles("a", "b")])
    assert sum(row[3] == "session_mean" for row in rows) == 6
    assert [row[4] for row in rows if row[3] == "group_mean"] == [3.0, 3.0]


def test_values_over_many_decades_are_drawn_on_a_signed_logarithmic_axis_with_plain_powers() -> None:
    assert "logarithmic beyond" not in strip("a").svg
    far = strip("a", far=-1e5)
    assert "logarithmic beyond" in far.svg
    shown = texts(far.svg)
    assert "−10⁵" in shown
    assert not [text for text in shown if "$" in text]


def test_group_names_are_drawn_as_they_are() -> None:
    assert "p$t$fe_<b>" in texts(strip("p$t$fe_<b>").svg)


def test_long_names_keep_their_ends() -> None:
    short = comparisonfigures.shortened("a rather long material name 12", 20)
    assert len(short) == 20
    assert short.startswith("a rather")
    assert short.endswith("name 12")


def test_broad_letters_count_for_more() -> None:
    assert comparisonfigures.shortened("i" * 20, 20) == "i" * 20
    assert len(comparisonfigures.shortened("W" * 20, 20)) < 12
    assert len(comparisonfigures.shortened("\u5f20" * 20, 20)) < 10
    assert comparisonfigures.shortened("e\u0301" * 20, 20) == "e\u0301" * 20


@pytest.mark.parametrize("count", [3, 14, 40])
def test_figures_keep_their_words_on_the_paper_and_fit_a_page(count: int, drawn: list[Figure]) -> None:
    names = [f"a rather long name of a material {k}" for k in range(count)]
    ranks = [group(name, -float(k), **{f"rank_{r + 1}": 1.0 / count for r in range(count)})
             for k, name in enumerate(names)]  # fmt: skip
    pairs = [
        {"group_a": a, "group_b": b, "difference": 1.0, "low": 0.5, "high": 1.5, "low_simultaneous": -1.0,
         "high_simultaneous": 3.0}
        for a in names for b in names if a < b
    ]  # fmt: skip
    strip(*names)
    assert comparisonfigures.ranks(ranks)
    assert comparisonfigures.differences("charge", "e", 1.0, pairs)
    assert len(drawn) == 3
    for figure in drawn:
        figure.canvas.draw()
        width, height = figure.bbox.width, figure.bbox.height
        assert height / figure.dpi * 25.4 < 205.0  # below the words on an A4 page
        for axes in figure.axes:
            box = axes.get_tightbbox(for_layout_only=False)
            assert box is not None
            assert box.x0 >= -2
            assert box.x1 <= width + 2
            assert box.y0 >= -2
            assert box.y1 <= height + 2


def test_rank_matrix_prints_the_chances_of_the_table() -> None:
    rows = [group("a", 2.0, rank_1=0.9, rank_2=0.1), group("b", 1.0, rank_1=0.1, rank_2=0.9)]
    made = comparisonfigures.ranks(rows)
    assert made is not None
    assert sorted(text for text in texts(made.svg) if text in ("90", "10")) == ["10", "10", "90", "90"]
    assert "a: rank 1 with 90 %; b: rank 2 with 90 %" in made.alt
    assert comparisonfigures.ranks(rows[:1]) is None


def test_differences_say_which_leave_out_zero() -> None:
    pairs = [
        {"group_a": "a", "group_b": "b", "difference": 2.0, "low": 1.5, "high": 2.5, "low_simultaneous": 1.0,
         "high_simultaneous": 3.0},
        {"group_a": "a", "group_b": "c", "difference": 1.0, "low": 0.5, "high": 1.5, "low_simultaneous": -1.0,
         "high_simultaneous": 3.0},
    ]  # fmt: skip
    made = comparisonfigures.differences("charge", "e", 10.0, pairs)
    assert made is not None
    assert made.alt.endswith("Intervals for all at once that leave out zero: a less b 20.")
    assert comparisonfigures.differences("charge", "e", 1.0, []) is None


def test_only_covariates_that_vary_are_drawn(drawn: list[Figure]) -> None:
    found = [{"covariate": name, "slope": 0.5, "p_holm": 0.2, "step": "%", "note": ""}
             for name in ("relative_humidity", "temperature", "session_order", "contacts")]  # fmt: skip
    made = comparisonfigures.trends("charge", "e", 1.0, [group("a", 1.0)], sessions("a"), found)
    assert made is not None
    labels = {axes.get_xlabel() for axes in drawn[0].axes}
    assert {"relative humidity / %", "order of the sessions"} <= labels
    assert "temperature / °C" not in labels
    assert "relative humidity: slope 0.5 per %" in made.alt


def summary(**changes: Any) -> Row:
    windows = {f"window_{sign}_{end}_e": math.nan for sign in ("positive", "negative") for end in ("low", "high")}
    return {"group": "a", "species": "bead", "sessions": 2, "particles": 4, "scale": "linear", "bin_width_e": 1000.0,
            "fraction_positive": 0.75, "lost": 2, **windows, **changes}  # fmt: skip


def charges(value: list[float], edges: list[float], **changes: Any) -> figurestyle.Drawing:
    count = np.histogram(value, edges)[0]
    bins = [{"low_e": low, "high_e": high, "count": n, "count_low": max(n - 1, 0), "count_high": n + 1,
             "expected_count": float(n)} for low, high, n in zip(edges, edges[1:], count, strict=False)]  # fmt: skip
    listed = [{"charge_e": v, "share_at_or_below": sum(w <= v for w in value) / len(value), "share_smeared": 0.5}
              for v in value]  # fmt: skip
    return chargefigures.charges(summary(**changes), bins, listed, 0)


def test_bars_of_a_histogram_are_its_counts(drawn: list[Figure]) -> None:
    made = charges([-500.0, 500.0, 1500.0, 1600.0], [-1000.0, 0.0, 1000.0, 2000.0])
    left, right = drawn[0].axes
    assert [patch.get_height() for patch in left.patches] == [1, 1, 2]  # type: ignore[attr-defined]
    steps = right.lines[1].get_ydata()
    assert list(np.asarray(steps))[1:-1] == [0.25, 0.5, 0.75, 1.0]
    assert "4 particles in 2 sessions, from −500 to 1600 e, median 1000 e, 75 % positive, 2 lost." in made.alt
    assert "What could have been held is not known." in made.alt


def test_what_could_not_be_held_is_grey_and_its_ends_are_told(drawn: list[Figure]) -> None:
    made = charges([500.0, 1500.0], [0.0, 1000.0, 2000.0], window_positive_low_e=400.0, window_positive_high_e=1900.0)
    assert "charges from 400 to 1900 e could have been held" in made.alt
    grey = [
        patch
        for patch in drawn[0].axes[1].patches
        if patch.get_facecolor()[:3] == pytest.approx((0.91, 0.925, 0.941), abs=0.01)
    ]
    ends = sorted((patch.get_x(), patch.get_x() + patch.get_width()) for patch in grey)  # type: ignore[attr-defined]
    low, high = drawn[0].axes[1].get_xlim()
    assert ends == [pytest.approx((low, 400.0)), pytest.approx((1900.0, high))]


def test_charges_over_decades_have_a_symmetric_logarithmic_axis(drawn: list[Figure]) -> None:
    made = charges([-2e6, 30.0, 5e3, 4e6], [-1e7, -1e3, 0.0, 1e3, 1e7], scale="symmetric_log")
    assert drawn[0].axes[0].get_xscale() == "symlog"
    assert "charge / e, logarithmic" in texts(made.svg)
    assert not [text for text in texts(made.svg) if "$" in text]
