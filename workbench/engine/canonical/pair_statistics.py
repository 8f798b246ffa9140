"""Statistics of rearranged blocks for all ridges of a test, from one eigenvalue problem for each arrangement.

With kernels ``K_b`` and ridges ``l_b = m n_b`` (``n_b`` the block's noise level), the matrix ``R`` of generalised
canonical correlation, ``A_b'A_c`` off its diagonal and the identity on it, is ``A'A + H`` with
``H = diag(l_b (D_b^2 + l_b)^(-1))``, and by the determinant lemma::

    -log det R = sum_b log det(I + K_b / l_b) - log det(I + sum_b K_b / l_b)

The first term does not change when rows are rearranged, and one tridiagonal form of ``sum_b K_b / n_b`` gives the
second one at every ``m``. Of two blocks it is the Wilks-type ``-log det(I - M'M)``.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence

import numpy as np
from numpy.typing import NDArray
from scipy.linalg import lapack

from workbench.engine.canonical.canonical import RIDGE_PATH
from workbench.engine.linear import ThinBasis

FloatArray = NDArray[np.float64]

TEST_PATH: FloatArray = RIDGE_PATH[::2]
"""Ridges of a test, in multiples of the noise levels: nine over the same four decades find no more than five."""

STEPS = 10
SPENT = 1e-6


def wilks_statistics(
    kernels: FloatArray, blocks: Sequence[ThinBasis], noise_levels: Sequence[float]
) -> FloatArray:
    """``-log det R`` of each arrangement at each ridge of the path, shape (n_arrangements, n_path).

    Parameters
    ----------
    kernels : ndarray of shape (n_arrangements, n_rows, n_rows)
        ``sum_b K_b / n_b`` of rearranged rows.
    blocks : sequence of ThinBasis
    noise_levels : sequence of float
    """
    path = TEST_PATH[:, None]
    squares = np.concatenate([b.lengths**2 / level for b, level in zip(blocks, noise_levels, strict=True)])
    whole = np.log1p(squares / path).sum(axis=1) + kernels.shape[1] * np.log(TEST_PATH)
    along, across = np.empty(kernels.shape[:2]), np.empty((len(kernels), kernels.shape[1] - 1))
    for k, kernel in enumerate(kernels):
        # Exactly symmetric: transposed it is as LAPACK wants it, and nothing is copied but the work.
        _, along[k], across[k], _, _ = lapack.dsytrd(kernel.T, lower=1)
    statistics: FloatArray = whole - _log_determinants(along.T, across.T, path).T
    return statistics


def _log_determinants(along: FloatArray, across: FloatArray, shifts: FloatArray) -> FloatArray:
    """``log det(T + shift)`` of tridiagonal matrices by their pivots, (n_shifts, n_matrices).

    ``along`` (n, n_matrices) stands on the diagonals, ``across`` (n - 1, n_matrices) beside them.
    """
    pivots = along[0] + shifts
    total: FloatArray = np.log(pivots)
    for diagonal, square in zip(along[1:], across**2, strict=True):
        pivots = diagonal + shifts - square / pivots
        total += np.log(pivots)
    return total


def largest_roots(
    operator: Callable[[FloatArray], FloatArray], size: int, count: int, steps: int = STEPS
) -> FloatArray:
    """Largest eigenvalue of each of several symmetric operators by Lanczos steps from one fixed direction, (count,).

    A root that stands out comes to many digits. One of pure noise is a little too small, in the same way for every
    arrangement: a permutation test is as exact with it.

    Parameters
    ----------
    operator : callable
        Applies the operators to columns (size, count), the k-th to the k-th.

    References
    ----------
    Golub & Van Loan 2013, Matrix Computations, section 10.1.

    Examples
    --------
    >>> both = np.array([[3.0, 1.0], [2.0, 5.0], [1.0, 0.0]])  # two diagonal operators
    >>> largest_roots(lambda columns: both * columns, 3, 2).round(9)
    array([3., 5.])
    """
    start = np.random.default_rng(0).normal(size=(size, 1))
    here: FloatArray = np.repeat(start / np.linalg.norm(start), count, axis=1)
    before = np.zeros_like(here)
    along, across, top = np.zeros((steps, count)), np.zeros((steps, count)), np.zeros(count)
    for k in range(steps):
        after = operator(here)
        along[k] = np.einsum("ij,ij->j", after, here)
        after -= along[k] * here + across[k - 1] * before
        length = np.sqrt(np.einsum("ij,ij->j", after, after))
        top = np.maximum(top, np.abs(along[k]))
        # Of a direction that is spent only rounding is left.
        across[k] = np.where(length > SPENT * top, length, 0.0)
        before = here
        here = after * np.divide(1.0, across[k], out=np.zeros(count), where=across[k] > 0.0)
    matrices = np.zeros((count, steps, steps))
    places = np.arange(steps)
    matrices[:, places, places] = along.T
    matrices[:, places[1:], places[:-1]] = across[:-1].T
    return np.asarray(np.linalg.eigvalsh(matrices)[:, -1], dtype=np.float64)
