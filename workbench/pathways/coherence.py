"""Coherence: whether the two ends of edges share a set more often than chance would have it."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from workbench.pathways.rewiring import rewired

FloatArray = NDArray[np.float64]
IndexArray = NDArray[np.intp]
Progress = Callable[[int, int], None]

PERMUTATIONS = 999
PAIR_BUDGET = 1_200_000_000
"""Correlations that all permutations of two blocks may take together; fewer permutations for larger blocks."""

FEWEST_PERMUTATIONS = 39


@dataclass(frozen=True)
class Coherence:
    """Edges of two blocks with both ends in a set, and how many of them share one.

    ``expected`` and ``p`` are those of the null named first in the field; None (and a reason) where it was not had.

    Attributes
    ----------
    blocks : tuple of str
    edges : int
        Edges whose two ends are each in at least one set.
    sharing : int
        Those whose ends share one.
    expected_rewired, p_rewired : float or None
        Edges rewired at random, every feature keeping its number of edges.
    strongest_sharing : int or None
        Sharing pairs among as many strongest pairs of features that are in sets.
    expected_permuted, p_permuted : float or None
        The same with the samples of one block permuted.
    permutations : int
    reason : str
        Why a p is withheld; empty where none is.
    """

    blocks: tuple[str, str]
    edges: int
    sharing: int
    expected_rewired: float | None
    p_rewired: float | None
    strongest_sharing: int | None
    expected_permuted: float | None
    p_permuted: float | None
    permutations: int
    reason: str


def rewiring_p(
    pairs: IndexArray, share: NDArray[np.bool_], *, samples: int = PERMUTATIONS, seed: np.random.SeedSequence
) -> tuple[int, float, float]:
    """Return the edges that share a set, how many do on average once rewired, and the p.

    Parameters
    ----------
    pairs : ndarray of shape (edges, 2)
        Rows and columns of ``share``, each edge once.
    share : ndarray of bool, shape (p_x, p_y)
        Whether two features share a set.
    """
    observed = int(share[pairs[:, 0], pairs[:, 1]].sum())
    counts = [
        int(share[found[:, 0], found[:, 1]].sum()) for found in rewired(pairs, samples=samples, seed=seed)
    ]
    above = sum(count >= observed for count in counts)
    return observed, float(np.mean(counts)) if counts else float("nan"), (1 + above) / (1 + len(counts))


def permutation_p(
    x: FloatArray,
    y: FloatArray,
    edges: int,
    share: NDArray[np.bool_],
    *,
    permutations: int,
    seed: np.random.SeedSequence,
    progress: Progress | None = None,
) -> tuple[int, float, float]:
    """Return the sharing pairs among the strongest, their mean once samples are permuted, and the p.

    Parameters
    ----------
    x, y : ndarray of shape (d, p_x) and (d, p_y)
        Features that are in a set, in the residual space of the design, columns of unit length.
    edges : int
        Pairs to take: as many as edges were found among these features.
    share : ndarray of bool, shape (p_x, p_y)
    permutations : int
    seed : SeedSequence
    """
    random = np.random.default_rng(seed)
    x32, y32, flat = x.astype(np.float32), y.astype(np.float32), share.ravel()
    observed = _sharing(x32, y32, edges, flat)
    counts = []
    for number in range(permutations):
        counts.append(_sharing(x32[random.permutation(len(x32))], y32, edges, flat))
        if progress is not None:
            progress(number + 1, permutations)
    above = sum(count >= observed for count in counts)
    return observed, float(np.mean(counts)), (1 + above) / (1 + permutations)


def permutations_allowed(pairs: int) -> int:
    """Return how many permutations of so many pairs are done; 0 where they would be too few to tell anything."""
    allowed = min(PERMUTATIONS, PAIR_BUDGET // max(pairs, 1))
    return allowed if allowed >= FEWEST_PERMUTATIONS else 0


def _sharing(x: NDArray[np.float32], y: NDArray[np.float32], edges: int, share: NDArray[np.bool_]) -> int:
    """Return how many of the strongest pairs share a set."""
    strength = np.abs(x.T @ y).ravel()
    if edges >= strength.size:
        return int(share.sum())
    return int(share[np.argpartition(strength, strength.size - edges)[strength.size - edges :]].sum())
