"""The test of the first canonical pair: level, power, another route to its statistics, and what it refuses."""

from __future__ import annotations

import tracemalloc

import numpy as np
import pytest
from numpy.testing import assert_allclose, assert_array_equal
from scipy.linalg import block_diag, eigh
from scipy.stats import kstest

from workbench.engine import canonical_pair_test
from workbench.engine.canonical.pair_statistics import TEST_PATH
from workbench.engine.canonical.permutation import clearly_large
from workbench.engine.smallest_p import SmallestP
from workbench.errors import NumericsError

STUDIES = 400
LEVEL = 0.01
FAMILIES = {
    "few features": (20, 5, 4, 0),
    "many features": (16, 60, 40, 0),
    "few features, nuisance": (20, 5, 4, 3),
    "many features, nuisance": (18, 50, 30, 3),
}


def draw_sides(n: int, p: int, q: int, seed: object, strength: float = 0.0) -> tuple[np.ndarray, np.ndarray]:
    rng = np.random.default_rng(seed)
    factor = strength * rng.normal(size=(n, 1))
    x, y = rng.normal(size=(n, p)), rng.normal(size=(n, q))
    x[:, : p // 3 + 1] += factor
    y[:, : q // 3 + 1] += factor
    return x, y


def null_p(n: int, p: int, q: int, c: int, study: int) -> float:
    """P of one study that shares nothing but a strong nuisance of ``c`` columns, a batch among them."""
    rng = np.random.default_rng([study, n, p, q, c])
    x, y, columns = rng.normal(size=(n, p)), rng.normal(size=(n, q)), None
    if c:
        columns = np.column_stack([np.arange(n) % 2, rng.normal(size=(n, c - 1))])
        x += 3.0 * columns @ rng.normal(size=(c, p))
        y += 3.0 * columns @ rng.normal(size=(c, q))
    test = canonical_pair_test(x, y, permutations=199, nuisance=columns, random_state=study, early_stop=False)
    assert test.p is not None
    return test.p


def test_p_is_uniform_where_nothing_is_shared() -> None:
    """Kolmogorov-Smirnov over 400 studies in each of four families, Holm over the families."""
    families = [[null_p(*family, study) for study in range(STUDIES)] for family in FAMILIES.values()]
    fits = sorted(kstest(p, "uniform").pvalue for p in families)
    assert all(fit > LEVEL / (len(fits) - k) for k, fit in enumerate(fits)), dict(
        zip(FAMILIES, fits, strict=True)
    )


@pytest.mark.parametrize(("n", "p", "q"), [(60, 2000, 200), (60, 6, 4)])
def test_a_planted_factor_is_found(n: int, p: int, q: int) -> None:
    """The smallest p that could be reached, and no early stop on the way."""
    x, y = draw_sides(n, p, q, 1, strength=1.0)
    test = canonical_pair_test(x, y, permutations=299, random_state=0)
    assert test.p == test.smallest_p == 1 / 300
    assert not test.stopped_early
    assert test.permutations == 299


def draw_buried(seed: int) -> tuple[np.ndarray, np.ndarray]:
    """Three factors on 60 of 2,000 and 12 of 200 features, under eight strong ones of one side each."""
    rng = np.random.default_rng(seed)
    x, y = rng.normal(size=(60, 2000)), rng.normal(size=(60, 200))
    x += rng.normal(size=(60, 5)) @ rng.normal(size=(5, 2000))
    y += rng.normal(size=(60, 3)) @ rng.normal(size=(3, 200))
    for k, factor in enumerate(rng.normal(size=(3, 60, 1))):
        x[:, 60 * k : 60 * (k + 1)] += 1.2 * factor
        y[:, 12 * k : 12 * (k + 1)] += 1.2 * factor
    return x, y


def test_factors_under_private_ones_are_found() -> None:
    """In at least 8 of 10 studies, by the Wilks-type statistic at little ridge and not by the largest root."""
    tests = [canonical_pair_test(*draw_buried(k), permutations=199, random_state=k) for k in range(10)]
    assert sum(test.p is not None and test.p <= 0.05 for test in tests) >= 8
    wilks, root = np.mean([test.p_by_ridge[:, 2] <= 0.05 for test in tests], axis=0)
    assert wilks >= 0.8
    assert root < wilks


@pytest.mark.parametrize(("p", "q", "c"), [(6, 4, 0), (30, 25, 0), (6, 4, 2)])
def test_statistics_are_those_of_the_primal_problem(p: int, q: int, c: int) -> None:
    """Roots of scipy's generalised eigenproblem over the features, at every ridge."""
    x, y = draw_sides(15, p, q, 2, strength=0.5)
    columns = np.random.default_rng(3).normal(size=(15, c)) if c else None
    test = canonical_pair_test(x, y, permutations=1, nuisance=columns, random_state=0)
    design = np.ones((15, 1)) if columns is None else np.column_stack([np.ones(15), columns])
    a, b = (side - design @ np.linalg.lstsq(design, side, rcond=None)[0] for side in (x, y))
    a, b = (side * np.sqrt(test.freedom) / np.linalg.norm(side, axis=0) for side in (a, b))
    for k, multiple in enumerate(TEST_PATH):
        roots = primal_roots(a, b, multiple)
        assert_allclose(test.observed[1, k], roots[-1] ** 2, rtol=1e-8)
        assert_allclose(test.observed[0, k], -np.log1p(-(roots**2)).sum(), rtol=1e-7)


def primal_roots(a: np.ndarray, b: np.ndarray, multiple: float) -> np.ndarray:
    """Canonical roots at a multiple of both noise levels, without those that are 0 by dimension."""
    p, q = a.shape[1], b.shape[1]
    squares = [np.linalg.svd(side, compute_uv=False) ** 2 for side in (a, b)]
    ridges = [multiple * np.median(s[s > 1e-10 * s[0]]) for s in squares]
    cross = np.block([[np.zeros((p, p)), a.T @ b], [b.T @ a, np.zeros((q, q))]])
    within = block_diag(a.T @ a + ridges[0] * np.eye(p), b.T @ b + ridges[1] * np.eye(q))
    return eigh(cross, within, eigvals_only=True)[-min(p, q, 15) :].clip(0.0)


def test_few_samples_are_looked_at_exhaustively() -> None:
    """Five samples have 120 arrangements: p counts in 120ths and does not depend on the seed."""
    x, y = draw_sides(5, 8, 6, 4)
    first, other = (canonical_pair_test(x, y, random_state=seed) for seed in (1, 2))
    assert first.exhaustive
    assert first.permutations == 119
    assert first.p == other.p == (1 + first.exceedances) / 120
    assert first.smallest_p == 1 / 120
    assert not canonical_pair_test(x, y, permutations=99, random_state=0).exhaustive


@pytest.mark.parametrize(("n", "c"), [(4, 0), (3, 0), (6, 1), (7, 2)])
def test_p_is_withheld_under_120_arrangements(n: int, c: int) -> None:
    """Four samples, or four dimensions left by the nuisance, have 24; the statistics still come back."""
    x, y = draw_sides(n, 8, 6, 5)
    columns = np.random.default_rng(6).normal(size=(n, c)) if c else None
    test = canonical_pair_test(x, y, nuisance=columns, random_state=0)
    assert test.p is None
    assert test.withheld is not None
    assert "fewer than 120" in test.withheld
    assert test.permutations == 0
    assert np.isfinite(test.observed).all()
    assert np.isnan(test.p_by_ridge).all()


def test_a_clearly_large_p_stops_early() -> None:
    """With 50 exceedances or more, and near the p of the whole run; switched off, all are done."""
    x, y = draw_sides(24, 40, 20, 8)
    stopped = canonical_pair_test(x, y, permutations=2000, random_state=3)
    whole = canonical_pair_test(x, y, permutations=2000, random_state=3, early_stop=False)
    assert stopped.stopped_early
    assert stopped.exceedances >= 50
    assert stopped.p == (1 + stopped.exceedances) / (1 + stopped.permutations)
    assert whole.permutations == 2000
    assert stopped.p == pytest.approx(whole.p, abs=4 * np.sqrt(0.25 / stopped.permutations))
    assert stopped.p > 0.1


def test_the_stopping_rule_is_the_stated_one() -> None:
    """49 exceedances never stop; 50 do when p is above 0.1 by three standard errors."""
    none = np.empty(0)
    assert not clearly_large(SmallestP(50 / 61, 49, none), 60)
    assert clearly_large(SmallestP(51 / 101, 50, none), 100)
    assert not clearly_large(SmallestP(61 / 401, 60, none), 400)


def test_the_first_permutations_of_a_longer_run_are_the_same() -> None:
    """Each arrangement is drawn from the seed and its number; the same seed gives the same p."""
    x, y = draw_sides(20, 30, 10, 9)
    first, again = (
        canonical_pair_test(x, y, permutations=150, random_state=1, early_stop=False) for _ in "ab"
    )
    other = canonical_pair_test(x, y, permutations=150, random_state=2, early_stop=False)
    assert_array_equal(first.p_by_ridge, again.p_by_ridge)
    assert not np.array_equal(first.p_by_ridge, other.p_by_ridge)


@pytest.mark.parametrize("c", [0, 2])
def test_units_and_constant_features_do_not_matter(c: int) -> None:
    """Rescaled and shifted features, and features that are constant, leave p as it was."""
    x, y = draw_sides(20, 30, 10, 10, strength=0.4)
    columns = np.random.default_rng(1).normal(size=(20, c)) if c else None
    units = 10.0 ** np.random.default_rng(0).uniform(-3, 3, size=30)
    changed = np.hstack([x * units + 5.0, np.full((20, 4), 2.5)])
    first, other = (
        canonical_pair_test(side, y, permutations=199, nuisance=columns, random_state=1, early_stop=False)
        for side in (x, changed)
    )
    assert_allclose(other.observed, first.observed, rtol=1e-8)
    assert other.p == first.p


def test_nuisance_of_any_size_leaves_no_trace() -> None:
    """Batch effects on both sides would look shared; removed, they change nothing."""
    x, y = draw_sides(24, 30, 10, 11)
    batch = (np.arange(24) % 2).astype(float)[:, None]
    shifted = x + 9.0 * batch, y - 9.0 * batch
    clean, removed = (
        canonical_pair_test(*sides, permutations=199, nuisance=batch, random_state=1)
        for sides in ((x, y), shifted)
    )
    assert removed.p == clean.p
    assert_allclose(removed.observed, clean.observed, rtol=1e-8)
    assert canonical_pair_test(*shifted, permutations=199, random_state=1).p == 1 / 200


def test_blocks_of_one_side_weigh_the_same() -> None:
    """Repeating a block's features changes nothing when its size is told, and something when not."""
    x, y = draw_sides(20, 12, 9, 12)
    wider = np.hstack([x[:, :4], np.tile(x[:, 4:], 5)])
    first, told, untold = (
        canonical_pair_test(side, y, permutations=99, random_state=1, x_block_sizes=sizes)
        for side, sizes in ((x, [4, 8]), (wider, [4, 40]), (wider, None))
    )
    assert_allclose(told.observed, first.observed, rtol=1e-8)
    assert not np.allclose(untold.observed, first.observed, rtol=1e-3)


def test_repeated_samples_and_rank_one_sides_are_no_trouble() -> None:
    """Ties count as reached: a binary feature against another gives p from its few distinct values."""
    x = np.repeat([0.0, 1.0], 6)[:, None]
    test = canonical_pair_test(x, x[::-1].copy(), permutations=999, random_state=0, early_stop=False)
    # 2 of the 924 ways to choose 6 of 12 agree wholly with the other side.
    assert test.p == pytest.approx(2 / 924, abs=0.004)
    assert_allclose(test.p_by_ridge, test.p_by_ridge[0, 0])


def test_a_permutation_touches_nothing_of_the_features_size() -> None:
    """With 30,000 features the peak is a few copies of the sides, whatever the number of permutations."""
    x, y = draw_sides(12, 30_000, 50, 13)
    tracemalloc.start()
    canonical_pair_test(x, y, permutations=200, random_state=0, early_stop=False)
    peak = tracemalloc.get_traced_memory()[1]
    tracemalloc.stop()
    assert peak < 8 * x.nbytes


def test_inputs_are_left_alone_and_progress_is_told() -> None:
    """Batches add up to the permutations asked for."""
    x, y = draw_sides(20, 30, 10, 14, strength=1.5)
    before, seen = (x.copy(), y.copy()), []
    canonical_pair_test(x, y, permutations=230, random_state=0, progress=lambda *step: seen.append(step))
    assert_array_equal(x, before[0])
    assert_array_equal(y, before[1])
    assert seen == [(100, 230), (200, 230), (230, 230)]


def test_what_cannot_be_tested_is_refused() -> None:
    """Gaps, rows that differ in number, a constant side, a nuisance that leaves nothing, no permutations."""
    x, y = draw_sides(10, 5, 4, 15)
    gap = x.copy()
    gap[2, 3] = np.nan
    with pytest.raises(NumericsError, match="1 missing or infinite values, the first in row 2, column 3"):
        canonical_pair_test(gap, y)
    with pytest.raises(NumericsError, match="side X has 10 rows and side Y 9"):
        canonical_pair_test(x, y[1:])
    with pytest.raises(NumericsError, match="none of the 5 features has variance left"):
        canonical_pair_test(np.ones((10, 5)), y)
    with pytest.raises(NumericsError, match="leave no degree of freedom"):
        canonical_pair_test(x, y, nuisance=np.random.default_rng(0).normal(size=(10, 9)))
    with pytest.raises(NumericsError, match="permutations is 0; allowed: at least 1"):
        canonical_pair_test(x, y, permutations=0)
