"""Parts of a whole: zeros, log-ratios, and what they do not depend on."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from hypothesis.extra.numpy import arrays
from numpy.testing import assert_allclose, assert_array_equal
from prepare.measured import step_table, table_of

from workbench.errors import InputError
from workbench.prepare import recipe_for
from workbench.prepare.compositions import Prevalence, ReplaceZeros, centred_log_ratios, closed, replace_zeros
from workbench.prepare.steps import FitContext

NO_GROUPS = FitContext(None, 1)
PARTS = arrays(float, (4, 6), elements=st.sampled_from([0.0, 0.5, 1.0, 3.0, 40.0]))


def counts(seed: int, n: int = 30, p: int = 80, depths: np.ndarray | None = None) -> np.ndarray:
    rng = np.random.default_rng(seed)
    rates = rng.lognormal(1, 1.5, p) * np.exp(0.5 * rng.standard_normal((n, p)))
    rates /= rates.sum(axis=1, keepdims=True)
    depth = np.full(n, 5000.0) if depths is None else depths
    return rng.poisson(rates * depth[:, None]).astype(float)


@given(PARTS, st.floats(1e-4, 0.2))
def test_replacement_keeps_the_sum_and_the_ratios_of_what_was_there(parts: np.ndarray, limit: float) -> None:
    parts = closed(parts + np.eye(4, 6))
    replaced = replace_zeros(parts, limit)
    assert (replaced > 0).all()
    assert_allclose(replaced.sum(axis=1), 1.0, rtol=1e-12)
    factor = replaced / np.where(parts > 0, parts, np.nan)
    assert_allclose(np.nanmax(factor, axis=1), np.nanmin(factor, axis=1), rtol=1e-9)


def test_log_ratios_are_the_same_whatever_the_total_and_whatever_is_left_out() -> None:
    """Scale invariance, and subcompositional coherence of differences (Aitchison 1986)."""
    parts = np.random.default_rng(1).lognormal(0, 1, (5, 7))
    ratios = centred_log_ratios(parts)
    assert_allclose(centred_log_ratios(parts * np.arange(1.0, 6.0)[:, None]), ratios, atol=1e-12)
    fewer = centred_log_ratios(parts[:, :4])
    assert_allclose(fewer[:, 0] - fewer[:, 2], ratios[:, 0] - ratios[:, 2], atol=1e-12)
    assert_allclose(ratios.sum(axis=1), 0.0, atol=1e-12)


def test_prevalence_counts_samples_above_zero() -> None:
    values = np.where(np.arange(20)[:, None] < np.arange(6), 3.0, 0.0)
    fitted = Prevalence().fit(step_table(values), NO_GROUPS)
    assert_array_equal(fitted.keep, [False, False, True, True, True, True])
    assert fitted.account.dropped["F1"] == "above zero in 1 of 20 samples; 2 needed"


def test_zeros_become_the_same_share_in_every_sample_however_deep() -> None:
    depths = np.where(np.arange(30) % 2, 1000.0, 8000.0)
    table = step_table(counts(2, depths=depths))
    fitted = ReplaceZeros().fit(table, NO_GROUPS)
    replaced = fitted.transform(table)[0].values[table.values == 0]
    assert_array_equal(replaced, np.full(replaced.size, 0.65 * fitted.limit))


def test_depth_leaves_no_trace_in_the_log_ratios() -> None:
    """Mean squared correlation with log depth of 30 samples: 1 / 29 by chance; 60 features, three studies."""
    found = []
    for seed in (3, 4, 5):
        depths = np.exp(np.random.default_rng(seed).normal(8.5, 0.5, 30))
        result = recipe_for("microbes", "counts").fit_transform(
            table_of(counts(seed, depths=depths)), smallest_group=15, seed=1
        )
        r = np.corrcoef(np.column_stack([result.values, np.log(depths)]), rowvar=False)[-1, :-1]
        found.append(np.mean(r**2))
    assert np.mean(found) < 1.5 / 29


def test_counts_and_their_shares_come_out_the_same() -> None:
    """Both are parts of a whole; the detection limit follows from either."""
    values = counts(6)
    one = recipe_for("microbes", "counts").fit_transform(table_of(values), smallest_group=15, seed=1)
    other = recipe_for("microbes", "proportions").fit_transform(
        table_of(closed(values)), smallest_group=15, seed=1
    )
    percent = recipe_for("x", "proportions").fit_transform(
        table_of(100 * closed(values)), smallest_group=15, seed=1
    )
    assert_allclose(other.values, one.values, atol=1e-9)
    assert_allclose(percent.values, one.values, atol=1e-9)


def test_what_is_no_composition_is_refused() -> None:
    with pytest.raises(
        InputError, match=r"1 proportion is negative, the first at feature 'F0', sample 'S001': -0.5"
    ):
        recipe_for("x", "proportions").fit(table_of([[0.1, 0.2], [-0.5, 0.3]]), smallest_group=None, seed=1)
    with pytest.raises(InputError, match="1 of 2 samples have no part above 0: 'S000'"):
        recipe_for("x", "proportions").fit(table_of([[0.0, 0.0], [0.5, 0.3]]), smallest_group=None, seed=1)
    values = counts(7)
    values[0, 0] = 0.5
    with pytest.raises(
        InputError, match=r"1 count is not whole, the first at feature 'F0', sample 'S000': 0.5"
    ):
        recipe_for("microbes", "counts").fit(table_of(values), smallest_group=None, seed=1)


def test_a_new_sample_with_nothing_that_is_left_is_named() -> None:
    values = counts(8)
    values[:, 0] = 0.0
    values[:2, 0] = 5.0
    fitted = recipe_for("microbes", "counts").fit(table_of(values), smallest_group=15, seed=1)
    assert "F0" in fitted.prepared.dropped
    new = np.zeros((1, values.shape[1]))
    new[0, 0] = 9.0
    with pytest.raises(InputError, match=r"no value in the \d+ features that are left: 'S000'; set exclude"):
        fitted.transform(table_of(new))
