"""The screen's figures for any pairs, whether they passed or not."""

from __future__ import annotations

from collections.abc import Sequence
from functools import cached_property
from typing import NamedTuple, Protocol

import numpy as np
from numpy.typing import ArrayLike

from workbench.engine.multiple import Family
from workbench.engine.pairs.found import Discovery, focus
from workbench.engine.pairs.tail_counts import Counts, Tails
from workbench.engine.pairs.tiles import PairTiles, refine
from workbench.engine.pairs.unit_rows import FloatArray, IndexArray
from workbench.engine.tails import p_from_log
from workbench.errors import NumericsError


class PairFigures(NamedTuple):
    """Figures of given pairs, arrays of one shape; NaN for a pair that cannot be tested.

    Attributes
    ----------
    r, p : ndarray
        Correlation and its two-sided p.
    q, q_block : ndarray
        False-discovery rates over all pairs of the screen and over the pairs of these two blocks.
    """

    r: FloatArray
    p: FloatArray
    q: FloatArray
    q_block: FloatArray


class AnyPairs(Protocol):
    """What gives figures of any pairs of a finished screen."""

    def figures(self, pair_index: ArrayLike, i: ArrayLike, j: ArrayLike) -> PairFigures:
        """Figures of the pairs of feature ``i`` of the first block and ``j`` of the second."""


class Lookup:
    """Figures of any pairs of a finished screen.

    The q of pairs that passed are exact. Those of weaker pairs come from a histogram of |r| in steps of
    1 / 65,536, made in one more pass over all pairs when first needed: an upper bound of q, mostly within
    one per cent of it, and always above the rate at which the screen selected.
    """

    def __init__(self, pairs: Sequence[PairTiles], discovery: Discovery, fdr: float) -> None:
        self._pairs = pairs
        self._pooled = discovery.pooled
        self._single = discovery.single
        self._known_tails = discovery.tails
        self._fdr = fdr

    def figures(self, pair_index: ArrayLike, i: ArrayLike, j: ArrayLike) -> PairFigures:
        """Figures of the pairs of feature ``i`` of the first block and ``j`` of the second.

        Raises
        ------
        NumericsError
            When there is no such pair of blocks or feature.
        """
        which, first, second = (np.asarray(a, dtype=np.int64) for a in np.broadcast_arrays(pair_index, i, j))
        _check_index(which, len(self._pairs), "pair of blocks")
        figures = [np.full(which.shape, np.nan) for _ in range(4)]
        for k in np.unique(which):
            here = which == k
            values = self._of_pair(int(k), first[here], second[here])
            for out, value in zip(figures, values, strict=True):
                out[here] = value
        for pair in self._pairs:
            pair.release()
        return PairFigures(*figures)

    def _of_pair(self, k: int, i: IndexArray, j: IndexArray) -> tuple[FloatArray, ...]:
        pair = self._pairs[k]
        _check_index(i, pair.x.n_features, "feature of the first block")
        _check_index(j, pair.y.n_features, "feature of the second block")
        r = refine(pair, i * pair.y.n_features + j)
        r[~pair.able(i, j)] = np.nan
        log_p = pair.log_p(r)
        q = self._q(log_p, self._pooled, list(range(len(self._pairs))))
        r = np.clip(r / pair.damping(i, j), -1.0, 1.0)
        return r, p_from_log(log_p), q, self._q(log_p, self._single[k], [k])

    def _q(self, log_p: FloatArray, family: Family, members: list[int]) -> FloatArray:
        log_q, passed = family.exact_log_q(log_p), log_p <= family.threshold
        # Of pairs that were collected and did not pass, the family knows only levels as strong as the weakest of them.
        bounded = (np.isnan(log_q) | ~passed) & ~np.isnan(log_p)
        if bounded.any():
            bound = Counts.of([self._tails[k] for k in members]).log_q_bound(log_p[bounded])
            log_q[bounded] = np.fmin(log_q[bounded], bound)
        q = p_from_log(log_q)
        q[passed] = np.minimum(q[passed], self._fdr)
        return q

    @cached_property
    def _tails(self) -> list[Tails]:
        if self._known_tails is not None:
            return self._known_tails
        return [Tails.of(focus(self._pairs, k)) for k in range(len(self._pairs))]


def _check_index(index: IndexArray, size: int, what: str) -> None:
    wrong = index[(index < 0) | (index >= size)]
    if wrong.size:
        raise NumericsError(f"there is no {what} number {wrong[0]}; they are numbered from 0 to {size - 1}")
