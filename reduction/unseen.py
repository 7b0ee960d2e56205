"""Particles that no histogram shows: those lost, and those that no session could have held."""

from __future__ import annotations

import math

import numpy as np

from reduction.sessionmeans import Facts, group_word


def lost_of(facts: Facts, by: str, group: str, species: str) -> dict[str, int]:
    """Particles lost of one group and species, by reason."""
    counts: dict[str, int] = {}
    for session in sorted(facts):
        for one in facts[session].get("lost") or []:
            if one["species"] == species and group_word(one, facts[session], by) == group:
                counts[one["reason"]] = counts.get(one["reason"], 0) + 1
    return dict(sorted(counts.items()))


def window_of(facts: Facts, sessions: list[str]) -> dict[str, tuple[float, float]]:
    """Widest window of charge-to-mass sizes [C/kg] that any of the sessions could have held, by sign.

    An end is NaN where a session leaves it open; a sign is absent where no session could have held it.
    """
    found = {}
    for word in ("positive", "negative"):
        windows = [(facts[name].get("window") or {}).get(f"{word}_C_per_kg") for name in sessions]
        known = [one for one in windows if one is not None]
        if known:
            least = [math.nan if one[0] is None else float(one[0]) for one in known]
            most = [math.nan if one[1] is None else float(one[1]) for one in known]
            found[word] = (float(np.min(least)), float(np.max(most)))
    return found


def lost_by_group(facts: Facts, by: str) -> dict[tuple[str, str], dict[str, int]]:
    """Particles lost of every group and species, by reason, those of groups without one measured charge among them."""
    keys = {
        (group_word(one, facts[session], by), str(one["species"]))
        for session in facts
        for one in facts[session].get("lost") or []
    }
    return {key: lost_of(facts, by, *key) for key in sorted(keys)}
