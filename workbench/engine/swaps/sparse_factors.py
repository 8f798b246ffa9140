"""Factors of one block: components turned towards features that share them, loadings drawn towards zero."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from workbench.engine.linear import ThinBasis, thin_basis
from workbench.engine.signal_components import signal_components
from workbench.engine.swaps.spike_slab import SpikeSlab

FloatArray = NDArray[np.float64]

TURNS = 200
TURNED = 1e-8
ROUNDS = 12
LEAST_UNIQUENESS = 0.05


@dataclass(frozen=True, eq=False)
class SparseFactors:
    """Factors of one block, found without a look at any other.

    Attributes
    ----------
    scores : ndarray of shape (n_samples, n_factors)
        Of unit variance (denominator ``n``), not made orthogonal.
    law : SpikeSlab
        What the loadings of each factor are drawn towards.
    """

    scores: FloatArray
    law: SpikeSlab

    @property
    def number(self) -> int:
        """Number of factors."""
        return int(self.scores.shape[1])


def sparse_factors(x: FloatArray, rank: int) -> SparseFactors:
    """Factors of a block: as many as components carry signal, turned to independence, loadings shrunk.

    The components' loadings are rotated so that each follows few features strongly rather than all a little
    (the sum of fourth powers is largest). Then in turn: loadings by least squares on the scores, each drawn
    towards zero as its factor's loadings suggest; scores as the features' precision-weighted answer.
    A module of some dozen features among thousands is then scored by those features alone.

    Parameters
    ----------
    x : ndarray of shape (n_samples, n_features)
        Residuals of the design, features at unit variance.
    rank : int
        Dimensions of the design, intercept included.

    References
    ----------
    Kaiser 1958, Psychometrika 23:187 (rotation; the raw form without centring of squares). Wang & Stephens
    2021, Journal of Machine Learning Research 22(133) (empirical Bayes loadings).

    Examples
    --------
    >>> rng = np.random.default_rng(0)
    >>> factor = rng.normal(size=40)
    >>> x = rng.normal(size=(40, 500))
    >>> x[:, :25] += 1.5 * factor[:, None]
    >>> found = sparse_factors((x - x.mean(axis=0)) / x.std(axis=0), rank=1)
    >>> found.number, bool(abs(np.corrcoef(found.scores[:, 0], factor)[0, 1]) > 0.95)
    (1, True)
    """
    basis = thin_basis(x)
    number = min(signal_components(basis).number, max(0, (x.shape[0] - rank) // 2))
    if number == 0:
        return SparseFactors(np.empty((x.shape[0], 0)), SpikeSlab(np.empty(0), np.empty(0)))
    scores = _rotated_scores(x, basis, number)
    return refined(x, rank, scores, None, ROUNDS)


def refined(
    x: FloatArray, rank: int, scores: FloatArray, law: SpikeSlab | None, rounds: int
) -> SparseFactors:
    """Return factors after ``rounds`` of loadings and scores in turn, starting from ``scores``.

    Parameters
    ----------
    x : ndarray of shape (n_samples, n_features)
    rank : int
    scores : ndarray of shape (n_samples, n_factors)
    law : SpikeSlab or None
        Where to start from; learnt anew when left out.
    rounds : int
        At least 1.
    """
    n, k = scores.shape
    squares = np.einsum("np,np->p", x, x)
    for _ in range(rounds):
        inverse = np.linalg.pinv(scores.T @ scores)
        products = scores.T @ x
        loadings = inverse @ products
        left = squares - np.einsum("kp,kp->p", loadings, products)
        noise = np.maximum(left / max(n - rank - k, 1), LEAST_UNIQUENESS)
        error = np.sqrt(np.diag(inverse)[:, None] * noise)
        z = loadings / error
        law = SpikeSlab.learn(z) if law is None else law.renewed(z, 2)
        shrunk = law.mean(z) * error
        weighted = shrunk / noise
        answer = x @ weighted.T @ np.linalg.inv(shrunk @ weighted.T + np.eye(k))
        spread = answer.std(axis=0)
        kept = spread > 0.0
        scores, k = answer[:, kept] / spread[kept], int(kept.sum())
        law = SpikeSlab(law.share[kept], law.variance[kept])
        if k == 0:
            break
    assert law is not None
    return SparseFactors(scores, law)


def _rotated_scores(x: FloatArray, basis: ThinBasis, number: int) -> FloatArray:
    """Return component scores rotated so that the loadings' fourth powers are largest, unit variance."""
    vectors, lengths = basis.vectors[:, :number], basis.lengths[:number]
    loadings = (x.T @ vectors) / lengths * np.sqrt(x.shape[1])
    rotation = np.eye(number)
    for _ in range(TURNS):
        now = loadings @ rotation
        left, _, right = np.linalg.svd(loadings.T @ (now * now * now))
        turned = left @ right
        done = np.abs(np.abs(np.einsum("ij,ij->j", rotation, turned)) - 1.0).max() < TURNED
        rotation = turned
        if done:
            break
    scores = (vectors * lengths) @ rotation
    unit: FloatArray = scores / scores.std(axis=0)
    return unit
