"""Over-representation of sets in communities, layer by layer, and the layers joined."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy import sparse
from scipy.stats import hypergeom, norm

FloatArray = NDArray[np.float64]
IndexArray = NDArray[np.intp]

FEWEST_OF_SET = 3
"""Features of a layer that a set must hold to be tested there."""

FEWEST_OF_COMMUNITY = 3
"""Features of a layer, in any set, that a community must hold to be tested there."""


@dataclass(frozen=True, eq=False)
class LayerTest:
    """The sets of one community in one layer.

    Attributes
    ----------
    community : int
    layer : str
    universe : ndarray of int
        Features of the layer that are in at least one set (rows of the features table): what is drawn from.
    drawn : ndarray of int
        Those of them that are in the community.
    sets : ndarray of int
        Sets that are tested: at least 3 of their features are in the universe.
    sizes, counts : ndarray of int
        Features of each tested set in the universe, and in the community.
    p, p_mid : ndarray
        Chance of at least that count (hypergeometric), and with half of the chance of exactly that count.
    """

    community: int
    layer: str
    universe: IndexArray
    drawn: IndexArray
    sets: IndexArray
    sizes: IndexArray
    counts: IndexArray
    p: FloatArray
    p_mid: FloatArray

    @property
    def expected(self) -> FloatArray:
        """Return the count of each set that chance gives on average."""
        return np.asarray(self.sizes * (self.drawn.size / self.universe.size), dtype=np.float64)

    @property
    def weight(self) -> float:
        """Return what the layer weighs where layers are joined: the square root of the features drawn."""
        return float(np.sqrt(self.drawn.size))


def hypergeometric_p(
    counts: IndexArray, universe: int, sizes: IndexArray, drawn: int
) -> tuple[FloatArray, FloatArray]:
    """Return the chance of at least ``counts`` of a set among ``drawn`` features, and the mid-p.

    Both are exact. The p is ``P(K >= k)`` for ``K`` hypergeometric: ``drawn`` features drawn without putting back from
    a ``universe`` that holds ``sizes`` of the set. It takes features as drawn one by one; correlated ones come
    together, and it is then too small (Goeman & Buhlmann 2007): read the permutation p beside it.

    References
    ----------
    Goeman JJ, Buhlmann P (2007). Analyzing gene expression data in terms of gene sets: methodological issues.
    Bioinformatics 23:980.

    Examples
    --------
    Of 20 features 5 are in the set; 6 are drawn and 4 of them are in it: (5 over 4) (15 over 2) + (15 over 1)
    of (20 over 6) ways.

    >>> p, _ = hypergeometric_p(np.array([4]), 20, np.array([5]), 6)
    >>> bool(np.isclose(p[0], (5 * 105 + 15) / 38760))
    True
    """
    counts = np.asarray(counts)
    p = hypergeom.sf(counts - 1, universe, sizes, drawn)
    return np.clip(p, 0.0, 1.0), np.clip(p - 0.5 * hypergeom.pmf(counts, universe, sizes, drawn), 0.0, 1.0)


def layer_tests(
    matrix: sparse.csr_array, layers: Sequence[str], communities: Sequence[int | None]
) -> list[LayerTest]:
    """Return the tests of every community in every layer where both are large enough.

    Parameters
    ----------
    matrix : sparse array of bool, shape (features, sets)
    layers : sequence of str
        Layer of each feature.
    communities : sequence of int or None
        Community of each feature; None (or 0) outside the network.
    """
    layer_of = np.array(layers, dtype=object)
    community_of = np.array([number or 0 for number in communities], dtype=np.intp)
    in_a_set = np.asarray(matrix.sum(axis=1)).ravel() > 0
    tests = []
    for layer in dict.fromkeys(layers):
        universe = np.flatnonzero((layer_of == layer) & in_a_set)
        if not universe.size:
            continue
        members = sparse.csr_array(matrix[universe]).astype(np.int64)
        sizes = np.asarray(members.sum(axis=0)).ravel()
        tested = np.flatnonzero((sizes >= FEWEST_OF_SET) & (sizes < universe.size))
        for community in range(1, int(community_of.max(initial=0)) + 1):
            inside = community_of[universe] == community
            if inside.sum() < FEWEST_OF_COMMUNITY or not tested.size:
                continue
            counts = np.asarray(members[np.flatnonzero(inside)].sum(axis=0)).ravel()[tested]
            p, p_mid = hypergeometric_p(counts, universe.size, sizes[tested], int(inside.sum()))
            tests.append(
                LayerTest(
                    community, layer, universe, universe[inside], tested, sizes[tested], counts, p, p_mid
                )
            )
    return tests


def stouffer(p: FloatArray, weights: FloatArray) -> FloatArray:
    r"""Return the joined one-sided p of independent ones: :math:`z = \sum_l w_l z_l / \sqrt{\sum_l w_l^2}`.

    Parameters
    ----------
    p : ndarray of shape (layers, tests)
        Mid-p, so that a p of 1 (nothing seen) does not outweigh everything else; NaN where a layer has none.
    weights : ndarray of shape (layers,)

    References
    ----------
    Stouffer SA et al. (1949). The American Soldier, vol. 1. Princeton University Press.

    Examples
    --------
    >>> stouffer(np.array([[0.05], [0.05]]), np.ones(2)).round(4)
    array([0.01])
    """
    smallest = np.finfo(float).tiny
    z = norm.isf(np.clip(p, smallest, 1.0 - np.finfo(float).epsneg))
    held = np.where(np.isnan(z), 0.0, np.asarray(weights)[:, None])
    with np.errstate(invalid="ignore"):
        joined = (held * np.nan_to_num(z)).sum(axis=0) / np.sqrt((held**2).sum(axis=0))
    return np.asarray(norm.sf(joined), dtype=np.float64)
