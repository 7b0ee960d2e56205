"""The pages of a comparison in a campaign's report: its tables and figures, ready to be set."""

from __future__ import annotations

import math
import re
from collections.abc import Sequence

from reduction import chargefigures, comparisonfigures, comparisonsheets, figures, figurestyle
from reduction.comparisonpages import Pages, Row, step_of, surest
from reduction.comparisontables import WORDS
from reduction.sessionmeans import QUANTITIES, Facts, group_word, why_not
from reduction.typeset import MINUS, chance, foreign, times, visible
from reduction.wording import counted, joined

BY_WORDS = {"charged_with": "what the particles were charged with"}
HISTOGRAMS_MOST = 40  # groups and species whose charges are drawn; the tables have them all
SAID_MOST = 16  # statements printed


def content(pages: Pages) -> Row:
    """Plain data of the pages of the comparison, figures aside."""
    by = str(pages.words["by"])
    said = [foreign(worded(text)) for text in pages.words["statements"]]
    more = len(said) - SAID_MOST
    return {
        "quantity": pages.name,
        "lead": (
            f"The {pages.name}, grouped by {BY_WORDS.get(by, foreign(by.replace('_', ' ')))}. Mean of session means, "
            f"with the interval of {100 * pages.coverage:g} % coverage by Student's t. The unit is the session, not "
            "the particle; what sessions share (trap, species, instruments, formulas) is in the interval and does not "
            "shrink with more of them."
        ),
        "answer": comparisonsheets.answer_table(pages) if pages.groups else None,
        "said": said[:SAID_MOST] + ([f"{more} more statements stand in {WORDS}."] if more > 0 else []),
        "strip_words": _strip_words(pages),
        "pairs": comparisonsheets.pair_table(pages),
        "pair_words": _pair_words(pages),
        "alike": [foreign(", ".join(names)) for names in pages.words["alike"] if len(names) > 1],
        "trends": comparisonsheets.trend_table(pages),
        "series": comparisonsheets.series_table(pages),
        "charges": comparisonsheets.charge_table(pages),
        "charge_said": [foreign(worded(text)) for text in pages.words["charge"]],
        "shrink": _advice(pages),
        "shares": comparisonsheets.share_table(pages),
    }


def _advice(pages: Pages) -> list[str]:
    """What would shrink u most, groups that gain from the same gathered."""
    advice = {one["group"]: str(one["advice"]).removeprefix(f"{one['group']} ") for one in pages.words["shrink"]}
    gathered: dict[str, list[str]] = {}
    for row in pages.groups:
        if row["group"] in advice:
            gathered.setdefault(advice[row["group"]], []).append(row["group"])
    return [foreign(f"{joined(names)} {text}") for text, names in gathered.items()]


def worded(text: str) -> str:
    """A sentence with its numbers as they are set on a page: a true minus, powers of ten, no p below a millionth."""
    text = re.sub(r"\bp = ([\d.]+e-\d+)", lambda m: f"p {chance(float(m[1]))}" if float(m[1]) < 1e-6 else m[0], text)
    raised = re.sub(r"(?<![\w.])(-?[\d.]+(?:\(\d+\))?)e([+-]?\d+)\b", lambda m: times(m[1], int(m[2])), text)
    return re.sub(r"(?<![\w.\)-])-(?=\d)", MINUS, raised)


def _strip_words(pages: Pages) -> str:
    particles = sum(int(row["particles"]) for row in pages.groups)
    return (
        f"{counted(particles, 'particle')} in {counted(len(pages.groups), 'group')}, the most positive first. Marks: "
        "particles with their standard uncertainty; upright strokes: session means; diamond and heavy bar: mean of "
        "session means with its interval, where at least two sessions give one; an arrow where it goes on beyond "
        "the axis."
    )


def _pair_words(pages: Pages) -> str:
    least = [float(row["smallest_p"]) for row in pages.pairs]
    reach = ""
    if least:
        most = f" to {max(least):.2g}" if max(least) > min(least) else ""
        reach = (
            f" With so few sessions, exchanging them between two groups could reach no p below {min(least):.2g}{most}."
        )
    if not any(math.isfinite(row["p"]) for row in pages.pairs):
        return "No pair has two sessions in each group: nothing is tested." + reach
    text = (
        f"Heavy bar: interval of {100 * pages.coverage:g} % coverage; thin bar: all differences at once. The p "
        "is Student's from session means, with few-session degrees of freedom, Holm's correction over all pairs. What "
        "two groups share cancels in their difference and ratio. Effect size: difference over the spread of single "
        "particles, sessions included."
    )
    if len(pages.pairs) > comparisonsheets.PAIRS_MOST:
        text += f" Of {len(pages.pairs)} pairs those of the smallest p are shown; contrasts.csv has them all."
    return text + reach


def drawings(pages: Pages, particles: Sequence[Row], facts: Facts) -> dict[str, figurestyle.Drawing]:
    """Figures of the comparison by name; of charges one for each group and species, numbered in their order."""
    factor, unit = 10.0**-pages.power, f"({pages.scaled_unit})"
    sessions = pages.rows["session_means"]
    compared = _compared(pages, particles, facts)
    tested = [row for row in pages.groups if math.isfinite(row["rank_1"])]
    pairs = surest([row for row in pages.pairs if math.isfinite(row["p"])], comparisonfigures.DIFFERENCES_MOST)
    found = [{**row, "step": step_of(row)} for row in pages.rows["trends"]]
    made = {
        "means": comparisonfigures.means(pages.name, unit, factor, tested),
        "comparison": comparisonfigures.by_group(pages.name, unit, factor, pages.groups, sessions, compared),
        "differences": comparisonfigures.differences(pages.name, unit, factor, pairs),
        "ranks": comparisonfigures.ranks(tested),
        "trends": comparisonfigures.trends(pages.name, unit, factor, pages.groups, sessions, found),
    }
    return {name: drawing for name, drawing in made.items() if drawing}


def charge_drawings(pages: Pages) -> list[tuple[str, figurestyle.Drawing]]:
    """Name and figure of the charges of each group and species, the first `HISTOGRAMS_MOST`."""
    places = {str(row["group"]): at for at, row in enumerate(pages.groups)}
    found = []
    for summary in pages.rows["charge_summary"][:HISTOGRAMS_MOST]:
        key = summary["group"], summary["species"]
        bins, values = (
            [row for row in pages.rows[name] if (row["group"], row["species"]) == key]
            for name in ("histogram", "charge_distribution")
        )
        drawing = chargefigures.charges(summary, bins, values, places.get(key[0], len(places)))
        found.append((f"{key[0]}, {key[1]}", drawing))
    return found


def _compared(pages: Pages, particles: Sequence[Row], facts: Facts) -> list[Row]:
    """Particles that enter the comparison, with group, value and u."""
    what, by = QUANTITIES[str(pages.words["quantity"])], str(pages.words["by"])
    found = []
    for row in particles:
        fact = facts.get(row["session"], {})
        group = group_word(row, fact, by)
        if group and not why_not(row, fact, what.column):
            value, u = row[what.column], row[f"u_{what.column}"]
            key = {name: row[name] for name in ("session", "particle")}
            found.append({"group": visible(group), **key, "value": value, "u": u})
    return found


def set_drawing(drawing: figurestyle.Drawing, words: str) -> Row:
    """A figure as the template sets it."""
    return {"svg": drawing.svg, "alt": drawing.alt, "width": figures.WIDTH, "caption": words}
