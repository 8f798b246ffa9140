"""Intensities: zeros, seen features and dilution."""

from __future__ import annotations

import numpy as np
import pytest
from numpy.testing import assert_allclose, assert_array_equal
from prepare.measured import intensities, step_table, table_of
from scipy import stats

from workbench.errors import InputError
from workbench.prepare import recipe_for
from workbench.prepare.intensities import ZerosAreMissing
from workbench.prepare.quotients import Quotients
from workbench.prepare.steps import DropRarelySeen, FitContext

NO_GROUPS = FitContext(None, 1)


def diluted(seed: int, n: int, p: int, spread: float = 0.3) -> tuple[np.ndarray, np.ndarray]:
    rng = np.random.default_rng(seed)
    dilutions = np.exp(rng.normal(0, 0.5, n))
    values = rng.lognormal(10, 2, p) * np.exp(rng.normal(0, spread, (n, p)))
    return values * dilutions[:, None], dilutions


def test_zero_means_missing_and_the_account_counts_them() -> None:
    table, account = ZerosAreMissing().transform(step_table(np.array([[0.0, 2.0], [3.0, np.nan]])))
    assert_array_equal(table.values, [[np.nan, 2.0], [3.0, np.nan]])
    assert account.numbers == {"zeros": 1, "values": 4}


@pytest.mark.parametrize(("smallest_group", "needed"), [(None, 14), (10, 7), (5, 4), (2, 2), (1, 2)])
def test_kept_is_what_seven_tenths_of_the_smallest_group_would_fill(smallest_group, needed) -> None:
    values = np.where(np.arange(20)[:, None] < np.arange(21), 5.0, np.nan)
    fitted = DropRarelySeen().fit(step_table(values), FitContext(smallest_group, 1))
    assert_array_equal(fitted.keep, np.arange(21) >= needed)
    assert fitted.account.dropped["F1"] == f"measured in 1 of 20 samples; {needed} needed"


def test_who_is_in_the_smallest_group_makes_no_difference() -> None:
    values = np.full((12, 4), 3.0)
    values[:6, 0], values[6:, 1], values[::2, 2] = np.nan, np.nan, np.nan
    fitted = DropRarelySeen().fit(step_table(values), FitContext(6, 1))
    assert fitted.keep.all()


def test_dilution_of_one_sample_changes_nothing_but_a_constant_of_the_table() -> None:
    table = intensities(n=16)
    factor = np.r_[8.0, np.ones(15)][:, None]
    recipe = recipe_for("metabolites", "intensities")
    one = recipe.fit_transform(table, smallest_group=8, seed=1)
    other = recipe.fit_transform(table_of(table.values * factor), smallest_group=8, seed=1)
    change = (other.values - one.values)[~one.imputed]
    assert_allclose(change, change[0], atol=1e-9)


def test_new_sample_is_scaled_against_the_training_reference_alone() -> None:
    values, _ = diluted(3, 12, 200)
    fitted = Quotients().fit(step_table(values[:8]), NO_GROUPS)
    one = fitted.factors(step_table(values[8:]))
    assert_allclose(fitted.factors(step_table(values[8:] * 3)), 3 * one, rtol=1e-12)
    assert_allclose(fitted.factors(step_table(values[[9]])), one[1], rtol=1e-12)


def test_a_fifth_of_features_up_a_hundredfold_moves_the_dilution_as_a_median_would() -> None:
    """The median of all is then the quantile 0.5 / 0.8 of the unchanged ones, in samples that were not learnt from."""
    values, _ = diluted(4, 240, 1000)
    fitted = Quotients().fit(step_table(values[:200]), NO_GROUPS)
    new, changed = values[200:], values[200:] * np.r_[np.full(200, 100.0), np.ones(800)]
    shift = np.log(fitted.factors(step_table(changed)) / fitted.factors(step_table(new)))
    assert_allclose(shift.mean(), stats.norm.ppf(0.5 / 0.8) * 0.3, atol=0.01)


def test_gaps_at_low_abundance_do_not_bend_the_dilution() -> None:
    values, dilutions = diluted(5, 40, 1000)
    seen = np.where(values < np.quantile(values, 0.2), np.nan, values)
    table = step_table(seen)
    fitted = Quotients().fit(table, NO_GROUPS)
    slope = np.polyfit(np.log(dilutions), np.log(fitted.factors(table)), 1)[0]
    assert_allclose(slope, 1.0, atol=0.03)


def test_reference_is_the_features_seen_most() -> None:
    values, _ = diluted(6, 10, 150)
    values[0, :20] = np.nan
    whole = Quotients().fit(step_table(values), NO_GROUPS)
    assert (whole.used.sum(), whole.cut) == (130, 10)
    values[1, 20:60] = np.nan
    sparse = Quotients().fit(step_table(values), NO_GROUPS)
    assert (sparse.used.sum(), sparse.cut) == (150, 9)


def test_fewer_than_ten_features_are_not_normalised() -> None:
    values = np.arange(1.0, 19.0).reshape(2, 9)
    table, account = Quotients().fit(step_table(values), NO_GROUPS).transform(step_table(values))
    assert_array_equal(table.values, values)
    assert account.sentence == "not scaled: fewer than 10 features; values taken as they are"


def test_account_names_the_most_and_the_least_diluted_sample() -> None:
    values = np.outer([1.0, 4.0, 0.5, 1.0], np.arange(1.0, 21.0))
    numbers = Quotients().fit(step_table(values), NO_GROUPS).transform(step_table(values))[1].numbers
    assert (numbers["smallest_concentration_in"], numbers["largest_concentration_in"]) == ("S002", "S001")
    assert_allclose(float(numbers["largest_concentration"]) / float(numbers["smallest_concentration"]), 8.0)


def test_negative_intensities_and_empty_samples_are_refused() -> None:
    values = intensities().values.copy()
    values[1] = np.nan
    recipe = recipe_for("metabolites", "intensities")
    with pytest.raises(
        InputError, match=r"no value in any of the \d+ features that the dilution rests on: 'S001'"
    ):
        recipe.fit(table_of(values), smallest_group=5, seed=1)
    values[1, 3] = -1.5
    with pytest.raises(
        InputError,
        match=r"1 intensity is negative, .* 'F3', sample 'S001': -1.5; .* leave such cells empty .*values = .log",
    ):
        recipe.fit(table_of(values), smallest_group=5, seed=1)


def test_zeros_that_are_amounts_take_no_part_in_the_dilution() -> None:
    values, dilutions = diluted(7, 20, 300)
    values[np.random.default_rng(8).random(values.shape) < 0.6] = 0.0
    factors = Quotients().fit(step_table(values), NO_GROUPS).factors(step_table(values))
    relative = factors / dilutions
    assert_allclose(relative / np.median(relative), 1.0, atol=0.15)
