"""Coherence: both of its nulls give a uniform p, degrees survive rewiring, planted coherence is seen."""

from __future__ import annotations

import numpy as np
from scipy.stats import kstest

from workbench.pathways import permutation_p, permutations_allowed, rewired, rewiring_p, unit_columns


def random_edges(
    random: np.random.Generator, left: int = 40, right: int = 12, share: float = 0.3
) -> np.ndarray:
    return np.argwhere(random.random((left, right)) < share)


def degrees(pairs: np.ndarray) -> tuple[list[int], list[int]]:
    return tuple(np.bincount(pairs[:, side], minlength=40).tolist() for side in (0, 1))  # type: ignore[return-value]


def test_rewiring_keeps_every_degree_and_joins_no_pair_twice() -> None:
    pairs = random_edges(np.random.default_rng(1))
    found = list(rewired(pairs, samples=20, seed=np.random.SeedSequence(1)))
    assert len(found) == 20
    for one in found:
        assert degrees(one) == degrees(pairs)
        assert len({tuple(pair) for pair in one.tolist()}) == len(pairs)
    assert len({tuple(map(tuple, one.tolist())) for one in found}) == 20


def test_rewiring_visits_all_wirings_alike() -> None:
    """Three features of one, two and two edges with three of two, two and one: every wiring is equally frequent."""
    pairs = np.array([[0, 0], [1, 0], [1, 1], [2, 1], [2, 2]])
    seen: dict[tuple[tuple[int, int], ...], int] = {}
    for one in rewired(pairs, samples=6000, seed=np.random.SeedSequence(2)):
        state = tuple(sorted(map(tuple, one.tolist())))
        seen[state] = seen.get(state, 0) + 1
    counts = np.array(list(seen.values()))
    assert counts.sum() == 6000
    assert len(counts) == 5
    assert np.abs(counts / counts.mean() - 1).max() < 0.15


def test_the_rewiring_p_is_uniform_when_edges_know_nothing_of_sets() -> None:
    """300 random networks of 144 edges on average; sets share a quarter of the pairs."""
    p = []
    for seed in range(300):
        random = np.random.default_rng(seed)
        share = random.integers(0, 4, 40)[:, None] == random.integers(0, 4, 12)[None]
        pairs = random_edges(random)
        p.append(rewiring_p(pairs, share, samples=39, seed=np.random.SeedSequence(seed))[2])
    jittered = np.array(p) - np.random.default_rng(1).random(300) / 40
    assert kstest(jittered, "uniform").pvalue > 0.01


def test_the_permutation_p_is_uniform_when_layers_have_nothing_in_common() -> None:
    """300 studies of correlated features whose sets are those that go together inside each layer."""
    p = []
    for seed in range(300):
        random = np.random.default_rng(seed)
        sets = [np.repeat(np.arange(8), size) for size in (6, 3)]
        sides = [
            0.6 * random.normal(size=(25, 8))[:, which] + random.normal(size=(25, which.size))
            for which in sets
        ]
        x, y = (unit_columns(side - side.mean(axis=0)) for side in sides)
        share = sets[0][:, None] == sets[1][None]
        p.append(permutation_p(x, y, 250, share, permutations=39, seed=np.random.SeedSequence(seed))[2])
    jittered = np.array(p) - np.random.default_rng(1).random(300) / 40
    assert kstest(jittered, "uniform").pvalue > 0.01


def test_planted_coherence_is_seen_by_both() -> None:
    random = np.random.default_rng(5)
    factors = random.normal(size=(40, 6))
    sets = [np.repeat(np.arange(6), size) for size in (10, 4)]
    x, y = (unit_columns(factors[:, which] + random.normal(size=(40, which.size))) for which in sets)
    share = sets[0][:, None] == sets[1][None]
    pairs = np.argwhere(np.abs(x.T @ y) > 0.45)
    observed, expected, p = rewiring_p(pairs, share, samples=99, seed=np.random.SeedSequence(1))
    assert (p, observed > 3 * expected) == (0.01, True)
    strongest, by_chance, p = permutation_p(
        x, y, len(pairs), share, permutations=99, seed=np.random.SeedSequence(1)
    )
    assert (p, strongest > 3 * by_chance) == (0.01, True)


def test_large_blocks_get_fewer_permutations_and_none_where_too_few_are_left() -> None:
    assert permutations_allowed(1000) == 999
    assert 39 <= permutations_allowed(5_000_000) < 999
    assert permutations_allowed(10**9) == 0


def test_one_row_cannot_be_rewired() -> None:
    pairs = np.array([[0, 0], [0, 1]])
    observed, expected, p = rewiring_p(
        pairs, np.array([[True, False]]), samples=9, seed=np.random.SeedSequence(1)
    )
    assert (observed, expected, p) == (1, 1.0, 1.0)
