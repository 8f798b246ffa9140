"""What exchanging rows gains: likelihood ratios of a multivariate regression, for all pairs at once.

Rows ``T`` (scores of a layer's samples) are regressed on known columns with hat matrix ``H``. With flat priors
on the coefficients and on the covariance the likelihood of an arrangement of the rows is ``|E'E|^(-df/2)``,
``E = (I - H) T``. Were coefficients and covariance known, the likelihood ratio of a wrong arrangement to the right
one would have mean 1, so that its logarithm passed ``t`` with probability ``exp(-t)`` at most (Markov's inequality);
as they are estimated this holds nearly.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray
from scipy.stats import beta

FloatArray = NDArray[np.float64]
IndexArray = NDArray[np.intp]

LEAST_RATIO = 1e-300
LEAST_ROOM = 1e-9


def hat_matrix(basis: FloatArray) -> FloatArray:
    """Return the projection onto the columns of a basis that need not be orthonormal."""
    q = np.linalg.qr(basis)[0]
    projection: FloatArray = q @ q.T
    return projection


def exchange_gains(rows: FloatArray, hat: FloatArray, df: int) -> FloatArray:
    """Log likelihood ratio of "rows i and j exchanged" to "as they are", for every pair.

    With ``e = E_j - E_i``, ``t = T_j - T_i``, ``A = E'E``, ``a = e'A^-1 e``, ``b = e'A^-1 t``, ``g = t'A^-1 t``
    and ``k = 2 - h_ii - h_jj + 2 h_ij`` the determinant changes by the factor ``(1 - b)^2 + g (k - a)``.

    Parameters
    ----------
    rows : ndarray of shape (n_samples, m)
        ``T``; its residuals must have rank ``m``.
    hat : ndarray of shape (n_samples, n_samples)
        ``H``, a projection.
    df : int
        ``n_samples`` less the rank of ``H``.

    Returns
    -------
    ndarray of shape (n_samples, n_samples)
        Symmetric, zero on the diagonal.

    Examples
    --------
    >>> t = np.array([[0.0], [1.0], [2.0], [8.0], [4.0], [5.0], [6.0], [7.0], [3.0], [9.0]])
    >>> line = hat_matrix(np.column_stack([np.ones(10), np.arange(10.0)]))
    >>> gains = exchange_gains(t, line, 8)
    >>> np.unravel_index(gains.argmax(), gains.shape)
    (np.int64(3), np.int64(8))
    """
    residual = rows - hat @ rows
    inverse = np.asarray(np.linalg.pinv(residual.T @ residual, hermitian=True), dtype=np.float64)
    a = _squared_distances(residual, residual, inverse)
    b = _squared_distances(residual, rows, inverse)
    g = _squared_distances(rows, rows, inverse)
    h = np.diag(hat)
    k = 2.0 - h[:, None] - h + 2.0 * hat
    ratio = (1.0 - b) ** 2 + g * (k - a)
    gains: FloatArray = -0.5 * df * np.log(np.maximum(ratio, LEAST_RATIO))
    np.fill_diagonal(gains, 0.0)
    return gains


def rearrangement_gains(
    rows: FloatArray,
    hat: FloatArray,
    df: int,
    places: IndexArray,
    sources: IndexArray,
) -> FloatArray:
    """Log likelihood ratio of each of several rearrangements to the rows as they are.

    Parameters
    ----------
    rows, hat, df
        As for :func:`exchange_gains`.
    places, sources : ndarray of int, shape (n_rearrangements, s)
        In each, row ``sources[k]`` comes to place ``places[k]``; all other rows stay.

    Returns
    -------
    ndarray of shape (n_rearrangements,)

    Examples
    --------
    >>> t = np.random.default_rng(0).normal(size=(12, 2))
    >>> line = hat_matrix(np.column_stack([np.ones(12), np.arange(12.0)]))
    >>> pair = np.array([[2, 7]])
    >>> same = rearrangement_gains(t, line, 10, pair, pair[:, ::-1]) - exchange_gains(t, line, 10)[2, 7]
    >>> bool(abs(same[0]) < 1e-9)
    True
    """
    residual = rows - hat @ rows
    total = residual.T @ residual
    step = rows[sources] - rows[places]
    left = (
        np.eye(len(hat))[places[:, :, None], places[:, None, :]] - hat[places[:, :, None], places[:, None, :]]
    )
    cross = np.einsum("rsm,rsl->rml", residual[places], step)
    own = np.einsum("rsm,rst,rtl->rml", step, left, step)
    after = total + cross + cross.transpose(0, 2, 1) + own
    was, now = np.linalg.slogdet(total)[1], np.linalg.slogdet(after)[1]
    gains: FloatArray = 0.5 * df * (was - now)
    return gains


def relabelling_gains(
    rows: FloatArray,
    fixed: FloatArray,
    columns: FloatArray,
    df: int,
    places: IndexArray,
    sources: IndexArray,
) -> FloatArray:
    """Log likelihood ratio of rearranged columns of the design, all others and the rows staying as they are.

    Tubes that were exchanged before the runs bear the marks of their own run and the group of each other. With
    ``M`` the residuals of the fixed columns, ``A = T'MT``, ``G = C'MC`` and ``V = T'MC`` the determinant of the
    residuals is ``|A| |G - V'A^-1 V| / |G|`` for any arrangement of the columns ``C``.

    Parameters
    ----------
    rows : ndarray of shape (n_samples, m)
    fixed : ndarray of shape (n_samples, n_fixed)
        Orthonormal basis of the columns that stay, the intercept among them.
    columns : ndarray of shape (n_samples, n_columns)
        Columns that go with the tubes.
    df : int
        ``n_samples`` less the rank of the whole design.
    places, sources : ndarray of int, shape (n_rearrangements, s)
        What was delivered as ``sources[k]`` belongs to ``places[k]``, whose columns it takes.

    Returns
    -------
    ndarray of shape (n_rearrangements,)
        Zero throughout where the columns that go are in the span of those that stay.

    Examples
    --------
    >>> rng = np.random.default_rng(0)
    >>> group = np.repeat([0.0, 1.0], 6)
    >>> rows = rng.normal(size=(12, 1)) + 5.0 * group[:, None]
    >>> rows[[0, 11]] = rows[[11, 0]]
    >>> pair = np.array([[0, 11], [0, 1]])
    >>> gains = relabelling_gains(rows, np.full((12, 1), 12**-0.5), group[:, None], 10, pair, pair[:, ::-1])
    >>> bool(gains[0] > 5.0), bool(abs(gains[1]) < 1e-9)
    (True, True)
    """
    left = columns - fixed @ (fixed.T @ columns)
    size = np.linalg.norm(columns - columns.mean(axis=0), axis=0)
    if (
        not columns.shape[1]
        or np.linalg.matrix_rank(left / np.maximum(size, 1e-300), tol=1e-6) < left.shape[1]
    ):
        return np.zeros(len(places))
    own = rows - fixed @ (fixed.T @ rows)
    inverse = np.linalg.pinv(own.T @ own, hermitian=True)
    step = columns[places] - columns[sources]
    room = np.eye(len(rows))[sources[:, :, None], sources[:, None, :]]
    room = room - np.einsum("rsk,rtk->rst", fixed[sources], fixed[sources])
    cross = np.einsum("rsk,rsl->rkl", left[sources], step)
    spread = (
        left.T @ left + cross + cross.transpose(0, 2, 1) + np.einsum("rsk,rst,rtl->rkl", step, room, step)
    )
    product = own.T @ left + np.einsum("rsm,rsk->rmk", own[sources], step)
    unexplained = spread - np.einsum("rmk,mn,rnl->rkl", product, inverse, product)
    before = np.linalg.slogdet(left.T @ left - left.T @ own @ inverse @ own.T @ left)[1]
    before -= np.linalg.slogdet(left.T @ left)[1]
    after = np.linalg.slogdet(unexplained)[1] - np.linalg.slogdet(spread)[1]
    gains: FloatArray = 0.5 * df * (before - after)
    return gains


def row_gains(
    rows: FloatArray, hat: FloatArray, df: int, places: IndexArray, sources: IndexArray
) -> FloatArray:
    """How much better each rearranged row fits its new place than the row there before.

    Half the fall of ``E_i' S^-1 E_i / (1 - h_ii)``, ``S = E'E / df`` of the rearranged rows.

    Parameters
    ----------
    rows, hat, df
        As for :func:`exchange_gains`.
    places, sources : ndarray of int, shape (s,)
        Row ``sources[k]`` comes to place ``places[k]``.

    Returns
    -------
    ndarray of shape (s,)
    """
    moved = rows.copy()
    moved[places] = rows[sources]
    after = moved - hat @ moved
    before = rows - hat @ rows
    inverse = np.linalg.pinv(after.T @ after / df, hermitian=True)
    room = np.maximum(1.0 - np.diag(hat)[places], LEAST_ROOM)
    was, now = (np.einsum("sm,ml,sl->s", e[places], inverse, e[places]) for e in (before, after))
    gains: FloatArray = 0.5 * (was - now) / room
    return gains


def row_mismatch(
    rows: FloatArray, hat: FloatArray, df: int, places: IndexArray, sources: IndexArray
) -> FloatArray:
    """How ill each rearranged row fits its new place, as the chance of a worse fit.

    ``E_i' (E'E)^-1 E_i / (1 - h_ii)`` of the rearranged rows is Beta(m / 2, (df - m) / 2) for m normal columns.

    Parameters
    ----------
    rows, hat, df, places, sources
        As for :func:`row_gains`; the same places twice: the rows as they are.

    Returns
    -------
    ndarray of shape (s,)
    """
    moved = rows.copy()
    moved[places] = rows[sources]
    residual = moved - hat @ moved
    m = rows.shape[1]
    inverse = np.linalg.pinv(residual.T @ residual, hermitian=True)
    room = np.maximum(1.0 - np.diag(hat)[places], LEAST_ROOM)
    share = np.einsum("sm,ml,sl->s", residual[places], inverse, residual[places]) / room
    chance: FloatArray = beta.sf(np.clip(share, 0.0, 1.0), 0.5 * m, 0.5 * max(df - m, 1))
    return chance


def pair_distances(rows: FloatArray, metric: FloatArray) -> FloatArray:
    """Return squared distances of rows in a metric, shape (n_samples, n_samples).

    >>> pair_distances(np.array([[0.0, 0.0], [3.0, 4.0]]), np.eye(2))[0, 1]
    np.float64(25.0)
    """
    return _squared_distances(rows, rows, metric)


def _squared_distances(x: FloatArray, y: FloatArray, metric: FloatArray) -> FloatArray:
    """Return ``(x_j - x_i)' metric (y_j - y_i)`` for all pairs."""
    cross = x @ metric @ y.T
    own = np.diag(cross)
    distances: FloatArray = own[:, None] + own - cross - cross.T
    return distances
