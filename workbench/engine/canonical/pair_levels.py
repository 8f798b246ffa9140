"""Two sides in sample space, with the earlier canonical pairs taken out, and the statistics of arrangements."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from functools import partial

import numpy as np
from numpy.typing import NDArray

from workbench.engine.arrangements import Exchange
from workbench.engine.canonical.pair_rows import ExchangeableRows, residual_basis
from workbench.engine.canonical.pair_statistics import TEST_PATH, largest_roots, wilks_statistics
from workbench.engine.canonical.turned_rows import TurnedRows
from workbench.engine.linear import RANK_TOLERANCE, ThinBasis, thin_basis, thin_svd

FloatArray = NDArray[np.float64]
IndexArray = NDArray[np.intp]

REMOVAL_RIDGE = 0.1
BATCH_NUMBERS = 2**20
NARROW = 24
LARGEST_SQUARE = 1.0 - np.finfo(float).eps


@dataclass(frozen=True, eq=False)
class PairLevel:
    """Both sides as they stand before the next pair; the side of higher rank is rearranged.

    What an arrangement needs is of the samples' size, never of the features'.

    Attributes
    ----------
    moved, still : ThinBasis
        The side whose rows are rearranged, and the other.
    noise_levels : pair of float
        Units of the ridges of both, fixed at the first pair.
    carried : ndarray of shape (n_rows, n_carried)
        Directions to be taken out of rearranged rows.
    exchange : Exchange
        Arrangements of the rows.
    freedom : int
        Dimensions that nuisance and earlier pairs leave.
    """

    moved: ThinBasis
    still: ThinBasis
    noise_levels: tuple[float, float]
    carried: FloatArray
    exchange: Exchange
    freedom: int

    @classmethod
    def first(cls, rows: ExchangeableRows) -> PairLevel:
        """Level of the first pair of two sides."""
        still, moved = sorted(map(thin_basis, rows.sides), key=lambda basis: basis.rank)
        levels = (moved.noise_level, still.noise_level)
        return cls(moved, still, levels, rows.carried, rows.exchange, rows.freedom)

    @property
    def path(self) -> FloatArray:
        """Ridges of the test, in multiples of each side's noise level."""
        return TEST_PATH

    @property
    def rank(self) -> int:
        """Canonical pairs that can be told apart at all."""
        return min(self.moved.rank, self.still.rank)

    @property
    def batch(self) -> int:
        """Arrangements at a time, so many that their matrices take some megabytes, from 1 to 100."""
        return int(np.clip(BATCH_NUMBERS // self.moved.rank**2, 1, 100))

    def statistics_of(self, arrangements: IndexArray) -> FloatArray:
        """Both statistics at every ridge, shape (n_arrangements, 10): Wilks-type ones first.

        From the singular values of ``M`` where the still side has few directions, else by
        :mod:`workbench.engine.canonical.pair_statistics`.
        """
        turned = TurnedRows.of(arrangements, self.carried)
        if self.still.rank <= NARROW:
            return self._narrow(turned)
        blocks, still = (self.moved, self.still), _weighted(self.still, self.noise_levels[1])
        kernels = turned.kernels(_weighted(self.moved, self.noise_levels[0]))
        kernels += still @ still.T
        return np.hstack([wilks_statistics(kernels, blocks, self.noise_levels), self._roots(turned)])

    def _narrow(self, turned: TurnedRows) -> FloatArray:
        meetings = turned.rows(self.moved.vectors).transpose(0, 2, 1) @ self.still.vectors
        wilks, roots = np.empty((2, len(meetings), TEST_PATH.size))
        for k, multiple in enumerate(TEST_PATH.tolist()):
            g_moved, g_still = self._shrinkages(multiple)
            m = g_moved[:, None] * meetings * g_still
            squares = np.linalg.eigvalsh(m.transpose(0, 2, 1) @ m).clip(0.0, LARGEST_SQUARE)
            wilks[:, k] = -np.log1p(-squares).sum(axis=1)
            roots[:, k] = squares[:, -1]
        return np.hstack([wilks, roots])

    def _roots(self, turned: TurnedRows) -> FloatArray:
        """Largest eigenvalue of ``M'M = G'P'SPG`` at every ridge, ``S`` the moved side's smoother ``K(K + l)^(-1)``."""
        roots = np.empty((len(turned.order), TEST_PATH.size))
        for k, multiple in enumerate(TEST_PATH.tolist()):
            g_moved, g_still = self._shrinkages(multiple)
            still = self.still.vectors * g_still
            smoother = (self.moved.vectors * g_moved**2) @ self.moved.vectors.T
            squared = partial(_squared, turned, still, smoother)
            roots[:, k] = largest_roots(squared, still.shape[1], len(roots))
        return roots

    def without(self, pairs: int) -> PairLevel | None:
        """Return the level behind the first ``pairs`` pairs: their variates ``u`` and ``v`` removed from both sides.

        The variates are those at a tenth of the noise level, for all ridges of the test. At ten times the noise
        level and more a variate leans towards strong private variation, so that part of the shared variation is
        left in both sides: removing at the ridge of the test found a false third pair in 16 to 30 % of studies
        (60 samples, two strong shared and two private factors), this in 5 %.

        Rows that may take any place are turned into an orthonormal basis of what is left; others stay, and carry
        the variates. None where nothing is left.
        """
        removed = self._variates(pairs)
        moved, still = _without(self.moved, removed), _without(self.still, removed)
        if moved is None or still is None:
            return None
        freedom = self.freedom - removed.shape[1] + self.carried.shape[1]
        if not self.exchange.free:
            return PairLevel(moved, still, self.noise_levels, removed, self.exchange, freedom)
        if self.exchange.size > self.freedom:
            constant = np.full((self.exchange.size, 1), 1.0 / np.sqrt(self.exchange.size))
            removed = np.hstack([constant, removed])
        left = residual_basis(removed)
        moved, still = (
            ThinBasis(left.T @ one.vectors, one.lengths, one.n_features) for one in (moved, still)
        )
        nothing = np.empty((freedom, 0))
        return PairLevel(moved, still, self.noise_levels, nothing, Exchange.of_rows(freedom), freedom)

    def _shrinkages(self, multiple: float) -> tuple[FloatArray, FloatArray]:
        moved, still = self.noise_levels
        return self.moved.shrinkage(multiple * moved), self.still.shrinkage(multiple * still)

    def _variates(self, pairs: int) -> FloatArray:
        """Return an orthonormal basis of what is carried already and of the leading pairs' variates."""
        g_moved, g_still = self._shrinkages(REMOVAL_RIDGE)
        left, _, right = thin_svd(g_moved[:, None] * (self.moved.vectors.T @ self.still.vectors) * g_still)
        u = self.moved.vectors @ (g_moved[:, None] * left[:, :pairs])
        v = self.still.vectors @ (g_still[:, None] * right[:pairs].T)
        return orthonormal([self.carried, u, v])


def orthonormal(columns: Sequence[FloatArray]) -> FloatArray:
    """Orthonormal basis of the span of columns, each scaled to length one first."""
    every = np.hstack(columns)
    basis: FloatArray = np.linalg.qr(every / np.linalg.norm(every, axis=0))[0]
    return basis


def _squared(turned: TurnedRows, still: FloatArray, smoother: FloatArray, columns: FloatArray) -> FloatArray:
    product: FloatArray = still.T @ turned.forward(smoother @ turned.backward(still @ columns))
    return product


def _weighted(basis: ThinBasis, noise_level: float) -> FloatArray:
    """``W`` with ``WW'`` the kernel in units of the noise level."""
    weighted: FloatArray = basis.vectors * (basis.lengths / np.sqrt(noise_level))
    return weighted


def _without(basis: ThinBasis, removed: FloatArray) -> ThinBasis | None:
    """Decomposition of a block with directions removed; None where nothing is left."""
    left = basis.vectors * basis.lengths
    left = left - removed @ (removed.T @ left)
    vectors, lengths, _ = thin_svd(left)
    rank = int(np.count_nonzero(lengths**2 > RANK_TOLERANCE * basis.lengths[0] ** 2))
    return ThinBasis(vectors[:, :rank], lengths[:rank], basis.n_features) if rank else None
