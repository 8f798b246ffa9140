"""Correlations of several blocks' variates, pair of blocks by pair."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
from numpy.typing import NDArray

FloatArray = NDArray[np.float64]


def pair_correlations(variates: Sequence[FloatArray]) -> FloatArray:
    """Correlation of every two blocks' variates on the samples that both have, (n_components, n_blocks, n_blocks)."""
    count, blocks = variates[0].shape[1], len(variates)
    found = np.tile(np.eye(blocks), (count, 1, 1))
    for b, c in np.argwhere(np.triu(np.ones((blocks, blocks)), 1)):
        both = np.isfinite(variates[b][:, 0]) & np.isfinite(variates[c][:, 0])
        if both.sum() < 3:
            found[:, b, c] = found[:, c, b] = np.nan
            continue
        u, v = (one[both] - one[both].mean(axis=0) for one in (variates[b], variates[c]))
        lengths = np.linalg.norm(u, axis=0) * np.linalg.norm(v, axis=0)
        products = np.sum(u * v, axis=0)
        found[:, b, c] = found[:, c, b] = np.divide(
            products, lengths, out=np.full(count, np.nan), where=lengths > 0.0
        ).clip(-1.0, 1.0)
    return found


def mean_over_pairs(correlations: FloatArray) -> FloatArray:
    """Mean over the pairs of blocks, shape (n_components,); 1 for a single block."""
    blocks = correlations.shape[1]
    if blocks == 1:
        return np.ones(len(correlations))
    first, second = np.triu_indices(blocks, 1)
    mean: FloatArray = np.nanmean(correlations[:, first, second], axis=1)
    return mean
