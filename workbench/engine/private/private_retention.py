"""Which real components of a block are shared: tests of a component against another block."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray
from scipy import special

from workbench.engine.nuisance import Nuisance

FloatArray = NDArray[np.float64]

#: Level at which a component counts as shared that takes no more than a direction of pure noise.
RETENTION_LEVEL = 0.1


def retention_levels(shares: FloatArray, dimensions: int) -> FloatArray:
    """Level at which each component counts as shared: ``0.1 / w^2``, at most 0.1.

    ``w`` is the component's share in units of a direction's share of pure noise, ``1 / dimensions``. Keeping
    a weak private component buries little, and losing a shared one costs all its edges; a strong component in
    many samples shows clearly what it goes with.

    Parameters
    ----------
    shares : ndarray
        Of the block's variance.
    dimensions : int
        What the nuisance leaves of the samples' dimensions.

    Examples
    --------
    >>> retention_levels(np.array([0.2, 0.1, 0.05, 0.01]), 100)
    array([0.00025, 0.001  , 0.004  , 0.1    ])
    """
    levels: FloatArray = RETENTION_LEVEL / np.maximum(shares * dimensions, 1.0) ** 2
    return levels


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
    products = basis.T @ tested
    by_components = _f_test(np.sum(products**2, axis=0), basis.shape[1], freedom)
    by_one = simes(correlation_p(products, freedom - 1))
    rest = nuisance.residuals(z)
    rest = _unit(rest - basis @ (basis.T @ rest))
    by_features = simes(correlation_p(rest.T @ tested, freedom - 1))
    return together(np.stack([by_components, by_one, by_features]))


def together(p: FloatArray) -> FloatArray:
    """Cauchy combination of the rows of ``p``: good for small p whatever their dependence.

    References
    ----------
    Liu & Xie 2020, Journal of the American Statistical Association 115:393.

    Examples
    --------
    >>> together(np.array([[0.001], [0.5]])).round(4)
    array([0.002])
    """
    inside = np.clip(p, 1e-300, 1.0 - 1e-3)
    # tan((1/2 - p) pi) loses its digits at small p, where it is 1 / (p pi).
    terms = np.where(inside < 1e-8, 1.0 / (inside * np.pi), np.tan((0.5 - inside) * np.pi))
    mean = terms.mean(axis=0)
    far = mean > 1e8
    combined: FloatArray = np.where(
        far, 1.0 / (np.where(far, mean, 1.0) * np.pi), 0.5 - np.arctan(mean) / np.pi
    )
    return combined


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
