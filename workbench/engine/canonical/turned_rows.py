"""Rearranged rows, turned out of the directions that were removed from them by the smallest rotation."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

FloatArray = NDArray[np.float64]
IndexArray = NDArray[np.intp]


@dataclass(frozen=True, eq=False)
class TurnedRows:
    """Arrangements ``P`` of rows, each followed by the smallest rotation out of what was removed.

    With ``B`` orthonormal and ``A = PB``, the smallest rotation that takes the span of ``A`` to that of ``B``
    maps ``y = Pu`` (``u`` orthogonal to ``B``, so ``y`` to ``A``) to ``y - (A + B~)(I + A'B~)^(-1) B~'y``,
    ``B~ = BQ'`` with ``Q`` the polar factor of ``A'B``. With nothing removed it is ``P`` itself.

    Attributes
    ----------
    order : ndarray of int, shape (n_arrangements, n_rows)
        Row that comes to each place.
    there, back : ndarray of int, shape (n_rows, n_arrangements)
        The arrangements and their inverses as places in flattened arrays of this shape.
    lift : ndarray of shape (n_arrangements, n_rows, n_removed)
        ``A + B~``.
    drop : ndarray of shape (n_arrangements, n_removed, n_rows)
        ``(I + A'B~)^(-1) B~'P``.

    Examples
    --------
    >>> removed = np.array([[1.0], [1.0], [0.0]]) / np.sqrt(2)
    >>> turned = TurnedRows.of(np.array([[2, 0, 1]]), removed)
    >>> vectors = np.array([[1.0], [-1.0], [2.0]])
    >>> bool(abs(turned.rows(vectors)[0].T @ removed).item() < 1e-12)
    True
    """

    order: IndexArray
    there: IndexArray
    back: IndexArray
    lift: FloatArray
    drop: FloatArray

    @classmethod
    def of(cls, order: IndexArray, removed: FloatArray) -> TurnedRows:
        """Return the turned rows of arrangements (n_arrangements, n_rows) where orthonormal directions were removed."""
        inverse = np.argsort(order, axis=1)
        a = removed[order]
        # A'B = L S R', so that A'B~ = L S L' and B~ = B R L'.
        left, lengths, right = np.linalg.svd(a.transpose(0, 2, 1) @ removed)
        drop = (left / (1.0 + lengths[:, None, :])) @ right @ removed[inverse].transpose(0, 2, 1)
        lift = a + removed @ (left @ right).transpose(0, 2, 1)
        return cls(order, _flat(order), _flat(inverse), lift, drop)

    def rows(self, vectors: FloatArray) -> FloatArray:
        """Return the turned rows of vectors (n_rows, n_columns), shape (n_arrangements, n_rows, n_columns)."""
        moved: FloatArray = vectors[self.order]
        return moved - self.lift @ (self.drop @ vectors) if self.drop.shape[1] else moved

    def kernels(self, vectors: FloatArray) -> FloatArray:
        """``VV'`` of the turned rows ``V`` of vectors, (n_arrangements, n_rows, n_rows)."""
        if not self.drop.shape[1]:
            kernel = vectors @ vectors.T
            rearranged: FloatArray = kernel[self.order[:, :, None], self.order[:, None, :]]
            return rearranged
        moved = self.rows(vectors)
        return moved @ moved.transpose(0, 2, 1)

    def forward(self, columns: FloatArray) -> FloatArray:
        """Turn one vector for each arrangement, (n_rows, n_arrangements)."""
        moved = np.take(columns, self.there)
        if self.drop.shape[1]:
            moved -= np.einsum("anc,ca->na", self.lift, np.einsum("acn,na->ca", self.drop, columns))
        return moved

    def backward(self, columns: FloatArray) -> FloatArray:
        """Apply the transposes of what :meth:`forward` does."""
        moved = np.take(columns, self.back)
        if self.drop.shape[1]:
            moved -= np.einsum("acn,ca->na", self.drop, np.einsum("anc,na->ca", self.lift, columns))
        return moved


def _flat(order: IndexArray) -> IndexArray:
    return np.ascontiguousarray(order.T * len(order) + np.arange(len(order)))
