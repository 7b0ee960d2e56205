"""Group means with the session as the unit."""

from __future__ import annotations

import math
from typing import Any

import numpy as np
import pytest

from reduction.groups import by_group

T_975_2 = 4.302652729911275  # Student's t, 2 degrees of freedom, 0.975: printed tables give 4.303


def rows(sessions: dict[str, list[float]]) -> tuple[list[dict[str, Any]], dict[tuple[str, str], str]]:
    listed = [
        {"session": s, "particle": f"p{k}", "x": v} for s, values in sessions.items() for k, v in enumerate(values)
    ]
    return listed, {(row["session"], row["particle"]): "glass" for row in listed}


def test_mean_is_that_of_session_means_whatever_the_number_of_particles() -> None:
    listed, group_of = rows({"a": [1.0] * 40, "b": [2.0], "c": [3.0]})
    (result,) = by_group(listed, group_of, "x", components={}, coverage=0.95)
    assert result.mean == pytest.approx(2.0)
    assert result.u == pytest.approx(1.0 / math.sqrt(3))
    assert result.high - result.mean == pytest.approx(T_975_2 / math.sqrt(3))


def test_one_session_gives_a_description_and_no_interval() -> None:
    listed, group_of = rows({"a": [1.0, 2.0, 4.0]})
    (result,) = by_group(listed, group_of, "x", components={}, coverage=0.95)
    assert math.isnan(result.mean)
    assert math.isnan(result.low)
    assert (result.least, result.median, result.most) == (1.0, 2.0, 4.0)


def test_what_sessions_share_does_not_shrink_with_more_of_them() -> None:
    rng = np.random.default_rng(3)
    sessions = {f"s{k:03d}": [float(rng.normal(10, 0.01))] for k in range(400)}
    listed, group_of = rows(sessions)
    parts = {key: {"trap/a/x": 0.2} for key in group_of}
    (result,) = by_group(listed, group_of, "x", components=parts, coverage=0.95)
    assert result.u == pytest.approx(0.2, rel=1e-3)
    assert result.high - result.mean == pytest.approx(1.96 * 0.2, rel=2e-3)


def test_sessions_that_happen_to_agree_do_not_beat_their_own_scatter() -> None:
    listed, group_of = rows({"a": [1.0, 3.0], "b": [0.0, 4.0]})
    (result,) = by_group(listed, group_of, "x", components={}, coverage=0.95)
    within = (2 * 1.0 + 2 * 4.0) / 2  # pooled variance of a particle
    assert result.u == pytest.approx(math.sqrt(within / 2 / 2))


def test_interval_covers_the_true_mean_as_often_as_stated() -> None:
    rng = np.random.default_rng(11)
    hits = 0
    for _ in range(1500):
        sessions = {name: (5 + rng.normal(0, 0.5) + rng.normal(0, 0.3, 6)).tolist() for name in ("a", "b", "c", "d")}
        listed, group_of = rows(sessions)
        (result,) = by_group(listed, group_of, "x", components={}, coverage=0.95)
        hits += result.low <= 5 <= result.high
    # The lower bound on the scatter only ever widens: never below 95 % within three standard errors of 1500 draws.
    assert 0.95 - 3 * math.sqrt(0.95 * 0.05 / 1500) <= hits / 1500 <= 0.98


def test_missing_values_leave_their_particle_out() -> None:
    listed, group_of = rows({"a": [1.0, math.nan], "b": [math.nan]})
    (result,) = by_group(listed, group_of, "x", components={}, coverage=0.95)
    assert (result.sessions, result.particles) == (1, 1)
