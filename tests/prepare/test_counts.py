"""Counts: the filter, the size factors and the logarithm."""

from __future__ import annotations

import numpy as np
import pytest
from numpy.testing import assert_allclose, assert_array_equal
from prepare.measured import counts, step_table, table_of

from workbench.errors import InputError
from workbench.prepare import recipe_for
from workbench.prepare.counts import CountFilter, LogOfCounts
from workbench.prepare.size_factors import SizeFactors
from workbench.prepare.steps import FitContext
from workbench.prepare.tables import MeasuredTable

NO_GROUPS = FitContext(None, 1)


def deep_counts(seed: int, n: int, p: int, depths: np.ndarray) -> np.ndarray:
    rng = np.random.default_rng(seed)
    means = rng.lognormal(5, 1, p) * np.exp(rng.normal(0, 0.3, (n, p)))
    return rng.poisson(means * depths[:, None]).astype(float)


@pytest.mark.parametrize(("smallest_group", "needed"), [(None, 2), (1, 2), (4, 4)])
def test_filter_asks_for_ten_reads_in_the_smallest_group_or_a_fifth(smallest_group, needed) -> None:
    values = np.where(np.arange(10)[:, None] < np.arange(11), 10.0, 9.0)
    fitted = CountFilter().fit(step_table(values), FitContext(smallest_group, 1))
    assert_array_equal(fitted.keep, np.arange(11) >= needed)
    assert fitted.account.dropped["F1"] == f"count of 10 or more in 1 of 10 samples; {needed} needed"


def test_planted_depths_are_recovered() -> None:
    depths = np.exp(np.random.default_rng(5).normal(0, 0.5, 20))
    table = step_table(deep_counts(6, 20, 2000, depths))
    factors = SizeFactors().fit(table, NO_GROUPS).factors(table)
    relative = factors / depths
    assert_allclose(relative / np.median(relative), 1.0, atol=0.04)


def test_a_sample_sequenced_twice_as_deeply_has_twice_the_factor() -> None:
    values = deep_counts(7, 12, 300, np.ones(12)) + 1
    fitted = SizeFactors().fit(step_table(values), NO_GROUPS)
    assert_allclose(
        fitted.factors(step_table(2 * values)), 2 * fitted.factors(step_table(values)), rtol=1e-12
    )
    scaled = values * np.r_[5.0, np.ones(11)][:, None]
    factors, other = fitted.factors(step_table(values)), SizeFactors().fit(step_table(scaled), NO_GROUPS)
    ratio = other.factors(step_table(scaled)) / factors
    assert_allclose(ratio[0] / ratio[1:], 5.0, rtol=1e-12)


def test_prepared_values_do_not_depend_on_the_depth_of_a_sample_in_deep_counts() -> None:
    values = deep_counts(8, 12, 300, np.ones(12)) * 1000 + 10_000
    deeper = values * np.r_[4.0, np.ones(11)][:, None]
    one, other = (
        recipe_for("transcripts", "counts").fit_transform(table_of(v), smallest_group=6, seed=1).values
        for v in (values, deeper)
    )
    assert_allclose(other - other[1, 0], one - one[1, 0], atol=2e-3)


def test_few_features_without_zeros_mean_positive_counts_only_and_the_account_says_so() -> None:
    rng = np.random.default_rng(9)
    values = deep_counts(9, 20, 400, np.ones(20))
    values[rng.random(values.shape) < 0.2] = 0.0
    table = step_table(values)
    fitted = SizeFactors().fit(table, NO_GROUPS)
    sentence = fitted.transform(table)[1].sentence
    assert fitted.positive_only
    assert sentence.startswith(
        f"only {fitted.complete} features have a count above 0 in every sample (100 wanted): size"
    )
    assert "positive counts only" in sentence
    assert_allclose(fitted.factors(table), 1.0, atol=0.15)


def test_new_sample_with_zeros_counts_them_as_ratios_of_zero() -> None:
    fitted = SizeFactors().fit(step_table(np.full((4, 101), 8.0)), NO_GROUPS)
    new = np.full((1, 101), 8.0)
    new[:, :50] = 0.0
    assert_allclose(fitted.factors(step_table(new)), 1.0)
    new[:, 50:76] = 2.0
    assert_allclose(fitted.factors(step_table(new)), 0.25)


def test_new_sample_that_is_mostly_zero_is_scaled_by_its_positive_counts() -> None:
    fitted = SizeFactors().fit(step_table(np.full((4, 101), 8.0)), NO_GROUPS)
    new = np.zeros((1, 101))
    new[:, :20] = 4.0
    assert_allclose(fitted.factors(step_table(new)), 0.5)


def test_fewer_than_ten_features_are_not_scaled() -> None:
    values = np.arange(1.0, 37.0).reshape(4, 9) * 10
    table, account = SizeFactors().fit(step_table(values), NO_GROUPS).transform(step_table(values))
    assert_array_equal(table.values, values)
    assert account.sentence == "no size factors: fewer than 10 features; counts taken as they are"


def test_zero_becomes_the_same_value_in_every_sample_however_deep() -> None:
    scaled, _ = step_table(np.array([[0.0, 8.0], [0.0, 64.0]])).divided(np.array([1.0, 8.0])), None
    values = LogOfCounts(prior=2.0).transform(scaled)[0].values
    assert_allclose(values, np.log2([[2.0, 10.0], [2.0, 10.0]]), rtol=1e-12)


def test_samples_without_reads_and_negative_counts_are_refused() -> None:
    table = counts()
    values = table.values.copy()
    values[3] = 0.0
    with pytest.raises(
        InputError, match=r"1 of 14 samples have no count above 0: 'S003'; set exclude = { S003"
    ):
        recipe_for("transcripts", "counts").fit(
            MeasuredTable(values, table.samples, table.features), smallest_group=5, seed=1
        )
    values[3, 2] = -4.0
    with pytest.raises(InputError, match="1 count is negative, the first at feature 'F2', sample 'S003': -4"):
        recipe_for("transcripts", "counts").fit(
            MeasuredTable(values, table.samples, table.features), smallest_group=5, seed=1
        )


def test_a_new_sample_with_nothing_in_the_reference_is_named() -> None:
    table = counts(p=60)
    fitted = recipe_for("transcripts", "counts").fit(table, smallest_group=5, seed=1)
    lost = [name in fitted.prepared.dropped for name in table.features]
    new = MeasuredTable(np.where(lost, 5.0, 0.0)[None, :], ("late",), table.features)
    with pytest.raises(
        InputError, match=r"no value in any of the \d+ features that the size factor rests on: 'late'"
    ):
        fitted.transform(new)


def test_missing_counts_are_filled_from_neighbours_and_marked() -> None:
    table = counts()
    values = table.values.copy()
    values[2, 10:20] = np.nan
    result = recipe_for("transcripts", "counts").fit_transform(
        MeasuredTable(values, table.samples, table.features), smallest_group=5, seed=1
    )
    whole = recipe_for("transcripts", "counts").fit_transform(table, smallest_group=5, seed=1)
    common = [name for name in result.features if name in whole.features]
    gaps = result.imputed[:, [result.features.index(name) for name in common]]
    error = (
        result.values[:, [result.features.index(name) for name in common]]
        - whole.values[:, [whole.features.index(name) for name in common]]
    )[gaps]
    assert 8 <= gaps.sum() <= 10
    assert np.sqrt(np.mean(error**2)) < 1.0
