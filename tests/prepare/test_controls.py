"""What pools and blanks say about a feature."""

from __future__ import annotations

import numpy as np
from numpy.testing import assert_array_equal
from prepare.measured import table_of, with_runs

from workbench.prepare.controls import BlankFilter, PoolScatter
from workbench.prepare.drift import relative_sd
from workbench.prepare.steps import FitContext
from workbench.prepare.tables import StepTable

NO_GROUPS = FitContext(None, 1)


def with_controls(samples: np.ndarray, pools: np.ndarray, blanks: np.ndarray) -> StepTable:
    controls = np.vstack([pools, blanks])
    return StepTable.of(with_runs(table_of(samples), pools=len(pools), blanks=len(blanks), controls=controls))


def test_relative_standard_deviation_by_hand() -> None:
    """Of 8, 10, 12: mean 10, variance (4 + 0 + 4) / 2 = 4, so 2 / 10."""
    values = np.array([[8.0, 1.0, 5.0], [10.0, np.nan, 5.0], [12.0, np.nan, 5.0]])
    assert_array_equal(relative_sd(values), [0.2, np.nan, 0.0])


def test_features_that_pools_do_not_repeat_are_dropped_with_their_scatter() -> None:
    pools = np.column_stack([[10.0, 11, 9, 10], [2.0, 20, 9, 10], [5.0, 50, np.nan, np.nan]])
    fitted = PoolScatter().fit(with_controls(np.full((5, 3), 10.0), pools, np.empty((0, 3))), NO_GROUPS)
    assert_array_equal(fitted.keep, [True, False, True])
    assert fitted.account.dropped == {"F1": "relative standard deviation of 72 % over 4 pools; 30 % allowed"}
    assert (fitted.account.numbers["not_judged"], fitted.account.numbers["pools"]) == (1, 4)


def test_scatter_of_logarithms_is_that_of_the_amounts() -> None:
    pools = np.log2([[10.0, 2.0], [11.0, 20.0], [9.0, 9.0], [10.0, 10.0]])
    table = with_controls(np.full((5, 2), 3.0), pools, np.empty((0, 2)))
    assert_array_equal(PoolScatter(logged=True).fit(table, NO_GROUPS).keep, [True, False])


def test_without_pools_nothing_is_judged_and_the_account_says_so() -> None:
    fitted = PoolScatter().fit(with_controls(np.ones((4, 2)), np.empty((0, 2)), np.empty((0, 2))), NO_GROUPS)
    assert fitted.keep.all()
    assert fitted.account.cautions == ("pool scatter not judged: no feature is in 4 pools",)


def test_features_that_blanks_explain_are_dropped() -> None:
    """Medians over blanks: 5, 5, 0 (two of three lack it); over samples that have it: 14, 16, 2."""
    samples = np.column_stack([[14.0, 14, 14, np.nan], [16.0, 15, 17, 16], [2.0, 2, 2, 2]])
    blanks = np.array([[5.0, 5.0, 40.0], [5.0, 4.0, np.nan], [6.0, 5.0, np.nan]])
    fitted = BlankFilter().fit(with_controls(samples, np.empty((0, 3)), blanks), NO_GROUPS)
    assert_array_equal(fitted.keep, [False, True, True])
    assert fitted.account.dropped == {"F0": "2.8 times as strong in samples as in blanks; 3 needed"}


def test_without_blanks_nothing_is_dropped() -> None:
    fitted = BlankFilter().fit(with_controls(np.ones((4, 2)), np.empty((0, 2)), np.empty((0, 2))), NO_GROUPS)
    assert fitted.account.sentence == "no blanks in the run sheet: nothing dropped"
