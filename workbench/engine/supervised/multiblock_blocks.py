"""Blocks side by side at equal total variance; a sample may lack whole blocks."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from workbench.engine.nuisance import CONSTANT_TOLERANCE
from workbench.engine.sides import block_slices, block_weights
from workbench.errors import NumericsError

FloatArray = NDArray[np.float64]


@dataclass(frozen=True, eq=False)
class BlockScaling:
    """Mean and scale of every feature, learnt from training samples.

    Attributes
    ----------
    mean, scale : ndarray of shape (n_features,)
        Over the samples that have the block; ``scale`` is the standard deviation over the block's weight, 1
        for a constant feature.
    varies : ndarray of bool, shape (n_features,)
    weights : ndarray of shape (n_features,)
        Weight of each feature at unit variance; 1 for a constant one.
    blocks : tuple of slice
        Columns of each block.
    lacking : tuple of int
        Training samples that lack each block.
    """

    mean: FloatArray
    scale: FloatArray
    varies: NDArray[np.bool_]
    weights: FloatArray
    blocks: tuple[slice, ...]
    lacking: tuple[int, ...]

    def standardised(self, x: FloatArray) -> FloatArray:
        """Return all features centred and scaled; constant ones and lacking blocks are 0, the training mean."""
        values: FloatArray = x - self.mean
        values *= np.where(self.varies, 1.0 / self.scale, 0.0)
        if np.isnan(values.sum()):
            values[np.isnan(values)] = 0.0
        return values


def fit_scaling(x: FloatArray, block_sizes: Sequence[int] | None, alike: str = "blocks") -> BlockScaling:
    """Learn mean, standard deviation (``n - 1``) and block weights, each block over the samples that have it.

    Parameters
    ----------
    x : ndarray of shape (n_samples, n_features)
        A lacking block is NaN in all of its columns.
    block_sizes : sequence of int or None
    alike : {"blocks", "features"}
        What weighs alike: blocks have equal total variance, or features equal variance.

    Raises
    ------
    NumericsError
        When ``alike`` is neither, values are missing in a part of a block only, a sample has no block, a block
        has fewer than two samples, or no feature varies.

    Examples
    --------
    >>> x = np.array([[1.0, 4.0], [3.0, np.nan], [5.0, 8.0]])
    >>> fit_scaling(x, [1, 1]).standardised(x).round(3)
    array([[-1.   , -0.707],
           [ 0.   ,  0.   ],
           [ 1.   ,  0.707]])
    """
    if alike not in ("blocks", "features"):
        raise NumericsError(f"alike is {alike!r}; allowed: 'blocks' or 'features'")
    blocks = tuple(block_slices(block_sizes, x.shape[1], "X"))
    present = blocks_present(x, blocks)
    mean, deviation = np.zeros(x.shape[1]), np.ones(x.shape[1])
    varies = np.zeros(x.shape[1], dtype=bool)
    for b, block in enumerate(blocks):
        rows = x[:, block] if present[:, b].all() else x[present[:, b], block]
        if rows.shape[0] < 2:
            raise NumericsError(
                f"block {b} (from 0) has n_samples={rows.shape[0]}; a minimum of 2 is required: add samples, or "
                "leave the block out"
            )
        mean[block] = rows.mean(axis=0)
        centred = rows - mean[block]
        squares = np.einsum("ij,ij->j", centred, centred)
        deviation[block] = np.sqrt(squares / (rows.shape[0] - 1))
        varies[block] = squares > CONSTANT_TOLERANCE**2 * (squares + rows.shape[0] * mean[block] ** 2)
    if not varies.any():
        raise NumericsError(f"none of the {x.shape[1]} features varies; leave the blocks out")
    weights = np.ones(x.shape[1])
    if alike == "blocks":
        weights[varies] = block_weights(varies, blocks)
    scale = np.where(varies, deviation / weights, 1.0)
    lacking = tuple(int(count) for count in (~present).sum(axis=0))
    return BlockScaling(mean, scale, varies, weights, blocks, lacking)


def blocks_present(x: FloatArray, blocks: Sequence[slice]) -> NDArray[np.bool_]:
    """Return which blocks each sample has, shape (n_samples, n_blocks).

    Raises
    ------
    NumericsError
        When a block of a sample is missing in part, or a sample has no block at all.
    """
    if not np.isnan(x.sum()):
        return np.ones((x.shape[0], len(blocks)), dtype=bool)
    missing = np.isnan(x)
    whole = np.column_stack([missing[:, block].all(axis=1) for block in blocks])
    partly = np.column_stack([missing[:, block].any(axis=1) for block in blocks]) & ~whole
    if partly.any():
        row, b = np.argwhere(partly)[0]
        raise NumericsError(
            f"Input X contains NaN: sample {row}, block {b} (from 0) has missing values in a part of its features; "
            "fill the gaps, or make the whole block NaN: the sample then counts as lacking it"
        )
    if whole.all(axis=1).any():
        row = int(np.flatnonzero(whole.all(axis=1))[0])
        raise NumericsError(f"Input X contains NaN: sample {row} (from 0) has no block at all; leave it out")
    return ~whole
