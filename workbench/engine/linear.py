"""Linear algebra that component methods share: thin decompositions, noise level, signs, correlations.

One rule for rank: a direction counts when its eigenvalue in ``XX'`` is more than ``RANK_TOLERANCE`` of the
largest. One rule for signs, over all blocks together: see :func:`component_signs`.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property

import numpy as np
import scipy.linalg
from numpy.typing import NDArray

from workbench.errors import NumericsError

FloatArray = NDArray[np.float64]

RANK_TOLERANCE = 1e-10
SIGN_TIE = 1e-6


@dataclass(frozen=True, eq=False)
class ThinBasis:
    """Thin decomposition ``X = U D W'`` of one block, without the features' side ``W``.

    Attributes
    ----------
    vectors : ndarray of shape (n_samples, rank)
        Orthonormal columns ``U``.
    lengths : ndarray of shape (rank,)
        Singular values ``D`` of ``X``, largest first; ``D**2`` are the nonzero eigenvalues of ``XX'``.
    n_features : int
        Columns of ``X``.
    """

    vectors: FloatArray
    lengths: FloatArray
    n_features: int

    @property
    def rank(self) -> int:
        """Number of directions that count by the rank rule."""
        return int(self.lengths.size)

    @cached_property
    def noise_level(self) -> float:
        """Median nonzero eigenvalue of ``XX'``: the unit in which ridges are given."""
        return float(np.median(self.lengths**2))

    def shrinkage(self, ridge: float) -> FloatArray:
        """``D (D^2 + ridge)^(-1/2)``: how much of each direction a ridge leaves, between 0 and 1."""
        left: FloatArray = self.lengths / np.sqrt(self.lengths**2 + ridge)
        return left


def thin_basis(x: FloatArray) -> ThinBasis:
    """Thin decomposition of a block, from ``XX'`` where features outnumber samples, else from ``X`` itself.

    Parameters
    ----------
    x : ndarray of shape (n_samples, n_features)
        Nuisance already removed; features may outnumber samples by any factor.

    Raises
    ------
    NumericsError
        When ``x`` is zero everywhere.

    Examples
    --------
    >>> basis = thin_basis(np.array([[3.0, 0.0, 0.0], [0.0, 2.0, 0.0], [0.0, 0.0, 0.0]]))
    >>> basis.rank, basis.lengths, basis.noise_level
    (2, array([3., 2.]), 6.5)
    """
    n, p = x.shape
    if p > n:
        return kernel_basis(x @ x.T, p)
    vectors, lengths, _ = thin_svd(x)
    return _leading_directions(vectors, lengths, n, p)


def kernel_basis(kernel: FloatArray, n_features: int) -> ThinBasis:
    """Thin decomposition of a block from ``XX'``; directions weaker than 1e-8 of the strongest drown in rounding.

    Raises
    ------
    NumericsError
        When the kernel is zero everywhere.

    Examples
    --------
    >>> kernel_basis(np.diag([9.0, 4.0, 0.0]), 3).lengths
    array([3., 2.])
    """
    eigenvalues, vectors = scipy.linalg.eigh(kernel, check_finite=False)
    lengths = np.sqrt(np.maximum(eigenvalues[::-1], 0.0))
    return _leading_directions(vectors[:, ::-1], lengths, len(kernel), n_features)


def thin_svd(x: FloatArray) -> tuple[FloatArray, FloatArray, FloatArray]:
    """Thin singular value decomposition ``U, D, W'`` of a finite matrix.

    By divide and conquer, and where that does not converge, as happens with one in some ten thousand matrices of lower
    rank, by the slower iteration.
    """
    try:
        left, lengths, right = scipy.linalg.svd(x, full_matrices=False, check_finite=False)
    except scipy.linalg.LinAlgError:
        left, lengths, right = scipy.linalg.svd(
            x, full_matrices=False, check_finite=False, lapack_driver="gesvd"
        )
    return left, lengths, right


def _leading_directions(vectors: FloatArray, lengths: FloatArray, n: int, n_features: int) -> ThinBasis:
    """Keep the directions that count by the rank rule."""
    if lengths[0] == 0.0:
        raise NumericsError(
            f"the block of {n} samples x {n_features} features has no variation left; leave it out, or remove less"
        )
    rank = int(np.count_nonzero(lengths**2 > RANK_TOLERANCE * lengths[0] ** 2))
    return ThinBasis(np.ascontiguousarray(vectors[:, :rank]), lengths[:rank], n_features)


def component_signs(*loadings: FloatArray) -> FloatArray:
    """Sign, 1 or -1, by which each component is to be multiplied: the one sign rule of the engine.

    Over all blocks together, the loading of greatest size is made positive; of loadings that are equal in
    size to ``SIGN_TIE`` (relative) the first counts, in the order of the blocks and of their features.

    Parameters
    ----------
    *loadings : ndarray of shape (n_features_of_block, n_components)
        One array for each block that shares the components; NaN marks a feature without a loading.

    Examples
    --------
    >>> component_signs(np.array([[0.2, 0.5]]), np.array([[-0.9, 0.4]]))
    array([-1.,  1.])
    """
    every = np.nan_to_num(np.vstack(loadings))
    size = np.abs(every)
    first = (size >= (1.0 - SIGN_TIE) * size.max(axis=0)).argmax(axis=0)
    return np.where(every[first, np.arange(every.shape[1])] < 0.0, -1.0, 1.0)


def column_correlations(x: FloatArray, scores: FloatArray) -> FloatArray:
    """Correlation of each column of ``x`` with each column of ``scores``; both must be centred.

    Parameters
    ----------
    x : ndarray of shape (n_samples, n_features)
    scores : ndarray of shape (n_samples, n_components)

    Returns
    -------
    ndarray of shape (n_features, n_components)
        Between -1 and 1; NaN where a column is zero everywhere.
    """
    # A quotient of products, so that x itself is never copied at its full width.
    lengths = np.sqrt(np.einsum("ij,ij->j", x, x))[:, None] * np.linalg.norm(scores, axis=0)
    products = x.T @ scores
    with np.errstate(invalid="ignore", divide="ignore"):
        ratio: FloatArray = np.clip(products / lengths, -1.0, 1.0)
    ratio[lengths == 0.0] = np.nan
    return ratio
