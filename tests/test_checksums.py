"""The files of a run and their checksums: what is missing, changed or extra is named; what is personal stays apart.

The form of the checksums is that of `sha256sum` of the GNU core utilities, which one test asks.
"""

from __future__ import annotations

import os
import shutil
import subprocess
from pathlib import Path

import pytest

from reduction import checksums
from reduction.command import main
from reduction.errors import ResultsError
from reduction.resultfiles import KINDS, SUMS, every_file, kind_of, made_files


@pytest.fixture
def results(finished_run: tuple[Path, Path], tmp_path: Path) -> Path:
    """A copy of the results, to be changed."""
    return shutil.copytree(finished_run[1], tmp_path / "results")


def test_every_file_a_run_leaves_is_of_a_kind_that_is_told(finished_run: tuple[Path, Path]) -> None:
    _, results = finished_run
    assert [name for name in every_file(results) if kind_of(name) is None and name != SUMS] == []
    made = made_files(results, ["s001", "s002", "s003"])
    assert sorted([*made, SUMS]) == every_file(results)
    assert sorted(checksums.read_sums(results)) == made
    kinds = {kind_of(name) for name in made}
    # the one kind that asks for a drawn trap: tests/test_drawn_workflow.py
    assert [kind.pattern for kind in KINDS if kind not in kinds] == ["figures/field_on_axis.csv"]


def test_files_of_other_sessions_and_of_the_user_are_not_of_the_run(results: Path) -> None:
    for name in ("notes.txt", "mine.csv", "figures/mine.csv", "sessions/s009.pdf", "sessions/deep/s001.pdf"):
        (results / name).parent.mkdir(exist_ok=True)
        (results / name).write_text("mine")
        assert name not in made_files(results, ["s001", "s002", "s003"])


def test_sha256sum_reads_the_checksums(finished_run: tuple[Path, Path]) -> None:
    if shutil.which("sha256sum") is None:
        pytest.skip("no sha256sum here")
    ran = subprocess.run(
        ["sha256sum", "--check", "--strict", SUMS], cwd=finished_run[1], capture_output=True, text=True, check=False
    )
    assert ran.returncode == 0, ran.stderr
    assert len(ran.stdout.splitlines()) == len(checksums.read_sums(finished_run[1]))


def test_results_as_the_run_left_them_are_verified(
    finished_run: tuple[Path, Path], capsys: pytest.CaptureFixture[str]
) -> None:
    campaign, results = finished_run
    assert main(["verify", str(results), "--campaign", str(campaign)]) == 0
    told = capsys.readouterr().out
    assert "all as it left them" in told
    assert "all as the results were made from" in told
    assert checksums.file_sum(results / SUMS) in told


def test_missing_changed_and_extra_files_are_each_named(results: Path, capsys: pytest.CaptureFixture[str]) -> None:
    (results / "budget.csv").unlink()
    with open(results / "particles.csv", "a") as table:
        table.write("\n")
    (results / "sessions" / "notes of mine.txt").write_text("mine")
    assert main(["verify", str(results)]) == 3
    told = capsys.readouterr().out.splitlines()
    assert "  missing: budget.csv" in told
    assert "  changed: particles.csv" in told
    assert "  not of the run: sessions/notes of mine.txt" in told
    assert len([line for line in told if line.startswith("  ") and ":" in line]) == 4  # and a word on the extra file
    assert not any("to be noted elsewhere" in line for line in told)


def test_change_of_one_byte_that_keeps_size_and_time_is_found(results: Path) -> None:
    path = results / "report.pdf"
    before, data = path.stat(), bytearray(path.read_bytes())
    data[len(data) // 2] ^= 1
    path.write_bytes(bytes(data))
    os.utime(path, ns=(before.st_atime_ns, before.st_mtime_ns))
    assert checksums.verify_results(results)[0].changed == ("report.pdf",)


def test_edited_missing_and_new_inputs_are_each_named(
    finished_run: tuple[Path, Path], tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    campaign = shutil.copytree(finished_run[0], tmp_path / "campaign")
    session = campaign / "sessions" / "s002"
    with open(session / "height.csv", "a") as log:
        log.write("\n")
    (session / "balance.csv").unlink()
    (session / "lost.csv").write_text("lost,reason\n1,fell\n")
    assert main(["verify", str(finished_run[1]), "--campaign", str(campaign)]) == 3
    told = capsys.readouterr().out
    assert "  missing: sessions/s002/balance.csv" in told
    assert "  changed: sessions/s002/height.csv" in told
    assert "  not of the run: sessions/s002/lost.csv" in told


def test_campaign_that_is_not_there_is_told(finished_run: tuple[Path, Path]) -> None:
    with pytest.raises(ResultsError, match="there is no such folder"):
        checksums.verification(finished_run[1], finished_run[1] / "nowhere")


def test_changed_statement_of_the_run_is_not_trusted_with_the_inputs(
    results: Path, finished_run: tuple[Path, Path]
) -> None:
    (results / "run.json").write_text("{}")
    text, good = checksums.verification(results, finished_run[0])
    assert not good
    assert "not compared, because run.json is not that of the run" in text


@pytest.mark.parametrize(
    "line",
    [
        "nonsense",
        f"{'0' * 64}  ../outside",
        f"{'0' * 64}  /etc/hostname",
        f"{'0' * 64}  a/../../b",
        f"{'0' * 64}  a\\b",
        f"{'0' * 63}  particles.csv",
        f"{'0' * 64} *particles.csv",
    ],
)
def test_line_that_is_no_checksum_of_a_file_inside_is_refused(results: Path, line: str) -> None:
    with open(results / SUMS, "a") as sums:
        sums.write(line + "\n")
    with pytest.raises(ResultsError, match=r"SHA256SUMS line \d+: found"):
        checksums.verify_results(results)


def test_checksums_that_are_no_text_are_refused(results: Path) -> None:
    (results / SUMS).write_bytes(b"\xff\xfe\x00")
    with pytest.raises(ResultsError, match="cannot be read"):
        checksums.verify_results(results)


def test_marking_has_checksums_of_its_own(finished_run: tuple[Path, Path], tmp_path: Path) -> None:
    from reduction.provenance import write_provenance
    from reduction.wholefile import read_json

    results = shutil.copytree(finished_run[1], tmp_path / "marked")
    bench = results / "marking" / "bench"
    bench.mkdir(parents=True)
    (bench / "s001.pdf").write_bytes(b"marks")
    before = (results / SUMS).read_bytes()
    write_provenance(results, read_json(results / "run.json"), "x")
    assert not [name for name in checksums.read_sums(results) if name.startswith("marking/")]
    assert list(checksums.read_sums(results / "marking")) == ["bench/s001.pdf"]
    assert not checksums.verify_results(results)[0]
    (bench / "s001.pdf").write_bytes(b"more marks")
    assert checksums.verify_results(results)[0].changed == ("marking/bench/s001.pdf",)
    (bench / "s001.pdf").unlink()
    write_provenance(results, read_json(results / "run.json"), "x")
    assert not (results / "marking" / SUMS).exists()
    assert len(before.splitlines()) == len((results / SUMS).read_bytes().splitlines())
