"""Removed components freed of what stays, so that taking them out leaves no trace of the shared ones behind."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

FloatArray = NDArray[np.float64]

ROUNDS = 30
NORMAL_MAD = 1.4826
CUT = 2.0


def untangled(z: FloatArray, removed: FloatArray, staying: FloatArray, dimensions: int) -> FloatArray:
    """Directions to be removed, ``P + T K``: components ``P`` without their admixture of the staying ones ``T``.

    Principal components are uncorrelated in the samples at hand, the factors behind them are not: by chance
    they correlate by some ``1 / sqrt(n)``, and a component takes in part of its neighbours. Taking out such a
    mixture puts the staying factor, with the opposite sign, into every feature that followed the removed one.
    Most features follow few factors: those that the staying factor does not reach have loadings on ``T`` that
    are proportional to their loadings on ``P``, ``a = K b``. ``K`` is the robust regression of the one on the
    other over all features. Only the block itself is looked at.

    Parameters
    ----------
    z : ndarray of shape (n_samples, n_features)
        Features of unit length, nuisance removed.
    removed, staying : ndarray of shape (n_samples, k), (n_samples, l)
        Orthonormal scores, together and each.
    dimensions : int
        Dimensions that the nuisance leaves.

    Returns
    -------
    ndarray of shape (n_samples, k)
    """
    if removed.shape[1] == 0 or staying.shape[1] == 0:
        return removed
    own, others = z.T @ removed, z.T @ staying
    rest = np.maximum(1.0 - np.sum(own**2, axis=1) - np.sum(others**2, axis=1), 1e-6)
    noise = np.sqrt(rest / dimensions)
    admixture = np.column_stack([_robust(own / noise[:, None], column / noise) for column in others.T])
    directions: FloatArray = removed + staying @ admixture.T
    return directions


def _robust(x: FloatArray, y: FloatArray) -> FloatArray:
    """Coefficients of ``y`` on ``x``: least absolute deviations first, then far points lose all weight.

    Residuals are in units of noise; where most are larger than noise their own spread is the unit.
    """
    weight = np.ones(y.size)
    coefficients = np.zeros(x.shape[1])
    for step in range(ROUNDS):
        left = (x * weight[:, None]).T
        coefficients = np.linalg.lstsq(left @ x, left @ y, rcond=None)[0]
        size = np.abs(y - x @ coefficients)
        if step < ROUNDS // 2:
            weight = 1.0 / np.maximum(size, 0.5)
        else:
            unit = max(1.0, NORMAL_MAD * float(np.median(size)))
            weight = np.exp(-((size / (CUT * unit)) ** 2))
    return coefficients
