"""The parts of the removal: the retention test, untangling, simple components, heavy tails."""

from __future__ import annotations

import numpy as np
from numpy.testing import assert_allclose
from scipy import stats

from workbench.engine.far_values import excess_kurtosis, withstand
from workbench.engine.nuisance import Nuisance
from workbench.engine.private.private_components import block_components, varimax
from workbench.engine.private.private_retention import correlation_p, retention_p, together
from workbench.engine.private.private_untangling import admixture, entangled


def unit(x: np.ndarray) -> np.ndarray:
    x = x - x.mean(axis=0)
    return x / np.linalg.norm(x, axis=0)


def test_the_retention_test_keeps_its_level_where_nothing_is_shared() -> None:
    """400 draws of a component beside an unrelated block with components of its own: at most 5 % + 3 errors."""
    rng, n = np.random.default_rng(1), 30
    nuisance = Nuisance.of(rng.normal(size=(n, 2)), n)
    p = []
    for _ in range(400):
        score = nuisance.residuals(rng.normal(size=(n, 1)))
        own = nuisance.residuals(rng.normal(size=(n, 3)))
        y = unit(nuisance.residuals(own @ rng.normal(size=(3, 60)) + rng.normal(size=(n, 60))))
        p.append(retention_p(score, y, own, nuisance)[0])
    for level in (0.01, 0.05, 0.2):
        assert np.mean(np.array(p) <= level) <= level + 3 * np.sqrt(level * (1 - level) / 400)


def test_each_part_of_the_retention_test_finds_its_own_kind() -> None:
    """A component spread over the other's components, one that is one of them, one of few features alone."""
    rng, n = np.random.default_rng(2), 60
    nuisance = Nuisance.of(None, n)
    own = nuisance.residuals(np.linalg.qr(rng.normal(size=(n, 4)))[0])
    y = rng.normal(size=(n, 500))
    few = rng.normal(size=(n, 1))
    y[:, :5] += 3 * few
    noise = 0.5 * unit(rng.normal(size=(n, 3)))
    scores = np.column_stack([unit(own.sum(axis=1, keepdims=True)), unit(own[:, :1]), unit(few)]) + noise
    assert (retention_p(scores, unit(y), own, nuisance) < 1e-4).all()


def test_correlation_p_equals_scipys() -> None:
    rng = np.random.default_rng(3)
    x, y = rng.normal(size=(2, 25))
    assert_allclose(correlation_p(np.array(stats.pearsonr(x, y)[0]), 23), stats.pearsonr(x, y)[1], rtol=1e-10)


def test_the_combination_of_equal_p_is_that_p_down_to_the_smallest() -> None:
    p = np.array([1e-250, 1e-12, 1e-4, 0.3])
    assert_allclose(together(np.stack([p, p, p])), p, rtol=1e-6)


def test_untangling_finds_the_factor_behind_a_mixture() -> None:
    """A private factor in all features and a shared one in a tenth, correlated by chance and of equal strength."""
    rng, n, p = np.random.default_rng(4), 50, 600
    factors = unit(rng.normal(size=(n, 2)) + 0.3 * rng.normal(size=(n, 1)))
    loadings = rng.normal(size=(2, p))
    loadings[1, 60:] = 0.0
    z = unit(np.sqrt(n) * factors @ loadings + rng.normal(size=(n, p)))
    basis = np.linalg.qr(factors @ np.array([[1.0, 0.4], [0.4, 1.0]]))[0]
    found = admixture(z, basis[:, :1], basis[:, 1:], n - 1)
    freed = basis[:, :1] + basis[:, 1:] @ found.coefficients
    mixed, clean = (abs(float(unit(one)[:, 0] @ factors[:, 0])) for one in (basis[:, :1], freed))
    assert clean > 0.995 > mixed
    assert not entangled(found, np.array([0.4]), np.array([0.4])).any()


def test_a_shared_factor_in_most_features_entangles_what_is_weaker() -> None:
    rng, n, p = np.random.default_rng(5), 50, 600
    basis = np.linalg.qr(rng.normal(size=(n, 2)) - 0.0)[0]
    z = unit(np.sqrt(n) * basis @ rng.normal(size=(2, p)) + rng.normal(size=(n, p)))
    found = admixture(z, basis[:, :1], basis[:, 1:], n - 1)
    assert entangled(found, np.array([0.4]), np.array([0.4])).all()
    assert not entangled(found, np.array([0.4]), np.array([0.05])).any()


def test_varimax_is_a_rotation_and_no_plane_can_be_bettered() -> None:
    rng = np.random.default_rng(6)
    loadings = rng.laplace(size=(200, 4))
    rotation = varimax(loadings)
    assert_allclose(rotation.T @ rotation, np.eye(4), atol=1e-12)
    best = np.sum(np.var((loadings @ rotation) ** 2, axis=0))
    for angle in (-0.1, 0.05, 0.3):
        turn = np.eye(4)
        turn[:2, :2] = [[np.cos(angle), np.sin(angle)], [-np.sin(angle), np.cos(angle)]]
        assert np.sum(np.var((loadings @ rotation @ turn) ** 2, axis=0)) <= best


def test_components_of_a_block_are_its_factors_and_ignore_gaps_and_constants() -> None:
    rng, n = np.random.default_rng(7), 60
    factors = rng.normal(size=(n, 2))
    x = factors @ rng.normal(size=(2, 300)) + rng.normal(size=(n, 300))
    x[:, 3], x[4, 9] = 1.0, np.nan
    found = block_components(x, Nuisance.of(None, n), ranks=False, seed=0)
    basis = np.linalg.qr(factors - factors.mean(axis=0))[0]
    assert found.shares.size == 2
    assert set(range(300)) - set(found.kept.tolist()) == {3, 9}
    assert np.sum((basis.T @ found.scores) ** 2) > 1.95


def test_heavy_tails_are_withstood_and_normal_features_left_alone() -> None:
    """Two features with one far value in the same sample: the correlation is that of the others."""
    rng, n = np.random.default_rng(8), 60
    x = rng.normal(size=(n, 2))
    x[5] = 30.0
    x -= x.mean(axis=0)
    plain, safe = (np.corrcoef(one.T)[0, 1] for one in (x, withstand(x, n - 1)))
    assert plain > 0.8 > 0.35 > abs(safe)
    normal = stats.norm.ppf((np.arange(n) + 0.5) / n)[:, None]
    assert_allclose(withstand(normal, n - 1), normal)
    assert_allclose(excess_kurtosis(x), stats.kurtosis(x, axis=0), rtol=1e-10)
