"""p of a correlation is exact from the middle to tails far beyond the smallest number."""

from __future__ import annotations

import numpy as np
import pytest
from numpy.testing import assert_allclose, assert_array_equal
from scipy import stats

from workbench.engine.tails import SMALLEST_P, critical_r, log_p_value, p_from_log

FREEDOMS = [1, 2, 3, 10, 58, 98, 1000, 20_000]


@pytest.mark.parametrize("df", FREEDOMS)
def test_p_equals_that_of_students_t(df: int) -> None:
    r = np.linspace(0.0, 0.995, 500)
    expected = 2.0 * stats.t.sf(r * np.sqrt(df / ((1 - r) * (1 + r))), df)
    usable = expected > 1e-280
    assert usable.sum() > 20
    assert_allclose(np.exp(log_p_value(r, df))[usable], expected[usable], rtol=1e-10)


@pytest.mark.parametrize("df", FREEDOMS[1:])
def test_p_near_one_keeps_the_digits_of_a_tiny_correlation(df: int) -> None:
    r = np.geomspace(1e-9, 1e-3, 200)
    expected = 2.0 * stats.t.sf(r * np.sqrt(df / ((1 - r) * (1 + r))), df)
    assert_allclose(np.exp(log_p_value(r, df)), expected, rtol=0, atol=1e-10)


def test_far_tail_has_the_closed_form_of_two_degrees_of_freedom() -> None:
    # With df = 2 the two-sided p is 1 - |r|; the density is flat.
    tiny = np.array([1e-3, 1e-9, 1e-15])
    assert_allclose(log_p_value(1.0 - tiny, 2), np.log1p(-(1.0 - tiny)), rtol=1e-12)


def test_far_tail_decreases_where_p_itself_is_zero() -> None:
    r = np.linspace(0.99, 0.99999, 200)
    log_p = log_p_value(r, 2000)
    assert log_p[0] < np.log(5e-324)
    assert (np.diff(log_p) < 0.0).all()
    # Leading term of the tail: log p = (df / 2) log(1 - r^2) + O(log df).
    assert_allclose(log_p, 1000.0 * np.log((1 - r) * (1 + r)), rtol=2e-3)


def test_a_value_does_not_depend_on_its_company() -> None:
    r = np.random.default_rng(1).uniform(-1, 1, 40_000)
    together = log_p_value(r, 40)
    some = np.arange(0, r.size, 997)
    assert_array_equal(together[some], [float(log_p_value(r[k], 40)) for k in some])
    assert_array_equal(log_p_value(-r, 40), together)


def test_ends_of_the_range() -> None:
    log_p = log_p_value([0.0, 1.0, -1.0, 1.5, np.nan], 20)
    assert_allclose(log_p[0], 0.0, atol=1e-15)
    assert_array_equal(log_p[1:4], -np.inf)
    assert np.isnan(log_p[4])
    assert_array_equal(p_from_log(log_p)[:4], [1.0] + 3 * [SMALLEST_P])


@pytest.mark.parametrize("df", FREEDOMS[2:])
def test_critical_correlation_is_the_inverse(df: int) -> None:
    p = np.array([1.0, 0.5, 0.05, 1e-4, 1e-8])
    assert_allclose(np.exp(log_p_value(critical_r(p, df), df)), p, rtol=1e-9)
