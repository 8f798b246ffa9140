"""The p of the smallest p: counted by hand, valid under dependence, ties counted."""

from __future__ import annotations

import numpy as np
from hypothesis import given, settings
from hypothesis import strategies as st
from hypothesis.extra.numpy import arrays
from numpy.testing import assert_allclose, assert_array_equal

from workbench.engine.smallest_p import smallest_p


@given(arrays(float, st.tuples(st.integers(1, 25), st.integers(1, 4)), elements=st.integers(0, 5)))
@settings(max_examples=80, deadline=None)
def test_counting_by_hand_gives_the_same(statistics: np.ndarray) -> None:
    """Every arrangement's count by plain loops, then the stated order: smallest, then product."""
    reached = np.array([[np.sum(column >= value) for value in column] for column in statistics.T]).T
    keys = [(row.min(), round(float(np.log(row).sum()), 9)) for row in reached]
    extreme = sum(key <= keys[0] for key in keys)
    result = smallest_p(statistics)
    assert result.p == extreme / len(statistics)
    assert result.exceedances == extreme - 1
    assert_array_equal(result.by_statistic, reached[0] / len(statistics))


def test_one_statistic_gives_the_plain_permutation_p() -> None:
    """(1 + number at least as large) / (1 + B), never 0."""
    statistics = np.array([3.0, 1.0, 5.0, 3.0, 2.0])[:, None]
    assert smallest_p(statistics).p == 3 / 5
    assert smallest_p(np.array([[9.0], [1.0]])).p == 1 / 2


def test_ties_are_relative() -> None:
    """Rounding at 1e-12 of a value is a tie at any scale; a difference of 1e-6 is not."""
    for scale in (1e-12, 1.0, 1e12):
        assert smallest_p(scale * np.array([[1.0], [1.0 - 1e-12]])).p == 1.0
        assert smallest_p(scale * np.array([[1.0], [1.0 - 1e-6]])).p == 0.5


def test_monotone_changes_of_a_statistic_do_not_matter() -> None:
    """Only the order within each statistic counts."""
    statistics = np.random.default_rng(0).normal(size=(200, 5))
    changed = np.column_stack([statistics[:, :2], np.exp(statistics[:, 2:])])
    assert smallest_p(changed).p == smallest_p(statistics).p


def test_copies_of_a_statistic_cost_nothing() -> None:
    """Twenty copies give the p of one: the number of statistics is not what is paid for."""
    statistic = np.random.default_rng(1).normal(size=(500, 1))
    assert smallest_p(np.tile(statistic, 20)).p == smallest_p(statistic).p


def test_every_p_is_equally_likely() -> None:
    """Each arrangement taken as the observed one in turn: p is uniform over them, correlated statistics or not."""
    rng = np.random.default_rng(2)
    statistics = rng.normal(size=(60, 6)) + 2.0 * rng.normal(size=(60, 1))
    p = [smallest_p(np.roll(statistics, -k, axis=0)).p for k in range(60)]
    assert_allclose(np.sort(p), np.arange(1, 61) / 60, atol=1.5 / 60)
