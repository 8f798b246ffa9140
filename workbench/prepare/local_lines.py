"""Robust local regression of many features at a time on one run order.

At each pool a line is fitted to the pools in its window, weighted by the tricube of their distance; three
times more with weights that fall with the size of a pool's residual (bisquare of six median absolute residuals), so
that a failed injection does not bend the line (Cleveland 1979, Journal of the American Statistical Association 74:829).
"""

from __future__ import annotations

import numpy as np

from workbench.prepare.tables import Matrix

SMALLEST_WINDOW = 6
ROBUST_ROUNDS = 3
BISQUARE = 6.0
SMALLEST_SCALE = 1e-9
NO_SLOPE = 1e-3
NO_WEIGHT = 1e-9


def window_size(n: int, span: float) -> int:
    """Return how many of n pools are in a window: the share ``span``, but at least six (all, when fewer)."""
    return min(n, max(SMALLEST_WINDOW, int(span * n + 1e-9)))


def tricube_weights(at: Matrix, x: Matrix, window: int) -> Matrix:
    """Return the weight of each pool at each place, (n_places, n_pools).

    The window reaches to the ``window``-th nearest pool; pools at or beyond 0.999 of that have no weight.
    """
    distance = np.abs(at[:, None] - x)
    reach = np.sort(distance, axis=1)[:, window - 1 : window]
    relative = np.divide(distance, reach, out=(distance > 0).astype(np.float64), where=reach > 0)
    weights: Matrix = np.where(relative < 0.999, (1.0 - np.minimum(relative, 1.0) ** 3) ** 3, 0.0)
    return weights


def local_lines(x: Matrix, y: Matrix, span: float) -> Matrix:
    """Return the fitted course of every feature at the pools.

    Parameters
    ----------
    x : ndarray of shape (n_pools,)
        Run order, rising.
    y : ndarray of shape (n_pools, n_features)
        Logarithms, NaN where a pool lacks the feature; at least one value each.
    span : float
        Share of the pools in a window, over 0 and up to 1; see :func:`window_size`.

    Returns
    -------
    ndarray of shape (n_pools, n_features)
        Before a feature's first and after its last value the course is held where it was: a line is never drawn on.

    References
    ----------
    Cleveland 1979, Journal of the American Statistical Association 74:829-836.

    Examples
    --------
    A straight drift is followed exactly, and one failed injection does not bend it:

    >>> x = np.arange(10.0)
    >>> y = np.column_stack([2 * x, 2 * x + 50 * (x == 4)])
    >>> bool(np.allclose(local_lines(x, y, 1.0)[:, 0], 2 * x)), bool(abs(local_lines(x, y, 1.0)[4, 1] - 8) < 0.5)
    (True, True)
    """
    seen = ~np.isnan(y)
    filled = np.where(seen, y, 0.0)
    kernel = tricube_weights(x, x, window_size(len(x), span))
    trust = seen.astype(np.float64)
    fitted = _weighted_lines(x, filled, kernel, trust)
    for _ in range(ROBUST_ROUNDS):
        trust = seen * _bisquare(np.where(seen, np.abs(filled - fitted), np.nan))
        fitted = _weighted_lines(x, filled, kernel, trust)
    return _held(fitted, seen)


def _weighted_lines(x: Matrix, y: Matrix, kernel: Matrix, trust: Matrix) -> Matrix:
    """Return the value at each place of the weighted line through each feature.

    The weighted mean where the slope is open; the median of all its pools where its window holds none.
    """
    total = kernel @ trust
    empty = total < NO_WEIGHT
    total = np.maximum(total, NO_WEIGHT)
    weighted = trust * y
    mean_x = (kernel @ (trust * x[:, None])) / total
    mean_y = (kernel @ weighted) / total
    spread = (kernel @ (trust * (x**2)[:, None])) / total - mean_x**2
    joint = (kernel @ (weighted * x[:, None])) / total - mean_x * mean_y
    flat = spread <= (NO_SLOPE * max(float(np.ptp(x)), np.finfo(float).tiny)) ** 2
    slope = np.divide(joint, spread, out=np.zeros_like(joint), where=~flat)
    fitted: Matrix = mean_y + slope * (x[:, None] - mean_x)
    return np.where(empty, np.nan_to_num(medians(np.where(trust > 0, y, np.nan))), fitted)


def _bisquare(residuals: Matrix) -> Matrix:
    """Return (1 - u^2)^2 with u the residual in units of six medians (of 1e-9 at least), 0 for NaN."""
    relative = residuals / np.maximum(BISQUARE * np.nan_to_num(medians(residuals)), SMALLEST_SCALE)
    weights: Matrix = np.where(relative < 1.0, (1.0 - np.minimum(relative, 1.0) ** 2) ** 2, 0.0)
    return np.where(np.isnan(residuals), 0.0, weights)


def medians(values: Matrix) -> Matrix:
    """Return each column's median over what is not NaN; NaN without any, and no warning.

    >>> medians(np.array([[1.0, np.nan], [4.0, np.nan]])).tolist()
    [2.5, nan]
    """
    if not len(values):
        return np.full(values.shape[1], np.nan)
    if not np.isnan(values).any():
        return np.median(values, axis=0)
    ordered, count = np.sort(values, axis=0), (~np.isnan(values)).sum(axis=0)
    column, last = np.arange(values.shape[1]), np.maximum(count - 1, 0)
    middle: Matrix = (ordered[last // 2, column] + ordered[np.minimum(count // 2, last), column]) / 2.0
    return middle


def _held(fitted: Matrix, seen: np.ndarray) -> Matrix:
    """Return the course with the places outside a feature's own values held at its first and last."""
    places, column = np.arange(len(fitted))[:, None], np.arange(fitted.shape[1])
    first = np.argmax(seen, axis=0)
    last = len(fitted) - 1 - np.argmax(seen[::-1], axis=0)
    held: Matrix = fitted[np.clip(places, first, last), column]
    return held


def read_off(x: Matrix, course: Matrix, at: Matrix) -> Matrix:
    """Return the course at any places: linear between pools, held before the first and after the last.

    Parameters
    ----------
    x : ndarray of shape (n_pools,)
        Rising.
    course : ndarray of shape (n_pools, n_features)
    at : ndarray of shape (n_places,)

    Examples
    --------
    >>> read_off(np.array([1.0, 3.0]), np.array([[0.0], [4.0]]), np.array([0.0, 2.0, 9.0])).ravel().tolist()
    [0.0, 2.0, 4.0]
    """
    place = np.clip(np.searchsorted(x, at, side="right") - 1, 0, max(len(x) - 2, 0))
    if len(x) == 1:
        return np.repeat(course, len(at), axis=0)
    width = x[place + 1] - x[place]
    share = np.divide(at - x[place], width, out=np.zeros_like(at), where=width > 0)
    share = np.clip(share, 0.0, 1.0)[:, None]
    read: Matrix = (1.0 - share) * course[place] + share * course[place + 1]
    return read
