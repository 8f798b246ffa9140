"""One screen of two routes: edges that stand by their own test, and edges that their module carries.

Of the rate ``fdr`` the pairs' own tests are given the share ``PAIR_SHARE`` and the modules the rest. The share of
false edges in a union of two lists is at most the sum of both lists' shares, whatever their dependence, so that
``fdr`` holds for all edges where it holds for each route at its part. Where modules carry nothing the pairs' own
tests are given all of it, and nothing differs from a screen of pairs alone.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace
from typing import Any

import numpy as np
from numpy.typing import ArrayLike, NDArray

from workbench.engine.pairs.found import Request, focus
from workbench.engine.pairs.intervals import selected_error
from workbench.engine.pairs.lookup import PairFigures
from workbench.engine.pairs.screen import (
    FALSE_COVERAGE,
    BlockPair,
    BlockScreen,
    Correlation,
    Progress,
    edge_intervals,
    pair_tiles,
    screen_tiles,
)
from workbench.engine.pairs.tiles import Limits, PairTiles
from workbench.engine.pairs.unit_rows import FloatArray, IndexArray
from workbench.engine.private.module_route import ModulePairs, module_pairs
from workbench.engine.tails import p_from_log

#: Share of the rate that the pairs' own tests are given where modules carry any pair.
PAIR_SHARE = 0.8


@dataclass(frozen=True, eq=False)
class SupportedScreen:
    """A screen of both routes.

    Attributes
    ----------
    screen : BlockScreen
        ``p``, ``q`` and ``q_block`` of an edge are those of the route that carries it, the pair's own for ``both``;
        q are in parts of the route's share, so that an edge has both at or under ``fdr``. ``r`` and its interval
        are always the pair's own. Edges are ordered by p over the route's share.
    support : ndarray of str, shape (n_edges,)
        ``pair``, ``module`` or ``both``.
    couples, mixed : tuple of int
        For each pair of blocks the couples of components found, and those left out as mixtures of factors.
    """

    screen: BlockScreen
    support: NDArray[np.str_]
    couples: tuple[int, ...]
    mixed: tuple[int, ...]


def screen_supported(
    pairs: Sequence[BlockPair],
    scores: Sequence[tuple[FloatArray, FloatArray]],
    *,
    fdr: float = 0.05,
    correlation: Correlation = "pearson",
    minimum_r: float = 0.0,
    maximum_edges: int | None = None,
    progress: Progress | None = None,
) -> SupportedScreen:
    """Edges between the features of pairs of blocks, by their own tests and by the modules of their blocks.

    Parameters
    ----------
    pairs, fdr, correlation, minimum_r, maximum_edges, progress
        As for :func:`~workbench.engine.pairs.screen.screen_blocks`.
    scores : sequence of (ndarray of shape (n_samples, k), ndarray of shape (n_samples, l))
        For each pair of blocks the shared components of both, as for
        :func:`~workbench.engine.private.module_route.module_pairs`.

    Raises
    ------
    NumericsError
        As for :func:`~workbench.engine.pairs.screen.screen_blocks`.
    """
    tiles = [pair_tiles(pair, correlation, Limits()) for pair in pairs]
    rate = (1.0 - PAIR_SHARE) * fdr
    modules = [module_pairs(focus(tiles, k), u, v, rate) for k, (u, v) in enumerate(scores)]
    listed = _listed(modules, tiles, Request(fdr, minimum_r, maximum_edges).floor_r)
    share = PAIR_SHARE if listed.keys.size else 1.0
    own = screen_tiles(
        tuple(pair.name for pair in pairs),
        tiles,
        fdr=share * fdr,
        correlation=correlation,
        minimum_r=minimum_r,
        maximum_edges=maximum_edges,
        progress=progress,
    )
    couples, mixed = (tuple(getattr(one, name) for one in modules) for name in ("couples", "mixed"))
    if not listed.keys.size:
        return SupportedScreen(own, np.full(own.n_edges, "pair"), couples, mixed)
    screen, support = _united(own, listed, tiles, fdr)
    return SupportedScreen(screen, support, couples, mixed)


@dataclass(frozen=True, eq=False)
class _Listed:
    """Pairs that modules carry, by pair of blocks and key ``i q + j``; q in parts of their share of the rate."""

    which: IndexArray
    keys: IndexArray
    i: IndexArray
    j: IndexArray
    log_p: FloatArray
    q: FloatArray

    def take(self, chosen: NDArray[np.bool_]) -> _Listed:
        """Return some of the pairs."""
        return _Listed(*(getattr(self, name)[chosen] for name in self.__dataclass_fields__))

    def place(self, which: IndexArray, keys: IndexArray) -> IndexArray:
        """Position of pairs in the list; -1 of those that are not there."""
        place = np.full(which.size, -1, dtype=np.intp)
        for k in np.unique(self.which):
            start, stop = np.searchsorted(self.which, [k, k + 1])
            here = np.flatnonzero(which == k)
            at = np.minimum(start + np.searchsorted(self.keys[start:stop], keys[here]), stop - 1)
            found = self.keys[at] == keys[here]
            place[here[found]] = at[found]
        return place


def _listed(modules: Sequence[ModulePairs], tiles: Sequence[PairTiles], floor_r: float) -> _Listed:
    parts = []
    for k, (found, pair) in enumerate(zip(modules, tiles, strict=True)):
        strong = np.abs(found.r) >= floor_r
        keys = found.keys[strong]
        i, j = np.divmod(keys, pair.y.n_features)
        q = found.q[strong] / (1.0 - PAIR_SHARE)
        parts.append((np.full(keys.size, k), keys, i, j, found.log_p[strong], q))
    return _Listed(*(np.concatenate(column) for column in zip(*parts, strict=True)))


def _united(
    own: BlockScreen, listed: _Listed, tiles: Sequence[PairTiles], fdr: float
) -> tuple[BlockScreen, NDArray[np.str_]]:
    """Join the pairs' own edges with what modules alone carry, bring them into one order, and cut."""
    figures = own.lookup(listed.which, listed.i, listed.j)
    alone = ~((figures.q <= own.fdr) & (figures.q_block <= own.fdr))
    added = listed.take(alone)
    carried = UnitedLookup(own, added, tiles, fdr)
    first, second = _pair_columns(own, listed, tiles, fdr), carried.columns(figures.r[alone])
    # The screen's own order stands where rounding alone tells two p apart.
    rank = np.concatenate(
        [
            np.maximum.accumulate(own.log_p) - np.log(PAIR_SHARE),
            added.log_p - np.log(1.0 - PAIR_SHARE),
        ]
    )
    order = np.argsort(rank, kind="stable")[: own.maximum_edges]
    columns: dict[str, Any] = {name: np.concatenate([first[name], second[name]])[order] for name in first}
    support = columns.pop("support")
    which, passed = columns["pair_index"], own.passed + added.keys.size
    error = selected_error(order.size, sum(own.tested), FALSE_COVERAGE)
    ends, spearman = (columns["i"], columns["j"]), own.correlation == "spearman"
    low, high = edge_intervals(columns["r"], which, ends, tiles, error, spearman=spearman)
    screen = replace(
        own,
        **columns,
        p=p_from_log(columns["log_p"]),
        r_low=low,
        r_high=high,
        n=np.array([pair.n for pair in tiles])[which],
        df=np.array([pair.df for pair in tiles])[which],
        passed=passed,
        truncated=passed if passed > order.size else None,
        interval_error=error,
        fdr=fdr,
        _lookup=carried,
    )
    return screen, support


def _pair_columns(
    own: BlockScreen, listed: _Listed, tiles: Sequence[PairTiles], fdr: float
) -> dict[str, NDArray[Any]]:
    """Return the figures of the edges that stand by their own test, q in parts of their share of the rate."""
    keys = own.i * np.array([pair.y.n_features for pair in tiles])[own.pair_index] + own.j
    columns = {name: getattr(own, name) for name in ("pair_index", "i", "j", "r", "log_p")}
    for name in ("q", "q_block"):
        columns[name] = np.minimum(getattr(own, name) / PAIR_SHARE, fdr)
    columns["support"] = np.where(listed.place(own.pair_index, keys) >= 0, "both", "pair")
    return columns


class UnitedLookup:
    """Figures of any pairs of a screen of both routes.

    Those of the pairs' own tests, with q in parts of their share of the rate; p and q of a pair that its module
    alone carries are the module's.
    """

    def __init__(self, own: BlockScreen, added: _Listed, tiles: Sequence[PairTiles], fdr: float) -> None:
        self._own = own
        self._added = added
        self._widths = np.array([pair.y.n_features for pair in tiles])
        self._fdr = fdr

    def columns(self, r: FloatArray) -> dict[str, NDArray[Any]]:
        """Figures of the pairs that a module alone carries, whose own correlations are ``r``."""
        added = self._added
        return {
            "pair_index": added.which,
            "i": added.i,
            "j": added.j,
            "r": r,
            "log_p": added.log_p,
            "q": added.q,
            "q_block": added.q,
            "support": np.full(r.size, "module"),
        }

    def figures(self, pair_index: ArrayLike, i: ArrayLike, j: ArrayLike) -> PairFigures:
        """Figures of the pairs of feature ``i`` of the first block and ``j`` of the second.

        Raises
        ------
        NumericsError
            When there is no such pair of blocks or feature.
        """
        own = self._own.lookup(pair_index, i, j)
        p, q, q_block = own.p.copy(), self._of_pairs(own.q), self._of_pairs(own.q_block)
        which, first, second = (np.asarray(a, dtype=np.int64) for a in np.broadcast_arrays(pair_index, i, j))
        place = self._added.place(which.ravel(), (first * self._widths[which] + second).ravel())
        here = (place >= 0).reshape(p.shape)
        at = place[place >= 0]
        p[here] = p_from_log(self._added.log_p[at])
        q[here] = q_block[here] = self._added.q[at]
        return PairFigures(own.r, p, q, q_block)

    def _of_pairs(self, q: FloatArray) -> FloatArray:
        """Return q in parts of the pairs' share; at most the rate for those that pass, above it for the others."""
        shared = np.minimum(q / PAIR_SHARE, 1.0)
        return np.where(q <= self._own.fdr, np.minimum(shared, self._fdr), shared)
