"""The tables of a comparison in a campaign's report."""

from __future__ import annotations

import math

from reduction.campaigntables import SCOPES
from reduction.comparisonpages import Pages, Row, step_of, surest
from reduction.sheets import Sheet, sheet
from reduction.typeset import (
    NONE,
    bracketed,
    chance,
    common_power,
    foreign,
    interval,
    minus,
    percent,
    power_of_ten,
    significant,
)
from reduction.wording import input_words

PAIRS_MOST = 60  # differences printed
_SHORT = {"charge_to_mass": "q/m", "charge": "Charge", "surface_charge_density": "Surface charge\ndensity"}
_SCOPES = {"between_sessions": "Between\nsessions", "between_particles": "Between\nparticles"} | {
    scope: SCOPES[scope] for scope in ("session", "trap", "species", "instrument", "campaign")
}


def answer_table(pages: Pages) -> Sheet:
    """Result by group: mean of session means with its interval, or a description where none can be given."""
    groups, power = pages.groups, pages.power
    quantity = _SHORT[str(pages.words["quantity"])]
    best = "Most\npositive" if len([row for row in groups if math.isfinite(row["u_mean"])]) > 1 else ""
    head = ["Group", "Sessions", "Particles", f"{quantity}\n{pages.scaled_unit}",
            f"{100 * pages.coverage:g} % interval\n{pages.scaled_unit}"]  # fmt: skip
    cells = [
        [foreign(row["group"]) for row in groups],
        [f"{row['sessions']:.0f}" for row in groups],
        [f"{row['particles']:.0f}" for row in groups],
        [bracketed(row["mean"], row["u_mean"], power) if row["u_mean"] > 0 else NONE for row in groups],
        [_ends(row, power) for row in groups],
    ]
    if best:
        head += [f"{best}\n%", "Rank"]
        cells += [[_percent(row["rank_1"]) for row in groups], [_rank(row) for row in groups]]
    return sheet(head, cells, "lrrrrrr"[: len(head)], [5, 2, 2, 3, 4, 2, 2][: len(head)])


def _ends(row: Row, power: int) -> str:
    if math.isfinite(row["low"]):
        return interval(row["low"], row["high"], row["u_mean"], power)
    low, high = (significant(row[end] / 10.0**power) for end in ("least", "most"))
    if row["sessions"] > 1:
        return "no scatter, no u"
    return f"one session only:\nfrom {low} to {high}" if low != high else f"one particle:\n{low}"


def _percent(share: float) -> str:
    return f"{100 * share:.0f}" if math.isfinite(share) else NONE


def _rank(row: Row) -> str:
    if not math.isfinite(row["rank_low"]):
        return NONE
    low, high = (f"{row[end]:.0f}" for end in ("rank_low", "rank_high"))
    return low if low == high else f"{low} to {high}"


def pair_table(pages: Pages) -> Sheet | None:
    """Differences between groups; None where there is no pair."""
    pairs = surest(pages.pairs, PAIRS_MOST)
    if not pairs:
        return None
    power = common_power([row["difference"] for row in pairs])
    unit = f"{power_of_ten(power)} {pages.unit}" if power else pages.unit
    return sheet(
        ["Groups", f"Difference\n{unit}", f"Interval\n{unit}", "p", "p (Holm)", "Ratio and interval", "Effect\nsize"],
        [
            [foreign(f"{row['group_a']} less {row['group_b']}") for row in pairs],
            [
                bracketed(row["difference"], row["u_difference"], power)
                if row["u_difference"] > 0
                else significant(row["difference"] / 10.0**power)
                for row in pairs
            ],
            [interval(row["low"], row["high"], row["u_difference"], power) for row in pairs],
            [chance(row["p"]) for row in pairs],
            [chance(row["p_holm"]) if math.isfinite(row["p"]) else "not tested" for row in pairs],
            [_ratio(row) for row in pairs],
            [significant(row["effect_size"], 2) for row in pairs],
        ],
        "lrrrrlr",
        [6, 2, 3, 2, 2, 4, 1],
    )


def _ratio(row: Row) -> str:
    if not math.isfinite(row["ratio"]):
        return NONE
    return f"{significant(row['ratio'])} ({significant(row['ratio_low'])} to {significant(row['ratio_high'])})"


def trend_table(pages: Pages) -> Sheet | None:
    """Slopes of session means within groups; None where nothing was compared."""
    rows = pages.rows["trends"]
    if not pages.groups or not rows:
        return None
    power = common_power([row["slope"] for row in rows])
    unit = f"{power_of_ten(power)} {pages.unit}" if power else pages.unit
    return sheet(
        ["Session means with", f"Slope\n{unit}", "per", f"Interval\n{unit}", "p", "p (Holm)", "Sessions",
         "Between\ngroups / %", "Remark"],
        [
            [str(row["covariate"]).replace("_", " ") for row in rows],
            [bracketed(row["slope"], row["u_slope"], power) for row in rows],
            [step_of(row) for row in rows],
            [interval(row["low"], row["high"], row["u_slope"], power) for row in rows],
            [chance(row["p"]) for row in rows],
            [chance(row["p_holm"]) for row in rows],
            [f"{row['sessions']:.0f}" for row in rows],
            [percent(row["share_between_groups"]) for row in rows],
            [row["note"] or "" for row in rows],
        ],
        "lrlrrrrrl",
        [2, 0, 0, 0, 0, 0, 0, 0, 2],
    )  # fmt: skip


def series_table(pages: Pages) -> Sheet | None:
    """Checks of one series of materials; None where species and materials make none."""
    rows = pages.rows["series"]
    if not rows:
        return None
    return sheet(
        ["Check", "Between", "Verdict"],
        [
            ["order seen by two species" if row["kind"] == "order" else str(row["kind"]) for row in rows],
            [foreign(str(row["members"]).replace(";", ", ")) for row in rows],
            [row["verdict"] for row in rows],
        ],
        "lll",
        [1, 2, 0],
    )


def charge_table(pages: Pages) -> Sheet | None:
    """Charges of each group and species; None where no particle has one."""
    rows = pages.rows["charge_summary"]
    if not rows:
        return None
    power = common_power([row["mean_e"] for row in rows])
    unit = f"{power_of_ten(power)} e" if power else "e"

    def number(value: float) -> str:
        return significant(value / 10.0**power)

    return sheet(
        ["Group, species", "Sessions", "Particles", f"Mean\n{unit}", f"{100 * pages.coverage:g} % interval\n{unit}",
         f"Spread\n{unit}", "Skew", "Positive\n%", "Lost", "Left\nout"],
        [
            [foreign(f"{row['group']}, {row['species']}") for row in rows],
            [f"{row['sessions']:.0f}" for row in rows],
            [f"{row['particles']:.0f}" for row in rows],
            [bracketed(row["mean_e"], row["u_mean_e"], power) if row["u_mean_e"] > 0 else number(row["mean_e"])
             for row in rows],
            [interval(row["mean_low_e"], row["mean_high_e"], row["u_mean_e"], power) for row in rows],
            [("≥ " if row["intrinsic_basis"] == "lower bound" else "") + number(row["intrinsic_spread_e"])
             if math.isfinite(row["intrinsic_spread_e"]) else NONE for row in rows],
            [_one_place(row["intrinsic_skew"]) for row in rows],
            [_positive(row) for row in rows],
            [f"{row['lost']:.0f}" for row in rows],
            [f"{row['sign_undetermined'] + row['not_determined'] + row['excluded']:.0f}" for row in rows],
        ],
        "lrrrrrrrrr",
        [1, 0, 0, 0, 0, 0, 0, 0, 0, 0],
    )  # fmt: skip


def _one_place(value: float) -> str:
    return minus(f"{round(value, 1) + 0.0:.1f}") if math.isfinite(value) else NONE


def _positive(row: Row) -> str:
    text = _percent(row["fraction_positive"])
    if math.isfinite(row["fraction_positive_low"]):
        text += f" ({_percent(row['fraction_positive_low'])} to {_percent(row['fraction_positive_high'])})"
    return text


def share_table(pages: Pages) -> Sheet | None:
    """What makes up the variance of each group mean; None where no group has an interval."""
    shares: dict[str, dict[str, float]] = {}
    for row in pages.rows["group_budget"]:
        if row["result"] == "mean":
            scope = str(row["scope"])
            key = str(row["input"]).rpartition("/")[2] if scope == "group" else scope
            own = shares.setdefault(str(row["group"]), {})
            own[key] = own.get(key, 0.0) + float(row["share"])
    if not shares:
        return None
    twice = {str(one["group"]): one for one in pages.words["shrink"]}
    names = [str(row["group"]) for row in pages.groups if row["group"] in shares]
    used = [scope for scope in _SCOPES if any(scope in shares[name] for name in names)]
    return sheet(
        ["Group", *(_SCOPES[scope] for scope in used), "u with twice\nthe sessions", "u with twice\nthe particles",
         "Largest shared input"],
        [
            [foreign(name) for name in names],
            *([percent(shares[name].get(scope, 0.0)) for name in names] for scope in used),
            *([f"× {twice[name][key]:.2f}" for name in names] for key in ("twice_the_sessions", "twice_the_particles")),
            [foreign(", ".join(filter(None, input_words(twice[name]["largest_shared_input"])))) for name in names],
        ],
        "l" + "r" * (len(used) + 2) + "l",
        [2, *([0] * (len(used) + 2)), 3],
    )  # fmt: skip
