"""Removed components freed of what stays, so that taking them out leaves no trace of the shared ones behind."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

FloatArray = NDArray[np.float64]

ROUNDS = 30
NORMAL_MAD = 1.4826
CUT = 2.0
EFFICIENCY = 1.25
DENSE = 2.5
COMPARABLE = 0.3


@dataclass(frozen=True, eq=False)
class Admixture:
    """How much of the staying components each removed one has taken in.

    Attributes
    ----------
    coefficients : ndarray of shape (n_staying, n_removed)
    spread : ndarray of shape (n_staying,)
        Typical size, in units of noise, of what features have of a staying component beyond the admixture:
        about 1 where it reaches few features, well above 1 where it reaches most of them.
    variance : ndarray of shape (n_staying, n_removed)
        Sampling variance of the coefficients.
    """

    coefficients: FloatArray
    spread: FloatArray
    variance: FloatArray


def admixture(z: FloatArray, removed: FloatArray, staying: FloatArray, dimensions: int) -> Admixture:
    """Admixture ``K`` of the staying components ``T`` in the removed ones ``P``: the factors are ``P + T K``.

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
    """
    own, others = z.T @ removed, z.T @ staying
    rest = np.maximum(1.0 - np.sum(own**2, axis=1) - np.sum(others**2, axis=1), 1e-6)
    noise = np.sqrt(rest / dimensions)
    coefficients = np.zeros((staying.shape[1], removed.shape[1]))
    spread = np.zeros(staying.shape[1])
    own = own / noise[:, None]
    for k, loadings in enumerate(others.T):
        coefficients[k], spread[k] = _robust(own, loadings / noise)
    each = EFFICIENCY * np.diag(np.linalg.pinv(own.T @ own))
    return Admixture(coefficients, spread, np.outer(np.maximum(spread, 1.0) ** 2, each))


def entangled(found: Admixture, removed_shares: FloatArray, staying_shares: FloatArray) -> NDArray[np.bool_]:
    """Which removed components cannot be told from a staying one that reaches most features.

    Such a one has a ``spread`` above ``DENSE``, and, noise aside, more than ``COMPARABLE`` times the share of
    the removed one. The reference is what removal without this rule does: with two shared factors on two
    thirds of the features and twice as strong as the private ones, 30 % of the edges were false.
    """
    wide = staying_shares[found.spread > DENSE]
    return np.asarray(wide.max(initial=0.0) > COMPARABLE * removed_shares)


def _robust(x: FloatArray, y: FloatArray) -> tuple[FloatArray, float]:
    """Coefficients of ``y`` on ``x``, and the spread of what is left.

    Least absolute deviations first, then far points lose all weight.

    Residuals are in units of noise; where most are larger than noise their own spread is the unit.
    """
    weight = np.ones(y.size)
    coefficients = np.zeros(x.shape[1])
    for step in range(ROUNDS):
        left = (x * weight[:, None]).T
        coefficients = np.asarray(np.linalg.lstsq(left @ x, left @ y, rcond=None)[0], dtype=np.float64)
        size = np.abs(y - x @ coefficients)
        if step < ROUNDS // 2:
            weight = 1.0 / np.maximum(size, 0.5)
        else:
            unit = max(1.0, NORMAL_MAD * float(np.median(size)))
            weight = np.exp(-((size / (CUT * unit)) ** 2))
    return coefficients, NORMAL_MAD * float(np.median(size))
