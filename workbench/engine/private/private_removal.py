"""Removal of private variation learnt from training rows, for rows that had no part in it."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from itertools import combinations

import numpy as np
from numpy.typing import NDArray

from workbench.engine.nuisance import FittedResiduals, fit_residuals
from workbench.engine.private.private_variation import LayerBlock, RealComponent, pairs_without_private

FloatArray = NDArray[np.float64]

FEWEST_COMMON = 3


@dataclass(frozen=True, eq=False)
class PrivateRemoval:
    """What training rows teach about a block's nuisance and private variation.

    Attributes
    ----------
    residuals : FittedResiduals
        The nuisance regression.
    components : tuple of RealComponent
        The block's real components among the training rows, those removed and those that stay.
    weights, loadings : ndarray of shape (n_features, n_removed)
        A row's scores on what is removed are its residuals times ``weights``; times ``loadings'`` they are the
        private part.
    off : str
        Why nothing is removed; empty where removal is on.

    """

    residuals: FittedResiduals
    components: tuple[RealComponent, ...]
    weights: FloatArray
    loadings: FloatArray
    off: str

    @property
    def share(self) -> float:
        """Share of the block's variance, nuisance removed, that the removed components take."""
        return float(sum(one.share for one in self.components if one.removed and self.weights.shape[1]))

    def transform(self, x: FloatArray, nuisance: FloatArray | None = None) -> FloatArray:
        """Rows with the nuisance and the private variation taken out, in the units of ``x``.

        Parameters
        ----------
        x : ndarray of shape (n_samples, n_features)
        nuisance : ndarray of shape (n_samples, n_columns), optional
            The same columns as in training.
        """
        rest = self.residuals.transform(nuisance, x)
        cleaned: FloatArray = rest - (rest @ self.weights) @ self.loadings.T
        return cleaned


def private_removals(
    blocks: Sequence[FloatArray],
    layers: Sequence[str],
    nuisance: FloatArray | None = None,
    *,
    seed: int = 0,
) -> tuple[PrivateRemoval, ...]:
    """Learn from training rows what each block is to be freed of: a component that goes with another layer stays.

    A row's scores are least-squares fits of its features on the loadings of all real components of the block
    together, so that what stays is not taken for what goes.

    Parameters
    ----------
    blocks : sequence of ndarray of shape (n_train, p_b)
        Rows of NaN for a sample that the block lacks.
    layers : sequence of str
        Layer of each block.
    nuisance : ndarray of shape (n_train, n_columns), optional
        Removed from all blocks.
    seed : int
        For the number of components of narrow blocks.

    Raises
    ------
    NumericsError
        When shapes or values do not allow it.

    Examples
    --------
    >>> rng = np.random.default_rng(2)
    >>> factor = rng.normal(size=(80, 1))
    >>> x, y = 2.0 * factor + rng.normal(size=(80, 300)), rng.normal(size=(80, 200))
    >>> removal = private_removals([x[:60], y[:60]], ["transcripts", "metabolites"])[0]
    >>> len(removal.components), bool(removal.transform(x[60:]).var() < 0.4 * x[60:].var())
    (1, True)
    """
    columns = np.empty((len(blocks[0]), 0)) if nuisance is None else nuisance
    held = [np.flatnonzero(np.isfinite(block).all(axis=1)) for block in blocks]
    given = [
        LayerBlock(f"block {k + 1}", layer, block[rows], rows, columns[rows])
        for k, (block, layer, rows) in enumerate(zip(blocks, layers, held, strict=True))
    ]
    pairs = [
        (a, b)
        for a, b in combinations(range(len(blocks)), 2)
        if layers[a] != layers[b] and np.intersect1d(held[a], held[b]).size >= FEWEST_COMMON
    ]
    made = pairs_without_private(given, pairs, seed=seed)
    return tuple(
        _removal(
            block,
            told,
            next((off for pair, off in zip(pairs, made.off, strict=True) if k in pair and off), ""),
        )
        for k, (block, told) in enumerate(zip(given, made.components, strict=True))
    )


def _removal(block: LayerBlock, told: tuple[RealComponent, ...], off: str) -> PrivateRemoval:
    residuals = fit_residuals(block.nuisance, block.values)
    removed = np.array([one.removed for one in told], dtype=bool) & (not off)
    if not removed.any():
        nothing = np.empty((block.values.shape[1], 0))
        return PrivateRemoval(residuals, told, nothing, nothing, off)
    scores = np.column_stack([one.scores for one in told])
    scale = np.where(residuals.varies, residuals.scale, 1.0)
    scaled = residuals.transform(block.nuisance, block.values) / scale * residuals.varies
    loadings = np.linalg.lstsq(scores, scaled, rcond=None)[0]
    weights: FloatArray = np.asarray(np.linalg.pinv(loadings))[:, removed] / scale[:, None]
    return PrivateRemoval(residuals, told, weights, np.asarray(loadings[removed].T * scale[:, None]), off)
