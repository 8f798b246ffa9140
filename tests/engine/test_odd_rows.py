"""Odd samples are shrunk, others are left alone, and an odd sample in both blocks makes no edges."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from numpy.testing import assert_allclose, assert_array_equal
from scipy import stats

from workbench.engine import screen_pairs
from workbench.engine.odd_rows import steady_rows
from workbench.errors import NumericsError


def _block(rng: np.random.Generator, n: int, p: int, odd: int) -> np.ndarray:
    x = rng.normal(size=(n, p))
    x[:odd] += 3.0 * rng.normal(size=(odd, p))
    return x - x.mean(axis=0)


def test_blocks_without_odd_samples_are_left_as_they_are() -> None:
    rng = np.random.default_rng(1)
    for p in (60, 1000):
        x = _block(rng, 30, p, 0)
        found = steady_rows(x)
        assert_array_equal(found.values, x)
        assert found.odd.size == 0


@given(seed=st.integers(0, 2**32), odd=st.integers(1, 3))
@settings(max_examples=25, deadline=None)
def test_odd_samples_are_found_and_brought_to_the_usual_size(seed: int, odd: int) -> None:
    rng = np.random.default_rng(seed)
    x = _block(rng, 40, 400, odd) * rng.lognormal(size=400)
    found = steady_rows(x)
    assert_array_equal(found.odd, np.arange(odd))
    size = ((found.values / found.values.std(axis=0)) ** 2).mean(axis=1)
    assert_allclose(size[:odd], np.median(size), rtol=0.5)
    order = rng.permutation(40)
    assert_allclose(steady_rows(x[order]).values, found.values[order], atol=1e-9)


@pytest.mark.parametrize("reached", [200, 40])
def test_samples_strong_in_a_factor_are_not_odd(reached: int) -> None:
    """A factor strong in three samples makes them large in all features, or in a fifth; one that is odd is told."""
    rng = np.random.default_rng(7)
    factor = rng.normal(size=(40, 1))
    factor[:3] = [[4.0], [-4.0], [4.5]]
    x = rng.normal(size=(40, 200))
    x[:, :reached] += factor * rng.choice([-1.0, 1.0], reached) * np.sqrt(200 / reached)
    x[8] += 3.0 * rng.normal(size=200)
    found = steady_rows(x - x.mean(axis=0))
    assert_array_equal(found.odd, [8])
    assert_allclose(found.factors[8], 1.0 / np.sqrt(10.0), rtol=0.25)


def test_few_features_and_far_values_make_no_sample_odd() -> None:
    """Of 400 blocks of 1 to 20 features one in 100 may have a sample called odd; none for a tenth of its values."""
    rng = np.random.default_rng(9)
    called = [steady_rows(_block(rng, 60, p, 0)).odd.size > 0 for p in (1, 2, 5, 20) for _ in range(100)]
    assert stats.binomtest(int(np.sum(called)), 400, 0.01, alternative="greater").pvalue > 0.001
    x = _block(rng, 40, 200, 0)
    x[4, :20] += 6.0
    assert steady_rows(x).odd.size == 0


def test_an_odd_sample_in_both_blocks_makes_no_edges_and_hides_none() -> None:
    rng = np.random.default_rng(2)
    raw, steady = 0, 0
    for _ in range(40):
        x, y = _block(rng, 48, 200, 1), _block(rng, 48, 60, 1)
        raw += screen_pairs(x, y).n_edges > 0
        steady += screen_pairs(steady_rows(x).values, steady_rows(y).values).n_edges > 0
    assert raw == 40
    assert stats.binomtest(int(steady), 40, 0.05, alternative="greater").pvalue > 0.01
    y[:, :20] += 2.0 * x[:, :20]
    screen = screen_pairs(steady_rows(x).values, steady_rows(y).values)
    assert np.count_nonzero(screen.i == screen.j) == 20


def test_gaps_constants_and_nothing_at_all_are_no_trouble() -> None:
    x = _block(np.random.default_rng(3), 20, 50, 1)
    x[2, 4], x[:, 5] = np.nan, 0.0
    found = steady_rows(x)
    assert_array_equal(found.odd, [0])
    assert np.isnan(found.values[2, 4])
    assert_array_equal(steady_rows(np.zeros((5, 3))).factors, 1.0)
    with pytest.raises(NumericsError, match="give samples x features"):
        steady_rows(np.zeros(5))


def test_the_input_is_left_as_it_was() -> None:
    x = _block(np.random.default_rng(4), 20, 50, 1)
    before = x.copy()
    steady_rows(x)
    assert_array_equal(x, before)
