"""One side of a two-sided method: one block, or several of one layer at equal total variance."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from workbench.engine.linear import column_correlations
from workbench.engine.nuisance import residual_scale
from workbench.errors import NumericsError

FloatArray = NDArray[np.float64]


def block_slices(block_sizes: Sequence[int] | None, n_features: int, side: str) -> list[slice]:
    """Columns of each block of a side.

    Parameters
    ----------
    block_sizes : sequence of int or None
        Features of each block, in the order of the columns; ``None``: one block.
    n_features : int
        Columns of the side.
    side : str
        What to call the side in a message.

    Raises
    ------
    NumericsError
        When the sizes are not at least 1 or do not add up to ``n_features``.

    Examples
    --------
    >>> block_slices([2, 3], 5, "X")
    [slice(0, 2, None), slice(2, 5, None)]
    """
    sizes = [n_features] if block_sizes is None else [int(size) for size in block_sizes]
    if not sizes or min(sizes) < 1 or sum(sizes) != n_features:
        raise NumericsError(
            f"block sizes {sizes} of side {side}, which has {n_features} features; give one size of at "
            "least 1 for each block, adding up to the number of features"
        )
    ends = np.cumsum(sizes).tolist()
    return [slice(end - size, end) for size, end in zip(sizes, ends, strict=True)]


def block_weights(varies: NDArray[np.bool_], blocks: Sequence[slice]) -> FloatArray:
    """Weight of each feature that varies, so that all blocks of a side have equal total variance.

    With ``p`` varying features in ``B`` blocks, ``p_b`` of them in block ``b``, a feature of unit variance
    gets ``sqrt(p / (B p_b))``: every block weighs ``p / B`` and the side as much as before. A block with no
    varying feature counts for nothing.

    Parameters
    ----------
    varies : ndarray of bool, shape (n_features,)
    blocks : sequence of slice

    Examples
    --------
    >>> block_weights(np.ones(5, dtype=bool), [slice(0, 1), slice(1, 5)]) ** 2
    array([2.5  , 0.625, 0.625, 0.625, 0.625])
    """
    sizes = [int(np.count_nonzero(varies[block])) for block in blocks]
    weights = np.ones(varies.size)
    for block, weight in zip(blocks, kernel_weights(sizes), strict=True):
        weights[block] = np.sqrt(weight)
    return weights[varies]


def kernel_weights(sizes: Sequence[int]) -> list[float]:
    """Weight ``p / (B p_b)`` of each block's kernel by how many of its features vary; 0 where none does.

    Examples
    --------
    >>> kernel_weights([1, 4, 0])
    [2.5, 0.625, 0.0]
    """
    filled = sum(size > 0 for size in sizes)
    return [sum(sizes) / (filled * size) if size else 0.0 for size in sizes]


@dataclass(frozen=True, eq=False)
class StandardSide:
    """One side, standardised, with what that taught.

    Attributes
    ----------
    values : ndarray of shape (n_samples, n_varying)
        Features that vary, centred, divided by ``scale``.
    mean, scale : ndarray of shape (n_features,)
        ``scale`` is the standard deviation over the block's weight; 1 for a constant feature.
    varies : ndarray of bool, shape (n_features,)
    blocks : list of slice
        Columns of each block among all features.
    """

    values: FloatArray
    mean: FloatArray
    scale: FloatArray
    varies: NDArray[np.bool_]
    blocks: list[slice]


def standard_side(
    x: FloatArray, block_sizes: Sequence[int] | None = None, rank: int = 1, side: str = "X"
) -> StandardSide:
    """Standardise one side: unit variance with ``n - rank`` degrees of freedom, blocks of equal weight.

    Parameters
    ----------
    x : ndarray of shape (n_samples, n_features)
        Any nuisance but the intercept already removed.
    block_sizes : sequence of int, optional
    rank : int
        Dimensions of the nuisance, the intercept counted.
    side : str
        What to call the side in a message.

    Raises
    ------
    NumericsError
        When no feature varies, no degree of freedom is left or block sizes do not add up.

    Examples
    --------
    >>> standard_side(np.array([[1.0, 5.0], [3.0, 5.0], [5.0, 5.0]])).values.ravel()
    array([-1.,  0.,  1.])
    """
    blocks = block_slices(block_sizes, x.shape[1], side)
    mean = x.mean(axis=0)
    centred = x - mean
    deviation, varies = residual_scale(x, centred, rank)
    if not varies.any():
        raise NumericsError(
            f"none of the {x.shape[1]} features of side {side} varies over the {x.shape[0]} samples; leave "
            "the block out"
        )
    scale = np.ones(x.shape[1])
    scale[varies] = deviation[varies] / block_weights(varies, blocks)
    values = (centred if varies.all() else centred[:, varies]) / scale[varies]
    return StandardSide(values, mean, scale, varies, blocks)


@dataclass(frozen=True, eq=False)
class SideReading:
    """What canonical pairs say about one side's features.

    Attributes
    ----------
    weights, correlations, cross_correlations : ndarray of shape (n_features, n_components)
        Weights of the standardised features (0 for a constant one), correlations with the side's own and
        with the other side's variates (NaN for a constant one).
    explained, redundancy : ndarray of shape (n_components, n_blocks)
        Share of each block's variance that the own, or the other side's, variate explains beyond the
        variates before it; NaN for a block in which nothing varies.
    """

    weights: FloatArray
    correlations: FloatArray
    cross_correlations: FloatArray
    explained: FloatArray
    redundancy: FloatArray


def read_side(side: StandardSide, duals: FloatArray, own: FloatArray, other: FloatArray) -> SideReading:
    """Read the features of a side through its own and the other side's variates.

    Parameters
    ----------
    side : StandardSide
    duals : ndarray of shape (n_samples, n_components)
        Weights in sample space.
    own, other : ndarray of shape (n_samples, n_components)
        Variates of this side and of the other.
    """
    columns = [own, other, np.linalg.qr(own)[0], np.linalg.qr(other)[0]]
    found = _all_features(column_correlations(side.values, np.hstack(columns)), side.varies)
    ends = np.cumsum([one.shape[1] for one in columns])
    correlations, crossed, own_steps, other_steps = np.split(found, ends[:-1], axis=1)
    weights = np.zeros((side.varies.size, own.shape[1]))
    weights[side.varies] = side.values.T @ duals
    return SideReading(
        weights=weights,
        correlations=correlations,
        cross_correlations=crossed,
        explained=_explained(side, own_steps),
        redundancy=_explained(side, other_steps),
    )


def _all_features(rows: FloatArray, varies: NDArray[np.bool_]) -> FloatArray:
    every = np.full((varies.size, rows.shape[1]), np.nan)
    every[varies] = rows
    return every


def _explained(side: StandardSide, steps: FloatArray) -> FloatArray:
    """Mean squared correlation with what each variate adds to those before it (Gram-Schmidt)."""
    counts = np.array([np.count_nonzero(side.varies[block]) for block in side.blocks])
    sums = np.array([np.nansum(steps[block] ** 2, axis=0) for block in side.blocks]).T
    shares: FloatArray = np.divide(sums, counts, out=np.full(sums.shape, np.nan), where=counts > 0)
    return shares
