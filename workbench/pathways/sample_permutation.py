"""The sample-permutation p of over-representation: what correlated features do by chance, it does too."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy import sparse

FloatArray = NDArray[np.float64]
IndexArray = NDArray[np.intp]

CHUNK_CELLS = 8_000_000
"""Correlations held at a time (single precision)."""

TIES = 1e-9


@dataclass(frozen=True, eq=False)
class PermutedCounts:
    """Counts of each set among the most associated features, and what permutations say of them.

    Attributes
    ----------
    counts : ndarray of int
        Members of each set among the features most associated with the score.
    p, p_mid : ndarray
        ``(1 + permutations with at least that count) / (1 + permutations)``, and with ties counted half.
    permutations : int
    """

    counts: IndexArray
    p: FloatArray
    p_mid: FloatArray
    permutations: int


def residual_space(basis: FloatArray) -> FloatArray:
    """Return an orthonormal basis (n, n - c) of what a design leaves over: rows of it may be permuted.

    Parameters
    ----------
    basis : ndarray of shape (n, c)
        Orthonormal columns of the design, the intercept among them.

    References
    ----------
    Huh MH, Jhun M (2001). Random permutation testing in multiple linear regression. Commun Stat Theory Methods
    30:2023.
    """
    whole, _ = np.linalg.qr(basis, mode="complete")
    space: FloatArray = whole[:, basis.shape[1] :]
    return space


def unit_columns(x: FloatArray) -> FloatArray:
    """Return columns of length one; a column without variation stays zero."""
    length = np.linalg.norm(x, axis=0)
    scaled: FloatArray = x / np.where(length > 0.0, length, 1.0)
    return scaled


def community_score(x: FloatArray) -> FloatArray:
    """Return the leading direction of some features over the rows: their common course, of unit length.

    Parameters
    ----------
    x : ndarray of shape (rows, features)
        Columns of unit length.
    """
    values, vectors = np.linalg.eigh(x @ x.T)
    score: FloatArray = vectors[:, int(np.argmax(values))]
    return score


def permuted_counts(
    score: FloatArray,
    x: FloatArray,
    members: sparse.csr_array,
    drawn: int,
    *,
    permutations: int,
    seed: np.random.SeedSequence,
) -> PermutedCounts:
    """Return how often permuted samples put as many members of a set among the most associated features.

    The ``drawn`` features of ``x`` with the largest ``|correlation|`` with the score are taken, and the members of
    each set counted among them; then again with the score's rows permuted. Features that go together come together
    in both, so that the p holds for correlated features, where drawing them one by one does not.

    Parameters
    ----------
    score : ndarray of shape (d,)
        Course of a community in the other layers, in the residual space of the design.
    x : ndarray of shape (d, p)
        Features of the layer in the same space, columns of unit length.
    members : sparse array of shape (p, sets)
    drawn : int
        Features of the community in this layer.
    permutations : int
    seed : SeedSequence
    """
    random = np.random.default_rng(seed)
    x32 = np.asarray(x, dtype=np.float32)
    held = sparse.csr_array(members).astype(np.int32)
    observed = _counts(score[None], x32, held, drawn)[0]
    above, level = np.zeros((2, observed.size), dtype=np.int64)
    chunk = max(1, min(permutations, CHUNK_CELLS // max(x.shape[1], 1)))
    for start in range(0, permutations, chunk):
        rows = min(chunk, permutations - start)
        order = np.argsort(random.random((rows, score.size)), axis=1)
        counts = _counts(score[order], x32, held, drawn)
        above += (counts > observed).sum(axis=0)
        level += (counts == observed).sum(axis=0)
    p = (1.0 + above + level) / (1.0 + permutations)
    p_mid = (0.5 + above + 0.5 * level) / (1.0 + permutations)
    return PermutedCounts(observed.astype(np.intp), p, p_mid, permutations)


def _counts(scores: FloatArray, x: NDArray[np.float32], members: sparse.csr_array, drawn: int) -> IndexArray:
    """Return for each score the members of each set among the ``drawn`` features most associated with it."""
    strength = np.abs(scores.astype(np.float32) @ x)
    top = np.argpartition(-strength, drawn - 1, axis=1)[:, :drawn] if drawn < x.shape[1] else None
    if top is None:
        return np.tile(np.asarray(members.sum(axis=0)).ravel(), (len(scores), 1)).astype(np.intp)
    place = (np.ones(top.size, dtype=np.int32), top.ravel(), np.arange(0, top.size + 1, drawn))
    chosen = sparse.csr_array(place, shape=(len(scores), x.shape[1]))
    return np.asarray((chosen @ members).todense(), dtype=np.intp)
