"""Upper quartile and trimmed mean of M: what moves them, and what does not."""

from __future__ import annotations

import numpy as np
import pytest
from numpy.testing import assert_allclose, assert_array_equal
from prepare.measured import step_table, table_of

from workbench.errors import InputError
from workbench.prepare import recipe_for
from workbench.prepare.read_scales import TrimmedMeans, UpperQuartile
from workbench.prepare.steps import FitContext
from workbench.settings import prepare_settings

NO_GROUPS = FitContext(None, 1)
both = pytest.mark.parametrize("step", [UpperQuartile(), TrimmedMeans()])


def reads(seed: int, n: int = 12, p: int = 600) -> tuple[np.ndarray, np.ndarray]:
    rng = np.random.default_rng(seed)
    depths = rng.lognormal(0, 0.4, n)
    means = rng.lognormal(5, 1.2, p) * np.exp(rng.normal(0, 0.2, (n, p)))
    return rng.poisson(means * depths[:, None]).astype(float), depths


@both
def test_planted_depths_are_recovered(step: UpperQuartile | TrimmedMeans) -> None:
    values, depths = reads(1)
    factors = step.fit(step_table(values), NO_GROUPS).factors(step_table(values))
    relative = factors / depths
    assert_allclose(relative / np.median(relative), 1.0, atol=0.08)
    assert_allclose(np.log(factors).mean(), 0.0, atol=1e-12)


@both
def test_new_samples_are_scaled_against_training_alone(step: UpperQuartile | TrimmedMeans) -> None:
    values, _ = reads(2)
    fitted = step.fit(step_table(values[:8]), NO_GROUPS)
    together = fitted.factors(step_table(values[8:]))
    assert_array_equal(fitted.factors(step_table(values[[9]])), together[[1]])
    assert_allclose(fitted.factors(step_table(4 * values[8:])), 4 * together, rtol=0.02)


@both
def test_fewer_than_ten_features_are_not_scaled(step: UpperQuartile | TrimmedMeans) -> None:
    values = np.arange(1.0, 37.0).reshape(4, 9) * 10
    table, account = step.fit(step_table(values), NO_GROUPS).transform(step_table(values))
    assert_array_equal(table.values, values)
    assert account.sentence == "no size factors: fewer than 10 features; counts taken as they are"


@both
def test_missing_counts_take_no_part(step: UpperQuartile | TrimmedMeans) -> None:
    values, _ = reads(3)
    gappy = values.copy()
    gappy[np.random.default_rng(4).random(values.shape) < 0.02] = np.nan
    whole = step.fit(step_table(values), NO_GROUPS).factors(step_table(values))
    assert_allclose(step.fit(step_table(gappy), NO_GROUPS).factors(step_table(gappy)), whole, rtol=0.08)


def test_a_sample_without_a_figure_is_named() -> None:
    values, _ = reads(5)
    settings = prepare_settings("x", "counts", {"normalisation": "upper_quartile"})
    fitted = recipe_for("x", "counts", settings).fit(table_of(values), smallest_group=6, seed=1)
    new = np.where(np.arange(600) < 60, values[:1], 0.0)
    with pytest.raises(
        InputError,
        match=r"1 of 1 samples have no value in any of the \d+ features that the size factor rests on: 'S000'",
    ):
        fitted.transform(table_of(new))


def test_the_reference_sample_of_trimmed_means_is_in_the_account() -> None:
    values, _ = reads(6)
    step = TrimmedMeans().fit(step_table(values), NO_GROUPS)
    account = step.transform(step_table(values))[1]
    assert f"against sample '{step.reference_sample}', over 600 features" in account.sentence
