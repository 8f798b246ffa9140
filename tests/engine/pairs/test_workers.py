"""Work is shared out over as many threads as allowed, and no result depends on how many."""

from __future__ import annotations

import threading

import numpy as np
import pytest
from numpy.testing import assert_array_equal
from threadpoolctl import threadpool_limits

from workbench.engine import BlockPair, Limits, screen_blocks
from workbench.engine.pairs.workers import allowed_threads, share_out

FIGURES = ("pair_index", "i", "j", "r", "log_p", "q", "q_block", "r_low", "r_high", "passed")


def test_every_part_is_done_once_and_in_order() -> None:
    with threadpool_limits(3, user_api="blas"):
        parts = share_out(lambda part, parts: (part, parts, list(range(part, 10, parts))), 2)
    assert len(parts) <= 2
    assert sorted(n for _, _, numbers in parts for n in numbers) == list(range(10))
    assert [part for part, _, _ in parts] == list(range(len(parts)))


def test_one_thread_stays_where_it_is_and_an_error_comes_back() -> None:
    with threadpool_limits(1, user_api="blas"):
        assert allowed_threads() == 1
        assert share_out(lambda *_: threading.get_ident(), 8) == [threading.get_ident()]
    with threadpool_limits(2, user_api="blas"), pytest.raises(ZeroDivisionError, match="division"):
        share_out(lambda part, parts: part // (parts - parts), 2)


@pytest.mark.parametrize("crowd", [False, True])
def test_no_bit_of_a_screen_depends_on_the_number_of_threads(crowd: bool) -> None:
    rng = np.random.default_rng(1)
    shared = rng.normal(size=(30, 4))
    x, y = (
        rng.normal(size=(30, p)) + (3.0 if crowd else 1.0) * shared[:, np.arange(p) % 4] for p in (90, 70)
    )
    limits = Limits(outer=11, inner=17, candidates=500 if crowd else 4_000_000)
    screens = []
    for threads in (1, 2, 4):
        with threadpool_limits(threads, user_api="blas"):
            screens.append(
                screen_blocks([BlockPair("a", x, y), BlockPair("b", y, x)], maximum_edges=200, limits=limits)
            )
    for other in screens[1:]:
        for name in FIGURES:
            assert_array_equal(getattr(other, name), getattr(screens[0], name))
