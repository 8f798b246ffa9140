"""Features as rows of length one with the nuisance removed, prepared slice by slice.

The product of two such rows is their (partial) correlation. Every row is made from its own feature alone by
sums in a fixed order, so that its bits do not depend on the slice it came with, on the threads or on the
matrix library.
"""

from __future__ import annotations

from typing import Any, Protocol

import numpy as np
from numpy.typing import NDArray
from scipy.stats import rankdata

from workbench.engine.nuisance import CONSTANT_TOLERANCE, Nuisance
from workbench.errors import NumericsError

FloatArray = NDArray[np.float64]
IndexArray = NDArray[np.int64]

_SLICE = 1024
_EXTREME = 1e100


class Columns(Protocol):
    """What a block must offer: a shape and slices, as arrays and HDF5 datasets do."""

    @property
    def shape(self) -> tuple[int, ...]:
        """Samples and features."""

    def __getitem__(self, key: Any) -> Any:
        """Rows and columns of a slice."""


class UnitRows:
    """One side of a pair of blocks: its features as unit rows, all held or made anew when asked for.

    Attributes
    ----------
    n_features : int
    testable : ndarray of bool, shape (n_features,)
        Features with variance left after the nuisance and without gaps; known once every row was made.
    held : ndarray of shape (n_features, n_samples) or None
        All rows, between ``hold`` and ``release``.
    damping : ndarray of shape (n_features,) or None
        Lengths of the rows in (0, 1]; None stands for 1.

    Raises
    ------
    NumericsError
        When ``damping`` has another size, or values outside (0, 1].
    """

    def __init__(
        self, source: Columns, nuisance: Nuisance, *, ranks: bool, damping: FloatArray | None = None
    ) -> None:
        self._source = source
        self.damping = _check_damping(damping, int(source.shape[1]))
        self._nuisance = nuisance
        self._ranks = ranks
        self.n_features = int(source.shape[1])
        self.testable = np.zeros(self.n_features, dtype=np.bool_)
        self.held: FloatArray | None = None

    @property
    def n_bytes(self) -> int:
        """Memory that all rows take, in bytes."""
        return 8 * self.n_features * self._nuisance.n_samples

    def hold(self) -> None:
        """Make all rows and keep them."""
        if self.held is None:
            held = np.empty((self.n_features, self._nuisance.n_samples))
            for start in range(0, self.n_features, _SLICE):
                stop = min(start + _SLICE, self.n_features)
                self._fill(held[start:stop], start, stop)
            self.held = held

    def release(self) -> None:
        """Forget the rows that were kept."""
        self.held = None

    def rows(self, start: int, stop: int) -> FloatArray:
        """Features from ``start`` to before ``stop`` as unit rows; zeros where nothing can be tested."""
        if self.held is not None:
            return self.held[start:stop]
        made = np.empty((stop - start, self._nuisance.n_samples))
        self._fill(made, start, stop)
        return made

    def _fill(self, out: FloatArray, start: int, stop: int) -> None:
        """Make the rows of some features in their place."""
        block = np.asarray(self._source[:, start:stop])
        self.testable[start:stop] = unit_rows(block, self._nuisance, ranks=self._ranks, out=out)[1]
        if self.damping is not None:
            out *= self.damping[start:stop, None]

    def rows_at(self, index: IndexArray) -> FloatArray:
        """Features at ``index``, repeats allowed, in any order, as unit rows."""
        if self.held is not None:
            return np.take(self.held, index, axis=0)
        features, place = np.unique(index, return_inverse=True)
        wanted = np.empty((features.size, self._nuisance.n_samples))
        for start in range(0, self.n_features, _SLICE):
            first, last = np.searchsorted(features, [start, start + _SLICE])
            if first < last:
                rows = self.rows(start, min(start + _SLICE, self.n_features))
                wanted[first:last] = rows[features[first:last] - start]
        return wanted[place]


def unit_rows(
    block: NDArray[Any], nuisance: Nuisance, *, ranks: bool, out: FloatArray | None = None
) -> tuple[FloatArray, NDArray[np.bool_]]:
    """Rows of length one of a block's features, and which of them can be tested.

    Parameters
    ----------
    block : ndarray of shape (n_samples, n_features)
        A feature with a gap or an infinite value cannot be tested.
    nuisance : Nuisance
        Removed from the features, or from their ranks.
    ranks : bool
        Whether values are replaced by their average ranks first (Spearman).
    out : ndarray of shape (n_features, n_samples), optional
        Where the rows are made.

    Returns
    -------
    rows : ndarray of shape (n_features, n_samples)
        Zero where the feature cannot be tested.
    testable : ndarray of bool, shape (n_features,)
    """
    rows = np.empty(block.T.shape) if out is None else out
    rows[...] = block.T
    testable = _within_reach(rows)
    if ranks:
        rows[...] = rankdata(rows, axis=1)
    whole = _lengths(rows)
    rows -= rows.mean(axis=1, keepdims=True)
    for direction in nuisance.basis.T[1:]:
        rows -= np.einsum("pn,n->p", rows, np.ascontiguousarray(direction))[:, None] * direction
    left = _lengths(rows)
    testable &= left > CONSTANT_TOLERANCE * whole
    rows[~testable] = 0.0
    rows /= np.where(testable, left, 1.0)[:, None]
    return rows, testable


def _within_reach(rows: FloatArray) -> NDArray[np.bool_]:
    """Which rows are finite; the others become zero, and those of extreme units are scaled to a peak of 1."""
    squares = np.einsum("pn,pn->p", rows, rows)
    if (squares < _EXTREME).all() and (squares > 1.0 / _EXTREME).all():
        return np.ones(len(rows), dtype=np.bool_)
    peak = np.abs(rows).max(axis=1)
    finite: NDArray[np.bool_] = np.isfinite(peak)
    rows[~finite] = 0.0
    extreme = finite & (peak > 0.0) & ((peak > _EXTREME) | (peak < 1.0 / _EXTREME))
    rows[extreme] /= peak[extreme, None]
    return finite


def check_side(source: Columns, n: int | None, what: str) -> None:
    """Check that a side is samples x features with ``n`` samples.

    Raises
    ------
    NumericsError
        When its shape is another one.
    """
    shape = tuple(source.shape)
    if len(shape) != 2 or 0 in shape:
        raise NumericsError(f"{what} has shape {shape}; it must be samples x features, at least one of each")
    if n is not None and shape[0] != n:
        raise NumericsError(
            f"{what} has {shape[0]} samples and its partner {n}; give the same samples for both"
        )


def _check_damping(damping: FloatArray | None, n_features: int) -> FloatArray | None:
    if damping is None:
        return None
    damping = np.asarray(damping, dtype=np.float64)
    if damping.shape != (n_features,) or not ((damping > 0.0) & (damping <= 1.0)).all():
        raise NumericsError(
            f"the damping has shape {damping.shape} for {n_features} features and must hold numbers above 0 "
            "and at most 1; give one for each feature"
        )
    return damping


def _lengths(rows: FloatArray) -> FloatArray:
    lengths: FloatArray = np.sqrt(np.einsum("pn,pn->p", rows, rows))
    return lengths
