"""Canonical pairs of two blocks from their thin decompositions: the solution, and what is refused.

With ``X = U_x D_x W_x'`` and likewise ``Y``, ridges ``l_x`` and ``l_y``, and
``G = D (D^2 + l)^(-1/2)``::

    M = G_x U_x' U_y G_y = P S V'
    variates u_k = U_x G_x P_k,   weights a_k = X' U_x D_x^(-1) (D_x^2 + l_x)^(-1/2) P_k,   u_k = X a_k

solves the ridge problem: ``a'X'Yb`` greatest under ``a'(X'X + l_x I)a = b'(Y'Y + l_y I)b = 1``. No matrix of
features x features is ever formed.

References
----------
Vinod 1976, Journal of Econometrics 4:147. Leurgans, Moyeed & Silverman 1993, JRSS B 55:725.
"""

from __future__ import annotations

from dataclasses import dataclass
from numbers import Real

import numpy as np
import scipy.linalg
from numpy.typing import NDArray

from workbench.engine.linear import ThinBasis, thin_svd
from workbench.errors import NumericsError

FloatArray = NDArray[np.float64]
RidgePair = tuple[float, float]

RIDGE_PATH: FloatArray = np.logspace(-2.0, 2.0, 9)
ROOT_TOLERANCE = 1e-8


@dataclass(frozen=True, eq=False)
class CanonicalPairs:
    """Canonical pairs of two blocks, strongest first; signs are those of the decomposition.

    Attributes
    ----------
    roots : ndarray of shape (n_components,)
        Singular values ``S`` of ``M``, at most 1; the pairs are in their order.
    x_duals, y_duals : ndarray of shape (n_samples, n_components)
        Weights in sample space: a side's weights are ``X' duals``, scores of other rows ``(Z X') duals``.
    x_scores, y_scores : ndarray of shape (n_samples, n_components)
        Variates ``u_k`` and ``v_k``.
    """

    roots: FloatArray
    x_duals: FloatArray
    y_duals: FloatArray
    x_scores: FloatArray
    y_scores: FloatArray

    @property
    def correlations(self) -> FloatArray:
        """In-sample ``corr(u_k, v_k)``; with ridge they need not fall from pair to pair."""
        lengths = np.linalg.norm(self.x_scores, axis=0) * np.linalg.norm(self.y_scores, axis=0)
        ratio: FloatArray = np.sum(self.x_scores * self.y_scores, axis=0) / lengths
        return np.clip(ratio, -1.0, 1.0)


def canonical_pairs(x: ThinBasis, y: ThinBasis, ridge: RidgePair, n_components: int) -> CanonicalPairs:
    """Ridge canonical pairs of two blocks.

    Parameters
    ----------
    x, y : ThinBasis
        Decompositions of both blocks over the same samples, nuisance removed.
    ridge : pair of float
        Absolute penalties ``l_x, l_y`` on ``XX'`` and ``YY'``, at least 0.
    n_components : int
        Pairs wanted, at least 1.

    Raises
    ------
    NumericsError
        When the data support fewer pairs: ``M`` has no more than ``rank`` roots that exceed
        ``ROOT_TOLERANCE`` of what the ridges allow at most.

    Examples
    --------
    >>> from workbench.engine.linear import thin_basis
    >>> line = np.array([[-1.0], [0.0], [1.0]])
    >>> canonical_pairs(thin_basis(line), thin_basis(-2 * line), (0.0, 0.0), 1).correlations.round(12)
    array([1.])
    """
    g_x, g_y = x.shrinkage(ridge[0]), y.shrinkage(ridge[1])
    left, roots, right = thin_svd(g_x[:, None] * (x.vectors.T @ y.vectors) * g_y)
    _require_support(n_components, roots, g_x.max() * g_y.max(), (x, y))
    left, roots, right = left[:, :n_components], roots[:n_components], right[:n_components].T
    return CanonicalPairs(
        roots,
        x_duals=duals(x, ridge[0], left),
        y_duals=duals(y, ridge[1], right),
        x_scores=x.vectors @ (g_x[:, None] * left),
        y_scores=y.vectors @ (g_y[:, None] * right),
    )


def duals(basis: ThinBasis, ridge: float, directions: FloatArray) -> FloatArray:
    """``U D^(-1) (D^2 + l)^(-1/2) P``: weights in sample space of directions ``P`` (rank x components)."""
    scale = 1.0 / (basis.lengths * np.sqrt(basis.lengths**2 + ridge))
    spread: FloatArray = basis.vectors @ (scale[:, None] * directions)
    return spread


def leading_directions(m: FloatArray, n_components: int) -> tuple[FloatArray, FloatArray]:
    """Leading singular vectors ``P`` and ``V`` of a matrix, by the smaller of its two Gram matrices.

    Faster than a whole decomposition by an order of magnitude, and accurate for the leading ones: made for
    grids. Directions whose root is zero come back as zero columns on the longer side.
    """
    if m.shape[0] > m.shape[1]:
        right, left = leading_directions(m.T, n_components)
        return left, right
    size = m.shape[0]
    squares, vectors = scipy.linalg.eigh(
        m @ m.T, subset_by_index=[size - n_components, size - 1], check_finite=False, overwrite_a=True
    )
    left = vectors[:, ::-1]
    lengths = np.sqrt(np.maximum(squares[::-1], 0.0))
    right = np.divide(m.T @ left, lengths, out=np.zeros((m.shape[1], n_components)), where=lengths > 0.0)
    return left, right


def is_auto(ridge: object) -> bool:
    """Whether the ridge is to be chosen from the data."""
    return isinstance(ridge, str) and ridge == "auto"


def check_ridge(ridge: object) -> RidgePair:
    """Both sides' ridges as a pair, from one number or two, in multiples of each side's noise level.

    Raises
    ------
    NumericsError
        When it is neither, or a number is negative or not finite.
    """
    pair = ridge if isinstance(ridge, (tuple, list)) else (ridge, ridge)
    numbers = [float(v) for v in pair if isinstance(v, Real) and not isinstance(v, (bool, np.bool_))]
    if len(pair) != 2 or len(numbers) != 2 or not all(0.0 <= v < np.inf for v in numbers):
        raise NumericsError(
            f"ridge is {ridge!r}; allowed: 'auto', one number of at least 0, or two of them (one for each "
            "side), in multiples of the side's noise level; 0 = none"
        )
    return numbers[0], numbers[1]


def absolute_ridge(multiples: RidgePair, x: ThinBasis, y: ThinBasis) -> RidgePair:
    """Penalties on ``XX'`` and ``YY'`` from multiples of the sides' noise levels."""
    return multiples[0] * x.noise_level, multiples[1] * y.noise_level


def check_unridged(multiples: RidgePair, x: ThinBasis, y: ThinBasis, freedom: int) -> None:
    """Refuse to go without ridge where perfect correlation comes from the number of features alone.

    Parameters
    ----------
    multiples : pair of float
        Ridges; 0 = none.
    x, y : ThinBasis
    freedom : int
        Degrees of freedom ``n - c`` that the nuisance (intercept included) leaves.

    Raises
    ------
    NumericsError
        When a side without ridge has ``n - c`` features or more, or, with no ridge on either side, when the
        two ranks together exceed ``n - c`` (two such spaces must meet, whatever the data).
    """
    for side, multiple, basis in zip("XY", multiples, (x, y), strict=True):
        if multiple == 0.0 and basis.n_features >= freedom:
            raise NumericsError(
                f"ridge 0 (none) for side {side} with {basis.n_features} features and {freedom} degrees of "
                "freedom: so many features fit any variate perfectly; give a ridge above 0, or 'auto'"
            )
    if multiples == (0.0, 0.0) and x.rank + y.rank > freedom:
        raise NumericsError(
            f"ridge 0 (none) for both sides with ranks {x.rank} and {y.rank} and {freedom} degrees of "
            "freedom: together the ranks exceed it, and a correlation of 1 is certain; give a ridge above 0, "
            "or 'auto'"
        )


def _require_support(
    asked: int, roots: FloatArray, largest: float, sides: tuple[ThinBasis, ThinBasis]
) -> None:
    supported = int(np.count_nonzero(roots > ROOT_TOLERANCE * largest))
    if asked <= supported:
        return
    x, y = sides
    rank = min(x.rank, y.rank)
    reason = " and ".join(
        f"side {side} has rank {basis.rank} ({basis.n_features} features)"
        for side, basis in zip("XY", sides, strict=True)
    )
    if supported < rank:
        reason += f" and only {supported} of their directions are correlated at all"
    raise NumericsError(
        f"asked for {asked} canonical pairs, the data support {supported}, because {reason}; "
        + (f"ask for at most {supported}" if supported else "there is nothing to find between these blocks")
    )
