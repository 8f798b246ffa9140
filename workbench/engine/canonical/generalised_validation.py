"""Cross-validation of generalised canonical components: the ridge, and correlations out of sample."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from workbench.engine.canonical.canonical import RIDGE_PATH
from workbench.engine.canonical.fold_scores import pooled_score
from workbench.engine.canonical.generalised_components import PlacedBasis, generalised_components
from workbench.engine.folds import Seed
from workbench.engine.linear import thin_basis
from workbench.engine.nuisance import fit_residuals
from workbench.engine.sides import block_slices, block_weights
from workbench.engine.subject_folds import make_folds
from workbench.errors import NumericsError

FloatArray = NDArray[np.float64]
IndexArray = NDArray[np.intp]


@dataclass(frozen=True, eq=False)
class BlockSplit:
    """One block of a training and test part, prepared by what the training samples teach.

    Attributes
    ----------
    train, test : ndarray
        Values of the samples that the block has, (n_held, p_b); a test row with a missing value is not scored.
    train_rows, test_rows : ndarray of int
        Places of those samples in the training and in the test part.
    """

    train: FloatArray
    train_rows: IndexArray
    test: FloatArray
    test_rows: IndexArray


BlocksSource = Callable[[IndexArray, IndexArray], Sequence[BlockSplit]]


@dataclass(frozen=True, eq=False)
class GeneralisedRidge:
    """One ridge for all blocks by the one-standard-error rule towards more; ``score`` is for choosing only.

    Attributes
    ----------
    multiple : float
    path, scores, errors : ndarray of shape (9,)
        Ridges tried, out-of-fold score (mean over the pairs of blocks) and its standard error.
    """

    multiple: float
    path: FloatArray
    scores: FloatArray
    errors: FloatArray


@dataclass(frozen=True, eq=False)
class GeneralisedValidation:
    """Out-of-sample correlations of every two blocks' variates, from an outer loop that repeats the choice.

    Attributes
    ----------
    correlations : ndarray of shape (n_components,)
        Mean over the pairs of blocks and the repeats.
    standard_errors : ndarray of shape (n_components,)
        Of the mean over pairs, delta method; repeats do not make it smaller.
    pair_correlations : ndarray of shape (n_components, n_blocks, n_blocks)
        Mean over the repeats, 1 on the diagonal.
    with_others, with_others_errors : ndarray of shape (n_components, n_blocks)
        Correlation of each block's variate with the mean of the other blocks', and its standard error.
    choice : GeneralisedRidge or None
        The choice on all samples, for the final fit; None when the ridge was given.
    """

    correlations: FloatArray
    standard_errors: FloatArray
    pair_correlations: FloatArray
    with_others: FloatArray
    with_others_errors: FloatArray
    choice: GeneralisedRidge | None


def blocks_source(
    blocks: Sequence[FloatArray],
    nuisance_columns: FloatArray | None = None,
    *,
    part_sizes: Sequence[Sequence[int] | None] | None = None,
) -> BlocksSource:
    """Return splits of blocks: nuisance regression, centring and scaling learnt from the training rows.

    Parameters
    ----------
    blocks : sequence of ndarray of shape (n_samples, p_b)
        Rows of NaN for a sample that the block lacks.
    nuisance_columns : ndarray of shape (n_samples, c), optional
    part_sizes : sequence of (sequence of int or None), optional
        Features of each part of each block.
    """
    sizes = list(part_sizes) if part_sizes is not None else [None] * len(blocks)
    slices = [
        block_slices(parts, block.shape[1], "block") for parts, block in zip(sizes, blocks, strict=True)
    ]

    def source(train: IndexArray, test: IndexArray) -> list[BlockSplit]:
        return [
            _split_block(block, nuisance_columns, train, test, parts)
            for block, parts in zip(blocks, slices, strict=True)
        ]

    return source


def choose_common_ridge(
    source: BlocksSource,
    n: int,
    labels: NDArray[np.generic] | None = None,
    *,
    folds: int = 5,
    seed: Seed = 0,
    n_components: int = 2,
    subjects: IndexArray | None = None,
) -> GeneralisedRidge:
    """Choose one multiple of the noise levels for all blocks by k-fold cross-validation.

    The score is the mean over the pairs of blocks of the pooled out-of-fold correlation of all components; of the
    ridges within one standard error of the best the largest is taken.

    Parameters
    ----------
    subjects : ndarray of int, shape (n,), optional
        Subject of each row; all rows of one are on the same side of a split.

    Raises
    ------
    NumericsError
        When the folds cannot be formed or a training part of a block has no variation.
    """
    path = RIDGE_PATH.size
    parts = make_folds(labels, subjects, n, folds, seed)
    scored: list[list[FloatArray]] = []
    for train, test in parts:
        fold = _Fold.of(source(train, test), train.size, test.size)
        scored.append([fold.score(float(multiple), n_components) for multiple in RIDGE_PATH])
    blocks = scored[0][0].shape[0]
    variates = np.full((path, blocks, n, n_components), np.nan)
    for (_, test), by_ridge in zip(parts, scored, strict=True):
        variates[:, :, test] = np.stack(by_ridge)
    scores, errors = np.array([_all_pairs(one) for one in variates]).T
    near = np.flatnonzero(scores >= scores.max() - errors[scores.argmax()])
    return GeneralisedRidge(float(RIDGE_PATH[near[-1]]), RIDGE_PATH.copy(), scores, errors)


def cross_validated_components(
    source: BlocksSource,
    n: int,
    labels: NDArray[np.generic] | None = None,
    *,
    n_components: int = 2,
    ridge: float | Sequence[float] | str = "auto",
    folds: int = 5,
    repeats: int = 5,
    seed: int = 0,
    subjects: IndexArray | None = None,
    progress: Callable[[int, int], None] | None = None,
) -> GeneralisedValidation:
    """Out-of-sample correlations of the blocks' variates from repeated double cross-validation.

    In each outer fold the ridge is chosen anew on the training part alone, the components are fitted there and the
    test samples scored; a repeat's figure for two blocks and component ``k`` is
    ``sum u v / sqrt(sum u^2 sum v^2)`` over the samples that both have. Components go by their order in the
    training part (see :func:`workbench.engine.canonical.validation.cross_validated_correlations`).

    Raises
    ------
    NumericsError
        When the data support fewer components, or folds cannot be formed.
    """
    auto = isinstance(ridge, str)
    choice = None
    if auto:
        choice = choose_common_ridge(
            source, n, labels, folds=folds, seed=seed, n_components=n_components, subjects=subjects
        )
    every = []
    for repeat in range(repeats):
        drawn = np.random.SeedSequence(seed, spawn_key=(repeat,))
        variates = None
        for k, (train, test) in enumerate(make_folds(labels, subjects, n, folds, drawn)):
            inner = np.random.SeedSequence(seed, spawn_key=(repeat, k))
            used = _inner(source, train, labels, folds, inner, n_components, subjects) if auto else ridge
            scores = _Fold.of(source(train, test), train.size, test.size).score(used, n_components)
            if variates is None:
                variates = np.full((scores.shape[0], n, n_components), np.nan)
            variates[:, test] = scores
            if progress is not None:
                progress(repeat * folds + k + 1, repeats * folds)
        every.append(_require_scored(variates, n_components))
    return _summary(np.stack(every), choice)


def _inner(
    source: BlocksSource,
    train: IndexArray,
    labels: NDArray[np.generic] | None,
    folds: int,
    seed: Seed,
    n_components: int,
    subjects: IndexArray | None,
) -> float:
    def inside(inner_train: IndexArray, inner_test: IndexArray) -> Sequence[BlockSplit]:
        return source(train[inner_train], train[inner_test])

    return choose_common_ridge(
        inside,
        train.size,
        None if labels is None else labels[train],
        folds=folds,
        seed=seed,
        n_components=n_components,
        subjects=None if subjects is None else subjects[train],
    ).multiple


@dataclass(frozen=True, eq=False)
class _Fold:
    """One fold in sample space, decomposed once for all ridges."""

    placed: tuple[PlacedBasis, ...]
    kernels: tuple[FloatArray, ...]
    splits: tuple[BlockSplit, ...]
    n_test: int

    @classmethod
    def of(cls, splits: Sequence[BlockSplit], n_train: int, n_test: int) -> _Fold:
        placed = tuple(PlacedBasis(thin_basis(one.train), one.train_rows, n_train) for one in splits)
        kernels = tuple(one.test @ one.train.T for one in splits)
        return cls(placed, kernels, tuple(splits), n_test)

    def score(self, multiple: float | Sequence[float] | str, n_components: int) -> FloatArray:
        """Variates of the test samples, (n_blocks, n_test, n_components); NaN where a block lacks one."""
        multiples = np.broadcast_to(np.asarray(multiple, dtype=np.float64), len(self.placed))
        ridges = [m * one.basis.noise_level for m, one in zip(multiples, self.placed, strict=True)]
        found = generalised_components(self.placed, ridges, n_components)
        scores = np.full((len(self.placed), self.n_test, n_components), np.nan)
        for k, (kernel, dual, one) in enumerate(zip(self.kernels, found.duals, self.splits, strict=True)):
            scores[k, one.test_rows] = kernel @ dual
        return scores


def _split_block(
    block: FloatArray,
    columns: FloatArray | None,
    train: IndexArray,
    test: IndexArray,
    parts: Sequence[slice],
) -> BlockSplit:
    held = ~np.isnan(block[:, 0])
    train_rows, test_rows = np.flatnonzero(held[train]), np.flatnonzero(held[test])
    if train_rows.size < 3:
        raise NumericsError("a training part has fewer than 3 samples of a block; use fewer folds")
    taught, unseen = train[train_rows], test[test_rows]
    train_columns = None if columns is None else columns[taught]
    test_columns = None if columns is None else columns[unseen]
    fitted = fit_residuals(train_columns, block[taught])
    if not fitted.varies.any():
        raise NumericsError(
            "no feature of a block varies among the training samples of a fold; use fewer folds"
        )
    weights = block_weights(fitted.varies, parts)
    tested = fitted.standardised(test_columns, block[unseen]) * weights
    tested[~fitted.estimable(test_columns, unseen.size)] = np.nan
    return BlockSplit(
        fitted.standardised(train_columns, block[taught]) * weights, train_rows, tested, test_rows
    )


def _both(u: FloatArray, v: FloatArray) -> tuple[FloatArray, FloatArray]:
    """Scores of two blocks, missing where either is."""
    known = np.isfinite(u) & np.isfinite(v)
    return np.where(known, u, np.nan), np.where(known, v, np.nan)


def _all_pairs(variates: FloatArray) -> tuple[float, float]:
    """Mean over the pairs of blocks of the pooled score of all components, and the mean standard error."""
    first, second = np.triu_indices(variates.shape[0], 1)
    found = [pooled_score(*_both(variates[b], variates[c])) for b, c in zip(first, second, strict=True)]
    return float(np.mean([score for score, _ in found])), float(np.mean([error for _, error in found]))


def _by_component(u: FloatArray, v: FloatArray) -> tuple[FloatArray, FloatArray]:
    """Pooled score and standard error of each component, shape (repeats, n_components)."""
    u, v = _both(u, v)
    return pooled_score(np.moveaxis(u, 1, 2)[..., None], np.moveaxis(v, 1, 2)[..., None])


def _require_scored(variates: FloatArray | None, n_components: int) -> FloatArray:
    if variates is None or not np.isfinite(variates).any(axis=(0, 1)).all():
        raise NumericsError(
            f"no sample can be scored out of fold on {n_components} components: each has a nuisance level that its "
            "training part lacks; remove fewer nuisance columns, or ask for fewer components"
        )
    return variates


def _summary(variates: FloatArray, choice: GeneralisedRidge | None) -> GeneralisedValidation:
    """``variates`` of shape (repeats, n_blocks, n_samples, n_components)."""
    blocks, count = variates.shape[1], variates.shape[3]
    pairs = np.tile(np.eye(blocks), (count, 1, 1))
    first, second = np.triu_indices(blocks, 1)
    errors = np.zeros((first.size, count))
    for k, (b, c) in enumerate(zip(first, second, strict=True)):
        score, error = _by_component(variates[:, b], variates[:, c])
        pairs[:, b, c] = pairs[:, c, b] = score.mean(axis=0)
        errors[k] = error.mean(axis=0)
    others, other_errors = np.zeros((count, blocks)), np.zeros((count, blocks))
    for own in range(blocks):
        rest = np.delete(variates, own, axis=1)
        counts = np.isfinite(rest).sum(axis=1)
        mean = np.where(counts > 0, np.nansum(rest, axis=1) / np.maximum(counts, 1), np.nan)
        score, error = _by_component(variates[:, own], mean)
        others[:, own], other_errors[:, own] = score.mean(axis=0), error.mean(axis=0)
    return GeneralisedValidation(
        correlations=pairs[:, first, second].mean(axis=1),
        standard_errors=errors.mean(axis=0),
        pair_correlations=pairs,
        with_others=others,
        with_others_errors=other_errors,
        choice=choice,
    )
