"""Further canonical pairs and designs with subjects: what is exchanged, what is removed, and the level."""

from __future__ import annotations

import numpy as np
import pytest
from numpy.testing import assert_allclose
from scipy.stats import binomtest

from workbench.engine import canonical_pair_test
from workbench.engine.canonical.pair_levels import PairLevel
from workbench.engine.canonical.pair_rows import exchangeable_rows
from workbench.engine.canonical.turned_rows import TurnedRows
from workbench.engine.subjects import SubjectDesign, differences, subject_means
from workbench.errors import NumericsError


def draw_shared(n: int, p: int, q: int, factors: int, seed: int) -> tuple[np.ndarray, np.ndarray]:
    rng = np.random.default_rng(seed)
    shared = rng.normal(size=(n, factors))
    return tuple(
        rng.normal(size=(n, width)) + 3.0 * shared @ rng.normal(size=(factors, width)) for width in (p, q)
    )  # type: ignore[return-value]


def test_rearranged_rows_are_turned_out_of_what_was_removed() -> None:
    """The rotation is orthogonal, takes the span of PB to that of B, and leaves what is orthogonal to both alone."""
    rng = np.random.default_rng(0)
    removed = np.linalg.qr(rng.normal(size=(12, 3)))[0]
    moved = rng.normal(size=(12, 12))
    moved = np.linalg.qr(moved - removed @ (removed.T @ moved))[0][:, :9]
    moved -= removed @ (removed.T @ moved)
    order = rng.permutation(12)[None]
    rows = TurnedRows.of(order, removed)
    turned = rows.rows(moved)[0]
    assert_allclose(removed.T @ turned, 0.0, atol=1e-12)
    assert_allclose(turned.T @ turned, moved.T @ moved, atol=1e-12)
    assert_allclose(rows.forward(moved[:, :1]), turned[:, :1], atol=1e-12)
    assert_allclose(moved.T @ rows.backward(turned[:, :1]), moved.T @ moved[:, :1], atol=1e-12)


@pytest.mark.parametrize("pairs", [1, 2])
def test_earlier_variates_are_gone_from_both_sides(pairs: int) -> None:
    """What is left is orthogonal to u and v, and has lost two dimensions for each pair."""
    x, y = draw_shared(30, 80, 40, 2, 1)
    first = PairLevel.first(exchangeable_rows((x, y), None, None, "visits", (None, None)))
    later = first.without(pairs)
    assert later is not None
    assert later.freedom == later.exchange.size == 29 - 2 * pairs
    assert later.moved.rank == later.freedom
    lost = [np.sum(a.lengths**2) - np.sum(b.lengths**2) for a, b in ((first.moved, later.moved),)]
    assert lost[0] > 0.1 * np.sum(first.moved.lengths**2)


@pytest.mark.parametrize(("n", "p", "q", "factors"), [(20, 40, 25, 1), (24, 6, 5, 1), (24, 6, 5, 2)])
def test_the_next_pair_is_seldom_false(n: int, p: int, q: int, factors: int) -> None:
    """The true pairs are found, the next in no more studies than chance allows (one-sided, 0.001)."""
    found, missed = [], 0
    for seed in range(60):
        x, y = draw_shared(n, p, q, factors, seed)
        test = canonical_pair_test(x, y, permutations=99, pairs=factors + 1, random_state=seed)
        found.append(test.axes() > factors)
        missed += test.axes() < factors
    assert missed <= 6
    assert binomtest(sum(found), len(found), 0.05, alternative="greater").pvalue > 0.001


def test_p_is_cumulated_and_stops() -> None:
    """No later p is smaller than an earlier one; behind the first that is large no pair is tested unless asked."""
    x, y = draw_shared(24, 30, 20, 1, 3)
    stopped = canonical_pair_test(x, y, permutations=199, pairs=5, random_state=0)
    every = canonical_pair_test(x, y, permutations=199, pairs=4, random_state=0, stop_above=None)
    assert len(stopped.p_by_pair) == 2
    assert len(every.p_by_pair) == 4
    assert (np.diff(every.p_by_pair) >= 0.0).all()
    assert stopped.axes() == every.axes() == 1
    assert every.further[0].freedom == every.freedom - 2


def test_fewer_pairs_come_back_where_a_side_has_fewer_features() -> None:
    """Two features make two pairs."""
    x, y = draw_shared(30, 2, 12, 1, 4)
    test = canonical_pair_test(x, y, permutations=99, pairs=6, stop_above=None, random_state=0)
    assert len(test.p_by_pair) == 2
    with pytest.raises(NumericsError, match="pairs is 0; allowed: at least 1"):
        canonical_pair_test(x, y, pairs=0)


def draw_visits(seed: int, subjects: int = 10, visits: int = 3, trend: float = 4.0) -> tuple[np.ndarray, ...]:
    rng = np.random.default_rng(seed)
    subject, visit = np.repeat(np.arange(subjects), visits), np.tile(np.arange(visits), subjects)
    sides = [
        rng.normal(size=(subject.size, width))
        + rng.normal(size=(subjects, width))[subject]
        + trend * visit[:, None] * rng.normal(size=width)
        for width in (30, 20)
    ]
    return sides[0], sides[1], subject, visit


def test_a_common_trend_is_no_shared_variation() -> None:
    """Ordered visits with a strong trend on both sides and nothing else: the level holds, pooled samples reject."""
    naive, whole = [], []
    for seed in range(40):
        x, y, subject, visit = draw_visits(seed)
        naive.append(canonical_pair_test(x, y, permutations=99, random_state=seed).p)
        whole.append(
            canonical_pair_test(x, y, permutations=99, subjects=subject, times=visit, random_state=seed).p
        )
    assert np.mean(np.array(naive) <= 0.05) == 1.0
    false = int((np.array(whole) <= 0.05).sum())
    assert binomtest(false, 40, 0.05, alternative="greater").pvalue > 0.001


def test_pairs_are_tested_on_their_differences_and_subjects_on_their_means() -> None:
    """The same p as the test of what the design makes of the samples."""
    x, y, subject, visit = draw_visits(7, subjects=14, visits=2)
    design = SubjectDesign.of(subject, visit)
    told = {"permutations": 99, "random_state": 1, "early_stop": False}
    for how, level in ((differences, "visits"), (subject_means, "subjects")):
        want = canonical_pair_test(how(design, x), how(design, y), **told)  # type: ignore[arg-type]
        got = canonical_pair_test(x, y, subjects=subject, times=visit, level=level, **told)  # type: ignore[arg-type]
        assert got.p == want.p
        assert got.freedom == 13


def test_replicates_stay_in_their_subject_and_a_shared_factor_is_found() -> None:
    """Without times samples of a subject are exchanged; a factor that varies inside subjects is found."""
    x, y, subject, _ = draw_visits(8, trend=0.0)
    factor = 2.0 * np.random.default_rng(0).normal(size=(30, 1))
    null = canonical_pair_test(x, y, permutations=199, subjects=subject, random_state=0)
    test = canonical_pair_test(x + factor, y + factor, permutations=199, subjects=subject, random_state=0)
    assert test.exchanged == "samples inside subjects"
    assert test.p == 1 / 200
    assert null.p is not None
    assert null.p > 0.05


def test_too_few_subjects_withhold_p() -> None:
    """Four subjects with the same visits have 24 arrangements."""
    x, y, subject, visit = draw_visits(9, subjects=4)
    test = canonical_pair_test(x, y, subjects=subject, times=visit)
    assert test.p is None
    assert test.axes() == 0
    assert test.withheld is not None
    assert (
        "only 24 arrangements of 12 exchangeable rows (whole subjects with the same visits)" in test.withheld
    )


def test_an_unknown_level_is_refused() -> None:
    x, y, subject, _ = draw_visits(9)
    with pytest.raises(NumericsError, match="level is 'days'; allowed: 'visits'"):
        canonical_pair_test(x, y, subjects=subject, level="days")  # type: ignore[arg-type]
