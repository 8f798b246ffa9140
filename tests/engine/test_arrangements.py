"""Arrangements: all of them once where they are few, else draws that do not depend on the batches."""

from __future__ import annotations

from itertools import permutations

import numpy as np
import pytest
from numpy.testing import assert_array_equal
from scipy.stats import chisquare

from workbench.engine.arrangements import Exchange
from workbench.engine.subjects import SubjectDesign

SEED = np.random.SeedSequence(5)


def test_all_are_enumerated_once_without_the_identity() -> None:
    found = np.vstack(list(Exchange.of_rows(4).batches(23, True, SEED, 7)))
    assert set(map(tuple, found)) == set(permutations(range(4))) - {(0, 1, 2, 3)}
    assert len(found) == 23


@pytest.mark.parametrize("batch", [1, 7, 100])
def test_draws_do_not_depend_on_the_batches(batch: int) -> None:
    """Nor on how many are wanted."""
    want = np.vstack(list(Exchange.of_rows(9).batches(40, False, SEED, 40)))
    got = np.vstack(list(Exchange.of_rows(9).batches(25, False, SEED, batch)))
    assert_array_equal(got, want[:25])


def test_draws_are_fair() -> None:
    """2,400 draws of three: every order equally often (chi-square)."""
    drawn = np.vstack(list(Exchange.of_rows(3).batches(2400, False, SEED, 100)))
    _, counts = np.unique(drawn, axis=0, return_counts=True)
    assert counts.size == 6
    assert chisquare(counts).pvalue > 0.001


@pytest.mark.parametrize(("size", "count"), [(1, 1), (4, 24), (5, 120), (6, 500), (5000, 500)])
def test_counts_stop_at_the_limit(size: int, count: int) -> None:
    assert Exchange.of_rows(size).count(500) == count


def test_whole_subjects_keep_the_order_of_their_visits() -> None:
    """Two patterns of visits, 3! x 2! arrangements: rows of a subject stay together, in order, in their pattern."""
    subject = np.array([0, 0, 1, 1, 2, 2, 3, 3, 3, 4, 4, 4])
    visit = np.array([1, 0, 0, 1, 0, 1, 0, 1, 2, 2, 1, 0])
    exchange = Exchange.of_subjects(SubjectDesign.of(subject, visit))
    assert exchange.count(1000) == 12
    found = np.vstack(list(exchange.batches(11, True, SEED, 4)))
    assert len(set(map(tuple, found))) == 11
    for one in found:
        assert_array_equal(visit[one], visit)
        assert [len(set(subject[one][subject == k])) for k in range(5)] == [1] * 5
        assert set(subject[one][:6]) == {0, 1, 2}


def test_replicates_stay_inside_their_subject() -> None:
    """3! x 2! arrangements of three and two replicates."""
    subject = np.array([0, 1, 0, 1, 0])
    exchange = Exchange.within_subjects(SubjectDesign.of(subject))
    found = np.vstack(list(exchange.batches(11, True, SEED, 100)))
    assert exchange.count(1000) == 12
    assert all((subject[one] == subject).all() for one in found)
