"""Folds divide the samples and spread every level of the design over all of them."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from numpy.testing import assert_array_equal

from workbench.engine.folds import balanced_folds
from workbench.errors import NumericsError


@given(n=st.integers(2, 60), seed=st.integers(0, 10_000), levels=st.integers(1, 6), data=st.data())
@settings(max_examples=80, deadline=None)
def test_one_factor_is_spread_as_evenly_as_numbers_allow(
    n: int, seed: int, levels: int, data: st.DataObject
) -> None:
    """Sizes and the counts of every level differ by at most one between folds."""
    folds = data.draw(st.integers(2, n))
    labels = np.random.default_rng(seed).integers(levels, size=n)
    tests = [test for _, test in balanced_folds(labels, n, folds, seed)]
    assert np.ptp([test.size for test in tests]) <= 1
    for level in np.unique(labels):
        assert np.ptp([np.count_nonzero(labels[test] == level) for test in tests]) <= 1


@given(n=st.integers(2, 60), seed=st.integers(0, 10_000), data=st.data())
@settings(max_examples=40, deadline=None)
def test_folds_divide_the_samples(n: int, seed: int, data: st.DataObject) -> None:
    """Every sample is tested once, and trains in every other fold; positions come sorted."""
    parts = balanced_folds(None, n, data.draw(st.integers(2, n)), seed)
    assert_array_equal(np.sort(np.concatenate([test for _, test in parts])), np.arange(n))
    for train, test in parts:
        assert_array_equal(np.sort(np.concatenate([train, test])), np.arange(n))
        assert np.all(np.diff(train) > 0)
        assert np.all(np.diff(test) > 0)


@pytest.mark.parametrize("seed", range(20))
def test_every_level_of_several_factors_is_in_every_training_part(seed: int) -> None:
    """Four run days and two groups, one day with three samples only: no training part lacks a level."""
    rng = np.random.default_rng(seed)
    day = np.repeat([0, 1, 2, 3], [12, 14, 11, 3])
    factors = np.column_stack([rng.integers(2, size=40), day])
    for train, _ in balanced_folds(factors, 40, 5, seed):
        for column in factors.T:
            assert_array_equal(np.unique(column[train]), np.unique(column))


def test_text_labels_work_and_the_seed_decides() -> None:
    """The same seed gives the same folds, another seed others."""
    labels = np.array(["watered", "drought"] * 10)
    first, again, other = (balanced_folds(labels, 20, 4, seed) for seed in (1, 1, 2))
    for (_, a), (_, b) in zip(first, again, strict=True):
        assert_array_equal(a, b)
    assert any(not np.array_equal(a, b) for (_, a), (_, b) in zip(first, other, strict=True))


@pytest.mark.parametrize("folds", [0, 1, 7])
def test_impossible_numbers_of_folds_are_refused(folds: int) -> None:
    with pytest.raises(NumericsError, match=f"{folds} folds for 6 samples; allowed: from 2"):
        balanced_folds(None, 6, folds, 0)


@pytest.mark.parametrize("labels", [np.zeros(5), np.zeros((6, 0)), np.zeros((6, 1, 1))])
def test_labels_of_another_shape_are_refused(labels: np.ndarray) -> None:
    with pytest.raises(NumericsError, match="one row for each of the 6 samples"):
        balanced_folds(labels, 6, 2, 0)
