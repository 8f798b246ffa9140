"""Blocks of training and test samples, prepared by what the training samples teach, and their kernels."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from typing import TypeVar

import numpy as np
from numpy.typing import NDArray

from workbench.engine.nuisance import check_finite, fit_residuals
from workbench.errors import NumericsError

FloatArray = NDArray[np.float64]
IndexArray = NDArray[np.intp]
T = TypeVar("T")


@dataclass(frozen=True, eq=False)
class BlockSplit:
    """Blocks of one training and test part, ready for the method.

    Attributes
    ----------
    train, test : tuple of ndarray
        One array of samples x features for each block: nuisance removed and features centred and scaled by
        what the training rows teach. A test row with a missing value is not scored.
    kept : tuple of ndarray of int
        For each block the positions of these features among all features of the block.
    """

    train: tuple[FloatArray, ...]
    test: tuple[FloatArray, ...]
    kept: tuple[IndexArray, ...]


BlockSource = Callable[[IndexArray, IndexArray], BlockSplit]
"""Gives the :class:`BlockSplit` of training and test positions; everything that is learnt is learnt inside."""

Preparation = Callable[[tuple[FloatArray, ...], tuple[FloatArray, ...]], tuple[tuple[FloatArray, ...], ...]]
"""From training and test rows of all blocks to the same two, changed by what the training rows teach."""


def block_source(
    blocks: Sequence[FloatArray], nuisance: FloatArray | None = None, prepare: Preparation | None = None
) -> BlockSource:
    """Return splits of arrays: what ``prepare`` learns, nuisance regression, centring and scaling.

    Parameters
    ----------
    blocks : sequence of ndarray of shape (n_samples, n_features_of_block)
    nuisance : ndarray of shape (n_samples, n_columns), optional
        Columns to be removed, the intercept not among them.
    prepare : callable, optional
        Fills gaps or removes private variation; gets and gives training and test rows of all blocks. With it
        the blocks may have missing values.

    Raises
    ------
    NumericsError
        When there is no block, rows differ in number, or a block is not finite; from the source, when no
        feature of a block varies in training.

    Examples
    --------
    >>> source = block_source([np.array([[1.0], [3.0], [9.0]])])
    >>> source(np.array([0, 1]), np.array([2])).test[0].round(3)
    array([[4.95]])
    """
    arrays = [np.asarray(block, dtype=np.float64) for block in blocks]
    if prepare is None:
        arrays = [check_finite(block, f"block {b} (from 0)") for b, block in enumerate(arrays)]
    if not arrays or len({block.shape[0] for block in arrays}) != 1:
        raise NumericsError(
            f"blocks of {[block.shape[0] for block in arrays]} rows; give at least one block, all for the same "
            "samples in the same order"
        )

    def source(train: IndexArray, test: IndexArray) -> BlockSplit:
        taught, unseen = tuple(block[train] for block in arrays), tuple(block[test] for block in arrays)
        if prepare is not None:
            taught, unseen = prepare(taught, unseen)
        return standard_split(taught, unseen, nuisance, train, test)

    return source


def standard_split(
    train: Sequence[FloatArray],
    test: Sequence[FloatArray],
    nuisance: FloatArray | None,
    train_rows: IndexArray,
    test_rows: IndexArray,
) -> BlockSplit:
    """Remove the nuisance, centre and scale, all learnt from the training rows.

    Parameters
    ----------
    train, test : sequence of ndarray
        Prepared rows of each block.
    nuisance : ndarray of shape (n_samples, n_columns) or None
    train_rows, test_rows : ndarray of int
        Positions of the rows in ``nuisance``.

    Raises
    ------
    NumericsError
        When no feature of a block varies in training.
    """
    taught = None if nuisance is None else nuisance[train_rows]
    unseen = None if nuisance is None else nuisance[test_rows]
    parts = []
    for b, (x_train, x_test) in enumerate(zip(train, test, strict=True)):
        fitted = fit_residuals(taught, x_train)
        if not fitted.varies.any():
            raise NumericsError(
                f"no feature of block {b} (from 0) varies among the {train_rows.size} training samples of a fold; "
                "use fewer folds, or leave the block out"
            )
        z_test = fitted.standardised(unseen, x_test)
        z_test[~fitted.estimable(unseen, test_rows.size)] = np.nan
        parts.append((fitted.standardised(taught, x_train), z_test, np.flatnonzero(fitted.varies)))
    trained, tested, kept = zip(*parts, strict=True)
    return BlockSplit(tuple(trained), tuple(tested), tuple(kept))


@dataclass(frozen=True, eq=False)
class FoldSplits:
    """An outer fold with the inner folds of its training part.

    Attributes
    ----------
    repeat, fold : int
    folds : int
        Inner folds that hold each training sample out once.
    rows : tuple of pair of ndarray of int
        Training and test positions: of the outer fold, then of each inner one, repeat by repeat.
    splits : tuple of BlockSplit
        In the same order.
    """

    repeat: int
    fold: int
    folds: int
    rows: tuple[tuple[IndexArray, IndexArray], ...]
    splits: tuple[BlockSplit, ...]

    def inner(self, values: Sequence[T]) -> list[Sequence[T]]:
        """Group what was found for ``splits`` by inner repeat, the outer fold's left out."""
        starts = range(1, len(values), self.folds)
        return [values[start : start + self.folds] for start in starts]


Observer = Callable[[FoldSplits], None]
"""Takes part in a double cross-validation: sees every outer fold's splits, which are prepared once for all."""


@dataclass(frozen=True, eq=False)
class SplitKernels:
    """A split in sample space, block by block.

    Attributes
    ----------
    train_rows, test_rows : ndarray of int
        Positions of the samples.
    train : ndarray of shape (n_blocks, n_train, n_train)
        Kernels of the training rows, each of mean 1 on its diagonal: blocks of equal total variance.
    test : ndarray of shape (n_blocks, n_test, n_train)
        Products of test with training rows, by the same scale.
    features : ndarray of shape (n_blocks,)
        How many features of each block vary.
    """

    train_rows: IndexArray
    test_rows: IndexArray
    train: FloatArray
    test: FloatArray
    features: FloatArray

    def of(self, blocks: Sequence[int], alike: str = "blocks") -> tuple[FloatArray, FloatArray]:
        """Kernels of some blocks together, in which ``"blocks"`` or ``"features"`` weigh alike."""
        places = list(blocks)
        weights = (
            np.ones(len(places))
            if alike == "blocks"
            else self.features[places] / self.features[places].mean()
        )
        return (
            np.einsum("b,bij->ij", weights, self.train[places]),
            np.einsum("b,bij->ij", weights, self.test[places]),
        )


def split_kernels(split: BlockSplit, train_rows: IndexArray, test_rows: IndexArray) -> SplitKernels:
    """Return the kernels of a split: the last step that touches the features."""
    inside = np.array([x @ x.T for x in split.train])
    across = np.array([z @ x.T for z, x in zip(split.test, split.train, strict=True)])
    scale = np.einsum("bii->b", inside)[:, None, None] / train_rows.size
    features = np.array([x.shape[1] for x in split.train], dtype=np.float64)
    return SplitKernels(train_rows, test_rows, inside / scale, across / scale, features)
