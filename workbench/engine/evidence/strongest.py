"""The strongest pairs of a screen, however weak they are: what a half-sample puts first."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np

from workbench.engine.pairs.found import focus, strengths
from workbench.engine.pairs.screen import BlockPair, Correlation, pair_tiles
from workbench.engine.pairs.tail_counts import Counts, Tails
from workbench.engine.pairs.tiles import Band, Limits, PairTiles, refine, scan
from workbench.engine.pairs.unit_rows import FloatArray, IndexArray
from workbench.engine.tails import log_p_value
from workbench.errors import NumericsError

#: Pairs beyond which a part of the features tells where to begin.
MANY = 4_000_000
#: Log p by which a guess from a part of the features, or a hint that was too strict, is loosened.
LOOSER = 0.7
_LEAST_LOG_P = -690.0


@dataclass(frozen=True, eq=False)
class Strongest:
    """The strongest pairs, in no order.

    Attributes
    ----------
    pair_index, i, j : ndarray of int, shape (n,)
        Pair of blocks, feature of its first and of its second block.
    level : float
        Log p of the weakest of them: with some room, a ``hint`` for a screen of similar samples.
    """

    pair_index: IndexArray
    i: IndexArray
    j: IndexArray
    level: float


def strongest_pairs(
    pairs: Sequence[BlockPair],
    count: int,
    *,
    correlation: Correlation = "pearson",
    hint: float | None = None,
    limits: Limits | None = None,
) -> Strongest:
    """Find the ``count`` pairs of smallest p over several pairs of blocks.

    Order is by p (by |r| where degrees of freedom are the same), ties to 12 decimals by pair of blocks, first
    and second feature. Fewer come back when fewer can be tested.

    Parameters
    ----------
    pairs : sequence of BlockPair
    count : int
        At least 1.
    hint : float, optional
        Log p under which somewhat more pairs than ``count`` are expected; a poor one costs a pass or two and
        changes no result.

    Raises
    ------
    NumericsError
        When shapes or values do not allow the screen, or ``count`` is below 1.

    Examples
    --------
    >>> rng = np.random.default_rng(0)
    >>> x, y = rng.normal(size=(30, 40)), rng.normal(size=(30, 20))
    >>> y[:, 2] += 3.0 * x[:, 5]
    >>> found = strongest_pairs([BlockPair("x and y", x, y)], 1)
    >>> found.i, found.j
    (array([5]), array([2]))
    """
    if count < 1:
        raise NumericsError(f"{count} strongest pairs asked for; give at least 1")
    tiles = [pair_tiles(pair, correlation, limits or Limits()) for pair in pairs]
    if hint is None and sum(pair.pairs for pair in tiles) > MANY:
        hint = _guess(pairs, count, correlation)
    caught = None if hint is None else _caught(tiles, hint)
    if hint is not None and caught is not None and caught.keys.size < count:
        caught = _caught(tiles, hint + LOOSER)
    if caught is None or caught.keys.size < count:
        caught = _caught(tiles, _level(tiles, count))
    chosen = _chosen(tiles, caught, count)
    widths = np.array([pair.y.n_features for pair in tiles])
    which = caught.which[chosen]
    i, j = np.divmod(caught.keys[chosen], widths[which])
    for pair in tiles:
        pair.release()
    return Strongest(which, i, j, caught.level_of(min(count, caught.keys.size)))


@dataclass(frozen=True, eq=False)
class _Caught:
    """Pairs above a level: their pair of blocks, key, and weakness (ascending is stronger to weaker)."""

    which: IndexArray
    keys: IndexArray
    weakness: FloatArray
    tolerance: float
    df: int | None

    def level_of(self, rank: int) -> float:
        """Log p of the pair of the given rank."""
        if rank < 1:
            return 0.0
        value = float(np.partition(self.weakness, rank - 1)[rank - 1])
        return value if self.df is None else float(log_p_value(value, self.df))


def _caught(tiles: Sequence[PairTiles], level: float) -> _Caught:
    """Pairs at or under a log p, and a few more."""
    same = len({pair.df for pair in tiles}) == 1
    which, keys, weakness = [], [], []
    for k in range(len(tiles)):
        pair = focus(tiles, k)
        bound = float(pair.critical(np.exp(max(level, _LEAST_LOG_P)))) - pair.margin
        (part,) = scan(pair, [Band(bound)])
        own, sizes = part.keys, part.sizes.astype(np.float64)
        if bound <= pair.margin:
            able = pair.able(*np.divmod(own, pair.y.n_features))
            own, sizes = own[able], sizes[able]
        which.append(np.full(own.size, k))
        keys.append(own)
        weakness.append(-sizes if same else pair.log_p(sizes))
    tolerance = 2.0 * max(pair.margin for pair in tiles) if same else np.inf
    df = tiles[0].df if same else None
    return _Caught(np.concatenate(which), np.concatenate(keys), np.concatenate(weakness), tolerance, df)


def _level(tiles: Sequence[PairTiles], count: int) -> float:
    """Log p that certainly holds ``count`` pairs, by a histogram; 0 when there are not so many."""
    counts = Counts.of([Tails.of(focus(tiles, k)) for k in range(len(tiles))])
    enough = np.flatnonzero(counts.at_least >= count)
    return float(counts.levels[enough[0]]) if enough.size else 0.0


def _guess(pairs: Sequence[BlockPair], count: int, correlation: Correlation) -> float:
    """Log p that about ``count`` pairs reach, judged by every so many-th feature of the first blocks."""
    total = sum(pair.x.shape[1] * pair.y.shape[1] for pair in pairs)
    step = min(-(-total // MANY), *(pair.x.shape[1] for pair in pairs), 64)
    thin = [_every(pair, step) for pair in pairs]
    tiles = [pair_tiles(pair, correlation, Limits()) for pair in thin]
    return _level(tiles, -(-count // step)) + LOOSER


def _every(pair: BlockPair, step: int) -> BlockPair:
    """Take every ``step``-th feature of the first block."""
    x = np.asarray(pair.x[:, ::step])
    damping = None if pair.damping is None else (pair.damping[0][::step], pair.damping[1])
    return replace(pair, x=x, damping=damping)


def _chosen(tiles: Sequence[PairTiles], caught: _Caught, count: int) -> IndexArray:
    """Positions of the strongest: those certain by their tile entries, and near the cut by double precision."""
    if caught.keys.size <= count:
        return np.arange(caught.keys.size)
    cut = np.partition(caught.weakness, count - 1)[count - 1]
    sure = np.flatnonzero(caught.weakness < cut - caught.tolerance)
    near = np.flatnonzero(np.abs(caught.weakness - cut) <= caught.tolerance)
    exact = np.empty(near.size)
    for k in range(len(tiles)):
        here = caught.which[near] == k
        if here.any():
            r = strengths(refine(focus(tiles, k), caught.keys[near[here]]))
            exact[here] = -r if caught.df is not None else tiles[k].log_p(r)
    order = np.lexsort((caught.keys[near], caught.which[near], exact))
    chosen: IndexArray = np.concatenate([sure, near[order[: count - sure.size]]])
    return chosen
