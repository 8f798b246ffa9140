"""Outlying samples, columns that carry variation, and gaps that follow a column: level and power of each rule."""

from __future__ import annotations

import numpy as np
import pytest
from checks.studies import checked, small_study
from scipy import stats

from workbench.checks.batches import carries
from workbench.checks.gap_patterns import gaps_against
from workbench.checks.outlying import FAR_LEVEL, LEAST_RATIO, far_limit, far_out, held_out_errors
from workbench.checks.sheet_columns import SheetColumn, read_column
from workbench.checks.space import design_free


def block(n, p, rank, seed, tails=None):
    """Return noise with a few strong factors."""
    rng = np.random.default_rng(seed)
    noise = rng.standard_normal((n, p)) if tails is None else rng.standard_t(tails, (n, p))
    return noise + rng.standard_normal((n, rank)) @ rng.standard_normal((rank, p))


def classes(codes):
    codes = np.asarray(codes, dtype=np.intp)
    return SheetColumn("day", True, None, codes, tuple(map(str, range(codes.max() + 1))))


@pytest.mark.parametrize("tails", [None, 3])
def test_no_sample_of_a_clean_block_is_unlike_the_others(tails):
    errors = [held_out_errors(block(30, 400, 3, seed, tails), np.empty((30, 0))) for seed in range(10)]
    assert max(error.ratio.max() for error in errors) < LEAST_RATIO


def test_a_noisy_sample_is_unlike_the_others_whatever_the_design():
    x = block(30, 400, 3, 1)
    x[11] += 3 * np.random.default_rng(9).standard_normal(400)
    day = np.repeat(np.eye(3)[:, 1:], 10, axis=0)
    for design in (np.empty((30, 0)), day):
        error = held_out_errors(x, design)
        assert int(error.ratio.argmax()) == 11
        assert error.ratio[11] >= LEAST_RATIO
        assert np.delete(error.ratio, 11).max() < LEAST_RATIO


def test_one_wild_value_makes_no_sample_unlike():
    x = block(30, 400, 3, 1)
    x[11, 7] += 1000.0
    assert held_out_errors(x, np.empty((30, 0))).ratio.max() < LEAST_RATIO


def test_a_sample_alone_on_its_level_has_no_error():
    x, design = block(20, 200, 2, 1), np.zeros((20, 1))
    design[4] = 1.0
    assert np.flatnonzero(np.isnan(held_out_errors(x, design).ratio)).tolist() == [4]


def test_the_limit_of_far_out_samples_is_passed_by_three_normal_blocks_in_a_thousand():
    rng = np.random.default_rng(5)
    for n in (10, 40):
        values = rng.standard_normal((4000, n))
        away = np.abs(values - np.median(values, axis=1, keepdims=True))
        furthest = away.max(axis=1) / (1.4826 * np.median(away, axis=1))
        passed = int((furthest > far_limit(n, 1)).sum())
        assert stats.binomtest(passed, 4000, FAR_LEVEL).pvalue > 0.001


def test_a_sample_far_out_on_a_factor_of_many_is_found():
    rng = np.random.default_rng(1)
    factor = rng.standard_normal(40)
    factor[6] = 25.0
    x = rng.standard_normal((40, 300)) + np.outer(factor, rng.standard_normal(300))
    assert set(far_out(design_free(x, np.empty((40, 0))))) == {6}


def test_p_of_a_column_is_small_as_often_as_it_says():
    small = 0
    for seed in range(150):
        x = block(24, 150, 3, seed)
        column = classes(np.random.default_rng(1000 + seed).permutation(24) % 3)
        found = carries(design_free(x, np.empty((24, 0))), column, np.arange(24), np.empty((24, 0)))
        small += found is not None and found.p <= 0.1
    assert stats.binomtest(small, 150, 0.1, alternative="greater").pvalue > 0.01


def test_a_shift_of_many_features_by_day_is_carried_and_measured():
    day = np.arange(36) % 3
    shift = 0.8 * np.random.default_rng(2).standard_normal((3, 300))
    x = block(36, 300, 2, 1) + shift[day]
    found = carries(design_free(x, np.empty((36, 0))), classes(day), np.arange(36), np.empty((36, 0)))
    assert found.p < 1e-6
    assert found.share > 0.02
    adjusted = np.eye(3)[day][:, 1:]
    assert carries(design_free(x, adjusted), classes(day), np.arange(36), adjusted) is None


def test_an_order_is_read_as_a_line_with_a_bend_and_days_as_numbers():
    sheet = checked(small_study()).blocks["metabolites"].columns
    order = read_column("metabolites_order", sheet["metabolites_order"])
    assert order.technical
    assert order.indicators(np.ones(24, bool)).shape == (24, 2)
    days = sheet["group"].copy()
    days[:] = [f"2024-03-{1 + k:02d}" for k in range(24)]
    np.testing.assert_array_equal(read_column("run_date", days).numbers, np.arange(24.0))
    assert read_column("note", days.map(lambda cell: f"text {cell}")) is None


def test_gaps_by_chance_follow_nothing_more_often_than_said():
    reached = 0
    for seed in range(60):
        rng = np.random.default_rng(seed)
        found = gaps_against(rng.random((20, 60)) < 0.3, np.arange(20) % 2, 2, rng)
        reached += found.p <= 0.1
    assert stats.binomtest(reached, 60, 0.1, alternative="greater").pvalue > 0.01


def test_shares_of_gaps_are_those_of_the_levels():
    missing = np.zeros((20, 3), dtype=bool)
    missing[:10, 0], missing[::2, 1] = True, True
    found = gaps_against(missing, np.repeat([0, 1], 10), 2, np.random.default_rng(0))
    assert found.features.tolist() == [0]
    np.testing.assert_array_equal(found.shares, [[1.0, 0.0]])
    assert found.tested == 2
