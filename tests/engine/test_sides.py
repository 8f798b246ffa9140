"""A side of several blocks: equal total variance, constants left out, shares that add up."""

from __future__ import annotations

import numpy as np
import pytest
from numpy.testing import assert_allclose, assert_array_equal

from workbench.engine.sides import block_slices, read_side, standard_side
from workbench.errors import NumericsError


def draw(n: int, p: int, seed: int = 0) -> np.ndarray:
    return np.random.default_rng(seed).normal(size=(n, p)) * 3.0 + 7.0


def test_features_get_unit_variance() -> None:
    """One block: mean 0 and variance 1 with n - c degrees of freedom."""
    x = draw(12, 5)
    assert_allclose(standard_side(x).values.var(axis=0, ddof=1), 1.0, rtol=1e-12)
    assert_allclose((standard_side(x, rank=4).values ** 2).sum(axis=0), 8.0, rtol=1e-12)
    assert_allclose(standard_side(x).values.mean(axis=0), 0.0, atol=1e-12)


def test_blocks_of_a_side_weigh_the_same() -> None:
    """2 features and 30 features: equal total variance, and the side's total is that of one block."""
    x = draw(12, 32)
    x[:, 5] = 4.0
    values = standard_side(x, [2, 30]).values
    total = (values**2).sum(axis=0)
    assert_allclose(total[:2].sum(), total[2:].sum(), rtol=1e-12)
    assert_allclose(total.sum(), (standard_side(x).values ** 2).sum(), rtol=1e-12)


def test_a_block_without_variation_leaves_the_others_alone() -> None:
    """Its features are left out and the remaining block weighs as if it were alone."""
    x = np.hstack([draw(9, 3), np.ones((9, 2))])
    side = standard_side(x, [3, 2])
    assert_array_equal(side.varies, [True, True, True, False, False])
    assert_allclose(side.values, standard_side(x[:, :3]).values, rtol=1e-12)
    assert_array_equal(side.scale[3:], 1.0)


def test_shares_add_up_and_own_scores_explain_all() -> None:
    """Variates that span a side explain it wholly, each beyond those before it; others explain less."""
    x = draw(20, 3)
    side = standard_side(x, [1, 2])
    other = draw(20, 2, seed=4) - draw(20, 2, seed=4).mean(axis=0)
    variates = side.values @ np.array([[1.0, 1.0, 0.0], [0.0, 1.0, 0.0], [0.0, 0.0, 1.0]])
    reading = read_side(side, np.zeros((20, 3)), variates, other)
    assert reading.explained.shape == (3, 2)
    assert_allclose(reading.explained.sum(axis=0), 1.0, rtol=1e-12)
    assert_allclose(reading.explained[0], [1.0, np.mean(reading.correlations[1:, 0] ** 2)], rtol=1e-12)
    assert np.all(reading.redundancy.sum(axis=0) < 0.5)


def test_regression_gives_the_same_cumulated_share() -> None:
    """The cumulated share is the mean R2 of the features regressed on the variates."""
    side = standard_side(draw(25, 6))
    variates = side.values @ np.random.default_rng(2).normal(size=(6, 2))
    fitted = variates @ np.linalg.lstsq(variates, side.values, rcond=None)[0]
    share = (fitted**2).sum(axis=0) / (side.values**2).sum(axis=0)
    reading = read_side(side, np.zeros((25, 2)), variates, variates)
    assert_allclose(reading.explained.sum(), share.mean(), rtol=1e-10)


@pytest.mark.parametrize("sizes", [[2, 2], [], [5, 0], [6, -1]])
def test_sizes_that_do_not_add_up_are_refused(sizes: list[int]) -> None:
    with pytest.raises(NumericsError, match=r"block sizes .* of side X, which has 5 features"):
        block_slices(sizes, 5, "X")


def test_a_constant_side_is_refused() -> None:
    with pytest.raises(NumericsError, match="none of the 2 features of side Y varies over the 4 samples"):
        standard_side(np.ones((4, 2)), side="Y")
