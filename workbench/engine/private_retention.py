"""Which real components of a block are shared: tests of a component against another block."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray
from scipy import special

from workbench.engine.nuisance import Nuisance

FloatArray = NDArray[np.float64]

#: Chance, for a whole analysis, with which some private component passes for a shared one.
RETENTION_LEVEL = 0.01


def retention_p(scores: FloatArray, z: FloatArray, components: FloatArray, nuisance: Nuisance) -> FloatArray:
    """P of each component against another block: the smaller of two tests, doubled.

    F test of the component on the other block's real components; and Simes' combination over the other
    block's features with those components removed, which finds a component that a few features follow that
    are no component of their own block. Nothing is turned towards the other block.

    Parameters
    ----------
    scores : ndarray of shape (n_samples, k)
        Components under test.
    z : ndarray of shape (n_samples, n_features)
        The other block's features, nuisance removed.
    components : ndarray of shape (n_samples, l)
        The other block's real components.
    nuisance : Nuisance
        Removed from both.

    Returns
    -------
    ndarray of shape (k,)

    References
    ----------
    Simes 1986, Biometrika 73:751.
    """
    freedom = nuisance.n_samples - nuisance.rank
    tested = _unit(nuisance.residuals(scores))
    basis = np.linalg.qr(nuisance.residuals(components))[0] if components.shape[1] else components
    by_components = _f_test(np.sum((basis.T @ tested) ** 2, axis=0), basis.shape[1], freedom)
    rest = nuisance.residuals(z)
    rest = _unit(rest - basis @ (basis.T @ rest))
    by_features = simes(correlation_p(rest.T @ tested, freedom - 1))
    return np.minimum(1.0, 2.0 * np.minimum(by_components, by_features))


def _f_test(explained: FloatArray, terms: int, freedom: int) -> FloatArray:
    """Return the p of shares of variance explained by ``terms`` regressors."""
    if terms == 0 or terms >= freedom:
        return np.ones(explained.size)
    p: FloatArray = special.betainc((freedom - terms) / 2, terms / 2, np.clip(1.0 - explained, 0.0, 1.0))
    return p


def correlation_p(r: FloatArray, df: int) -> FloatArray:
    """Two-sided p of correlations with ``df`` degrees of freedom, by the beta law of ``r^2``."""
    p: FloatArray = special.betainc(df / 2, 0.5, np.clip(1.0 - r**2, 0.0, 1.0))
    return p


def simes(p: FloatArray) -> FloatArray:
    """Simes' combination of the rows of ``p``, one for each column; NaN are left out, none left gives 1.

    Examples
    --------
    >>> simes(np.array([[0.01], [0.5], [0.02], [0.9]])).round(3)
    array([0.04])
    """
    ordered = np.sort(np.where(np.isnan(p), np.inf, p), axis=0)
    tested = np.count_nonzero(np.isfinite(ordered), axis=0)
    ranks = np.arange(1, p.shape[0] + 1)[:, None]
    smallest: FloatArray = np.min(ordered * tested / ranks, axis=0, initial=1.0)
    return smallest


def _unit(x: FloatArray) -> FloatArray:
    length = np.linalg.norm(x, axis=0)
    unit: FloatArray = x / np.where(length > 0.0, length, np.nan)
    return unit
