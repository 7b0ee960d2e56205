"""The campaign's report on a screen: the same words and numbers as on paper, closed to the outside, open to everybody.

The rules of accessibility checked here are those of WCAG 2.2 (W3C Recommendation): 1.4.3 contrast of text at least 4.5,
1.4.11 contrast of graphics at least 3, 1.4.10 no sideways scrolling of the page at 320 CSS pixels, 1.3.1 structure,
2.4.1 a way past the blocks, 2.4.7 visible focus, 3.1.1 language. Relative luminance and contrast by its definitions.
"""

from __future__ import annotations

import base64
import hashlib
import math
import re
from decimal import Decimal
from html.parser import HTMLParser
from pathlib import Path
from typing import Any

import pytest
from browser import Listener, ask, needs_browser, run
from test_comparisontables import few, told
from test_report import DIGEST, HOSTILE, LONG, campaign, needs_poppler, text_of

from reduction import campaignreport, figurestyle, places, report, webfigure, webpage
from reduction.sheets import rows_of
from reduction.tables import read_table
from reduction.typeset import MINUS, NONE

VOID = {"meta", "br", "wbr", "link", "img", "input", "hr"}
LATER = {"report.pdf", "run.json"} | {f"{part}/s{k:03d}.{end}" for k in range(1, 6)
                                      for part, end in (("sessions", "pdf"), ("readings", "csv"))}  # fmt: skip


class Tree(HTMLParser):
    """Elements of a page in order: (tag, attributes, text, tags of what they stand in)."""

    def __init__(self, html: str) -> None:
        super().__init__(convert_charrefs=True)
        self.elements: list[dict[str, Any]] = []
        self._open: list[dict[str, Any]] = []
        self.feed(html)
        self.close()
        assert not self._open, [one["tag"] for one in self._open]

    def handle_starttag(self, tag: str, attrs: list[tuple[str, str | None]]) -> None:
        names = [name for name, _ in attrs]
        assert len(names) == len(set(names)), f"{tag} has an attribute twice: {names}"
        one = {"tag": tag, "attrs": dict(attrs), "text": "", "inside": [up["tag"] for up in self._open]}
        self.elements.append(one)
        if tag not in VOID:
            self._open.append(one)
        elif tag == "br":
            self.handle_data("\n")

    def handle_startendtag(self, tag: str, attrs: list[tuple[str, str | None]]) -> None:
        self.handle_starttag(tag, attrs)
        if tag not in VOID:
            self._open.pop()

    def handle_endtag(self, tag: str) -> None:
        assert self._open, f"</{tag}> closes nothing"
        assert self._open[-1]["tag"] == tag, f"</{tag}> closes <{self._open[-1]['tag']}>"
        self._open.pop()

    def handle_data(self, data: str) -> None:
        for one in self._open:
            one["text"] += data

    def all(self, *tags: str) -> list[dict[str, Any]]:
        return [one for one in self.elements if one["tag"] in tags]


@pytest.fixture(scope="module")
def made(tmp_path_factory: pytest.TempPathFactory) -> Path:
    results, folders = campaign(tmp_path_factory.mktemp("page"))
    report.campaign_pages(results, folders, digest=DIGEST)
    return results


@pytest.fixture(scope="module")
def html(made: Path) -> str:
    return (made / "report.html").read_text(encoding="utf-8")


@pytest.fixture(scope="module")
def tree(html: str) -> Tree:
    return Tree(html)


@pytest.fixture(scope="module")
def hostile(tmp_path_factory: pytest.TempPathFactory) -> Path:
    base = tmp_path_factory.mktemp("hostile")
    group = f'{HOSTILE["script"]} "onload="alert(2) \' {HOSTILE["right_to_left"]} 12'
    results, folders = campaign(base, group=group, title=f"{HOSTILE['markup']} {HOSTILE['script']}")
    report.campaign_pages(results, folders, digest=DIGEST)
    return results / "report.html"


@pytest.fixture(scope="module")
def long(tmp_path_factory: pytest.TempPathFactory) -> Path:
    results, folders = campaign(tmp_path_factory.mktemp("long"), group="g" * 120, title=LONG[:2000])
    report.campaign_pages(results, folders, digest=DIGEST)
    return results / "report.html"


def words(text: str) -> set[str]:
    """Words and numbers of a text, without the marks that stand beside them."""
    return {word for raw in text.split() if (word := raw.strip(".,;:()[]/–"))}


# --- the same as on paper, and as in the tables


@needs_poppler
def test_every_value_with_its_uncertainty_is_the_one_on_paper(made: Path, tree: Tree) -> None:
    pattern = r"[−\d.]*\d\(\d+\)"
    printed = set(re.findall(pattern, text_of(made / "report.pdf")))
    on_screen = {one for cell in tree.all("td", "th", "li", "p") for one in re.findall(pattern, cell["text"])}
    assert len(printed) > 80
    assert on_screen == printed


@needs_poppler
def test_every_cell_of_every_table_stands_on_paper_too(made: Path, tree: Tree) -> None:
    printed = words(text_of(made / "report.pdf"))
    joined = re.sub(r"\s", "", text_of(made / "report.pdf"))
    cells = [one["text"] for one in tree.all("td", "th", "dd", "dt", "li", "h1", "h2", "h3", "figcaption")]
    missing = {word for cell in cells for word in words(cell.replace("\u202f", " ")) - printed if word not in joined}
    assert missing == {"Contents", "PDF"}  # of the way to the sections and to the printed report


@needs_poppler
def test_every_word_on_paper_stands_on_the_screen_too(made: Path, tree: Tree) -> None:
    shown = re.sub(r"\s", "", tree.all("body")[0]["text"]).casefold()
    printed = text_of(made / "report.pdf", keep_lines=True)
    before_formulas = printed[: printed.index("How the numbers come about")]
    lines = [line for line in before_formulas.splitlines() if DIGEST[:20] not in line]  # without the feet of the pages
    missing = {word for line in lines for word in words(line) if word.casefold() not in shown}
    assert {word for word in missing if not re.fullmatch(r"page|\d+", word)} == set()


def test_particles_on_the_screen_are_those_of_the_table(made: Path, tree: Tree) -> None:
    rows = {(p["session"], p["particle"]): p for p in rows_of(read_table(made / "particles.csv"))}
    html_rows = _table(tree, "Particles with their results")
    assert len(html_rows) == len(rows) == 20
    columns = {3: "charge_to_mass_C_per_kg", 4: "drag_rate_per_s", 5: "diameter_um", 6: "mass_kg", 7: "charge_e"}
    for cells in html_rows:
        own = rows[cells[0]["text"], cells[1]["text"]]
        for at, name in columns.items():
            value, u = own[name], own[f"u_{name}"]
            if not math.isfinite(value):
                assert (cells[at]["text"], cells[at]["attrs"]["data-sort"]) == (NONE, "")
                continue
            assert float(cells[at]["attrs"]["data-sort"]) == value
            found = re.fullmatch(r"(−?[\d.]+)\((\d+)\)", cells[at]["text"])
            assert found, cells[at]["text"]
            place = Decimal(found[1].replace(MINUS, "-")).as_tuple().exponent
            ratio = float(found[1].replace(MINUS, "-")) / value
            power = 10.0 ** round(math.log10(ratio))  # the power of ten in the head of the column
            unit = 10.0 ** int(place)
            assert float(found[1].replace(MINUS, "-")) == pytest.approx(value * power, abs=0.501 * unit)
            assert int(found[2]) * unit == pytest.approx(u * power, abs=0.501 * unit)


def _table(tree: Tree, caption: str) -> list[list[dict[str, Any]]]:
    """Body rows of the table of a caption."""
    at = next(k for k, one in enumerate(tree.elements) if one["tag"] == "caption" and one["text"] == caption)
    rows: list[list[dict[str, Any]]] = []
    for one in tree.elements[at:]:
        if one["tag"] == "table":
            break
        if one["tag"] == "tr" and "tbody" in one["inside"]:
            rows.append([])
        elif one["tag"] in ("td", "th") and "tbody" in one["inside"]:
            rows[-1].append(one)
    return rows


@needs_poppler
def test_headings_are_the_outline_of_the_printed_report(made: Path, tree: Tree) -> None:
    printed = text_of(made / "report.pdf")
    titles = [one["text"] for one in tree.all("h2", "h3") if "nav" not in one["inside"]]
    assert len(titles) > 15
    places_of = [printed.find(title) for title in titles]
    assert -1 not in places_of
    assert titles[0] == "Result by group"
    assert titles[-1] == "Cautions"


def test_formulas_are_read_aloud_as_on_paper() -> None:
    folder = places.workflow_folder() / "report"
    printed = re.findall(r'said\("([^"]+)"|^  "([^"]+)",$', (folder / "model.typ").read_text(encoding="utf-8"), re.M)
    shown = re.findall(r'alttext="([^"]+)"', (folder / "model.html").read_text(encoding="utf-8"))
    assert len(shown) > 12
    assert shown == [one or other for one, other in printed]


def test_words_between_the_formulas_are_those_on_paper() -> None:
    folder = places.workflow_folder() / "report"
    typed = (folder / "model.typ").read_text(encoding="utf-8").partition("\n\n")[2]
    typed = re.sub(r"#formula\(.*?\n\)\n|#said\(.*?\$.*?\$\)", " ", typed, flags=re.DOTALL)
    shown = re.sub(
        r"<math.*?</math>|<[^>]+>", " ", (folder / "model.html").read_text(encoding="utf-8"), flags=re.DOTALL
    )
    assert typed.split() == shown.split()


# --- every figure


def test_every_figure_has_its_words_its_counts_and_the_file_of_its_numbers(made: Path) -> None:
    folders = {path.name: path for path in sorted((made.parent / "records").iterdir())}
    doc, drawings = campaignreport.content(made, folders, digest=DIGEST)
    blocks = [one for part in doc["sections"] for one in part["blocks"] if one["kind"] == "figure"]
    names = [one["name"] for one in blocks]
    assert {"means", "comparison", "differences", "ranks", "trends", "agreement", "sessions_in_time"} <= set(names)
    assert set(drawings) <= set(names)
    assert len([name for name in names if name.startswith("charge-")]) == 3
    for one in blocks:
        figure = one["figure"]
        assert re.search(r"\d", figure["alt"]), one["name"]
        assert re.search(r"\d+ (particle|session|pair|comparison)", figure["caption"]), one["name"]
        assert figure["files"]
        for file in figure["files"]:
            assert len(read_table(made / file)) > 0, file
    alts = [one["figure"]["alt"] for one in blocks]
    assert len(set(alts)) == len(alts)


def test_alternative_texts_are_made_from_the_data(made: Path, tmp_path: Path) -> None:
    other, folders = campaign(tmp_path, group="glass")  # one session more of glass, one less of ptfe
    _, drawings = campaignreport.content(other, folders, digest=DIGEST)
    first = {path.name: path for path in sorted((made.parent / "records").iterdir())}
    _, before = campaignreport.content(made, first, digest=DIGEST)
    for name in ("comparison", "means", "ranks"):
        assert name not in drawings or drawings[name].alt != before[name].alt


def test_series_are_told_apart_in_grey_too() -> None:
    """A colour alone says nothing: marker and dash differ, and neighbours differ in luminance."""
    kinds = [figurestyle.series(k) for k in range(len(figurestyle.COLOURS))]
    assert len({marker for _, marker, _ in kinds}) == len(kinds)
    assert len({str(dash) for _, _, dash in kinds}) == len(kinds)
    grey = [luminance(colour) for colour, _, _ in kinds]
    for one, other in zip(grey, grey[1:], strict=False):
        assert abs(one - other) > 0.02


# --- closed to the outside


def test_same_results_give_the_same_page(made: Path, html: str, tmp_path: Path) -> None:
    results, folders = campaign(tmp_path / "another place")
    report.campaign_pages(results, dict(reversed(folders.items())), digest=DIGEST)
    assert (results / "report.html").read_text(encoding="utf-8") == html
    assert str(made.parent) not in html


def test_policy_names_the_one_style_and_the_one_script_by_their_content(tree: Tree) -> None:
    (policy,) = (one["attrs"]["content"] for one in tree.all("meta")
                 if one["attrs"].get("http-equiv") == "Content-Security-Policy")  # fmt: skip
    for tag in ("style", "script"):
        (one,) = tree.all(tag)
        digest = base64.b64encode(hashlib.sha256(one["text"].encode()).digest()).decode()
        assert f"{tag}-src 'sha256-{digest}'" in policy
    assert policy.startswith("default-src 'none';")
    assert "unsafe" not in policy
    assert "base-uri 'none'; form-action 'none'" in policy


def test_page_asks_for_nothing_and_leads_to_files_beside_it_only(made: Path, html: str, tree: Tree) -> None:
    for one in tree.elements:
        for name, value in one["attrs"].items():
            assert name != "style"
            assert not name.startswith("on")
            if name in ("src", "srcset", "data", "poster", "action"):
                pytest.fail(f"{one['tag']} {name}={value}")
            if name == "href" and not str(value).startswith("#"):
                assert value in LATER or (made / str(value)).is_file(), value
                assert not re.match(r"[a-z]+:|/", str(value)), value
    assert not re.search(r"https?://", html)
    assert set(re.findall(r"url\(([^)]{5})", html)) <= {"data:"} | {
        found[:5] for found in re.findall(r"url\((#[^)]+)\)", html)
    }


def test_links_within_the_page_arrive(tree: Tree) -> None:
    names = [one["attrs"]["id"] for one in tree.elements if "id" in one["attrs"]]
    assert len(names) == len(set(names))
    for one in tree.elements:
        for key in ("href", "aria-labelledby", "clip-path"):
            value = str(one["attrs"].get(key, ""))
            for target in re.findall(r"#([^)]+)", value) if key != "aria-labelledby" else value.split():
                assert target in names, target


def test_session_reports_and_readings_are_linked_from_their_sessions(tree: Tree) -> None:
    rows = _table(tree, "Sessions in the order measured")
    links = [one["attrs"]["href"] for one in tree.all("a") if "tbody" in one["inside"]]
    assert [cells[0]["text"] for cells in rows] == [f"s{k:03d}" for k in range(1, 6)]
    for k in range(1, 6):
        assert links.count(f"readings/s{k:03d}.csv") == 1
        assert links.count(f"sessions/s{k:03d}.pdf") == 5  # its own row and those of its four particles


def test_hostile_text_is_text(hostile: Path) -> None:
    tree = Tree(hostile.read_text(encoding="utf-8"))
    assert len(tree.all("script")) == 1
    assert not [one for one in tree.elements if any(name.startswith("on") for name in one["attrs"])]
    assert not tree.all("b", "img", "f")
    assert HOSTILE["script"] in tree.all("title")[0]["text"]
    cells = [one for one in tree.all("th", "td") if "alert(1)" in one["text"]]
    assert cells
    drawn = [one["text"] for one in tree.all("text") if "script" in one["text"]]
    assert drawn
    for one in tree.all("svg"):
        assert one["attrs"]["role"] == "img"
        assert one["attrs"]["aria-label"]


def test_names_from_right_to_left_turn_nothing_round(hostile: Path) -> None:
    tree = Tree(hostile.read_text(encoding="utf-8"))
    alone = {one["text"] for one in tree.all("bdi")}
    assert alone == {HOSTILE["right_to_left"]}
    assert str(webpage.shown("beads אבג 12, 3 of שלום עולם.")) == (
        "beads <bdi>אבג</bdi> 12, 3 of <bdi>שלום עולם</bdi>."
    )  # fmt: skip
    assert str(webpage.shown('<b>&\u200b"x"')) == "&lt;b&gt;&amp;<wbr>&#34;x&#34;"


def test_styles_of_a_drawing_become_attributes_and_its_letters_stay() -> None:
    drawing = (
        '<?xml version="1.0"?><svg xmlns="http://www.w3.org/2000/svg" xmlns:xlink="http://www.w3.org/1999/xlink" '
        'viewBox="0 0 10 20"><defs><style>*{stroke:none}</style><clipPath id="c1"><rect x="0" y="0"/></clipPath></defs>'
        '<g id="axes_1"><path d="M 0 1.23456&#10;L 2 3" clip-path="url(#c1)" style="fill: none; stroke: #000"/>'
        '<text style="font-family: A; fill: #111">style="x: y" &lt;b&gt;</text></g></svg>'
    )
    assert webfigure.inline(drawing, "f1", 'said "so"') == (
        '<svg role="img" aria-label="said &quot;so&quot;" viewBox="0 0 10 20" width="10" height="20"><defs>'
        '<clipPath id="f1-c1"><rect x="0" y="0"/></clipPath></defs><path d="M 0 1.23 L 2 3" clip-path="url(#f1-c1)" '
        'fill="none" stroke="#000"/><text fill="#111">style="x: y" &lt;b&gt;</text></svg>'
    )


# --- open to everybody


def test_page_states_language_title_and_landmarks(tree: Tree) -> None:
    assert tree.all("html")[0]["attrs"]["lang"] == "en-GB"
    assert tree.all("title")[0]["text"] == "Campaign report: Made-up powders"
    for tag in ("header", "nav", "main", "footer", "h1"):
        assert len(tree.all(tag)) == 1, tag
    first = next(one for one in tree.elements if one["tag"] in ("a", "button", "summary"))
    assert (first["text"], first["attrs"]["href"]) == ("Skip to the report", "#report")
    assert tree.all("main")[0]["attrs"]["id"] == "report"
    (sight,) = (one["attrs"]["content"] for one in tree.all("meta") if one["attrs"].get("name") == "viewport")
    assert sight == "width=device-width, initial-scale=1"


def test_headings_leave_out_no_level(tree: Tree) -> None:
    levels = [int(one["tag"][1]) for one in tree.all("h1", "h2", "h3", "h4", "h5", "h6")]
    assert levels[0] == 1
    assert all(after <= before + 1 for before, after in zip(levels, levels[1:], strict=False))


def test_contents_lead_to_every_section(tree: Tree) -> None:
    linked = [one["attrs"]["href"] for one in tree.all("a") if "nav" in one["inside"]]
    heads = ["#" + one["attrs"]["id"] for one in tree.all("h2") if "nav" not in one["inside"]]
    assert linked == [*heads, "report.pdf"]


def test_every_table_has_a_caption_and_heads_that_say_their_scope(tree: Tree) -> None:
    tables = tree.all("table")
    assert len(tables) > 12
    captions = [one["text"].strip() for one in tree.all("caption")]
    assert len(captions) == len(tables)
    assert len(set(captions)) == len(captions)
    for one in tree.all("th"):
        assert one["attrs"]["scope"] == ("col" if "thead" in one["inside"] else "row")
        assert one["text"].strip()
    for caption in captions:
        for cells in _table(tree, caption):
            assert cells[0]["tag"] == "th"


def test_what_scrolls_can_be_reached_and_says_what_it_is(tree: Tree) -> None:
    boxes = [one for one in tree.all("div") if one["attrs"].get("class") == "wide" and "tabindex" in one["attrs"]]
    assert len(boxes) == len(tree.all("table")) + len(tree.all("figure"))
    for one in boxes:
        assert one["attrs"]["tabindex"] == "0"
        assert one["attrs"]["role"] == "group"
        assert one["attrs"].get("aria-label") or one["attrs"].get("aria-labelledby")


def test_links_say_where_they_lead(tree: Tree) -> None:
    for one in tree.all("a"):
        assert one["text"].strip() not in ("", "here", "link", "csv")


def luminance(colour: str) -> float:
    """Relative luminance of `#rrggbb` (WCAG 2.2)."""
    parts = [int(colour[k : k + 2], 16) / 255 for k in (1, 3, 5)]
    linear = [one / 12.92 if one <= 0.04045 else ((one + 0.055) / 1.055) ** 2.4 for one in parts]
    return 0.2126 * linear[0] + 0.7152 * linear[1] + 0.0722 * linear[2]


def contrast(one: str, other: str) -> float:
    """Contrast ratio of two colours (WCAG 2.2)."""
    dark, light = sorted((luminance(one), luminance(other)))
    return (light + 0.05) / (dark + 0.05)


def test_contrast_of_black_on_white_is_twenty_one() -> None:
    assert contrast("#000000", "#ffffff") == pytest.approx(21.0)
    assert contrast("#777777", "#ffffff") == pytest.approx(4.48, abs=0.01)  # the grey just short of enough


@pytest.mark.parametrize("scheme", ["light", "dark", "print"])
def test_text_and_marks_stand_out_from_their_ground(scheme: str) -> None:
    css = (places.workflow_folder() / "report" / "page.css").read_text(encoding="utf-8")
    at = {"light": 0, "dark": css.index("prefers-color-scheme: dark"), "print": css.index("@media print")}[scheme]
    names = dict(re.findall(r"--(\w+): (#\w{6});", css[at : css.index("}", css.index(":root", at))]))
    assert len(names) == 8
    for ground in ("paper", "tint"):
        for text in ("ink", "soft", "mark", "warn"):
            assert contrast(names[text], names[ground]) >= 4.5, (text, ground)
    for colour in figurestyle.COLOURS[:4]:
        assert contrast(colour, names["paper"]) >= 3.0, colour


def test_inks_of_the_drawings_are_those_the_style_sheet_turns_over() -> None:
    css = (places.workflow_folder() / "report" / "page.css").read_text(encoding="utf-8")
    for ink, name in ((figurestyle.INK, "ink"), (figurestyle.SOFT, "soft")):
        assert f'svg [fill="{ink}"]' in css
        assert re.search(rf'stroke="{ink}"\][^}}]*var\(--{name}\)', css)
    assert f'svg [stroke="{figurestyle.HAIR}"] {{ stroke: var(--hair); }}' in css
    assert f'svg [fill="{figurestyle.BAND}"] {{ fill: var(--band); }}' in css


def test_style_heeds_focus_motion_and_paper() -> None:
    css = (places.workflow_folder() / "report" / "page.css").read_text(encoding="utf-8")
    assert re.search(r":focus-visible \{ outline: 0\.\d+rem solid", css)
    assert "outline: none" not in css
    assert "outline: 0;" not in css
    outside = re.sub(r"@media \(prefers-reduced-motion: no-preference\) \{[^}]*\} \}", "", css)
    assert outside != css
    assert not re.search(r"scroll-behavior|transition|animation", outside)
    assert "display: table-header-group" in css[css.index("@media print") :]


# --- in a browser


@needs_browser
def test_script_runs_under_the_policy_and_nothing_else_does(made: Path, html: str, tmp_path: Path) -> None:
    shown = run((made / "report.html").as_uri(), tmp_path / "one", "--dump-dom", "--enable-logging=stderr")
    assert shown.stdout.count("<button") == 9
    assert "CONSOLE" not in shown.stderr
    smuggled = html.replace("</main>", "<script>document.title='ran'</script><p style='color:red'>x</p></main>")
    (tmp_path / "smuggled.html").write_text(smuggled, encoding="utf-8")
    stopped = run((tmp_path / "smuggled.html").as_uri(), tmp_path / "two", "--dump-dom", "--enable-logging=stderr")
    assert "<title>Campaign report: Made-up powders</title>" in stopped.stdout
    assert stopped.stderr.count("Content Security Policy") >= 2


@needs_browser
def test_table_of_particles_is_sorted_by_a_head_and_back(made: Path, tmp_path: Path) -> None:
    found = ask(made / "report.html", tmp_path / "profile", 1280, """
        const table = page.querySelector("table[data-sortable]");
        const read = (column) => [...table.tBodies[0].rows].map((row) => row.cells[column].textContent);
        const heads = [...table.tHead.rows[0].cells];
        const state = (column) => [heads.map((one) => one.getAttribute("aria-sort")), read(0), read(1), read(column),
                                   page.querySelector("[role=status]").textContent];
        const out = [state(3)];
        for (const column of [3, 3, 0]) { heads[column].querySelector("button").click(); out.push(state(column)); }
        return out;""")  # fmt: skip
    rows = rows_of(read_table(made / "particles.csv"))
    value = {(p["session"], p["particle"]): p["charge_to_mass_C_per_kg"] for p in rows}
    before, up, down, by_session = found
    assert list(zip(before[1], before[2], strict=True)) == list(value)
    known = sorted(one for one in value.values() if math.isfinite(one))
    ordered = [value[key] for key in zip(up[1], up[2], strict=True)]
    assert ordered[: len(known)] == known
    assert all(math.isnan(one) for one in ordered[len(known) :])  # what is missing stays last, either way
    turned = [value[key] for key in zip(down[1], down[2], strict=True)]
    assert turned[: len(known)] == known[::-1]
    assert all(math.isnan(one) for one in turned[len(known) :])
    assert up[0] == [None, None, None, "ascending", *[None] * 5]
    assert down[0] == [None, None, None, "descending", *[None] * 5]
    assert by_session[0] == ["ascending", *[None] * 8]
    assert by_session[1] == sorted(before[1])
    assert up[4].startswith("Sorted by q/m")
    assert down[4].endswith("descending.")


@needs_browser
def test_heads_are_reached_and_worked_from_the_keyboard(made: Path, tmp_path: Path) -> None:
    found = ask(made / "report.html", tmp_path / "profile", 1280, """
        const button = page.querySelector("thead button");
        button.focus();
        const style = view.getComputedStyle(button);
        return [page.activeElement === button, button.tabIndex, button.tagName, button.textContent,
                page.querySelector(".skip").tabIndex];""")  # fmt: skip
    assert found == [True, 0, "BUTTON", "Session", 0]


@needs_browser
def test_without_scripts_everything_is_there(made: Path, html: str, tmp_path: Path) -> None:
    found = ask(made / "report.html", tmp_path / "profile", 1280, """
        const shown = [...page.querySelectorAll("td, th, h2, h3, p, li, svg, math")];
        return [page.querySelectorAll("button").length, shown.length,
                shown.filter((one) => one.getClientRects().length === 0).length];""", scripts=False)  # fmt: skip
    assert found == [0, len(Tree(html).all("td", "th", "h2", "h3", "p", "li", "svg", "math")), 0]


@needs_browser
@pytest.mark.parametrize("width", [320, 360, 768, 1280])
@pytest.mark.parametrize("kind", ["made", "hostile", "long"])
def test_page_is_no_wider_than_the_screen(
    kind: str, width: int, request: pytest.FixtureRequest, tmp_path: Path
) -> None:
    path = request.getfixturevalue(kind)
    path = path / "report.html" if path.is_dir() else path
    found = ask(path, tmp_path / "profile", width, """
        const root = page.documentElement;
        const out = [...page.body.querySelectorAll("*")].filter((one) => !one.closest(".wide, .skip, .unseen")
            && one.getBoundingClientRect().right > root.clientWidth + 1).map((one) => one.outerHTML.slice(0, 80));
        return [view.innerWidth, root.scrollWidth, out];""")  # fmt: skip
    assert found == [width, width, []]


@needs_browser
def test_words_of_the_drawings_stay_inside_them_in_the_page_s_own_face(made: Path, tmp_path: Path) -> None:
    found = ask(made / "report.html", tmp_path / "profile", 1280, """
        const out = [];
        for (const drawing of page.querySelectorAll("svg")) {
          const box = drawing.getBoundingClientRect();
          for (const one of drawing.querySelectorAll("text")) {
            const own = one.getBoundingClientRect();
            if (own.left < box.left - 1 || own.right > box.right + 1) out.push(one.textContent);
            if (own.top < box.top - 1 || own.bottom > box.bottom + 1) out.push(one.textContent);
          }
        }
        return [page.querySelectorAll("svg").length, out,
                view.getComputedStyle(page.querySelector("svg text")).fontFamily,
                [...page.fonts].map((face) => face.family + " " + face.status)];""")  # fmt: skip
    assert found[0] == 10
    assert found[1] == []
    assert "Plate" in found[2]
    assert '"Plate" loaded' in found[3] or "Plate loaded" in found[3]


@needs_browser
def test_page_goes_dark_with_the_reader_s_system(made: Path, tmp_path: Path) -> None:
    script = """const style = (what) => view.getComputedStyle(page.querySelector(what));
        return [style("html").backgroundColor, style("html").color, style('svg text[fill="#1c2430"]').fill,
                style('svg path[fill="#ffffff"]').fill];"""
    light = ask(made / "report.html", tmp_path / "light", 1280, script)
    assert light == ["rgb(255, 255, 255)", "rgb(28, 36, 48)", "rgb(28, 36, 48)", "rgb(255, 255, 255)"]
    dark = ask(made / "report.html", tmp_path / "dark", 1280, script, "--blink-settings=preferredColorScheme=0")
    assert dark == ["rgb(18, 23, 29)", "rgb(230, 234, 238)", "rgb(230, 234, 238)", "rgb(18, 23, 29)"]


@needs_browser
def test_page_asks_the_network_for_nothing(made: Path, tmp_path: Path) -> None:
    text = (made / "report.html").read_text(encoding="utf-8")
    unguarded = re.sub(r"<meta http-equiv[^>]*>", "", text).replace("</main>", '<img src="http://a.invalid/x"></main>')
    asked = {}
    for name, content in (("page", text), ("control", unguarded)):
        listener = Listener(content)
        try:
            run(f"http://{listener.address}/report.html", tmp_path / name, "--dump-dom",
                f"--proxy-server=http://{listener.address}", "--proxy-bypass-list=<-loopback>")  # fmt: skip
        finally:
            listener.close()
        assert [one for one in listener.asked if one.endswith("/report.html")]
        asked[name] = [one for one in listener.asked if not one.endswith(("/report.html", "/favicon.ico"))]
    # what the browser asks for itself, whatever the page, goes to its maker
    own = re.compile(r"(https?://)?[\w.-]*\.(google|googleapis|gstatic)\.com[:/]")
    assert [one for one in asked["page"] if not own.match(one)] == []
    assert "http://a.invalid/x" in asked["control"]


def test_campaign_of_one_session_is_a_page_too(tmp_path: Path) -> None:
    results, folders = few(tmp_path, ("glass",))
    told(results, folders)
    report.campaign_pages(results, folders, digest=DIGEST)
    said = [one["text"] for one in Tree((results / "report.html").read_text(encoding="utf-8")).all("p", "li")]
    assert "No group has an interval." in said
    assert "There are no two groups to compare." in said
