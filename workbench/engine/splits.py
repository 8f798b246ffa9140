"""Training and test parts of two sides, prepared by what the training samples alone teach."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from workbench.engine.nuisance import check_finite, fit_residuals
from workbench.engine.sides import block_slices, block_weights
from workbench.errors import NumericsError

FloatArray = NDArray[np.float64]
IndexArray = NDArray[np.intp]


@dataclass(frozen=True, eq=False)
class Split:
    """Both sides of one training and test part, ready for the method.

    Attributes
    ----------
    x_train, y_train : ndarray of shape (n_train, p) and (n_train, q)
        Nuisance removed, scaled; no missing values.
    x_test, y_test : ndarray of shape (n_test, p) and (n_test, q)
        The test samples by the same rules. A row with a missing value is not scored: a sample that the
        training samples say nothing about.
    nuisance_rank : int
        Dimensions ``c`` that were removed from the training rows, the intercept counted.
    """

    x_train: FloatArray
    x_test: FloatArray
    y_train: FloatArray
    y_test: FloatArray
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
    >>> source(np.array([0, 1]), np.array([2])).x_test.round(3)
    array([[4.95]])
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
        (x_train, x_test, rank), (y_train, y_test, _) = (
            _split_side(values, nuisance_columns, train, test, blocks, side) for values, blocks, side in sides
        )
        return Split(x_train, x_test, y_train, y_test, rank)

    return source


def _split_side(
    values: FloatArray,
    columns: FloatArray | None,
    train: IndexArray,
    test: IndexArray,
    blocks: Sequence[slice],
    side: str,
) -> tuple[FloatArray, FloatArray, int]:
    train_columns = None if columns is None else columns[train]
    test_columns = None if columns is None else columns[test]
    fitted = fit_residuals(train_columns, values[train])
    if not fitted.varies.any():
        raise NumericsError(
            f"no feature of side {side} varies among the {train.size} training samples of a fold; use fewer "
            "folds, or leave the block out"
        )
    weights = block_weights(fitted.varies, blocks)
    x_train = fitted.standardised(train_columns, values[train]) * weights
    x_test = fitted.standardised(test_columns, values[test]) * weights
    x_test[~fitted.estimable(test_columns, test.size)] = np.nan
    return x_train, x_test, fitted.rank
