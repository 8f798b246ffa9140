"""The law of the largest eigenvalue of noise, effective features, and the noise of single samples."""

from __future__ import annotations

import numpy as np
import pytest
from numpy.testing import assert_allclose

from workbench.engine.noise_reach import effective_features, largest_root_p, sample_noise, shrink_to_common


@pytest.mark.parametrize(("n", "p"), [(5, 200), (10, 20), (30, 60), (30, 1000)])
def test_the_p_of_the_largest_eigenvalue_is_uniform_in_its_tail(n: int, p: int) -> None:
    """Rates at 0.1, 0.05 and 0.01 in 2,000 noise blocks, to 4 standard errors (and 0.01 for the approximation)."""
    rng = np.random.default_rng(2)
    found = []
    for _ in range(2000):
        g = rng.normal(size=(n, p))
        found.append(largest_root_p(np.linalg.eigvalsh(g @ g.T)[-1], n, p))
    for level in (0.1, 0.05, 0.01):
        error = 4.0 * np.sqrt(level * (1.0 - level) / 2000)
        assert abs(np.mean(np.array(found) < level) - level) < error + 0.01 * (level > 0.01)


def test_the_law_has_the_moments_of_tracy_and_widom() -> None:
    """Mean -1.2065 and variance 1.6078 of the law of order 1 (Tracy & Widom 1996; from memory)."""
    n, p = 400.0, 800.0
    side, other = np.sqrt(n - 0.5), np.sqrt(p - 0.5)
    width = (side + other) * (1.0 / side + 1.0 / other) ** (1.0 / 3.0)
    grid = np.linspace(-8.0, 8.0, 4001)
    beyond = np.array([largest_root_p((side + other) ** 2 + s * width, n, p) for s in grid])
    mass = -np.diff(beyond)
    middle = (grid[1:] + grid[:-1]) / 2.0
    mean = float(np.sum(middle * mass))
    assert mean == pytest.approx(-1.2065, abs=2e-3)
    assert float(np.sum((middle - mean) ** 2 * mass)) == pytest.approx(1.6078, abs=5e-3)


def test_samples_and_features_may_be_exchanged() -> None:
    assert largest_root_p(130.0, 20, 45) == pytest.approx(largest_root_p(130.0, 45, 20))


@pytest.mark.parametrize("copies", [1, 4])
def test_copies_of_features_count_once(copies: int) -> None:
    """300 features of 60 samples, each ``copies`` times: 300 effective ones, to a tenth."""
    rng = np.random.default_rng(3)
    found = []
    for _ in range(20):
        g = np.repeat(rng.normal(size=(60, 300)), copies, axis=1)
        found.append(effective_features(np.linalg.eigvalsh(g @ g.T), 10_000))
    assert np.mean(found) == pytest.approx(300.0, rel=0.1)


def test_equal_eigenvalues_mean_as_many_features_as_there_can_be() -> None:
    assert effective_features(np.full(10, 3.0), 500) == 500.0
    assert effective_features(np.array([1.0]), 500) == 500.0


def test_unequal_noise_of_samples_is_found_beside_strong_factors() -> None:
    rng = np.random.default_rng(4)
    true = rng.lognormal(0.0, 0.5, 40)
    x = rng.normal(size=(40, 2000)) * np.sqrt(true)[:, None] + 3.0 * rng.normal(size=(40, 2)) @ rng.normal(
        size=(2, 2000)
    )
    x = x - x.mean(axis=0)
    found = sample_noise(x @ x.T)
    assert np.corrcoef(np.log(found), np.log(true))[0, 1] > 0.97


def test_an_empty_kernel_has_equal_noise() -> None:
    assert_allclose(sample_noise(np.zeros((6, 6))), 1.0)


def test_spread_that_chance_explains_is_drawn_to_one_and_no_other() -> None:
    chance = np.array([0.99, 1.01, 1.0, 1.0])
    assert_allclose(shrink_to_common(chance, 100.0), 1.0)
    wide = np.array([0.5, 1.5, 0.8, 1.2])
    assert_allclose(shrink_to_common(wide, 1e6), wide, rtol=1e-3)
    assert_allclose(shrink_to_common(np.ones(4), 10.0), 1.0)
