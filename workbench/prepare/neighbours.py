"""Gaps filled from the most similar training samples.

K nearest neighbours (Troyanskaya et al. 2001, Bioinformatics 17:520-525), samples as rows: a gap
becomes the mean of the feature over the k nearest training samples that have it. Similar means a small
mean squared difference over the features that both samples have, each on its training sd.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from workbench.prepare.refusal import without_value
from workbench.prepare.tables import Mask, Matrix

FEWEST_NEIGHBOURS = 3
MOST_NEIGHBOURS = 10
TIE_DECIMALS = 9
FEATURES_AT_A_TIME = 512


def neighbour_count(n: int) -> int:
    """Return k for n training samples: the root of n, rounded, from 3 to 10.

    >>> [neighbour_count(n) for n in (6, 25, 300)]
    [3, 5, 10]
    """
    return int(np.clip(round(np.sqrt(n)), FEWEST_NEIGHBOURS, MOST_NEIGHBOURS))


@dataclass(frozen=True)
class Donors:
    """Training samples that lend their values.

    Attributes
    ----------
    values : ndarray of shape (n_training, n_features)
        Training values with NaN for gaps; every feature has at least one value.
    samples : tuple of str
        Their names; equally near donors are taken in the order of names.
    k : int
        How many donors a gap is filled from (fewer where fewer have the feature).
    """

    values: Matrix
    samples: tuple[str, ...]
    k: int

    def estimates(self, values: Matrix, wanted: Mask, samples: tuple[str, ...]) -> Matrix:
        """Return the table with the wanted cells filled.

        Parameters
        ----------
        values : ndarray of shape (n_samples, n_features)
            Any samples, with NaN for gaps.
        wanted : bool ndarray of that shape
            Gaps to fill; other cells come back as they are.
        samples : tuple of str
            Names of the rows, for messages.

        Raises
        ------
        InputError
            When a sample has no value in any feature.
        """
        filled = values.copy()
        rows = np.flatnonzero(wanted.any(axis=1))
        if not rows.size:
            return filled
        by_name = np.argsort(np.argsort(np.array(self.samples, dtype=object), kind="stable"))
        distances = mean_squared_differences(
            values if len(rows) == len(values) else values[rows], self.values
        )
        self._check_rows(distances, [samples[row] for row in rows])
        for row, distance in zip(rows, distances, strict=True):
            columns = np.flatnonzero(wanted[row])
            nearest = np.lexsort((by_name, distance))
            filled[row, columns] = _nearest_means(self.values, nearest, columns, self.k)
        return filled

    def _check_rows(self, distances: Matrix, names: list[str]) -> None:
        lost = [name for name, distance in zip(names, distances, strict=True) if np.isinf(distance).all()]
        if lost:
            raise without_value(
                "value in any feature that another sample has, so that their gaps cannot be filled",
                lost,
                len(distances),
            )


def mean_squared_differences(values: Matrix, donors: Matrix) -> Matrix:
    """Return the mean squared standardised difference of each row to each donor.

    Features are centred and scaled by the donors' mean and sd (ddof 0; a sd of zero counts as one).
    Rounded to 9 decimals, so that equal distances are ties on every machine; infinite where two samples
    share no feature.
    """
    squares, shared = np.zeros((len(values), len(donors))), np.zeros((len(values), len(donors)))
    for start in range(0, donors.shape[1], FEATURES_AT_A_TIME):
        part = slice(start, start + FEATURES_AT_A_TIME)
        more = _squared_differences(values[:, part], donors[:, part])
        squares, shared = squares + more[0], shared + more[1]
    means: Matrix = np.divide(squares, shared, where=shared > 0, out=np.full(shared.shape, np.inf))
    return np.maximum(np.round(means, TIE_DECIMALS), 0.0)


def _squared_differences(values: Matrix, donors: Matrix) -> tuple[Matrix, Matrix]:
    """Return the summed squared standardised differences over some features, and how many both have."""
    seen = ~np.isnan(donors)
    count = np.maximum(seen.sum(axis=0), 1)
    centre = np.where(seen, donors, 0.0).sum(axis=0) / count
    scale = np.sqrt(np.where(seen, (donors - centre) ** 2, 0.0).sum(axis=0) / count)
    scale[scale == 0] = 1.0
    left, left_seen = _standardised(values, centre, scale)
    right, right_seen = _standardised(donors, centre, scale)
    shared = left_seen @ right_seen.T
    squares = left**2 @ right_seen.T + left_seen @ (right**2).T - 2.0 * (left @ right.T)
    return squares, shared


def _standardised(values: Matrix, centre: Matrix, scale: Matrix) -> tuple[Matrix, Matrix]:
    """Return standardised values with zero for gaps, and 1 / 0 for seen / gap."""
    seen = ~np.isnan(values)
    return np.where(seen, (values - centre) / scale, 0.0), seen.astype(np.float64)


def _nearest_means(donors: Matrix, nearest: NDArray[np.intp], columns: NDArray[np.intp], k: int) -> Matrix:
    """Return the mean of each column over its k first donors that have it, in the order ``nearest``."""
    means, counts = _first_means(donors, nearest[: 3 * k], columns, k)
    short = np.flatnonzero(counts < k)
    if short.size and len(nearest) > 3 * k:
        means[short] = _first_means(donors, nearest, columns[short], k)[0]
    return means


def _first_means(
    donors: Matrix, rows: NDArray[np.intp], columns: NDArray[np.intp], k: int
) -> tuple[Matrix, NDArray[np.int_]]:
    lent = donors[rows[:, None], columns]
    seen = ~np.isnan(lent)
    taken = seen & (np.cumsum(seen, axis=0) <= k)
    counts = taken.sum(axis=0)
    return np.where(taken, lent, 0.0).sum(axis=0) / np.maximum(counts, 1), counts
