"""Which pairs pass: exact Benjamini-Hochberg over all pairs without looking at each p.

A p-threshold ``t`` is feasible when ``N(t) >= t m / fdr`` pairs are at or under it; the threshold of
Benjamini & Hochberg is the largest feasible one. Counts ``N`` at few levels bound it from above: between two
neighbouring levels ``a < b`` nothing is feasible when ``N(b) < a m / fdr``. Only pairs under that bound are
recomputed in double precision, and on them the procedure runs as it is written.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np

from workbench.engine.multiple import Family
from workbench.engine.pairs.crowded import settle_crowd
from workbench.engine.pairs.found import Discovery, Found, Request, focus, found_from
from workbench.engine.pairs.tail_counts import Tails, upper_bounds
from workbench.engine.pairs.tiles import Band, Caught, PairTiles, scan
from workbench.engine.pairs.unit_rows import FloatArray, IndexArray

_FINE = 2.0**0.25


@dataclass(frozen=True, eq=False)
class Levels:
    """Ascending p-levels; pairs at or under the level at ``collected`` are kept in the first pass."""

    p: FloatArray
    collected: int

    @classmethod
    def of(cls, pairs: int, fdr: float, expected: int) -> Levels:
        """Levels for ``pairs`` pairs, of which about ``expected`` may be kept without any association.

        From the smallest p that can matter, ``fdr / pairs``, in steps of 2^(1/4) to the collection level;
        from there to ``fdr`` in steps that leave room between ``N(t) = t m`` and the feasible ``t m / fdr``.
        """
        first = min(fdr, expected / pairs)
        fine = first / _FINE ** np.arange(int(np.ceil(np.log(first * pairs / fdr) / np.log(_FINE))) + 2)
        step = max(1.5, (1.0 / fdr) ** 0.65)
        n_coarse = int(np.ceil(np.log(fdr / first) / np.log(step)))
        coarse = np.geomspace(first, fdr, n_coarse + 1)[1:]
        return cls(np.concatenate([fine[::-1], coarse]), fine.size - 1)


@dataclass(frozen=True, eq=False)
class FirstLook:
    """Upper bounds of the numbers of pairs at or under each level, and the pairs that were kept."""

    counts: IndexArray | None
    caught: Caught
    bounds: FloatArray


def discover(pairs: Sequence[PairTiles], request: Request) -> Discovery:
    """Pairs that pass, with the exact families that they were judged in."""
    levels = Levels.of(sum(pair.pairs for pair in pairs), request.fdr, pairs[0].limits.expected)
    looks = [_first_look(focus(pairs, k), levels) for k in range(len(pairs))]
    wanted = _bounds_of_first(pairs, looks, levels, request.fdr)
    if wanted is None:
        return _second_pass(pairs, request)
    pooled, single = wanted
    found = []
    for k, look in enumerate(looks):
        need = max(pooled, single[k])
        bound = look.bounds[need] if need >= 0 else np.inf
        found.append(found_from(focus(pairs, k), look.caught.keys[look.caught.sizes >= bound]))
    log_levels = [float(np.log(levels.p[need])) if need >= 0 else -np.inf for need in [pooled, *single]]
    return _judged(pairs, found, log_levels[0], log_levels[1:], request.fdr)


def _first_look(pair: PairTiles, levels: Levels) -> FirstLook:
    bounds = pair.critical(levels.p) - pair.margin
    first = levels.collected
    coarse = [Band(bound, bound) for bound in bounds[first + 1 :]]
    caught, *beyond = scan(pair, [Band(bounds[first], most=pair.limits.candidates), *coarse])
    if caught.overflow:
        return FirstLook(None, caught, bounds)
    sizes = np.sort(caught.sizes)
    fine = sizes.size - np.searchsorted(sizes, bounds[: first + 1].astype(sizes.dtype))
    return FirstLook(np.concatenate([fine, [part.above for part in beyond]]), caught, bounds)


def _bounds_of_first(
    pairs: Sequence[PairTiles], looks: Sequence[FirstLook], levels: Levels, fdr: float
) -> tuple[int, list[int]] | None:
    """Levels that bound the pooled and the single thresholds; None when the first pass kept too little."""
    counts = [look.counts for look in looks if look.counts is not None]
    if len(counts) < len(looks):
        return None
    tests = [pair.tests for pair in pairs]
    pooled = _highest_feasible(np.sum(counts, axis=0), levels.p, sum(tests), fdr)
    single = [_highest_feasible(c, levels.p, m, fdr) for c, m in zip(counts, tests, strict=True)]
    return (pooled, single) if max(pooled, *single) <= levels.collected else None


def _highest_feasible(counts: IndexArray, levels: FloatArray, tests: int, fdr: float) -> int:
    """Position of the lowest level that is certainly not under the threshold; -1 when nothing can pass."""
    below = np.concatenate([[0.0], levels[:-1]])
    feasible = np.flatnonzero(counts >= np.maximum(below * (tests / fdr) * (1.0 - 1e-9), 1.0))
    return int(feasible[-1]) if feasible.size else -1


def _second_pass(pairs: Sequence[PairTiles], request: Request) -> Discovery:
    """Discovery where many pairs pass: a histogram first, then one more pass for what it points at."""
    tails = [Tails.of(focus(pairs, k)) for k in range(len(pairs))]
    pooled, single = upper_bounds(tails, request.fdr)
    needed = [max(pooled, own) for own in single]
    expected = sum(int(tail.at_most(need)) for tail, need in zip(tails, needed, strict=True))
    if expected > pairs[0].limits.candidates:
        return settle_crowd(pairs, tails, request)
    found = []
    for k, (tail, need) in enumerate(zip(tails, needed, strict=True)):
        pair = focus(pairs, k)
        (caught,) = scan(pair, [Band(tail.weakest_r(need) - pair.margin)])
        found.append(found_from(pair, caught.keys))
    return replace(_judged(pairs, found, pooled, single, request.fdr), tails=tails)


def _judged(
    pairs: Sequence[PairTiles], found: list[Found], pooled: float, single: Sequence[float], fdr: float
) -> Discovery:
    """Families over everything found at or under the log p levels ``pooled`` and ``single``."""
    tests = [pair.tests for pair in pairs]
    own = [Family.of(f.log_p, level, m, fdr) for f, level, m in zip(found, single, tests, strict=True)]
    if len(pairs) == 1:
        return Discovery(found, own[0], own)
    everything = np.concatenate([f.log_p for f in found])
    return Discovery(found, Family.of(everything, pooled, sum(tests), fdr), own)
