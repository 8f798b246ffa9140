"""Neighbours: the same as scikit-learn's imputer, with ties and empty samples settled by rule."""

from __future__ import annotations

import numpy as np
import pytest
from numpy.testing import assert_allclose
from prepare.measured import factor_logs, step_table
from sklearn.impute import KNNImputer

from workbench.errors import InputError
from workbench.prepare.gaps import FillGaps
from workbench.prepare.neighbours import Donors, mean_squared_differences
from workbench.prepare.steps import FitContext

NAMES = tuple(f"S{i}" for i in range(40))


def gappy(seed: int, n: int, p: int, share: float = 0.15) -> tuple[np.ndarray, np.ndarray]:
    rng = np.random.default_rng(seed)
    whole = 5 + factor_logs(rng, n, p) * rng.uniform(0.5, 3, p)
    return whole, np.where(rng.random((n, p)) < share, np.nan, whole)


@pytest.mark.parametrize(("n", "p", "k"), [(40, 60, 6), (8, 200, 3), (40, 5, 10)])
def test_estimates_equal_those_of_another_program(n: int, p: int, k: int) -> None:
    """Against scikit-learn's KNNImputer on standardised values, uniform weights."""
    _, values = gappy(1, n, p)
    values[0, 1:] = values[1, 1:] + 0.1
    centre, scale = np.nanmean(values, axis=0), np.nanstd(values, axis=0)
    expected = KNNImputer(n_neighbors=k).fit_transform((values - centre) / scale) * scale + centre
    filled = Donors(values, NAMES[:n], k).estimates(values, np.isnan(values), NAMES[:n])
    assert_allclose(filled, expected, rtol=1e-9, atol=1e-9)


def test_gaps_of_correlated_features_are_estimated_better_than_by_the_mean() -> None:
    whole, values = gappy(2, 60, 200)
    gaps = np.isnan(values)
    names = tuple(f"S{i}" for i in range(60))
    error = (Donors(values, names, 8).estimates(values, gaps, names) - whole)[gaps]
    plain = (np.nanmean(values, axis=0) - whole)[gaps]
    assert np.sqrt(np.mean(error**2)) < 0.85 * np.sqrt(np.mean(plain**2))


def test_units_of_a_feature_do_not_matter() -> None:
    _, values = gappy(3, 20, 30)
    units = np.random.default_rng(3).uniform(0.01, 100, 30)
    gaps, names = np.isnan(values), NAMES[:20]
    one = Donors(values, names, 4).estimates(values, gaps, names)
    other = Donors(values * units, names, 4).estimates(values * units, gaps, names)
    assert_allclose(other / units, one, rtol=1e-9)


def test_equally_near_donors_are_taken_by_name() -> None:
    values = np.array(
        [[0.0, 0.0, 1.0], [0.0, 0.0, 2.0], [0.0, 0.0, 3.0], [4.0, 4.0, 9.0], [0.0, 0.0, np.nan]]
    )
    for names in (("a", "b", "c", "d", "e"), ("c", "b", "a", "d", "e")):
        filled = Donors(values, names, 2).estimates(values, np.isnan(values), names)
        lent = {name: value for name, value in zip(names, values[:, 2], strict=True) if name in "ab"}
        assert_allclose(filled[4, 2], np.mean(list(lent.values())))


def test_distance_is_the_mean_over_shared_features_and_infinite_without_any() -> None:
    donors = np.array([[1.0, -1.0, np.nan], [-1.0, 1.0, np.nan], [np.nan, np.nan, 2.0]])
    distances = mean_squared_differences(np.array([[1.0, np.nan, np.nan]]), donors)
    assert_allclose(distances, [[0.0, 4.0, np.inf]])


def test_fewer_donors_than_wanted_are_enough() -> None:
    values = np.full((30, 3), np.nan)
    values[:, :2] = np.arange(60.0).reshape(30, 2)
    values[28:, 2] = 7.0, 9.0
    filled = Donors(values, NAMES[:30], 5).estimates(values, np.isnan(values), NAMES[:30])
    assert_allclose(filled[:28, 2], 8.0)


def test_a_sample_without_any_value_is_named() -> None:
    fitted = FillGaps(censored=False).fit(step_table(gappy(4, 10, 5, 0.0)[0]), FitContext(None, 1))
    with pytest.raises(
        InputError,
        match="no value in any feature that another sample has, so that their gaps cannot be filled: 'S001'",
    ):
        fitted.transform(step_table(np.array([[1.0] * 5, [np.nan] * 5])))
