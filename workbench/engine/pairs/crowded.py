"""Screens in which very many pairs pass: thresholds from histograms, then only the strongest pairs.

The histogram of |r| in steps of 1 / 65,536 bounds the number of pairs at or under any p from both sides.
Only the pairs between the two bounds of a threshold are recomputed, so the threshold and the number of edges
are exact while memory holds a small part of the pairs that pass.
"""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from workbench.engine.multiple import Family, log_adjusted
from workbench.engine.pairs.found import Discovery, Found, Request, focus, found_from
from workbench.engine.pairs.tail_counts import Counts, Tails
from workbench.engine.pairs.tiles import Band, PairTiles, scan
from workbench.errors import NumericsError


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
    return Discovery(found, whole, own, passed, list(tails))


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
    floors = [min(cut, float(pair.log_p(request.floor_r))) for cut, pair in zip(cuts, pairs, strict=True)]
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
