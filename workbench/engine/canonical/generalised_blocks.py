"""Several blocks over the same samples, some of which a block may lack, standardised each on its own samples."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from workbench.engine.canonical.generalised_components import PlacedBasis
from workbench.engine.linear import thin_basis
from workbench.engine.sides import StandardSide, standard_side
from workbench.errors import NumericsError

FloatArray = NDArray[np.float64]
IndexArray = NDArray[np.intp]


@dataclass(frozen=True, eq=False)
class StandardBlock:
    """A block standardised on the samples that it has, and its decomposition.

    Attributes
    ----------
    side : StandardSide
        Values (n_held, n_varying), and what standardising subtracts and divides by.
    placed : PlacedBasis
    """

    side: StandardSide
    placed: PlacedBasis


def held_rows(block: FloatArray, name: str) -> IndexArray:
    """Return the samples that a block has; those that it lacks are rows without any value.

    Raises
    ------
    NumericsError
        When a row has some values and lacks others, a value is infinite, or fewer than two rows are left.

    Examples
    --------
    >>> held_rows(np.array([[1.0, 2.0], [np.nan, np.nan], [3.0, 1.0]]), "b")
    array([0, 2])
    """
    missing = np.isnan(block)
    lacks = np.asarray(missing.all(axis=1))
    gaps = np.asarray(missing.any(axis=1) & ~lacks)
    if gaps.any() or np.isinf(block).any():
        places = np.argwhere((missing & gaps[:, None]) | np.isinf(block))
        row, column = places[0]
        raise NumericsError(
            f"block {name} has {len(places)} missing or infinite values (NaN or inf) in samples that it has, the "
            f"first in row {row}, column {column} (from 0); fill the gaps first, or leave the row out as a whole"
        )
    rows = np.flatnonzero(~lacks)
    if rows.size < 2:
        raise NumericsError(
            f"block {name} has {rows.size} sample(s); at least 2 are needed, leave the block out"
        )
    return rows


def standard_blocks(
    blocks: Sequence[FloatArray], sizes: Sequence[Sequence[int] | None], rank: int
) -> list[StandardBlock]:
    """Standardise each block on its own samples and decompose it.

    Parameters
    ----------
    blocks : sequence of ndarray of shape (n_samples, p_b)
        Rows of NaN for a sample that the block lacks.
    sizes : sequence of (sequence of int or None)
        Features of each part of a block of several parts (several tables of one layer).
    rank : int
        Dimensions of the nuisance removed beforehand, the intercept counted.
    """
    found = []
    for k, (block, parts) in enumerate(zip(blocks, sizes, strict=True)):
        rows = held_rows(block, str(k + 1))
        side = standard_side(block[rows], parts, rank, f"block {k + 1}")
        found.append(StandardBlock(side, PlacedBasis(thin_basis(side.values), rows, block.shape[0])))
    return found
