"""Differences between groups' correlations are judged by their exact law, in tiles as in one piece."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from numpy.testing import assert_allclose, assert_array_equal
from scipy import integrate, special, stats

from workbench.engine import BlockPair, Limits, Nuisance, benjamini_hochberg
from workbench.engine.evidence.difference_tail import DifferenceTail
from workbench.engine.evidence.differential import differences_of, screen_differences
from workbench.errors import NumericsError


def _study(seed: int, n: tuple[int, int] = (30, 22), rho: float = 0.0, p: int = 25, q: int = 15):
    """Two groups in which every x_k and y_k have the correlation rho; rows of the groups mixed."""
    rng = np.random.default_rng(seed)
    x, y = rng.normal(size=(sum(n), p)), rng.normal(size=(sum(n), q))
    y = rho * x[:, :q] + np.sqrt(1.0 - rho**2) * y
    order = rng.permutation(sum(n))
    return x, y, (np.sort(order[: n[0]]), np.sort(order[n[0] :]))


def _untiled(x, y, rows, nuisance=None) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    r, df = [], []
    for part in rows:
        removed = Nuisance.of(None if nuisance is None else nuisance[part], part.size)
        e, f = (removed.residuals(side[part]) for side in (x, y))
        r.append((e / np.linalg.norm(e, axis=0)).T @ (f / np.linalg.norm(f, axis=0)))
        df.append(part.size - removed.rank - 1)
    p = np.exp(DifferenceTail.of(*df).log_p(np.tanh(np.arctanh(r[0]) - np.arctanh(r[1]))))
    return r[0], r[1], p


@pytest.mark.parametrize(("first", "second"), [(3, 3), (9, 9), (21, 9), (96, 10), (300, 300)])
def test_the_tail_is_the_integral_over_both_densities(first: int, second: int) -> None:
    tail = DifferenceTail.of(first, second)
    sd = np.sqrt(1.0 / first + 1.0 / second)
    wide = 40.0 / np.sqrt(min(first, second))

    def density(z: float) -> float:
        return float(np.cosh(z) ** -second / special.beta(second / 2, 0.5))

    for d in sd * np.array([0.5, 2.0, 5.0]):
        expected = (
            2.0
            * integrate.quad(
                lambda z, d=d: density(z) * stats.t.sf(np.sinh(d + z) * np.sqrt(first), first),
                -d - wide,
                wide,
                points=[-d, 0.0],
                limit=400,
                epsabs=0.0,
                epsrel=1e-10,
            )[0]
        )
        assert_allclose(np.exp(tail.log_p(np.tanh(d))), expected, rtol=1e-7)
    assert_allclose(tail.log_p(tail.critical([0.05, 1e-8])), np.log([0.05, 1e-8]), rtol=1e-9)


def test_large_groups_give_fishers_normal_law() -> None:
    # z = (atanh 0.5 - atanh 0.4) / sqrt(2 / 1000): the textbook form (Fisher 1921), computed here by scipy.
    t = np.tanh(np.arctanh(0.5) - np.arctanh(0.4))
    normal = 2 * stats.norm.sf(np.arctanh(t) / np.sqrt(2 / 1000))
    assert_allclose(np.exp(DifferenceTail.of(1001, 1001).log_p(t)), normal, rtol=5e-3)


@given(seed=st.integers(0, 2**32), outer=st.integers(1, 30), inner=st.integers(1, 30))
@settings(max_examples=25, deadline=None)
def test_tiled_and_untiled_agree_on_every_figure(seed: int, outer: int, inner: int) -> None:
    x, y, rows = _study(seed)
    y[rows[0], 3] += 2.0 * x[rows[0], 1]
    y[rows[1], 3] -= 2.0 * x[rows[1], 1]
    age = np.random.default_rng(seed).normal(size=(52, 1))
    limits = Limits(outer=outer, inner=inner)
    pair = BlockPair("a", x, y, age)
    found = screen_differences([pair], [rows], fdr=0.2, correlation="pearson", limits=limits)
    r_first, r_second, p = _untiled(x, y, rows, age)
    q = benjamini_hochberg(p)
    passing = {(int(i), int(j)) for i, j in np.argwhere(q <= 0.2)}
    assert set(zip(found.i.tolist(), found.j.tolist(), strict=True)) == passing
    at = (found.i, found.j)
    assert_allclose(found.figures.p, p[at], rtol=1e-7)
    assert_allclose(found.figures.q, q[at], rtol=1e-7)
    assert_allclose(found.figures.r_first, r_first[at], atol=1e-12)
    assert_allclose(found.figures.r_second, r_second[at], atol=1e-12)
    assert (found.n_first == 30).all()
    assert (found.n_second == 22).all()


@pytest.mark.parametrize(("n", "rho"), [((12, 12), 0.0), ((20, 60), 0.0), ((12, 12), 0.7), ((15, 60), 0.7)])
def test_p_is_uniform_when_both_groups_have_the_same_correlation(n: tuple[int, int], rho: float) -> None:
    p = []
    for seed in range(150):
        x, y, rows = _study(seed, n, rho, p=15)
        k = np.arange(15)
        p.append(differences_of([BlockPair("a", x, y)], [rows], 0 * k, k, k, correlation="pearson").p)
    flat = np.concatenate(p)
    assert stats.kstest(flat, "uniform").pvalue > 0.001
    assert abs(np.mean(flat < 0.01) - 0.01) < 4 * np.sqrt(0.01 / flat.size) + 0.001


def test_no_false_pairs_where_all_correlations_are_the_same() -> None:
    studies = [_study(seed, (24, 24), 0.6, p=60, q=60) for seed in range(100)]
    some = [
        screen_differences([BlockPair("a", x, y)], [rows], correlation="pearson").n_edges > 0
        for x, y, rows in studies
    ]
    assert stats.binomtest(sum(some), 100, 0.05, alternative="greater").pvalue > 0.01


def test_exchanging_the_groups_turns_the_sign_and_scales_change_nothing() -> None:
    x, y, rows = _study(3, rho=0.5)
    k = np.arange(15)
    one = differences_of([BlockPair("a", x, y)], [rows], 0 * k, k, k)
    other = differences_of([BlockPair("a", 3.0 * x + 1.0, -y)], [rows[::-1]], 0 * k, k, k)
    assert_allclose(other.p, one.p, rtol=1e-9)
    assert_allclose(other.difference, one.difference, atol=1e-12)
    assert_allclose(other.r_first, -one.r_second, atol=1e-12)


def test_spearman_holds_its_rate_under_heavy_tails_and_a_shared_correlation() -> None:
    p = {"pearson": [], "spearman": []}
    for seed in range(150):
        rng = np.random.default_rng(seed)
        shared = rng.standard_t(3, size=(60, 15))
        x, y = (shared + 0.8 * rng.standard_t(3, size=(60, 15)) for _ in range(2))
        k, rows = np.arange(15), (np.arange(30), np.arange(30, 60))
        for name, values in p.items():
            values.append(differences_of([BlockPair("a", x, y)], [rows], 0 * k, k, k, correlation=name).p)
    rate = {name: np.mean(np.concatenate(values) < 0.01) for name, values in p.items()}
    assert rate["spearman"] < 0.015
    assert rate["pearson"] > 0.05


def test_features_without_variance_in_one_group_cannot_be_tested() -> None:
    x, y, rows = _study(5)
    x[rows[1], 4], y[3, 2] = 1.0, np.nan
    found = screen_differences([BlockPair("a", x, y)], [rows])
    assert found.tested == (24 * 14,)
    assert found.untestable == (25 * 15 - 24 * 14,)
    assert np.isnan(differences_of([BlockPair("a", x, y)], [rows], *np.array([[0], [4], [0]])).p[0])


def test_duplicates_between_layers_do_not_differ() -> None:
    x, y, rows = _study(6)
    y[:, 0] = -2.0 * x[:, 0]
    figures = differences_of([BlockPair("a", x, y)], [rows], *np.array([[0], [0], [0]]))
    assert_allclose(figures.p, 1.0)


def test_groups_that_are_too_small_are_told_and_others_are_screened() -> None:
    x, y, rows = _study(7)
    small = (rows[0][:4], rows[1])
    pairs = [BlockPair("a", x, y), BlockPair("b", x, y)]
    found = screen_differences(pairs, [small, rows])
    assert "a group of 4 samples leaves 2 degrees of freedom" in found.off[0]
    assert found.off[1] == ""
    assert found.tested == (0, 375)
    none = screen_differences(pairs[:1], [small])
    assert (none.n_edges, none.tested, none.untestable) == (0, (0,), (375,))
    figures = differences_of(pairs, [small, rows], *np.array([[0, 1], [2, 2], [3, 3]]))
    assert_array_equal(np.isnan(figures.p), [True, False])
    with pytest.raises(NumericsError, match="2 pairs of blocks and 1 of groups"):
        screen_differences(pairs, [rows])
