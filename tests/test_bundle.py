"""The bundle for a colleague: it verifies after unpacking, has the same bytes again, and holds nothing personal."""

from __future__ import annotations

import hashlib
import os
import shutil
import zipfile
from pathlib import Path

import pytest
from finished import finish

from reduction import bundle
from reduction.bundle import pack
from reduction.command import main
from reduction.errors import ResultsError
from reduction.resultfiles import SUMS, every_file
from reduction.wholefile import read_json


@pytest.fixture
def results(finished_run: tuple[Path, Path], tmp_path: Path) -> Path:
    """A copy of the results, to be changed."""
    return shutil.copytree(finished_run[1], tmp_path / "results")


def test_bundle_verifies_after_unpacking(
    finished_run: tuple[Path, Path], tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    campaign, results = finished_run
    archive = tmp_path / "to send.zip"
    assert main(["pack", str(results), str(archive), "--with-campaign", str(campaign)]) == 0
    unpacked = tmp_path / "unpacked"
    with zipfile.ZipFile(archive) as packed:
        packed.extractall(unpacked)
    capsys.readouterr()
    assert main(["verify", str(unpacked)]) == 0
    told = capsys.readouterr().out
    count = len(read_json(results / "run.json")["inputs"])
    assert f"{unpacked / 'campaign'}: {count} input files, all as the results were made from." in told
    assert [name for name in every_file(unpacked) if not name.startswith("campaign/")] == every_file(results)
    with open(unpacked / "campaign" / "campaign.yaml", "a") as settings:
        settings.write("\n")
    (unpacked / "campaign" / "more.txt").write_text("x")
    assert main(["verify", str(unpacked)]) == 3
    told = capsys.readouterr().out
    assert "  changed: campaign.yaml" in told
    assert "  not of the run: more.txt" in told


def test_campaign_of_a_bundle_gives_the_results_of_the_bundle(finished_run: tuple[Path, Path], tmp_path: Path) -> None:
    pack(finished_run[1], tmp_path / "b.zip", campaign=finished_run[0])
    with zipfile.ZipFile(tmp_path / "b.zip") as packed:
        packed.extractall(tmp_path / "b")
    again = finish(tmp_path / "b" / "campaign", tmp_path / "again")
    assert (again / SUMS).read_bytes() == (finished_run[1] / SUMS).read_bytes()


def test_bundle_has_the_same_bytes_whenever_and_wherever_it_is_packed(results: Path, tmp_path: Path) -> None:
    pack(results, tmp_path / "first.zip")
    for path in results.rglob("*"):
        os.utime(path, (1e9, 1e9))
        if path.is_file():
            path.chmod(0o600)
    (results / "particles.csv").rename(tmp_path / "kept")  # another order in the folder
    (tmp_path / "kept").rename(results / "particles.csv")
    other = results.rename(tmp_path / "elsewhere")
    pack(other, tmp_path / "second.zip")
    digests = {hashlib.sha256((tmp_path / name).read_bytes()).hexdigest() for name in ("first.zip", "second.zip")}
    assert len(digests) == 1
    with zipfile.ZipFile(tmp_path / "first.zip") as packed:
        assert packed.namelist() == sorted(packed.namelist())
        assert {one.external_attr >> 16 for one in packed.infolist()} == {0o100644}
        assert {one.date_time for one in packed.infolist()} == {(1980, 1, 1, 0, 0, 0)}


def test_nothing_personal_and_no_state_goes_in(finished_run: tuple[Path, Path], tmp_path: Path) -> None:
    campaign = shutil.copytree(finished_run[0], tmp_path / "campaign")
    results = shutil.copytree(finished_run[1], tmp_path / "results")
    secret = b"Ada Byron 1815"
    for folder, names in (
        (
            results,
            ["marking/staff/marks.csv", "marking/bench/s001.pdf", "notes.txt", ".motescale/logs/x.log", "staff/a"],
        ),
        (
            campaign,
            ["marking/register.csv", "marking/overrides.csv", "marking/scheme.yaml", "sessions/s001/claims.csv"],
        ),
    ):
        for name in names:
            (folder / name).parent.mkdir(parents=True, exist_ok=True)
            (folder / name).write_bytes(secret)
    told = pack(results, tmp_path / "b.zip", campaign=campaign)
    assert "left out: marking/ (marks and bench reports are personal)" in told
    assert "left out: notes.txt (not of the run)" in told
    with zipfile.ZipFile(tmp_path / "b.zip") as packed:
        for name in packed.namelist():
            assert not {"marking", "staff", ".motescale", ".snakemake"} & set(name.split("/"))
            assert not name.endswith(("claims.csv", "register.csv", "overrides.csv"))
            data = packed.read(name)
            assert secret not in data
            for word in (str(tmp_path), str(finished_run[0]), f"{Path.home()}/"):
                assert word.encode() not in data, name


def test_inputs_that_are_to_be_marked_stay_out_even_where_the_run_read_them(results: Path, tmp_path: Path) -> None:
    from reduction.checksums import may_be_shared

    names = ["campaign.yaml", "sessions/s1/balance.csv", "marking/scheme.yaml", "sessions/s1/claims.csv", "staff/x.csv"]
    assert [name for name in names if may_be_shared(name)] == names[:2]


def test_results_that_are_not_those_of_the_run_are_not_packed(results: Path, tmp_path: Path) -> None:
    (results / "budget.csv").unlink()
    with pytest.raises(ResultsError, match=r"Run again before packing.\n  missing: budget.csv"):
        pack(results, tmp_path / "b.zip")
    assert not (tmp_path / "b.zip").exists()


def test_other_inputs_are_not_packed(finished_run: tuple[Path, Path], tmp_path: Path) -> None:
    campaign = shutil.copytree(finished_run[0], tmp_path / "campaign")
    with open(campaign / "campaign.yaml", "a") as settings:
        settings.write("\n")
    with pytest.raises(ResultsError, match="changed: campaign.yaml"):
        pack(finished_run[1], tmp_path / "b.zip", campaign=campaign)


def test_archive_is_replaced_only_where_asked(results: Path, tmp_path: Path) -> None:
    archive = tmp_path / "b.zip"
    archive.write_bytes(b"mine")
    with pytest.raises(ResultsError, match="say --overwrite"):
        pack(results, archive)
    assert archive.read_bytes() == b"mine"
    pack(results, archive, overwrite=True)
    assert zipfile.is_zipfile(archive)
    assert not list(tmp_path.glob(".*.part"))


@pytest.mark.parametrize("name", ["b.tar", "results/b.zip", "."])
def test_odd_place_for_the_archive_is_refused(results: Path, tmp_path: Path, name: str) -> None:
    with pytest.raises(ResultsError, match=r"expected the name of an archive|lies in the results folder"):
        pack(results, tmp_path / name)


def test_link_that_leads_outside_is_refused_and_one_inside_is_packed_as_its_content(
    results: Path, tmp_path: Path
) -> None:
    (results / "report.pdf").rename(results / "sessions" / "the report.pdf")
    (results / "report.pdf").symlink_to("sessions/the report.pdf")
    pack(results, tmp_path / "b.zip")
    with zipfile.ZipFile(tmp_path / "b.zip") as packed:
        assert packed.read("report.pdf") == (results / "report.pdf").read_bytes()
    (results / "sessions" / "the report.pdf").rename(tmp_path / "outside.pdf")
    (results / "report.pdf").unlink()
    (results / "report.pdf").symlink_to(tmp_path / "outside.pdf")
    with pytest.raises(ResultsError, match="is a link that leads out of the folder"):
        pack(results, tmp_path / "c.zip")


def test_input_that_is_a_link_out_of_the_campaign_is_refused(finished_run: tuple[Path, Path], tmp_path: Path) -> None:
    campaign = shutil.copytree(finished_run[0], tmp_path / "campaign")
    log = campaign / "sessions" / "s001" / "balance.csv"
    log.rename(tmp_path / "balance.csv")
    log.symlink_to(tmp_path / "balance.csv")
    with pytest.raises(ResultsError, match="is a link that leads out of the folder"):
        pack(finished_run[1], tmp_path / "b.zip", campaign=campaign)


def test_folder_that_is_a_link_outside_is_refused(results: Path, tmp_path: Path) -> None:
    (results / "readings").rename(tmp_path / "readings")
    (results / "readings").symlink_to(tmp_path / "readings")
    with pytest.raises(ResultsError, match=r"Run again before packing|leads out of the folder"):
        pack(results, tmp_path / "b.zip")


def test_checksums_that_name_marking_or_a_file_outside_are_refused(results: Path, tmp_path: Path) -> None:
    sums = (results / SUMS).read_text()
    for name, told in (("marking/staff/marks.csv", "never go into a bundle"), ("../x", "expected a SHA-256")):
        (results / SUMS).write_text(sums + f"{'0' * 64}  {name}\n")
        with pytest.raises(ResultsError, match=told):
            pack(results, tmp_path / "b.zip")


def test_disk_that_is_full_leaves_no_archive(results: Path, tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    def full(path: Path) -> None:
        raise OSError(28, "No space left on device")

    monkeypatch.setattr(bundle, "_pieces", full)
    with pytest.raises(OSError, match="No space left"):
        pack(results, tmp_path / "b.zip")
    assert not (tmp_path / "b.zip").exists()
