"""The order of a campaign's report: sections of blocks, the same for paper and screen."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import Any

from reduction.sheets import Sheet
from reduction.wording import CAUTIONS

Row = dict[str, Any]

RANK_WORDS = (
    "How often each group takes each rank in draws of the group means, errors that groups share moving them together. "
    "The ranks of the first table hold for all groups at once."
)
TREND_WORDS = (
    "Slopes within groups, with the session as the unit: described, not corrected for. Where much of what varies lies "
    "between the groups, its effect and that of the group cannot be told apart."
)
SHARE_WORDS = (
    "Shares of the variance of each group mean in percent, and the factor on its standard uncertainty with twice as "
    "many sessions, or twice as many particles in each. What inputs contribute one by one, to differences and ratios "
    "too, stands in group_budget.csv."
)
CHARGE_WORDS = (
    "Signed. Spread and skew are those between particles with the measurement error taken out (≥: a lower bound); they "
    "never rest on the lot's spread of sizes. Lost particles are counted, their charge is not known."
)
HISTOGRAM_WORDS = (
    "Left: particles in bins no finer than the median standard uncertainty; dashes and upright lines: count and its "
    "band if every particle were read again. Right: share of particles at or below a charge, as read (steps) and "
    "blurred by each particle's own uncertainty (dashed). Grey: charges of a particle of median mass that no session "
    "could have held with the voltages it logged."
)
AGREEMENT_WORDS = (
    "One mark per particle; outside the grey band two methods disagree by more than twice the standard uncertainty of "
    "their difference."
)
INPUT_WORDS = (
    "As stated and as adjusted by the readings. Where several sessions adjust an input each for itself, their number "
    "stands in brackets and the adjusted values as a range; each single one is in its session's report."
)
PARTICLE_WORDS = (
    "Value with its standard uncertainty (k = 1) in the last digits. The numbers in the last column point to the "
    "remarks."
)


def lead(text: str) -> Row:
    """Words that introduce what follows."""
    return {"kind": "lead", "text": text}


def table(
    sheet: Sheet | None, caption: str, nothing: str = "", *, size: float = 8.5, file: str = "", sortable: bool = False
) -> list[Row]:
    """A table with the words a screen reader announces it by, or the words for none."""
    if sheet is None:
        return [{"kind": "note", "text": nothing}] if nothing else []
    return [{"kind": "table", "sheet": sheet, "caption": caption, "size": size, "file": file, "sortable": sortable}]


def bullets(items: Sequence[str]) -> list[Row]:
    """A list, or nothing."""
    return [{"kind": "bullets", "items": list(items)}] if items else []


def figure(figures: Mapping[str, Row], name: str, nothing: str = "No numbers to draw.") -> list[Row]:
    """A figure by its name, or the words for none."""
    if name not in figures:
        return [{"kind": "note", "text": nothing}] if nothing else []
    return [{"kind": "figure", "name": name, "title": "", "figure": figures[name]}]


def section(ident: str, title: str, *blocks: Row | list[Row], level: int = 1) -> Row:
    """A heading and what stands under it."""
    flat = [one for block in blocks for one in (block if isinstance(block, list) else [block])]
    return {"id": ident, "level": level, "title": title, "blocks": flat}


def sections(compared: Row, figures: Mapping[str, Row], charges: Sequence[tuple[str, Row]], parts: Row) -> list[Row]:
    """Every section of the report in its order.

    Parameters
    ----------
    compared : dict
        What `comparisonreport.content` returns.
    figures : mapping
        Figures ready to be set, by name.
    charges : sequence of pairs
        Name and figure of the charges of each group and species.
    parts : dict
        Tables and lists of the campaign: `trust`, `left_out`, `limits`, `limits_said`, `sessions`, `inputs`,
        `traps` (sections of drawn traps), `particles`, `listed`, `remarks`, `exact`, `settings`, `provenance`,
        `input_files`.
    """
    made = [
        section(
            "result",
            "Result by group",
            lead(compared["lead"]),
            figure(figures, "means", ""),
            table(compared["answer"], "Result by group", "No particle has a number that can be compared.", size=9.0,
                  file="" if "means" in figures else "comparison.csv"),
            bullets(compared["said"]),
        ),
        section("trust", "What to trust", bullets(parts["trust"]), level=2),
        section(
            "left-out",
            "What was left out, and why",
            table(parts["left_out"], "Left out, with the reason",
                  "Nothing was left out, and every particle has a result."),
            level=2,
        ),
        section("groups", "Groups with all their particles", lead(compared["strip_words"]),
                figure(figures, "comparison")),
        section(
            "differences",
            "Differences between groups",
            lead(compared["pair_words"]),
            figure(figures, "differences"),
            table(compared["pairs"], "Differences between groups", "There are no two groups to compare.", size=8.0,
                  file="contrasts.csv"),
        ),
        section("order", "Order of the groups", lead(RANK_WORDS), figure(figures, "ranks")),
    ]  # fmt: skip
    if compared["alike"]:
        made.append(section("alike", "Groups that cannot be told apart", bullets(compared["alike"]), level=2))
    if compared["series"]:
        made.append(section("series", "One series of materials?",
                            table(compared["series"], "Checks of one series of materials", file="series.csv"),
                            level=2))  # fmt: skip
    made += [
        section(
            "trends",
            "What session means go with",
            lead(TREND_WORDS),
            figure(figures, "trends", ""),
            table(compared["trends"], "Slopes of session means within groups", "There are no session means.", size=8.0,
                  file="trends.csv"),
        ),
        section(
            "limits",
            "What limits the result",
            lead(parts["limits_words"]),
            bullets(parts["limits_said"]),
            table(parts["limits"], "Share of the variance of single particles by scope, in percent",
                  "No particle has a budget.", size=8.0, file="budget.csv"),
        ),
        section(
            "shrink",
            "What would shrink the uncertainty most",
            lead(SHARE_WORDS),
            bullets(compared["shrink"]),
            table(compared["shares"], "Share of the variance of group means by scope, in percent",
                  "No group has an interval.", size=8.0, file="group_budget.csv"),
            level=2,
        ),
        section(
            "charge",
            "Charge in electrons",
            lead(CHARGE_WORDS),
            table(compared["charges"], "Charge by group and species", "No particle has a charge.", size=8.0,
                  file="charge_summary.csv"),
            bullets(compared["charge_said"]),
            [lead(HISTOGRAM_WORDS)] if charges else [],
            [{"kind": "figure", "name": f"charge-{k}", "title": name, "figure": one}
             for k, (name, one) in enumerate(charges, 1)],
        ),
        section("agreement", "Agreement of methods", lead(AGREEMENT_WORDS), figure(figures, "agreement")),
        section("time", "Sessions in time", figure(figures, "sessions_in_time")),
        section("sessions", "Sessions",
                table(parts["sessions"], "Sessions in the order measured", "No session was reduced.", size=8.0),
                level=2),
        section("inputs", "Shared inputs before and after", lead(INPUT_WORDS),
                table(parts["inputs"], "Shared inputs before and after",
                      "No shared input carries an uncertainty.", file="inputs.csv")),
        *parts["traps"],
        section("particles", "Particles", lead(parts["listed"] + PARTICLE_WORDS),
                table(parts["particles"], "Particles with their results", "No particle was recorded.", size=8.0,
                      file="particles.csv", sortable=True)),
    ]  # fmt: skip
    if parts["remarks"]:
        made.append(section("remarks", "Remarks", table(parts["remarks"], "Remarks by their numbers"), level=2))
    return [
        *made,
        section("model", "How the numbers come about", {"kind": "model"}),
        section("exact", "Inputs taken as exact", table(parts["exact"], "Inputs taken as exact", "None.")),
        section("settings", "Settings", table(parts["settings"], "Settings that change numbers")),
        section("provenance", "Provenance",
                lead(f"The same inputs, settings and versions give the same bytes. {parts['input_files']}"),
                table(parts["provenance"], "What the results were made with", file="run.json")),
        section("cautions", "Cautions", {"kind": "cautions", "items": [list(words) for words in CAUTIONS]}),
    ]  # fmt: skip
