"""Factors of one block, and what another block's features tell of them, for samples that no fit has seen."""

import numpy as np
import pytest
from scipy.stats import ttest_1samp

from workbench.engine.nuisance import Nuisance
from workbench.engine.swaps.cross_prediction import Features, count_private, predict_left_out
from workbench.engine.swaps.sparse_factors import sparse_factors
from workbench.engine.swaps.spike_slab import SpikeSlab


def modules(seed, n=48, p=600, factors=3, size=30, strength=1.2):
    rng = np.random.default_rng(seed)
    scores = rng.normal(size=(n, factors))
    x = rng.normal(size=(n, p))
    for k in range(factors):
        x[:, k * size : (k + 1) * size] += strength * scores[:, [k]]
    x = x - x.mean(axis=0)
    return x / x.std(axis=0, ddof=1), scores - scores.mean(axis=0)


def correlation(one, other):
    return np.einsum("nk,nk->k", one, other) / np.linalg.norm(one, axis=0) / np.linalg.norm(other, axis=0)


@pytest.mark.parametrize("seed", range(3))
def test_planted_modules_are_factors_of_their_own(seed):
    x, scores = modules(seed)
    found = sparse_factors(x, rank=1)
    r = np.abs(np.corrcoef(found.scores.T, scores.T)[: found.number, found.number :])
    assert found.number == 3
    assert r.max(axis=0).min() > 0.95


def test_noise_has_no_factors():
    numbers = [sparse_factors(modules(seed, strength=0.0)[0], rank=1).number for seed in range(10)]
    assert sum(numbers) <= 1


def test_factors_do_not_depend_on_the_order_of_features_and_follow_that_of_samples():
    x, _ = modules(3)
    rng = np.random.default_rng(0)
    rows, columns = rng.permutation(48), rng.permutation(600)
    one, other = sparse_factors(x, 1).scores, sparse_factors(x[rows][:, columns], 1).scores
    r = np.abs(np.corrcoef(one[rows].T, other.T)[:3, 3:])
    np.testing.assert_allclose(np.sort(r.max(axis=0)), 1.0, atol=1e-6)


def test_a_spike_and_slab_of_noise_alone_draws_everything_to_zero():
    z = np.random.default_rng(1).normal(size=(2, 4000))
    assert np.abs(SpikeSlab.learn(z).mean(z)).mean() < 0.2


@pytest.mark.parametrize("batches", [1, 4])
def test_samples_left_out_are_not_told_by_residuals_that_add_up_to_zero(batches):
    n, rng = 20, np.random.default_rng(batches)
    columns = np.eye(batches)[np.arange(n) % batches][:, 1:]
    basis = Nuisance.of(columns, n).basis
    found = []
    for _ in range(40):
        u = rng.normal(size=(n, 2))
        features = Features.of(rng.normal(size=(n, 400)), basis)
        u = u - basis @ (basis.T @ u)
        found.append(correlation(predict_left_out(features, u, 0), u).mean())
    assert ttest_1samp(found, 0.0, alternative="greater").pvalue > 0.01


def test_shared_factors_are_predicted_under_private_ones():
    rng = np.random.default_rng(5)
    x, scores = modules(5)
    private = rng.normal(size=(48, 2))
    y = x + private @ rng.normal(size=(2, 600))
    features = Features.of(y, np.full((48, 1), 48**-0.5))
    assert count_private(features, scores) == 2
    assert correlation(predict_left_out(features, scores, 2), scores).min() > 0.85


def test_samples_of_no_weight_teach_nothing_and_are_predicted_all_the_same():
    x, scores = modules(6)
    basis = np.full((48, 1), 48**-0.5)
    weights = np.where(np.arange(48) < 2, 0.0, 1.0)
    spoilt = scores.copy()
    spoilt[:2] = [[50.0, -50.0, 50.0], [-50.0, 50.0, -50.0]]
    one = predict_left_out(Features.of(x, basis), scores, 0, weights)
    other = predict_left_out(Features.of(x, basis), spoilt, 0, weights)
    np.testing.assert_allclose(one, other, atol=1e-6)
    assert correlation(one[:2], scores[:2]).min() > 0.8
