"""Where very many pairs pass, thresholds and counts stay exact and memory small."""

from __future__ import annotations

import tracemalloc

import h5py
import numpy as np
import pytest
from hypothesis import example, given, settings
from hypothesis import strategies as st
from numpy.testing import assert_allclose, assert_array_equal
from untiled import Untiled, untiled_edges, untiled_screen

from workbench.engine import BlockPair, Limits, screen_blocks, screen_pairs
from workbench.engine.pairs.tiles import STEPS
from workbench.engine.tails import log_p_value
from workbench.errors import NumericsError

SMALL = Limits(outer=11, inner=7, candidates=20, expected=10, held_bytes=3000)


def _crowded(seed: int, blocks: int = 1) -> list[BlockPair]:
    rng = np.random.default_rng(seed)
    pairs = []
    for k in range(blocks):
        n = int(rng.integers(12, 40))
        factor = rng.normal(size=(n, 1))
        x, y = (factor * rng.normal(size=30) + rng.normal(size=(n, 30)) for _ in range(2))
        pairs.append(BlockPair(str(k), x, y, rng.normal(size=(n, 1)) if k else None))
    return pairs


@given(
    seed=st.integers(0, 2**32),
    blocks=st.integers(1, 3),
    floor=st.sampled_from([0.0, 0.6]),
    most=st.integers(1, 20),
)
@settings(max_examples=25, deadline=None)
def test_count_and_strongest_edges_are_exact(seed: int, blocks: int, floor: float, most: int) -> None:
    pairs = _crowded(seed, blocks)
    truth = untiled_screen(pairs)
    whole = screen_blocks(pairs, minimum_r=floor, maximum_edges=most)
    screen = screen_blocks(pairs, minimum_r=floor, maximum_edges=most, limits=SMALL)
    assert screen.passed == whole.passed == len(untiled_edges(truth, 0.05, floor))
    for name in ("pair_index", "i", "j", "r", "log_p", "r_low", "r_high"):
        assert_array_equal(getattr(screen, name), getattr(whole, name))
    # The q of a cut crowd is bounded by the histogram: never under the exact one.
    for name in ("q", "q_block"):
        exact, bound = getattr(whole, name), getattr(screen, name)
        assert (bound >= exact * (1.0 - 1e-9)).all()
        assert (bound <= np.minimum(exact * 1.02, 0.05) + 1e-300).all()


def test_more_edges_than_can_be_returned_are_refused_with_the_way_out() -> None:
    pairs = _crowded(1)
    passed = screen_blocks(pairs).passed
    assert passed > SMALL.candidates
    with pytest.raises(NumericsError, match=f"{passed} pairs pass, more than the 20 .* give maximum_edges"):
        screen_blocks(pairs, limits=SMALL)


def _largest_bound(screens: list[Untiled], pairs: list[BlockPair]) -> list[np.ndarray]:
    """Say at worst what a histogram in steps of 1 / STEPS says of q.

    At some level between p of a correlation and that of one a step weaker, all pairs count that are three
    steps stronger: the step of the level, that of the tile entry's error, and the one that the pair lies in.
    """
    p, weaker, weakest = [], [], []
    for one, pair in zip(screens, pairs, strict=True):
        df = pair.x.shape[0] - (2 if pair.nuisance is None else 3)
        size = np.abs(one.r).ravel()
        p.append(one.p.ravel())
        weaker.append(np.exp(log_p_value(np.maximum(size - 1 / STEPS, 0.0), df)))
        weakest.append(np.exp(log_p_value(np.maximum(size - 3 / STEPS, 0.0), df)))
    flat, level, late = (np.concatenate(part) for part in (p, weaker, weakest))
    order = np.argsort(-flat)
    count = np.searchsorted(np.sort(late), flat[order], side="right")
    bound = np.minimum.accumulate(level[order] * flat.size / np.maximum(count, 1e-300))
    largest = np.empty(flat.size)
    largest[order] = np.minimum(bound, 1.0)
    return np.split(largest, np.cumsum([part.size for part in p])[:-1])


@given(seed=st.integers(0, 2**32), blocks=st.integers(1, 3))
@example(seed=355, blocks=2)
@example(seed=167594, blocks=1)
@settings(max_examples=12, deadline=None)
def test_lookup_knows_every_pair(seed: int, blocks: int) -> None:
    pairs = _crowded(seed, blocks)
    truth = untiled_screen(pairs)
    pooled = _largest_bound(truth, pairs)
    for limits, most in ((Limits(), None), (SMALL, 5)):
        screen = screen_blocks(pairs, maximum_edges=most, limits=limits)
        for k, exact in enumerate(truth):
            found = screen.lookup(k, *np.indices(exact.r.shape))
            assert_allclose(found.r, exact.r, atol=1e-12)
            assert_allclose(found.p, exact.p, rtol=1e-9, atol=1e-300)
            own = _largest_bound([exact], [pairs[k]])[0]
            for ours, theirs, most_q in ((found.q, exact.q, pooled[k]), (found.q_block, exact.q_block, own)):
                assert_array_equal(ours <= 0.05, theirs <= 0.05)
                assert (ours >= theirs * (1.0 - 1e-9)).all()
                assert (ours.ravel() <= most_q * (1.0 + 1e-9)).all()
                assert np.median(ours / theirs) < 1.01


def test_lookup_gives_edges_their_own_figures() -> None:
    screen = screen_blocks(_crowded(2, 2))
    found = screen.lookup(screen.pair_index, screen.i, screen.j)
    for name in ("r", "p", "q", "q_block"):
        assert_array_equal(getattr(found, name), getattr(screen, name))


@pytest.mark.parametrize(
    ("where", "message"),
    [
        ((2, 0, 0), "pair of blocks number 2; they are numbered from 0 to 1"),
        ((0, 30, 0), "feature of the first block number 30"),
        ((1, 0, -1), "feature of the second block number -1"),
    ],
)
def test_lookup_of_what_is_not_there_is_refused(where: tuple[int, int, int], message: str) -> None:
    with pytest.raises(NumericsError, match=message):
        screen_blocks(_crowded(3, 2)).lookup(*where)


class _Spy:
    """A dataset that remembers the widest slice that was read."""

    def __init__(self, data: h5py.Dataset) -> None:
        self.data, self.shape, self.widest = data, data.shape, 0

    def __getitem__(self, key):
        part = self.data[key]
        self.widest = max(self.widest, part.shape[1])
        return part


def test_datasets_are_read_in_slices_and_give_the_same_bits(tmp_path) -> None:
    rng = np.random.default_rng(4)
    x, y = rng.normal(size=(15, 3000)), rng.normal(size=(15, 40))
    y[:, :5] += 9.0 * x[:, 2000:2005]
    limits = Limits(held_bytes=10_000, outer=500)
    with h5py.File(tmp_path / "blocks.h5", "w") as file:
        spy = _Spy(file.create_dataset("x", data=x))
        screen = screen_pairs(spy, file.create_dataset("y", data=y), limits=limits)
        found = screen.lookup(2000, np.arange(40))
    expected = screen_pairs(x, y)
    assert screen.n_edges >= 4
    for name in ("i", "j", "r", "q"):
        assert_array_equal(getattr(screen, name), getattr(expected, name))
    assert_array_equal(found.r, expected.lookup(2000, np.arange(40)).r)
    assert spy.widest <= 1024


def test_memory_is_a_fraction_of_the_matrix_of_all_pairs() -> None:
    rng = np.random.default_rng(5)
    x, y = rng.normal(size=(2, 12, 2500)) + 2.0 * rng.normal(size=(12, 1))
    tracemalloc.start()
    screen = screen_pairs(x, y, maximum_edges=100, limits=Limits(outer=250, inner=250, candidates=20_000))
    peak = tracemalloc.get_traced_memory()[1]
    tracemalloc.stop()
    assert screen.passed > 300_000
    # The matrix in single precision alone would take 25 MB.
    assert peak < 12e6
