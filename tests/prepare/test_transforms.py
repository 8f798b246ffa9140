"""Skewed readings, ordered text and methylated shares become what the settings ask for."""

from __future__ import annotations

import numpy as np
import pytest
from numpy.testing import assert_allclose, assert_array_equal
from prepare.measured import mixed, step_table, table_of
from scipy import stats

from workbench.errors import InputError
from workbench.prepare import PreparedTable, recipe_for
from workbench.prepare.beta import m_values
from workbench.prepare.steps import FitContext
from workbench.prepare.tables import MeasuredTable
from workbench.prepare.transforms import Transform, normal_scores, skewness
from workbench.settings import prepare_settings

NO_GROUPS = FitContext(None, 1)


def prepared(kind: str, table: MeasuredTable, **table_of_settings: object) -> PreparedTable:
    recipe = recipe_for("clinical", kind, prepare_settings("clinical", kind, table_of_settings))
    return recipe.fit_transform(table, smallest_group=None, seed=1)


def readings(n: int = 30) -> np.ndarray:
    rng = np.random.default_rng(1)
    return np.column_stack([rng.lognormal(2, 1, n), rng.normal(50, 5, n), -rng.lognormal(0, 1, n)])


def test_skewness_is_scipys() -> None:
    values = readings()
    assert_allclose(skewness(values), stats.skew(values, axis=0), rtol=1e-10)


def test_logarithms_of_named_and_of_skewed_features() -> None:
    values = readings()
    expected = values.copy()
    expected[:, 0] = np.log2(values[:, 0])
    for features in (["F0"], "skewed"):
        result = prepared("continuous", table_of(values), transform="log", transform_features=features)
        assert_allclose(result.values, expected, rtol=1e-12)


def test_ranks_become_normal_scores() -> None:
    values = readings(9)
    result = prepared("continuous", table_of(values), transform="rank")
    expected = stats.norm.ppf((stats.rankdata(values, axis=0) - 0.375) / 9.25)
    assert_allclose(result.values, expected, rtol=1e-10)


def test_new_values_have_ranks_between_known_ones_and_never_beyond() -> None:
    known = np.array([1.0, 2.0, 2.0, 5.0])
    scores = normal_scores(np.array([-9.0, 1.0, 2.0, 3.5, 5.0, 99.0, np.nan]), known)
    assert_allclose(scores[[0, 1]], stats.norm.ppf(0.625 / 4.25))
    assert_allclose(scores[[4, 5]], stats.norm.ppf(3.625 / 4.25))
    assert_allclose(scores[2], stats.norm.ppf(2.125 / 4.25))
    assert scores[2] < scores[3] < scores[4]
    assert np.isnan(scores[6])


def test_logarithms_of_zero_are_refused_in_training_and_missing_later() -> None:
    values = readings()
    with pytest.raises(InputError, match=r"log of zero or less in 1 feature: 'F2'; name the features"):
        prepared("continuous", table_of(values), transform="log")
    fitted = Transform("log", ("F0",)).fit(step_table(values), NO_GROUPS)
    later, account = fitted.transform(step_table(np.array([[0.0, -1.0, 3.0]])))
    assert_array_equal(later.values, [[np.nan, -1.0, 3.0]])
    assert account.numbers["not_positive"] == 1


def test_text_is_not_transformed_and_its_columns_stay() -> None:
    table = mixed()
    plain, ranked = prepared("mixed", table), prepared("mixed", table, transform="rank")
    assert plain.features == ranked.features
    same = [np.array_equal(a, b) for a, b in zip(plain.values.T, ranked.values.T, strict=True)]
    numeric = [table.feature_levels[table.features.index(name)] is None for name in plain.origins]
    assert_array_equal(same, ~np.array(numeric))


def test_ordered_text_becomes_its_places() -> None:
    codes = np.array([0.0, 1.0, 2.0, np.nan, 2.0, 0.0])
    table = table_of(np.column_stack([codes, np.arange(6)]), (("high", "low", "mid"), None))
    result = prepared("mixed", table, ordered={"F0": ["low", "mid", "high"]})
    assert_array_equal(result.values[:, 0], [2.0, 0.0, 1.0, 1.0, 1.0, 2.0])
    assert result.features == ("F0", "F1")
    assert next(s for s in result.account if s.step == "text to numbers").numbers["coding of F0"] == (
        "0 = low, 1 = mid, 2 = high"
    )


def test_names_that_the_block_lacks_are_refused_with_the_nearest() -> None:
    with pytest.raises(
        InputError, match=r"`ordered` names 1 feature .* first 'F00'; did you mean 'F0'.*blocks.NAME.prepare"
    ):
        prepared("mixed", mixed(), ordered={"F00": ["a", "b"]})
    with pytest.raises(InputError, match=r"`transform_features` names .* the first 'crp'"):
        prepared("continuous", table_of(readings()), transform="log", transform_features=["crp"])
    with pytest.raises(InputError, match=r"levels of 'F1' that `ordered` does not list: 'yes'"):
        prepared("mixed", mixed(), ordered={"F1": ["no", "maybe"]})
    with pytest.raises(InputError, match=r"`transform_features` names features of text: 'F1'"):
        prepared("mixed", mixed(), transform="log", transform_features=["F1"])


def test_shares_of_nought_and_one_are_finite_and_opposite() -> None:
    values = m_values(np.array([0.0, 0.25, 0.5, 0.75, 1.0]), 0.001)
    assert_allclose(values, -values[::-1], atol=1e-12)
    assert_allclose(values[4], np.log2(1001.0), rtol=1e-12)
    assert (np.diff(values) > 0).all()


def test_percentages_and_m_values_are_no_shares() -> None:
    with pytest.raises(
        InputError, match=r"outside 0 to 1, .* 'F1', sample 'S000': 50; .* divide percentages by 100"
    ):
        prepared("beta", table_of([[0.5, 50.0], [0.1, 20.0]]))
    with pytest.raises(InputError, match='M-values are logarithms; set values = "log" in'):
        prepared("beta", table_of([[0.5, -2.0], [0.1, 0.2]]))
