"""Arrangements: all of them once where they are few, else draws that do not depend on the batches."""

from __future__ import annotations

from itertools import permutations

import numpy as np
import pytest
from numpy.testing import assert_array_equal
from scipy.stats import chisquare

from workbench.engine.arrangements import arrangement_batches, count_arrangements

SEED = np.random.SeedSequence(5)


def test_all_are_enumerated_once_without_the_identity() -> None:
    found = np.vstack(list(arrangement_batches(4, 23, True, SEED, 7)))
    assert set(map(tuple, found)) == set(permutations(range(4))) - {(0, 1, 2, 3)}
    assert len(found) == 23


@pytest.mark.parametrize("batch", [1, 7, 100])
def test_draws_do_not_depend_on_the_batches(batch: int) -> None:
    """Nor on how many are wanted."""
    want = np.vstack(list(arrangement_batches(9, 40, False, SEED, 40)))
    got = np.vstack(list(arrangement_batches(9, 25, False, SEED, batch)))
    assert_array_equal(got, want[:25])


def test_draws_are_fair() -> None:
    """2,400 draws of three: every order equally often (chi-square)."""
    drawn = np.vstack(list(arrangement_batches(3, 2400, False, SEED, 100)))
    _, counts = np.unique(drawn, axis=0, return_counts=True)
    assert counts.size == 6
    assert chisquare(counts).pvalue > 0.001


@pytest.mark.parametrize(("size", "count"), [(1, 1), (4, 24), (5, 120), (6, 500), (5000, 500)])
def test_counts_stop_at_the_limit(size: int, count: int) -> None:
    assert count_arrangements(size, 500) == count
