"""The content of a campaign's report: its tables and records as text, tables and figures ready to be set."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from pathlib import Path
from typing import Any

import pandas as pd

from reduction import (
    campaignfigures,
    campaignsections,
    comparisonfigures,
    comparisonpages,
    comparisonreport,
    figurestyle,
    records,
    tables,
    trapreport,
)
from reduction.campaigntables import (
    MOST_LISTED,
    NOT_TAKEN,
    exact_table,
    input_table,
    left_out_table,
    particle_table,
    provenance_table,
    remark_table,
    scope_table,
    session_table,
    settings_table,
)
from reduction.limits import VALUES, sentence, spread_of
from reduction.quantity import QuantityError, read_quantity
from reduction.sheets import rows_of
from reduction.trapconstants import from_plain
from reduction.typeset import NONE, foreign, significant, visible
from reduction.wholefile import read_json
from reduction.wording import counted, input_words

Row = dict[str, Any]
FIGURES = ("agreement", "comparison", "field_on_axis", "sessions_in_time")  # whose numbers have a file of their own
_ELSEWHERE = {
    "means": "comparison.csv",
    "differences": "contrasts.csv",
    "ranks": "comparison.csv",
    "trends": "session_means.csv",
}
CHARGE_FILES = ("histogram.csv", "charge_distribution.csv", "charge_summary.csv")
SUBLINE = "Charge-to-mass ratio, mass and charge of single trapped particles"
TITLE_MOST = 240  # characters of a title on the first page
_MOVED = 2.0  # in units of the stated u: beyond, an adjusted input is worth a remark
BUDGET = {"session", "particle", "result", "input", "share"}  # columns of the budget that are told of


def content(
    results: Path,
    record_folders: Mapping[str, Path],
    *,
    digest: str,
    title: str = "",
    traps: Mapping[str, Path] | None = None,
) -> tuple[dict[str, Any], dict[str, figurestyle.Drawing]]:
    """Everything the template sets, and the figures by name, of one results folder."""
    run = read_json(results / "run.json")
    settings = run.get("settings") or {}
    facts = {name: read_json(Path(folder) / records.FACTS) for name, folder in sorted(record_folders.items())}
    particles = rows_of(tables.read_table(results / "particles.csv"))
    agreement = rows_of(tables.read_table(results / "agreement.csv"))
    inputs = [
        row
        for name, folder in sorted(record_folders.items())
        if facts[name].get("status") not in NOT_TAKEN
        for row in rows_of(tables.read_table(Path(folder) / "inputs.csv"))
    ]
    pages = comparisonpages.read_pages(results)
    group_of = comparisonpages.group_of(particles, facts, str(pages.words["by"]))
    in_time = _in_time(facts, agreement)
    with figurestyle.styled():
        drawings = comparisonreport.drawings(pages, particles, facts)
        made = {"sessions_in_time": campaignfigures.sessions_in_time(in_time),
                "agreement": campaignfigures.agreement(agreement)}  # fmt: skip
        drawings |= {name: drawing for name, drawing in made.items() if drawing}
        charges = comparisonreport.charge_drawings(pages)
    plain_title = visible(str(title or settings.get("title") or ""))
    title = foreign(plain_title)
    budget = tables.read_table(results / "budget.csv", columns=BUDGET)
    pages_of_traps = _trap_pages(facts, traps or {})
    parts = {
        "trust": _trust(particles, agreement, inputs),
        "left_out": left_out_table(run, facts, particles),
        "limits": scope_table(budget, particles),
        "limits_words": "Share of each scope in the variance of single particles, the median over all of them, in "
        "percent; beside it their relative standard uncertainty. Inputs correlated by the adjustment need not add up "
        "to 100 %.",
        "limits_said": _limits(budget, particles),
        "sessions": session_table(in_time, facts, particles),
        "inputs": input_table(inputs),
        "traps": [one for number, page in enumerate(pages_of_traps, 1) for one in trapreport.sections(number, page)],
        "particles": particle_table(particles, group_of),
        "listed": f"The first {MOST_LISTED} of {len(particles)} particles; particles.csv has all of them. "
        if len(particles) > MOST_LISTED
        else "",
        "remarks": remark_table(particles),
        "exact": exact_table(facts),
        "settings": settings_table(settings, title=plain_title if len(plain_title) > TITLE_MOST else ""),
        "provenance": provenance_table(run),
        "input_files": _input_files(run),
    }
    said = _captions(pages, agreement, in_time)
    figures = {name: _set(drawing, name, said[name]) for name, drawing in drawings.items()}
    dates = sorted(str(f["date"]) for f in facts.values() if f.get("date"))
    doc: dict[str, Any] = {
        "title": f"Campaign report: {plain_title}" if title else "Campaign report",
        "kind": "Campaign report",
        "headline": title if 0 < len(title) <= 80 else "Campaign",
        "subline": foreign(_cut(plain_title)) if len(title) > 80 else SUBLINE,
        "running": title if 0 < len(title) <= 70 else "Campaign report",
        "digest": digest,
        "digest_word": "Run",
        "facts": _facts(facts, particles, dates),
        "sections": campaignsections.sections(
            comparisonreport.content(pages), figures, _charges(pages, charges), parts
        ),
    }
    if pages_of_traps:
        drawings["field_on_axis"] = _field_on_axis(pages_of_traps)
    return doc, drawings


def _trap_pages(facts: Mapping[str, Row], traps: Mapping[str, Path]) -> list[Row]:
    """A page for each trap of a reduced session whose constants follow from the drawing of its electrodes."""
    used = sorted({str(fact["trap"]) for fact in facts.values() if fact.get("trap") in traps})
    return [trapreport.content(name, from_plain(read_json(traps[name]))) for name in used]


def _field_on_axis(pages: Sequence[Row]) -> figurestyle.Drawing:
    """Numbers drawn in the figures of all drawn traps' fields, one under another."""
    rows = [{"trap": page["name"], **row} for page in pages for row in page["axis_numbers"]]
    return figurestyle.Drawing("", "", tuple(rows[0]), [tuple(row.values()) for row in rows])


def _cut(title: str) -> str:
    """A title that leaves room for the answer on its page; the settings have it whole."""
    return title if len(title) <= TITLE_MOST else title[: TITLE_MOST - 1] + "\N{HORIZONTAL ELLIPSIS}"


def _captions(pages: comparisonpages.Pages, agreement: Sequence[Row], in_time: Sequence[Row]) -> dict[str, str]:
    """How many particles and sessions each figure rests on."""
    groups = pages.groups
    particles = counted(sum(int(row["particles"]) for row in groups), "particle")
    sessions = counted(len({row["session"] for row in pages.rows["session_means"]}), "session")
    known = [row for row in agreement if math.isfinite(row["normalized_error"])]
    own = len({(row["session"], row["particle"]) for row in known})
    all_of_them = f"{particles} in {sessions}, {counted(len(groups), 'group')}."
    tested = sum(math.isfinite(row["p"]) for row in pages.pairs)
    drawn = min(tested, comparisonfigures.DIFFERENCES_MOST)
    pairs = counted(tested, "pair") if drawn == tested else f"{drawn} of {tested} pairs"
    return {
        "means": all_of_them,
        "comparison": all_of_them,
        "differences": f"{pairs} of groups; {particles} in {sessions}.",
        "ranks": all_of_them,
        "trends": f"{counted(len(pages.rows['session_means']), 'session mean')} of {particles}.",
        "agreement": f"{counted(len(known), 'comparison')} of {counted(own, 'particle')} in "
        f"{counted(len({row['session'] for row in known}), 'session')}.",
        "sessions_in_time": f"{counted(len(in_time), 'session')} in the order measured.",
    }


def _charges(pages: comparisonpages.Pages, charges: Sequence[tuple[str, figurestyle.Drawing]]) -> list[tuple[str, Row]]:
    """Figures of the charges, each with its name and how many particles and sessions it rests on."""
    set_ones = []
    for (name, drawing), summary in zip(charges, pages.rows["charge_summary"], strict=False):
        particles, sessions = int(summary["particles"]), int(summary["sessions"])
        words = f"{counted(particles, 'particle')} in {counted(sessions, 'session')}."
        figure = {**comparisonreport.set_drawing(drawing, words), "files": list(CHARGE_FILES)}
        set_ones.append((foreign(name), figure))
    return set_ones


def _limits(budget: pd.DataFrame, particles: Sequence[Row]) -> list[str]:
    """What makes up most of the variance of charge-to-mass ratio and charge, in words."""
    said = []
    for result in ("charge_to_mass", "charge"):
        own = budget[budget["result"] == result]
        names = own["input"].str.replace(r"^session/[^/]+/", "session//", regex=True)  # those of all sessions as one
        own = own.assign(particle=own["session"] + "/" + own["particle"], input=names)
        spread = spread_of(particles, *VALUES[result])
        said.append(sentence(rows_of(own[["particle", "result", "input", "share"]]), result, spread))
    return [text for text in said if text]


def _in_time(facts: Mapping[str, Row], agreement: Sequence[Row]) -> list[Row]:
    worst: dict[str, float] = {}
    for row in agreement:
        if math.isfinite(row["normalized_error"]):
            worst[row["session"]] = max(worst.get(row["session"], 0.0), abs(row["normalized_error"]))
    rows = []
    for session, fact in facts.items():
        if fact.get("status") in NOT_TAKEN:
            continue
        stray = fact.get("stray_field") or {}
        humidity, u_humidity = _read((fact.get("air") or {}).get("relative_humidity_percent"))
        rows.append(
            {
                "session": session,
                "date": str(fact.get("date") or ""),
                "stray_estimate": _float(stray.get("estimate")),
                "stray_u": _float(stray.get("u")),
                "stray_adjusted": _float(stray.get("adjusted")),
                "stray_adjusted_u": _float(stray.get("adjusted_u")),
                "worst": worst.get(session, math.nan),
                "humidity": humidity,
                "u_humidity": u_humidity,
            }
        )
    return sorted(rows, key=lambda row: (row["date"], row["session"]))


def _float(value: object) -> float:
    return float(value) if isinstance(value, int | float) else math.nan


def _read(value: object) -> tuple[float, float]:
    try:
        read = read_quantity(value)
    except QuantityError:
        return math.nan, math.nan
    return read.estimate, read.u


def _set(drawing: figurestyle.Drawing, name: str, words: str) -> Row:
    file = _ELSEWHERE.get(name, f"figures/{name}.csv")
    return {**comparisonreport.set_drawing(drawing, words), "files": [file]}


def _facts(facts: Mapping[str, Row], particles: Sequence[Row], dates: Sequence[str]) -> list[list[str]]:
    taken = [f for f in facts.values() if f.get("status") not in NOT_TAKEN]
    measured = sum(math.isfinite(p["charge_to_mass_C_per_kg"]) for p in particles)
    pairs = [
        ["Sessions", f"{len(taken)} reduced of {len(facts)}" if len(taken) < len(facts) else f"{len(taken)} reduced"],
        ["Particles", f"{measured} with a result of {len(particles)}"],
        ["Measured", f"{dates[0]} to {dates[-1]}" if dates and dates[0] != dates[-1] else (dates or [NONE])[0]],
    ]
    for key, label in (("trap", "Traps"), ("species", "Species"), ("charged_with", "Charged with")):
        values = sorted({str(f[key]) for f in taken if f.get(key)})
        shown = ", ".join(values[:6]) + (f" and {len(values) - 6} more" if len(values) > 6 else "")
        pairs.append([label, foreign(shown or NONE)])
    return pairs


def _trust(particles: Sequence[Row], agreement: Sequence[Row], inputs: Sequence[Row]) -> list[str]:
    words = []
    errors = [abs(a["normalized_error"]) for a in agreement if math.isfinite(a["normalized_error"])]
    if errors:
        inside = sum(e <= 1 for e in errors)
        words.append(
            f"Methods agree in {inside} of {len(errors)} comparisons (normalised error within 1); the largest is "
            f"{significant(max(errors), 2)}."
        )
    else:
        words.append("No particle was measured by two methods that give the same quantity: nothing checks the result.")
    poor = [p for p in particles if "chi_square" in p["flags"].split(";")]
    if poor:
        tested = sum(p["degrees_of_freedom"] > 0 for p in particles)
        words.append(
            f"{counted(len(poor), 'particle scatters', 'particles scatter')} more than stated (chi-square, p < 0.01); "
            f"of {tested} tested, chance alone gives about {significant(0.01 * tested, 1)}."
        )
    strained = sorted(
        {i["input"] for i in inputs if i["u"] > 0 and abs(i["adjusted_estimate"] - i["estimate"]) > _MOVED * i["u"]}
    )
    if strained:
        named = [foreign(", ".join(filter(None, input_words(name)))) for name in strained[:4]]
        more = f" and {len(strained) - 4} more" if len(strained) > 4 else ""
        words.append(f"Moved by more than {_MOVED:g} u when adjusted, worth a look: {'; '.join(named)}{more}.")
    sizes = sum("size_from_lot" in p["flags"].split(";") for p in particles)
    if sizes:
        words.append(
            f"Of {counted(sizes, 'particle')} only the lot's mean and spread fix the size; mass and charge follow it."
        )
    return words


def _input_files(run: Row) -> str:
    count = len(run.get("inputs") or {})
    return f"Digests of the {counted(count, 'input file')} and of every session stand in run.json." if count else ""
