"""Removal learnt from some rows takes the private factors out of others, and leaves the shared ones in."""

from __future__ import annotations

import numpy as np
from numpy.testing import assert_allclose

from workbench.engine.private.private_removal import PrivateRemoval, private_removals


def studied(seed: int, n: int = 120) -> dict[str, np.ndarray]:
    """Return two blocks with one shared factor in some features of each and private factors in all."""
    rng = np.random.default_rng(seed)
    shared, own, others, age = (rng.normal(size=(n, k)) for k in (1, 2, 2, 1))
    x = own @ rng.normal(size=(2, 400)) + rng.normal(size=(n, 400)) + age
    y = others @ rng.normal(size=(2, 150)) + rng.normal(size=(n, 150)) + age
    x[:, :60] += 1.5 * shared
    y[:, :40] += 1.5 * shared
    return {"x": x, "y": y, "shared": shared, "own": own, "age": age}


def explained(x: np.ndarray, factors: np.ndarray) -> float:
    """Return the mean share of the columns' variance that factors explain."""
    x = x - x.mean(axis=0)
    basis = np.linalg.qr(factors - factors.mean(axis=0))[0]
    return float(np.mean(np.sum((basis.T @ x) ** 2, axis=0) / np.sum(x**2, axis=0)))


def removal_of(x: np.ndarray, y: np.ndarray, age: np.ndarray | None = None) -> PrivateRemoval:
    return private_removals([x, y], ["x", "y"], age)[0]


def test_rows_that_had_no_part_in_it_are_cleaned_and_keep_what_is_shared() -> None:
    study, train, test = studied(1), slice(0, 80), slice(80, 120)
    removal = removal_of(study["x"][train], study["y"][train], study["age"][train])
    cleaned = removal.transform(study["x"][test], study["age"][test])
    raw = study["x"][test] - study["age"][test]
    assert removal.weights.shape[1] == 2
    assert explained(raw[:, 100:], study["own"][test]) > 0.4
    assert explained(cleaned[:, 100:], study["own"][test]) < 0.12
    assert explained(cleaned[:, :60], study["shared"][test]) > 0.5


def test_the_units_of_features_only_scale_the_result() -> None:
    study = studied(2, 60)
    unit = np.exp(np.random.default_rng(0).normal(size=400))
    plain = removal_of(study["x"], study["y"]).transform(study["x"])
    scaled = removal_of(study["x"] * unit, study["y"]).transform(study["x"] * unit)
    assert_allclose(scaled, plain * unit, rtol=1e-7, atol=1e-9)


def test_too_few_rows_leave_the_residuals_as_they_are() -> None:
    study = studied(3, 19)
    removal = removal_of(study["x"], study["y"], study["age"])
    assert "19 samples" in removal.off
    left = removal.transform(study["x"], study["age"])
    assert_allclose(left, removal.residuals.transform(study["age"], study["x"]))


def test_blocks_learn_from_the_rows_that_they_have() -> None:
    """A block that lacks rows is cleaned by the others, and a lacking row stays one."""
    study = studied(1)
    lacking = study["y"].copy()
    lacking[:20] = np.nan
    first, second = private_removals([study["x"], lacking], ["x", "y"], study["age"])
    assert first.weights.shape[1] == second.weights.shape[1] == 2
    cleaned = second.transform(lacking, study["age"])
    assert_allclose(np.isnan(cleaned).all(axis=1), np.arange(120) < 20)
    assert 0.3 < first.share < 0.8
