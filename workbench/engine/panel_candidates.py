"""Small sets of features: ranked by a fit on training samples, refitted, and tried on samples held out."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from workbench.engine.double_splits import BlockSplit
from workbench.engine.multiblock_kernel import batch_predictions, kernel_components

FloatArray = NDArray[np.float64]
IndexArray = NDArray[np.intp]


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
) -> list[IndexArray]:
    """Rank the features of all blocks by what they put into the components.

    A feature's figure is ``sum_a s_a c_a^2 / sum_j c_ja^2``: its squared covariance ``c`` with the part of the
    outcome that component ``a`` follows, weighted by the share ``s_a`` of the outcome that the component
    explains. Blocks weigh alike in the components; features are ranked by their own covariance, so that one
    in a large block is not behind one in a small block for the size of its block.

    Parameters
    ----------
    train : sequence of ndarray of shape (n_train, n_features_of_block)
        Features centred and of unit variance.
    codes : ndarray of shape (n_train, columns)
        Centred outcome.
    components : sequence of int
        Numbers of components to rank with.
    most : int
        Features that are needed.

    Returns
    -------
    list of ndarray of int
        For each number of components, columns of the blocks side by side, the most important first.

    Examples
    --------
    >>> y = np.array([[-1.0], [0.0], [1.0]])
    >>> rank_features([np.column_stack([[1.0, -2.0, 1.0], y[:, 0]])], y, [1], 1)
    [array([1])]
    """
    kernels = [x @ x.T for x in train]
    kernel = np.sum([one / np.trace(one) for one in kernels], axis=0) * len(codes)
    found = kernel_components(lambda u: kernel @ u, codes, max(components))
    weights = (found.y_loadings**2).sum(axis=0)
    parts = np.concatenate([x.T @ found.duals for x in train]) ** 2
    parts /= parts.sum(axis=0)
    return [_top(parts[:, :count] @ weights[:count], most) for count in components]


def try_candidates(
    split: BlockSplit, codes: FloatArray, candidates: Sequence[Candidate]
) -> tuple[FloatArray, list[IndexArray]]:
    """Predict a split's test rows by every candidate.

    Parameters
    ----------
    split : BlockSplit
    codes : ndarray of shape (n_train, columns)
    candidates : sequence of Candidate

    Returns
    -------
    predicted : ndarray of shape (n_candidates, n_test, columns, 1)
    chosen : list of ndarray of int
        For each candidate its columns of the blocks side by side, the most important first.
    """
    counts = sorted({one.components for one in candidates})
    largest = max(one.size for one in candidates)
    ranked = dict(zip(counts, rank_features(split.train, codes, counts, largest), strict=True))
    needed = np.unique(np.concatenate(list(ranked.values())))
    train, test = columns_of(split.train, needed), columns_of(split.test, needed)
    predicted, chosen = [], []
    for one in candidates:
        columns = ranked[one.components][: one.size]
        places = np.searchsorted(needed, columns)
        x, z = train[:, places], test[:, places]
        predicted.append(batch_predictions(x @ x.T, z @ x.T, codes[:, :, None], one.components)[1][-1])
        chosen.append(columns)
    return np.array(predicted), chosen


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
