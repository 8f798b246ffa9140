"""Near-duplicates are found, whatever the order of the columns, and chance makes none."""

from __future__ import annotations

import time

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from numpy.testing import assert_allclose, assert_array_equal

from workbench.engine.evidence.clusters import near_duplicates
from workbench.engine.tails import critical_r
from workbench.errors import NumericsError


def _block(seed: int, n: int = 40, groups: int = 8, others: int = 30) -> tuple[np.ndarray, np.ndarray]:
    """Return groups of four copies of one feature among others; the group of each feature, -1: none."""
    rng = np.random.default_rng(seed)
    own = np.repeat(rng.normal(size=(n, groups)), 4, axis=1) + 0.1 * rng.normal(size=(n, 4 * groups))
    x = np.hstack([own, rng.normal(size=(n, others))]) + rng.normal(size=4 * groups + others)
    return x, np.append(np.repeat(np.arange(groups), 4), np.full(others, -1))


def test_copies_are_one_cluster_each_and_the_rest_is_alone() -> None:
    x, group = _block(1)
    found = near_duplicates(x)
    assert found.n_clusters == 8
    for k in range(8):
        assert np.unique(found.leader[group == k]).size == 1
        assert group[found.leader[group == k]][0] == k
    assert_array_equal(found.size[group == -1], 1)
    assert_array_equal(found.size[group >= 0], 4)


@given(seed=st.integers(0, 2**32), noise=st.sampled_from([0.2, 0.4, 0.6]))
@settings(max_examples=30, deadline=None)
def test_the_order_of_columns_and_their_units_change_no_cluster(seed: int, noise: float) -> None:
    rng = np.random.default_rng(seed)
    x = np.repeat(rng.normal(size=(30, 5)), 6, axis=1) + noise * rng.normal(size=(30, 30))
    x[:, 7] = x[:, 3]
    order = rng.permutation(30)
    one = near_duplicates(x, order=np.arange(30))
    other = near_duplicates(x[:, order], order=order)
    assert_array_equal(order[other.leader], one.leader[order])


def test_the_rule_is_kept_by_every_member_and_left_by_no_pair_of_leaders() -> None:
    rng = np.random.default_rng(2)
    x = np.repeat(rng.normal(size=(50, 10)), 8, axis=1) + 0.35 * rng.normal(size=(50, 80))
    found = near_duplicates(x)
    r = np.corrcoef(x.T)
    members = np.arange(80)
    assert_allclose(found.correlation, r[members, found.leader], atol=1e-12)
    assert (r[members, found.leader] >= found.bar - 1e-9).all()
    leaders = np.unique(found.leader)
    among = r[np.ix_(leaders, leaders)] - np.eye(leaders.size)
    assert among.max() < found.bar


def test_a_resemblance_that_the_group_alone_makes_is_none() -> None:
    rng = np.random.default_rng(3)
    group = np.repeat([0.0, 1.0], 20)[:, None]
    x = rng.normal(size=(40, 20)) + 20.0 * group
    assert near_duplicates(x).n_clusters > 0
    assert near_duplicates(x, group).n_clusters == 0


def test_few_samples_raise_the_bar_so_that_chance_makes_no_cluster() -> None:
    studies = [near_duplicates(np.random.default_rng(seed).normal(size=(8, 300))) for seed in range(60)]
    assert_allclose(studies[0].bar, critical_r(0.1 / (300 * 299 / 2), 6))
    assert sum(study.n_clusters > 0 for study in studies) <= 8


def test_opposite_features_constants_and_gaps_stand_alone() -> None:
    x = np.random.default_rng(4).normal(size=(30, 6))
    x[:, 1], x[:, 2] = -x[:, 0], 3.0
    x[2, 3] = np.nan
    found = near_duplicates(x)
    assert_array_equal(found.leader, np.arange(6))
    assert_array_equal(np.isnan(found.correlation), [False, False, True, True, False, False])
    assert_array_equal(near_duplicates(x[:, :1]).size, [1])


def test_many_features_take_little_memory_and_time() -> None:
    x = np.random.default_rng(5).normal(size=(30, 4000))
    x[:, 1::4] = x[:, ::4] + 0.01 * x[:, 1::4]
    start = time.process_time()
    found = near_duplicates(x)
    assert time.process_time() - start < 10.0
    assert found.n_clusters == 1000


def test_wrong_shapes_are_refused() -> None:
    x = np.random.default_rng(6).normal(size=(10, 5))
    with pytest.raises(NumericsError, match="the block has shape"):
        near_duplicates(x[:, 0])
    with pytest.raises(NumericsError, match="near is 1"):
        near_duplicates(x, near=1.0)
    with pytest.raises(NumericsError, match="leave no correlation"):
        near_duplicates(x, np.eye(10)[:, 1:])
