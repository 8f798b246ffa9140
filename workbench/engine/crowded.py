"""Screens in which very many pairs pass: thresholds from histograms, then only the strongest pairs.

The histogram of |r| in steps of 1 / 65,536 bounds the number of pairs at or under any p from both sides.
Only the pairs between the two bounds of a threshold are recomputed, so the threshold and the number of edges
are exact while memory holds a small part of the pairs that pass.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike

from workbench.engine.found import Discovery, Found, Request, focus, found_from
from workbench.engine.multiple import Family, log_adjusted
from workbench.engine.tails import log_p_value
from workbench.engine.tiles import STEPS, Band, PairTiles, scan, tail_histogram
from workbench.engine.unit_rows import FloatArray, IndexArray
from workbench.errors import NumericsError


@dataclass(frozen=True, eq=False)
class Tails:
    """Bounds of the number of pairs of two blocks at or under any log p.

    Attributes
    ----------
    counts : ndarray of int, shape (STEPS + 2,)
        Pairs whose tile entry is at least ``k / STEPS``.
    log_p : ndarray of shape (STEPS + 1,)
        Log p of the correlation ``k / STEPS``, descending.
    reach : int
        Steps by which a tile entry may be off, rounded up.
    tests : int
        Number of pairs that can be tested.
    """

    counts: IndexArray
    log_p: FloatArray
    reach: int
    tests: int

    @classmethod
    def of(cls, pair: PairTiles) -> Tails:
        """Tails of a pair of blocks, by one pass over its tiles."""
        counts = tail_histogram(pair)
        log_p = np.minimum.accumulate(log_p_value(np.arange(STEPS + 1) / STEPS, pair.df))
        return cls(counts, log_p, int(np.ceil(pair.margin * STEPS)), pair.tests)

    def at_least(self, level: ArrayLike) -> IndexArray:
        """How many pairs are certainly at or under the log p ``level``."""
        step = self._step(level) + self.reach
        certain: IndexArray = np.where(step <= STEPS + 1, self.counts[np.minimum(step, STEPS + 1)], 0)
        return certain

    def at_most(self, level: ArrayLike) -> IndexArray:
        """How many pairs may be at or under the log p ``level``."""
        possible: IndexArray = self.counts[np.maximum(self._step(level) - 1 - self.reach, 0)]
        return possible

    def weakest_r(self, level: float) -> float:
        """Size under which no correlation reaches the log p ``level``; within 1 / STEPS of the smallest."""
        return max(int(self._step(level)) - 1, 0) / STEPS

    def sure_r(self, level: float) -> float:
        """Size from which on every correlation reaches the log p ``level``."""
        return int(self._step(level)) / STEPS

    def _step(self, level: ArrayLike) -> IndexArray:
        """First step whose log p is at or under ``level``."""
        step: IndexArray = np.searchsorted(-self.log_p, -np.asarray(level, dtype=np.float64))
        return np.minimum(step, STEPS)


@dataclass(frozen=True, eq=False)
class Counts:
    """Bounds of the number of pairs of a family at or under each of many log p levels, ascending."""

    levels: FloatArray
    at_least: IndexArray
    at_most: IndexArray
    tests: int

    @classmethod
    def of(cls, tails: Sequence[Tails]) -> Counts:
        """Count the family that the given pairs of blocks form."""
        levels = np.unique(np.concatenate([tail.log_p for tail in tails]))
        return cls(
            levels,
            np.sum([tail.at_least(levels) for tail in tails], axis=0),
            np.sum([tail.at_most(levels) for tail in tails], axis=0),
            sum(tail.tests for tail in tails),
        )

    def bracket(self, fdr: float) -> tuple[float, float]:
        """Log p levels between which the threshold of Benjamini & Hochberg lies.

        Everything at or under the lower one passes, nothing above the upper one; minus infinity stands for
        "nothing".
        """
        needed = np.exp(self.levels) * (self.tests / fdr)
        before = np.concatenate([[0.0], needed[:-1]])
        sure = np.flatnonzero(self.at_least >= np.maximum(needed * (1.0 + 1e-9), 1.0))
        possible = np.flatnonzero(self.at_most >= np.maximum(before * (1.0 - 1e-9), 1.0))
        low = float(self.levels[sure[-1]]) if sure.size else -np.inf
        return low, float(self.levels[possible[-1]]) if possible.size else -np.inf

    def log_q_bound(self, log_p: ArrayLike) -> FloatArray:
        """Upper bound of the log q of tests with the given log p, close where counts are large.

        At any level ``L`` at or above the test's own p, ``exp(L) m / N(L)`` is at least its q.
        """
        at_level = np.zeros(self.levels.size)
        some = self.at_least > 0
        at_level[some] = self.levels[some] + np.log(self.tests / self.at_least[some])
        best = np.append(np.minimum.accumulate(at_level[::-1])[::-1], 0.0)
        place = np.searchsorted(self.levels, np.asarray(log_p, dtype=np.float64))
        bound: FloatArray = np.minimum(best[place], 0.0)
        return bound


def upper_bounds(tails: Sequence[Tails], fdr: float) -> tuple[float, list[float]]:
    """Log p levels above which nothing passes in the pooled family and in each single one."""
    return Counts.of(tails).bracket(fdr)[1], [Counts.of([tail]).bracket(fdr)[1] for tail in tails]


def settle_crowd(pairs: Sequence[PairTiles], tails: Sequence[Tails], request: Request) -> Discovery:
    """Exact thresholds, the number of edges, and the strongest ``maximum_edges`` of them.

    Raises
    ------
    NumericsError
        When no ``maximum_edges`` bounds what is to be returned.
    """
    every = list(range(len(pairs)))
    pooled = _threshold(pairs, tails, every, request.fdr)
    single = [pooled] if len(pairs) == 1 else [_threshold(pairs, tails, [k], request.fdr) for k in every]
    cuts = [min(pooled, own) for own in single]
    passed = sum(_count_edges(focus(pairs, k), tails[k], cuts[k], request.floor_r) for k in every)
    wanted = request.maximum_edges
    if passed > pairs[0].limits.candidates and (wanted is None or wanted > pairs[0].limits.candidates):
        raise NumericsError(
            f"{passed} pairs pass, more than the {pairs[0].limits.candidates} that are returned at once; "
            "give maximum_edges, a larger minimum_r or a smaller fdr"
        )
    level = _level_of_strongest(pairs, tails, cuts, request, passed)
    found = [_strongest(focus(pairs, k), tails[k], level) for k in every]
    own = [
        _family([f], [tail], level, t, request.fdr) for f, tail, t in zip(found, tails, single, strict=True)
    ]
    whole = own[0] if len(pairs) == 1 else _family(found, tails, level, pooled, request.fdr)
    return Discovery(found, whole, own, passed)


def _threshold(
    pairs: Sequence[PairTiles], tails: Sequence[Tails], members: Sequence[int], fdr: float
) -> float:
    """Largest log p with q at or under ``fdr`` in the family of the pairs of blocks ``members``."""
    family = Counts.of([tails[k] for k in members])
    low, high = family.bracket(fdr)
    base, parts = 0, []
    for k in members:
        pair = focus(pairs, k)
        top = tails[k].sure_r(low) + pair.margin if low > -np.inf else np.inf
        (caught,) = scan(pair, [Band(tails[k].weakest_r(high) - pair.margin, top)])
        base += caught.above
        parts.append(found_from(pair, caught.keys).log_p)
    log_p = np.sort(np.concatenate(parts))
    log_p = log_p[log_p <= high]
    scaled = log_p + np.log(family.tests / (base + np.arange(1, log_p.size + 1)))
    passing = np.flatnonzero(np.exp(scaled) <= fdr)
    return max(low, float(log_p[passing[-1]])) if passing.size else low


def _count_edges(pair: PairTiles, tail: Tails, cut: float, floor_r: float) -> int:
    """Count the pairs at or under the log p ``cut`` with |r| of at least ``floor_r``."""
    low = max(tail.weakest_r(cut), floor_r)
    (caught,) = scan(pair, [Band(low - pair.margin, max(tail.sure_r(cut), floor_r) + pair.margin)])
    near = found_from(pair, caught.keys)
    return caught.above + int(np.count_nonzero((near.log_p <= cut) & (np.abs(near.r) >= floor_r)))


def _level_of_strongest(
    pairs: Sequence[PairTiles], tails: Sequence[Tails], cuts: Sequence[float], request: Request, passed: int
) -> float:
    """Lowest log p level that certainly holds the edges wanted; the weakest cut when all are wanted."""
    floors = [
        min(cut, float(log_p_value(request.floor_r, pair.df)))
        for cut, pair in zip(cuts, pairs, strict=True)
    ]
    # A little above: rounding must not lose a pair that lies on the smallest |r| allowed.
    highest = min(max(cuts), max(floors) + 1e-6)
    wanted = passed if request.maximum_edges is None else request.maximum_edges
    if wanted >= passed:
        return highest
    levels = np.unique(np.concatenate([tail.log_p for tail in tails]))
    held = np.sum(
        [tail.at_least(np.minimum(levels, f)) for tail, f in zip(tails, floors, strict=True)], axis=0
    )
    enough = levels[(held >= wanted) & (levels <= highest)]
    return float(enough[0]) if enough.size else highest


def _strongest(pair: PairTiles, tail: Tails, level: float) -> Found:
    (caught,) = scan(pair, [Band(tail.weakest_r(level) - pair.margin)])
    found = found_from(pair, caught.keys)
    inside = found.log_p <= level
    return Found(found.keys[inside], found.r[inside], found.log_p[inside])


def _family(
    found: Sequence[Found], tails: Sequence[Tails], level: float, threshold: float, fdr: float
) -> Family:
    """Family of the strongest tests; what weaker ones add to their q is bounded by the histogram."""
    log_p = np.sort(np.concatenate([f.log_p for f in found]))
    counts = Counts.of(tails)
    beyond = float(counts.log_q_bound(np.nextafter(level, np.inf)))
    if threshold > level:
        beyond = min(beyond, float(np.log(fdr)))
    return Family(log_p, log_adjusted(log_p, counts.tests, beyond), level, threshold, counts.tests)
