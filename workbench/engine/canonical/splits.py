"""Training and test parts of two sides, prepared by what the training samples alone teach."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from workbench.engine.nuisance import check_finite, fit_residuals, residual_scale
from workbench.engine.sides import block_slices, kernel_weights
from workbench.errors import NumericsError

FloatArray = NDArray[np.float64]
IndexArray = NDArray[np.intp]


CHUNK = 512
"""Features at a time, so that what is done to them stays in a processor's cache."""


@dataclass(frozen=True, eq=False)
class SideSplit:
    """One side of a training and test part in sample space, ready for the method.

    Attributes
    ----------
    train : ndarray of shape (n_train, n_train)
        ``XX'`` of the training rows, nuisance removed, scaled.
    test : ndarray of shape (n_test, n_train)
        ``ZX'`` of the test rows by the same rules. A row with a missing value is not scored: a sample that the
        training samples say nothing about.
    n_features : int
        Features that vary in training.
    """

    train: FloatArray
    test: FloatArray
    n_features: int

    @classmethod
    def of(cls, train: FloatArray, test: FloatArray) -> SideSplit:
        """Side of prepared training and test rows, (n_train, p) and (n_test, p)."""
        return cls(train @ train.T, test @ train.T, train.shape[1])


@dataclass(frozen=True, eq=False)
class Split:
    """Both sides of one training and test part.

    Attributes
    ----------
    x, y : SideSplit
    nuisance_rank : int
        Dimensions ``c`` that were removed from the training rows, the intercept counted.
    """

    x: SideSplit
    y: SideSplit
    nuisance_rank: int = 1


SplitSource = Callable[[IndexArray, IndexArray], Split]
"""Gives the :class:`Split` of training and test positions; everything that is learnt is learnt inside."""


def array_source(
    x: FloatArray,
    y: FloatArray,
    nuisance_columns: FloatArray | None = None,
    *,
    x_block_sizes: Sequence[int] | None = None,
    y_block_sizes: Sequence[int] | None = None,
) -> SplitSource:
    """Return splits of two arrays: nuisance regression, centring and scaling learnt from the training rows.

    Features that are constant in training are dropped there, and so is their weight in the block. Test
    samples with a nuisance level that training never saw come back missing.

    Parameters
    ----------
    x, y : ndarray of shape (n_samples, p) and (n_samples, q)
    nuisance_columns : ndarray of shape (n_samples, c), optional
        Columns to be removed, the intercept not among them.
    x_block_sizes, y_block_sizes : sequence of int, optional
        Features of each block of the side; blocks are brought to equal total variance.

    Raises
    ------
    NumericsError
        When an array is not finite, the rows differ in number or block sizes do not add up; from the source,
        when no feature varies in a training part.

    Examples
    --------
    >>> x = np.array([[1.0], [3.0], [9.0]])
    >>> source = array_source(x, 2.0 * x)
    >>> source(np.array([0, 1]), np.array([2])).x.test.round(3)  # 4.95 times -0.707 and 0.707
    array([[-3.5,  3.5]])
    """
    x, y = check_finite(x, "side X"), check_finite(y, "side Y")
    if x.shape[0] != y.shape[0]:
        raise NumericsError(
            f"side X has {x.shape[0]} rows and side Y {y.shape[0]}; give the same samples in the same order"
        )
    sides = [
        (x, block_slices(x_block_sizes, x.shape[1], "X"), "X"),
        (y, block_slices(y_block_sizes, y.shape[1], "Y"), "Y"),
    ]

    def source(train: IndexArray, test: IndexArray) -> Split:
        (x_part, rank), (y_part, _) = (
            _split_side(values, nuisance_columns, train, test, blocks, side) for values, blocks, side in sides
        )
        return Split(x_part, y_part, rank)

    return source


def _split_side(
    values: FloatArray,
    columns: FloatArray | None,
    train: IndexArray,
    test: IndexArray,
    blocks: Sequence[slice],
    side: str,
) -> tuple[SideSplit, int]:
    """One side of a split, and the rank of the nuisance in training."""
    rows = np.concatenate([train, test])
    explained, rank, estimable = _explained_part(columns, train, test)
    kernels, counts = [], []
    for block in blocks:
        kernel, count = np.zeros((rows.size, rows.size)), 0
        for start in range(block.start, block.stop, CHUNK):
            raw = values[:, start : min(start + CHUNK, block.stop)][rows]
            rest = raw - explained(raw[: train.size])
            scale, varies = residual_scale(raw[: train.size], rest[: train.size], rank)
            scaled = (rest if varies.all() else rest[:, varies]) / scale[varies]
            kernel += scaled @ scaled.T
            count += int(np.count_nonzero(varies))
        kernels.append(kernel)
        counts.append(count)
    if sum(counts) == 0:
        raise NumericsError(
            f"no feature of side {side} varies among the {train.size} training samples of a fold; use fewer "
            "folds, or leave the block out"
        )
    together = np.sum([w * one for w, one in zip(kernel_weights(counts), kernels, strict=True)], axis=0)
    tested = together[train.size :, : train.size]
    tested[~estimable] = np.nan
    return SideSplit(together[: train.size, : train.size], tested, sum(counts)), rank


def _explained_part(
    columns: FloatArray | None, train: IndexArray, test: IndexArray
) -> tuple[Callable[[FloatArray], FloatArray], int, NDArray[np.bool_]]:
    """Return what the nuisance regression explains of all rows' values, its rank, and which test rows it can predict.

    It is learnt on the training rows, and linear in their values: learnt on the identity it is a matrix of
    (n_train + n_test, n_train).
    """
    if columns is None:
        return lambda taught: taught.mean(axis=0), 1, np.ones(test.size, dtype=np.bool_)
    fitted = fit_residuals(columns[train], np.eye(train.size))
    every = np.vstack([columns[train], columns[test]]) - fitted.column_mean
    matrix = fitted.mean + every @ fitted.coefficients
    return (
        lambda taught: np.asarray(matrix @ taught),
        fitted.rank,
        fitted.estimable(columns[test], test.size),
    )
