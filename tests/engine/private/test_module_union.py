"""One screen of two routes: what each carries, what the union holds, and that nothing changes without modules."""

import numpy as np
import pytest
from coupled import Coupled, coupled
from hypothesis import given, settings
from hypothesis import strategies as st
from numpy.testing import assert_allclose, assert_array_equal

from workbench.engine import BlockPair, BlockScreen, screen_blocks
from workbench.engine.private.module_route import module_pairs
from workbench.engine.private.module_union import PAIR_SHARE, SupportedScreen, screen_supported

FIGURES = ("pair_index", "i", "j", "r", "p", "log_p", "q", "q_block", "r_low", "r_high", "n", "df")
FDR = 0.05


def screened(*studies: Coupled, modules: bool = True, **changes: object) -> SupportedScreen:
    """Return the screen of both routes over the pairs of blocks of some studies."""
    width = None if modules else 0
    return screen_supported(
        [BlockPair(f"pair {k}", study.x, study.y) for k, study in enumerate(studies)],
        [(study.u[:, :width], study.v[:, :width]) for study in studies],
        **({"fdr": FDR} | changes),
    )


def alone(*studies: Coupled, **changes: object) -> BlockScreen:
    """Return the screen of the pairs' own tests."""
    pairs = [BlockPair(f"pair {k}", study.x, study.y) for k, study in enumerate(studies)]
    return screen_blocks(pairs, **({"fdr": FDR} | changes))


def keys(screen: BlockScreen, chosen: np.ndarray | slice = slice(None)) -> set[tuple[int, int, int]]:
    return set(
        zip(*(getattr(screen, name)[chosen].tolist() for name in ("pair_index", "i", "j")), strict=True)
    )


def test_without_couples_nothing_differs_from_a_screen_of_pairs() -> None:
    """Field by field, with components that are none and with components of noise."""
    study = coupled(1)
    rng = np.random.default_rng(2)
    noise = [np.linalg.qr(rng.normal(size=(60, 2)))[0] for _ in range(2)]
    plain = alone(study)
    for u, v in ((study.u[:, :0], study.v[:, :0]), noise):
        found = screened(Coupled(study.x, study.y, study.modules, u, v))
        for name in FIGURES:
            assert_array_equal(getattr(found.screen, name), getattr(plain, name))
        assert (found.screen.fdr, found.screen.passed) == (FDR, plain.passed)
        assert set(found.support) == {"pair"}


@given(seed=st.integers(0, 2**32), strength=st.sampled_from([0.4, 0.7, 1.0, 2.0]), modules=st.integers(0, 2))
@settings(max_examples=40, deadline=None)
def test_the_edges_are_those_of_both_routes_at_their_shares(seed: int, strength: float, modules: int) -> None:
    """The union of both lists, each at its part of the rate; support says which held it; q are within the rate."""
    study = coupled(seed, strength=strength, modules=modules)
    carried = module_pairs(study.tiles(), study.u, study.v, (1.0 - PAIR_SHARE) * FDR).keys
    by_module = {(0, *divmod(key, study.y.shape[1])) for key in carried.tolist()}
    by_pair = keys(alone(study, fdr=PAIR_SHARE * FDR if by_module else FDR))
    found = screened(study)
    assert keys(found.screen) == by_pair | by_module
    assert found.screen.n_edges == len(by_pair | by_module)
    assert keys(found.screen, found.support == "both") == by_pair & by_module
    assert keys(found.screen, found.support == "module") == by_module - by_pair
    assert (found.screen.q <= FDR).all()
    assert (found.screen.q_block <= FDR).all()


@given(seed=st.integers(0, 2**32))
@settings(max_examples=20, deadline=None)
def test_lookup_gives_the_figures_of_edges_and_no_other_pair_passes(seed: int) -> None:
    studies = coupled(seed, strength=0.8), coupled(seed + 1, strength=0.3)
    screen = screened(*studies).screen
    same = screen.lookup(screen.pair_index, screen.i, screen.j)
    for name in ("r", "p", "q", "q_block"):
        assert_allclose(getattr(same, name), getattr(screen, name), rtol=1e-9, err_msg=name)
    every = screen.lookup(*np.indices((2, 80, 30)))
    passing = np.argwhere((every.q <= FDR) & (every.q_block <= FDR))
    assert {tuple(row) for row in passing.tolist()} == keys(screen)


def test_an_edge_that_its_module_alone_carries_has_the_modules_p_and_its_own_r() -> None:
    study = coupled(3, strength=0.7)
    found = screened(study)
    only = found.support == "module"
    assert 0 < only.sum() < only.size
    at = found.screen.i[only], found.screen.j[only]
    own = alone(study, fdr=PAIR_SHARE * FDR).lookup(0, *at)
    carried = module_pairs(study.tiles(), study.u, study.v, (1.0 - PAIR_SHARE) * FDR)
    place = np.searchsorted(carried.keys, at[0] * 30 + at[1])
    assert_allclose(found.screen.r[only], own.r, rtol=1e-12)
    assert_allclose(found.screen.p[only], np.exp(carried.log_p[place]), rtol=1e-12)
    assert_allclose(found.screen.q[only], carried.q[place] / (1.0 - PAIR_SHARE), rtol=1e-12)
    assert (own.q > PAIR_SHARE * FDR).all()


def test_edges_are_ordered_by_p_over_the_share_of_their_route() -> None:
    found = screened(coupled(4, strength=0.8), coupled(5, strength=0.8))
    share = np.where(found.support == "module", 1.0 - PAIR_SHARE, PAIR_SHARE)
    assert (np.diff(found.screen.log_p - np.log(share)) >= -1e-9).all()


@pytest.mark.parametrize("most", [1, 25, 60])
def test_a_cut_keeps_the_strongest_and_tells_how_many_passed(most: int) -> None:
    study = coupled(6)
    whole, cut = screened(study), screened(study, maximum_edges=most)
    assert cut.screen.passed == cut.screen.truncated == whole.screen.n_edges > most
    for name in ("i", "j", "r", "p", "q"):
        assert_array_equal(getattr(cut.screen, name), getattr(whole.screen, name)[:most])
    assert_array_equal(cut.support, whole.support[:most])


def test_both_routes_ask_for_the_smallest_r() -> None:
    found = screened(coupled(7, strength=0.8), minimum_r=0.4)
    assert {"module", "both"} <= set(found.support)
    assert np.abs(found.screen.r).min() >= 0.4


def test_a_pair_of_blocks_without_modules_keeps_its_own_tests() -> None:
    """Its edges are those of the pairs' share of the rate, and it has no couple."""
    one, other = coupled(8), coupled(9)
    other = Coupled(other.x, other.y, other.modules, other.u[:, :0], other.v[:, :0])
    found = screened(one, other)
    assert found.couples[0] >= 1
    assert found.couples[1] == 0
    second = found.screen.pair_index == 1
    assert set(found.support[second]) == {"pair"}
    plain = alone(one, other, fdr=PAIR_SHARE * FDR)
    assert keys(found.screen, second) == keys(plain, plain.pair_index == 1)
