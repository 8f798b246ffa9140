"""Edges of a screen are those of the untiled double-precision computation, and mean what they say."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from numpy.testing import assert_allclose, assert_array_equal
from scipy import stats
from untiled import untiled_edges, untiled_screen

from workbench.engine import BlockPair, BlockScreen, Limits, screen_blocks, screen_pairs
from workbench.errors import NumericsError

FIGURES = ("pair_index", "i", "j", "r", "p", "log_p", "q", "q_block", "r_low", "r_high", "n", "df")
TILES = st.builds(
    Limits,
    outer=st.integers(1, 9),
    inner=st.integers(1, 9),
    expected=st.integers(1, 50),
    held_bytes=st.integers(0, 6000),
)


def _pair(rng: np.random.Generator, strength: float, name: str = "a and b") -> BlockPair:
    """Two blocks that share two factors, at times with a constant, a gap, a duplicate and nuisance."""
    n, p, q = int(rng.integers(6, 40)), *rng.integers(1, 40, 2)
    factors = rng.normal(size=(n, 2))
    x, y = (
        rng.normal(size=(n, m)) + strength * factors @ (rng.normal(size=(2, m)) * (rng.random(m) < 0.5))
        for m in (p, q)
    )
    if rng.random() < 0.3:
        x[:, 0] = 7.3
    if rng.random() < 0.3:
        y[0, -1] = rng.choice([np.nan, np.inf])
    if rng.random() < 0.3:
        x[:, -1] = -2.0 * y[:, 0] + 1.0
    return BlockPair(name, x, y, None if rng.random() < 0.5 else rng.normal(size=(n, 2)))


def _edges(screen: BlockScreen) -> list[tuple[int, int, int]]:
    return list(zip(screen.pair_index.tolist(), screen.i.tolist(), screen.j.tolist(), strict=True))


@given(
    seed=st.integers(0, 2**32),
    blocks=st.integers(1, 3),
    strength=st.sampled_from([0.0, 0.5, 1.5, 4.0]),
    correlation=st.sampled_from(["pearson", "spearman"]),
    fdr=st.sampled_from([0.01, 0.05, 0.2, 0.5]),
    minimum_r=st.sampled_from([0.0, 0.5]),
    tiles=TILES,
)
@settings(max_examples=80, deadline=None)
def test_edges_are_those_of_the_untiled_computation(
    seed: int, blocks: int, strength: float, correlation, fdr: float, minimum_r: float, tiles: Limits
) -> None:
    rng = np.random.default_rng(seed)
    pairs = [_pair(rng, strength, str(k)) for k in range(blocks)]
    truth = untiled_screen(pairs, correlation)
    screen = screen_blocks(pairs, fdr=fdr, correlation=correlation, minimum_r=minimum_r, limits=tiles)
    edges = _edges(screen)
    assert set(edges) == untiled_edges(truth, fdr, minimum_r)
    assert len(set(edges)) == len(edges) == screen.passed
    for name in ("r", "p", "q", "q_block"):
        expected = [getattr(truth[k], name)[i, j] for k, i, j in edges]
        assert_allclose(getattr(screen, name), expected, rtol=1e-9, atol=1e-13)
    assert screen.tested == tuple(int(np.isfinite(one.p).sum()) for one in truth)
    assert screen.untestable == tuple(int(np.isnan(one.p).sum()) for one in truth)


@given(seed=st.integers(0, 2**32), tiles=TILES, correlation=st.sampled_from(["pearson", "spearman"]))
@settings(max_examples=40, deadline=None)
def test_tiles_and_memory_change_not_one_bit(seed: int, tiles: Limits, correlation) -> None:
    rng = np.random.default_rng(seed)
    pairs = [_pair(rng, 1.5, str(k)) for k in range(2)]
    whole = screen_blocks(pairs, correlation=correlation)
    tiled = screen_blocks(pairs, correlation=correlation, limits=tiles)
    for name in FIGURES:
        assert_array_equal(getattr(tiled, name), getattr(whole, name))


def test_a_floor_between_neighbours_that_single_precision_cannot_tell_apart() -> None:
    rng = np.random.default_rng(3)
    n = 30
    basis = np.linalg.qr(np.column_stack([np.ones(n), rng.normal(size=(n, 2))]))[0][:, 1:]
    r = 0.5 + 1e-9 * np.arange(400)
    x, y = basis[:, :1], basis @ np.vstack([r, np.sqrt(1 - r**2)])
    steps = 0.5 + 1e-9 * np.array([100.5, 250.5])
    for floor, expected in zip(steps, (299, 149), strict=True):
        assert screen_pairs(x, y, minimum_r=floor).n_edges == expected
        crowd = screen_pairs(x, y, minimum_r=floor, maximum_edges=3, limits=Limits(candidates=5, expected=1))
        assert crowd.passed == expected


def test_a_threshold_between_neighbours_that_single_precision_cannot_tell_apart() -> None:
    rng = np.random.default_rng(4)
    n, m = 40, 200
    basis = np.linalg.qr(np.column_stack([np.ones(n), rng.normal(size=(n, 2))]))[0][:, 1:]
    # p_(k) crosses k fdr / m in the midst of correlations that differ by less than 1e-7.
    df = n - 2
    target = stats.t.isf(np.arange(1, m + 1) * 0.05 / m / 2, df)
    r = target / np.sqrt(df + target**2)
    r = r + np.where(np.arange(m) < m // 2, 2e-8, -2e-8)
    x, y = basis[:, :1], basis @ np.vstack([r, np.sqrt(1 - r**2)])
    truth = untiled_edges(untiled_screen([BlockPair("near", x, y)]), 0.05)
    assert len(truth) == m // 2
    for tiles in (Limits(), Limits(expected=1, inner=7)):
        screen = screen_pairs(x, y, limits=tiles)
        assert {(0, 0, int(j)) for j in screen.j} == truth
    crowd = screen_pairs(x, y, maximum_edges=3, limits=Limits(candidates=5, expected=1))
    assert crowd.passed == m // 2


def test_sides_scale_shift_sign_and_order_of_features_change_nothing_but_the_sign() -> None:
    rng = np.random.default_rng(5)
    x, y = rng.normal(size=(2, 30, 25))
    y[:, :10] += x[:, 5:15]
    screen = screen_pairs(x, y)
    swapped, moved = screen_pairs(y, x), screen_pairs(-3.0 * x + 1e4, y[:, ::-1])
    assert screen.n_edges > 5
    assert_array_equal([swapped.j, swapped.i], [screen.i, screen.j])
    assert_array_equal(swapped.r, screen.r)
    assert_array_equal([moved.i, 24 - moved.j], [screen.i, screen.j])
    assert_allclose(moved.r, -screen.r, rtol=1e-9)


def test_ranks_make_a_monotone_change_invisible() -> None:
    rng = np.random.default_rng(6)
    x, noise = rng.normal(size=(2, 25, 12))
    y = x + 0.4 * noise
    plain = screen_pairs(x, y, correlation="spearman")
    bent = screen_pairs(np.exp(3.0 * x), y**3, correlation="spearman")
    assert plain.n_edges >= 10
    assert_array_equal(bent.r, plain.r)


def test_a_planted_truth_is_recovered_at_the_rate_promised() -> None:
    rng = np.random.default_rng(7)
    x, y = rng.normal(size=(60, 400)), rng.normal(size=(60, 300))
    y[:, :50] += 1.2 * x[:, :50]
    screen = screen_pairs(x, y, fdr=0.05)
    true = (screen.i == screen.j) & (screen.i < 50)
    assert true.sum() >= 48
    assert stats.binomtest(int((~true).sum()), screen.n_edges, 0.05, alternative="greater").pvalue > 0.01


def test_nuisance_that_drives_both_blocks_makes_no_edges() -> None:
    rng = np.random.default_rng(8)
    batch = np.repeat([0.0, 1.0], 20)[:, None]
    x, y = rng.normal(size=(2, 40, 60)) + 4.0 * batch
    assert screen_pairs(x, y).n_edges > 3000
    assert screen_pairs(x, y, nuisance=batch).n_edges == 0


def _share_of_null_studies_with_an_edge(kind: str) -> int:
    count = 0
    for seed in range(200):
        rng = np.random.default_rng([9, seed])
        x, y, z = (rng.normal(size=(16, m)) for m in (25, 20, 15))
        nuisance = rng.normal(size=(16, 2)) if kind == "nuisance" else None
        if nuisance is not None:
            x, y, z = (side + 3.0 * nuisance @ rng.normal(size=(2, side.shape[1])) for side in (x, y, z))
        rule = "spearman" if kind == "spearman" else "pearson"
        pairs = [BlockPair("xy", x, y, nuisance)]
        if kind == "blocks":
            pairs += [BlockPair("xz", x[:12], z[:12]), BlockPair("yz", y, z)]
        count += screen_blocks(pairs, fdr=0.05, correlation=rule).n_edges > 0
    return count


def test_null_studies_have_edges_no_more_often_than_the_rate() -> None:
    kinds = ("plain", "nuisance", "spearman", "blocks")
    counts = {kind: _share_of_null_studies_with_an_edge(kind) for kind in kinds}
    tests = [stats.binomtest(count, 200, 0.05, alternative="greater").pvalue for count in counts.values()]
    # Holm over the four kinds of study: the smallest p against 0.01 / 4.
    assert min(tests) > 0.01 / len(tests), counts
    assert sum(counts.values()) > 0


def test_p_is_uniform_where_nothing_is_shared() -> None:
    rng = np.random.default_rng(10)
    nuisance = rng.normal(size=(14, 3))
    x, y = rng.normal(size=(2, 14, 1500))
    each = np.arange(1500)
    p = screen_pairs(x, y, nuisance=nuisance).lookup(each, each).p
    assert stats.kstest(p, "uniform").pvalue > 0.01


def test_a_rich_pair_of_blocks_does_not_pay_for_a_poor_one() -> None:
    rng = np.random.default_rng(11)
    factor = rng.normal(size=(40, 1))
    x, y, z = rng.normal(size=(3, 40, 60))
    pairs = [BlockPair("rich", x + factor, y + factor), BlockPair("poor", x + factor, z)]
    screen = screen_blocks(pairs)
    alone = untiled_screen(pairs)[1]
    assert (screen.pair_index == 0).sum() > 100
    assert ((alone.q <= 0.05) & (alone.q_block > 0.05)).sum() > 0
    assert not (screen.pair_index == 1).any()
    assert (np.maximum(screen.q, screen.q_block) <= 0.05).all()


def test_damped_features_have_the_p_of_the_damped_correlation() -> None:
    rng = np.random.default_rng(31)
    x, y = rng.normal(size=(40, 30)), rng.normal(size=(40, 20))
    y[:, :5] += 2.0 * x[:, :5]
    damping = (rng.uniform(0.6, 1.0, 30), rng.uniform(0.6, 1.0, 20))
    plain = screen_pairs(x, y).lookup(*np.indices((30, 20)))
    damped = screen_blocks([BlockPair("a", x, y, damping=damping)])
    found = damped.lookup(0, *np.indices((30, 20)))
    assert_allclose(found.r, plain.r, atol=1e-12)
    small = plain.r * np.outer(*damping)
    assert_allclose(found.p, 2 * stats.t.sf(np.abs(small) * np.sqrt(38 / (1 - small**2)), 38), rtol=1e-9)
    assert_allclose(damped.r, plain.r[damped.i, damped.j], atol=1e-12)
    assert ((damped.r_low < damped.r) & (damped.r < damped.r_high)).all()
    with pytest.raises(NumericsError, match="must hold numbers above 0"):
        screen_blocks([BlockPair("a", x, y, damping=(damping[0], damping[1] * 0.0))])


def test_ties_are_ordered_by_block_pair_and_features() -> None:
    rng = np.random.default_rng(12)
    x = rng.normal(size=(20, 3))[:, [0, 1, 0, 2, 0]]
    y = x[:, [0, 3, 0]] + rng.normal(size=(20, 1))
    pair = BlockPair("a", x, y)
    screen = screen_blocks([pair, BlockPair("b", x, y)], limits=Limits(outer=2, inner=1))
    assert screen.n_edges > 10
    strength = np.round(np.abs(screen.r), 12)
    order = np.lexsort((screen.j, screen.i, screen.pair_index, -strength))
    assert_array_equal(order, np.arange(screen.n_edges))
    assert np.unique(strength).size < screen.n_edges / 4


def test_the_far_tail_has_an_order_and_no_p_of_zero() -> None:
    rng = np.random.default_rng(13)
    x = rng.normal(size=(1500, 6))
    y = x + np.linspace(0.02, 0.2, 6) * rng.normal(size=x.shape)
    screen = screen_pairs(x, y)
    strongest = screen.log_p[:6]
    assert (np.diff(strongest) > 1.0).all()
    assert (strongest < -1000.0).all()
    assert (screen.p > 0.0).all()
    assert (screen.q > 0.0).all()
    assert_array_equal(np.sort(screen.i[:6]), np.arange(6))


def test_the_cut_keeps_the_strongest_and_tells_how_many_passed() -> None:
    rng = np.random.default_rng(14)
    x, noise = rng.normal(size=(2, 40, 30))
    y = x @ rng.normal(size=(30, 30)) + noise
    every = screen_pairs(x, y)
    assert every.truncated is None
    some = screen_pairs(x, y, maximum_edges=every.n_edges - 3)
    assert (some.n_edges, some.passed, some.truncated) == (every.n_edges - 3, every.n_edges, every.n_edges)
    for name in ("i", "j", "r", "p", "q"):
        assert_array_equal(getattr(some, name), getattr(every, name)[:-3])
    assert (some.r_high - some.r_low > (every.r_high - every.r_low)[:-3]).all()


def test_a_floor_for_r_is_a_floor() -> None:
    rng = np.random.default_rng(15)
    x, noise = rng.normal(size=(2, 40, 30))
    y = x @ rng.normal(size=(30, 30)) + noise
    every = screen_pairs(x, y)
    floor = float(np.median(np.abs(every.r)))
    some = screen_pairs(x, y, minimum_r=floor)
    kept = np.abs(every.r) >= floor
    assert 0 < kept.sum() < kept.size
    assert_array_equal(some.r, every.r[kept])
    assert_array_equal(some.q, every.q[kept])


def test_degrees_of_freedom_count_the_rank_of_the_nuisance() -> None:
    rng = np.random.default_rng(16)
    x, y = rng.normal(size=(2, 20, 5))
    y += x
    columns = rng.normal(size=(20, 2))
    doubled = np.column_stack([columns, columns.sum(axis=1), np.ones(20)])
    assert screen_pairs(x, y).df == 18
    one, two = screen_pairs(x, y, nuisance=columns), screen_pairs(x, y, nuisance=doubled)
    assert one.df == two.df == 16
    assert_allclose(two.p, one.p, rtol=1e-8)


def test_nothing_to_test_is_an_empty_screen() -> None:
    screen = screen_pairs(np.ones((10, 3)), np.random.default_rng(17).normal(size=(10, 4)))
    assert (screen.n_edges, screen.tested, screen.untestable) == (0, 0, 12)
    assert np.isnan(screen.lookup([0, 2], [1, 3])).all()


def test_extreme_units_are_no_trouble() -> None:
    x, noise = np.random.default_rng(18).normal(size=(2, 20, 4))
    y = x + 0.3 * noise
    screen, extreme = screen_pairs(x, y), screen_pairs(1e200 * x, 1e-200 * y)
    assert screen.n_edges >= 4
    assert_allclose(extreme.r, screen.r, rtol=1e-12)


def test_inputs_are_not_changed() -> None:
    pair = _pair(np.random.default_rng(19), 1.0)
    before = pair.x.copy(), pair.y.copy()
    screen_blocks([pair], correlation="spearman").lookup(0, 0, 0)
    assert_array_equal(pair.x, before[0])
    assert_array_equal(pair.y, before[1])


def test_progress_ends_where_it_was_planned_to_end() -> None:
    seen: list[tuple[int, int]] = []
    x, y = np.random.default_rng(20).normal(size=(2, 12, 30))
    screen_pairs(
        x, y, progress=lambda done, total: seen.append((done, total)), limits=Limits(outer=7, inner=10)
    )
    assert seen == [(k, 15) for k in range(1, 16)]


@pytest.mark.parametrize(
    ("options", "message"),
    [
        ({"fdr": 0.0}, "fdr is 0.0; it must lie between 0 and 1"),
        ({"fdr": 1.0}, "fdr is 1.0"),
        ({"correlation": "kendall"}, "'kendall'; allowed: 'pearson', 'spearman'"),
        ({"minimum_r": 1.0}, "minimum_r is 1.0"),
        ({"maximum_edges": 0}, "maximum_edges is 0"),
        ({"nuisance": np.ones((5, 1))}, "one row for each of the 6 samples"),
        ({"nuisance": np.eye(6)[:, :4]}, "6 samples and a nuisance of 5 dimensions"),
        ({"y": np.ones((5, 2))}, "second block of 'x and y' has 5 samples and its partner 6"),
        ({"y": np.ones(6)}, "samples x features"),
        ({"y": np.ones((6, 0))}, "samples x features"),
    ],
)
def test_what_cannot_be_screened_is_refused(options: dict, message: str) -> None:
    x = np.random.default_rng(21).normal(size=(6, 2))
    with pytest.raises(NumericsError, match=message):
        screen_pairs(**({"x": x, "y": x} | options))


def test_no_pair_of_blocks_is_refused() -> None:
    with pytest.raises(NumericsError, match="no pair of blocks"):
        screen_blocks([])
