"""The choice of ridge: its grid is what single fits give, its rule goes towards more ridge."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from numpy.testing import assert_allclose, assert_array_equal

from workbench.engine import RegularisedCCA, Split, array_source, balanced_folds, choose_ridge
from workbench.engine.canonical.canonical import RIDGE_PATH
from workbench.engine.canonical.ridge_choice import pick_ridge
from workbench.errors import NumericsError


def draw_sides(n: int, p: int, q: int, seed: int = 0, strength: float = 0.0) -> tuple[np.ndarray, np.ndarray]:
    rng = np.random.default_rng(seed)
    factor = strength * rng.normal(size=(n, 1))
    return rng.normal(size=(n, p)) + factor, rng.normal(size=(n, q)) + factor


def unscored(split: Split) -> Split:
    """Return the split with every test row of one side missing."""
    return replace(split, x=replace(split.x, test=np.full_like(split.x.test, np.nan)))


def test_the_path_covers_four_decades_evenly() -> None:
    """Nine ridges from a hundredth of the noise level to a hundred times it."""
    assert RIDGE_PATH.size == 9
    assert_allclose(RIDGE_PATH[[0, -1]], [0.01, 100.0], rtol=1e-12)
    assert_allclose(np.diff(np.log10(RIDGE_PATH)), 0.5, rtol=1e-12)


@pytest.mark.parametrize(("p", "q"), [(40, 15), (6, 4)])
@pytest.mark.parametrize("place", [(0, 0), (8, 3), (4, 8)])
def test_a_grid_point_is_what_the_estimator_gives(p: int, q: int, place: tuple[int, int]) -> None:
    """Fold by fold at one pair of ridges, both pairs together in one score."""
    x, y = draw_sides(24, p, q, strength=0.5)
    source = array_source(x, y)
    u, v = np.empty((2, 24, 2))
    for train, test in balanced_folds(None, 24, 4, 7):
        model = RegularisedCCA(2, ridge=tuple(RIDGE_PATH[list(place)])).fit(x[train], y[train])
        u[test], v[test] = model.transform(x[test], y[test])
    want = (u * v).sum() / np.sqrt((u**2).sum() * (v**2).sum())
    assert choose_ridge(source, 24, folds=4, seed=7).scores[place] == pytest.approx(want, abs=1e-8)


@given(seed=st.integers(0, 10_000))
@settings(max_examples=60, deadline=None)
def test_the_rule_takes_most_ridge_within_one_standard_error(seed: int) -> None:
    """No pair of ridges within one standard error of the best has more ridge, or as much and a better score."""
    rng = np.random.default_rng(seed)
    scores, errors = rng.uniform(0, 1, size=(9, 9)).round(1), rng.uniform(0, 0.4, size=(9, 9))
    i, j = pick_ridge(scores, errors)
    bar = scores.max() - errors.ravel()[scores.argmax()]
    total = np.add.outer(np.arange(9), np.arange(9))
    assert scores[i, j] >= bar
    assert not np.any((scores >= bar) & (total > i + j))
    assert not np.any((scores > scores[i, j]) & (total == i + j))


def test_a_clear_signal_with_noise_wants_ridge_and_scores() -> None:
    """Far more features than samples: some ridge, a high score, and a standard error below it."""
    choice = choose_ridge(array_source(*draw_sides(40, 200, 60, strength=0.7)), 40, n_components=1)
    assert min(choice.multiples) >= 1.0
    assert choice.score > 0.8
    assert choice.score >= choice.best_score - choice.best_error
    assert 0.0 < choice.standard_error < 0.1
    assert choice.n_scored == 40


def test_private_variation_wants_little_ridge() -> None:
    """Strong factors of one side alone: ridge would chase them, and the choice avoids it."""
    rng = np.random.default_rng(5)
    x, y = draw_sides(80, 300, 80, seed=5, strength=0.35)
    x = x + 2.0 * rng.normal(size=(80, 4)) @ rng.normal(size=(4, 300))
    y = y + 2.0 * rng.normal(size=(80, 4)) @ rng.normal(size=(4, 80))
    choice = choose_ridge(array_source(x, y), 80, n_components=1)
    assert max(choice.best_multiples) <= 1.0
    assert choice.scores[8, 8] < choice.best_score - choice.best_error


def test_the_same_seed_chooses_the_same() -> None:
    """And another one draws other folds; progress counts folds."""
    source, seen = array_source(*draw_sides(20, 30, 8)), []
    first = choose_ridge(source, 20, seed=1, progress=lambda *step: seen.append(step))
    assert_array_equal(choose_ridge(source, 20, seed=1).scores, first.scores)
    assert not np.array_equal(choose_ridge(source, 20, seed=2).scores, first.scores)
    assert seen == [(k, 5) for k in range(1, 6)]


def test_folds_of_lower_rank_give_what_they_have() -> None:
    """One feature on a side: a single pair is scored although two are asked for."""
    source = array_source(*draw_sides(20, 30, 1, strength=1.0))
    one, two = (choose_ridge(source, 20, n_components=k) for k in (1, 2))
    assert_allclose(one.scores, two.scores, rtol=1e-12)


def test_what_cannot_be_scored_is_refused() -> None:
    """No sample is like those it is predicted from; or more folds than samples."""
    x, y = draw_sides(6, 10, 4)
    alone = np.eye(6)[:, :2]
    source = array_source(x, y, alone)
    assert choose_ridge(source, 6, folds=6).n_scored == 4
    with pytest.raises(NumericsError, match="5 folds for 4 samples"):
        choose_ridge(array_source(x[:4], y[:4]), 4)
    with pytest.raises(NumericsError, match="none of the 6 samples can be scored out of fold"):
        choose_ridge(lambda train, test: unscored(source(train, test)), 6, folds=2)
