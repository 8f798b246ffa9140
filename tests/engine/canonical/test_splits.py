"""Splits of arrays: nothing in the training part, or in the rules, depends on the test samples."""

from __future__ import annotations

import numpy as np
import pytest
from numpy.testing import assert_allclose, assert_array_equal

from workbench.engine import Split, array_source, fit_residuals, standardise
from workbench.engine.nuisance import Nuisance
from workbench.errors import NumericsError

TRAIN, TEST = np.arange(12), np.arange(12, 16)


def draw(p: int, seed: int) -> np.ndarray:
    return np.random.default_rng(seed).normal(size=(16, p))


def split(x: np.ndarray, y: np.ndarray, columns: np.ndarray | None = None) -> Split:
    return array_source(x, y, columns)(TRAIN, TEST)


def test_the_training_part_is_standardised_without_nuisance() -> None:
    """Its kernel is that of the training rows standardised alone, also over many features; test rows by their rules."""
    x, y, columns = draw(1300, 0), draw(4, 1), draw(2, 2)
    got = split(x, y, columns)
    removed = Nuisance.of(columns[TRAIN], 12)
    assert got.nuisance_rank == 3
    for side, part in ((x, got.x), (y, got.y)):
        want, fitted = standardise(side[TRAIN], removed).values, fit_residuals(columns[TRAIN], side[TRAIN])
        assert part.n_features == side.shape[1]
        assert_allclose(part.train, want @ want.T, atol=1e-9)
        assert_allclose(part.test, fitted.standardised(columns[TEST], side[TEST]) @ want.T, atol=1e-9)


def test_test_samples_teach_nothing() -> None:
    """Wild values in one test sample change neither the training part nor another test sample."""
    x, y, columns = draw(30, 0), draw(4, 1), draw(2, 2)
    wild = x.copy()
    wild[15] = 1e6
    before, after = split(x, y, columns), split(wild, y, columns)
    assert_array_equal(before.x.train, after.x.train)
    assert_allclose(before.x.test[:3], after.x.test[:3], rtol=1e-12)
    assert np.all(np.abs(after.x.test[3]) > 1e3)


def test_nuisance_effects_of_any_size_leave_no_trace() -> None:
    """Adding a multiple of a nuisance column to every feature changes nothing, test samples included."""
    x, y, columns = draw(30, 0), draw(4, 1), draw(2, 2)
    before, after = split(x, y, columns), split(x + 50.0 * columns[:, :1], y, columns)
    assert_allclose(before.x.test, after.x.test, atol=1e-8)


def test_a_level_that_training_lacks_is_not_scored() -> None:
    """The only sample of a batch has no estimate of its batch: its row comes back missing."""
    batch = np.zeros((16, 1))
    batch[14] = 1.0
    got = split(draw(5, 0), draw(4, 1), batch)
    assert_array_equal(np.isnan(got.x.test).all(axis=1), [False, False, True, False])
    assert_array_equal(np.isnan(got.y.test).any(axis=1), [False, False, True, False])


def test_features_constant_in_training_are_dropped_there() -> None:
    """A feature that varies among the test samples alone is of no use, and blocks weigh without it."""
    x = draw(6, 0)
    x[TRAIN, 2] = 1.0
    got = array_source(x, draw(4, 1), x_block_sizes=[3, 3])(TRAIN, TEST)
    assert got.x.n_features == 5
    kernels = [
        one @ one.T for one in (standardise(x[TRAIN][:, block]).values for block in ([0, 1], [3, 4, 5]))
    ]
    assert_allclose(got.x.train, 5 / (2 * 2) * kernels[0] + 5 / (2 * 3) * kernels[1], rtol=1e-12)
    x[TRAIN] = 1.0
    with pytest.raises(NumericsError, match="no feature of side X varies among the 12 training samples"):
        split(x, draw(4, 1))


def test_unusable_arrays_are_refused() -> None:
    """Missing values and sides of different length are named before anything is split."""
    gap = draw(3, 0)
    gap[2, 1] = np.nan
    with pytest.raises(NumericsError, match="side Y has 1 missing or infinite values, the first in row 2"):
        array_source(draw(3, 1), gap)
    with pytest.raises(NumericsError, match="side X has 16 rows and side Y 9"):
        array_source(draw(3, 0), draw(3, 1)[:9])
