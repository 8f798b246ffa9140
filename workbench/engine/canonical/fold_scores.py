"""Out-of-fold scores of canonical pairs: a fold is decomposed once and serves every ridge."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from workbench.engine.canonical.canonical import RidgePair, check_unridged, leading_directions
from workbench.engine.canonical.splits import Split
from workbench.engine.linear import ThinBasis, kernel_basis

FloatArray = NDArray[np.float64]


@dataclass(frozen=True, eq=False)
class FoldBases:
    """One fold in sample space.

    Attributes
    ----------
    x, y : ThinBasis
        Decompositions of the training parts.
    meeting : ndarray of shape (rank_x, rank_y)
        ``U_x' U_y``.
    x_test, y_test : ndarray of shape (n_scored, rank)
        Test rows in the coordinates of the training part, ``Z X' U D^(-1)``.
    scored : ndarray of bool, shape (n_test,)
        Test rows without missing values.
    freedom : int
        ``n - c`` of the training part.
    """

    x: ThinBasis
    y: ThinBasis
    meeting: FloatArray
    x_test: FloatArray
    y_test: FloatArray
    scored: NDArray[np.bool_]
    freedom: int


@dataclass(frozen=True, eq=False)
class FoldScores:
    """Variates of the test samples that are scored, each of shape (n_scored, n_pairs)."""

    x_test: FloatArray
    y_test: FloatArray


def decompose_split(split: Split) -> FoldBases:
    """Decomposition of a split, once for all ridges."""
    x, y = (kernel_basis(side.train, side.n_features) for side in (split.x, split.y))
    scored = np.asarray(np.isfinite(split.x.test).all(axis=1) & np.isfinite(split.y.test).all(axis=1))
    return FoldBases(
        x,
        y,
        x.vectors.T @ y.vectors,
        split.x.test[scored] @ (x.vectors / x.lengths),
        split.y.test[scored] @ (y.vectors / y.lengths),
        scored,
        len(split.x.train) - split.nuisance_rank,
    )


def score_fold(fold: FoldBases, multiples: RidgePair, n_components: int) -> FoldScores:
    """Scores of the fold's leading pairs at one ridge (multiples of the fold's own noise levels).

    At most as many pairs come back as the smaller rank allows.
    """
    check_unridged(multiples, fold.x, fold.y, fold.freedom)
    n_pairs = min(n_components, fold.x.rank, fold.y.rank)
    shrunk_x = fold.x.shrinkage(multiples[0] * fold.x.noise_level)
    shrunk_y = fold.y.shrinkage(multiples[1] * fold.y.noise_level)
    left, right = leading_directions(shrunk_x[:, None] * fold.meeting * shrunk_y, n_pairs)
    return FoldScores(
        fold.x_test @ ((shrunk_x / fold.x.lengths)[:, None] * left),
        fold.y_test @ ((shrunk_y / fold.y.lengths)[:, None] * right),
    )


def pooled_score(u: FloatArray, v: FloatArray) -> tuple[FloatArray, FloatArray]:
    """Out-of-sample score and its standard error.

    ``r = sum u v / sqrt(sum u^2 sum v^2)`` over all samples and pairs that are given: it does not change when
    a fold's pair has the other sign, or when pairs of a fold are rotated into each other. The standard
    error is that of the delta method, from each sample's influence on ``r``.

    Parameters
    ----------
    u, v : ndarray of shape (..., n_samples, n_pairs)
        Scores; NaN where a sample was not scored or a fold had no such pair.

    Returns
    -------
    tuple of ndarray of shape (...)
        Score (0 where nothing was scored, or all scores are 0) and standard error.

    Examples
    --------
    >>> score, error = pooled_score(np.array([[1.0], [-1.0]]), np.array([[2.0], [-2.0]]))
    >>> float(score), float(error)
    (1.0, 0.0)
    """
    u, v = np.nan_to_num(u), np.nan_to_num(v)
    products, own_u, own_v = ((a * b).sum(axis=-1) for a, b in ((u, v), (u, u), (v, v)))
    total_u, total_v = own_u.sum(axis=-1, keepdims=True), own_v.sum(axis=-1, keepdims=True)
    empty = (total_u <= 0.0) | (total_v <= 0.0)
    total_u, total_v = np.where(empty, 1.0, total_u), np.where(empty, 1.0, total_v)
    scale = np.sqrt(total_u * total_v)
    score = products.sum(axis=-1, keepdims=True) / scale
    influence = products / scale - 0.5 * score * (own_u / total_u + own_v / total_v)
    return score[..., 0], np.sqrt((influence**2).sum(axis=-1))
