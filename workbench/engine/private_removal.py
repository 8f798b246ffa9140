"""Removal of private variation learnt from training rows, for rows that had no part in it."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from workbench.engine.nuisance import FittedResiduals, fit_residuals
from workbench.engine.private_variation import LayerBlock, RealComponent, pairs_without_private

FloatArray = NDArray[np.float64]


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

    Examples
    --------
    >>> rng = np.random.default_rng(2)
    >>> factor = rng.normal(size=(80, 1))
    >>> x = 2.0 * factor + rng.normal(size=(80, 300))
    >>> removal = PrivateRemoval.fit(x[:60], [rng.normal(size=(60, 200))])
    >>> len(removal.components), bool(removal.transform(x[60:]).var() < 0.4 * x[60:].var())
    (1, True)
    """

    residuals: FittedResiduals
    components: tuple[RealComponent, ...]
    weights: FloatArray
    loadings: FloatArray
    off: str

    @classmethod
    def fit(
        cls,
        x_train: FloatArray,
        others_train: Sequence[FloatArray],
        nuisance_train: FloatArray | None = None,
        *,
        seed: int = 0,
    ) -> PrivateRemoval:
        """Learn from training rows.

        A row's scores are least-squares fits of its features on the loadings of all real components together,
        so that what stays is not taken for what goes.

        Parameters
        ----------
        x_train : ndarray of shape (n_train, n_features)
        others_train : sequence of ndarray of shape (n_train, ...)
            The blocks of other layers on the same rows: a component that goes with one of them stays.
        nuisance_train : ndarray of shape (n_train, n_columns), optional
            Removed from all blocks.
        seed : int
            For the number of components of narrow blocks.

        Raises
        ------
        NumericsError
            When shapes or values do not allow it.
        """
        residuals = fit_residuals(nuisance_train, x_train)
        n = x_train.shape[0]
        columns = np.empty((n, 0)) if nuisance_train is None else nuisance_train
        blocks = [
            LayerBlock(f"block {k}", str(k), values, np.arange(n), columns)
            for k, values in enumerate([x_train, *others_train])
        ]
        made = pairs_without_private(blocks, [(0, k) for k in range(1, len(blocks))], seed=seed)
        off = next(iter(made.off), "there is no block of another layer")
        told = made.components[0]
        removed = np.array([one.removed for one in told], dtype=bool) & (not off)
        if not removed.any():
            nothing = np.empty((x_train.shape[1], 0))
            return cls(residuals, told, nothing, nothing, off)
        scores = np.column_stack([one.scores for one in told])
        scale = np.where(residuals.varies, residuals.scale, 1.0)
        scaled = residuals.transform(nuisance_train, x_train) / scale * residuals.varies
        loadings = np.linalg.lstsq(scores, scaled, rcond=None)[0]
        weights: FloatArray = np.asarray(np.linalg.pinv(loadings))[:, removed] / scale[:, None]
        return cls(residuals, told, weights, np.asarray(loadings[removed].T * scale[:, None]), off)

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
