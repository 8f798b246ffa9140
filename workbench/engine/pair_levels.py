"""Two sides in sample space at every ridge of the path, with the earlier canonical pairs taken out."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
import scipy.linalg
from numpy.typing import NDArray

from workbench.engine.arrangements import Exchange
from workbench.engine.canonical import RIDGE_PATH
from workbench.engine.linear import RANK_TOLERANCE, ThinBasis, thin_basis
from workbench.engine.pair_rows import ExchangeableRows, residual_basis

FloatArray = NDArray[np.float64]
IndexArray = NDArray[np.intp]

BATCH_NUMBERS = 2**19
LARGEST_SQUARE = 1.0 - np.finfo(float).eps


@dataclass(frozen=True, eq=False)
class PairLevel:
    """Both sides at each ridge, as they stand before the next pair; the side of higher rank is rearranged.

    What an arrangement needs is ``U_x' U_y`` of rearranged rows: nothing of the features' size.

    Attributes
    ----------
    moved, still : tuple of ThinBasis
        One for each ridge (the first level's are all the same).
    ridges : ndarray of shape (9, 2)
        Absolute penalties on the kernels of the moved and of the still side; fixed at the first pair.
    carried : tuple of ndarray, each of shape (n_rows, n_carried)
        Directions to be taken out of rearranged rows, for each ridge.
    exchange : Exchange
        Arrangements of the rows.
    freedom : int
        Dimensions that nuisance and earlier pairs leave.
    """

    moved: tuple[ThinBasis, ...]
    still: tuple[ThinBasis, ...]
    ridges: FloatArray
    carried: tuple[FloatArray, ...]
    exchange: Exchange
    freedom: int

    @classmethod
    def first(cls, rows: ExchangeableRows) -> PairLevel:
        """Level of the first pair of two sides."""
        still, moved = sorted(map(thin_basis, rows.sides), key=lambda basis: basis.rank)
        path = RIDGE_PATH.size
        ridges = np.outer(RIDGE_PATH, [moved.noise_level, still.noise_level])
        return cls(
            (moved,) * path, (still,) * path, ridges, (rows.carried,) * path, rows.exchange, rows.freedom
        )

    @property
    def rank(self) -> int:
        """Canonical pairs that can be told apart at all."""
        return min(basis.rank for basis in (*self.moved, *self.still))

    @property
    def batch(self) -> int:
        """Arrangements whose matrices fit a processor's cache, from 1 to 100."""
        return int(np.clip(BATCH_NUMBERS // self.moved[0].rank ** 2, 1, 100))

    def statistics_of(self, arrangements: IndexArray) -> FloatArray:
        """Both statistics at every ridge, shape (n_arrangements, 18): Wilks-type ones first."""
        wilks, roots = np.empty((2, len(arrangements), RIDGE_PATH.size))
        meetings = None
        for k, (moved, still) in enumerate(zip(self.moved, self.still, strict=True)):
            if meetings is None or moved is not self.moved[k - 1]:
                meetings = _meetings(moved.vectors, still.vectors, arrangements, self.carried[k])
            g_moved, g_still = (
                basis.shrinkage(ridge) for basis, ridge in zip((moved, still), self.ridges[k], strict=True)
            )
            m = g_moved[:, None] * meetings * g_still
            squares = np.linalg.eigvalsh(m.transpose(0, 2, 1) @ m).clip(0.0, LARGEST_SQUARE)
            wilks[:, k] = -np.log1p(-squares).sum(axis=1)
            roots[:, k] = squares[:, -1]
        return np.hstack([wilks, roots])

    def without(self, pairs: int) -> PairLevel | None:
        """Return the level behind the first ``pairs`` pairs: their variates ``u`` and ``v`` removed from both sides.

        Rows that may take any place are turned into an orthonormal basis of what is left, bases of neighbouring
        ridges as near to each other as can be; others stay, and carry the variates. None where nothing is left.
        """
        found = [self._removed(k, pairs) for k in range(RIDGE_PATH.size)]
        if any(one is None for one in found):
            return None
        removed, moved, still = zip(*(one for one in found if one is not None), strict=True)
        freedom = self.freedom - removed[0].shape[1] + self.carried[0].shape[1]
        if len(self.exchange.classes) > 1 or self.exchange.classes[0].shape[1] > 1:
            return PairLevel(moved, still, self.ridges, removed, self.exchange, freedom)
        turned = _near_bases(removed, self.exchange.size, freedom)
        moved, still = (
            tuple(_turned(basis, left) for basis, left in zip(side, turned, strict=True))
            for side in (moved, still)
        )
        nothing = np.empty((freedom, 0))
        return PairLevel(
            moved, still, self.ridges, (nothing,) * len(turned), Exchange.of_rows(freedom), freedom
        )

    def _removed(self, k: int, pairs: int) -> tuple[FloatArray, ThinBasis, ThinBasis] | None:
        """Return what is removed at one ridge, and both sides without it."""
        moved, still = self.moved[k], self.still[k]
        g_moved, g_still = moved.shrinkage(self.ridges[k, 0]), still.shrinkage(self.ridges[k, 1])
        left, _, right = scipy.linalg.svd(g_moved[:, None] * (moved.vectors.T @ still.vectors) * g_still)
        u = moved.vectors @ (g_moved[:, None] * left[:, :pairs])
        v = still.vectors @ (g_still[:, None] * right[:pairs].T)
        removed = _orthonormal([self.carried[k], u, v])
        bases = (_without(moved, removed), _without(still, removed))
        return None if bases[0] is None or bases[1] is None else (removed, bases[0], bases[1])


def carried_back(
    moved: FloatArray, removed: FloatArray, arrangements: IndexArray
) -> tuple[FloatArray, FloatArray]:
    """Parts ``A`` and ``F`` by which rearranged rows are turned out of the removed directions again.

    With ``B`` orthonormal and ``A = PB``, the smallest rotation that takes the span of ``A`` to that of ``B``
    maps ``y = P u`` (``u`` orthogonal to ``B``, so ``y`` to ``A``) to ``y - (A + B~)(I + A'B~)^(-1) B~'y``,
    ``B~ = BQ'`` with ``Q`` the polar factor of ``A'B``. Seen from vectors orthogonal to ``B`` only ``A`` counts:
    ``x'Ry = x'y - (x'A) F``.

    Parameters
    ----------
    moved : ndarray of shape (n_rows, rank)
        Orthogonal to ``removed``.
    removed : ndarray of shape (n_rows, n_carried)
        ``B``.
    arrangements : ndarray of int, shape (n_arrangements, n_rows)

    Returns
    -------
    tuple of ndarray
        ``A`` of shape (n_arrangements, n_rows, n_carried) and ``F`` of shape (n_arrangements, n_carried, rank).
    """
    a = removed[arrangements]
    overlap = a.transpose(0, 2, 1) @ removed
    left, lengths, right = np.linalg.svd(overlap)
    # A'B = L S R', so that A'B~ = L S L' and B~ = B R L'.
    inverse = (left / (1.0 + lengths[:, None, :])) @ right
    met = removed.T @ moved[arrangements]
    return a, inverse @ met


def _meetings(
    moved: FloatArray, still: FloatArray, arrangements: IndexArray, removed: FloatArray
) -> FloatArray:
    """``U' P' U`` of rearranged rows, shape (n_arrangements, rank_moved, rank_still)."""
    meetings: FloatArray = moved[arrangements].transpose(0, 2, 1) @ still
    if removed.shape[1]:
        a, f = carried_back(moved, removed, arrangements)
        meetings = meetings - f.transpose(0, 2, 1) @ (a.transpose(0, 2, 1) @ still)
    return meetings


def _orthonormal(columns: Sequence[FloatArray]) -> FloatArray:
    """Orthonormal basis of the span of columns, each scaled to length one first."""
    every = np.hstack(columns)
    basis: FloatArray = np.linalg.qr(every / np.linalg.norm(every, axis=0))[0]
    return basis


def _without(basis: ThinBasis, removed: FloatArray) -> ThinBasis | None:
    """Decomposition of a block with directions removed; None where nothing is left."""
    left = basis.vectors * basis.lengths
    left = left - removed @ (removed.T @ left)
    vectors, lengths, _ = scipy.linalg.svd(left, full_matrices=False, check_finite=False)
    rank = int(np.count_nonzero(lengths**2 > RANK_TOLERANCE * basis.lengths[0] ** 2))
    return ThinBasis(vectors[:, :rank], lengths[:rank], basis.n_features) if rank else None


def _turned(basis: ThinBasis, left: FloatArray) -> ThinBasis:
    return ThinBasis(left.T @ basis.vectors, basis.lengths, basis.n_features)


def _near_bases(removed: Sequence[FloatArray], size: int, freedom: int) -> list[FloatArray]:
    """Orthonormal bases of what each ridge leaves, each turned as near to the first as its span allows."""
    constant = np.full((size, 1), 1.0 / np.sqrt(size))
    bases: list[FloatArray] = []
    for columns in removed:
        spanned = columns if size == freedom + columns.shape[1] else np.hstack([constant, columns])
        left = residual_basis(spanned)
        if bases:
            turn, _, back = scipy.linalg.svd(left.T @ bases[0])
            left = left @ (turn @ back)
        bases.append(left)
    return bases
