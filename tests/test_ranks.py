"""Chance of each rank, intervals of ranks, and groups that cannot be told apart."""

from __future__ import annotations

import math

import numpy as np
import pytest
from scipy import sparse, stats

from reduction.groupmeans import GroupMeans, group_means
from reduction.pairs import Pair
from reduction.ranks import alike, rank_intervals, rank_probabilities
from reduction.sessionmeans import Cells


def means(values: dict[str, list[float]], common: float = 0.0) -> GroupMeans:
    """Groups of sessions of one exactly measured particle, with one error common to all."""
    group = tuple(name for name in sorted(values) for _ in values[name])
    y = np.array([v for name in sorted(values) for v in values[name]])
    size, nothing = len(y), np.zeros(len(y))
    shared = np.full((size, 1), common)
    names = tuple(f"s{k}" for k in range(size))
    cells = Cells(
        names, group, np.ones(size), y, nothing, nothing, nothing, sparse.csr_array(shared), ("trap/x/d",), ("trap",)
    )
    return group_means(cells)


def pair(a: str, b: str, difference: float, p: float) -> Pair:
    return Pair(a, b, difference, p=p, p_holm=p)


def test_chance_of_two_ranks_is_that_of_the_difference_of_two_students_t() -> None:
    found = means({"a": [1.0, 2.0, 4.0], "b": [0.0, 1.5, 2.5, 3.0]})
    chances = rank_probabilities(found, seed=1, trials=200_000)
    u = np.sqrt(found.private)
    # exact, by quadrature over the t of a: P(mean_a + u_a t_2 > mean_b + u_b t_3)
    grid = np.linspace(1e-5, 1 - 1e-5, 20001)
    a = found.mean[0] + u[0] * stats.t.ppf(grid, 2)
    exact = float(np.mean(stats.t.cdf((a - found.mean[1]) / u[1], 3)))
    assert chances[0, 0] == pytest.approx(exact, abs=0.005)
    assert chances.sum(axis=0).tolist() == pytest.approx([1.0, 1.0])
    assert chances.sum(axis=1).tolist() == pytest.approx([1.0, 1.0])


def test_rank_one_is_the_most_positive() -> None:
    chances = rank_probabilities(
        means({"low": [-5.0, -5.1, -5.05], "top": [3.0, 3.1, 3.05], "zero": [0.0, 0.1, 0.05]}), seed=1, trials=4000
    )
    assert np.argmax(chances, axis=1).tolist() == [2, 0, 1]


def test_an_error_common_to_all_changes_no_rank() -> None:
    values = {"a": [1.0, 1.2, 1.1], "b": [1.1, 1.3, 1.4]}
    bare = rank_probabilities(means(values), seed=4, trials=5000)
    shared = rank_probabilities(means(values, common=50.0), seed=4, trials=5000)
    assert shared == pytest.approx(bare)


def test_ranks_are_the_same_for_the_same_seed_and_others_for_another() -> None:
    found = means({"a": [1.0, 1.2], "b": [1.1, 1.3]})
    once, again = (rank_probabilities(found, seed=9, trials=3000) for _ in range(2))
    assert once.tolist() == again.tolist()
    assert rank_probabilities(found, seed=10, trials=3000).tolist() != once.tolist()


def test_a_group_of_one_session_has_no_rank() -> None:
    found = means({"a": [1.0, 1.2], "alone": [9.0], "b": [1.1, 1.3]})
    assert found.tested == (0, 2)
    assert rank_probabilities(found, seed=1, trials=1000).shape == (2, 2)


def test_rank_interval_counts_who_is_surely_above_and_below() -> None:
    pairs = [pair("a", "b", 1.0, 0.2), pair("a", "c", 3.0, 0.001), pair("b", "c", 2.0, 0.01)]
    assert rank_intervals(pairs, alpha=0.05) == {"a": (1, 2), "b": (1, 2), "c": (3, 3)}
    assert rank_intervals(pairs, alpha=0.005) == {"a": (1, 2), "b": (1, 3), "c": (2, 3)}


def test_sets_that_cannot_be_told_apart_may_overlap() -> None:
    pairs = [pair("a", "b", 1.0, 0.2), pair("a", "c", 2.0, 0.001), pair("b", "c", 1.0, 0.3), pair("a", "d", 9.0, 0.0),
             pair("b", "d", 8.0, 0.0), pair("c", "d", 7.0, 0.0)]  # fmt: skip
    found = alike(pairs, {"a": 9.0, "b": 8.0, "c": 7.0, "d": 0.0}, alpha=0.05)
    assert found == [("a", "b"), ("b", "c"), ("d",)]


def test_untested_pairs_tie_nothing() -> None:
    assert alike([Pair("a", "b", 1.0)], {"a": 1.0, "b": 0.0}, alpha=0.05) == []
    assert rank_intervals([Pair("a", "b", 1.0)], alpha=0.05) == {}


def test_true_rank_lies_in_the_interval_at_least_as_often_as_stated() -> None:
    from reduction.pairs import pairs_of

    rng, hits = np.random.default_rng(6), 0
    truth = {"a": 2.0, "b": 1.0, "c": 0.9, "d": -3.0}
    for _ in range(400):
        found = means({name: rng.normal(level, 0.6, 4).tolist() for name, level in truth.items()})
        ranges = rank_intervals(pairs_of(found, coverage=0.95), alpha=0.05)
        hits += all(low <= rank <= high for rank, (low, high) in enumerate(ranges.values(), 1))
    assert hits / 400 >= 0.95 - 3 * math.sqrt(0.05 * 0.95 / 400)


def test_an_error_of_one_group_alone_unsettles_its_rank() -> None:
    group, y = ("a",) * 3 + ("b",) * 3, np.array([1.0, 1.1, 1.2, 0.0, 0.1, 0.2])
    names, nothing = tuple(f"s{k}" for k in range(6)), np.zeros(6)
    shared = np.array([[50.0]] * 3 + [[0.0]] * 3)
    cells = Cells(
        names, group, np.ones(6), y, nothing, nothing, nothing, sparse.csr_array(shared), ("trap/x/d",), ("trap",)
    )
    chances = rank_probabilities(group_means(cells), seed=1, trials=20_000)
    assert chances[0, 0] == pytest.approx(float(stats.norm.cdf(1.0 / 50.0)), abs=0.012)
