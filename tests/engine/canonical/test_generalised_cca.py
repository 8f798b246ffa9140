"""Components of several blocks: planted truth, two blocks, lacking samples, the account, the test, refusals."""

from __future__ import annotations

import numpy as np
import pytest
from numpy.testing import assert_allclose
from scipy.linalg import eigh
from sklearn.utils.estimator_checks import parametrize_with_checks

from workbench.engine import RegularisedCCA
from workbench.engine.canonical.generalised_account import takes_part, variance_accounts
from workbench.engine.canonical.generalised_cca import GeneralisedCCA
from workbench.engine.canonical.generalised_permutation import generalised_pair_test
from workbench.engine.canonical.generalised_validation import blocks_source, cross_validated_components
from workbench.errors import NumericsError

WIDTHS = (60, 40, 30)


def draw_blocks(
    n: int, seed: int, strength: float = 1.0, private: float = 1.0
) -> tuple[list[np.ndarray], np.ndarray]:
    """Three blocks with two shared factors and two private ones each, and the shared factors."""
    rng = np.random.default_rng(seed)
    shared = rng.normal(size=(n, 2))
    blocks = [
        rng.normal(size=(n, width))
        + strength * shared @ rng.normal(size=(2, width))
        + private * rng.normal(size=(n, 2)) @ rng.normal(size=(2, width))
        for width in WIDTHS
    ]
    return blocks, shared


def recovered(scores: np.ndarray, shared: np.ndarray) -> float:
    """Share of the variance of the shared factors that the scores explain."""
    known = np.isfinite(scores[:, 0])
    basis = np.linalg.qr(scores[known] - scores[known].mean(axis=0))[0]
    centred = shared[known] - shared[known].mean(axis=0)
    return float(np.sum((basis.T @ centred) ** 2) / np.sum(centred**2))


@parametrize_with_checks([GeneralisedCCA(n_components=1)])
def test_the_contract_of_scikit_learn_holds(estimator: GeneralisedCCA, check: object) -> None:
    """Its own checks, of one block."""
    check(estimator)  # type: ignore[operator]


@pytest.mark.parametrize("ridge", [0.01, 1.0, (30.0, 0.3)])
def test_two_blocks_give_ridge_cca(ridge: float | tuple[float, float]) -> None:
    """Correlations, variates, weights and feature correlations to 1e-10, and roots 1 + s."""
    blocks, _ = draw_blocks(40, 0)
    x, y = blocks[:2]
    want = RegularisedCCA(3, ridge=ridge).fit(x, y)
    got = GeneralisedCCA(3, ridge=ridge, block_sizes=WIDTHS[:2]).fit(np.hstack([x, y]))
    assert_allclose(got.correlations_, want.correlations_, atol=1e-10)
    assert_allclose(got.variates_[0], want.x_scores_, atol=1e-10)
    assert_allclose(got.weights_[WIDTHS[0] :], want.y_weights_, atol=1e-10)
    assert_allclose(got.other_correlations_[: WIDTHS[0]], want.x_cross_correlations_, atol=1e-10)
    assert_allclose(got.explained_, np.hstack([want.x_explained_, want.y_explained_]), atol=1e-10)
    assert_allclose(got.roots_ - 1.0, np.sum(want.x_scores_ * want.y_scores_, axis=0), atol=1e-10)


def test_the_primal_problem_has_the_same_solution() -> None:
    """The generalised eigenproblem of scipy over the features: cross products against ridged variances."""
    blocks, _ = draw_blocks(25, 1)
    gcca = GeneralisedCCA(2, ridge=0.5, block_sizes=WIDTHS).fit(np.hstack(blocks))
    z = [(block - block.mean(axis=0)) / block.std(axis=0, ddof=1) for block in blocks]
    every = np.hstack(z)
    owner = np.repeat(np.arange(3), WIDTHS)
    within = np.zeros((every.shape[1],) * 2)
    for b, block in enumerate(z):
        within[np.ix_(owner == b, owner == b)] = block.T @ block + gcca.ridge_[b] * np.eye(WIDTHS[b])
    cross = np.where(owner[:, None] == owner, within, every.T @ every)
    size = every.shape[1]
    roots, vectors = eigh(cross, within, subset_by_index=[size - 2, size - 1])
    assert_allclose(gcca.roots_, roots[::-1], rtol=1e-9)
    for k in range(2):
        want = np.sqrt(3.0) * vectors[:, 1 - k]
        assert_allclose(gcca.weights_[:, k] * np.sign(gcca.weights_[:, k] @ want), want, atol=1e-8)


def test_the_shared_factors_are_recovered_under_private_ones() -> None:
    """By three blocks at least as well as by the best two of them, mean over ten studies."""
    three, two = [], []
    for seed in range(10):
        blocks, shared = draw_blocks(40, seed, strength=0.7)
        three.append(
            recovered(GeneralisedCCA(2, ridge=1.0, block_sizes=WIDTHS).fit(np.hstack(blocks)).scores_, shared)
        )
        best = []
        for a, b in ((0, 1), (0, 2), (1, 2)):
            pair = GeneralisedCCA(2, ridge=1.0, block_sizes=(WIDTHS[a], WIDTHS[b]))
            best.append(recovered(pair.fit(np.hstack([blocks[a], blocks[b]])).scores_, shared))
        two.append(max(best))
    assert np.mean(three) >= np.mean(two)


@pytest.mark.parametrize(("ridge", "loss"), [(0.1, 0.003), (1.0, 0.0), (10.0, 0.0)])
def test_lacking_samples_cost_less_than_dropping_them(ridge: float, loss: float) -> None:
    """A block that lacks 8 of 40: shared factors in new samples, ten studies; with little ridge as good as the same."""
    kept, dropped = [], []
    for seed in range(10):
        blocks, _ = draw_blocks(40, seed, strength=0.7)
        full = np.hstack(blocks)
        lacking = full.copy()
        lacking[:8, WIDTHS[0] + WIDTHS[1] :] = np.nan
        fit = GeneralisedCCA(2, ridge=ridge, block_sizes=WIDTHS).fit(lacking)
        assert np.isnan(fit.variates_[2][:8]).all()
        assert np.isfinite(fit.scores_).all()
        new, truth = draw_new(blocks, seed)
        less = GeneralisedCCA(2, ridge=ridge, block_sizes=WIDTHS).fit(full[8:])
        kept.append(recovered(fit.transform(new), truth))
        dropped.append(recovered(less.transform(new), truth))
    assert np.mean(kept) > np.mean(dropped) - loss


def draw_new(blocks: list[np.ndarray], seed: int) -> tuple[np.ndarray, np.ndarray]:
    """Return new samples of the study that ``draw_blocks`` made from the seed: the same loadings, 400 samples."""
    rng = np.random.default_rng(seed)
    n = len(blocks[0])
    rng.normal(size=(n, 2))
    fresh = np.random.default_rng([seed, 1])
    shared = fresh.normal(size=(400, 2))
    new = []
    for width in WIDTHS:
        rng.normal(size=(n, width))
        loading = 0.7 * rng.normal(size=(2, width))
        rng.normal(size=(n, 2))
        own = rng.normal(size=(2, width))
        new.append(fresh.normal(size=(400, width)) + shared @ loading + fresh.normal(size=(400, 2)) @ own)
    return np.hstack(new), shared


def test_training_scores_are_those_of_transform() -> None:
    """Also where blocks lack samples, and a constant feature changes nothing."""
    blocks, _ = draw_blocks(30, 2)
    x = np.hstack([*blocks, np.ones((30, 1))])
    x[3:6, : WIDTHS[0]] = np.nan
    gcca = GeneralisedCCA(2, ridge=1.0, block_sizes=(*WIDTHS[:2], WIDTHS[2] + 1)).fit(x)
    assert_allclose(gcca.transform(x), gcca.scores_, atol=1e-10)
    assert not gcca.kept_[-1]
    assert np.isnan(gcca.own_correlations_[-1]).all()


def test_out_of_sample_correlations_know_which_layers_share() -> None:
    """A factor of the first two blocks alone: the third takes no part, out of sample."""
    rng = np.random.default_rng(3)
    factor = rng.normal(size=(60, 1))
    blocks = [rng.normal(size=(60, width)) for width in WIDTHS]
    for block in blocks[:2]:
        block += factor @ rng.normal(size=(1, block.shape[1]))
    found = cross_validated_components(blocks_source(blocks), 60, n_components=1, repeats=1, ridge=1.0)
    variates = [factor + rng.normal(size=(60, 1)) for _ in WIDTHS]
    part = takes_part(found.with_others, found.with_others_errors, variates)
    assert part[0].tolist() == [True, True, False]
    alone = [variates[0], rng.normal(size=(60, 1)), variates[2]]
    assert not takes_part(np.ones((1, 3)), np.zeros((1, 3)), alone)[0, 1]
    assert found.pair_correlations[0, 0, 1] > 0.8
    assert found.pair_correlations[0, 0, 1] == found.pair_correlations[0, 1, 0]


def test_the_account_is_the_planted_one() -> None:
    """Shares of shared, private and noise within 0.05, for known variates; they add up to 1."""
    blocks, shared = draw_blocks(100, 4, strength=0.6, private=0.8)
    z = [(block - block.mean(axis=0)) / block.std(axis=0, ddof=1) for block in blocks]
    accounts = variance_accounts(z, [shared] * 3, np.ones((2, 3), dtype=bool))
    rng = np.random.default_rng(4)
    rng.normal(size=(100, 2))
    for account, width in zip(accounts, WIDTHS, strict=True):
        rng.normal(size=(100, width))
        joint = np.sum((0.6 * rng.normal(size=(2, width))) ** 2, axis=0)
        rng.normal(size=(100, 2))
        own = np.sum((0.8 * rng.normal(size=(2, width))) ** 2, axis=0)
        total = joint + own + 1.0
        got = (account.shared_by_all, account.private, account.noise)
        assert_allclose(got, [np.mean(part / total) for part in (joint, own, np.ones(width))], atol=0.05)
        assert sum(got) + account.shared_by_some == pytest.approx(1.0)


@pytest.mark.parametrize("lacking", [0, 5])
def test_the_test_finds_the_shared_components_and_no_more(lacking: int) -> None:
    """Two axes in three of four studies at least; where nothing is shared one in two of six at most (0.002)."""
    axes = []
    for seed in range(4):
        blocks, _ = draw_blocks(30, seed, strength=2.0)
        blocks[2][:lacking] = np.nan
        axes.append(generalised_pair_test(blocks, permutations=99, components=4, random_state=seed).axes())
    assert sorted(axes)[:3] == [2, 2, 2]
    found = 0
    for seed in range(9, 15):
        none, _ = draw_blocks(30, seed, strength=0.0)
        found += generalised_pair_test(none, permutations=99, random_state=seed).axes() > 0
    assert found <= 2


def test_what_cannot_be_done_is_refused() -> None:
    """Gaps inside a block, more components than there are, ridges of another number, no ridge with many features."""
    blocks, _ = draw_blocks(20, 5)
    x = np.hstack(blocks)
    gap = x.copy()
    gap[2, 3] = np.nan
    with pytest.raises(NumericsError, match=r"block 1 has 1 missing or infinite values .* row 2, column 3"):
        GeneralisedCCA(1, ridge=1.0, block_sizes=WIDTHS).fit(gap)
    with pytest.raises(NumericsError, match="or 3 of them"):
        GeneralisedCCA(1, ridge=(1.0, 2.0), block_sizes=WIDTHS).fit(x)
    with pytest.raises(NumericsError, match=r"ridge 0 \(none\) for block 1 with 60 features and 19 degrees"):
        GeneralisedCCA(1, ridge=0.0, block_sizes=WIDTHS).fit(x)
    with pytest.raises(NumericsError, match=r"block sizes .* which has 130 features"):
        GeneralisedCCA(1, block_sizes=(60, 40)).fit(x)
    with pytest.raises(NumericsError, match="1 block"):
        generalised_pair_test(blocks[:1])
    few = np.hstack([block[:, :1] for block in blocks])
    with pytest.raises(NumericsError, match="asked for 3 components, the data support"):
        GeneralisedCCA(3, ridge=1.0, block_sizes=(1, 1, 1)).fit(few)
