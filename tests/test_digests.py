"""Digests and batches: content decides, nothing a file holds makes the reading of it run away."""

from __future__ import annotations

import hashlib
import json
import os
import subprocess
import sys
from pathlib import Path

import pytest
import yaml
from hypothesis import given
from hypothesis import strategies as st
from standin import add_session, campaign

from reduction import digests, resultsfolder
from reduction.batches import LARGEST, SMALLEST, STATE, batches_of, make_plan
from reduction.errors import ResultsError

NAMES = [f"s{number:04d}" for number in range(1, 401)]


def test_file_digest_is_that_of_sha256(tmp_path: Path) -> None:
    # SHA-256 of "abc": FIPS 180-4, example B.1
    (tmp_path / "abc").write_bytes(b"abc")
    assert digests.file_digest(tmp_path / "abc") == "ba7816bf8f01cfea414140de5dae2223b00361a396177a9cb410ff61f20015ad"


def test_digest_tells_parts_apart() -> None:
    assert digests.digest("ab", "c") != digests.digest("a", "bc") != digests.digest("abc")


def test_batches_hold_every_session_once_and_in_order() -> None:
    found = batches_of(NAMES)
    assert [name for batch in found.values() for name in batch] == NAMES
    sizes = [len(batch) for batch in found.values()]
    assert max(sizes) <= LARGEST
    assert min(sizes[:-1]) >= SMALLEST


@pytest.mark.parametrize("new", ["a", "s0123a", "s0200-b", "z"])
def test_one_session_more_changes_few_batches(new: str) -> None:
    before, after = batches_of(NAMES), batches_of(sorted([*NAMES, new]))
    assert sum(before.get(name) != batch for name, batch in after.items()) <= 4


PLAIN = st.recursive(
    st.text(alphabet=st.characters(codec="utf-8", exclude_categories=("C",)), max_size=6),
    lambda inner: (
        st.lists(inner, max_size=3) | st.dictionaries(st.text("abc", min_size=1, max_size=3), inner, max_size=3)
    ),
    max_leaves=12,
)


@given(st.dictionaries(st.text("abcdef", min_size=1, max_size=4), PLAIN, min_size=1, max_size=4))
def test_yaml_is_read_as_the_library_reads_it_with_texts_left_as_they_are(value: dict[str, object]) -> None:
    text = yaml.safe_dump(value, allow_unicode=True)
    assert digests.yaml_strings(text.encode()) == yaml.BaseLoader(text).get_single_data()


@pytest.mark.parametrize(
    "text",
    [
        "a: &x [1]\nb: *x\n",
        "a: &a [x, x]\nb: &b [*a, *a]\nc: &c [*b, *b]\n",  # grows twofold a line
        "[" * 100_000,
        "a: [",
        "? [1]\n: 2\n",
        "\x00",
        "!!python/object/apply:os.system ['true']",
    ],
)
def test_odd_yaml_is_left_to_the_check(text: str) -> None:
    found = digests.yaml_strings(text.encode())
    assert found is None or found == ["true"]  # a tag is read as text, never obeyed


def test_odd_files_are_not_read(tmp_path: Path) -> None:
    os.mkfifo(tmp_path / "pipe")
    (tmp_path / "loop").symlink_to("loop")
    assert digests.content(tmp_path / "pipe") == b"no regular file"
    assert digests.content(tmp_path / "none") is None
    assert b"cannot be read" in (digests.content(tmp_path / "loop") or b"")
    with open(tmp_path / "huge", "wb") as handle:
        handle.truncate(digests.LARGEST + 1)
    assert (digests.content(tmp_path / "huge") or b"").startswith(b"too large")


def test_sessions_are_those_listed_and_not_left_out(tmp_path: Path) -> None:
    folder = campaign(tmp_path / "c", 4)
    (folder / "sessions" / ".hidden").mkdir()
    (folder / "sessions" / "a note.txt").write_text("")
    assert digests.session_ids(folder) == ["s01", "s02", "s03", "s04"]
    (folder / "campaign.yaml").write_text("sessions: [s01, s02, s03, s09]\nleave_out: {s02: spilt}\n")
    assert digests.session_ids(folder) == ["s01", "s03"]


def test_session_depends_on_species_its_particles_name(tmp_path: Path) -> None:
    folder = campaign(tmp_path / "c", 2)
    (folder / "sessions" / "s02" / "particles.csv").write_text("particle;species\n1;glass\n")
    before = make_plan(folder)
    (folder / "species" / "glass.yaml").write_text("density_kg_per_m3: 2600\n")
    after = make_plan(folder)
    assert [name for name in after.sessions if after.sessions[name] != before.sessions[name]] == ["s02"]


def test_run_is_called_for_by_any_new_name_in_the_campaign(tmp_path: Path) -> None:
    folder = campaign(tmp_path / "c", 1)
    before = make_plan(folder).campaign
    (folder / "sessions" / "no id!").mkdir()
    assert make_plan(folder).campaign != before
    before = make_plan(folder).campaign
    (folder / "results").mkdir()  # results may stand in the campaign's folder, and are no reason to begin again
    assert make_plan(folder).campaign == before


def test_plan_reads_back_and_depends_on_nothing_else(tmp_path: Path) -> None:
    folder = campaign(tmp_path / "c", 3)
    (tmp_path / "r" / STATE).mkdir(parents=True)
    made = make_plan(folder)
    made.save(tmp_path / "r")
    assert type(made).load(tmp_path / "r") == made
    assert str(tmp_path) not in (tmp_path / "r" / STATE / "plan.json").read_text()
    with pytest.raises(ResultsError, match="no plan"):
        type(made).load(tmp_path)


def test_digest_of_the_package_sees_templates_and_modules(tmp_path: Path) -> None:
    (tmp_path / "package").mkdir()
    (tmp_path / "workflow" / "report").mkdir(parents=True)
    seen = set()
    for text in ("1", "2"):
        for path in (tmp_path / "package" / "a.py", tmp_path / "workflow" / "report" / "page.typ"):
            path.write_text(text)
            digests.package_digest.cache_clear()
            seen.add(digests.package_digest(tmp_path / "package", tmp_path / "workflow"))
    assert len(seen) == 4


def test_job_that_outlives_its_run_is_waited_for(tmp_path: Path) -> None:
    (tmp_path / STATE).mkdir()
    code = (
        "import sys, time; from pathlib import Path; from reduction import resultsfolder\n"
        f"with resultsfolder.job(Path({str(tmp_path)!r})): print('on', flush=True); time.sleep(1.5)\n"
    )
    job = subprocess.Popen([sys.executable, "-c", code], stdout=subprocess.PIPE, cwd=Path(__file__).parent.parent)
    assert job.stdout
    assert job.stdout.readline() == b"on\n"
    with pytest.raises(ResultsError, match="still at work here"):
        resultsfolder.wait_for_jobs(tmp_path, lambda text: None, patience=0.0)
    told: list[str] = []
    resultsfolder.wait_for_jobs(tmp_path, told.append)
    assert told == ["waiting for a job of an earlier run that was killed\n"]
    assert job.wait(30) == 0
    job.stdout.close()


def test_marks_of_a_killed_run_take_away_only_files_of_the_results(tmp_path: Path) -> None:
    from base64 import urlsafe_b64encode

    results = tmp_path / "results"
    marks = results / ".snakemake" / "incomplete"
    marks.mkdir(parents=True)
    (results / "particles.csv").write_text("x")
    (results / "mine.csv").write_text("x")
    (tmp_path / "outside").write_text("x")
    for name in ("particles.csv", "../outside", str(tmp_path / "outside")):
        (marks / urlsafe_b64encode(name.encode()).decode()).write_text("{}")
    (marks / "no base64 !").write_text("{}")
    resultsfolder.clear_after_kill(results)
    assert not (results / "particles.csv").exists()
    assert (results / "mine.csv").exists()
    assert (tmp_path / "outside").exists()
    assert list(marks.iterdir()) == []


def test_results_inside_the_campaign_are_refused_only_where_they_would_mix(tmp_path: Path) -> None:
    folder = campaign(tmp_path / "c", 1)
    for name in ("", "sessions/out", "sessions/s01/deeper"):
        with pytest.raises(ResultsError, match="belongs to the campaign"):
            resultsfolder.check_folders(folder, folder / name)
    resultsfolder.check_folders(folder, folder / "results")
    with pytest.raises(ResultsError, match="no such folder"):
        resultsfolder.check_folders(tmp_path / "nowhere", tmp_path / "r")


def test_same_session_elsewhere_tells_a_moved_campaign_from_another(tmp_path: Path) -> None:
    first = campaign(tmp_path / "first", 2)
    second = campaign(tmp_path / "second", 1)
    (second / "sessions" / "s01" / "balance.csv").write_text("particle,balance_voltage_V\n7,7\n")
    results = tmp_path / "r"
    (results / STATE).mkdir(parents=True)
    resultsfolder.claim(results, first, make_plan(first))
    with pytest.raises(ResultsError, match="results of another campaign"):
        resultsfolder.claim(results, second, make_plan(second))
    first.rename(tmp_path / "moved")
    (tmp_path / "moved" / "campaign.yaml").write_text("title: new\nseed: 9\n")
    add_session(tmp_path / "moved", "s99")
    resultsfolder.claim(results, tmp_path / "moved", make_plan(tmp_path / "moved"))
    known = json.loads((results / STATE / "campaign.json").read_text())
    place = hashlib.sha256(os.fsencode(os.path.realpath(tmp_path / "moved"))).hexdigest()
    assert known["place"] == place


def test_versions_are_those_of_the_modules_that_are_imported() -> None:
    modules = [{"pyyaml": "yaml", "fonttools": "fontTools"}.get(name, name) for name in digests.LIBRARIES]
    code = f"import {', '.join(modules)}\nfor one in ({', '.join(modules)}): print(getattr(one, '__version__', ''))"
    ran = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
    said = dict(zip(digests.LIBRARIES, ran.stdout.splitlines(), strict=True))
    told = digests.versions()
    assert {name: told[name] for name in said if said[name]} == {name: text for name, text in said.items() if text}
    assert sum(map(bool, said.values())) >= 7


def test_lock_is_told_by_the_sum_of_its_file() -> None:
    root = Path(__file__).resolve().parent.parent
    assert digests.lock_digest() == hashlib.sha256((root / ".locks/requirements.lock").read_bytes()).hexdigest()
