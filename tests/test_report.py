"""The PDFs: the numbers of the record in words a reader meets, archival and tagged, the same bytes every time."""

from __future__ import annotations

import hashlib
import json
import math
import os
import re
import shutil
import subprocess
import sys
from pathlib import Path

import pytest
from fake_record import write_record

from reduction import comparisonpages, comparisonreport, figurestyle, report
from reduction.comparisontables import write_comparison
from reduction.quantity import shorthand
from reduction.records import PIECES
from reduction.sheets import rows_of
from reduction.tables import read_table, write_table
from reduction.typeset import MINUS
from reduction.wholefile import read_json

DIGEST = "0123456789abcdef" * 4
POPPLER = [tool for tool in ("pdfinfo", "pdffonts", "pdftotext") if shutil.which(tool) is None]
needs_poppler = pytest.mark.skipif(bool(POPPLER), reason=f"poppler-utils is not installed: no {', '.join(POPPLER)}")
HOSTILE = {
    "markup": '#import "x.typ": * #panic("ran") $x$ [a] _b_ *c* `d` @e <f> \\ // g /* h',
    "script": "<script>alert(1)</script> & &amp; <b>",
    "right_to_left": "מסה של חלקיק · كتلة الجسيم",
    "other_letters": "张伟 измерил Ωμ²⁻¹ naïve ﬁ",
    "controls": "bell\x07 escape\x1b[31m turned\u202etxt\ufeff private\ue000 none\uffff",
}
LONG = "x" * 3000 + " " + "long words and short ones " * 40


def text_of(pdf: Path, *, keep_lines: bool = False) -> str:
    """Text of a PDF without the marks that only allow or ask for a line break."""
    raw = subprocess.run(["pdftotext", "-layout", str(pdf), "-"], capture_output=True, check=True).stdout.decode()
    bare = raw.replace("\u200b", "").replace("\u202f", " ")
    return bare if keep_lines else " ".join(bare.split())


def info_of(pdf: Path) -> dict[str, str]:
    raw = subprocess.run(["pdfinfo", str(pdf)], capture_output=True, check=True).stdout.decode()
    return {key.strip(): value.strip() for key, _, value in (line.partition(":") for line in raw.splitlines())}


def campaign(base: Path, **changes: object) -> tuple[Path, dict[str, Path]]:
    """Make a results folder of four sessions of two groups, and one more group of a single session."""
    groups = ("ptfe", "ptfe", "glass", "glass", "nylon")
    folders = {}
    for k, group in enumerate(groups):
        name = f"s{k + 1:03d}"
        folders[name] = write_record(base / "records" / name, name, particles=4, seed=k, date=f"2026-03-{k + 1:02d}",
                                     charged_with=str(changes.get("group", group)) if k == 0 else group,
                                     sign=-1 if group == "ptfe" else 1)  # fmt: skip
    results = base / "results"
    results.mkdir()
    for piece in PIECES:
        frames = [read_table(folder / f"{piece}.csv") for folder in folders.values()]
        listed = [row for frame in frames for row in rows_of(frame)]
        if piece != "readings":
            write_table(results / f"{piece}.csv", frames[0].columns.tolist(), listed)
    run = {
        "digest": DIGEST, "inputs": {"campaign.yaml": DIGEST}, "left_out": {"s099": "the powder was spilled"},
        "package": "f" * 64, "seed": 1, "settings": {"title": changes.get("title", "Made-up powders"),
        "adjust": "session", "compare": {"quantity": "charge_to_mass", "by": "charged_with"},
        "coverage_probability": 0.95, "seed": 1, "monte_carlo_trials": 4000}, "versions": {"numpy": "2.4.6"},
    }  # fmt: skip
    facts = {name: read_json(folder / "session.json") for name, folder in folders.items()}
    write_comparison(results, facts, run["settings"])
    (results / "run.json").write_text(json.dumps(run), encoding="utf-8")
    return results, folders


@pytest.fixture(scope="module")
def session(tmp_path_factory: pytest.TempPathFactory) -> tuple[Path, Path]:
    folder = write_record(tmp_path_factory.mktemp("record"), particles=5)
    out = folder / "session.pdf"
    report.session_pdf(folder, out, digest=DIGEST, title="Made-up powders, spring run")
    return folder, out


@pytest.fixture(scope="module")
def whole(tmp_path_factory: pytest.TempPathFactory) -> tuple[Path, Path]:
    base = tmp_path_factory.mktemp("campaign")
    results, folders = campaign(base)
    report.campaign_pdf(results, folders, results / "report.pdf", digest=DIGEST)
    return results, results / "report.pdf"


@needs_poppler
def test_session_report_prints_every_charge_to_mass_ratio_by_the_one_rounding_rule(session: tuple[Path, Path]) -> None:
    folder, pdf = session
    text = text_of(pdf)
    particles = rows_of(read_table(folder / "particles.csv"))
    measured = [p for p in particles if math.isfinite(p["charge_to_mass_C_per_kg"])]
    assert len(measured) == 4
    for p in measured:
        printed = shorthand(1e3 * p["charge_to_mass_C_per_kg"], 1e3 * p["u_charge_to_mass_C_per_kg"])
        assert printed.replace("-", MINUS) in text, p["particle"]
        assert shorthand(p["diameter_um"], p["u_diameter_um"]) in text, p["particle"]


@needs_poppler
def test_session_report_names_all_that_was_left_out_and_flagged(session: tuple[Path, Path]) -> None:
    text = text_of(session[1])
    assert "touched the ring" in text
    assert "4.6 standard deviations from the fit" in text
    assert "a reading lies more than 4 standard deviations from its method's fit; it is kept" in text
    assert "excluded" in text
    assert "Made-up powders, spring run" in text


@needs_poppler
def test_session_report_has_budget_inputs_exact_ones_and_cautions(session: tuple[Path, Path]) -> None:
    text = text_of(session[1])
    for words in ("Sensitivity", "Component", "Share", "dc field per volt, trap ring-a", "own readings, part 1",
                  "Inputs taken as exact", "offset, dc voltage V", "Kilovolts can injure or kill",
                  "Laser light can blind", "can burn, explode as a cloud, and be inhaled",
                  "Local rules and qualified staff come first", DIGEST, "page 1 of"):  # fmt: skip
        assert words in text, words


@needs_poppler
@pytest.mark.parametrize("kind", ["session", "whole", "failed"])
def test_reports_are_tagged_archival_titled_and_carry_their_fonts(
    kind: str, request: pytest.FixtureRequest, tmp_path: Path
) -> None:
    if kind == "failed":
        pdf = tmp_path / "s009.pdf"
        report.failed_session_pdf("s009", "sessions/s009/height.csv line 3: found abc.", pdf, digest=DIGEST)
        assert info_of(pdf)["Pages"] == "1"
    else:
        pdf = request.getfixturevalue(kind)[1]
    info = info_of(pdf)
    assert info["Tagged"] == "yes"
    assert info["Page size"].endswith("(A4)")
    assert {"session": "Session s001", "whole": "Made-up powders", "failed": "Session s009"}[kind] in info["Title"]
    assert info["JavaScript"] == "no"
    assert "Author" not in info or not info["Author"]
    raw = pdf.read_bytes()
    for mark in (b"<pdfaid:part>2</pdfaid:part>", b"<pdfaid:conformance>A<", b"<pdfuaid:part>1<", b"<rdf:li>en-GB<"):
        assert mark in raw, mark
    fonts = subprocess.run(["pdffonts", str(pdf)], capture_output=True, check=True).stdout.decode().splitlines()[2:]
    assert len(fonts) >= 2
    for line in fonts:
        assert re.search(r"\s(yes)\s+(yes)\s+(yes)\s+\d+\s+\d+$", line), line


@needs_poppler
def test_campaign_report_has_an_outline_and_leads_to_the_files_beside_it(whole: tuple[Path, Path]) -> None:
    command = ["pdftohtml", "-xml", "-i", "-stdout", str(whole[1])]
    raw = subprocess.run(command, capture_output=True, check=True).stdout.decode()
    outline = re.findall(r'<item page="\d+">(.*?)</item>', raw)
    assert outline[:3] == ["Result by group", "What to trust", "What was left out, and why"]
    assert outline[-1] == "Cautions"
    assert {"Particles", "Charge in electrons", "What limits the result", "Provenance"} <= set(outline)
    links = subprocess.run(["pdfinfo", "-url", str(whole[1])], capture_output=True, check=True).stdout.decode()
    for file in ("sessions/s001.pdf", "readings/s005.csv", "figures/comparison.csv", "contrasts.csv", "run.json"):
        assert re.search(rf"\s{re.escape(file)}$", links, re.MULTILINE), file
    assert "://" not in links


@needs_poppler
def test_campaign_report_splits_u_by_scope(whole: tuple[Path, Path]) -> None:
    """Shares of the made-up budget are the squares of its weights, equal for every particle and result."""
    text = text_of(whole[1], keep_lines=True)
    budget = rows_of(read_table(whole[0] / "budget.csv"))
    own = [r for r in budget if (r["session"], r["particle"], r["result"]) == ("s001", "p01", "charge")]
    expected = {scope: sum(r["share"] for r in own if r["input"].startswith(f"{scope}/"))
                for scope in ("particle", "session", "trap", "species", "campaign")}  # fmt: skip
    assert sum(expected.values()) == pytest.approx(1.0)
    table = text[text.index("What limits the result") :]
    line = next(row for row in table.splitlines() if re.match(r"\s*Charge\s", row))
    printed = [float(word) for word in re.findall(r"\d+\.\d$|\d+\.\d(?= )", line)][-5:]
    assert printed == [round(100 * share, 1) for share in expected.values()]


@needs_poppler
def test_pages_say_nothing_of_folder_clock_or_user(session: tuple[Path, Path]) -> None:
    folder, pdf = session
    assert str(folder).encode() not in pdf.read_bytes()
    assert info_of(pdf)["CreationDate"].startswith("Thu Jan  1")
    assert "1970" in info_of(pdf)["CreationDate"]


def test_same_record_gives_the_same_bytes_in_another_process_folder_and_time_zone(
    session: tuple[Path, Path], tmp_path: Path
) -> None:
    copy = tmp_path / "another place"
    shutil.copytree(session[0], copy, ignore=shutil.ignore_patterns("figures", "*.pdf"))
    call = ("from pathlib import Path; from reduction import report; "
            f"report.session_pdf(Path({str(copy)!r}), Path('x.pdf'), digest={DIGEST!r}, "
            "title='Made-up powders, spring run')")  # fmt: skip
    root = Path(report.__file__).resolve().parent.parent
    away = {**os.environ, "TZ": "Pacific/Kiritimati", "PYTHONHASHSEED": "77", "LC_ALL": "C", "HOME": str(tmp_path),
            "PYTHONPATH": str(root), "MPLCONFIGDIR": str(tmp_path)}  # fmt: skip
    subprocess.run([sys.executable, "-c", call], check=True, cwd=tmp_path, env=away)
    assert (tmp_path / "x.pdf").read_bytes() == session[1].read_bytes()
    assert (copy / "figures/particles.csv").read_bytes() == (session[0] / "figures/particles.csv").read_bytes()


def test_same_results_give_the_same_campaign_bytes(whole: tuple[Path, Path], tmp_path: Path) -> None:
    results, folders = campaign(tmp_path)
    backwards = dict(reversed(folders.items()))
    report.campaign_pdf(results, backwards, tmp_path / "again.pdf", digest=DIGEST)
    digests = [hashlib.sha256(path.read_bytes()).hexdigest() for path in (tmp_path / "again.pdf", whole[1])]
    assert digests[0] == digests[1]


def test_numbers_drawn_stand_in_a_table_beside_the_record(session: tuple[Path, Path]) -> None:
    twin = read_table(session[0] / "figures" / "particles.csv")
    readings = read_table(session[0] / "readings.csv")
    drawn = twin[(twin["panel"] == "height") & (twin["kind"] == "reading")]
    assert drawn["y"].tolist() == readings[readings["log"] == "height"]["height_mm"].tolist()


@needs_poppler
def test_text_from_outside_stands_there_literally(tmp_path: Path) -> None:
    notes = " | ".join(HOSTILE.values())
    folder = write_record(tmp_path / "rec", particles=2, notes=notes, operator=HOSTILE["right_to_left"],
                          charged_with="$x$ <b>", reason=HOSTILE["markup"])  # fmt: skip
    report.session_pdf(folder, tmp_path / "s.pdf", digest=DIGEST)
    text = text_of(tmp_path / "s.pdf")
    for word in ('#import "x.typ": *', '#panic("ran")', "$x$", "_b_", "*c*", "`d`", "@e", "<f>", "/* h",
                 "<script>alert(1)</script>", "&amp;", "张伟", "измерил"):  # fmt: skip
        assert word in text, word
    for mark in ("bell[U+0007]", "[U+001B][31m", "turned[U+202E]txt", "[U+FEFF]", "private[U+E000]", "none[U+FFFF]"):
        assert mark in text, mark
    assert set("מסהשלחלקיק") <= set(text)
    assert set("كتلة") <= set(text)


@needs_poppler
def test_campaign_report_takes_hostile_names_and_titles_as_text(tmp_path: Path) -> None:
    results, folders = campaign(tmp_path, group='$x$ #import "a" \u202e<script>\x07張', title=HOSTILE["markup"])
    report.campaign_pdf(results, folders, tmp_path / "c.pdf", digest=DIGEST)
    text = text_of(tmp_path / "c.pdf")
    assert '#panic("ran") $x$ [a] _b_' in text
    assert text.count('$x$ #import "a" [U+202E]<script>') >= 2  # in the table of results and in that of particles
    assert "[U+0007]張" in text


ODD = {
    "decomposed": "nai\u0308ve x\u0301\u0323y",
    "pointed": "שָׁלוֹם مُحَمَّد",
    "far": "हिन्दी ภาษาไทย ខ្មែរ 張 か\u3099 〔〕",
    "signs": "👩‍🔬 🏳️‍🌈 🇩🇪 ☎️ ✨ 🏼 a\u20dd \u3164 a\u2028b",
}


@needs_poppler
@pytest.mark.parametrize("kind", ODD)
def test_letters_no_face_has_stop_no_report(kind: str, tmp_path: Path) -> None:
    results, folders = campaign(tmp_path, group=ODD[kind], title=ODD[kind])
    report.campaign_pages(results, folders, digest=DIGEST)
    assert words_outside(results / "report.pdf") == []
    record = write_record(tmp_path / "rec", charged_with=ODD[kind], operator=ODD[kind], notes=ODD[kind])
    report.session_pdf(record, tmp_path / "s.pdf", digest=DIGEST, title=ODD[kind])
    report.failed_session_pdf("s009", ODD[kind], tmp_path / "f.pdf", digest=DIGEST)
    for pdf in (tmp_path / "s.pdf", tmp_path / "f.pdf"):
        assert words_outside(pdf) == []
    if kind == "signs":
        assert "[U+20DD]" in text_of(tmp_path / "f.pdf")


def words_outside(pdf: Path, margin: float = 30.0) -> list[str]:
    """Words of a PDF whose boxes reach closer to the edge of the paper than the page's margin allows [pt]."""
    raw = subprocess.run(["pdftotext", "-bbox", str(pdf), "-"], capture_output=True, check=True).stdout.decode()
    width, height = 595.276, 841.89
    out = []
    for x0, y0, x1, y1, word in re.findall(
        r'<word xMin="([-\d.]+)" yMin="([-\d.]+)" xMax="([-\d.]+)" yMax="([-\d.]+)">(.*?)</word>', raw
    ):
        if float(x0) < margin or float(x1) > width - margin or float(y0) < margin or float(y1) > height - margin:
            out.append(word)
    return out


@needs_poppler
def test_nothing_overflows_the_page_however_long_the_text(tmp_path: Path, session: tuple[Path, Path]) -> None:
    ids = ["p" + "0123456789-_" * 5 + "abc", "q" * 64, "r01"]
    folder = write_record(tmp_path / "rec", "s" * 64, ids=ids, notes=LONG, operator="o" * 400, reason="r" * 500,
                          charged_with="c" * 200, species="k" * 64)  # fmt: skip
    report.session_pdf(folder, tmp_path / "s.pdf", digest=DIGEST)
    assert words_outside(tmp_path / "s.pdf") == []
    assert words_outside(session[1]) == []
    text = re.sub(r"\s", "", text_of(tmp_path / "s.pdf"))
    assert sum(len(run) for run in re.findall(r"x{20,}", text)) == 3000  # of several pages, the foot of one between


@needs_poppler
@pytest.mark.parametrize(("group", "title"), [
    ("g" * 120, "t" * 3000),
    (HOSTILE["right_to_left"] * 4, HOSTILE["right_to_left"] * 2),
    (HOSTILE["other_letters"] * 3, HOSTILE["controls"] * 8),
    ("W" * 30 + "\u0301\u0323" * 40, LONG),
])  # fmt: skip
def test_nothing_overflows_the_page_of_a_campaign(tmp_path: Path, group: str, title: str) -> None:
    results, folders = campaign(tmp_path, group=group, title=title)
    report.campaign_pdf(results, folders, tmp_path / "c.pdf", digest=DIGEST)
    assert words_outside(tmp_path / "c.pdf") == []
    first = subprocess.run(["pdftotext", "-l", "1", str(tmp_path / "c.pdf"), "-"], capture_output=True, check=True)
    assert "Result by group" in first.stdout.decode()  # however long the title


@needs_poppler
@pytest.mark.parametrize("kind", ["session", "whole", "failed"])
def test_nothing_overflows_a_page_of_any_kind(kind: str, request: pytest.FixtureRequest, tmp_path: Path) -> None:
    pdf = tmp_path / "s009.pdf"
    if kind == "failed":
        report.failed_session_pdf("s" * 64, "x" * 3000 + "\n" + HOSTILE["right_to_left"] * 20, pdf, digest=DIGEST)
    else:
        pdf = request.getfixturevalue(kind)[1]
    assert words_outside(pdf) == []


@needs_poppler
def test_a_title_too_long_for_the_first_page_stands_whole_among_the_settings(tmp_path: Path) -> None:
    title = " ".join(f"word{k}" for k in range(200))
    results, folders = campaign(tmp_path, title=title)
    report.campaign_pdf(results, folders, tmp_path / "c.pdf", digest=DIGEST)
    assert "word199" in text_of(tmp_path / "c.pdf")


@needs_poppler
def test_campaign_report_answers_on_its_first_page(whole: tuple[Path, Path]) -> None:
    raw = subprocess.run(["pdftotext", "-layout", "-l", "1", str(whole[1]), "-"], capture_output=True, check=True)
    text = " ".join(raw.stdout.decode().replace("\u200b", "").split())
    for words in ("Result by group", "glass", "ptfe", "95 % interval", "one session only", "What to trust",
                  "nylon: one session, described and not tested", "Rank", "The session is the unit",
                  "Session s099 the powder was spilled", "Methods agree in"):  # fmt: skip
        assert words in text, words


@needs_poppler
def test_campaign_report_prints_the_mean_of_session_means(whole: tuple[Path, Path]) -> None:
    particles = rows_of(read_table(whole[0] / "particles.csv"))
    for group in ("glass", "ptfe"):
        own = [p for p in particles if p["charged_with"] == group and math.isfinite(p["charge_to_mass_C_per_kg"])]
        sessions = sorted({p["session"] for p in own})
        means = []
        for name in sessions:
            values = [p["charge_to_mass_C_per_kg"] for p in own if p["session"] == name]
            means.append(sum(values) / len(values))
        mean = 1e3 * sum(means) / len(means)
        rows = [row for row in text_of(whole[1], keep_lines=True).splitlines() if row.strip().startswith(group)]
        printed = next(filter(None, (re.search(r"([−\d.]+)\((\d+)\)", row) for row in rows)), None)
        assert printed is not None
        decimals = len(printed[1].partition(".")[2])
        assert float(printed[1].replace(MINUS, "-")) == pytest.approx(mean, abs=0.51 * 10**-decimals)


@needs_poppler
def test_campaign_report_has_provenance_settings_and_cautions(whole: tuple[Path, Path]) -> None:
    text = text_of(whole[1])
    for words in ("Provenance", "f" * 64, "numpy 2.4.6", "Settings", "adjust session", "Kilovolts can injure or kill",
                  "Shared inputs before and after", "each session (5)", "Sessions in time"):  # fmt: skip
        assert words in text, words


@needs_poppler
def test_every_p_is_one_of_session_means(whole: tuple[Path, Path]) -> None:
    text = text_of(whole[1])
    contrasts = read_table(whole[0] / "contrasts.csv")
    trends = read_table(whole[0] / "trends.csv")
    known = {f"{p:.2g}" for p in [*contrasts["p_holm"], *trends["p_holm"]]}
    printed = re.findall(r"\bp = ([\d.]+)", text)
    assert set(printed) <= known
    # glass and ptfe have two sessions each: exchanging 2 of 4 gives 6 halves, 2 of them as far apart as can be
    assert contrasts["smallest_p"].min() == pytest.approx(1 / 3)
    assert "could reach no p below 0.33" in text


@needs_poppler
def test_comparison_pages_print_contrasts_ranks_trends_and_shares(whole: tuple[Path, Path]) -> None:
    text = text_of(whole[1])
    for words in ("Differences between groups", "glass less ptfe", "not tested", "Order of the groups",
                  "What session means go with", "relative humidity", "What would shrink the uncertainty most",
                  "u with twice", "Charge in electrons", "glass, lycopod"):  # fmt: skip
        assert words in text, words


def test_figures_say_in_words_what_they_show(whole: tuple[Path, Path]) -> None:
    results, _ = whole
    facts = {f"s{k:03d}": read_json(results.parent / "records" / f"s{k:03d}" / "session.json") for k in range(1, 6)}
    pages = comparisonpages.read_pages(results)
    particles = rows_of(read_table(results / "particles.csv"))
    with figurestyle.styled():
        made = comparisonreport.drawings(pages, particles, facts)
        charges = comparisonreport.charge_drawings(pages)
    (low,) = (row["low"] for row in pages.groups if row["group"] == "glass")
    assert f"interval {1e3 * low:.4g}".replace("-", MINUS) in made["comparison"].alt
    assert "glass less ptfe" in made["differences"].alt or "leave out zero: none" in made["differences"].alt
    assert "glass: rank 1" in made["ranks"].alt
    assert [name for name, _ in charges] == ["glass, lycopod", "nylon, lycopod", "ptfe, lycopod"]
    summary = {row["group"]: row for row in pages.rows["charge_summary"]}
    assert f"{int(summary['glass']['particles'])} particles in 2 sessions" in charges[0][1].alt
    assert "0 % positive" in charges[2][1].alt


def test_numbers_drawn_by_group_are_those_of_the_tables(whole: tuple[Path, Path]) -> None:
    twin = read_table(whole[0] / "figures" / "comparison.csv")
    particles = read_table(whole[0] / "particles.csv")
    drawn = sorted(twin[twin["kind"] == "particle"]["value"].tolist())
    known = particles["charge_to_mass_C_per_kg"].dropna()
    assert drawn == pytest.approx(sorted((1e3 * known).tolist()))
    means = read_table(whole[0] / "comparison.csv").set_index("group")["mean"]
    for row in twin[twin["kind"] == "group_mean"].to_dict("records"):
        assert row["value"] == pytest.approx(1e3 * means[row["group"]])


@needs_poppler
@pytest.mark.parametrize(("particles", "pages"), [(2, 5), (6, 7), (11, 8), (41, 20)])
def test_session_report_stays_short(tmp_path: Path, particles: int, pages: int) -> None:
    folder = write_record(tmp_path / "rec", particles=particles)
    report.session_pdf(folder, tmp_path / "s.pdf", digest=DIGEST)
    assert int(info_of(tmp_path / "s.pdf")["Pages"]) <= pages
    assert words_outside(tmp_path / "s.pdf") == []


@needs_poppler
def test_first_page_answers_what_came_out_whether_to_trust_it_and_what_limits_it(session: tuple[Path, Path]) -> None:
    raw = subprocess.run(["pdftotext", "-layout", "-l", "1", str(session[1]), "-"], capture_output=True, check=True)
    text = " ".join(raw.stdout.decode().replace("\u200b", "").split())
    for words in ("What came out", "5 particles: 4 measured and 1 excluded.", "Can I trust it?",
                  "chi-square is 131.4", "What limits it", "the trap constants make up", "Left out, flagged",
                  "read the cautions"):  # fmt: skip
        assert words in text, words


@needs_poppler
def test_long_particle_table_breaks_over_pages_with_its_head(tmp_path: Path) -> None:
    folder = write_record(tmp_path / "rec", particles=90, secular=False)
    for piece in ("readings", "agreement", "methods", "budget"):
        frame = read_table(folder / f"{piece}.csv")
        write_table(folder / f"{piece}.csv", frame.columns.tolist(), frame[frame["particle"] == "p01"])
    report.session_pdf(folder, tmp_path / "s.pdf", digest=DIGEST)
    pages = text_of(tmp_path / "s.pdf", keep_lines=True).split("\f")
    with_rows = [page for page in pages if re.search(r"^ *p\d\d +measured ", page, re.MULTILINE)]
    assert len(with_rows) >= 2
    for page in with_rows:
        assert re.search(r"Particle +State", page)


@needs_poppler
def test_failed_session_report_says_why_on_one_page(tmp_path: Path) -> None:
    faults = "sessions/s003/height.csv line 3, height_mm: found #panic(); expected a number. Write digits.\n" * 3
    report.failed_session_pdf("s003", faults, tmp_path / "s003.pdf", digest=DIGEST)
    text = text_of(tmp_path / "s003.pdf")
    assert "height_mm: found #panic(); expected a number. Write digits." in text
    assert "left out of the results" in text
    report.failed_session_pdf("s003", "no more than a line of this\n" * 4000, tmp_path / "long.pdf", digest=DIGEST)
    assert info_of(tmp_path / "long.pdf")["Pages"] == "1"
    assert "more" in text_of(tmp_path / "long.pdf")


@needs_poppler
def test_record_of_a_session_left_out_gives_the_page_that_says_why(tmp_path: Path) -> None:
    facts = {"session": "s004", "status": "left_out", "reason": "the camera slipped", "faults": ["the camera slipped"]}
    (tmp_path / "session.json").write_text(json.dumps(facts), encoding="utf-8")
    report.session_pdf(tmp_path, tmp_path / "s004.pdf", digest=DIGEST)
    assert "the camera slipped" in text_of(tmp_path / "s004.pdf")


@needs_poppler
def test_session_without_any_particle_still_has_a_report(tmp_path: Path) -> None:
    folder = write_record(tmp_path / "rec", particles=2)
    for piece in PIECES:
        frame = read_table(folder / f"{piece}.csv")
        write_table(folder / f"{piece}.csv", frame.columns.tolist(), frame.iloc[:0])
    report.session_pdf(folder, tmp_path / "s.pdf", digest=DIGEST)
    assert "No particle was recorded." in text_of(tmp_path / "s.pdf")


def test_broken_template_data_is_a_report_error(session: tuple[Path, Path], monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(report.sessionreport, "content", lambda *_, **__: ({"title": "x"}, []))
    with pytest.raises(report.ReportError, match="could not be set"):
        report.session_pdf(session[0], session[0] / "broken.pdf", digest=DIGEST)
    assert not (session[0] / "broken.pdf").exists()
