"""The ridges of a canonical analysis, chosen by cross-validation over a grid of both sides' noise levels."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from workbench.engine.canonical.canonical import RIDGE_PATH, RidgePair
from workbench.engine.canonical.fold_scores import decompose_split, pooled_score, score_fold
from workbench.engine.canonical.splits import SplitSource
from workbench.engine.folds import Seed
from workbench.engine.subject_folds import make_folds
from workbench.errors import NumericsError

FloatArray = NDArray[np.float64]
Progress = Callable[[int, int], None]


@dataclass(frozen=True, eq=False)
class RidgeChoice:
    """Ridges chosen by cross-validation, in multiples of each side's noise level.

    ``score`` is for choosing only: as the outcome of a choice it is too high (on noise well above 0). The
    honest figure is :func:`cross_validated_correlations`, whose outer loop repeats the choice.

    Attributes
    ----------
    multiples : pair of float
        The choice: of all pairs of ridges whose score is within one standard error of the best, the one with
        most ridge (greatest sum of the two log ridges, then the better score).
    score, standard_error : float
        Out-of-fold score of the choice, and its standard error.
    best_multiples : pair of float
    best_score, best_error : float
        The best of the grid, its score and standard error.
    path : ndarray of shape (9,)
        Ridges tried on each side.
    scores : ndarray of shape (9, 9)
        Score at ``path[i]`` for X and ``path[j]`` for Y.
    n_scored : int
        Samples scored out of fold.
    n_components, folds : int
        As asked.
    """

    multiples: RidgePair
    score: float
    standard_error: float
    best_multiples: RidgePair
    best_score: float
    best_error: float
    path: FloatArray
    scores: FloatArray
    n_scored: int
    n_components: int
    folds: int


def choose_ridge(
    source: SplitSource,
    n: int,
    labels: NDArray[np.generic] | None = None,
    *,
    folds: int = 5,
    seed: Seed = 0,
    n_components: int = 2,
    subjects: NDArray[np.intp] | None = None,
    progress: Progress | None = None,
) -> RidgeChoice:
    """Ridges of both sides by k-fold cross-validation and the one-standard-error rule towards more ridge.

    The score over all out-of-fold samples and the first ``n_components`` pairs together is
    ``sum u v / sqrt(sum u^2 sum v^2)`` (:func:`pooled_score`), at each of 9 x 9 ridges over four decades.

    Parameters
    ----------
    source : callable
        Split of given training and test positions.
    n : int
        Number of samples.
    labels : ndarray of shape (n,) or (n, n_factors), optional
        Levels to be spread over the folds.
    folds : int
        From 2 to ``n``.
    seed : int, SeedSequence, Generator or None
        Draws the folds.
    n_components : int
        Pairs that the score covers, at least 1; folds of lower rank give what they have.
    subjects : ndarray of int, shape (n,), optional
        Subject of each row; all rows of one are on the same side of a split.
    progress : callable, optional
        Called with folds done and folds in all.

    Raises
    ------
    NumericsError
        When the folds cannot be formed, a training part has no variation, or no sample can be scored.

    References
    ----------
    Breiman, Friedman, Olshen & Stone 1984, Classification and Regression Trees, section 3.4.3 (the rule).

    Examples
    --------
    >>> from workbench.engine.canonical.splits import array_source
    >>> rng = np.random.default_rng(0)
    >>> shared = rng.normal(size=(60, 1))
    >>> x, y = shared + rng.normal(size=(60, 50)), shared + rng.normal(size=(60, 20))
    >>> bool(choose_ridge(array_source(x, y), 60, n_components=1).score > 0.9)
    True
    """
    grid = RIDGE_PATH.size
    u, v = np.full((2, grid, grid, n, n_components), np.nan)
    for done, (train, test) in enumerate(make_folds(labels, subjects, n, folds, seed), start=1):
        fold = decompose_split(source(train, test))
        for i, j in np.ndindex(grid, grid):
            scores = score_fold(fold, (float(RIDGE_PATH[i]), float(RIDGE_PATH[j])), n_components)
            pairs = scores.x_test.shape[1]
            u[i, j, test[fold.scored], :pairs] = scores.x_test
            v[i, j, test[fold.scored], :pairs] = scores.y_test
        if progress is not None:
            progress(done, folds)
    n_scored = int(np.count_nonzero(np.isfinite(u[0, 0, :, 0])))
    if n_scored == 0:
        raise NumericsError(
            f"none of the {n} samples can be scored out of fold: each has a nuisance level that its training "
            "part lacks; remove fewer nuisance columns, or give the ridge as a number"
        )
    return _as_choice(*pooled_score(u, v), n_scored, n_components, folds)


def pick_ridge(scores: FloatArray, errors: FloatArray) -> tuple[int, int]:
    """Place of most ridge among the scores within one standard error of the best one.

    Parameters
    ----------
    scores, errors : ndarray of shape (n_path, n_path)
        Score and its standard error at each pair of ridges of a path that is even in log ridge, so that the
        sum of two positions orders the sum of logs.

    Examples
    --------
    >>> pick_ridge(np.array([[0.9, 0.85], [0.6, 0.7]]), np.full((2, 2), 0.1))
    (0, 1)
    """
    best = int(scores.argmax())
    near = np.argwhere(scores >= scores.flat[best] - errors.flat[best])
    i, j = max(near.tolist(), key=lambda place: (sum(place), scores[tuple(place)]))
    return i, j


def _as_choice(
    scores: FloatArray, errors: FloatArray, n_scored: int, n_components: int, folds: int
) -> RidgeChoice:
    chosen, best = pick_ridge(scores, errors), np.unravel_index(int(scores.argmax()), scores.shape)
    return RidgeChoice(
        multiples=(float(RIDGE_PATH[chosen[0]]), float(RIDGE_PATH[chosen[1]])),
        score=float(scores[chosen]),
        standard_error=float(errors[chosen]),
        best_multiples=(float(RIDGE_PATH[best[0]]), float(RIDGE_PATH[best[1]])),
        best_score=float(scores[best]),
        best_error=float(errors[best]),
        path=RIDGE_PATH.copy(),
        scores=scores,
        n_scored=n_scored,
        n_components=n_components,
        folds=folds,
    )
