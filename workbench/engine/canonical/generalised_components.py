"""Generalised canonical components of several blocks from their thin decompositions.

MAXVAR (Carroll 1968; Kettenring 1971) with the ridge inside the block's own variance: with
``A_b = U_b D_b (D_b^2 + l_b)^(-1/2)``, the leading eigenvectors ``w`` of the matrix ``R`` that has the blocks
``A_b'A_c`` for ``b != c`` and the identity on its diagonal. A block's variate is ``u_b = sqrt(B) A_b w_b``, the
component the mean of the variates. Two blocks give the eigenvalues ``1 + s_k`` of ridge canonical correlation and
its variates, at every ridge; ``D^2 / (D^2 + l)`` on the diagonal instead would make private variation win.

A sample that a block lacks has zero rows there, and counts by ``(sum_b J_b)^(-1/2)`` on both sides of each product,
``J_b`` indicating the samples of block ``b`` (van de Velden & Bijmolt 2006): ``A_b'A_c`` becomes ``A_b'W A_c`` with
``W = B (sum_b J_b)^(-1)``. The identity, which stands for ``A_b'A_b`` and what the ridge took of it, becomes
``I + A_b'(W - I)A_b``: left as it is, the components of a small ridge shun the samples that a block lacks (they found
0.92 of a shared subspace where leaving those samples out altogether found 0.94; this finds 0.95). A sample of a single
block counts once.

References
----------
Carroll 1968, Proceedings of the 76th APA Convention 3:227. Kettenring 1971, Biometrika 58:433. van de Velden &
Bijmolt 2006, Psychometrika 71:323.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
import scipy.linalg
from numpy.typing import NDArray

from workbench.engine.canonical.canonical import ROOT_TOLERANCE, duals
from workbench.engine.linear import ThinBasis
from workbench.errors import NumericsError

FloatArray = NDArray[np.float64]
IndexArray = NDArray[np.intp]


@dataclass(frozen=True, eq=False)
class PlacedBasis:
    """A block's decomposition and the samples, of ``n`` in all, that its rows are."""

    basis: ThinBasis
    rows: IndexArray
    n: int

    def placed(self, values: FloatArray) -> FloatArray:
        """Rows of all samples, zero where the block lacks one."""
        every = np.zeros((self.n, values.shape[1]))
        every[self.rows] = values
        return every


@dataclass(frozen=True, eq=False)
class GeneralisedComponents:
    """Components, strongest first; signs are those of the decomposition.

    Attributes
    ----------
    roots : ndarray of shape (n_components,)
        Eigenvalues of ``R``, at most the number of blocks; 1 where nothing is shared and no sample lacks.
    variates : tuple of ndarray, each of shape (n_samples, n_components)
        Of each block; NaN for a sample that it lacks.
    duals : tuple of ndarray, each of shape (n_rows_of_block, n_components)
        Weights in sample space: a block's weights are ``X' duals``.
    """

    roots: FloatArray
    variates: tuple[FloatArray, ...]
    duals: tuple[FloatArray, ...]

    @property
    def scores(self) -> FloatArray:
        """Mean over the blocks that have the sample, shape (n_samples, n_components)."""
        return mean_over(self.variates)


def generalised_components(
    blocks: Sequence[PlacedBasis], ridges: Sequence[float], n_components: int
) -> GeneralisedComponents:
    """Leading components of several blocks.

    Parameters
    ----------
    blocks : sequence of PlacedBasis
        Nuisance removed. A single block has its principal components for components.
    ridges : sequence of float
        Absolute penalty of each block's kernel, at least 0.
    n_components : int
        Components wanted, at least 1.

    Raises
    ------
    NumericsError
        When the data support fewer.

    Examples
    --------
    >>> from workbench.engine.linear import thin_basis
    >>> line = np.array([[-1.0], [0.0], [1.0]])
    >>> blocks = [PlacedBasis(thin_basis(sign * line), np.arange(3), 3) for sign in (1, -2, 3)]
    >>> generalised_components(blocks, [0.0] * 3, 1).roots.round(12)
    array([3.])
    """
    shrunk = [block.basis.shrinkage(ridge) for block, ridge in zip(blocks, ridges, strict=True)]
    parts = [b.placed(b.basis.vectors * g) for b, g in zip(blocks, shrunk, strict=True)]
    roots, vectors = _leading(parts, presence(blocks), min(n_components, sum(map(len, shrunk))))
    _require_support(n_components, roots, blocks)
    ends = np.cumsum([part.shape[1] for part in parts])
    scale = np.sqrt(len(blocks))
    directions = [scale * one for one in np.split(vectors, ends[:-1])]
    variates = []
    for block, g, w in zip(blocks, shrunk, directions, strict=True):
        every = np.full((block.n, n_components), np.nan)
        every[block.rows] = block.basis.vectors @ (g[:, None] * w)
        variates.append(every)
    found = [duals(b.basis, ridge, w) for b, ridge, w in zip(blocks, ridges, directions, strict=True)]
    return GeneralisedComponents(roots, tuple(variates), tuple(found))


def presence(blocks: Sequence[PlacedBasis]) -> FloatArray:
    """How many blocks have each sample (at least 1, so that nothing is divided by 0), shape (n_samples,)."""
    counts = np.zeros(blocks[0].n)
    for block in blocks:
        counts[block.rows] += 1.0
    return np.maximum(counts, 1.0)


def mean_over(variates: Sequence[FloatArray]) -> FloatArray:
    """Mean of arrays of one shape over those that have a value; NaN where none has."""
    stack = np.stack(variates)
    counts = np.isfinite(stack).sum(axis=0)
    sums = np.nansum(stack, axis=0)
    mean: FloatArray = np.divide(sums, counts, out=np.full(sums.shape, np.nan), where=counts > 0)
    return mean


def _leading(parts: Sequence[FloatArray], counts: FloatArray, wanted: int) -> tuple[FloatArray, FloatArray]:
    """Leading eigenvalues and eigenvectors of ``R``; of blocks' own lengths where a single one is given."""
    weights = np.where(counts > 1.0, len(parts) / counts, 1.0)
    together = np.hstack([np.sqrt(weights)[:, None] * part for part in parts])
    r = together.T @ together
    if len(parts) > 1:
        start = 0
        for part in parts:
            inside = slice(start, start + part.shape[1])
            r[inside, inside] = np.eye(part.shape[1]) + ((weights - 1.0)[:, None] * part).T @ part
            start += part.shape[1]
    size = r.shape[0]
    roots, vectors = scipy.linalg.eigh(r, subset_by_index=[size - wanted, size - 1], check_finite=False)
    if len(parts) == 1:
        vectors = np.eye(size, wanted)[:, ::-1]
    return roots[::-1], vectors[:, ::-1]


def _require_support(asked: int, roots: FloatArray, blocks: Sequence[PlacedBasis]) -> None:
    least = 1.0 + ROOT_TOLERANCE if len(blocks) > 1 else 0.0
    supported = min(int(np.count_nonzero(roots > least)), asked)
    if supported < asked:
        ranks = ", ".join(str(block.basis.rank) for block in blocks)
        raise NumericsError(
            f"asked for {asked} components, the data support {supported}, because the blocks have rank {ranks} and "
            "no further directions of two of them are correlated; "
            + (
                f"ask for at most {supported}"
                if supported
                else "there is nothing to find between these blocks"
            )
        )
