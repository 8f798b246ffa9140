"""Cross-layer correlation of all pairs of features, with exact false-discovery rates.

Every pair of features of two blocks is tested by its Pearson or Spearman correlation after the nuisance was
removed from both (Spearman: from the ranks), ``t`` with ``n - c - 1`` degrees of freedom. A pair is an edge
when its q over all pairs of the screen and its q over the pairs of its two blocks are both at or under the
rate: pooled alone, a pair of blocks with many associations pays for one that has none.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass, field
from threading import Lock
from typing import Literal

import numpy as np
from numpy.typing import ArrayLike, NDArray

from workbench.engine.nuisance import Nuisance
from workbench.engine.pairs.discovery import discover
from workbench.engine.pairs.found import Discovery, Request, strengths
from workbench.engine.pairs.intervals import selected_error, selected_interval
from workbench.engine.pairs.lookup import AnyPairs, Lookup, PairFigures
from workbench.engine.pairs.tiles import Limits, PairTiles
from workbench.engine.pairs.unit_rows import Columns, FloatArray, IndexArray, UnitRows, check_side
from workbench.engine.tails import p_from_log
from workbench.errors import NumericsError

Correlation = Literal["pearson", "spearman"]
Progress = Callable[[int, int], None]

#: Expected share of the reported intervals that miss their correlation, at most.
FALSE_COVERAGE = 0.05


@dataclass(frozen=True, eq=False)
class BlockPair:
    """Two blocks to be screened against each other, on the samples that they share.

    Attributes
    ----------
    name : str
        Used in messages and results.
    x, y : array or HDF5 dataset of shape (n_samples, n_features)
        Rows are the same samples in the same order. Datasets are read in slices of columns.
    nuisance : ndarray of shape (n_samples, n_columns), Nuisance or None
        What is removed from both besides the intercept.
    x_private, y_private : Nuisance or None
        What is removed from one side alone, ``nuisance`` and intercept among it. Costs no degrees of freedom:
        right when it was found without a look at the other side.
    damping : pair of ndarray, or None
        A factor in (0, 1] for each feature of ``x`` and of ``y``: p is that of the correlation times both,
        for features whose samples tell less than their number. ``r`` is given undamped; ``minimum_r`` is
        asked of the damped one.
    """

    name: str
    x: Columns
    y: Columns
    nuisance: FloatArray | Nuisance | None = None
    x_private: Nuisance | None = None
    y_private: Nuisance | None = None
    damping: tuple[FloatArray, FloatArray] | None = None


@dataclass(frozen=True, eq=False)
class BlockScreen:
    """Edges of a screen over several pairs of blocks, strongest evidence first.

    Edges are ordered by p (by |r| within a pair of blocks; on logarithms, so that nothing ties by underflow).
    Correlations that agree to 12 decimals tie; ties are ordered by pair of blocks, first and second feature.

    Attributes
    ----------
    names : tuple of str
        The pairs of blocks.
    pair_index, i, j : ndarray of int, shape (n_edges,)
        Pair of blocks, feature of its first and of its second block.
    r, p, log_p, q, q_block : ndarray of shape (n_edges,)
        Correlation, two-sided p (never under 2.2e-308; ``log_p`` is its natural logarithm without that
        floor), false-discovery rates over all pairs and over the pairs of these two blocks.
    r_low, r_high : ndarray of shape (n_edges,)
        Fisher-z interval at the false-coverage-adjusted rate (:func:`selected_interval`).
    n, df : ndarray of int, shape (n_edges,)
        Samples and degrees of freedom of the test.
    tested, untestable : tuple of int
        Pairs of features tested, and those that could not be (a feature with a gap, or constant after the
        nuisance), for each pair of blocks.
    passed : int
        Edges before ``maximum_edges`` cut them.
    truncated : int or None
        ``passed`` when edges were cut, None when all are here.
    interval_error : float
        One minus the coverage of each single interval: 0.05 x edges / pairs tested, so that at most 5 % of
        the intervals given are expected to miss.
    correlation, fdr, minimum_r, maximum_edges
        As asked for.
    """

    names: tuple[str, ...]
    pair_index: IndexArray
    i: IndexArray
    j: IndexArray
    r: FloatArray
    p: FloatArray
    log_p: FloatArray
    q: FloatArray
    q_block: FloatArray
    r_low: FloatArray
    r_high: FloatArray
    n: IndexArray
    df: IndexArray
    tested: tuple[int, ...]
    untestable: tuple[int, ...]
    passed: int
    truncated: int | None
    interval_error: float
    correlation: Correlation
    fdr: float
    minimum_r: float
    maximum_edges: int | None
    _lookup: AnyPairs = field(repr=False)

    @property
    def n_edges(self) -> int:
        """Number of edges given."""
        return int(self.i.size)

    def lookup(self, pair_index: ArrayLike, i: ArrayLike, j: ArrayLike) -> PairFigures:
        """Correlation, p, q and q_block of any pairs, whether they passed or not.

        The arguments are broadcast against each other. The q of edges are the screen's own; those of weaker
        pairs are close upper bounds from a histogram, made in one more pass when first needed. The blocks
        (open datasets too) must still be there and unchanged.

        Raises
        ------
        NumericsError
            When there is no such pair of blocks or feature.
        """
        return self._lookup.figures(pair_index, i, j)


@dataclass(frozen=True, eq=False)
class PairScreen:
    """Edges between two blocks, strongest first: largest |r|, ties by first and second feature.

    The attributes are those of :class:`BlockScreen` for one pair of blocks; ``n``, ``df``, ``tested`` and
    ``untestable`` are single numbers.
    """

    i: IndexArray
    j: IndexArray
    r: FloatArray
    p: FloatArray
    log_p: FloatArray
    q: FloatArray
    r_low: FloatArray
    r_high: FloatArray
    n: int
    df: int
    tested: int
    untestable: int
    passed: int
    truncated: int | None
    interval_error: float
    correlation: Correlation
    fdr: float
    minimum_r: float
    maximum_edges: int | None
    _lookup: AnyPairs = field(repr=False)

    @property
    def n_edges(self) -> int:
        """Number of edges given."""
        return int(self.i.size)

    def lookup(self, i: ArrayLike, j: ArrayLike) -> PairFigures:
        """Correlation, p and q of any pairs of features; see :meth:`BlockScreen.lookup`."""
        return self._lookup.figures(0, i, j)


def screen_pairs(
    x: Columns,
    y: Columns,
    *,
    fdr: float = 0.05,
    correlation: Correlation = "pearson",
    nuisance: FloatArray | Nuisance | None = None,
    minimum_r: float = 0.0,
    maximum_edges: int | None = None,
    progress: Progress | None = None,
    limits: Limits | None = None,
) -> PairScreen:
    """Edges between the features of two blocks.

    Parameters
    ----------
    x, y : array or HDF5 dataset of shape (n_samples, n_features)
        The same samples in the same order.
    fdr : float
        False-discovery rate, between 0 and 1.
    correlation : {"pearson", "spearman"}
    nuisance : ndarray of shape (n_samples, n_columns), Nuisance, optional
        Removed from both blocks besides the intercept.
    minimum_r : float
        Edges need at least this |r|; from 0 to below 1.
    maximum_edges : int, optional
        The strongest so many edges are given; the result says how many passed.
    progress : callable, optional
        Called with tiles done and tiles planned (more are planned when many pairs pass).
    limits : Limits, optional
        Bounds of memory; they change no result.

    Raises
    ------
    NumericsError
        When shapes or values do not allow the screen, or more edges pass than can be returned at once.

    References
    ----------
    Benjamini & Hochberg 1995, J R Stat Soc B 57:289; Benjamini & Yekutieli 2005, J Am Stat Assoc 100:71.

    Examples
    --------
    >>> rng = np.random.default_rng(0)
    >>> x, y = rng.normal(size=(40, 30)), rng.normal(size=(40, 20))
    >>> y[:, 7] += 2.0 * x[:, 3]
    >>> screen = screen_pairs(x, y)
    >>> screen.i, screen.j, screen.tested
    (array([3]), array([7]), 600)
    """
    screen = screen_blocks(
        [BlockPair("x and y", x, y, nuisance)],
        fdr=fdr,
        correlation=correlation,
        minimum_r=minimum_r,
        maximum_edges=maximum_edges,
        progress=progress,
        limits=limits,
    )
    shared = {name: getattr(screen, name) for name in PairScreen.__dataclass_fields__}
    n = int(x.shape[0])
    shared |= {"n": n, "tested": screen.tested[0], "untestable": screen.untestable[0]}
    return PairScreen(**(shared | {"df": n - _nuisance_of(nuisance, n).rank - 1}))


def screen_blocks(
    pairs: Sequence[BlockPair],
    *,
    fdr: float = 0.05,
    correlation: Correlation = "pearson",
    minimum_r: float = 0.0,
    maximum_edges: int | None = None,
    progress: Progress | None = None,
    limits: Limits | None = None,
) -> BlockScreen:
    """Edges between the features of several pairs of blocks, judged together.

    Parameters
    ----------
    pairs : sequence of BlockPair
        Each with its own samples and nuisance; at least one.
    fdr, correlation, minimum_r, maximum_edges, progress, limits
        As for :func:`screen_pairs`.

    Raises
    ------
    NumericsError
        When shapes or values do not allow the screen, or more edges pass than can be returned at once.

    Examples
    --------
    >>> rng = np.random.default_rng(1)
    >>> x, y, z = (rng.normal(size=(30, 8)) for _ in range(3))
    >>> screen = screen_blocks([BlockPair("x and y", x, y), BlockPair("x and z", x, z + x)])
    >>> sorted(set(screen.pair_index.tolist())), screen.tested
    ([1], (64, 64))
    """
    request = _check_request(fdr, correlation, minimum_r, maximum_edges)
    tiles = [pair_tiles(pair, correlation, limits or Limits()) for pair in pairs]
    return screen_tiles(
        tuple(pair.name for pair in pairs),
        tiles,
        fdr=request.fdr,
        correlation=correlation,
        minimum_r=request.minimum_r,
        maximum_edges=request.maximum_edges,
        progress=progress,
    )


def screen_tiles(
    names: tuple[str, ...],
    tiles: Sequence[PairTiles],
    *,
    fdr: float,
    correlation: Correlation,
    minimum_r: float,
    maximum_edges: int | None,
    progress: Progress | None,
) -> BlockScreen:
    """Edges among the entries of tiles, whatever these are; arguments as for :func:`screen_blocks`.

    Raises
    ------
    NumericsError
        When there are no tiles, or more edges pass than can be returned at once.
    """
    request = _check_request(fdr, correlation, minimum_r, maximum_edges)
    if not tiles:
        raise NumericsError("no pair of blocks to screen; give at least one")
    if progress is not None:
        _count_progress(tiles, progress)
    discovery = discover(tiles, request)
    for pair in tiles:
        pair.release()
    return _screen(names, tiles, discovery, request, correlation)


def _check_request(fdr: float, correlation: str, minimum_r: float, maximum_edges: int | None) -> Request:
    if not 0.0 < fdr < 1.0:
        raise NumericsError(f"fdr is {fdr}; it must lie between 0 and 1")
    if correlation not in ("pearson", "spearman"):
        raise NumericsError(f"correlation is {correlation!r}; allowed: 'pearson', 'spearman'")
    if not 0.0 <= minimum_r < 1.0:
        raise NumericsError(f"minimum_r is {minimum_r}; it must be at least 0 and below 1")
    if maximum_edges is not None and maximum_edges < 1:
        raise NumericsError(f"maximum_edges is {maximum_edges}; give at least 1, or None for all")
    return Request(float(fdr), float(minimum_r), maximum_edges)


def _nuisance_of(nuisance: FloatArray | Nuisance | None, n: int) -> Nuisance:
    return nuisance if isinstance(nuisance, Nuisance) else Nuisance.of(nuisance, n)


def pair_tiles(pair: BlockPair, correlation: str, limits: Limits) -> PairTiles:
    """Tiles of a pair of blocks.

    Raises
    ------
    NumericsError
        When shapes differ or no degree of freedom is left.
    """
    check_side(pair.x, None, f"the first block of {pair.name!r}")
    n = int(pair.x.shape[0])
    check_side(pair.y, n, f"the second block of {pair.name!r}")
    nuisance = _nuisance_of(pair.nuisance, n)
    if nuisance.n_samples != n:
        raise NumericsError(
            f"{pair.name!r} has {n} samples and its nuisance {nuisance.n_samples}; give the same"
        )
    if n - nuisance.rank < 2:
        raise NumericsError(
            f"{pair.name!r} has {n} samples and a nuisance of {nuisance.rank} dimensions with the intercept: "
            "no degree of freedom is left for a correlation; remove fewer columns, or add samples"
        )
    ranks = correlation == "spearman"
    damping = pair.damping or (None, None)
    sides = ((pair.x, pair.x_private, damping[0]), (pair.y, pair.y_private, damping[1]))
    x, y = (UnitRows(side, own or nuisance, ranks=ranks, damping=factor) for side, own, factor in sides)
    return PairTiles(x, y, n, nuisance.rank, limits)


def _count_progress(tiles: Sequence[PairTiles], progress: Progress) -> None:
    """Report every tile; passes beyond the first raise the number planned by another pass."""
    once = sum(pair.n_tiles for pair in tiles)
    done, turn = 0, Lock()

    def tick() -> None:
        nonlocal done
        with turn:
            done += 1
            progress(done, once * -(-done // once))

    for pair in tiles:
        pair.tick = tick


def _screen(
    names: tuple[str, ...],
    tiles: Sequence[PairTiles],
    discovery: Discovery,
    request: Request,
    correlation: Correlation,
) -> BlockScreen:
    """Select the edges, bring all pairs of blocks into one order, and cut."""
    kept = [_edges_of(discovery, k, request.floor_r) for k in range(len(tiles))]
    which = np.repeat(np.arange(len(tiles)), [keep.size for keep in kept])
    keys, r, log_p = (
        np.concatenate(
            [getattr(found, name)[keep] for found, keep in zip(discovery.found, kept, strict=True)]
        )
        for name in ("keys", "r", "log_p")
    )
    passed = which.size if discovery.passed is None else discovery.passed
    order = _order(which, keys, r, tiles)[: request.maximum_edges]
    which, keys, r, log_p = which[order], keys[order], r[order], log_p[order]
    widths, n, ranks = (np.array([value(pair) for pair in tiles]) for value in _SIZES)
    tested = tuple(pair.tests for pair in tiles)
    error = selected_error(which.size, max(sum(tested), 1), FALSE_COVERAGE)
    i, j = np.divmod(keys, widths[which])
    r, low, high = _given(r, which, (i, j), tiles, error, correlation == "spearman")
    return BlockScreen(
        names=names,
        pair_index=which,
        i=i,
        j=j,
        r=r,
        p=p_from_log(log_p),
        log_p=log_p,
        q=p_from_log(discovery.pooled.exact_log_q(log_p)),
        q_block=_own_q(discovery, which, log_p),
        r_low=low,
        r_high=high,
        n=n[which],
        df=(n - ranks - 1)[which],
        tested=tested,
        untestable=tuple(pair.pairs - pair.tests for pair in tiles),
        passed=passed,
        truncated=passed if passed > which.size else None,
        interval_error=error,
        correlation=correlation,
        fdr=request.fdr,
        minimum_r=request.minimum_r,
        maximum_edges=request.maximum_edges,
        _lookup=Lookup(tiles, discovery, request.fdr),
    )


_SIZES: tuple[Callable[[PairTiles], int], ...] = (lambda t: t.y.n_features, lambda t: t.n, lambda t: t.rank)


def _edges_of(discovery: Discovery, k: int, floor_r: float) -> NDArray[np.intp]:
    """Positions of the candidates of one pair of blocks that are edges."""
    found = discovery.found[k]
    threshold = min(discovery.pooled.threshold, discovery.single[k].threshold)
    return np.flatnonzero((found.log_p <= threshold) & (np.abs(found.r) >= floor_r))


def _order(which: IndexArray, keys: IndexArray, r: FloatArray, tiles: Sequence[PairTiles]) -> IndexArray:
    """Bring edges of several pairs of blocks into one order; within one pair they are ordered already."""
    if which.size == 0 or which[0] == which[-1]:
        return np.arange(which.size)
    log_p = np.concatenate([pair.log_p(strengths(r[which == k])) for k, pair in enumerate(tiles)])
    return np.lexsort((keys, which, log_p))


def _own_q(discovery: Discovery, which: IndexArray, log_p: FloatArray) -> FloatArray:
    q = np.empty(which.size)
    for k, family in enumerate(discovery.single):
        here = which == k
        q[here] = p_from_log(family.exact_log_q(log_p[here]))
    return q


def _given(
    r: FloatArray,
    which: IndexArray,
    ends: tuple[IndexArray, IndexArray],
    tiles: Sequence[PairTiles],
    error: float,
    spearman: bool,
) -> tuple[FloatArray, FloatArray, FloatArray]:
    """Correlations without their damping, and both ends of their intervals."""
    given = np.empty(r.size)
    for k, pair in enumerate(tiles):
        here = which == k
        given[here] = np.clip(r[here] / pair.damping(ends[0][here], ends[1][here]), -1.0, 1.0)
    return given, *edge_intervals(given, which, ends, tiles, error, spearman=spearman)


def edge_intervals(
    r: FloatArray,
    which: IndexArray,
    ends: tuple[IndexArray, IndexArray],
    tiles: Sequence[PairTiles],
    error: float,
    *,
    spearman: bool,
) -> tuple[FloatArray, FloatArray]:
    """Both ends of the intervals of edges of several pairs of blocks at one ``error``.

    Parameters
    ----------
    r : ndarray of shape (n_edges,)
        Correlations without their damping.
    which : ndarray of int, shape (n_edges,)
        Pair of blocks of each edge.
    ends : pair of ndarray of int
        Features of its first and of its second block.
    tiles : sequence of PairTiles
    error, spearman
        As for :func:`~workbench.engine.pairs.intervals.selected_interval`.
    """
    low, high = np.empty((2, r.size))
    for k, pair in enumerate(tiles):
        here = which == k
        damping = pair.damping(ends[0][here], ends[1][here])
        low[here], high[here] = selected_interval(
            r[here], pair.n, pair.rank, error, spearman=spearman, damping=damping
        )
    return low, high
