"""Half-samples are complementary, spread over the design, and give the shares that a direct count gives."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from numpy.testing import assert_allclose, assert_array_equal

from workbench.engine.evidence.stability import HalfScreen, half_samples, pair_stability
from workbench.engine.evidence.strongest import strongest_pairs
from workbench.engine.nuisance import Nuisance
from workbench.engine.pairs.screen import BlockPair
from workbench.engine.pairs.tiles import Limits
from workbench.engine.subjects import SubjectDesign
from workbench.engine.tails import log_p_value
from workbench.errors import NumericsError


def _blocks(
    seed: int, n: int = 40, p: int = 30, q: int = 20, strength: float = 1.0
) -> tuple[np.ndarray, ...]:
    rng = np.random.default_rng(seed)
    shared = rng.normal(size=(n, 1))
    x, y = rng.normal(size=(n, p)), rng.normal(size=(n, q))
    x[:, :4] += strength * shared
    y[:, :3] += strength * shared
    return x, y


def _sizes(x: np.ndarray, y: np.ndarray, nuisance: np.ndarray | None = None) -> np.ndarray:
    removed = Nuisance.of(nuisance, len(x))
    e, f = (removed.residuals(side) for side in (x, y))
    return np.abs((e / np.linalg.norm(e, axis=0)).T @ (f / np.linalg.norm(f, axis=0)))


@given(seed=st.integers(0, 2**32), count=st.integers(1, 700), hint=st.sampled_from([None, -0.1, -3.0, -40.0]))
@settings(max_examples=40, deadline=None)
def test_the_strongest_pairs_are_those_of_a_full_sort(seed: int, count: int, hint: float | None) -> None:
    x, y = _blocks(seed)
    limits = Limits(outer=7, inner=9)
    found = strongest_pairs([BlockPair("a", x, y)], count, hint=hint, limits=limits)
    order = np.argsort(-_sizes(x, y), axis=None)[:count]
    assert set((found.i * 20 + found.j).tolist()) == set(order.tolist())


def test_pairs_of_blocks_with_unequal_samples_are_ordered_by_p() -> None:
    (x, y), (u, v) = _blocks(1), _blocks(2, n=25)
    age = np.arange(25.0)[:, None]
    found = strongest_pairs([BlockPair("a", x, y), BlockPair("b", u, v, age)], 50)
    log_p = np.concatenate(
        [log_p_value(_sizes(x, y), 38).ravel(), log_p_value(_sizes(u, v, age), 22).ravel()]
    )
    assert set((600 * found.pair_index + found.i * 20 + found.j).tolist()) == set(
        np.argsort(log_p)[:50].tolist()
    )
    assert found.level >= np.sort(log_p)[49]


def test_halves_are_complementary_balanced_and_whole_by_subject() -> None:
    subjects = np.repeat(np.arange(20), 2)
    strata = np.repeat(np.array(["a", "b"]), 20)
    parts = half_samples(40, strata, subjects, 10, 3)
    assert len(parts) == 10
    for one, other in zip(parts[::2], parts[1::2], strict=True):
        assert_array_equal(np.sort(np.concatenate([one, other])), np.arange(40))
        assert not np.intersect1d(subjects[one], subjects[other]).size
        assert np.count_nonzero(strata[one] == "a") == 10
    assert len({part.tobytes() for part in parts}) == 10
    assert_array_equal(half_samples(40, strata, subjects, 10, 3)[4], parts[4])


def test_shares_are_those_of_a_direct_count() -> None:
    x, y = _blocks(5)
    batch = np.tile([0.0, 1.0], 20)[:, None]
    edges = np.array([[0, 0, 0], [0, 1, 2], [0, 20, 10], [0, 3, 1]])
    pairs, rows = [BlockPair("a", x, y, batch)], [np.arange(40)]
    found = pair_stability(40, batch[:, 0], None, 20, HalfScreen(pairs, rows), edges, seed=4)
    expected = np.zeros(4)
    for part in half_samples(40, batch[:, 0], None, 20, 4):
        sizes = _sizes(x[part], y[part], batch[part])
        cut = np.sort(sizes, axis=None)[-4]
        expected += sizes[edges[:, 1], edges[:, 2]] >= cut
    assert_allclose(found.share, expected / 20, atol=1e-12)
    assert found.halves == 20


def test_a_planted_module_is_stable_and_chance_is_not() -> None:
    x, y = _blocks(6, n=80, strength=3.0)
    edges = np.array([(0, i, j) for i in range(4) for j in range(3)] + [(0, 10, 10), (0, 15, 5)])
    found = pair_stability(80, None, None, 50, HalfScreen([BlockPair("a", x, y)], [np.arange(80)]), edges)
    assert found.share[:12].min() > 0.9
    assert found.share[12:].max() < 0.5


def test_a_block_that_lacks_samples_has_smaller_halves_and_a_reason() -> None:
    x, y = _blocks(7)
    some = np.arange(0, 40, 3)
    held = np.ones((40, 2), dtype=bool)
    held[:, 1] = np.isin(np.arange(40), some)
    pairs = [BlockPair("a", x, y), BlockPair("b", x[some], y[some])]
    edges = np.array([[0, 0, 0], [1, 0, 0]])
    screen = HalfScreen(pairs, [np.arange(40), some])
    found = pair_stability(40, None, None, 4, screen, edges, held=held)
    assert np.isfinite(found.share[0])
    assert np.isnan(found.share[1])
    assert found.reasons[0] == ""
    assert "samples; 10 are the least" in found.reasons[1]


def test_too_few_samples_and_no_edges_are_no_error() -> None:
    x, y = _blocks(8, n=12)
    screen = HalfScreen([BlockPair("a", x, y)], [np.arange(12)])
    small = pair_stability(12, None, None, 10, screen, np.array([[0, 1, 1]]))
    assert np.isnan(small.share[0])
    assert small.halves == 0
    assert pair_stability(40, None, None, 10, screen, np.empty((0, 3), dtype=int)).share.size == 0


def test_what_is_learnt_from_samples_is_learnt_again_in_each_half() -> None:
    seen: list[int] = []

    def strongest(rows: np.ndarray, count: int) -> np.ndarray:
        seen.append(rows.size)
        return np.array([[0, 2, 2]])[:count]

    found = pair_stability(41, None, None, 6, strongest, np.array([[0, 2, 2], [0, 3, 3]]))
    assert_array_equal(found.share, [1.0, 0.0])
    assert sorted(set(seen)) == [20, 21]


def test_changes_within_subjects_are_halved_by_subject() -> None:
    rng = np.random.default_rng(11)
    subject = np.repeat(np.arange(24), 3)
    x, y = (rng.normal(size=(72, 15)) + 4.0 * rng.normal(size=(24, 15))[subject] for _ in range(2))
    change = rng.normal(size=(72, 1))
    x[:, [2]] += 2.0 * change
    y[:, [3]] += 2.0 * change
    design = SubjectDesign.of(subject, np.tile([0, 1, 2], 24))
    screen = HalfScreen([BlockPair("a", x, y)], [np.arange(72)], "spearman", designs=[design], level="visits")
    edges = np.array([[0, 2, 3], [0, 9, 9]])
    found = pair_stability(72, None, subject, 20, screen, edges, level="visits")
    assert_array_equal(found.share > 0.9, [True, False])
    small = pair_stability(72, None, np.repeat(np.arange(4), 18), 20, screen, edges, level="subjects")
    assert small.reasons == ("a half-sample has 2 subjects; 10 are the least for a stability",)


def test_features_without_variance_in_a_half_are_never_strongest() -> None:
    x, y = _blocks(9)
    x[:, 5], y[:, 7] = 1.0, np.nan
    found = strongest_pairs([BlockPair("a", x, y)], 10_000)
    assert found.i.size == 29 * 19
    assert 5 not in found.i
    assert 7 not in found.j


def test_wrong_requests_are_refused() -> None:
    x, y = _blocks(10)
    with pytest.raises(NumericsError, match="0 strongest pairs asked for"):
        strongest_pairs([BlockPair("a", x, y)], 0)
    screen = HalfScreen([BlockPair("a", x, y)], [np.arange(40)])
    with pytest.raises(NumericsError, match="1 half-samples of 40 samples"):
        pair_stability(40, None, None, 1, screen, np.array([[0, 1, 1]]))
