"""What a screen found, between looking and reporting."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from workbench.engine.multiple import Family
from workbench.engine.pairs.tail_counts import Tails
from workbench.engine.pairs.tiles import PairTiles, refine
from workbench.engine.pairs.unit_rows import FloatArray, IndexArray

#: Correlations that agree to so many decimals count as equally strong.
TIE_DECIMALS = 12


@dataclass(frozen=True)
class Request:
    """What makes a pair an edge, and how many edges are wanted at most."""

    fdr: float
    minimum_r: float
    maximum_edges: int | None

    @property
    def floor_r(self) -> float:
        """Size that a correlation must reach: ``minimum_r`` but for rounding."""
        return self.minimum_r - 10.0**-TIE_DECIMALS


@dataclass(frozen=True, eq=False)
class Found:
    """Candidates of one pair of blocks, refined; largest |r| first, ties by first and second feature.

    Attributes
    ----------
    keys : ndarray of int
        ``i q + j``.
    r, log_p : ndarray
        Correlations in double precision and their log p.
    """

    keys: IndexArray
    r: FloatArray
    log_p: FloatArray


@dataclass(frozen=True, eq=False)
class Discovery:
    """Candidates of every pair of blocks and the families that judge them.

    Attributes
    ----------
    found : list of Found
    pooled : Family
        All pairs of the screen.
    single : list of Family
        The pairs of each pair of blocks.
    passed : int or None
        Number of edges where ``found`` holds only the strongest; None where it holds all.
    tails : list of Tails or None
        Histograms of |r| of each pair of blocks, where they were needed.
    """

    found: list[Found]
    pooled: Family
    single: list[Family]
    passed: int | None = None
    tails: list[Tails] | None = None


def focus(pairs: Sequence[PairTiles], k: int) -> PairTiles:
    """Hold the rows of the ``k``-th pair of blocks, and those of no other; give it back."""
    for other in pairs:
        if other is not pairs[k]:
            other.release()
    pairs[k].hold()
    return pairs[k]


def strengths(r: FloatArray) -> FloatArray:
    """|r| to ``TIE_DECIMALS``: what orders edges, so that rounding decides nothing between equal ones."""
    return np.asarray(np.round(np.abs(r), TIE_DECIMALS), dtype=np.float64)


def found_from(pair: PairTiles, keys: IndexArray) -> Found:
    """Refine candidates and bring them into order."""
    r = refine(pair, keys)
    strength = -strengths(r)
    order = np.argsort(strength)
    if (np.diff(strength[order]) == 0.0).any():
        order = np.lexsort((keys, strength))
    r = r[order]
    return Found(keys[order], r, pair.log_p(r))
