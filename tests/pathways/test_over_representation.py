"""The hypergeometric p against scipy and a published example, and the permutation p that needs less."""

from __future__ import annotations

import numpy as np
import pytest
from numpy.testing import assert_allclose
from scipy import sparse
from scipy.stats import combine_pvalues, fisher_exact, hypergeom, kstest

from workbench.pathways import (
    community_score,
    hypergeometric_p,
    layer_tests,
    permuted_counts,
    residual_space,
    stouffer,
    unit_columns,
)


def test_the_lady_tasting_tea() -> None:
    """Fisher 1935, The Design of Experiments, chapter 2: of 8 cups 4 are of a kind; all right 1 in 70, 3 or more 17."""
    p, mid = hypergeometric_p(np.array([4, 3]), 8, np.array([4, 4]), 4)
    assert_allclose(p, [1 / 70, 17 / 70], rtol=1e-12)
    assert_allclose(mid, [0.5 / 70, (1 + 8) / 70], rtol=1e-12)


def test_p_is_that_of_scipy() -> None:
    """Outside checks: ``scipy.stats.hypergeom.sf`` and ``scipy.stats.fisher_exact``, one-sided."""
    random = np.random.default_rng(2)
    for _ in range(40):
        universe = int(random.integers(10, 400))
        size, drawn = random.integers(1, universe, 2)
        count = int(random.integers(0, min(size, drawn) + 1))
        (p,), _ = hypergeometric_p(np.array([count]), universe, np.array([size]), int(drawn))
        rest = [[count, drawn - count], [size - count, universe - drawn - size + count]]
        if min(map(min, rest)) < 0:
            continue
        assert_allclose(p, fisher_exact(rest, alternative="greater")[1], rtol=1e-9)
        assert_allclose(p, hypergeom.sf(count - 1, universe, size, drawn), rtol=1e-12)


def test_the_universe_is_what_is_in_a_set_in_the_layer() -> None:
    """12 transcripts, 10 of them in sets; community 1 holds 4, of which 3 are in the first set of 4."""
    members = np.zeros((15, 3), dtype=bool)
    members[[0, 1, 2, 9], 0] = members[[3, 4, 5, 6, 7, 8], 1] = members[[12, 13], 2] = True
    layers = ["transcripts"] * 12 + ["metabolites"] * 3
    communities = [1, 1, 1, 1] + [2] * 3 + [None] * 5 + [1] * 3
    tests = layer_tests(sparse.csr_array(members), layers, communities)
    assert [(one.community, one.layer) for one in tests] == [(1, "transcripts"), (2, "transcripts")]
    first = tests[0]
    assert (first.universe.size, first.drawn.tolist(), first.sets.tolist()) == (10, [0, 1, 2, 3], [0, 1])
    assert (first.counts.tolist(), first.sizes.tolist()) == ([3, 1], [4, 6])
    assert_allclose(first.expected, [1.6, 2.4])
    assert_allclose(first.p[0], hypergeom.sf(2, 10, 4, 4), rtol=1e-12)


def test_layers_are_joined_as_scipy_joins_them() -> None:
    """Outside check: ``scipy.stats.combine_pvalues`` with Stouffer's method and weights."""
    p, weights = np.array([[0.03, 0.5, 1e-40], [0.2, 0.9, 0.4]]), np.array([2.0, 1.0])
    found = stouffer(p, weights)
    for k in range(3):
        assert_allclose(found[k], combine_pvalues(p[:, k], "stouffer", weights)[1], rtol=1e-9)
    assert_allclose(stouffer(np.array([[0.03], [np.nan]]), weights), 0.03)
    assert 0.0 < stouffer(np.array([[1.0], [0.001]]), weights)[0] < 1.0


def chance_study(seed: int) -> tuple[float, float]:
    """Return both p's of one set in a study where the layers have nothing in common.

    300 features in 20 sets of 15 whose features go together; the community are the 30 features most associated with a
    score that is noise. Ties of the permutation p are broken at random, as its counts are whole numbers.
    """
    random = np.random.default_rng(seed)
    rows, sets, size = 30, 20, 15
    x = np.repeat(random.normal(size=(rows, sets)), size, axis=1) + random.normal(size=(rows, sets * size))
    space = residual_space(np.full((rows, 1), rows**-0.5))
    z, score = unit_columns(space.T @ x), unit_columns(space.T @ random.normal(size=(rows, 1)))[:, 0]
    members = sparse.csr_array(np.repeat(np.eye(sets, dtype=bool), size, axis=0))
    found = permuted_counts(score, z, members, 30, permutations=99, seed=np.random.SeedSequence(seed))
    chosen = int(random.integers(sets))
    p, _ = hypergeometric_p(found.counts[[chosen]], sets * size, np.array([size]), 30)
    level = 2.0 * (100.0 * (found.p[chosen] - found.p_mid[chosen]) - 0.5)
    above = 100.0 * found.p[chosen] - 1.0 - level
    return float(p[0]), (above + random.random() * (level + 1.0)) / 100.0


def test_the_permutation_p_holds_for_correlated_features_where_the_hypergeometric_one_does_not() -> None:
    """600 studies: the permutation p is uniform; the hypergeometric one is under 0.001 in 2 % of them, not in 0.1 %."""
    p = np.array([chance_study(seed) for seed in range(600)])
    assert kstest(p[:, 1], "uniform").pvalue > 0.01
    assert (p[:, 0] < 0.001).mean() > 0.01
    assert (p[:, 1] < 0.01).mean() < 0.03


def test_a_planted_set_comes_first() -> None:
    """Features of one set follow the score, those of 19 others go together and do not."""
    random = np.random.default_rng(3)
    score = random.normal(size=40)
    x = np.repeat(random.normal(size=(40, 20)), 15, axis=1) + random.normal(size=(40, 300))
    x[:, :15] = score[:, None] + random.normal(size=(40, 15))
    space = residual_space(np.full((40, 1), 40**-0.5))
    z = unit_columns(space.T @ x)
    members = sparse.csr_array(np.repeat(np.eye(20, dtype=bool), 15, axis=0))
    found = permuted_counts(
        unit_columns(space.T @ score[:, None])[:, 0],
        z,
        members,
        20,
        permutations=199,
        seed=np.random.SeedSequence(1),
    )
    assert int(np.argmin(found.p)) == 0
    assert found.p[0] == 1 / 200
    assert abs(community_score(z[:, :15]) @ unit_columns(space.T @ score[:, None])[:, 0]) > 0.9


def test_all_features_drawn_tell_nothing() -> None:
    members = sparse.csr_array(np.ones((4, 1), dtype=bool))
    z = unit_columns(np.random.default_rng(0).normal(size=(9, 4)))
    found = permuted_counts(z[:, 0], z, members, 4, permutations=19, seed=np.random.SeedSequence(1))
    assert (found.p.tolist(), found.counts.tolist()) == ([1.0], [4])


@pytest.mark.parametrize("columns", [1, 3])
def test_the_residual_space_is_what_the_design_leaves(columns: int) -> None:
    basis, _ = np.linalg.qr(np.random.default_rng(0).normal(size=(9, columns)))
    space = residual_space(basis)
    assert space.shape == (9, 9 - columns)
    assert_allclose(space.T @ space, np.eye(9 - columns), atol=1e-12)
    assert_allclose(basis.T @ space, 0.0, atol=1e-12)
