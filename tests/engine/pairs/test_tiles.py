"""Tiles point at every pair that they should, and rows do not depend on their company."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from numpy.testing import assert_allclose, assert_array_equal

from workbench.engine.nuisance import Nuisance
from workbench.engine.pairs.tiles import STEPS, Band, Limits, PairTiles, refine, scan, tail_histogram
from workbench.engine.pairs.unit_rows import UnitRows, unit_rows


def _tiles(x: np.ndarray, y: np.ndarray, limits: Limits | None = None, ranks: bool = False) -> PairTiles:
    nuisance = Nuisance.of(None, x.shape[0])
    sides = (UnitRows(side, nuisance, ranks=ranks) for side in (x, y))
    return PairTiles(*sides, n=x.shape[0], rank=1, limits=limits or Limits())


def _exact(x: np.ndarray, y: np.ndarray) -> np.ndarray:
    return np.abs(np.corrcoef(x.T, y.T)[: x.shape[1], x.shape[1] :])


@pytest.mark.parametrize("n", [4, 60, 2000, 4500])
def test_entries_are_within_the_margin_of_the_correlation(n: int) -> None:
    rng = np.random.default_rng(n)
    x, y = rng.lognormal(sigma=2.0, size=(n, 30)), rng.lognormal(sigma=2.0, size=(n, 40))
    pair = _tiles(x, y, Limits(outer=11, inner=13))
    outer_is_y = y.size > x.size
    for a, b, tile in pair.tiles():
        i, j = (b, a) if outer_is_y else (a, b)
        block = _exact(x, y)[i : i + 13, j : j + 13].T if outer_is_y else _exact(x, y)[i : i + 11, j : j + 13]
        assert np.abs(tile - block[: tile.shape[0], : tile.shape[1]]).max() <= pair.margin
    assert pair.single == (n < 4096)


@given(
    seed=st.integers(0, 2**32),
    outer=st.integers(1, 8),
    inner=st.integers(1, 8),
    held=st.sampled_from([0, 500, 10**6]),
)
@settings(max_examples=40, deadline=None)
def test_a_band_misses_nothing_however_close_to_its_bound(
    seed: int, outer: int, inner: int, held: int
) -> None:
    rng = np.random.default_rng(seed)
    x, y = rng.normal(size=(12, 9)), rng.normal(size=(12, 7))
    pair = _tiles(x, y, Limits(outer=outer, inner=inner, held_bytes=held))
    pair.hold()
    exact = np.abs(refine(pair, np.arange(63))).reshape(9, 7)
    assert_allclose(exact, _exact(x, y), atol=1e-14)
    bounds = exact.ravel()[:10]
    caught = scan(pair, [Band(bound - pair.margin, bound + pair.margin) for bound in bounds])
    for bound, part in zip(bounds, caught, strict=True):
        above = np.setdiff1d(np.flatnonzero(exact >= bound), part.keys)
        assert np.argmax(exact.ravel() == bound) in part.keys
        assert part.above == above.size


def test_too_many_pairs_in_a_band_are_counted_only() -> None:
    x, y = np.random.default_rng(1).normal(size=(2, 10, 20))
    (full,) = scan(_tiles(x, y), [Band(0.5, most=5)])
    (counted,) = scan(_tiles(x, y), [Band(0.5, 0.5)])
    assert full.overflow
    assert full.keys.size == 0
    assert counted.above == np.count_nonzero(_exact(x, y) >= 0.5)


def test_histogram_counts_every_testable_pair_once() -> None:
    x, y = np.random.default_rng(2).normal(size=(2, 10, 20))
    x[:, 3] = 1.0
    x[:, 4] = y[:, 5]
    pair = _tiles(x, y, Limits(outer=7, inner=3))
    tails = tail_histogram(pair)
    with np.errstate(invalid="ignore"):
        exact = _exact(x, y)
    assert tails[0] == pair.tests == 380
    for level in (0.1, 0.5, 0.9):
        step = int(level * STEPS)
        assert tails[step + 1] <= np.count_nonzero(exact >= level) <= tails[step - 1]


@given(start=st.integers(0, 30), width=st.integers(1, 20), ranks=st.booleans(), c=st.integers(0, 3))
@settings(max_examples=40, deadline=None)
def test_rows_are_the_same_bits_in_every_slice_and_order(start: int, width: int, ranks: bool, c: int) -> None:
    rng = np.random.default_rng(3)
    block, nuisance = rng.normal(size=(23, 40)), Nuisance.of(rng.normal(size=(23, c)), 23)
    whole, _ = unit_rows(block, nuisance, ranks=ranks)
    part, _ = unit_rows(block[:, start : start + width], nuisance, ranks=ranks)
    assert_array_equal(part, whole[start : start + width])
    order = rng.permutation(40)
    assert_array_equal(unit_rows(block[:, order], nuisance, ranks=ranks)[0], whole[order])


def test_rows_are_unit_residuals() -> None:
    rng = np.random.default_rng(4)
    block, nuisance = rng.normal(size=(23, 6)) + 50.0, Nuisance.of(rng.normal(size=(23, 2)), 23)
    block[:, 2] = 3.0
    block[4, 3] = np.inf
    rows, testable = unit_rows(block, nuisance, ranks=False)
    assert_array_equal(testable, [True, True, False, False, True, True])
    assert_allclose(np.linalg.norm(rows, axis=1), testable.astype(float), atol=1e-14)
    residual = nuisance.residuals(block[:, testable])
    assert_allclose(rows[testable].T, residual / np.linalg.norm(residual, axis=0), atol=1e-12)


@pytest.mark.parametrize("held_bytes", [0, 2000, 10**7])
def test_refined_correlations_do_not_depend_on_what_is_held(held_bytes: int) -> None:
    rng = np.random.default_rng(5)
    x, y = rng.normal(size=(11, 1500)), rng.normal(size=(11, 20))
    pair = _tiles(x, y, Limits(held_bytes=held_bytes))
    pair.hold()
    keys = rng.choice(30_000, 500)
    i, j = np.divmod(keys, 20)
    left, right = (unit_rows(side, Nuisance.of(None, 11), ranks=False)[0] for side in (x, y))
    expected = (left[i] * right[j]).sum(axis=1)
    assert_allclose(refine(pair, keys), expected, atol=1e-15)
    assert (pair.x.held is None) == (held_bytes < 8 * x.size)
