"""The workflow: what is computed when, and that nothing is lost, mixed or touched that should not be.

All but the last tests run on stand-ins for the physics (see standin.py). What is expected here is the project's own
contract; there is no published source for it.
"""

from __future__ import annotations

import csv
import json
import os
import re
import shutil
import signal
import subprocess
import sys
from pathlib import Path
from urllib.parse import unquote

import pytest
from standin import ROOT, Bench, add_session, campaign, checkout, contents

from reduction import comparison, comparisontables
from reduction.checksums import set_edited_aside, verification
from reduction.resultfiles import SUMS, kind_of
from reduction.tables import COLUMNS, read_table, table_text
from reduction.wholefile import read_json

pytestmark = pytest.mark.workflow

SESSIONS = [f"s{number:02d}" for number in range(1, 13)]  # enough for two batches
COMPARISON = [f"{name}.csv" for name in comparisontables.TABLES]
RULES = sorted(path.name for path in (ROOT / "workflow" / "rules").glob("*.smk"))
TABLES = ["agreement.csv", "budget.csv", "components.csv", "inputs.csv", "methods.csv", "particles.csv"]


@pytest.fixture(scope="module")
def finished(tmp_path_factory: pytest.TempPathFactory) -> Bench:
    """A finished run, in folders with spaces, umlauts and a quote in their names; not to be changed."""
    folder = tmp_path_factory.mktemp("finished") / "Büro (2)"
    folder.mkdir()
    bench = Bench(checkout(folder / "the program"), campaign(folder / "it's raw data", 12), folder / "my results")
    ran = bench.run()
    assert ran.returncode == 0, ran.stderr
    assert bench.done == sorted(f"{what} {name}" for what in ("reduce", "draw") for name in SESSIONS)
    return bench


@pytest.fixture
def bench(finished: Bench, tmp_path: Path) -> Bench:
    """A copy of the finished run, to be changed."""
    shutil.copytree(finished.campaign.parent, tmp_path / "bench dir", symlinks=True)
    parts = (finished.program.name, finished.campaign.name, finished.results.name)
    return Bench(*(tmp_path / "bench dir" / part for part in parts))


def edit(path: Path, text: str) -> None:
    """Change a file and keep its time stamp."""
    before = path.stat()
    path.write_text(text)
    os.utime(path, ns=(before.st_atime_ns, before.st_mtime_ns))


def good(ran: subprocess.CompletedProcess[str]) -> None:
    assert ran.returncode == 0, ran.stdout + ran.stderr


def test_run_gives_every_file_of_the_contract(finished: Bench) -> None:
    expected = [*TABLES, *COMPARISON, "comparison.json", "report.html", "report.pdf", "run.json", SUMS]
    expected += ["datapackage.json", "readings.schema.json", "ro-crate-metadata.json"]
    expected += [f"program/{name}" for name in ("Snakefile", *(f"workflow/rules/{name}" for name in RULES))]
    expected += [
        f"{folder}/{name}{end}" for name in SESSIONS for folder, end in (("readings", ".csv"), ("sessions", ".pdf"))
    ]
    assert sorted(contents(finished.results)) == sorted(expected)
    assert verification(finished.results, finished.campaign)[1]


def test_second_run_has_nothing_to_do(bench: Bench) -> None:
    before = contents(bench.results)
    ran = bench.run()
    good(ran)
    assert "Nothing to be done" in ran.stderr
    assert bench.done == []
    assert contents(bench.results) == before


def test_edit_that_keeps_its_time_stamp_redoes_that_session_alone(bench: Bench) -> None:
    before = contents(bench.results)
    edit(bench.campaign / "sessions" / "s03" / "balance.csv", "particle,balance_voltage_V\n1,9999\n")
    good(bench.run())
    assert bench.done == ["draw s03", "reduce s03"]
    after = contents(bench.results)
    pages = {name for name in after if name.startswith("sessions/") and after[name] != before[name]}
    assert pages == {"sessions/s03.pdf"}
    assert after["particles.csv"] != before["particles.csv"]
    assert "Nothing to be done" in bench.run("--dry-run").stdout


def test_run_begins_with_what_changed_and_what_it_redoes(bench: Bench) -> None:
    edit(bench.campaign / "sessions" / "s03" / "balance.csv", "particle,balance_voltage_V\n1,9999\n")
    ran = bench.run()
    good(ran)
    told = ran.stdout.splitlines()
    at = told.index("Changed since the last run: file edited sessions/s03/balance.csv.")
    assert told[at + 1] == ("To be reduced anew: 1 of 12 sessions (s03); to be drawn anew: 1 of 12 sessions (s03).")
    assert at < [place for place, line in enumerate(told) if line.startswith("reduce ")][0]
    edit(bench.campaign / "campaign.yaml", "title: Another\nseed: 1\n")
    told = bench.motescale("run", str(bench.campaign), str(bench.results)).stdout
    assert "Changed since the last run: file edited campaign.yaml." in told
    assert "To be reduced anew: no session; to be drawn anew: 12 of 12 sessions." in told


def test_new_time_stamp_alone_redoes_nothing(bench: Bench) -> None:
    for path in bench.campaign.rglob("*"):
        path.touch()
    good(bench.run())
    assert bench.done == []


def test_added_session_is_computed_and_a_removed_one_leaves_nothing(bench: Bench) -> None:
    add_session(bench.campaign, "a-first")
    shutil.rmtree(bench.campaign / "sessions" / "s02")
    (bench.results / "sessions" / "notes of mine.txt").write_text("kept")
    good(bench.run())
    assert bench.done == ["draw a-first", "reduce a-first"]
    after = contents(bench.results)
    assert "sessions/a-first.pdf" in after
    assert "readings/a-first.csv" in after
    assert not [name for name in after if "s02" in name]
    assert "s02" not in json.loads(after["run.json"])["sessions"]
    assert not (bench.results / ".motescale" / "records" / "s02").exists()
    assert "sessions/notes of mine.txt" in after


@pytest.mark.parametrize(
    ("name", "text", "redone"),
    [
        ("traps/ring.yaml", "dc_polarity: -1\n", ["draw", "reduce"]),
        ("species/bead.yaml", "density_kg_per_m3: 1051\n", ["draw", "reduce"]),
        ("species/glass.yaml", "density_kg_per_m3: 2501\n", []),  # no session has it
        ("campaign.yaml", "title: Stand-in\nseed: 2\n", ["draw", "reduce"]),
        ("campaign.yaml", "title: Another\nseed: 1\n", ["draw"]),
        ("campaign.yaml", "title: Stand-in\nseed: 1\nevery_session: {operator: me}\n", ["draw", "reduce"]),
        ("campaign.yaml", "title: Stand-in\nseed: 1\nevery_session: {notes: given by each}\n", []),
    ],
)
def test_settings_redo_what_depends_on_them(bench: Bench, name: str, text: str, redone: list[str]) -> None:
    edit(bench.campaign / name, text)
    good(bench.run())
    assert bench.done == [f"{what} {session}" for what in redone for session in SESSIONS]
    assert "Nothing to be done" in bench.run("--dry-run").stdout


def test_edit_of_the_program_redoes_everything(bench: Bench) -> None:
    with open(bench.program / "reduction" / "drag.py", "a") as module:
        module.write("# another\n")
    good(bench.run())
    assert bench.done == sorted(f"{what} {name}" for what in ("reduce", "draw") for name in SESSIONS)


def test_edit_of_a_template_redoes_everything(bench: Bench) -> None:
    with open(bench.program / "workflow" / "report" / "page.typ", "a") as template:
        template.write("// another\n")
    ran = bench.run()
    good(ran)
    assert bench.done == sorted(f"{what} {name}" for what in ("reduce", "draw") for name in SESSIONS)
    assert "Changed since the last run: the program itself (its files differ)." in ran.stdout


def test_another_version_of_a_library_redoes_everything_and_is_named(bench: Bench) -> None:
    library = bench.program / "numpy-9.9.dist-info"  # found before the one that is installed
    library.mkdir()
    (library / "METADATA").write_text("Metadata-Version: 2.1\nName: numpy\nVersion: 9.9\n")
    ran = bench.run()
    good(ran)
    assert bench.done == sorted(f"{what} {name}" for what in ("reduce", "draw") for name in SESSIONS)
    assert " -> 9.9." in ran.stdout
    assert "Changed since the last run: version of numpy: " in ran.stdout
    assert json.loads((bench.results / "run.json").read_text())["versions"]["numpy"] == "9.9"


def test_edit_of_a_rule_computes_nothing_and_is_laid_beside_the_results(bench: Bench) -> None:
    with open(bench.program / "workflow" / "rules" / "tables.smk", "a") as rule:
        rule.write("# another\n")
    before = contents(bench.results)
    good(bench.run())
    after = contents(bench.results)
    assert bench.done == []
    assert {name for name in after if after[name] != before[name]} == {
        "program/workflow/rules/tables.smk", "ro-crate-metadata.json", SUMS,
    }  # fmt: skip
    assert "Nothing to be done" in bench.run("--dry-run").stdout


def test_what_is_compared_redoes_the_comparison_alone(bench: Bench) -> None:
    compare = "compare: {quantity: charge, by: charged_with}\n"
    edit(bench.campaign / "campaign.yaml", "title: Stand-in\nseed: 1\n" + compare)
    before = contents(bench.results)
    good(bench.run())
    after = contents(bench.results)
    assert bench.done == []
    assert after["comparison.json"] != before["comparison.json"]
    assert after["particles.csv"] == before["particles.csv"]


def test_program_edited_while_it_runs_is_noticed(bench: Bench, finished: Bench) -> None:
    module = bench.program / "reduction" / "drag.py"
    text = module.read_text()
    shutil.rmtree(bench.results)
    going = bench.start(STANDIN_SECONDS="0.5")
    bench.wait_for("reduce s03")
    module.write_text(text + "# another\n")
    out, _ = going.communicate(timeout=120)
    assert going.returncode == 1
    assert "the program or its libraries changed since the run began. Start the run again." in out
    module.write_text(text)
    good(bench.run())
    assert contents(bench.results) == contents(finished.results)


@pytest.mark.parametrize(
    "name", ["particles.csv", "run.json", "comparison.json", "sessions/s03.pdf", "datapackage.json"]
)
def test_result_changed_by_hand_is_made_again_and_the_changed_one_is_kept(bench: Bench, name: str) -> None:
    before = contents(bench.results)
    with open(bench.results / name, "a") as result:
        result.write("mine")
    assert not verification(bench.results)[1]
    ran = bench.run()
    good(ran)
    assert bench.done == []
    assert f"{name} was changed after the run that made it: made again" in ran.stderr
    assert contents(bench.results) == before
    assert (bench.results / ".motescale" / "edited" / name).read_bytes() == before[name] + b"mine"
    assert "Nothing to be done" in bench.run("--dry-run").stdout


@pytest.mark.parametrize("name", ["particles.csv", "report.pdf", "readings/s03.csv", "program/Snakefile", SUMS])
def test_result_that_is_gone_is_made_again(bench: Bench, name: str) -> None:
    before = contents(bench.results)
    (bench.results / name).unlink()
    good(bench.run())
    assert bench.done == []
    assert contents(bench.results) == before


def test_file_drawn_with_the_report_calls_for_the_report(bench: Bench) -> None:
    sums = bench.results / SUMS
    sums.write_text(sums.read_text() + f"{'0' * 64}  figures/agreement.csv\n")
    kind = kind_of("figures/agreement.csv")
    assert kind is not None
    assert kind.maker == "report.pdf"
    set_edited_aside(bench.results, print)
    assert not (bench.results / "report.pdf").exists()
    assert (bench.results / "particles.csv").exists()


@pytest.mark.parametrize("what", ["records", "pages", "reduced", ""])
def test_deleted_records_are_made_again_to_the_same_bytes(bench: Bench, what: str) -> None:
    before = contents(bench.results)
    shutil.rmtree(bench.results / ".motescale" / what)
    good(bench.run())
    assert contents(bench.results) == before


def test_results_do_not_depend_on_cores_batches_or_folder(bench: Bench, finished: Bench) -> None:
    module = bench.program / "reduction" / "batches.py"
    text = module.read_text()
    assert "SMALLEST, MEAN, LARGEST = 5, 10, 16" in text
    module.write_text(text.replace("SMALLEST, MEAN, LARGEST = 5, 10, 16", "SMALLEST, MEAN, LARGEST = 1, 2, 3"))
    good(bench.run("--cores", "1", results=str(bench.results.with_name("other"))))
    assert len(list((bench.results.with_name("other") / ".motescale" / "reduced").iterdir())) >= 4
    before, after = contents(finished.results), contents(bench.results.with_name("other"))
    numbers = [name for name in before if name.endswith(".csv")]  # the others name the program, which was edited
    assert {name: after[name] for name in numbers} == {name: before[name] for name in numbers}


def test_faults_end_the_run_before_anything_is_touched(bench: Bench) -> None:
    before = contents(bench.results)
    (bench.campaign / "sessions" / "s05" / "balance.csv").write_text("particle,balance_voltage_V\n1,wrong\n")
    edit(bench.campaign / "sessions" / "s06" / "balance.csv", "particle,balance_voltage_V\n1,7\n")
    ran = bench.run()
    assert ran.returncode == 1
    assert "sessions/s05/balance.csv line 2, balance_voltage_V: found wrong; expected a number" in ran.stdout
    assert "Traceback" not in ran.stdout + ran.stderr
    assert bench.done == []
    assert contents(bench.results) == before


def test_faulty_session_is_left_out_where_the_campaign_says_so(bench: Bench) -> None:
    edit(bench.campaign / "campaign.yaml", "title: Stand-in\nseed: 1\nwhen_a_session_fails: leave_out\n")
    (bench.campaign / "sessions" / "s05" / "balance.csv").write_text("particle,balance_voltage_V\n1,wrong\n")
    ran = bench.run()
    good(ran)
    assert "session s05: left out for its faults" in ran.stdout
    after = contents(bench.results)
    run = json.loads(after["run.json"])
    assert list(run["left_out"]) == ["s05"]
    assert "expected a number" in run["left_out"]["s05"]
    assert run["sessions"]["s05"]["status"] == "left_out"
    assert b"expected a number" in after["sessions/s05.pdf"]
    assert b"s05" not in after["particles.csv"]
    assert b"s06" in after["particles.csv"]


def test_sessions_adjusted_together_depend_on_each_other(bench: Bench) -> None:
    edit(bench.campaign / "campaign.yaml", "title: Stand-in\nseed: 1\nadjust: campaign\n")
    good(bench.run())
    first = contents(bench.results)
    edit(bench.campaign / "sessions" / "s03" / "balance.csv", "particle,balance_voltage_V\n1,9\n")
    good(bench.run())
    assert len(bench.done) == 2 * len(SESSIONS)
    assert contents(bench.results)["sessions/s04.pdf"] != first["sessions/s04.pdf"]
    good(bench.run())
    assert bench.done == []


@pytest.mark.parametrize("name", ["campaign", "results"])
def test_path_that_arrives_as_a_number_is_refused(bench: Bench, name: str) -> None:
    ran = bench.run(**{name: "0812"})
    assert ran.returncode == 1
    assert "Write ./ in front" in ran.stderr
    assert not (bench.campaign.parent / "812").exists()


def test_results_of_another_campaign_are_refused(bench: Bench, tmp_path: Path) -> None:
    other = campaign(tmp_path / "other", 2)
    for path in (other / "sessions").glob("*/balance.csv"):
        path.write_text("particle,balance_voltage_V\n7,7\n")
    before = contents(bench.results)
    ran = bench.run(campaign=str(other))
    assert ran.returncode == 1
    assert "results of another campaign" in ran.stderr
    assert contents(bench.results) == before


def test_campaign_that_was_moved_is_still_the_same(bench: Bench) -> None:
    moved = bench.campaign.rename(bench.campaign.with_name("moved"))
    good(bench.run(campaign=str(moved)))
    assert bench.done == []


def test_second_run_at_the_same_time_is_refused_and_the_first_goes_on(bench: Bench) -> None:
    edit(bench.campaign / "sessions" / "s03" / "balance.csv", "particle,balance_voltage_V\n1,9\n")
    first = bench.start(STANDIN_SECONDS="6")
    try:
        bench.wait_for("reduce s03")
        second = subprocess.run(
            bench.plain(), capture_output=True, text=True, check=False, timeout=60, env=bench.environment
        )
        assert second.returncode == 1
        assert "another run is going on in this folder" in second.stderr
        out, _ = first.communicate(timeout=120)
    finally:
        first.kill()
    assert first.returncode == 0, out


@pytest.mark.parametrize("whole_group", [False, True])
def test_plain_command_goes_on_after_a_kill(bench: Bench, finished: Bench, whole_group: bool) -> None:
    shutil.rmtree(bench.results)
    first = bench.start(STANDIN_SECONDS="0.3")
    bench.wait_for("reduce s03")
    if whole_group:
        os.killpg(first.pid, signal.SIGKILL)
    else:
        first.kill()  # its jobs outlive it
    first.communicate(timeout=60)
    assert not (bench.results / "particles.csv").exists()
    assert bench.motescale("verify", str(bench.results)).stderr.startswith(f"{bench.results}: there is no finished run")
    bench.calls.write_text("")
    ran = bench.run()
    good(ran)
    assert len(bench.done) < 2 * len(SESSIONS)  # what was finished is not done again
    assert contents(bench.results) == contents(finished.results)
    assert not list(bench.results.rglob("*.part"))


def test_failed_job_names_the_session_and_the_rest_is_kept(bench: Bench) -> None:
    module = bench.program / "reduction" / "session.py"
    text = module.read_text()
    module.write_text(
        text.replace("def reduce_session(campaign, session, logs):\n", "def reduce_session(campaign, session, logs):\n"
        "    if session == 's02':\n        raise ZeroDivisionError('no charge')\n")
    )  # fmt: skip
    ran = bench.run("--keep-going")
    assert ran.returncode == 1
    assert "stopped by ZeroDivisionError: no charge" in ran.stdout
    assert "Traceback" not in ran.stdout
    logs = list((bench.results / ".motescale" / "logs").glob("reduce-*.log"))
    assert any("ZeroDivisionError" in log.read_text() for log in logs)
    module.write_text(text)
    good(bench.run())
    assert bench.done == []  # the records of the program as it was are all still there


def test_input_edited_while_it_is_read_is_noticed(bench: Bench) -> None:
    path = bench.campaign / "sessions" / "s03" / "balance.csv"
    edit(path, "particle,balance_voltage_V\n1,9\n")
    going = bench.start(STANDIN_SECONDS="3")
    bench.wait_for("reduce s03")
    edit(path, "particle,balance_voltage_V\n1,99999\n")
    out, _ = going.communicate(timeout=120)
    assert going.returncode == 1
    assert "edited while the run was going on: s03" in out
    good(bench.run())
    assert bench.done == ["draw s03", "reduce s03"]


def test_modules_in_the_results_folder_are_not_imported(bench: Bench) -> None:
    shutil.rmtree(bench.results / ".motescale")
    for name in ("pandas.py", "json.py", "reduction.py"):
        (bench.results / name).write_text("raise SystemExit('the wrong module')")
    good(bench.run())
    good(bench.motescale("run", str(bench.campaign), str(bench.results)))


def test_installed_copy_that_differs_is_refused(bench: Bench, tmp_path: Path) -> None:
    installed = tmp_path / "installed"
    shutil.copytree(bench.program, installed)
    shutil.rmtree(bench.program / "motescale-0.dist-info")
    with open(installed / "reduction" / "drag.py", "a") as module:
        module.write("# another\n")
    ran = bench.finish(bench.plain(), PYTHONPATH=str(installed))
    assert ran.returncode == 1
    assert "differ. Install this one again" in ran.stderr


def test_results_that_are_a_file_are_refused(bench: Bench) -> None:
    file = bench.results.with_name("a file")
    file.write_text("mine")
    ran = bench.run(results=str(file))
    assert ran.returncode == 1
    assert "cannot be written to" in ran.stderr
    assert file.read_text() == "mine"


def test_command_gives_the_same_bytes_and_tells_how_far_it_is(bench: Bench, finished: Bench) -> None:
    other = bench.results.with_name("by command")
    ran = bench.motescale("run", str(bench.campaign), str(other), "--cores", "1")
    good(ran)
    assert contents(other) == contents(finished.results)
    assert "reduce: 12 of 12 sessions reduced" in ran.stdout
    assert "session_reports: 12 of 12 session reports drawn" in ran.stdout
    assert "First finished run in this folder: 12 particles." in ran.stdout
    assert ran.stderr == ""


def test_command_ends_with_what_moved_and_why(bench: Bench) -> None:
    quiet = bench.motescale("run", "--quiet", str(bench.campaign), str(bench.results))
    good(quiet)
    assert quiet.stdout == ""
    path = bench.campaign / "sessions" / "s03" / "balance.csv"
    before = len(path.read_text())  # the stand-in's number, with u = 0.5
    path.write_text("particle,balance_voltage_V\n1,s03\n")
    ran = bench.motescale("run", str(bench.campaign), str(bench.results))
    good(ran)
    assert f"s03 1, charge-to-mass ratio: {before} -> {before - 6} (-12 u)" in ran.stdout
    assert "file edited sessions/s03/balance.csv" in ran.stdout
    assert "Since the last run 1 numbers of 1 particles moved" in ran.stdout
    assert "no number moved" in bench.motescale("run", str(bench.campaign), str(bench.results)).stdout


@pytest.mark.parametrize("number", [signal.SIGINT, signal.SIGTERM])
def test_command_that_is_interrupted_ends_its_workflow_and_goes_on_later(
    bench: Bench, finished: Bench, number: signal.Signals
) -> None:
    shutil.rmtree(bench.results)
    bench.calls.write_text("")
    command = [sys.executable, "-m", "reduction.command", "run", str(bench.campaign), str(bench.results)]
    where = {"PYTHONPATH": str(bench.program), "PYTHONSAFEPATH": "1", "STANDIN_SECONDS": "0.3"}
    going = subprocess.Popen(
        command,
        env=bench.environment | where,
        cwd=bench.campaign.parent,
        stdout=subprocess.PIPE,
        stderr=subprocess.PIPE,
        text=True,
        preexec_fn=lambda: signal.signal(number, signal.SIG_DFL),
    )  # fmt: skip - a shell's background jobs, the tests maybe among them, ignore interrupts
    bench.wait_for("reduce s03")
    going.send_signal(number)
    _, error = going.communicate(timeout=60)
    assert going.returncode == 130
    assert "the same command goes on from there" in error
    assert "Traceback" not in error
    good(bench.motescale("run", str(bench.campaign), str(bench.results)))
    assert contents(bench.results) == contents(finished.results)


def test_command_passes_on_what_the_workflow_refuses(bench: Bench, tmp_path: Path) -> None:
    (bench.campaign / "sessions" / "s05" / "balance.csv").write_text("particle,balance_voltage_V\n1,wrong\n")
    for loudness in ([], ["--quiet"]):
        ran = bench.motescale("run", *loudness, str(bench.campaign), str(bench.results))
        assert ran.returncode == 1
        assert "expected a number" in ran.stdout + ran.stderr
    other = campaign(tmp_path / "other", 1)
    (other / "sessions" / "s01" / "balance.csv").write_text("particle,balance_voltage_V\n7,7\n")
    ran = bench.motescale("run", str(other), str(bench.results))
    assert ran.returncode == 1
    assert "results of another campaign" in ran.stderr
    assert "Traceback" not in ran.stderr


def test_lint_remarks_on_nothing_but_environments(bench: Bench) -> None:
    ran = subprocess.run(
        [sys.executable, "-m", "snakemake", "--snakefile", str(bench.program / "Snakefile"), "--lint", "--config",
         f"campaign={bench.campaign}", f"results={bench.results}"],
        capture_output=True, text=True, check=False, env=bench.environment, cwd=bench.campaign.parent,
    )  # fmt: skip
    remarks = [line.strip() for line in (ran.stdout + ran.stderr).splitlines() if line.startswith("    * ")]
    rules = sum((ROOT / "workflow" / "rules" / name).read_text().count("\nrule ") for name in RULES)
    # the environment is the one the program is installed in, pinned by .locks/requirements.lock
    assert remarks == rules * ["* Specify a conda environment or container for each rule.:"]


@pytest.fixture(scope="module")
def example(tmp_path_factory: pytest.TempPathFactory) -> Bench:
    """Results of the example, computed by a copy of the real program."""
    folder = tmp_path_factory.mktemp("example")
    program = checkout(folder / "program", real=True)
    shutil.copytree(ROOT / "data_example", program / "data_example")
    bench = Bench(program, program / "data_example", folder / "results")
    good(bench.run())
    return bench


def test_example_runs_to_its_reports(example: Bench) -> None:
    sessions = sorted(path.name for path in (ROOT / "data_example" / "sessions").iterdir())
    results = example.results
    assert sorted(path.stem for path in (results / "sessions").glob("*.pdf")) == sessions
    assert sorted(path.stem for path in (results / "readings").glob("*.csv")) == sessions
    for path in [results / "report.pdf", *(results / "sessions").glob("*.pdf")]:
        assert path.read_bytes().startswith(b"%PDF-")
    for name in TABLES:
        head, *rows = (results / name).read_text().splitlines()
        assert head == ",".join(COLUMNS[name.removesuffix(".csv")])
        assert rows


def test_every_file_that_the_page_of_the_example_leads_to_is_there(example: Bench) -> None:
    page = (example.results / "report.html").read_text(encoding="utf-8")
    links = {unquote(link) for link in re.findall(r'href="([^"#]+)"', page)}
    assert {"report.pdf", "particles.csv", "sessions/s001.pdf", "readings/s001.csv", "figures/comparison.csv"} <= links
    assert [link for link in sorted(links) if not (example.results / link).is_file()] == []


def test_report_of_the_workflow_itself_is_made_without_a_network(example: Bench, tmp_path: Path) -> None:
    nowhere = "http://127.0.0.1:9"  # the discard port: nothing listens, and what asks for the network fails
    out = tmp_path / "how it was made.html"
    proxies = {name: nowhere for name in ("http_proxy", "https_proxy", "HTTP_PROXY", "HTTPS_PROXY", "ALL_PROXY")}
    good(example.finish(example.plain("--report", str(out)), **proxies))
    text = out.read_text(encoding="utf-8")
    for word in ("report.pdf", "particles.csv", "comparison.csv", "result by group with its interval",
                 "One row per particle", "mean of the session means", "session_reports"):  # fmt: skip
        assert word in text, word
    assert "Nothing to be done" in example.run("--dry-run").stdout


def test_example_is_compared_as_a_direct_call_of_the_library_compares(example: Bench) -> None:
    results = example.results
    records = (results / ".motescale" / "records").glob("*/*/session.json")
    facts = {path.parent.parent.name: read_json(path) for path in records}
    particles, components = (read_table(results / f"{name}.csv") for name in ("particles", "components"))
    found = comparison.compare(particles, components, facts, quantity="surface_charge_density", by="charged_with")
    for name, columns, rows in (
        ("comparison", comparison.comparison_columns(found), comparison.comparison_rows(found)),
        ("contrasts", comparison.contrast_columns(), comparison.contrast_rows(found)),
        ("trends", comparison.COLUMNS["trends"], comparison.trend_rows(found)),
    ):
        text = (results / f"{name}.csv").read_text()
        assert text == table_text(columns, rows)
        assert text.startswith(",".join(COLUMNS.get(name, ())))
    groups = read_table(results / "comparison.csv")
    assert groups["group"].tolist() == ["PTFE", "glass", "nylon", "wool"]
    assert groups["rank_1"].sum() == pytest.approx(1.0)
    assert len(read_table(results / "contrasts.csv")) == 6
    assert read_table(results / "charge_summary.csv")["lost"].sum() == 2  # the example's lost.csv
    assert read_table(results / "histogram.csv")["count"].sum() == len(read_table(results / "charge_distribution.csv"))


def test_example_has_one_row_for_each_shared_input(example: Bench) -> None:
    with open(example.results / "inputs.csv", encoding="utf-8", newline="") as handle:
        names = [row["input"] for row in csv.DictReader(handle)]
    assert len(names) == len(set(names))


def test_example_gives_the_same_bytes_again_and_names_no_place_or_person(example: Bench) -> None:
    other = example.results.with_name("again")
    moved = shutil.copytree(example.campaign, example.results.with_name("moved"))
    command = [sys.executable, "-m", "reduction.command", "run", str(moved), str(other), "--cores", "1"]
    where = {"PYTHONPATH": str(example.program), "PYTHONSAFEPATH": "1"}
    good(example.finish(command, **where, TZ="Asia/Tokyo", LC_ALL="C"))
    first, second = contents(example.results), contents(other)
    assert list(first) == list(second)
    assert [name for name in first if first[name] != second[name]] == []
    assert verification(other, example.campaign)[1]
    assert [name for name in first if kind_of(name) is None] == [SUMS]  # every kind of file is told in resultfiles
    told = [str(example.results.parent), str(ROOT), os.uname().nodename, f"{Path.home()}/"]
    for name, data in first.items():
        assert not [word for word in told if len(word) > 3 and word.encode() in data], name


def test_example_with_its_sessions_adjusted_together_runs_through(example: Bench) -> None:
    together = shutil.copytree(example.campaign, example.results.with_name("together"))
    settings = together / "campaign.yaml"
    settings.write_text(settings.read_text() + "\nadjust: campaign\n")
    assert "adjust:" not in (example.campaign / "campaign.yaml").read_text()
    results = example.results.with_name("together results")
    good(example.run(campaign=str(together), results=str(results)))
    first, second = contents(example.results), contents(results)
    assert list(first) == list(second)
    assert first["particles.csv"] != second["particles.csv"]
