"""Gains of exchanged rows equal the determinants that they stand for, and keep their promise on normal data."""

from itertools import combinations

import numpy as np
import pytest

from workbench.engine.swaps.exchange_gain import (
    exchange_gains,
    hat_matrix,
    rearrangement_gains,
    relabelling_gains,
)


def study(seed, n=14, m=3):
    rng = np.random.default_rng(seed)
    design = np.column_stack([np.ones(n), np.arange(n) % 2, rng.normal(size=n)])
    return rng.normal(size=(n, m)) + design @ rng.normal(size=(3, m)), design


def log_likelihood(rows, design):
    """Return the profile log likelihood of rows, up to a constant, by an independent route: least squares."""
    residual = rows - design @ np.linalg.lstsq(design, rows, rcond=None)[0]
    return -0.5 * (len(rows) - design.shape[1]) * np.linalg.slogdet(residual.T @ residual)[1]


@pytest.mark.parametrize("seed", range(3))
def test_gains_of_all_pairs_equal_refitted_determinants(seed):
    rows, design = study(seed)
    gains = exchange_gains(rows, hat_matrix(design), 11)
    for i, j in combinations(range(14), 2):
        moved = rows.copy()
        moved[[i, j]] = rows[[j, i]]
        expected = log_likelihood(moved, design) - log_likelihood(rows, design)
        np.testing.assert_allclose(gains[i, j], expected, atol=1e-9)
    np.testing.assert_allclose(gains, gains.T, atol=1e-12)


def test_gains_of_cycles_equal_refitted_determinants():
    rows, design = study(4)
    places, sources = np.array([[0, 5, 9], [3, 4, 12]]), np.array([[5, 9, 0], [12, 3, 4]])
    gains = rearrangement_gains(rows, hat_matrix(design), 11, places, sources)
    for place, source, gain in zip(places, sources, gains, strict=True):
        moved = rows.copy()
        moved[place] = rows[source]
        np.testing.assert_allclose(
            gain, log_likelihood(moved, design) - log_likelihood(rows, design), atol=1e-9
        )


def test_gains_of_relabelled_columns_equal_refitted_determinants():
    rows, design = study(5)
    fixed, columns = np.linalg.qr(design[:, [0, 2]])[0], design[:, [1]]
    places, sources = np.array([[0, 5, 8], [1, 2, 3]]), np.array([[5, 8, 0], [3, 1, 2]])
    gains = relabelling_gains(rows, fixed, columns, 11, places, sources)
    for place, source, gain in zip(places, sources, gains, strict=True):
        moved = design.copy()
        moved[source, 1] = design[place, 1]
        np.testing.assert_allclose(
            gain, log_likelihood(rows, moved) - log_likelihood(rows, design), atol=1e-9
        )


def test_relabelling_columns_that_the_fixed_ones_span_tells_nothing():
    rows, design = study(6)
    pair = np.array([[0, 1]])
    gains = relabelling_gains(rows, np.linalg.qr(design)[0], design[:, [1]], 11, pair, pair[:, ::-1])
    assert gains.tolist() == [0.0]


def test_gains_do_not_depend_on_the_scale_or_rotation_of_the_rows():
    rows, design = study(7)
    turned = rows @ np.random.default_rng(0).normal(size=(3, 3))
    hat = hat_matrix(design)
    np.testing.assert_allclose(exchange_gains(turned, hat, 11), exchange_gains(rows, hat, 11), atol=1e-9)


def test_a_wrong_exchange_passes_t_in_less_than_exp_minus_t_of_normal_studies():
    rng = np.random.default_rng(8)
    design = np.column_stack([np.ones(12), np.arange(12) % 2])
    hat = hat_matrix(design)
    mean = 2.0 * design[:, [1, 1]]
    gains = np.array([exchange_gains(mean + rng.normal(size=(12, 2)), hat, 10)[0, 3] for _ in range(4000)])
    for t in (0.5, 1.0, 2.0, 3.0):
        assert np.mean(gains > t) <= np.exp(-t) + 2.0 * np.sqrt(np.exp(-t) / gains.size)


def test_the_mean_likelihood_ratio_of_a_wrong_exchange_is_near_one():
    rng = np.random.default_rng(9)
    design = np.column_stack([np.ones(30), rng.normal(size=30)])
    design[:2, 1] = 0.4, -0.4
    hat = hat_matrix(design)
    rows = rng.normal(size=(10_000, 30, 1)) + design[:, [1]]
    ratios = np.exp([exchange_gains(one, hat, 28)[0, 1] for one in rows])
    assert abs(ratios.mean() - 1.0) < 0.15
