"""Out-of-sample correlations: what is shared is found, noise gives nothing, and a slow way gives the same."""

from __future__ import annotations

import numpy as np
import pytest
from numpy.testing import assert_allclose, assert_array_equal

from workbench.engine import (
    RegularisedCCA,
    array_source,
    balanced_folds,
    cross_validated_correlations,
    fit_residuals,
)
from workbench.engine.canonical.fold_scores import pooled_score
from workbench.errors import NumericsError


def draw_sides(n: int, p: int, q: int, seed: int, strength: float = 0.0) -> tuple[np.ndarray, np.ndarray]:
    rng = np.random.default_rng(seed)
    factor = strength * rng.normal(size=(n, 1))
    x, y = rng.normal(size=(n, p)), rng.normal(size=(n, q))
    x[:, : p // 2] += factor
    y[:, : q // 2] += factor
    return x, y


def noise_correlations(studies: int, ridge: object) -> tuple[np.ndarray, np.ndarray]:
    """Out-of-sample correlations of two pairs, and the score the ridge was chosen by, of studies of noise."""
    found, chosen = [], []
    for seed in range(studies):
        source = array_source(*draw_sides(32, 80, 40, seed))
        result = cross_validated_correlations(source, 32, ridge=ridge, folds=4, repeats=1, seed=seed)
        found.append(result.correlations)
        chosen.append(np.nan if result.choice is None else result.choice.best_score)
    return np.array(found), np.array(chosen)


@pytest.mark.parametrize(("ridge", "studies"), [("auto", 50), (1.0, 600), (0.01, 600)])
def test_noise_gives_nothing_out_of_sample(ridge: object, studies: int) -> None:
    """Over many studies of noise no pair's mean is beyond 0.02 by more than two standard errors."""
    found, chosen = noise_correlations(studies, ridge)
    error = found.std(axis=0, ddof=1) / np.sqrt(studies)
    assert np.all(np.abs(found.mean(axis=0)) <= 0.02 + 2.0 * error)
    if ridge == "auto":
        # What the ridge was chosen by is far above 0 in the same studies: hence the outer loop.
        assert chosen.mean() > 0.1


def test_what_is_shared_is_found() -> None:
    """A factor on half of the features of both sides: near its true out-of-sample correlation."""
    x, y = draw_sides(300, 200, 60, seed=1, strength=0.5)
    fitted = RegularisedCCA(1, random_state=0).fit(x[:60], y[:60])
    u, v = fitted.transform(x[60:], y[60:])
    fresh = np.corrcoef(u[:, 0], v[:, 0])[0, 1]
    result = cross_validated_correlations(array_source(x[:60], y[:60]), 60, n_components=1, repeats=2)
    assert fresh > 0.6
    assert result.correlations[0] == pytest.approx(fresh, abs=3 * result.standard_errors[0])


@pytest.mark.parametrize("nuisance", [False, True])
def test_the_slow_way_gives_the_same(nuisance: bool) -> None:
    """Fold by fold with the estimator itself, the score put together by hand."""
    x, y = draw_sides(30, 50, 12, seed=2, strength=0.6)
    columns = np.random.default_rng(3).normal(size=(30, 1)) if nuisance else None
    source = array_source(x, y, columns)
    result = cross_validated_correlations(source, 30, ridge=(1.0, 0.3), folds=3, repeats=1, seed=9)
    u, v = np.empty((2, 30, 2))
    for train, test in balanced_folds(None, 30, 3, np.random.SeedSequence(9, spawn_key=(0,))):
        fitted = [fit_residuals(None if columns is None else columns[train], side[train]) for side in (x, y)]
        taught, unseen = (
            [
                one.standardised(None if columns is None else columns[rows], side[rows])
                for one, side in zip(fitted, (x, y), strict=True)
            ]
            for rows in (train, test)
        )
        u[test], v[test] = RegularisedCCA(2, ridge=(1.0, 0.3)).fit(*taught).transform(*unseen)
    want = (u * v).sum(axis=0) / np.sqrt((u**2).sum(axis=0) * (v**2).sum(axis=0))
    assert_allclose(result.correlations, want, atol=1e-9)
    assert result.choice is None
    assert_array_equal(result.ridges, np.broadcast_to([1.0, 0.3], (1, 3, 2)))


def test_the_ridge_is_chosen_without_the_test_samples() -> None:
    """Ruining one sample changes the ridge of no fold that tests it."""
    x, y = draw_sides(40, 60, 20, seed=4, strength=0.5)
    ruined = x.copy()
    ruined[7] *= 1e3
    before, after = (
        cross_validated_correlations(array_source(side, y), 40, folds=4, repeats=1, seed=5)
        for side in (x, ruined)
    )
    folds = balanced_folds(None, 40, 4, np.random.SeedSequence(5, spawn_key=(0,)))
    tests_it = [7 in test for _, test in folds]
    assert_array_equal(before.ridges[0, tests_it], after.ridges[0, tests_it])
    assert before.ridges.shape == (1, 4, 2)


def test_repeats_do_not_depend_on_each_other() -> None:
    """The first repeat of three is the only one of one; the figure is their mean."""
    x, y = draw_sides(30, 40, 12, seed=6, strength=0.6)
    one, three = (
        cross_validated_correlations(array_source(x, y), 30, ridge=1.0, repeats=repeats, seed=2)
        for repeats in (1, 3)
    )
    assert_array_equal(three.by_repeat[0], one.by_repeat[0])
    assert not np.array_equal(three.by_repeat[1], one.by_repeat[0])
    assert_allclose(three.correlations, three.by_repeat.mean(axis=0), rtol=1e-12)


def test_samples_of_an_unseen_level_are_not_scored() -> None:
    """The only sample of its batch is in no training part that tests it; the others are scored."""
    x, y = draw_sides(24, 30, 8, seed=7)
    batch = np.zeros((24, 1))
    batch[11] = 1.0
    source = array_source(x, y, batch)
    result = cross_validated_correlations(source, 24, batch[:, 0], ridge=1.0, n_components=1, repeats=2)
    assert_array_equal(result.n_scored, [23, 23])


def test_progress_counts_the_outer_folds() -> None:
    seen: list[tuple[int, int]] = []
    x, y = draw_sides(20, 10, 5, seed=8)
    cross_validated_correlations(
        array_source(x, y), 20, ridge=1.0, folds=4, repeats=2, progress=lambda *step: seen.append(step)
    )
    assert seen == [(k, 8) for k in range(1, 9)]


def test_what_cannot_be_validated_is_refused() -> None:
    """More pairs than training parts support, no ridge with too many features, no repeats."""
    source = array_source(*draw_sides(20, 16, 2, seed=9))
    with pytest.raises(
        NumericsError, match="asked for 3 canonical pairs, the training parts of the folds support 2"
    ):
        cross_validated_correlations(source, 20, n_components=3, ridge=1.0)
    with pytest.raises(NumericsError, match="side X with 16 features and 15 degrees of freedom"):
        cross_validated_correlations(source, 20, n_components=1, ridge=0.0)
    with pytest.raises(NumericsError, match="0 repeats of 2 pairs; at least 1 of each"):
        cross_validated_correlations(source, 20, repeats=0)
    with pytest.raises(NumericsError, match="ridge is -1; allowed"):
        cross_validated_correlations(source, 20, ridge=-1)


def test_a_fold_may_flip_or_rotate_its_pairs() -> None:
    """The pooled score does not change when half of the samples have both variates turned together."""
    u, v = np.random.default_rng(0).normal(size=(2, 20, 2))
    turn = np.array([[0.6, -0.8], [-0.8, -0.6]])
    turned_u, turned_v = u.copy(), v.copy()
    turned_u[:10], turned_v[:10] = u[:10] @ turn, v[:10] @ turn
    assert_allclose(pooled_score(turned_u, turned_v), pooled_score(u, v), rtol=1e-12)


def test_the_standard_error_is_that_of_the_bootstrap() -> None:
    """Delta method against 4,000 resamples of the samples, within a tenth."""
    rng = np.random.default_rng(0)
    u = rng.normal(size=(80, 1))
    v = 0.5 * u + rng.normal(size=(80, 1))
    drawn = rng.integers(80, size=(4000, 80))
    scores, _ = pooled_score(u[drawn], v[drawn])
    assert pooled_score(u, v)[1] == pytest.approx(scores.std(), rel=0.1)


def test_nothing_scored_is_zero() -> None:
    """Missing scores count for nothing, and only missing ones give 0."""
    u = np.array([[1.0], [np.nan], [2.0]])
    assert_allclose(pooled_score(u, -u), (-1.0, 0.0), atol=1e-12)
    assert_array_equal(pooled_score(np.full((3, 1), np.nan), u), (0.0, 0.0))
