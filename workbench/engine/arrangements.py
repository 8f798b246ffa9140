"""Arrangements of samples for a permutation test: all of them where they are few, else drawn."""

from __future__ import annotations

import math
from collections.abc import Iterator
from itertools import islice, permutations

import numpy as np
from numpy.typing import NDArray

IndexArray = NDArray[np.intp]


def count_arrangements(size: int, limit: int) -> int:
    """``size!``, or ``limit`` when that is smaller.

    Examples
    --------
    >>> count_arrangements(4, 1000), count_arrangements(100, 1000)
    (24, 1000)
    """
    return min(math.factorial(min(size, 20)), limit)


def arrangement_batches(
    size: int, wanted: int, every: bool, seed: np.random.SeedSequence, batch: int
) -> Iterator[IndexArray]:
    """Batches of arrangements of ``range(size)``, the identity not among the enumerated ones.

    Parameters
    ----------
    size : int
    wanted : int
        How many in all.
    every : bool
        Enumerate them in lexicographic order instead of drawing them.
    seed : SeedSequence
        Arrangement ``i`` is drawn from the seed and ``i``, so that it does not depend on the batches.
    batch : int
        Arrangements at a time; the last batch may be smaller.

    Yields
    ------
    ndarray of shape (up to batch, size)

    Examples
    --------
    >>> [len(part) for part in arrangement_batches(3, 5, True, np.random.SeedSequence(0), 4)]
    [4, 1]
    """
    source = islice(permutations(range(size)), 1, None) if every else _drawn(size, seed)
    chosen = islice(source, wanted)
    while part := list(islice(chosen, batch)):
        yield np.array(part, dtype=np.intp)


def _drawn(size: int, seed: np.random.SeedSequence) -> Iterator[IndexArray]:
    i = 0
    while True:
        key = (*seed.spawn_key, i)
        yield np.random.default_rng(np.random.SeedSequence(seed.entropy, spawn_key=key)).permutation(size)
        i += 1
