"""The permutation p of the smallest of several p: one answer from many statistics of one null."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

FloatArray = NDArray[np.float64]

TIE_TOLERANCE = 1e-9


@dataclass(frozen=True, eq=False)
class SmallestP:
    """Permutation p of the smallest p over several statistics.

    Attributes
    ----------
    p : float
        ``(1 + exceedances) / (1 + B)``.
    exceedances : int
        Arrangements, the observed one not among them, at least as extreme as it.
    by_statistic : ndarray of shape (n_statistics,)
        Permutation p of each statistic alone.
    """

    p: float
    exceedances: int
    by_statistic: FloatArray


def smallest_p(statistics: FloatArray) -> SmallestP:
    """Westfall and Young's p of the smallest p, over statistics of which large values count.

    Every arrangement gets, for each statistic, the number of arrangements that reach its value (ties to
    ``TIE_TOLERANCE``, relative, count as reached). It is as extreme as the observed one when its smallest
    number is smaller, or equal and the product of its numbers no greater: the smallest number alone takes
    few values, and many arrangements share each.

    Parameters
    ----------
    statistics : ndarray of shape (1 + B, n_statistics)
        The observed arrangement is the first row.

    References
    ----------
    Westfall & Young 1993, Resampling-Based Multiple Testing, section 2.

    Examples
    --------
    >>> smallest_p(np.array([[9.0, 2.0], [1.0, 3.0], [2.0, 1.0], [3.0, 0.0]])).p
    0.25
    """
    reached = np.column_stack([_reached(column) for column in statistics.T])
    smallest = reached.min(axis=1)
    product = np.log(reached).sum(axis=1)
    extreme = (smallest < smallest[0]) | (
        (smallest == smallest[0]) & (product <= product[0] + TIE_TOLERANCE * abs(product[0]))
    )
    n = statistics.shape[0]
    return SmallestP(float(extreme.sum() / n), int(extreme.sum()) - 1, reached[0] / n)


def _reached(values: FloatArray) -> NDArray[np.intp]:
    """How many values reach each one, itself included."""
    bar = values - TIE_TOLERANCE * np.abs(values)
    return np.asarray(values.size - np.searchsorted(np.sort(values), bar, side="left"))
