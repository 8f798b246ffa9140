"""Intervals cover at the rate that they claim, selected ones too."""

from __future__ import annotations

import numpy as np
import pytest
from numpy.testing import assert_allclose, assert_array_equal
from scipy import stats

from workbench.engine import fisher_interval, screen_pairs
from workbench.engine.pairs.intervals import selected_error, selected_interval
from workbench.engine.tails import log_p_value


def test_interval_is_fishers_and_equals_the_library() -> None:
    x, y = np.random.default_rng(1).normal(size=(2, 25))
    y += x
    outcome = stats.pearsonr(x, y)
    expected = outcome.confidence_interval(0.99)
    low, high = fisher_interval(outcome.statistic, 25, 1, error=0.01)
    assert_allclose([low, high], [expected.low, expected.high], rtol=1e-12)


def test_ranks_widen_and_nuisance_costs_samples() -> None:
    narrow = np.ptp(fisher_interval(0.6, 30, 1))
    assert np.ptp(fisher_interval(0.6, 30, 1, spearman=True)) > narrow
    assert np.ptp(fisher_interval(0.6, 30, 6)) > narrow
    assert_allclose(fisher_interval(0.6, 35, 6), fisher_interval(0.6, 30, 1))


def test_ends_of_the_range() -> None:
    low, high = fisher_interval([1.0, -1.0, np.nan], 10, 1)
    assert_allclose([low[:2], high[:2]], [[1.0, -1.0], [1.0, -1.0]])
    assert np.isnan([low[2], high[2]]).all()
    assert_allclose(fisher_interval([0.3], 4, 2), [[-1.0], [1.0]])


@pytest.mark.parametrize("rho", [0.0, 0.7])
def test_coverage_of_a_planted_correlation(rho: float) -> None:
    rng = np.random.default_rng(2)
    x = rng.normal(size=(20, 4000))
    y = rho * x + np.sqrt(1 - rho**2) * rng.normal(size=x.shape)
    r = [stats.pearsonr(a, b).statistic for a, b in zip(x.T, y.T, strict=True)]
    low, high = fisher_interval(r, 20, 1, error=0.1)
    covered = int(((low <= rho) & (rho <= high)).sum())
    assert stats.binomtest(covered, 4000, 0.9).pvalue > 0.01


def test_selected_interval_leaves_out_zero_when_p_is_below_its_error() -> None:
    r = np.random.default_rng(4).uniform(-1, 1, 500)
    for error in (0.05, 1e-3, 1e-8):
        low, high = selected_interval(r, 18, 3, error)
        assert_array_equal((low > 0) | (high < 0), np.exp(log_p_value(r, 14)) < error)
    assert_allclose(selected_interval(0.5, 40, 1, 0.05), fisher_interval(0.5, 40, 1), atol=0.002)
    assert_allclose(selected_interval([1.0, 0.2], 3, 1, 1e-30), [[-1.0, -1.0], [1.0, 1.0]])


@pytest.mark.parametrize("rho", [0.0, 0.6])
def test_selected_interval_covers_far_in_the_tail(rho: float) -> None:
    r = _sampled(12, rho, 1_000_000)
    low, high = selected_interval(r, 12, 1, 1e-4)
    missed = int(((low > rho) | (high < rho)).sum())
    assert stats.binomtest(missed, r.size, 1.2e-4, alternative="greater").pvalue > 0.01
    low, high = fisher_interval(r, 12, 1, error=1e-4)
    assert ((low > rho) | (high < rho)).mean() > 2e-4


def _sampled(n: int, rho: float, draws: int) -> np.ndarray:
    """Sample correlations of normal pairs, from the Bartlett factors of the Wishart distribution."""
    rng = np.random.default_rng(5)
    first, second = np.sqrt(rng.chisquare(n - 1, draws)), np.sqrt(rng.chisquare(n - 2, draws))
    along, across = rho * first + np.sqrt(1 - rho**2) * rng.normal(size=draws), np.sqrt(1 - rho**2) * second
    return along / np.hypot(along, across)


def test_intervals_of_selected_pairs_miss_no_more_often_than_claimed() -> None:
    rng = np.random.default_rng(3)
    missed = given = naive_missed = 0
    for _ in range(40):
        x, noise = rng.normal(size=(2, 24, 40))
        y = 0.6 * x + 0.8 * noise
        screen = screen_pairs(x, y, fdr=0.1)
        truth = np.where(screen.i == screen.j, 0.6, 0.0)
        missed += int(((screen.r_low > truth) | (screen.r_high < truth)).sum())
        low, high = fisher_interval(screen.r, 24, 1)
        naive_missed += int(((low > truth) | (high < truth)).sum())
        given += screen.n_edges
    assert given > 500
    assert stats.binomtest(missed, given, 0.05, alternative="greater").pvalue > 0.01
    assert naive_missed > 0.05 * given


def test_rate_of_selected_intervals() -> None:
    assert_allclose(selected_error(20, 400), 0.05 * 20 / 400)
    assert selected_error(0, 400) == 0.05
