"""Group effects are those of the joint fit, in the feature's own unit and with the promised sign."""

from __future__ import annotations

import numpy as np
import pytest
from numpy.testing import assert_allclose, assert_array_equal
from scipy import stats

from workbench.engine import Nuisance, benjamini_hochberg, group_effects
from workbench.errors import NumericsError

CODES = np.array([0, 1, 2] * 6)


def _block(seed: int, n: int = 18, p: int = 30) -> np.ndarray:
    return np.random.default_rng(seed).normal(size=(n, p)) + 10.0


def test_two_groups_without_nuisance_are_students_t_test() -> None:
    x, codes = _block(1), np.repeat([0, 1], 9)
    effects = group_effects(x, codes)
    assert_allclose(effects.effect, x[codes == 1].mean(axis=0) - x[codes == 0].mean(axis=0), rtol=1e-10)
    assert_allclose(effects.p, stats.ttest_ind(x[codes == 1], x[codes == 0]).pvalue, rtol=1e-10)
    assert_allclose(effects.q, benjamini_hochberg(effects.p))
    assert (effects.df, effects.tested) == (16, 30)


def test_three_groups_without_nuisance_are_the_analysis_of_variance() -> None:
    x = _block(2)
    effects = group_effects(x, CODES)
    assert_allclose(effects.p, stats.f_oneway(*(x[np.equal(CODES, k)] for k in range(3))).pvalue, rtol=1e-10)
    means = np.array([x[np.equal(CODES, k)].mean(axis=0) - x[CODES == 0].mean(axis=0) for k in (1, 2)])
    assert_array_equal(effects.level, 1 + np.argmax(np.abs(means), axis=0))
    assert_allclose(effects.effect, np.take_along_axis(means, effects.level[None] - 1, axis=0)[0], rtol=1e-9)


def test_a_planted_difference_is_recovered_beside_a_tangled_nuisance() -> None:
    rng = np.random.default_rng(3)
    codes = np.repeat([0, 1], 20)
    age = (codes + rng.normal(size=40))[:, None]
    x = rng.normal(scale=0.1, size=(40, 50)) + 2.0 * codes[:, None] + 3.0 * age
    effects = group_effects(x, codes, age)
    assert_allclose(effects.effect, 2.0, atol=0.2)
    assert effects.q.max() < 1e-10
    assert group_effects(x - 2.0 * codes[:, None], codes, age).q.min() > 0.01


def test_reference_turns_the_sign_and_leaves_p() -> None:
    x, codes = _block(4), np.repeat([0, 1], 9)
    one, other = group_effects(x, codes), group_effects(x, codes, reference=1)
    assert_allclose(other.effect, -one.effect, rtol=1e-9)
    assert_allclose(other.p, one.p, rtol=1e-9)
    assert_array_equal(other.level, 0)


def test_units_scale_effects_and_nothing_else() -> None:
    x = _block(5)
    age = np.arange(18.0)[:, None] ** 0.5
    one, other = (
        group_effects(x, CODES, age),
        group_effects(1000.0 * x - 3.0, CODES, Nuisance.of(-2.0 * age, 18)),
    )
    assert_allclose(other.effect, 1000.0 * one.effect, rtol=1e-8)
    assert_allclose(other.p, one.p, rtol=1e-8)


def test_p_is_uniform_where_groups_do_not_differ() -> None:
    x = np.random.default_rng(6).normal(size=(18, 3000))
    age = np.random.default_rng(7).normal(size=(18, 2))
    assert stats.kstest(group_effects(x, CODES, age).p, "uniform").pvalue > 0.01


def test_features_that_cannot_be_tested_are_left_empty() -> None:
    x = _block(8, p=5)
    age = np.arange(18.0)[:, None]
    x[:, 1], x[3, 2], x[:, 3] = 4.0, np.nan, 2.0 * age[:, 0]
    effects = group_effects(x, CODES, age)
    empty = np.array([False, True, True, True, False])
    for values in (effects.effect, effects.p, effects.q):
        assert_array_equal(np.isnan(values), empty)
    assert_array_equal(effects.level == -1, empty)
    assert effects.tested == 2
    assert_allclose(effects.q[~empty], group_effects(x[:, ~empty], CODES, age).q)


def test_codes_may_skip_levels_and_a_perfect_difference_has_a_p_above_zero() -> None:
    x = np.array([[1.0], [1.0], [3.0], [3.0]])
    effects = group_effects(x, np.array([0, 0, 5, 5]))
    assert_array_equal(effects.level, [5])
    assert_allclose(effects.effect, 2.0)
    assert 0.0 < effects.p[0] < 1e-10


@pytest.mark.parametrize(
    ("codes", "nuisance", "message"),
    [
        (np.repeat([0, 1], 9), np.repeat([0.0, 1.0], 9)[:, None], "group 1 cannot be told from the nuisance"),
        (CODES, (CODES == 2)[:, None].astype(float), "group 2 cannot be told from the nuisance"),
        (np.zeros(18, dtype=int), None, "all samples are in group 0"),
        (np.full(18, 3), None, "no sample is in the reference group 0; groups: \\[3\\]"),
        (np.repeat([-1, 0, 1], 6), None, "whole numbers from 0 up"),
        (np.repeat([0.0, 1.0], 9), None, "whole numbers from 0 up"),
        (np.array([0, 1]), None, "one code for each sample"),
        (np.repeat([0, 1], 9), np.eye(18)[:, 1:17], "leave no degree of freedom"),
    ],
)
def test_what_cannot_be_fitted_is_refused(
    codes: np.ndarray, nuisance: np.ndarray | None, message: str
) -> None:
    with pytest.raises(NumericsError, match=message):
        group_effects(_block(9), codes, nuisance)
