"""Multi-block PLS: planted truth, invariants, other routes to the same answer, and what is refused."""

from __future__ import annotations

import re

import numpy as np
import pytest
from numpy.testing import assert_allclose
from sklearn.base import clone
from sklearn.cross_decomposition import PLSRegression
from sklearn.pipeline import make_pipeline
from sklearn.preprocessing import StandardScaler
from sklearn.utils.estimator_checks import parametrize_with_checks

from workbench.engine import MultiblockDiscriminant, MultiblockPLS
from workbench.errors import NumericsError


def draw(
    n: int, p: int, q: int = 1, seed: int = 0, strength: float = 1.0
) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    """Features of which a third carry the first outcome's factor, outcomes, and the factor."""
    rng = np.random.default_rng(seed)
    factor = rng.normal(size=n)
    x = rng.normal(size=(n, p))
    x[:, : p // 3 + 1] += strength * factor[:, None]
    y = np.outer(factor, np.ones(q)) + 0.5 * rng.normal(size=(n, q))
    return x, y if q > 1 else y[:, 0], factor


def scaled_blocks(x: np.ndarray, sizes: list[int]) -> np.ndarray:
    """Each block standardised and divided by the root of its size, as one matrix."""
    parts = np.split((x - x.mean(axis=0)) / x.std(axis=0, ddof=1), np.cumsum(sizes)[:-1], axis=1)
    return np.hstack([part / np.sqrt(part.shape[1]) for part in parts])


def aligned(got: np.ndarray, want: np.ndarray) -> np.ndarray:
    """``got`` with the columns' signs of ``want``."""
    return got * np.sign((got * want).sum(axis=0))


@parametrize_with_checks([MultiblockPLS(n_components=1), MultiblockDiscriminant(n_components=2)])
def test_the_contract_of_scikit_learn_holds(estimator: MultiblockPLS, check: object) -> None:
    """Its own checks, which give X a single column at times: hence one component."""
    check(estimator)  # type: ignore[operator]


@pytest.mark.parametrize("q", [1, 3])
@pytest.mark.parametrize(("n", "p"), [(50, 12), (30, 400)])
def test_one_block_is_ordinary_pls(n: int, p: int, q: int) -> None:
    """Against scikit-learn's PLSRegression, p < n and p > n, one outcome and several (tolerance tightened)."""
    x, y, _ = draw(n, p, q)
    ours = MultiblockPLS(4).fit(x, y)
    theirs = PLSRegression(4, tol=1e-27, max_iter=100_000).fit(x, y)
    assert_allclose(aligned(ours.x_scores_, theirs.x_scores_), theirs.x_scores_, atol=1e-8)
    assert_allclose(aligned(ours.x_weights_, theirs.x_weights_), theirs.x_weights_, atol=1e-8)
    assert_allclose(aligned(ours.x_loadings_, theirs.x_loadings_), theirs.x_loadings_, atol=1e-8)
    assert_allclose(aligned(ours.x_rotations_, theirs.x_rotations_), theirs.x_rotations_, atol=1e-8)
    assert_allclose(ours.coef_, theirs.coef_, atol=1e-8)
    fresh = draw(20, p, q, seed=1)[0]
    assert_allclose(ours.predict(fresh), theirs.predict(fresh), atol=1e-8)
    assert_allclose(np.abs(ours.transform(fresh)), np.abs(theirs.transform(fresh)), atol=1e-8)


@pytest.mark.parametrize("sizes", [[5, 3, 4], [20, 300, 80]])
def test_super_scores_are_those_of_pls_on_the_scaled_blocks_side_by_side(sizes: list[int]) -> None:
    """Westerhuis & Smilde 2001: scores of ordinary PLS, to 1e-8 of the first score's length."""
    x, y, _ = draw(40, sum(sizes), 2)
    ours = MultiblockPLS(4, block_sizes=sizes).fit(x, y)
    side_by_side = scaled_blocks(x, sizes)
    theirs = PLSRegression(4, scale=False, tol=1e-27, max_iter=100_000)
    theirs.fit(side_by_side, (y - y.mean(axis=0)) / y.std(axis=0, ddof=1))
    unit = np.linalg.norm(ours.x_scores_[:, 0]) / np.linalg.norm(theirs.x_scores_[:, 0])
    assert_allclose(aligned(ours.x_scores_, theirs.x_scores_), theirs.x_scores_ * unit, atol=1e-8 * unit)


def test_features_alike_is_pls_on_the_features_side_by_side() -> None:
    """Whatever the blocks; they only name what belongs together, as the importance of 30 and of 4 features shows."""
    rng = np.random.default_rng(8)
    x, y = rng.normal(size=(25, 34)), rng.normal(size=25)
    blocks = MultiblockPLS(2, block_sizes=[30, 4], alike="features").fit(x, y)
    assert_allclose(blocks.predict(x), PLSRegression(2).fit(x, y).predict(x), atol=1e-8)
    assert_allclose(blocks.vip_, MultiblockPLS(2).fit(x, y).vip_, atol=1e-9)
    assert_allclose(blocks.block_importance_.sum(axis=1), 1.0)
    weighed = MultiblockPLS(2, block_sizes=[30, 4]).fit(x, y)
    assert weighed.block_importance_[0, 1] > blocks.block_importance_[0, 1]
    with pytest.raises(NumericsError, match="alike is 'samples'; allowed: 'blocks' or 'features'"):
        MultiblockPLS(2, alike="samples").fit(x, y)


def test_features_and_outcomes_may_each_outnumber_the_samples() -> None:
    """Another block as outcome: 90 columns, turned into coordinates inside, give scikit-learn's scores."""
    x, _, factor = draw(25, 200)
    y = np.outer(factor, np.arange(90) < 30) + np.random.default_rng(1).normal(size=(25, 90))
    ours = MultiblockPLS(2).fit(x, y)
    theirs = PLSRegression(2, tol=1e-27, max_iter=100_000).fit(x, y)
    assert_allclose(aligned(ours.x_scores_, theirs.x_scores_), theirs.x_scores_, atol=1e-8)
    assert_allclose(ours.predict(x), theirs.predict(x), atol=1e-8)


def test_scores_are_orthogonal_and_shares_add_up() -> None:
    """Orthogonal super scores; importance 1; mean square VIP 1; block scores add up to the super score."""
    x, y, _ = draw(30, 150)
    pls = MultiblockPLS(3, block_sizes=[100, 50]).fit(x, y)
    gram = pls.x_scores_.T @ pls.x_scores_
    assert_allclose(gram - np.diag(np.diag(gram)), 0.0, atol=1e-8 * gram[0, 0])
    assert_allclose(pls.block_importance_.sum(axis=1), 1.0)
    assert_allclose((pls.vip_**2).mean(), 1.0)
    assert pls.vip_[100:].mean() < 1.2 * pls.vip_[:100].mean()
    one = MultiblockPLS(3).fit(x, y)
    by_hand = np.sqrt(150 * one.x_weights_**2 @ one.y_explained_ / one.y_explained_.sum())
    assert_allclose(one.vip_, by_hand)
    parts = np.sqrt(pls.block_importance_.T)[:, None, :] * pls.train_block_scores_
    assert_allclose(parts.sum(axis=0), pls.x_scores_, atol=1e-8)
    assert_allclose(pls.block_scores(x).sum(axis=0), pls.x_scores_, atol=1e-8)
    residual = y - pls.predict(x)
    assert_allclose(pls.y_explained_.sum(), 1.0 - residual @ residual / ((y - y.mean()) ** 2).sum())


def test_explained_variance_is_what_leaving_the_score_out_takes_away() -> None:
    """By projection of each standardised block on the super scores."""
    x, y, _ = draw(30, 90)
    pls = MultiblockPLS(3, block_sizes=[60, 30]).fit(x, y)
    for b, part in enumerate(np.split(scaled_blocks(x, [60, 30]), [60], axis=1)):
        basis = pls.x_scores_ / np.linalg.norm(pls.x_scores_, axis=0)
        left = part - basis @ (basis.T @ part)
        share = 1.0 - (left**2).sum() / (part**2).sum()
        assert_allclose(pls.x_explained_[:, b].sum(), share)


def test_scale_and_order_of_features_make_no_difference() -> None:
    x, y, _ = draw(30, 40)
    rng = np.random.default_rng(3)
    order = np.concatenate([rng.permutation(25), 25 + rng.permutation(15)])
    first = MultiblockPLS(2, block_sizes=[25, 15]).fit(x, y)
    second = MultiblockPLS(2, block_sizes=[25, 15]).fit((x * rng.uniform(0.1, 9.0, 40) + 5.0)[:, order], y)
    assert_allclose(second.x_scores_, first.x_scores_, atol=1e-9)
    assert_allclose(second.vip_, first.vip_[order], atol=1e-9)


def test_a_planted_factor_is_recovered_and_its_block_named() -> None:
    """The factor stands in the second block alone: its importance, its features' VIP, new samples."""
    rng = np.random.default_rng(5)
    factor = rng.normal(size=160)
    x = rng.normal(size=(160, 900))
    x[:, 800:830] += factor[:, None]
    pls = MultiblockPLS(1, block_sizes=[800, 100]).fit(x[:60], factor[:60])
    assert np.corrcoef(pls.transform(x[60:])[:, 0], factor[60:])[0, 1] > 0.85
    assert pls.block_importance_[0, 1] > 0.7
    assert set(np.argsort(-pls.vip_)[:25]) <= set(range(800, 830))


def test_classes_count_alike_however_many_they_have() -> None:
    """The discriminant weights are distances of class means, whatever the classes' sizes."""
    x, _, _ = draw(60, 8, strength=0.0)
    labels = np.repeat(["a", "b"], [50, 10])
    x[labels == "b", :2] += 2.0
    found = MultiblockDiscriminant(1).fit(x, labels)
    scaled = (x - x.mean(axis=0)) / x.std(axis=0, ddof=1)
    distance = scaled[labels == "b"].mean(axis=0) - scaled[labels == "a"].mean(axis=0)
    want = distance / np.linalg.norm(distance)
    assert_allclose(found.x_weights_[:, 0] * np.sign(want @ found.x_weights_[:, 0]), want)
    repeated = np.concatenate([np.arange(60), np.repeat(np.flatnonzero(labels == "b"), 4)])
    assert (
        found.predict(x) == MultiblockDiscriminant(1).fit(x[repeated], labels[repeated]).predict(x)
    ).mean() > 0.95


def test_two_classes_are_told_apart_as_by_linear_discrimination() -> None:
    """With every component of p < n features the direction is Fisher's (scikit-learn's LDA), the cut near it."""
    from sklearn.discriminant_analysis import LinearDiscriminantAnalysis

    x, _, factor = draw(80, 5)
    labels = (factor > 0.4).astype(int)
    ours = MultiblockDiscriminant(5).fit(x, labels)
    theirs = LinearDiscriminantAnalysis(priors=[0.5, 0.5]).fit(x, labels)
    a, b = ours.coef_[0], theirs.coef_[0]
    assert_allclose(a / np.linalg.norm(a), b / np.linalg.norm(b), atol=1e-8)
    assert (ours.predict(x) == theirs.predict(x)).mean() > 0.95


def test_three_classes_the_middle_one_between() -> None:
    """Classes along one line: the middle one is not masked by the outer two."""
    rng = np.random.default_rng(1)
    labels = np.repeat([0, 1, 2], 30)
    x = rng.normal(size=(90, 50)) + np.outer(labels, np.arange(50) < 15) * 1.5
    found = MultiblockDiscriminant(2, block_sizes=[30, 20]).fit(x[::2], labels[::2])
    correct = found.predict(x[1::2]) == labels[1::2]
    assert correct[labels[1::2] == 1].mean() > 0.8
    assert correct.mean() > 0.9


def test_a_sample_without_a_block_is_predicted_by_the_model_of_the_others() -> None:
    """The same prediction as a model that never had the block; training samples that lack it are counted."""
    x, y, _ = draw(40, 60)
    lacking = x.copy()
    lacking[:5, 40:] = np.nan
    full = MultiblockPLS(2, block_sizes=[40, 20]).fit(x, y)
    assert_allclose(
        full.predict(lacking[:5]), MultiblockPLS(2).fit(x[:, :40], y).predict(x[:5, :40]), atol=1e-9
    )
    part = MultiblockPLS(2, block_sizes=[40, 20]).fit(lacking, y)
    assert part.lacking_ == (0, 5)
    assert_allclose(part.x_scores_.sum(axis=0), 0.0, atol=1e-9)
    assert np.corrcoef(part.predict(x), full.predict(x))[0, 1] > 0.95


def test_components_end_where_the_outcome_is_explained() -> None:
    """Two features that are the outcome: one component, whatever was asked for."""
    y = np.arange(10.0)
    pls = MultiblockPLS(2).fit(np.column_stack([y, -2.0 * y]), y)
    assert pls.n_components_ == 1
    assert_allclose(pls.predict(np.array([[20.0, -40.0]])), 20.0)


def test_it_clones_and_stands_in_a_pipeline() -> None:
    x, y, _ = draw(30, 50)
    model = MultiblockPLS(2, block_sizes=[30, 20])
    piped = make_pipeline(StandardScaler(), clone(model)).fit(x, y)
    assert_allclose(piped.predict(x), model.fit(x, y).predict(x), atol=1e-9)
    assert list(model.get_feature_names_out()) == ["multiblockpls0", "multiblockpls1"]


def test_constant_features_are_left_out_and_nothing_is_written_to() -> None:
    x, y, _ = draw(20, 30)
    x[:, 4] = 7.0
    before = x.copy()
    pls = MultiblockPLS(2, block_sizes=[10, 20]).fit(x, y)
    assert np.isnan(pls.vip_[4])
    assert not pls.x_kept_[4]
    assert pls.coef_[0, 4] == 0.0
    assert_allclose(x, before)


def test_what_the_data_do_not_support_is_refused_with_the_reason() -> None:
    x, y, _ = draw(20, 30)
    with pytest.raises(NumericsError, match=r"n_samples=20 and n_features=30, .*; ask for at most 19"):
        MultiblockPLS(25).fit(x, y)
    with pytest.raises(NumericsError, match="the outcome does not vary"):
        MultiblockPLS(1).fit(x, np.ones(20))
    with pytest.raises(NumericsError, match=re.escape("block sizes [10, 10] of side X")):
        MultiblockPLS(1, block_sizes=[10, 10]).fit(x, y)
    with pytest.raises(NumericsError, match="1 class"):
        MultiblockDiscriminant(1).fit(x, np.zeros(20, dtype=int))
    gap = x.copy()
    gap[3, 2] = np.nan
    with pytest.raises(NumericsError, match=r"sample 3, block 0 .* part of its features"):
        MultiblockPLS(1, block_sizes=[15, 15]).fit(gap, y)
    gap[3] = np.nan
    with pytest.raises(NumericsError, match=r"sample 3 .* no block at all"):
        MultiblockPLS(1, block_sizes=[15, 15]).fit(gap, y)
    with pytest.raises(NumericsError, match="n_components is 0"):
        MultiblockPLS(0).fit(x, y)
