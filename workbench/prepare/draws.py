"""Reproducible draws that belong to a cell, not to a place in a stream.

The draw of a cell depends on the seed, the name of its sample and the name of its feature alone:
which other samples or features are there, and in which order, changes nothing. Names are hashed once
(BLAKE2b), pairs of hashes are mixed by a counter-based generator (the finaliser of SplitMix64:
Steele, Lea & Flood 2014, OOPSLA, 453-472), all cells at a time.
"""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from hashlib import blake2b

import numpy as np
from numpy.typing import NDArray

Words = NDArray[np.uint64]

_GOLDEN = np.uint64(0x9E3779B97F4A7C15)
_MIX_1 = np.uint64(0xBF58476D1CE4E5B9)
_MIX_2 = np.uint64(0x94D049BB133111EB)


def name_keys(names: Iterable[str], seed: int, purpose: str) -> Words:
    """Return one 64-bit key per name.

    >>> name_keys(["S1", "S2"], 1, "sample")[1] == name_keys(["S2"], 1, "sample")[0]
    np.True_
    """
    person = blake2b(f"{seed}/{purpose}".encode(), digest_size=32).digest()
    digests = b"".join(blake2b(name.encode(), key=person, digest_size=8).digest() for name in names)
    return np.frombuffer(digests, dtype="<u8").astype(np.uint64)


def _mix(words: Words) -> Words:
    words = (words ^ (words >> np.uint64(30))) * _MIX_1
    words = (words ^ (words >> np.uint64(27))) * _MIX_2
    return words ^ (words >> np.uint64(31))


def cell_uniforms(samples: Words, features: Words) -> NDArray[np.float64]:
    """Return a uniform number in (0, 1) for each pair of keys.

    Parameters
    ----------
    samples, features : uint64 ndarrays of shapes that broadcast
        Keys from :func:`name_keys`.

    Returns
    -------
    ndarray of the broadcast shape
        Midpoints of 2^52 equal cells: never 0, never 1.
    """
    words = _mix(_mix(samples + _GOLDEN) ^ _mix(features ^ _GOLDEN))
    return ((words >> np.uint64(12)).astype(np.float64) + 0.5) * 2.0**-52


def uniform_table(
    seed: int, samples: Sequence[str], features: Sequence[str], purpose: str
) -> NDArray[np.float64]:
    """Return the uniform number of every cell of a table, (n_samples, n_features), for one purpose.

    >>> whole = uniform_table(7, ["a", "b"], ["x", "y", "z"], "tail")
    >>> bool(np.all(whole[1:, ::2] == uniform_table(7, ["b"], ["x", "z"], "tail")))
    True
    """
    rows = name_keys(samples, seed, f"{purpose}/sample")
    columns = name_keys(features, seed, f"{purpose}/feature")
    return cell_uniforms(rows[:, None], columns[None, :])
