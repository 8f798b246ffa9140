"""Gaps: censoring is found where it is, drawn under the limit, and does not bring dilution back."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
from numpy.testing import assert_allclose, assert_array_equal
from prepare.measured import limited_logs, step_table
from scipy import optimize, stats

from workbench.prepare.censoring import find_censoring
from workbench.prepare.gaps import FillGaps
from workbench.prepare.low_tails import LowTails, fit_low_tails
from workbench.prepare.steps import FitContext
from workbench.prepare.tables import StepTable

NO_GROUPS = FitContext(None, 1)


def usable(values: np.ndarray) -> np.ndarray:
    return (~np.isnan(values)).mean(axis=0) >= 0.35


def limited(seed: int, n: int = 60, p: int = 400, **how: float) -> tuple[np.ndarray, np.ndarray, StepTable]:
    """Return the truth, the dilutions, and the table after normalisation, features seen often enough."""
    logs, dilutions, lost = limited_logs(np.random.default_rng(seed), n, p, **how)
    values = np.where(lost, np.nan, logs)
    keep = usable(values)
    return logs[:, keep], dilutions, step_table(values[:, keep], dilutions)


def filled(table: StepTable, seed: int = 1, drawn: bool = False) -> StepTable:
    return FillGaps(censored=True, drawn=drawn).fit(table, FitContext(None, seed)).transform(table)[0]


def test_a_detection_limit_is_found_and_chance_gaps_are_not_taken_for_one() -> None:
    rng = np.random.default_rng(1)
    for seed in range(10):
        logs, _, table = limited(seed)
        assert find_censoring(table.values).evident
        scattered = np.where(rng.random(logs.shape) < rng.beta(1, 8, logs.shape[1]), np.nan, logs)
        scattered = scattered[:, usable(scattered)]
        assert not find_censoring(scattered).evident


def test_censored_features_are_weak_ones_with_more_gaps_than_chance_makes() -> None:
    logs, dilutions, table = limited(2, random=0.03)
    found = find_censoring(table.values)
    by_limit = np.isnan(table.values).mean(axis=0) - 0.03 > 0.15
    assert found.censored[by_limit].mean() > 0.95
    assert_allclose(found.random_rate, 0.03, atol=0.02)
    strongest = logs.mean(axis=0) > np.quantile(logs.mean(axis=0), 0.7)
    assert not found.censored[strongest].any()
    assert dilutions.size == len(table.values)


def test_few_features_or_no_gaps_are_no_evidence() -> None:
    rng = np.random.default_rng(3)
    values = np.sort(rng.normal(10, 3, (30, 19)), axis=1)
    assert not find_censoring(np.where(values < 8, np.nan, values)).evident
    assert not find_censoring(rng.normal(10, 3, (30, 50))).evident


def test_mean_sd_and_limit_of_censored_features_are_recovered() -> None:
    rng = np.random.default_rng(4)
    n, p = 400, 60
    mean, sd = rng.uniform(9, 11, p), rng.uniform(0.7, 1.3, p)
    logs, scale = mean + sd * rng.standard_normal((n, p)), rng.normal(0, 0.5, n)
    limit = mean + sd * rng.uniform(-1.2, -0.2, p)
    lost = (logs + scale[:, None] < limit) | (rng.random((n, p)) < 0.03)
    tails = fit_low_tails(np.where(lost, np.nan, logs), scale, 0.03)
    for found, true in ((tails.mean, mean), (tails.sd, sd), (tails.limit, limit)):
        assert_allclose(np.mean(found - true), 0.0, atol=0.03)
        assert np.sqrt(np.mean((found - true) ** 2)) < 0.13


def test_moments_are_the_most_likely_ones_of_a_censored_normal_sample() -> None:
    """Against a direct maximum of the likelihood, all samples of one scale, no gaps by chance."""
    rng = np.random.default_rng(5)
    values = rng.normal(10, 1, (300, 40))
    values[values < 9.5] = np.nan
    tails = fit_low_tails(values, np.zeros(300), 0.0)
    seen = values[~np.isnan(values[:, 7]), 7]

    def loss(mean_and_sd: np.ndarray) -> float:
        below = stats.norm.logcdf(tails.limit[7], *mean_and_sd)
        return float(-stats.norm.logpdf(seen, *mean_and_sd).sum() - (300 - seen.size) * below)

    best = optimize.minimize(loss, [10.0, 1.0], method="Nelder-Mead").x
    assert_allclose([tails.mean[7], tails.sd[7]], best, atol=0.03)


def test_draws_lie_under_each_samples_own_limit_even_far_out() -> None:
    tails = LowTails(np.array([10.0, 10.0]), np.array([1.0, 0.1]), np.array([9.0, 4.0]), 0.0)
    scale = np.array([0.0, 2.0, -1.0])
    drawn = tails.draw(np.full((3, 2), 0.999), scale)
    assert np.isfinite(drawn).all()
    assert (drawn < np.array([9.0, 4.0]) - scale[:, None]).all()


def test_draws_follow_the_truncated_normal() -> None:
    uniforms = (np.arange(2000)[:, None] + 0.5) / 2000
    tails = LowTails(np.array([10.0]), np.array([2.0]), np.array([9.5]), 0.0)
    drawn = tails.draw(uniforms, np.zeros(2000))[:, 0]
    assert stats.kstest(drawn, stats.truncnorm(-np.inf, -0.25, 10, 2).cdf).pvalue > 0.999


def test_chance_of_censoring_is_bayes_rule() -> None:
    tails = LowTails(np.array([10.0]), np.array([1.0]), np.array([9.0]), 0.05)
    below = stats.norm.cdf(-1.0)
    assert_allclose(tails.censored_chances(np.zeros(1)), below / (below + 0.05 * (1 - below)))


def test_dilution_does_not_come_back_through_the_gaps() -> None:
    """Weak features may not follow dilution; with one limit for all samples they would."""
    excess = []
    for seed in range(6):
        logs, dilutions, table = limited(seed)
        weak = np.isnan(table.values).mean(axis=0) > 0.25
        unaware = table.shifted(-table.scale).with_values(table.values)
        follow = [
            np.mean([np.corrcoef(column, dilutions)[0, 1] for column in values[:, weak].T])
            for values in (filled(table).values, filled(unaware).values, logs)
        ]
        excess.append([follow[0] - follow[2], follow[1] - follow[2]])
    aware, one_limit = np.mean(excess, axis=0)
    assert abs(aware) < 0.07
    assert one_limit > 0.2


def test_filled_weak_features_keep_their_order_of_samples() -> None:
    logs, _, table = limited(7)
    gaps = np.isnan(table.values).mean(axis=0)
    result = filled(table).values
    follow = np.array([np.corrcoef(result[:, j], logs[:, j])[0, 1] for j in range(logs.shape[1])])
    assert follow[(gaps > 0) & (gaps <= 0.1)].mean() > 0.95
    assert follow[gaps > 0.25].mean() > 0.7


def test_seed_changes_the_draws_and_nothing_else() -> None:
    _, _, table = limited(8)
    one, other = filled(table, seed=1, drawn=True), filled(table, seed=2, drawn=True)
    gaps = np.isnan(table.values)
    assert_array_equal(one.values[~gaps], other.values[~gaps])
    assert_array_equal(filled(table, seed=1, drawn=True).values, one.values)
    assert (one.values != other.values)[gaps].mean() > 0.5
    assert_array_equal(one.imputed, gaps)
    assert_array_equal(filled(table, seed=1).values, filled(table, seed=2).values)


def test_a_value_to_be_expected_is_the_mean_of_many_draws() -> None:
    """Over 100 seeds, to five standard errors of the mean; chance, low tail and neighbours weighed as by lot."""
    _, _, table = limited(10, p=150)
    step = FillGaps(censored=True).fit(table, NO_GROUPS)
    expected = step.transform(table)[0].values
    drawn = np.stack(
        [
            replace(step, settings=FillGaps(censored=True, drawn=True), seed=seed).transform(table)[0].values
            for seed in range(100)
        ]
    )
    error = drawn.std(axis=0) / 10.0
    assert (np.abs(drawn.mean(axis=0) - expected) <= 5.0 * error + 1e-9).mean() > 0.999


def test_expected_values_are_those_of_the_truncated_normal_even_far_out() -> None:
    tails = LowTails(np.array([10.0, 3.0]), np.array([2.0, 0.1]), np.array([9.5, 1.0]), 0.0)
    by_scipy = [
        stats.truncnorm(-np.inf, -0.25).mean() * 2.0 + 10.0,
        stats.truncnorm(-np.inf, -20.0).mean() * 0.1 + 3.0,
    ]
    assert_allclose(tails.expected(np.zeros(1))[0], by_scipy, rtol=1e-6)


def test_filled_values_follow_the_true_ones_better_than_draws() -> None:
    logs, _, table = limited(11)
    weak = np.isnan(table.values).mean(axis=0) > 0.1
    follow = [
        np.mean(
            [
                np.corrcoef(column, truth)[0, 1]
                for column, truth in zip(values.T, logs[:, weak].T, strict=True)
            ]
        )
        for values in (filled(table, drawn=drawn).values[:, weak] for drawn in (False, True))
    ]
    assert follow[0] > follow[1] + 0.02


def test_account_tells_how_many_gaps_were_low_and_why() -> None:
    _, _, table = limited(9)
    account = FillGaps(censored=True).fit(table, NO_GROUPS).transform(table)[1]
    numbers = account.numbers
    assert (
        numbers["from_under_the_limit"] + numbers["from_similar_samples"]
        == numbers["gaps"]
        == np.isnan(table.values).sum()
    )
    assert "taken for values under the detection limit, as gaps grow rarer with abundance" in account.sentence
    drawn = FillGaps(censored=True, drawn=True).fit(table, NO_GROUPS).transform(table)[1]
    low = numbers["from_under_the_limit"]
    assert abs(drawn.numbers["from_under_the_limit"] - low) < 5 * np.sqrt(low)
    plain = FillGaps(censored=False).fit(table, NO_GROUPS).transform(table)[1]
    assert plain.numbers["from_similar_samples"] == numbers["gaps"]


def test_a_table_without_gaps_passes_as_it_is() -> None:
    table = step_table(np.arange(12.0).reshape(4, 3))
    result, account = FillGaps(censored=True).fit(table, NO_GROUPS).transform(table)
    assert result is table
    assert account.sentence == "no gaps"
