"""Edges of two sides rewired at random, every feature keeping its number of edges."""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np
from numpy.typing import NDArray

IndexArray = NDArray[np.intp]

Chain = list[set[int]]


def rewired(pairs: IndexArray, *, samples: int, seed: np.random.SeedSequence) -> Iterator[IndexArray]:
    """Yield rewired versions of the edges between two sides.

    Two features of the smaller side trade the partners that only one of them has, at random, each keeping its number
    (Strona et al. 2014); one round is as many trades as that side has features. The chain of rounds leads to all ways
    of wiring alike (Carstens 2015). It starts at the edges as they are and runs a random part of its length backwards
    and the rest forwards, so that a p counted over it is exact however slowly it mixes (Besag & Clifford 1989).

    Parameters
    ----------
    pairs : ndarray of shape (edges, 2)
        Places of both ends, counted on each side by itself; each edge once.
    samples : int
    seed : SeedSequence

    Yields
    ------
    ndarray of shape (edges, 2)

    References
    ----------
    Besag J, Clifford P (1989). Generalized Monte Carlo significance tests. Biometrika 76:633.

    Carstens CJ (2015). Proof of uniform sampling of binary matrices with fixed row sums and column sums for the fast
    Curveball algorithm. Phys Rev E 91:042812.

    Strona G, Nappo D, Boccacci F, Fattorini S, San-Miguel-Ayanz J (2014). A fast and unbiased procedure to randomize
    ecological binary matrices with fixed row and column totals. Nat Commun 5:4114.
    """
    random = np.random.default_rng(seed)
    flipped = np.unique(pairs[:, 0]).size > np.unique(pairs[:, 1]).size
    ends = pairs[:, ::-1] if flipped else pairs
    rows, which = np.unique(ends[:, 0], return_inverse=True)
    backwards = int(random.integers(0, samples + 1))
    for length in (backwards, samples - backwards):
        chain: Chain = [set(ends[which == row, 1].tolist()) for row in range(rows.size)]
        for _ in range(length):
            _round(chain, random)
            found = _pairs(chain, rows)
            yield found[:, ::-1] if flipped else found


def _round(chain: Chain, random: np.random.Generator) -> None:
    """Do as many trades as there are features."""
    if len(chain) < 2:
        return
    first = random.integers(0, len(chain), len(chain))
    second = (first + random.integers(1, len(chain), len(chain))) % len(chain)
    for a, b in zip(first.tolist(), second.tolist(), strict=True):
        only_a, only_b = chain[a] - chain[b], chain[b] - chain[a]
        if not only_a or not only_b:
            continue
        traded = sorted(only_a | only_b)
        order = random.permutation(len(traded)).tolist()
        taken = {traded[place] for place in order[: len(only_a)]}
        common = chain[a] & chain[b]
        chain[a], chain[b] = common | taken, common | (only_a | only_b) - taken


def _pairs(chain: Chain, rows: IndexArray) -> IndexArray:
    """Return the edges of a chain's state."""
    ends = [sorted(partners) for partners in chain]
    left = np.repeat(rows, [len(partners) for partners in ends])
    return np.column_stack([left, np.array([one for partners in ends for one in partners], dtype=np.intp)])
