"""Correlations of all pairs of two blocks, a tile at a time: collected in bands, counted, refined.

Tiles are single-precision products that only point at candidates. An entry differs from the correlation by
at most ``(n + 2) 2^-24`` (Higham 2002, section 3.1: rounding of the entries and of the sum of products,
whatever its order, with ``sum |x_i y_i| <= 1``) and the bound that it is compared with by ``2^-25``, so a
band widened by ``(n + 3) 2^-24`` misses nothing. What is reported is recomputed in double precision from the
two rows alone.

References
----------
Higham 2002, Accuracy and Stability of Numerical Algorithms, 2nd ed., SIAM.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator, Sequence
from dataclasses import dataclass, field
from typing import Any

import numpy as np
from numpy.typing import ArrayLike, NDArray

from workbench.engine.pairs.unit_rows import FloatArray, IndexArray, UnitRows
from workbench.engine.pairs.workers import share_out
from workbench.engine.tails import critical_r, log_p_value

#: Above this many samples the margin of single precision is too wide and tiles are double precision.
SINGLE_PRECISION_SAMPLES = 4096
#: Steps of the histogram of |r| between 0 and 1.
STEPS = 65_536
_CHUNK = 250_000


@dataclass(frozen=True)
class Limits:
    """Sizes that bound memory; they change no result.

    Attributes
    ----------
    outer, inner : int
        Features of the two sides in one tile.
    candidates : int
        Pairs that are collected at once, unless so many edges are asked for.
    held_bytes : int
        Memory for the prepared rows of the two blocks at work; a block that does not fit is read again in
        every pass.
    expected : int
        Pairs that the first pass would collect if no pair of features were associated.
    """

    outer: int = 1000
    inner: int = 2500
    candidates: int = 4_000_000
    held_bytes: int = 256_000_000
    expected: int = 200_000


@dataclass(eq=False)
class PairTiles:
    """Two blocks of the same samples, ready to be multiplied tile by tile.

    Attributes
    ----------
    x, y : UnitRows
    n, rank : int
        Samples, and dimensions of the nuisance with the intercept.
    limits : Limits
    tick : callable
        Called after each tile.
    """

    x: UnitRows
    y: UnitRows
    n: int
    rank: int
    limits: Limits
    tick: Callable[[], None] = field(default=lambda: None)

    @property
    def df(self) -> int:
        """Degrees of freedom ``n - c - 1`` of each correlation."""
        return self.n - self.rank - 1

    @property
    def pairs(self) -> int:
        """Number of pairs, those that cannot be tested among them."""
        return self.x.n_features * self.y.n_features

    @property
    def tests(self) -> int:
        """Number of pairs that can be tested; known after the first pass."""
        return int(np.count_nonzero(self.x.testable)) * int(np.count_nonzero(self.y.testable))

    @property
    def single(self) -> bool:
        """Whether tiles are single precision."""
        return self.n <= SINGLE_PRECISION_SAMPLES

    @property
    def margin(self) -> float:
        """Bound of a tile entry's error, and of that of a critical correlation (1e-9)."""
        return (self.n + 3) * (2.0**-24 if self.single else 2.0**-53) + 1e-9

    @property
    def n_tiles(self) -> int:
        """Tiles of one pass."""
        outer, inner = self._sides()
        return -(-outer.n_features // self.limits.outer) * -(-inner.n_features // self.limits.inner)

    def log_p(self, r: ArrayLike) -> FloatArray:
        """Log of the two-sided p of tile entries; smaller for a larger size."""
        return log_p_value(r, self.df)

    def critical(self, p: ArrayLike) -> FloatArray:
        """Size of the tile entry whose two-sided p is ``p``."""
        return critical_r(p, self.df)

    def able(self, i: IndexArray, j: IndexArray) -> NDArray[np.bool_]:
        """Which pairs can be tested; known once every row was made."""
        return np.asarray(self.x.testable[i] & self.y.testable[j])

    def exact(self, i: IndexArray, j: IndexArray) -> FloatArray:
        """Tile entries of some pairs with their sign, in double precision."""
        r: FloatArray = np.einsum("kn,kn->k", self.x.rows_at(i), self.y.rows_at(j))
        return r

    @property
    def n_shares(self) -> int:
        """Shares into which the tiles of one pass can be divided."""
        return -(-self._sides()[0].n_features // self.limits.outer)

    def damping(self, i: IndexArray, j: IndexArray) -> FloatArray:
        """Factor by which the correlations of pairs are damped in tiles; 1 where nothing is."""
        factor = np.ones(i.size)
        for side, place in ((self.x, i), (self.y, j)):
            if side.damping is not None:
                factor *= side.damping[place]
        return factor

    def hold(self) -> None:
        """Prepare and keep the sides that fit into memory."""
        room = self.limits.held_bytes
        for side in sorted((self.x, self.y), key=lambda s: s.n_bytes):
            if side.n_bytes <= room:
                side.hold()
                room -= side.n_bytes

    def release(self) -> None:
        """Forget the rows that were kept."""
        self.x.release()
        self.y.release()

    def _sides(self) -> tuple[UnitRows, UnitRows]:
        """Outer and inner side: the larger one is outer, so that what is not held is made once a pass."""
        return (self.x, self.y) if self.x.n_bytes >= self.y.n_bytes else (self.y, self.x)

    def tiles(self, part: int = 0, parts: int = 1) -> Iterator[tuple[int, int, NDArray[Any]]]:
        """First outer and inner feature of each tile, with its |r|; the array is overwritten by the next.

        Of ``parts`` shares of the tiles, which several threads may walk at once, the one numbered ``part``.
        """
        outer, inner = self._sides()
        kind = np.float32 if self.single else np.float64
        wide, high = self.limits.inner, self.limits.outer
        room = np.empty(min(high, outer.n_features) * min(wide, inner.n_features), dtype=kind)
        kept = inner.held.astype(kind) if inner.held is not None else None
        for a in range(part * high, outer.n_features, parts * high):
            left = outer.rows(a, min(a + high, outer.n_features)).astype(kind)
            for b in range(0, inner.n_features, wide):
                stop = min(b + wide, inner.n_features)
                right = kept[b:stop] if kept is not None else inner.rows(b, stop).astype(kind)
                tile = room[: len(left) * len(right)].reshape(len(left), len(right))
                np.matmul(left, right.T, out=tile)
                np.abs(tile, out=tile)
                yield a, b, tile
                self.tick()

    def keys(self, a: int, b: int, flat: IndexArray, width: int) -> IndexArray:
        """Keys ``i q + j`` of the entries at the flat positions ``flat`` of a tile ``width`` wide."""
        row, column = np.divmod(flat, width)
        i, j = (a + row, b + column) if self._sides()[0] is self.x else (b + column, a + row)
        key: IndexArray = i * self.y.n_features + j
        return key


@dataclass(frozen=True)
class Band:
    """Tile entries with ``low <= |r| < high`` are collected, those at or above ``high`` counted.

    With more than ``most`` in the band nothing is collected, only counted.
    """

    low: float
    high: float = np.inf
    most: float = np.inf


@dataclass(frozen=True, eq=False)
class Caught:
    """What a band held.

    Attributes
    ----------
    keys, sizes : ndarray
        Pairs in the band as ``i q + j``, and their |r| as in the tile.
    above : int
        Entries at or above the band.
    overflow : bool
        Whether there were more pairs in the band than asked for; they are then not given.
    """

    keys: IndexArray
    sizes: NDArray[Any]
    above: int
    overflow: bool


def scan(pair: PairTiles, bands: Sequence[Band]) -> list[Caught]:
    """Collect and count the pairs of two blocks in bands of |r|, in one pass over the tiles."""

    def draw(part: int, parts: int) -> list[_Net]:
        nets = [_Net(pair, band) for band in bands]
        for a, b, tile in pair.tiles(part, parts):
            for net in nets:
                net.draw(a, b, tile)
        return nets

    shares = share_out(draw, pair.n_shares)
    return [_Net.caught([nets[k] for nets in shares]) for k in range(len(bands))]


def tail_histogram(pair: PairTiles) -> IndexArray:
    """Numbers of testable pairs with a tile entry ``|r| >= k / STEPS``, for k from 0 to ``STEPS + 1``."""

    def count(part: int, parts: int) -> IndexArray:
        counts = np.zeros(STEPS + 2, dtype=np.int64)
        for _, _, tile in pair.tiles(part, parts):
            flat, kind = tile.reshape(-1), tile.dtype.type
            for start in range(0, flat.size, _CHUNK):
                sizes = np.minimum(flat[start : start + _CHUNK], kind(1.0 + 1.0 / STEPS))
                counts += np.bincount((sizes * kind(STEPS)).astype(np.intp), minlength=STEPS + 2)
        return counts

    counts = np.sum(share_out(count, pair.n_shares), axis=0)
    counts[0] -= pair.pairs - pair.tests
    tails: IndexArray = np.cumsum(counts[::-1])[::-1]
    return tails


def refine(pair: PairTiles, keys: IndexArray) -> FloatArray:
    """Correlations of the pairs with the given keys, in double precision, clipped to -1 and 1.

    A size within ``n 2^-53`` of 1 is 1: rounding alone separates it from 1.
    """
    i, j = np.divmod(keys, pair.y.n_features)
    order = _reading_order(pair, i, j)
    r = np.empty(keys.size)
    batch = max(1, _batch_numbers(pair) // pair.n)
    for start in range(0, keys.size, batch):
        part = slice(start, start + batch) if order is None else order[start : start + batch]
        r[part] = pair.exact(i[part], j[part])
    sure = np.abs(r) >= 1.0 - pair.n * 2.0**-53
    r[sure] = np.sign(r[sure])
    return r


class _Net:
    """What one band holds so far."""

    def __init__(self, pair: PairTiles, band: Band) -> None:
        self._pair = pair
        self._band = band
        self._above = self._inside = 0
        self._keys: list[IndexArray] = []
        self._sizes: list[NDArray[Any]] = []
        self._room = np.empty(pair.limits.outer * pair.limits.inner, dtype=np.bool_)

    def draw(self, a: int, b: int, tile: NDArray[Any]) -> None:
        """Add a tile that begins at the outer feature ``a`` and the inner feature ``b``."""
        band = self._band
        beyond = None
        if band.high < np.inf:
            beyond = tile >= tile.dtype.type(band.high)
            self._above += int(np.count_nonzero(beyond))
        if band.low >= band.high or self._inside > band.most:
            return
        inside = self._room[: tile.size].reshape(tile.shape)
        np.greater_equal(tile, tile.dtype.type(band.low), out=inside)
        if beyond is not None:
            inside ^= beyond
        place = np.flatnonzero(inside)
        self._inside += place.size
        self._keys.append(self._pair.keys(a, b, place, tile.shape[1]))
        self._sizes.append(tile.reshape(-1)[place])

    @staticmethod
    def caught(nets: Sequence[_Net]) -> Caught:
        """Everything drawn by the nets of one band, or the counts alone when it was too much."""
        above, inside = sum(net._above for net in nets), sum(net._inside for net in nets)
        keys = [part for net in nets for part in net._keys]
        sizes = [part for net in nets for part in net._sizes]
        if not keys or inside > nets[0]._band.most:
            too_many = inside > nets[0]._band.most
            return Caught(np.empty(0, dtype=np.int64), np.empty(0), above, too_many)
        return Caught(np.concatenate(keys), np.concatenate(sizes), above, False)


def _batch_numbers(pair: PairTiles) -> int:
    """Numbers gathered at once on each side: few for rows that are held, many for rows made anew."""
    held = pair.x.held is not None and pair.y.held is not None
    return _CHUNK if held else pair.limits.held_bytes // 32


def _reading_order(pair: PairTiles, i: IndexArray, j: IndexArray) -> IndexArray | None:
    """Order in which a side that is not held is read once from front to end; None when it does not matter."""
    if pair.x.held is not None and pair.y.held is not None:
        return None
    scattered = j if pair.y.held is None else i
    return np.argsort(scattered, kind="stable")
