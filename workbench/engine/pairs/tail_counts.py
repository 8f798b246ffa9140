"""Bounds of the number of pairs in any tail, from a histogram of |r| in steps of 1 / 65,536."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike

from workbench.engine.pairs.tiles import STEPS, PairTiles, tail_histogram
from workbench.engine.pairs.unit_rows import FloatArray, IndexArray


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
        log_p = np.minimum.accumulate(pair.log_p(np.arange(STEPS + 1) / STEPS))
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
