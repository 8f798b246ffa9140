"""Thin decompositions, the rank rule, the sign rule and correlations with scores."""

from __future__ import annotations

import numpy as np
import pytest
import scipy.linalg
from hypothesis import given
from hypothesis import strategies as st
from numpy.testing import assert_allclose

from workbench.engine.linear import (
    RANK_TOLERANCE,
    ThinBasis,
    column_correlations,
    component_signs,
    thin_basis,
    thin_svd,
)
from workbench.errors import NumericsError


def centred(n: int, p: int, seed: int = 0) -> np.ndarray:
    x = np.random.default_rng(seed).normal(size=(n, p))
    return x - x.mean(axis=0)


@pytest.mark.parametrize("p", [3, 11, 12, 13, 400])
def test_the_basis_rebuilds_the_kernel(p: int) -> None:
    """``U D^2 U'`` is ``XX'`` and U is orthonormal, by either route."""
    x = centred(12, p)
    basis = thin_basis(x)
    assert basis.rank == min(p, 11)
    assert_allclose(basis.vectors.T @ basis.vectors, np.eye(basis.rank), atol=1e-12)
    assert_allclose((basis.vectors * basis.lengths**2) @ basis.vectors.T, x @ x.T, atol=1e-10)


def test_both_routes_agree() -> None:
    """Columns of zeros change the route (features against samples) and nothing else."""
    x = centred(10, 6)
    narrow, wide = thin_basis(x), thin_basis(np.hstack([x, np.zeros((10, 20))]))
    assert_allclose(wide.lengths, narrow.lengths, rtol=1e-10)
    assert_allclose(np.abs(np.sum(wide.vectors * narrow.vectors, axis=0)), 1.0, rtol=1e-10)
    assert narrow.n_features == 6
    assert wide.n_features == 26


def test_the_rank_rule_is_the_stated_one() -> None:
    """A direction is counted above the tolerance and dropped below it."""
    q = np.linalg.qr(centred(8, 3))[0]
    root = np.sqrt(RANK_TOLERANCE)
    assert thin_basis(q * [1.0, 0.5, 3.0 * root]).rank == 3
    assert thin_basis(q * [1.0, 0.5, 0.3 * root]).rank == 2


@pytest.mark.parametrize("copies", [2, 40])
def test_duplicated_features_add_no_rank(copies: int) -> None:
    """Exact copies leave the rank as it was, on both routes."""
    assert thin_basis(np.tile(centred(20, 4), copies)).rank == 4


@pytest.mark.parametrize("p", [2, 9])
def test_a_block_without_variation_is_refused(p: int) -> None:
    with pytest.raises(NumericsError, match=f"5 samples x {p} features has no variation left"):
        thin_basis(np.zeros((5, p)))


def test_noise_level_and_shrinkage_follow_their_formulas() -> None:
    """The noise level is the median eigenvalue; a ridge of that size leaves the median one 1/sqrt(2)."""
    basis = ThinBasis(np.eye(3), np.array([5.0, 2.0, 1.0]), 3)
    assert basis.noise_level == 4.0
    assert_allclose(basis.shrinkage(4.0), [5 / np.sqrt(29), np.sqrt(0.5), 1 / np.sqrt(5)], rtol=1e-12)
    assert_allclose(basis.shrinkage(0.0), 1.0, rtol=1e-12)


@given(st.integers(0, 10_000), st.lists(st.sampled_from([-1.0, 1.0]), min_size=3, max_size=3))
def test_signs_do_not_depend_on_how_components_came(seed: int, flips: list[float]) -> None:
    """Whatever the signs that a decomposition gives, the signed loadings are the same over all blocks."""
    first, second = centred(6, 3, seed), centred(4, 3, seed + 1)
    flip = np.array(flips)
    want = component_signs(first, second)
    got = component_signs(first * flip, second * flip)
    assert_allclose(first * flip * got, first * want)
    assert np.all(np.sum(np.abs(first), axis=0) > 0)
    signed = np.vstack([first, second]) * want
    assert np.all(signed.max(axis=0) >= -signed.min(axis=0))


def test_ties_and_missing_loadings_have_a_stated_rule() -> None:
    """Equal sizes: the first feature of the first block decides; NaN and all-zero components never flip."""
    assert component_signs(np.array([[-0.5], [0.5]]), np.array([[0.5]])) == [-1.0]
    assert component_signs(np.array([[0.5], [-0.5 * (1 + 1e-9)]])) == [1.0]
    assert component_signs(np.array([[np.nan], [-0.1]])) == [-1.0]
    assert component_signs(np.zeros((3, 1))) == [1.0]


def test_correlations_match_numpy() -> None:
    """Every entry is numpy's correlation; a column of zeros has none."""
    x, scores = centred(15, 7), centred(15, 2, seed=5)
    want = np.corrcoef(np.hstack([x, scores]).T)[:7, 7:]
    assert_allclose(column_correlations(x, scores), want, atol=1e-12)
    x[:, 3] = 0.0
    assert np.isnan(column_correlations(x, scores)[3]).all()


def test_where_divide_and_conquer_does_not_converge_the_slower_way_does(
    monkeypatch: pytest.MonkeyPatch,
) -> None:
    """LAPACK gives up on a few matrices of lower rank; the decomposition is the same by its other routine."""
    whole = scipy.linalg.svd

    def stubborn(x: np.ndarray, lapack_driver: str = "gesdd", **told: bool) -> tuple[np.ndarray, ...]:
        if lapack_driver == "gesdd":
            raise scipy.linalg.LinAlgError("SVD did not converge")
        return whole(x, lapack_driver=lapack_driver, **told)

    x = centred(9, 4)
    want = thin_svd(x)
    monkeypatch.setattr(scipy.linalg, "svd", stubborn)
    left, lengths, right = thin_svd(x)
    assert_allclose(lengths, want[1], rtol=1e-12)
    assert_allclose((left * lengths) @ right, x, atol=1e-12)
