"""Pairs of two networks: what became of them, the test of the difference, the agreement of communities."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from numpy.testing import assert_allclose
from scipy.stats import kstest
from sklearn.metrics import adjusted_rand_score

from workbench.engine import benjamini_hochberg
from workbench.network.comparison import (
    PairSide,
    adjusted_over,
    adjusted_rand,
    community_table,
    difference_p,
    statuses,
)


def side(edge: list[bool], r: list[float], rows: float = 30.0) -> PairSide:
    return PairSide(np.array(edge), np.array(r), np.full(len(r), rows))


def test_what_became_of_a_pair() -> None:
    first = side([True, True, False, True, True], [0.8, 0.8, 0.1, 0.7, 0.9])
    second = side([True, True, True, False, False], [0.7, -0.8, 0.6, 0.5, np.nan])
    assert statuses(first, second).tolist() == ["kept", "reversed", "gained", "lost", "lost"]


def test_difference_worked_by_hand() -> None:
    """On 60 samples 0.62 and on 143 samples 0.47: z = (0.7250 - 0.5101) / sqrt(1/57 + 1/140) = 1.37, p = 0.171."""
    first, second = side([True], [0.62], 59.0), side([True], [0.47], 142.0)
    z = (np.arctanh(0.62) - np.arctanh(0.47)) / np.sqrt(1 / 57 + 1 / 140)
    assert z == pytest.approx(1.37, abs=0.01)
    assert difference_p(first, second)[0] == pytest.approx(0.171, abs=0.001)


@pytest.mark.parametrize("rho", [0.0, 0.6])
def test_p_is_uniform_where_correlations_are_equal(rho: float) -> None:
    """2,000 pairs of independent studies of 25 and 40 samples."""
    random = np.random.default_rng(8)
    r = []
    for n in (25, 40):
        x, e = random.normal(size=(2, n, 2000))
        y = rho * x + np.sqrt(1 - rho**2) * e
        x, y = x - x.mean(axis=0), y - y.mean(axis=0)
        r.append((x * y).sum(axis=0) / np.sqrt((x**2).sum(axis=0) * (y**2).sum(axis=0)))
    sides = [
        PairSide(np.ones(2000, bool), values, np.full(2000, n - 1.0))
        for values, n in zip(r, (25, 40), strict=True)
    ]
    assert kstest(difference_p(*sides), "uniform").pvalue > 0.01


def test_nothing_is_claimed_without_samples_or_measurements() -> None:
    first, second = side([True] * 3, [0.9, np.nan, 1.0], 2.0), side([True] * 3, [0.1, 0.1, 1.0])
    assert np.isnan(difference_p(first, second)).tolist() == [True, True, True]
    same = difference_p(side([True], [1.0]), side([True], [1.0]))
    assert_allclose(same, 1.0)


def test_strong_pairs_of_chance_are_not_called_changed() -> None:
    """40 studies of 2,000 pairs of no correlation: of the 100 strongest of one half some differ by Fisher's z alone."""
    random, called = np.random.default_rng(9), []
    for _ in range(40):
        r = np.tanh(random.normal(0, 1 / np.sqrt(27), (2, 2000)))
        picked = np.argsort(-np.abs(r[0]))[:100]
        sides = [PairSide(np.ones(100, bool), values[picked], np.full(100, 29.0)) for values in r]
        p = difference_p(*sides)
        called.append(((adjusted_over(p, 100) <= 0.05).any(), (adjusted_over(p, 2000) <= 0.05).any()))
    alone, among_all = np.mean(called, axis=0)
    assert alone > 0.5
    assert among_all <= 0.15


def test_rates_are_those_of_the_engine_when_all_are_given() -> None:
    p = np.random.default_rng(1).random(50)
    assert_allclose(adjusted_over(p, 50), benjamini_hochberg(p), rtol=1e-12)


def test_ranks_have_a_wider_spread() -> None:
    first, second = side([True], [0.8]), side([True], [0.4])
    assert difference_p(first, second, ranks=True)[0] > difference_p(first, second)[0]


@given(st.lists(st.tuples(st.integers(0, 4), st.integers(0, 4)), min_size=2, max_size=40))
def test_the_agreement_is_that_of_scikit_learn(labels: list[tuple[int, int]]) -> None:
    """Outside check: ``sklearn.metrics.adjusted_rand_score``."""
    first, second = zip(*labels, strict=True)
    assert adjusted_rand(first, second) == pytest.approx(adjusted_rand_score(first, second), abs=1e-12)


def test_each_community_finds_the_one_most_like_it() -> None:
    first = {("t", "a"): 1, ("t", "b"): 1, ("t", "c"): 1, ("t", "d"): 2, ("t", "e"): 2, ("t", "x"): 3}
    second = {("t", "a"): 2, ("t", "b"): 2, ("t", "d"): 1, ("t", "e"): 1, ("t", "f"): 1}
    table = community_table(first, second)
    assert table["most_like"].tolist()[:2] == [2, 1]
    assert table["shared"].tolist() == [2, 2, 0]
    assert_allclose(table["jaccard"], [2 / 3, 2 / 3, 0.0])
    assert table["most_like"].isna().tolist() == [False, False, True]
    assert len(community_table({}, second)) == 0
