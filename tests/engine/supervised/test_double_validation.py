"""Double cross-validation: planted truth, nothing leaks, other routes to the same figures, and what is refused."""

from __future__ import annotations

import numpy as np
import pytest
from numpy.testing import assert_allclose, assert_array_equal
from sklearn.cross_decomposition import PLSRegression
from sklearn.metrics import balanced_accuracy_score, confusion_matrix, roc_auc_score
from sklearn.metrics import roc_curve as reference_curve

from workbench.engine import SubjectDesign
from workbench.engine.supervised.double_arrangements import outcome_arrangements
from workbench.engine.supervised.double_choice import fewest_as_good, ranking_losses
from workbench.engine.supervised.double_folds import fold_splits
from workbench.engine.supervised.double_loop import choices
from workbench.engine.supervised.double_outcome import ClassOutcome, NumberOutcome
from workbench.engine.supervised.double_splits import block_source, split_kernels
from workbench.engine.supervised.double_validation import double_validation
from workbench.engine.supervised.multiblock_kernel import batch_predictions
from workbench.engine.supervised.multiblock_pls import MultiblockPLS
from workbench.engine.supervised.performance_measures import class_performance, roc_curve
from workbench.errors import NumericsError


def two_blocks(n: int = 48, seed: int = 0, strength: float = 1.0) -> tuple[np.ndarray, list[np.ndarray]]:
    """Two classes of equal size and two blocks; the first block's first features carry the class."""
    rng = np.random.default_rng(seed)
    ill = rng.permutation(np.arange(n) % 2)
    blocks = [rng.normal(size=(n, 80)), rng.normal(size=(n, 30))]
    blocks[0][:, :15] += strength * ill[:, None]
    return ill, blocks


def test_batched_predictions_are_those_of_the_estimator() -> None:
    """Every number of components, several outcomes, two arrangements: MultiblockPLS fitted to each."""
    rng = np.random.default_rng(1)
    x, y = rng.normal(size=(30, 70)), rng.normal(size=(30, 2))
    train, test = np.arange(22), np.arange(22, 30)
    kernels = split_kernels(block_source([x[:, :40], x[:, 40:]])(train, test), train, test)
    orders = [np.arange(22), rng.permutation(22)]
    outcomes = [(y[:22][order] - y[:22].mean(axis=0)) / y[:22].std(axis=0, ddof=1) for order in orders]
    fitted, found = batch_predictions(*kernels.of([0, 1]), np.stack(outcomes, axis=2), 3)
    for k, outcome in enumerate(outcomes):
        for a in range(3):
            model = MultiblockPLS(a + 1, block_sizes=[40, 30]).fit(x[:22], outcome)
            assert_allclose(found[a, :, :, k], model.predict(x[22:]), atol=1e-9)
            assert_allclose(fitted[a, :, :, k], model.predict(x[:22]), atol=1e-9)


def test_q2_is_that_of_scikit_learns_model_on_the_same_folds() -> None:
    """One block, two components without a choice: squared errors of PLSRegression, fold by fold."""
    rng = np.random.default_rng(2)
    x = rng.normal(size=(40, 60))
    y = x[:, :5].sum(axis=1) + rng.normal(size=40)
    seen: list[tuple[np.ndarray, np.ndarray]] = []
    source = block_source([x])

    def spying(train: np.ndarray, test: np.ndarray) -> object:
        seen.append((train, test))
        return source(train, test)

    found = double_validation(spying, NumberOutcome.of(y), candidates=[2], repeats=1)  # type: ignore[arg-type]
    outer = [(train, test) for train, test in seen if train.size + test.size == 40]
    errors = baseline = 0.0
    for train, test in outer:
        predicted = PLSRegression(2).fit(x[train], y[train]).predict(x[test]).ravel()
        errors += ((y[test] - predicted) ** 2).sum()
        baseline += ((y[test] - y[train].mean()) ** 2).sum()
    assert len(outer) == 5
    assert_allclose(found.model.performance.q2, 1.0 - errors / baseline, rtol=1e-9)  # type: ignore[union-attr]


def test_class_figures_are_those_of_scikit_learn() -> None:
    """Balanced accuracy, AUC, confusion and the ROC curve of one repeat."""
    rng = np.random.default_rng(3)
    labels = rng.integers(0, 2, 50)
    said = np.clip(0.3 * labels + rng.uniform(0, 0.7, 50), 0, 1).round(1)
    shares = np.column_stack([1 - said, said])
    predicted = (said > 0.5).astype(int)
    found = class_performance(labels, said[None, :, None], predicted[None], shares[None])
    assert_allclose(found.auc, roc_auc_score(labels, said))
    assert_allclose(found.balanced_accuracy, balanced_accuracy_score(labels, predicted))
    assert_array_equal(found.confusion, confusion_matrix(labels, predicted))
    weight = 0.5 / np.bincount(labels)[labels]
    assert_allclose(found.brier, 2.0 * (weight * (said - labels) ** 2).sum())
    false, true, _ = reference_curve(labels, said, drop_intermediate=False)
    assert_allclose(np.column_stack(roc_curve(labels, said)), np.column_stack([false, true]))
    assert 0.03 < found.auc_error < 0.12


def test_placements_count_ties_half_and_average_to_the_area() -> None:
    rng = np.random.default_rng(4)
    scores, belongs = rng.integers(0, 6, (3, 40, 2)).astype(float), rng.random((40, 2)) < 0.4
    losses = ranking_losses(scores, belongs)
    for k in range(3):
        for p in range(2):
            area = roc_auc_score(belongs[:, p], scores[k, :, p])
            assert_allclose(1.0 - losses[k, belongs[:, p], p].mean(), area)
            assert_allclose(1.0 - losses[k, ~belongs[:, p], p].mean(), area)


def test_the_fewest_components_as_good_as_the_best_are_chosen() -> None:
    rng = np.random.default_rng(5)
    base = rng.normal(size=(1, 200, 1)) ** 2
    losses = np.concatenate([base + 0.5, base + 0.001 * rng.normal(size=base.shape), base])
    assert fewest_as_good(losses, np.full((200, 1), 1 / 200)).tolist() == [1]


def test_a_planted_class_is_found_and_the_block_that_carries_it() -> None:
    ill, blocks = two_blocks(strength=1.2)
    found = double_validation(block_source(blocks), ClassOutcome.of(ill), repeats=2, permutations=99)
    figures = [one.performance for one in (found.model, *found.singles)]
    whole, first, second = (float(one.balanced_accuracy.mean()) for one in figures)  # type: ignore[union-attr]
    assert whole > 0.85
    assert first > 0.85
    assert second < 0.7
    assert found.test.p == 0.01
    assert found.test.observed == pytest.approx(found.model.performance.auc.mean())  # type: ignore[union-attr]


def test_blocks_of_noise_may_be_left_out_by_the_inner_loop() -> None:
    """A block that tells beside 300 and 2 features of noise: four studies of 60."""
    areas, used = [], []
    for seed in range(4):
        ill, blocks = two_blocks(60, seed, strength=0.7)
        rng = np.random.default_rng(seed + 9)
        noisy = [blocks[0], rng.normal(size=(60, 300)), rng.normal(size=(60, 2))]
        for choose in (True, False):
            found = double_validation(
                block_source(noisy), ClassOutcome.of(ill), repeats=1, choose_blocks=choose
            )
            areas.append(found.model.performance.auc.mean())  # type: ignore[union-attr]
            used.append(found.model.blocks.mean(axis=(0, 1)))
    chosen, every = np.mean(areas[::2]), np.mean(areas[1::2])
    assert chosen > every + 0.03
    assert min(shares[0] for shares in used[::2]) == 1.0
    assert np.mean([shares[1:] for shares in used[::2]]) < 0.6
    assert np.min(used[1::2]) == 1.0
    assert len(choices(7, [1, 2], choose_blocks=True)) == 2 * (2 + 2 * 7 + 7)


def test_kernels_of_blocks_or_features_alike_are_those_of_the_estimator() -> None:
    """Predictions of new samples by MultiblockPLS with either weighting."""
    rng = np.random.default_rng(4)
    x, y, train, test = rng.normal(size=(30, 50)), rng.normal(size=30), np.arange(22), np.arange(22, 30)
    kernels = split_kernels(block_source([x[:, :45], x[:, 45:]])(train, test), train, test)
    centred = (y[:22] - y[:22].mean())[:, None, None]
    for alike in ("blocks", "features"):
        found = batch_predictions(*kernels.of([0, 1], alike), centred, 2)[1][1, :, 0, 0]
        model = MultiblockPLS(2, block_sizes=[45, 5], alike=alike).fit(x[:22], y[:22])
        assert_allclose(found, model.predict(x[22:]) - y[:22].mean(), atol=1e-9)


def test_noise_is_told_as_noise() -> None:
    """12 studies of 24: balanced accuracy near 0.5, p spread out."""
    figures, p = [], []
    for seed in range(12):
        ill, blocks = two_blocks(24, seed, strength=0.0)
        found = double_validation(
            block_source(blocks), ClassOutcome.of(ill), repeats=1, permutations=39, seed=seed
        )
        figures.append(found.model.performance.balanced_accuracy.mean())  # type: ignore[union-attr]
        p.append(found.test.p)
    assert abs(np.mean(figures) - 0.5) < 0.1
    assert 0.25 < np.mean(p) < 0.75  # type: ignore[arg-type]


def test_the_nuisance_alone_is_told_apart_from_what_the_blocks_add() -> None:
    """An outcome that is age: the nuisance predicts it, the blocks add nothing once age is removed (6 studies)."""
    alone, added, p = [], [], []
    for seed in range(6):
        rng = np.random.default_rng(seed)
        age = rng.normal(size=(60, 1))
        blocks = [rng.normal(size=(60, 50)) + age, rng.normal(size=(60, 20))]
        outcome = NumberOutcome.of(age[:, 0] + 0.3 * rng.normal(size=60), age)
        found = double_validation(
            block_source(blocks, age), outcome, nuisance=age, repeats=1, permutations=39
        )
        assert found.nuisance is not None
        alone.append(found.nuisance.performance.q2.mean())  # type: ignore[union-attr]
        added.append(found.model.performance.q2_added.mean())  # type: ignore[union-attr]
        p.append(found.test.p)
    assert min(alone) > 0.8
    assert np.mean(added) < 0.0
    assert np.mean(p) > 0.25  # type: ignore[arg-type]


def test_samples_of_a_subject_stay_together_and_exchange_as_a_whole() -> None:
    """Subjects with features of their own and an outcome by subject: no better than chance, p not small."""
    rng = np.random.default_rng(7)
    subject = np.repeat(np.arange(16), 3)
    ill = rng.permutation(np.arange(16) % 2)[subject]
    blocks = [rng.normal(size=(16, 60))[subject] + 0.3 * rng.normal(size=(48, 60))]
    design = SubjectDesign.of(subject)
    found = double_validation(
        block_source(blocks), ClassOutcome.of(ill), subjects=design, repeats=2, permutations=99
    )
    assert found.test.how == "subjects with the same visits exchanged whole"
    assert found.test.p is not None
    assert found.test.p > 0.05
    pooled = double_validation(block_source(blocks), ClassOutcome.of(ill), repeats=2)
    assert pooled.model.performance.auc.mean() > 0.95  # type: ignore[union-attr]
    assert found.model.performance.auc.mean() < 0.8  # type: ignore[union-attr]


def test_folds_spread_every_factor_and_keep_subjects_whole() -> None:
    """Two factors and subjects of two samples: both factors are even over the folds."""
    subject = np.repeat(np.arange(20), 2)
    levels = np.column_stack([np.arange(20) % 2, np.arange(20) // 10])[subject]
    source = block_source([np.random.default_rng(0).normal(size=(40, 3))])
    for splits in fold_splits(source, SubjectDesign.of(subject), levels, 5, 0, 0):
        train, test = splits.rows[0]
        assert not set(subject[train]) & set(subject[test])
        assert_array_equal(levels[test].mean(axis=0), [0.5, 0.5])
        assert all(set(held) <= set(train) for _, held in splits.rows[1:])


def test_arrangements_keep_whole_what_belongs_together() -> None:
    """By subject where subjects differ, within subjects where all have the same classes, withheld where few."""
    before_after = np.tile([0, 1], 8)
    design = SubjectDesign.of(np.repeat(np.arange(8), 2), before_after)
    found = outcome_arrangements(before_after, 20, 0, subjects=design)
    assert found.how == "samples exchanged within subjects"
    assert found.available == 256
    assert_array_equal(found.rows // 2, np.broadcast_to(np.arange(16) // 2, (20, 16)))
    whole = outcome_arrangements(np.repeat(np.arange(8), 2), 20, 0, subjects=design)
    assert_array_equal(whole.rows[:, 1::2], whole.rows[:, ::2] + 1)
    few = outcome_arrangements(np.array([0, 0, 1, 1, 1]), 20, 0)
    assert few.withheld is not None
    assert few.withheld.startswith("only 10 arrangements")
    cells = np.repeat([0, 1], 10)
    kept = outcome_arrangements(np.arange(20) % 2, 5, 0, exchange=cells)
    assert_array_equal(cells[kept.rows], np.broadcast_to(cells, (5, 20)))
    assert kept.how == "samples exchanged within levels of the nuisance"


def test_the_same_seed_gives_the_same_and_a_sample_out_of_reach_is_not_scored() -> None:
    ill, blocks = two_blocks(30)
    alone = np.zeros((30, 1))
    alone[4] = 1.0
    run = [
        double_validation(block_source(blocks, alone), ClassOutcome.of(ill), repeats=1, permutations=9)
        for _ in range(2)
    ]
    assert_array_equal(run[0].model.predicted, run[1].model.predicted)
    assert_array_equal(run[0].test.null, run[1].test.null)
    assert np.flatnonzero(np.isnan(run[0].model.predicted[0, :, 0])).tolist() == [4]
    assert run[0].n_scored.tolist() == [29]


def test_what_cannot_be_done_is_refused_with_the_reason() -> None:
    _, blocks = two_blocks(24)
    with pytest.raises(NumericsError, match="one of them without samples"):
        ClassOutcome.of(np.zeros(24, dtype=int))
    with pytest.raises(NumericsError, match="outcome 1 .* does not vary".replace(" .* ", r" \(from 0\) ")):
        NumberOutcome.of(np.column_stack([np.arange(24), np.ones(24)]))
    with pytest.raises(NumericsError, match="give at least one block"):
        block_source([blocks[0], blocks[1][:5]])
    with pytest.raises(NumericsError, match="30 folds for 24 subjects"):
        double_validation(block_source(blocks), ClassOutcome.of(np.arange(24) % 2), folds=30)
