"""False-discovery rates over many tests: Benjamini-Hochberg, plain and on logarithms."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from workbench.engine.tails import p_from_log
from workbench.errors import NumericsError

FloatArray = NDArray[np.float64]


def benjamini_hochberg(p: ArrayLike) -> FloatArray:
    """False-discovery rate q of each p: ``q_(k) = min over l >= k of p_(l) m / l``.

    Tests without a p (NaN) keep NaN and do not count into ``m``.

    Parameters
    ----------
    p : array_like of any shape
        Values between 0 and 1, or NaN.

    Returns
    -------
    ndarray of the shape of ``p``

    Raises
    ------
    NumericsError
        When a value lies outside 0 to 1.

    References
    ----------
    Benjamini & Hochberg 1995, J R Stat Soc B 57:289.

    Examples
    --------
    >>> benjamini_hochberg([0.01, 0.04, np.nan, 0.02])
    array([0.03, 0.04,  nan, 0.03])
    """
    p = np.asarray(p, dtype=np.float64)
    tested = ~np.isnan(p)
    values = p[tested]
    if ((values < 0.0) | (values > 1.0)).any():
        raise NumericsError(
            f"p values lie between {values.min()} and {values.max()}; they must lie between 0 and 1"
        )
    order = np.argsort(values, kind="stable")
    scaled = values[order] * (values.size / np.arange(1, values.size + 1))
    adjusted = np.empty_like(values)
    adjusted[order] = np.minimum(np.minimum.accumulate(scaled[::-1])[::-1], 1.0)
    q = np.full(p.shape, np.nan)
    q[tested] = adjusted
    return q


@dataclass(frozen=True, eq=False)
class Family:
    """The strongest tests of one family of ``tests``, with their exact false-discovery rates.

    Attributes
    ----------
    log_p : ndarray
        Ascending log p of every test of the family at or under ``level``.
    log_q : ndarray
        Their log q.
    level : float
        Log p down to which the family is complete here.
    threshold : float
        Largest log p of the family with q at or under the rate asked for; minus infinity when none.
    tests : int
        Size of the whole family.
    """

    log_p: FloatArray
    log_q: FloatArray
    level: float
    threshold: float
    tests: int

    @classmethod
    def of(cls, log_p: FloatArray, level: float, tests: int, fdr: float) -> Family:
        """Family whose threshold lies at or under ``level``: what is weaker cannot pass.

        Parameters
        ----------
        log_p : ndarray
            Log p of all tests at or under ``level``, in any order; weaker ones are left out.
        """
        strongest = np.sort(log_p[log_p <= level])
        log_q = log_adjusted(strongest, tests)
        passing = np.flatnonzero(p_from_log(log_q) <= fdr)
        threshold = float(strongest[passing[-1]]) if passing.size else -np.inf
        return cls(strongest, log_q, level, threshold, tests)

    def exact_log_q(self, log_p: FloatArray) -> FloatArray:
        """Log q of members given by their log p; NaN for those weaker than ``level``."""
        inside = log_p <= self.level
        position = np.maximum(np.searchsorted(self.log_p, log_p[inside], side="right") - 1, 0)
        log_q = np.full(log_p.shape, np.nan)
        log_q[inside] = self.log_q[position]
        return log_q


def log_adjusted(log_p: FloatArray, tests: int, weaker: float = 0.0) -> FloatArray:
    """Log q of the strongest tests of a family, from their ascending log p.

    Parameters
    ----------
    log_p : ndarray
        Ascending, complete from the strongest on.
    tests : int
        Size of the whole family.
    weaker : float
        Smallest ``log(p_(l) tests / l)`` among the tests that are not given.
    """
    scaled = log_p + np.log(tests / np.arange(1, log_p.size + 1))
    adjusted: FloatArray = np.minimum(np.minimum.accumulate(scaled[::-1])[::-1], min(weaker, 0.0))
    return adjusted
