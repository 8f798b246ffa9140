"""Group effects where subjects have several samples, against scipy's tests of the same question."""

import numpy as np
from scipy import stats

from workbench.engine import SubjectDesign
from workbench.intake import Groups
from workbench.workflow.analysis_view import Shared
from workbench.workflow.network.group_differences import group_differences


def shared(subjects, codes, times=None):
    n = len(subjects)
    groups = Groups(np.asarray(codes, dtype=np.intp), ("a", "b"), ("group",))
    design = SubjectDesign.of(np.asarray(subjects), None if times is None else np.asarray(times))
    return Shared(tuple(f"S{k}" for k in range(n)), np.zeros((n, 0)), (), groups, np.zeros((n, 1)), design)


def test_before_and_after_is_the_paired_t_test():
    rng = np.random.default_rng(1)
    base = rng.normal(size=(9, 1)) * 5.0
    x = np.hstack([base, base + rng.normal(size=(9, 1))]).reshape(-1, 1)
    found = group_differences(x, shared(np.repeat(np.arange(9), 2), np.tile([0, 1], 9), np.tile([0, 1], 9)))
    expected = stats.ttest_rel(x[1::2, 0], x[0::2, 0])
    np.testing.assert_allclose(found.p, [expected.pvalue], rtol=1e-9)
    np.testing.assert_allclose(found.effect, [(x[1::2] - x[0::2]).mean()], rtol=1e-9)


def test_a_group_that_subjects_stay_in_is_tested_on_their_means():
    rng = np.random.default_rng(2)
    x = np.repeat(rng.normal(size=(10, 1)), 3, axis=0) + 0.1 * rng.normal(size=(30, 1))
    codes = np.repeat([0, 1], 15)
    found = group_differences(x, shared(np.repeat(np.arange(10), 3), codes))
    means = x.reshape(10, 3).mean(axis=1)
    np.testing.assert_allclose(found.p, [stats.ttest_ind(means[:5], means[5:]).pvalue], rtol=1e-9)


def test_one_sample_a_subject_is_the_plain_t_test():
    x = np.random.default_rng(3).normal(size=(12, 2))
    found = group_differences(x, shared(np.arange(12), np.repeat([0, 1], 6)))
    np.testing.assert_allclose(found.p, stats.ttest_ind(x[:6], x[6:]).pvalue, rtol=1e-9)


def test_too_few_samples_have_no_effect_rather_than_an_error():
    assert group_differences(np.ones((2, 1)), shared([0, 1], [0, 1])) is None
