"""Campaigns with little to compare: every one ends in tables and a report that say so in words."""

from __future__ import annotations

import json
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from fake_record import write_record
from test_report import campaign, needs_poppler, text_of

from reduction import report
from reduction.check import check_campaign
from reduction.comparisontables import TABLES, WORDS, write_comparison
from reduction.records import PIECES
from reduction.sheets import rows_of
from reduction.tables import read_table, write_table
from reduction.wholefile import read_json
from reduction.wording import CAUTIONS

SETTINGS = {"compare": {"quantity": "charge_to_mass", "by": "charged_with"}, "coverage_probability": 0.95, "seed": 1,
            "monte_carlo_trials": 1000}  # fmt: skip


def few(base: Path, groups: tuple[str, ...], settings: dict[str, Any] = SETTINGS) -> tuple[Path, dict[str, Path]]:
    """Make a results folder of one session for each group named."""
    folders = {
        f"s{k:03d}": write_record(base / "records" / f"s{k:03d}", f"s{k:03d}", particles=4, seed=k, charged_with=group)
        for k, group in enumerate(groups, 1)
    }
    results = base / "results"
    results.mkdir()
    for piece in PIECES:
        frames = [read_table(folder / f"{piece}.csv") for folder in folders.values()]
        write_table(results / f"{piece}.csv", frames[0].columns.tolist(), [r for f in frames for r in rows_of(f)])
    (results / "run.json").write_text(json.dumps({"settings": settings}), encoding="utf-8")
    return results, folders


def told(results: Path, folders: dict[str, Path], settings: dict[str, Any] = SETTINGS) -> tuple[str, str]:
    """Statements and report of a results folder."""
    facts = {name: read_json(folder / "session.json") for name, folder in folders.items()}
    write_comparison(results, facts, settings)
    report.campaign_pdf(results, folders, results / "report.pdf", digest="0" * 64)
    assert all((results / f"{name}.csv").is_file() for name in TABLES)
    words = read_json(results / WORDS)
    return " ".join([*words["statements"], *words["charge"]]), text_of(results / "report.pdf")


@needs_poppler
def test_campaign_without_a_determined_particle_compares_nothing(tmp_path: Path) -> None:
    results, folders = few(tmp_path, ("glass", "ptfe"))
    particles = read_table(results / "particles.csv")
    particles["status"] = "not_determined"
    numbers = [name for name in particles.columns if name.startswith(("charge_", "u_charge", "mass_k", "surface"))]
    particles[[name for name in numbers if particles[name].dtype == np.float64]] = np.nan
    write_table(results / "particles.csv", particles.columns.tolist(), particles)
    for piece in ("components", "budget", "agreement"):
        frame = read_table(results / f"{piece}.csv")
        write_table(results / f"{piece}.csv", frame.columns.tolist(), frame.iloc[:0])
    said, text = told(results, folders)
    assert "No particle has a signed charge-to-mass ratio: nothing is compared." in said
    assert "nothing is compared" in text
    assert "No particle has a charge." in text
    assert read_table(results / "comparison.csv").empty


@needs_poppler
def test_one_session_is_described_and_not_tested(tmp_path: Path) -> None:
    said, text = told(*few(tmp_path, ("glass",)))
    assert "glass: one session, described and not tested." in said
    assert "a p below" not in said  # nothing to exchange
    assert "one session only" in text
    assert "There are no two groups to compare." in text
    assert "No group has an interval." in text
    assert CAUTIONS[0][1][:30] in text


@needs_poppler
def test_one_group_of_several_sessions_has_an_interval_and_no_rank(tmp_path: Path) -> None:
    said, text = told(*few(tmp_path, ("glass", "glass", "glass")))
    assert "is compared between 1 group" in said
    assert "There are no two groups to compare." in text
    assert "glass would gain most from" in text


@needs_poppler
def test_groups_may_be_those_of_an_attribute(tmp_path: Path) -> None:
    settings = {**SETTINGS, "compare": {"quantity": "charge", "by": "humidity_box"}}
    results, folders = few(tmp_path, ("glass", "ptfe"), settings)
    path = folders["s002"] / "session.json"
    path.write_text(path.read_text().replace('"humidity_box": "open"', '"humidity_box": "shut"'))
    said, text = told(results, folders, settings)
    assert read_table(results / "comparison.csv")["group"].tolist() == ["open", "shut"]
    assert (
        "open and shut: one session each, described and not tested. Exchanging sessions could not reach a p below 1;"
        in said
    )
    assert "grouped by humidity box" in text


@needs_poppler
def test_particles_without_a_group_are_left_out_and_said_to_be(tmp_path: Path) -> None:
    settings = {**SETTINGS, "compare": {"quantity": "charge_to_mass", "by": "bench"}}
    said, text = told(*few(tmp_path, ("glass", "ptfe"), settings), settings)
    assert "no word tells the group" in said
    assert "no word tells the group" in text


def test_check_refuses_to_compare_by_a_word_nobody_has(tmp_path: Path) -> None:
    from small_campaign import write

    folder = write(tmp_path / "c")
    path = folder / "campaign.yaml"
    path.write_text(path.read_text() + "\ncompare: {quantity: charge, by: charged_wiht}\n")
    faults = check_campaign(folder)[2]
    assert [fault.found for fault in faults] == ["charged_wiht"]
    assert "Did you mean charged_with?" in str(next(iter(faults)))


@needs_poppler
def test_names_of_groups_are_the_same_words_in_tables_and_report(tmp_path: Path) -> None:
    results, folders = campaign(tmp_path, group="=SUM(A1)")
    report.campaign_pdf(results, folders, results / "report.pdf", digest="0" * 64)
    assert "=SUM(A1)" in read_table(results / "comparison.csv")["group"].tolist()
    assert "'=SUM(A1)" in (results / "comparison.csv").read_text()
    assert "=SUM(A1)" in text_of(results / "report.pdf")


@pytest.mark.parametrize("quantity", ["charge_to_mass", "charge", "surface_charge_density"])
def test_every_quantity_can_be_compared(tmp_path: Path, quantity: str) -> None:
    settings = {**SETTINGS, "compare": {"quantity": quantity, "by": "charged_with"}}
    results, folders = few(tmp_path, ("glass", "glass", "ptfe", "ptfe"), settings)
    facts = {name: read_json(folder / "session.json") for name, folder in folders.items()}
    found = write_comparison(results, facts, settings)
    budget = read_table(results / "group_budget.csv")
    for place, group in enumerate(found.means.groups):
        own = budget[(budget["result"] == "mean") & (budget["group"] == group.group)]
        assert float((own["component"] ** 2).sum() ** 0.5) == pytest.approx(found.interval(place)[0], rel=1e-6)
