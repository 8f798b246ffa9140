"""False-discovery rates follow their definition, on p and on its logarithm."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from hypothesis.extra import numpy as arrays
from numpy.testing import assert_allclose, assert_array_equal

from workbench.engine.multiple import Family, benjamini_hochberg, log_adjusted
from workbench.errors import NumericsError

P_VALUES = arrays.arrays(float, st.integers(1, 40), elements=st.floats(1e-300, 1.0))


@given(p=P_VALUES)
@settings(max_examples=60, deadline=None)
def test_q_is_the_smallest_rate_at_which_the_test_passes(p: np.ndarray) -> None:
    q = benjamini_hochberg(p)
    ordered = np.sort(p)
    for value, own in zip(p, q, strict=True):
        ranks = np.arange(1, p.size + 1)[ordered >= value]
        assert_allclose(own, min(1.0, (ordered[ordered >= value] * p.size / ranks).min()), rtol=1e-12)


@given(p=P_VALUES)
@settings(max_examples=40, deadline=None)
def test_order_of_the_tests_does_not_matter_and_stronger_tests_have_smaller_q(p: np.ndarray) -> None:
    order = np.random.default_rng(p.size).permutation(p.size)
    q = benjamini_hochberg(p)
    assert_array_equal(benjamini_hochberg(p[order]), q[order])
    assert (np.diff(q[np.argsort(p)]) >= 0.0).all()
    assert (q >= p).all()


def test_tests_without_p_are_counted_apart() -> None:
    p = np.array([[0.01, np.nan], [0.03, 0.2]])
    q = benjamini_hochberg(p)
    assert_array_equal(np.isnan(q), np.isnan(p))
    assert_allclose(q[~np.isnan(q)], benjamini_hochberg([0.01, 0.03, 0.2]))
    assert np.isnan(benjamini_hochberg([np.nan])).all()
    assert benjamini_hochberg([]).size == 0


def test_what_is_no_p_is_refused() -> None:
    with pytest.raises(NumericsError, match=r"between -0\.1 and 0\.5"):
        benjamini_hochberg([0.5, -0.1])


@given(p=P_VALUES)
@settings(max_examples=40, deadline=None)
def test_logarithms_give_the_same_q(p: np.ndarray) -> None:
    ordered = np.sort(p)
    assert_allclose(np.exp(log_adjusted(np.log(ordered), p.size)), benjamini_hochberg(ordered), rtol=1e-11)


def test_q_is_told_apart_where_p_underflows() -> None:
    log_q = log_adjusted(np.array([-5000.0, -4000.0, -3999.0]), 3)
    assert_allclose(log_q, [-5000.0 + np.log(3.0), -4000.0 + np.log(1.5), -3999.0])


@given(p=P_VALUES, fdr=st.floats(0.01, 0.9))
@settings(max_examples=40, deadline=None)
def test_a_family_cut_at_a_level_judges_like_the_whole_one(p: np.ndarray, fdr: float) -> None:
    q = benjamini_hochberg(p)
    family = Family.of(np.log(p), float(np.log(fdr)), p.size, fdr)
    passing = np.log(p) <= family.threshold
    # Within rounding of the rate either decision is right.
    clear = np.abs(q - fdr) > 1e-12
    assert_array_equal(passing[clear], (q <= fdr)[clear])
    assert_allclose(np.exp(family.exact_log_q(np.log(p[passing]))), q[passing], rtol=1e-9)
