"""Correlations, their p, false-discovery rates and group effects against scipy and statsmodels."""

from __future__ import annotations

import numpy as np
import pytest
import statsmodels.api as sm
from numpy.testing import assert_allclose, assert_array_equal
from scipy import stats
from statsmodels.stats.multitest import multipletests

from workbench.engine import Limits, benjamini_hochberg, fisher_interval, group_effects, screen_pairs


def _blocks(n: int, p: int, q: int, shared: int, seed: int) -> tuple[np.ndarray, np.ndarray]:
    rng = np.random.default_rng(seed)
    x, y = rng.normal(size=(n, p)), rng.normal(size=(n, q))
    y[:, :shared] += x[:, :shared]
    return x, y


@pytest.mark.parametrize("n", [5, 12, 100])
def test_pearson_p_equals_scipy(n: int) -> None:
    x, y = _blocks(n, 8, 6, 4, seed=n)
    found = screen_pairs(x, y).lookup(*np.indices((8, 6)))
    expected = [[stats.pearsonr(a, b) for b in y.T] for a in x.T]
    assert_allclose(found.r, [[e.statistic for e in row] for row in expected], rtol=1e-10, atol=1e-14)
    assert_allclose(found.p, [[e.pvalue for e in row] for row in expected], rtol=1e-10)


@pytest.mark.parametrize("n", [5, 12, 100])
def test_spearman_p_equals_scipy_ties_included(n: int) -> None:
    x, y = _blocks(n, 8, 6, 4, seed=n)
    x, y = np.round(x, 1), np.round(y, 1)
    found = screen_pairs(x, y, correlation="spearman").lookup(*np.indices((8, 6)))
    expected = [[stats.spearmanr(a, b) for b in y.T] for a in x.T]
    r = np.array([[e.statistic for e in row] for row in expected])
    assert_allclose(found.r, r, rtol=1e-10, atol=1e-14)
    inside = np.abs(r) < 1.0 - 1e-12
    p = np.array([[e.pvalue for e in row] for row in expected])
    assert_allclose(found.p[inside], p[inside], rtol=1e-10)


@pytest.mark.parametrize("correlation", ["pearson", "spearman"])
@pytest.mark.parametrize("c", [0, 1, 4])
def test_partial_correlation_p_is_that_of_the_regression_coefficient(correlation, c: int) -> None:
    # In x ~ intercept + nuisance + y, the t test of y's coefficient is the test of the partial correlation.
    x, y = _blocks(25, 4, 3, 2, seed=c)
    nuisance = np.random.default_rng(10 + c).normal(size=(25, c))
    screen = screen_pairs(x, y, nuisance=nuisance, correlation=correlation)
    found = screen.lookup(*np.indices((4, 3)))
    if correlation == "spearman":
        x, y = stats.rankdata(x, axis=0), stats.rankdata(y, axis=0)
    for i in range(4):
        for j in range(3):
            fit = sm.OLS(x[:, i], np.column_stack([np.ones(25), nuisance, y[:, j]])).fit()
            t = fit.tvalues[-1]
            assert_allclose(found.p[i, j], fit.pvalues[-1], rtol=1e-10)
            assert_allclose(found.r[i, j], t / np.sqrt(t**2 + fit.df_resid), rtol=1e-10)
            assert screen.df == fit.df_resid == 25 - c - 2


@pytest.mark.parametrize("limits", [Limits(), Limits(outer=70, inner=90, expected=30)])
@pytest.mark.parametrize("correlation", ["pearson", "spearman"])
def test_edges_of_60_000_pairs_equal_statsmodels(limits: Limits, correlation) -> None:
    x, y = _blocks(40, 300, 200, 60, seed=1)
    screen = screen_pairs(x, y, fdr=0.05, correlation=correlation, limits=limits)
    if correlation == "spearman":
        x, y = stats.rankdata(x, axis=0), stats.rankdata(y, axis=0)
    r = np.corrcoef(x.T, y.T)[:300, 300:]
    p = 2.0 * stats.t.sf(np.abs(r) * np.sqrt(38 / (1.0 - r**2)), 38)
    reject, q = (part.reshape(p.shape) for part in multipletests(p.ravel(), 0.05, method="fdr_bh")[:2])
    assert_array_equal(np.sort(screen.i * 200 + screen.j), np.flatnonzero(reject))
    assert screen.n_edges > 30
    assert_allclose(screen.q, q[screen.i, screen.j], rtol=1e-10)
    assert_allclose(screen.p, p[screen.i, screen.j], rtol=1e-10)


def test_false_discovery_rates_equal_statsmodels() -> None:
    p = np.random.default_rng(2).uniform(size=500) ** 3
    p[::50] = p[1]
    assert_allclose(benjamini_hochberg(p), multipletests(p, method="fdr_bh")[1], rtol=1e-13)


def test_interval_equals_scipy() -> None:
    x, y = _blocks(30, 1, 1, 1, seed=3)
    expected = stats.pearsonr(x[:, 0], y[:, 0]).confidence_interval(0.95)
    r = screen_pairs(x, y).lookup(0, 0).r
    assert_allclose(fisher_interval(r, 30, 1), [expected.low, expected.high], rtol=1e-10)


@pytest.mark.parametrize("groups", [2, 4])
def test_group_effects_equal_the_joint_fit_of_statsmodels(groups: int) -> None:
    rng = np.random.default_rng(groups)
    codes, nuisance, x = np.arange(24) % groups, rng.normal(size=(24, 2)), rng.normal(size=(24, 6))
    x[:, 0] += codes
    effects = group_effects(x, codes, nuisance)
    indicators = (codes[:, None] == np.arange(1, groups)).astype(float)
    design = np.column_stack([np.ones(24), nuisance, indicators])
    contrast = np.eye(design.shape[1])[3:]
    for feature in range(6):
        fit = sm.OLS(x[:, feature], design).fit()
        differences = fit.params[3:]
        largest = np.argmax(np.abs(differences))
        assert_allclose(effects.effect[feature], differences[largest], rtol=1e-9)
        assert effects.level[feature] == largest + 1
        assert_allclose(effects.p[feature], float(fit.f_test(contrast).pvalue), rtol=1e-9)
        if groups == 2:
            assert_allclose(effects.p[feature], fit.pvalues[-1], rtol=1e-9)
    assert effects.df == 24 - 2 - groups


@pytest.mark.parametrize("correlation", ["pearson", "spearman"])
def test_every_p_and_q_of_a_whole_screen_equals_statsmodels_whatever_the_tile(correlation) -> None:
    x, y = _blocks(24, 300, 200, 40, seed=3)
    nuisance = np.random.default_rng(4).normal(size=(24, 2))
    e, f = (stats.rankdata(side, axis=0) if correlation == "spearman" else side for side in (x, y))
    # Frisch & Waugh 1933: the regression on residuals has the coefficient and residual of the whole one.
    design = np.column_stack([np.ones(24), nuisance])
    e, f = (side - design @ np.linalg.lstsq(design, side, rcond=None)[0] for side in (e, f))
    r = (e.T @ f) / np.sqrt((e**2).sum(axis=0)[:, None] * (f**2).sum(axis=0))
    p = 2 * stats.t.sf(np.abs(r) * np.sqrt(20 / (1 - r**2)), 24 - 3 - 1)
    q = multipletests(p.ravel(), method="fdr_bh")[1].reshape(p.shape)
    for limits in (Limits(), Limits(outer=37, inner=11, expected=100)):
        screen = screen_pairs(x, y, nuisance=nuisance, correlation=correlation, limits=limits)
        found = screen.lookup(*np.indices(p.shape))
        assert_allclose(found.p, p, rtol=1e-10)
        edges = np.argwhere(q <= 0.05)
        assert set(zip(screen.i.tolist(), screen.j.tolist(), strict=True)) == set(map(tuple, edges.tolist()))
        assert_allclose(screen.q, q[screen.i, screen.j], rtol=1e-10)
