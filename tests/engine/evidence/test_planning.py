"""Plans agree with the textbook, with simulation, and with each other."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest
from numpy.testing import assert_allclose
from scipy import stats
from statsmodels.stats.power import normal_sample_size_one_tail

from workbench.engine.evidence import planning
from workbench.engine.evidence.planning import (
    independent_samples,
    plan_pairs,
    plan_sentences,
    power_of,
    samples_by_fisher,
    samples_needed,
    significance_level,
    smallest_correlation,
)
from workbench.errors import NumericsError


def test_samples_for_small_medium_and_large_correlations_are_the_known_ones() -> None:
    # Cohen 1988, table 3.4.1 (two-sided 0.05, power 0.80), within 2; from memory: 783, 84, 28.
    strengths = (0.1, 0.3, 0.5)
    assert [samples_by_fisher(r, 0.05) for r in strengths] == [783, 85, 30]
    assert_allclose([samples_needed(r, 0.05) for r in strengths], [783, 85, 30], atol=1)


def test_samples_by_fisher_are_those_of_statsmodels() -> None:
    # One normal mean of size atanh(r), unit variance per sample beyond the three that Fisher takes off.
    for r, alpha in ((0.2, 0.05), (0.6, 1e-5)):
        n = 3 + normal_sample_size_one_tail(np.arctanh(r), 0.8, alpha / 2, std_null=1)
        assert samples_by_fisher(r, alpha) == int(np.ceil(n))


@pytest.mark.parametrize(
    ("r", "n", "rank", "alpha"), [(0.9, 12, 2, 1e-3), (0.5, 40, 3, 1e-3), (0.7, 24, 1, 1e-4)]
)
def test_power_is_that_of_simulated_studies(r: float, n: int, rank: int, alpha: float) -> None:
    rng = np.random.default_rng(1)
    m = n - rank
    x, e = rng.normal(size=(2, m, 40_000))
    y = r * x + np.sqrt(1.0 - r**2) * e
    seen = (x * y).sum(axis=0) / np.sqrt((x**2).sum(axis=0) * (y**2).sum(axis=0))
    p = 2 * stats.t.sf(np.abs(seen) * np.sqrt((m - 1) / (1 - seen**2)), m - 1)
    assert_allclose(power_of(r, n, alpha, rank), np.mean(p <= alpha), atol=0.02)


def test_the_threshold_keeps_the_rate_in_expectation() -> None:
    share, power = 0.01, 0.7
    alpha = significance_level(0.05, share, power)
    false, true = (1.0 - share) * alpha, share * power
    assert_allclose(false / (false + true), 0.05, rtol=1e-12)


def test_size_and_samples_are_inverse_to_each_other_and_monotone() -> None:
    for n, rank in ((12, 2), (30, 1), (200, 5)):
        r = smallest_correlation(n, 1e-5, 0.8, rank)
        assert_allclose(power_of(r, n, 1e-5, rank), 0.8, atol=1e-9)
        assert samples_needed(r + 1e-9, 1e-5, 0.8, rank) == n
    sizes = [smallest_correlation(n, 1e-5) for n in range(6, 60)]
    assert (np.diff(sizes) < 0).all()
    assert samples_needed(-0.4, 1e-5) == samples_needed(0.4, 1e-5)


def test_six_against_six_finds_only_what_is_nearly_perfect() -> None:
    plan = plan_pairs(12, [3000, 250], rank=2)
    assert plan.pairs == 750_000
    assert_allclose(plan.alpha, 0.05 * 0.001 * 0.8 / (0.999 * 0.95))
    assert 0.94 < plan.smallest < 0.97
    told = plan_sentences(plan)
    assert "750,000 pairs, of which 0.1 % are" in told[0]
    assert "rate of 5 % a" in told[0]
    assert "from |r| = 0.95 up" in told[1]


def test_repeated_samples_count_as_changes_or_as_subjects() -> None:
    assert independent_samples(20, 3, "subjects") == (20, 1)
    n, rank = independent_samples(15, 4, "visits")
    assert n - rank - 1 == 15 * 3 - 3 - 1
    assert plan_pairs(3, [10, 10, 10]).pairs == 300
    assert "no correlation can be found" in plan_sentences(plan_pairs(3, [10, 10]))[1]


def test_the_table_of_the_handbook_is_that_of_the_formula() -> None:
    page = Path(planning.__file__).parents[2] / "guide" / "plan.md"
    rows = [
        line.strip("|").split("|")
        for line in page.read_text("utf-8").splitlines()
        if line[:1] == "|" and line[:4].strip("| ").isdigit()
    ]
    assert len(rows) == 9
    for n, alone, grouped in rows:
        for rank, told in ((1, alone), (2, grouped)):
            assert f"{plan_pairs(int(n), [20_000, 500], rank=rank).smallest:.2f}" == told.strip()


@pytest.mark.parametrize(
    ("call", "message"),
    [
        (lambda: significance_level(0.0, 0.1, 0.8), "fdr is 0.0"),
        (lambda: samples_needed(1.0, 0.05), "the correlation is 1.0"),
        (lambda: samples_needed(1e-4, 0.05), "needs more than 10000000 samples"),
        (lambda: smallest_correlation(4, 0.05, rank=2), "at least 5 samples are needed"),
        (lambda: plan_pairs(20, [100]), "at least two layers"),
        (lambda: independent_samples(10, 1, "visits"), "need two visits a subject"),
        (lambda: independent_samples(0), "give at least 1 of each"),
    ],
)
def test_impossible_plans_are_refused(call, message: str) -> None:
    with pytest.raises(NumericsError, match=message):
        call()
