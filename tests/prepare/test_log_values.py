"""Logarithms: medians."""

from __future__ import annotations

import numpy as np
import pytest
from numpy.testing import assert_allclose, assert_array_equal
from prepare.measured import log, step_table, table_of

from workbench.errors import InputError
from workbench.prepare import recipe_for
from workbench.prepare.log_values import MedianCentring
from workbench.prepare.steps import FitContext

NO_GROUPS = FitContext(None, 1)


def test_shifting_a_sample_changes_nothing_but_a_constant_of_the_table() -> None:
    table = log(n=16)
    shift = np.r_[3.0, np.zeros(15)][:, None]
    recipe = recipe_for("proteins", "log")
    one = recipe.fit_transform(table, smallest_group=8, seed=1)
    other = recipe.fit_transform(table_of(table.values + shift), smallest_group=8, seed=1)
    change = (other.values - one.values)[~one.imputed]
    assert_allclose(change, change[0], atol=1e-9)


def test_training_and_new_samples_end_at_the_training_median() -> None:
    rng = np.random.default_rng(2)
    values = rng.normal(8, 1, (9, 201)) + rng.normal(0, 2, (9, 1))
    fitted = MedianCentring().fit(step_table(values[:6]), NO_GROUPS)
    centred = fitted.transform(step_table(values))[0].values
    assert_allclose(np.median(centred, axis=1), np.median(np.median(values[:6], axis=1)), rtol=1e-12)


def test_few_features_are_not_centred() -> None:
    values = np.arange(18.0).reshape(2, 9)
    table, account = MedianCentring().fit(step_table(values), NO_GROUPS).transform(step_table(values))
    assert_array_equal(table.values, values)
    assert account.sentence.startswith("not centred: fewer than 10 features")


def test_a_sample_without_values_is_named() -> None:
    values = log().values.copy()
    values[4] = np.nan
    with pytest.raises(
        InputError, match="no value in any of the 108 features that the median rests on: 'S004'"
    ):
        recipe_for("proteins", "log").fit(table_of(values), smallest_group=5, seed=1)
