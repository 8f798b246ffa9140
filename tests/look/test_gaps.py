"""Gaps and distributions: exact on small tables, whatever the kind of values."""

from __future__ import annotations

import dataclasses

import numpy as np
import pytest
from look_views import bare, planted
from numpy.testing import assert_allclose

from workbench.look.gaps import distributions, gap_map, on_reading_scale

NAN = float("nan")


def table(measured: list[list[float]], values: str = "continuous"):
    x = np.array(measured)
    return bare(np.zeros_like(x), measured=x, values=values)


def test_shares_by_sample_and_feature() -> None:
    found = gap_map(table([[1.0, NAN, NAN], [2.0, 5.0, NAN]]))
    assert found.share == pytest.approx(0.5)
    assert_allclose(found.by_sample, [2 / 3, 1 / 3])
    assert_allclose(found.by_feature, [0.0, 0.5, 1.0])
    assert_allclose(found.abundance, [1.5, 5.0, NAN])


def test_bins_run_from_features_without_values_to_abundant_ones() -> None:
    found = gap_map(table([[9.0, NAN, 1.0], [9.0, NAN, NAN]]))
    assert_allclose(found.bins, [[1.0, 0.0, 0.0], [1.0, 1.0, 0.0]])
    assert_allclose(found.bin_abundance, [NAN, 1.0, 9.0])


def test_gaps_under_a_detection_limit_go_with_low_abundance() -> None:
    rng = np.random.default_rng(0)
    x = 10.0 ** (rng.normal(size=(30, 80)) * 0.3 + np.linspace(2.0, 5.0, 80))
    x[x < 10.0**2.3] = np.nan
    assert gap_map(table(x.tolist(), "intensities")).trend < -0.5


@pytest.mark.parametrize("cells", [[[1.0, 2.0, 3.0]] * 2, [[NAN, NAN, NAN]] * 2])
def test_nothing_or_everything_missing_has_no_trend(cells: list[list[float]]) -> None:
    assert np.isnan(gap_map(table(cells)).trend)


def test_many_features_are_binned() -> None:
    view = planted(p=700)
    found = gap_map(view)
    assert found.bins.shape == (36, 60)
    assert found.bins.mean() == pytest.approx(found.share, rel=0.02)


def test_orders_of_magnitude_are_read_on_a_log_scale() -> None:
    assert_allclose(on_reading_scale(np.array([[0.0, 9.0]]), "counts")[0], [[0.0, 1.0]])
    assert_allclose(on_reading_scale(np.array([[0.0, 100.0]]), "intensities")[0], [[NAN, 2.0]])
    assert_allclose(on_reading_scale(np.array([[-1.0, 100.0]]), "log")[0], [[-1.0, 100.0]])


def test_quantiles_are_of_each_sample() -> None:
    view = planted()
    found = distributions(view)
    assert_allclose(found.prepared[:, 2], np.median(view.prepared, axis=1))
    assert_allclose(found.measured[:, 2], np.nanmedian(np.log10(view.measured), axis=1))


def test_a_sample_without_values_and_a_block_without_measured_ones() -> None:
    assert np.isnan(distributions(table([[NAN, NAN], [1.0, 2.0]])).measured[0]).all()
    view = dataclasses.replace(planted(), measured=None)
    assert gap_map(view) is None
    assert distributions(view).measured is None
