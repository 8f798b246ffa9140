"""One layer's factors predicted from another layer's features, each sample by what the others teach."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from workbench.engine.linear import thin_basis
from workbench.engine.signal_components import signal_components
from workbench.engine.swaps.spike_slab import SpikeSlab

FloatArray = NDArray[np.float64]

MOST_SINGLY = 40
FOLDS = 30
LEAST_NOISE = 1e-6
LEAST_SHARE = 0.02
DESIGN_TOLERANCE = 1e-6


@dataclass(frozen=True, eq=False)
class Features:
    """A layer's features as predictors.

    Attributes
    ----------
    values : ndarray of shape (n_samples, n_features)
        Residuals of the design.
    basis : ndarray of shape (n_samples, c)
        Orthonormal basis of the design, intercept included.
    gram : ndarray of shape (n_samples, n_samples)
        ``values values'``.
    """

    values: FloatArray
    basis: FloatArray
    gram: FloatArray

    @classmethod
    def of(cls, values: FloatArray, basis: FloatArray) -> Features:
        """Return the features of a block with the design removed from it."""
        left = values - basis @ (basis.T @ values)
        return cls(left, basis, left @ left.T)


@dataclass(frozen=True, eq=False)
class _Regression:
    """Features regressed on the targets, samples weighted; ``basis`` spans the weighted design and targets."""

    coefficients: FloatArray
    error: FloatArray
    noise: FloatArray
    basis: FloatArray
    df: float


def count_private(features: Features, targets: FloatArray) -> int:
    """Return the number of components of the features that the targets do not explain."""
    basis = _regress(features, targets, np.ones(targets.shape[0])).basis
    left = features.values - basis @ (basis.T @ features.values)
    return signal_components(thin_basis(left)).number


def predict_left_out(
    features: Features, targets: FloatArray, private: int, weights: FloatArray | None = None
) -> FloatArray:
    """Targets predicted from features, each sample from a fit that has not seen it.

    In the other samples the features are regressed on the targets, ``y = L u + e``, the coefficients drawn
    towards zero as the target's coefficients over all features suggest, and ``e`` given the covariance
    ``P P' + diag(psi)`` with ``private`` components. A sample's answer is ``(L'S^-1 L + I)^-1 L'S^-1 y``.
    The design is removed from the other samples anew: residuals of all of them would tell the one left out,
    because residuals add up to zero.

    Up to ``MOST_SINGLY`` samples are left out singly, more of them in ``FOLDS`` parts.

    Parameters
    ----------
    features : Features
    targets : ndarray of shape (n_samples, n_targets)
        Residuals of the same design.
    private : int
        Components of the features that are none of the targets'.
    weights : ndarray of shape (n_samples,), optional
        How much each sample counts in the fits of the others, 0 to 1.

    Returns
    -------
    ndarray of shape (n_samples, n_targets)

    Examples
    --------
    >>> rng = np.random.default_rng(3)
    >>> u = rng.normal(size=(40, 1))
    >>> u -= u.mean()
    >>> y = rng.normal(size=(40, 200))
    >>> y[:, :20] += u
    >>> features = Features.of(y, np.full((40, 1), 40**-0.5))
    >>> bool(np.corrcoef(predict_left_out(features, u, 0)[:, 0], u[:, 0])[0, 1] > 0.9)
    True
    """
    n = targets.shape[0]
    root = np.ones(n) if weights is None else np.sqrt(weights)
    every = _regress(features, targets, root)
    law = SpikeSlab.learn(every.coefficients / every.error)
    parts = n if n <= MOST_SINGLY else FOLDS
    predicted = np.zeros(targets.shape)
    for part in range(parts):
        left_out = np.arange(n) % parts == part
        told = _feature_weights(features, targets, np.where(left_out, 0.0, root), law, private)
        predicted[left_out] = features.values[left_out] @ told
    predicted -= features.basis @ (features.basis.T @ predicted)
    return predicted


def _regress(features: Features, targets: FloatArray, root: FloatArray) -> _Regression:
    """Regress every feature on the targets and the design, samples weighted by the squares of ``root``."""
    design = _orthonormal(features.basis * root[:, None])
    targets = targets * root[:, None]
    targets = targets - design @ (design.T @ targets)
    inverse = np.linalg.pinv(targets.T @ targets, hermitian=True)
    basis = np.hstack([design, _orthonormal(targets)])
    squares = np.einsum("n,np,np->p", root**2, features.values, features.values)
    explained = (basis * root[:, None]).T @ features.values
    left = squares - np.einsum("kp,kp->p", explained, explained)
    df = max(float(np.sum(root**2)) - basis.shape[1], 1.0)
    noise = np.maximum(left / df, LEAST_NOISE)
    error = np.sqrt(np.maximum(np.diag(inverse), 1e-300)[:, None] * noise)
    coefficients = inverse @ ((targets * root[:, None]).T @ features.values)
    return _Regression(coefficients, error, noise, basis, df)


def _feature_weights(
    features: Features, targets: FloatArray, root: FloatArray, law: SpikeSlab, private: int
) -> FloatArray:
    """Weights of the features for predicting the targets, learnt from the samples with a ``root`` above 0."""
    fit = _regress(features, targets, root)
    z = fit.coefficients / fit.error
    loadings = law.renewed(z, 2).mean(z) * fit.error
    own, unique = _private_covariance(features, fit, root, private)
    weighted = np.asarray(loadings / unique, dtype=np.float64)
    if own.shape[0]:
        scaled = own / unique
        inner = np.linalg.solve(np.eye(own.shape[0]) + scaled @ own.T, scaled @ loadings.T)
        weighted = np.asarray(weighted - inner.T @ scaled, dtype=np.float64)
    between = loadings @ weighted.T + np.eye(loadings.shape[0])
    return np.asarray(np.linalg.solve(between, weighted).T, dtype=np.float64)


def _private_covariance(
    features: Features, fit: _Regression, root: FloatArray, private: int
) -> tuple[FloatArray, FloatArray]:
    """Return loadings of the private components, shape (k, p), and the variances that they leave."""
    k = min(private, int(fit.df) // 2)
    if k < 1:
        return np.empty((0, fit.noise.size)), fit.noise
    gram = features.gram * np.outer(root, root)
    aside = fit.basis @ (fit.basis.T @ gram)
    gram = gram - aside - aside.T + fit.basis @ (fit.basis.T @ gram @ fit.basis) @ fit.basis.T
    values, vectors = np.linalg.eigh(gram)
    values, vectors = np.maximum(values[::-1][:k], LEAST_NOISE), vectors[:, ::-1][:, :k]
    loadings = (vectors * root[:, None]).T @ features.values
    total = float(fit.noise.sum()) * fit.df
    rest = max(total - float(values.sum()), 0.0) / max(fit.df - k, 1.0)
    unique = (fit.noise * fit.df - np.einsum("kp,kp->p", loadings, loadings)) / max(fit.df - k, 1.0)
    kept = np.sqrt(np.maximum(1.0 - rest / values, 0.0) / fit.df)
    return loadings * kept[:, None], np.maximum(unique, LEAST_SHARE * fit.noise)


def _orthonormal(columns: FloatArray) -> FloatArray:
    """Orthonormal basis of the columns, by singular values above ``DESIGN_TOLERANCE`` of the largest."""
    left, size, _ = np.linalg.svd(columns, full_matrices=False)
    basis: FloatArray = left[:, size > DESIGN_TOLERANCE * max(float(size[0]), 1e-300)]
    return basis
