"""Small sets of features: ranked by a fit on training samples, refitted, and tried on samples held out."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from workbench.engine.supervised.double_splits import BlockSplit
from workbench.engine.supervised.multiblock_kernel import batch_values, kernel_components
from workbench.errors import NumericsError

FloatArray = NDArray[np.float64]
IndexArray = NDArray[np.intp]

TOGETHER = 32
"""Arrangements whose features are ranked at once."""


@dataclass(frozen=True)
class Candidate:
    """A number of features, and of components that rank them and that they are refitted with."""

    size: int
    components: int


def panel_candidates(n_features: int, largest: int, components: Sequence[int]) -> tuple[Candidate, ...]:
    """Return the candidates, smallest first: sizes in steps of about a quarter, up to ``largest``.

    Examples
    --------
    >>> [one.size for one in panel_candidates(1000, 20, [1])]
    [1, 2, 3, 4, 5, 6, 8, 10, 12, 15, 19, 20]
    """
    most = min(n_features, largest)
    sizes, size = [], 1
    while size < most:
        sizes.append(size)
        size = max(size + 1, round(size * 1.25))
    sizes.append(most)
    return tuple(Candidate(size, count) for size in sizes for count in components if count <= size)


def rank_features(
    train: Sequence[FloatArray], codes: FloatArray, components: Sequence[int], most: int
) -> IndexArray:
    """Rank the features of all blocks by what they put into the components, for each arrangement of the outcome.

    A feature's figure is ``sum_a s_a c_a^2 / sum_j c_ja^2``: its squared covariance ``c`` with the part of the
    outcome that component ``a`` follows, weighted by the share ``s_a`` of the outcome that the component
    explains. Blocks weigh alike in the components; features are ranked by their own covariance, so that one
    in a large block is not behind one in a small block for the size of its block.

    Parameters
    ----------
    train : sequence of ndarray of shape (n_train, n_features_of_block)
        Features centred and of unit variance.
    codes : ndarray of shape (n_train, columns, n_arrangements)
        Centred outcome.
    components : sequence of int
        Numbers of components to rank with.
    most : int
        Features that are needed.

    Returns
    -------
    ndarray of int, shape (n_arrangements, n_numbers, most)
        For each number of components, columns of the blocks side by side, the most important first.

    Examples
    --------
    >>> y = np.array([[-1.0], [0.0], [1.0]])
    >>> rank_features([np.column_stack([[1.0, -2.0, 1.0], y[:, 0]])], y[:, :, None], [1], 1)
    array([[[1]]])
    """
    kernels = [x @ x.T for x in train]
    kernel = np.sum([one / np.trace(one) for one in kernels], axis=0) * len(codes)
    most = min(most, sum(x.shape[1] for x in train))
    ranked = np.empty((codes.shape[2], len(components), most), dtype=np.intp)
    for start in range(0, codes.shape[2], TOGETHER):
        part = codes[:, :, start : start + TOGETHER]
        duals, weights = _duals(kernel, part, max(components))
        shape = (-1, *duals.shape[1:])
        parts = np.concatenate([x.T @ duals.reshape(len(duals), -1) for x in train]).reshape(shape) ** 2
        total = parts.sum(axis=0)
        shares = np.divide(weights, total, out=np.zeros_like(weights), where=total > 0.0)
        for i in range(part.shape[2]):
            for k, count in enumerate(components):
                ranked[start + i, k] = _top(parts[:, :count, i] @ shares[:count, i], most)
    return ranked


def _duals(kernel: FloatArray, codes: FloatArray, most: int) -> tuple[FloatArray, FloatArray]:
    """Duals of each arrangement's components, and the share of the outcome that each explains; 0 past the last."""
    n, _, size = codes.shape
    duals, weights = np.zeros((n, most, size)), np.zeros((most, size))
    for i in range(size):
        try:
            found = kernel_components(lambda u: kernel @ u, codes[:, :, i], most)
        except NumericsError:
            continue
        count = found.lengths.size
        duals[:, :count, i], weights[:count, i] = found.duals, (found.y_loadings**2).sum(axis=0)
    return duals, weights


def try_candidates(
    split: BlockSplit, codes: FloatArray, candidates: Sequence[Candidate]
) -> tuple[FloatArray, list[IndexArray]]:
    """Predict a split's test rows by every candidate, for each arrangement of the outcome.

    Parameters
    ----------
    split : BlockSplit
    codes : ndarray of shape (n_train, columns, n_arrangements)
    candidates : sequence of Candidate

    Returns
    -------
    predicted : ndarray of shape (n_candidates, n_test, columns, n_arrangements)
    chosen : list of ndarray of int
        For each candidate its columns of the blocks side by side in the first arrangement, the most important first.
    """
    counts = sorted({one.components for one in candidates})
    largest = max(one.size for one in candidates)
    ranked = rank_features(split.train, codes, counts, largest)
    _, q, size = codes.shape
    predicted = np.empty((len(candidates), split.test[0].shape[0], q, size))
    for k, count in enumerate(counts):
        places = [c for c, one in enumerate(candidates) if one.components == count]
        sizes = np.array([candidates[c].size for c in places])
        for i in range(size):
            x, z = (columns_of(blocks, ranked[i, k]) for blocks in (split.train, split.test))
            predicted[places, :, :, i] = _by_size(x, z, codes[:, :, i], sizes, count)
    chosen = [ranked[0, counts.index(one.components), : one.size] for one in candidates]
    return predicted, chosen


def _by_size(
    x: FloatArray, z: FloatArray, codes: FloatArray, sizes: IndexArray, components: int
) -> FloatArray:
    """Predictions of the rows ``z`` by the first features alone, for several sizes, shape (n_sizes, n_test, columns).

    The kernel of the first ``s`` features is ``X M_s X'`` with ``M_s`` marking them.
    """
    every = np.vstack([x, z])
    inside = (np.arange(x.shape[1])[:, None] < sizes).astype(np.float64)

    def products(u: FloatArray) -> FloatArray:
        weights = (x.T @ u.reshape(len(x), -1)).reshape(-1, *u.shape[1:]) * inside[:, None]
        return (every @ weights.reshape(x.shape[1], -1)).reshape(-1, *u.shape[1:])

    outcomes = np.repeat(codes[:, :, None], sizes.size, axis=2)
    values = batch_values(products, len(every), outcomes, components)
    found: FloatArray = values[-1, len(x) :].transpose(2, 0, 1)
    return found


def columns_of(blocks: Sequence[FloatArray], columns: IndexArray) -> FloatArray:
    """Return some columns of blocks side by side without joining the blocks."""
    starts = np.cumsum([0, *(block.shape[1] for block in blocks)])
    places = np.searchsorted(starts, columns, side="right") - 1
    found: FloatArray = np.empty((blocks[0].shape[0], columns.size))
    for b, block in enumerate(blocks):
        here = np.flatnonzero(places == b)
        found[:, here] = block[:, columns[here] - starts[b]]
    return found


def _top(figure: FloatArray, most: int) -> IndexArray:
    """Positions of the largest figures in order; equal ones in the order of the features."""
    most = min(most, figure.size)
    top = np.argpartition(-figure, most - 1)[:most]
    return top[np.lexsort((top, -figure[top]))]
