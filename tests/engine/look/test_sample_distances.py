"""T2 and squared prediction error: identities, the limits' own rates, and their edges."""

from __future__ import annotations

import numpy as np
import pytest
from numpy.testing import assert_allclose
from scipy.stats import chi2

from workbench.engine.linear import thin_basis
from workbench.engine.look.components import PrincipalComponents
from workbench.engine.look.sample_distances import prediction_error_limit, sample_distances, t2_limit
from workbench.errors import NumericsError


def centred(n: int, p: int, seed: int) -> np.ndarray:
    x = np.random.default_rng(seed).normal(size=(n, p)) * np.linspace(3.0, 0.5, p)
    return x - x.mean(axis=0)


def test_both_distances_are_those_of_the_scores() -> None:
    x = centred(20, 50, 0)
    pca = PrincipalComponents(n_components=3, scale=False).fit(x)
    found = pca.distances()
    assert_allclose(found.t2, np.sum(pca.scores_**2 / pca.explained_variance_, axis=1), rtol=1e-10)
    residual = x - pca.scores_ @ pca.components_
    assert_allclose(found.spe, np.sum(residual**2, axis=1), rtol=1e-9)


def test_their_sums_are_known() -> None:
    """T2 adds up to (n - 1) k, the prediction error to (n - 1) times the variances left out."""
    basis = thin_basis(centred(25, 8, 1))
    found = sample_distances(basis, 2)
    assert found.t2.sum() == pytest.approx(24 * 2, rel=1e-12)
    assert found.spe.sum() == pytest.approx(np.sum(basis.lengths[2:] ** 2), rel=1e-12)


def test_t2_of_normal_samples_passes_its_limits_as_often_as_stated() -> None:
    """Few features, all components: 5 % and 1 % of 20,000 samples, to 4 standard errors of independent ones."""
    passed = np.zeros(2)
    for seed in range(500):
        found = sample_distances(thin_basis(centred(40, 3, seed)), 2)
        passed += [np.count_nonzero(found.t2 > limit) for limit in found.t2_limits]
    assert_allclose(passed / 20_000, [0.05, 0.01], atol=4.0 * np.sqrt(0.05 * 0.95 / 20_000))


def test_prediction_error_of_normal_samples_passes_its_limits_as_often_as_stated() -> None:
    """More samples than features: 5 % and 1 %, to a fifth (the limit is an approximation)."""
    passed = np.zeros(2)
    for seed in range(100):
        found = sample_distances(thin_basis(centred(300, 12, seed)), 3)
        passed += [np.count_nonzero(found.spe > limit) for limit in found.spe_limits]
    assert_allclose(passed / 30_000, [0.05, 0.01], rtol=0.2)


@pytest.mark.parametrize("level", [0.95, 0.99])
@pytest.mark.parametrize("count", [5, 20, 100])
def test_equal_eigenvalues_give_the_chi_squared_limit(count: int, level: float) -> None:
    """A sum of ``count`` squared normals; the approximation is a cube-root normal there (1 % off at most)."""
    assert prediction_error_limit(np.full(count, 2.0), level) == pytest.approx(
        2.0 * chi2.ppf(level, count), rel=0.01
    )


def test_one_dominant_eigenvalue_falls_back_to_a_scaled_chi_squared() -> None:
    """One eigenvalue among many small ones: h is negative, and the limit stays above the mean and finite."""
    eigenvalues = np.concatenate([[50.0], np.full(2000, 0.5)])
    first, second, third = (np.sum(eigenvalues**power) for power in (1, 2, 3))
    assert 1.0 - 2.0 * first * third / (3.0 * second**2) < 0.0
    expected = second / first * chi2.ppf(0.95, first**2 / second)
    assert prediction_error_limit(eigenvalues, 0.95) == pytest.approx(expected)
    assert first < expected < 2.0 * first


def test_without_freedom_there_is_no_limit() -> None:
    basis = thin_basis(centred(5, 30, 0))
    found = sample_distances(basis, 4)
    assert np.isnan(found.t2_limits).all()
    assert np.isnan(found.spe_limits).all()
    assert_allclose(found.spe, 0.0, atol=1e-9)
    assert np.isnan(t2_limit(3, 2, 0.95))


@pytest.mark.parametrize("asked", [0, 5])
def test_more_components_than_the_block_has_are_refused(asked: int) -> None:
    with pytest.raises(NumericsError, match=f"{asked} components for the sample distances; allowed: 1 to 4"):
        sample_distances(thin_basis(centred(5, 30, 0)), asked)
