"""Elbow, parallel analysis and cross-validation: each on cases with a known answer."""

from __future__ import annotations

import numpy as np
import pytest
from numpy.testing import assert_allclose

from workbench.engine.linear import thin_basis
from workbench.engine.scree import _corner_errors, cross_validated_components, elbow, parallel_analysis
from workbench.errors import NumericsError


def scaled(x: np.ndarray) -> np.ndarray:
    z = x - x.mean(axis=0)
    return z / z.std(axis=0, ddof=1)


def planted(n: int, p: int, factors: int, seed: int) -> np.ndarray:
    rng = np.random.default_rng(seed)
    return scaled(
        2.0 * rng.normal(size=(n, factors)) @ rng.normal(size=(factors, p)) + rng.normal(size=(n, p))
    )


def eigenvalues(z: np.ndarray) -> np.ndarray:
    return thin_basis(z).lengths ** 2 / (len(z) - 1)


def test_the_elbow_is_where_large_components_end() -> None:
    found = elbow(np.array([40.0, 30.0, 20.0, 2.0, 1.9, 1.8, 1.7, 1.6]))
    assert found.number == 3
    assert "component 3 explains 20.2 %, the next one 2.0 %" in found.reason


@pytest.mark.parametrize("values", [[1.0], [5.0, 1.0], [2.0, 2.0, 2.0, 2.0]])
def test_without_a_curve_there_is_no_elbow(values: list[float]) -> None:
    assert elbow(np.array(values)).number == 0


def test_a_curve_above_its_chord_has_no_elbow() -> None:
    found = elbow(np.array([10.0, 9.9, 9.7, 9.0, 1.0]))
    assert (found.number, found.reason) == (0, "the curve never falls below its chord: it turns flat nowhere")


@pytest.mark.parametrize("shape", [(40, 300), (100, 12)])
def test_parallel_analysis_finds_planted_components_and_none_in_noise(shape: tuple[int, int]) -> None:
    z, noise = planted(*shape, 2, 1), scaled(np.random.default_rng(2).normal(size=shape))
    assert parallel_analysis(z, eigenvalues(z), random_state=1).number == 2
    assert parallel_analysis(noise, eigenvalues(noise), random_state=1).number == 0


def test_permuted_blocks_have_the_variance_of_the_block() -> None:
    z = planted(20, 60, 1, 3)
    found = parallel_analysis(z, eigenvalues(z), draws=5, random_state=1)
    assert found.draws == 5
    assert found.means.sum() == pytest.approx(60.0, rel=1e-10)
    assert (found.limits >= found.means).all()


def test_one_permuted_block_is_too_few() -> None:
    z = planted(20, 60, 1, 3)
    with pytest.raises(NumericsError, match="1 permuted blocks; parallel analysis needs at least 2"):
        parallel_analysis(z, eigenvalues(z), draws=1, random_state=1)


def test_the_error_of_a_corner_is_that_of_the_formula_written_out() -> None:
    """``A - B D_k^+ C`` from the block itself, against the same from n x n matrices."""
    z = np.random.default_rng(4).normal(size=(12, 30))
    train, test = np.arange(8), np.arange(8, 12)
    target, source = z[:, :10], z[:, 10:]
    found = _corner_errors(target @ target.T, source @ source.T, train, test, 5)
    a, c = target[test] - target[train].mean(axis=0), target[train] - target[train].mean(axis=0)
    b, d = source[test] - source[train].mean(axis=0), source[train] - source[train].mean(axis=0)
    left, size, right = np.linalg.svd(d, full_matrices=False)
    expected = [np.sum((a - b @ (right[:k].T / size[:k]) @ left[:, :k].T @ c) ** 2) for k in range(6)]
    assert_allclose(found, expected, rtol=1e-9)


def test_cross_validation_finds_planted_components_and_none_in_noise() -> None:
    assert cross_validated_components(planted(48, 300, 3, 5), random_state=1).number == 3
    noise = scaled(np.random.default_rng(6).normal(size=(48, 300)))
    assert cross_validated_components(noise, random_state=1).number == 0


@pytest.mark.parametrize("shape", [(5, 100), (50, 3)])
def test_too_small_blocks_are_not_cross_validated(shape: tuple[int, int]) -> None:
    assert cross_validated_components(np.random.default_rng(7).normal(size=shape), random_state=1) is None


def test_copies_of_few_features_do_not_break_cross_validation() -> None:
    z = scaled(np.repeat(np.random.default_rng(8).normal(size=(20, 2)), 10, axis=1))
    found = cross_validated_components(z, random_state=1)
    assert np.isfinite(found.errors).all()
    assert found.errors[2] < 1e-6
