"""Confidence intervals of correlations by Fisher's z, also at the false-coverage-adjusted rate."""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy import special

FloatArray = NDArray[np.float64]


def fisher_interval(
    r: ArrayLike, n: int, rank: int, *, error: float = 0.05, spearman: bool = False
) -> tuple[FloatArray, FloatArray]:
    """Lower and upper end of the intervals of correlations, ``tanh(atanh(r) -+ z sd)``.

    The variance of ``atanh(r)`` is ``1 / (n - c - 2)`` (Fisher 1921) with ``c`` dimensions of nuisance,
    the intercept counted, and ``(1 + r^2 / 2) / (n - c - 2)`` for Spearman (Bonett & Wright 2000). With
    ``n - c - 2 < 1`` nothing is known of the size: the interval is -1 to 1.

    Parameters
    ----------
    r : array_like
        Correlations between -1 and 1; NaN stays NaN.
    n, rank : int
        Samples, and dimensions ``c`` of the nuisance.
    error : float
        One minus the coverage, 0.05 for a 95 % interval.
    spearman : bool
        Whether the correlations are Spearman's.

    References
    ----------
    Fisher 1921, Metron 1:3. Bonett & Wright 2000, Psychometrika 65:23.

    Examples
    --------
    >>> low, high = fisher_interval(0.5, 30, 1)
    >>> round(float(low), 4), round(float(high), 4)
    (0.1704, 0.729)
    """
    r = np.asarray(r, dtype=np.float64)
    if n - rank - 2 < 1:
        unknown = np.where(np.isnan(r), np.nan, 1.0)
        return -unknown, unknown
    variance = (1.0 + r**2 / 2.0 if spearman else 1.0) / (n - rank - 2)
    half = -special.ndtri(error / 2.0) * np.sqrt(variance)
    with np.errstate(divide="ignore"):
        z = np.arctanh(r)
    return np.tanh(z - half), np.tanh(z + half)


def selected_error(selected: int, tests: int, error: float = 0.05) -> float:
    """One minus the coverage of each of ``selected`` intervals among ``tests``: ``error selected / tests``.

    Intervals of parameters that were selected because they looked strong cover too rarely. At this rate the
    expected share of intervals given that miss their parameter is at most ``error`` (for selection by
    Benjamini-Hochberg and independent or positively dependent estimates).

    References
    ----------
    Benjamini & Yekutieli 2005, J Am Stat Assoc 100:71.

    Examples
    --------
    >>> selected_error(10, 1000)
    0.0005
    """
    return error * selected / tests if selected else error
