"""Pairs that their module carries: the equations, what stands against mixtures, and what a couple needs."""

import numpy as np
import pytest
from coupled import Coupled, coupled
from numpy.testing import assert_allclose, assert_array_equal
from scipy import stats
from statsmodels.stats.multitest import multipletests

from workbench.engine.private import module_route
from workbench.engine.private.module_route import GUARD, OWN, ModulePairs, module_pairs

RATE = 0.02


def carried(study: Coupled, rate: float = RATE) -> ModulePairs:
    return module_pairs(study.tiles(), study.u, study.v, rate)


def correlations(one: np.ndarray, other: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """Return correlation and p of every column with every column, by scipy."""
    found = [[stats.pearsonr(a, b) for b in other.T] for a in one.T]
    return np.array([[f.statistic for f in row] for row in found]), np.array(
        [[f.pvalue for f in row] for row in found]
    )


def adjusted(p: np.ndarray) -> np.ndarray:
    """Return q of every column, by statsmodels."""
    return np.column_stack([multipletests(column, method="fdr_bh")[1] for column in p.T])


def follow(own: tuple[np.ndarray, np.ndarray], k: int, other: np.ndarray, couple: float) -> np.ndarray:
    """Return which features go with their own component as they go with the other block's."""
    return (own[1][:, k] <= OWN) & (np.sign(own[0][:, k]) * np.sign(couple) == np.sign(other))


@pytest.mark.parametrize("seed", [1, 2, 3])
def test_pairs_follow_the_equations_feature_by_feature(seed: int) -> None:
    """Against scipy's correlations and statsmodels' q, to 1e-10, with two modules."""
    study = coupled(seed, modules=2)
    own, own_p = correlations(study.x, study.y)
    x_r, x_p = correlations(study.x, study.v)
    y_r, y_p = correlations(study.y, study.u)
    couple_r, couple_p = correlations(study.u, study.v)
    x_own, y_own = correlations(study.x, study.u), correlations(study.y, study.v)
    best: dict[tuple[int, int], tuple[float, float]] = {}
    for k, m in np.argwhere(couple_p * couple_p.size <= 1e-4):
        q = 2 * np.maximum(adjusted(x_p)[:, m][:, None], adjusted(y_p)[:, k])
        sign = np.sign(couple_r[k, m]) * np.sign(x_r[:, m])[:, None] * np.sign(y_r[:, k])
        p = np.maximum(x_p[:, m][:, None], y_p[:, k])
        follows = follow(x_own, k, x_r[:, m], couple_r[k, m])[:, None] & follow(
            y_own, m, y_r[:, k], couple_r[k, m]
        )
        for i, j in np.argwhere((q <= RATE) & (sign * own > 0) & (own_p <= GUARD) & follows):
            best[i, j] = min(best.get((i, j), (1.0, 1.0)), (q[i, j], p[i, j]))
    found = carried(study)
    assert found.couples >= 2
    assert found.mixed == 0
    assert [divmod(key, study.y.shape[1]) for key in found.keys.tolist()] == sorted(best)
    q, p = np.array([best[key] for key in sorted(best)]).T
    assert_allclose(found.q, q, rtol=1e-10)
    assert_allclose(np.exp(found.log_p), p, rtol=1e-9)
    assert_allclose(found.r, [own[key] for key in sorted(best)], atol=1e-12)


def test_a_module_carries_its_pairs_and_hardly_any_others() -> None:
    """Thirty studies: most planted pairs, and of all carried ones at most the rate false."""
    studies = [coupled(seed) for seed in range(30)]
    found = [study.true_share(carried(study).keys) for study in studies]
    recall, false = np.mean(found, axis=0)
    assert recall > 0.9
    assert false < RATE


def test_a_couple_of_mixed_factors_is_left_out() -> None:
    """Both components hold two factors in equal parts, so that half of what they imply is wrong."""
    study = coupled(4, modules=2)
    signs = np.array([1.0, -1.0]) / np.sqrt(2.0)
    mixture = module_pairs(study.tiles(), study.u @ signs[:, None], study.v @ signs[:, None], RATE)
    assert (mixture.couples, mixture.mixed, mixture.keys.size) == (1, 1, 0)


def test_one_mixed_side_is_no_mixture_of_pairs() -> None:
    """The other side's components are pure and tell its own features apart."""
    study = coupled(5, modules=2)
    mixed = study.v @ np.array([[1.0], [1.0]]) / np.sqrt(2.0)
    found = module_pairs(study.tiles(), study.u, mixed, RATE)
    assert (found.couples, found.mixed) == (2, 0)
    assert study.true_share(found.keys)[0] > 0.7
    assert study.true_share(found.keys)[1] < 0.05


def test_components_that_do_not_go_with_each_other_carry_nothing() -> None:
    study = coupled(6, modules=0)
    rng = np.random.default_rng(0)
    u, v = (np.linalg.qr(rng.normal(size=(60, 2)))[0] for _ in range(2))
    assert module_pairs(study.tiles(), u, v, RATE).couples == 0
    none = module_pairs(study.tiles(), u[:, :0], v, RATE)
    assert (none.couples, none.keys.size) == (0, 0)


def test_a_feature_that_cannot_be_tested_is_not_carried() -> None:
    study = coupled(7)
    gone = int(np.argmax(np.abs(study.v[:, 0] @ study.x)))
    x = study.x.copy()
    x[3, gone] = np.nan
    found = module_pairs(study.tiles(x=x), study.u, study.v, RATE)
    assert found.keys.size
    assert gone not in found.keys // study.y.shape[1]


def test_damping_is_charged_to_the_module_too() -> None:
    """A damped feature has a larger p, and fewer of its pairs pass."""
    study = coupled(8, strength=0.7)
    damping = (np.full(study.x.shape[1], 0.7), np.ones(study.y.shape[1]))
    plain, damped = carried(study), module_pairs(study.tiles(damping=damping), study.u, study.v, RATE)
    assert 0 < damped.keys.size < plain.keys.size
    both = np.isin(plain.keys, damped.keys)
    assert (damped.log_p >= plain.log_p[both]).all()


def test_of_too_many_pairs_those_of_the_strongest_features_are_kept(monkeypatch: pytest.MonkeyPatch) -> None:
    study = coupled(9)
    every = carried(study)
    monkeypatch.setattr(module_route, "MOST_PAIRS", 40 * every.couples)
    some = carried(study)
    assert 0 < some.keys.size <= 40 * every.couples
    there = np.isin(every.keys, some.keys)
    assert there.sum() == some.keys.size
    assert some.q.max() <= every.q[~there].max()


def test_pieces_change_nothing(monkeypatch: pytest.MonkeyPatch) -> None:
    study = coupled(10)
    whole = carried(study)
    monkeypatch.setattr(module_route, "_AT_ONCE", 7)
    assert_array_equal(carried(study).keys, whole.keys)
