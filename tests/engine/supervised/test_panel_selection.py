"""Marker panels: planted markers are found, noise is told as noise, and other routes give the same."""

from __future__ import annotations

import numpy as np
from numpy.testing import assert_allclose, assert_array_equal

from workbench.engine.supervised.double_outcome import ClassOutcome, NumberOutcome
from workbench.engine.supervised.double_splits import BlockSplit, block_source
from workbench.engine.supervised.multiblock_kernel import batch_predictions
from workbench.engine.supervised.multiblock_pls import MultiblockPLS
from workbench.engine.supervised.panel_candidates import Candidate, columns_of, rank_features, try_candidates
from workbench.engine.supervised.panel_selection import select_panel


def planted(
    seed: int, n: int = 100, each: int = 3, shift: float = 1.5
) -> tuple[np.ndarray, list[np.ndarray]]:
    """Two classes; the first ``each`` features of both blocks differ by ``shift`` standard deviations."""
    rng = np.random.default_rng(seed)
    ill = rng.permutation(np.arange(n) % 2)
    blocks = [rng.normal(size=(n, 600)), rng.normal(size=(n, 150))]
    for block in blocks:
        block[:, :each] += shift * ill[:, None]
    return ill, blocks


def test_a_planted_panel_is_found_across_blocks() -> None:
    """3 + 3 markers that differ by 1.5 standard deviations, 100 samples: precision and recall of 0.8 over 4 studies."""
    hits, taken, figures = 0, 0, []
    for seed in range(4):
        ill, blocks = planted(seed)
        panel = select_panel(block_source(blocks), ClassOutcome.of(ill), [600, 150], repeats=1, seed=seed)
        hits += int((panel.feature < 3).sum())
        taken += panel.feature.size
        figures.append(panel.performance.balanced_accuracy.mean())  # type: ignore[union-attr]
        assert panel.frequency[panel.feature < 3].mean() > 0.7
    assert hits / taken >= 0.8
    assert hits / 24 >= 0.8
    assert np.mean(figures) > 0.8


def test_a_panel_from_noise_has_the_figure_of_noise() -> None:
    """Features are chosen out of 750 in every training part, and held-out samples show it: 8 studies of 40."""
    figures = []
    for seed in range(8):
        ill, blocks = planted(seed, n=40, shift=0.0)
        panel = select_panel(block_source(blocks), ClassOutcome.of(ill), [600, 150], repeats=1, largest=20)
        figures.append(panel.performance.balanced_accuracy.mean())  # type: ignore[union-attr]
    assert abs(np.mean(figures) - 0.5) < 0.12


def test_the_refitted_panel_is_pls_on_its_features() -> None:
    ill, blocks = planted(3)
    outcome = NumberOutcome.of(ill + np.random.default_rng(0).normal(size=100))
    panel = select_panel(block_source(blocks), outcome, [600, 150], repeats=1, largest=12)
    chosen = np.column_stack([blocks[b][:, j] for b, j in zip(panel.block, panel.feature, strict=True)])
    model = MultiblockPLS(panel.components).fit(chosen, outcome.values[:, 0, 0])
    assert_allclose(panel.coefficient[:, 0], model.coef_[0] * chosen.std(axis=0, ddof=1), atol=1e-9)


def test_near_copies_are_named_as_alternatives() -> None:
    ill, blocks = planted(1, each=1, shift=3.0)
    blocks[1][:, 100] = -blocks[0][:, 0] + 0.2 * np.random.default_rng(1).normal(size=100)
    panel = select_panel(block_source(blocks), ClassOutcome.of(ill), [600, 150], repeats=1, largest=4)
    names = set(zip(panel.block.tolist(), panel.feature.tolist(), strict=True))
    copies = {(0, 0), (1, 100)}
    assert names & copies
    place = next(
        k for k, name in enumerate(zip(panel.block, panel.feature, strict=True)) if tuple(name) in copies
    )
    other = panel.alternatives[place][0]
    assert other[:2] in copies
    assert other[2] < -0.9


def test_one_component_ranks_by_correlation() -> None:
    """With one component and one block the order is that of the correlations with the outcome."""
    rng = np.random.default_rng(2)
    x, y = rng.normal(size=(30, 50)), rng.normal(size=(30, 1))
    x = (x - x.mean(axis=0)) / x.std(axis=0, ddof=1)
    y = y - y.mean(axis=0)
    assert_array_equal(
        rank_features([x], y[:, :, None], [1], 10)[0, 0], np.argsort(-np.abs(x.T @ y[:, 0]))[:10]
    )


def test_columns_of_blocks_and_candidates_by_hand() -> None:
    rng = np.random.default_rng(4)
    blocks = [rng.normal(size=(12, 5)), rng.normal(size=(12, 3))]
    assert_array_equal(columns_of(blocks, np.array([6, 0, 4])), np.hstack(blocks)[:, [6, 0, 4]])
    centred = [block - block.mean(axis=0) for block in blocks]
    split = BlockSplit(tuple(centred), tuple(block[:4] for block in centred), (np.arange(5), np.arange(3)))
    y = centred[1][:, :1]
    predicted, chosen = try_candidates(split, y[:, :, None], [Candidate(1, 1), Candidate(3, 1)])
    assert chosen[0].tolist() == [5]
    assert_allclose(predicted[0, :, 0, 0], y[:4, 0], atol=1e-9)


def test_panels_of_all_sizes_at_once_are_those_one_by_one() -> None:
    """Two arrangements of three classes, sizes 1 to 9: kernels of the first features, PLS on each."""
    rng = np.random.default_rng(5)
    blocks = [rng.normal(size=(30, 12)), rng.normal(size=(30, 7))]
    train, test = np.arange(22), np.arange(22, 30)
    split = block_source(blocks)(train, test)
    codes = ClassOutcome(np.array([rng.permutation(30) % 3 for _ in range(2)]).T, 3).codes(train)
    candidates = [Candidate(size, count) for size in (1, 4, 9) for count in (1, 2) if count <= size]
    predicted, _ = try_candidates(split, codes, candidates)
    for i in range(2):
        ranked = rank_features(split.train, codes[:, :, [i]], [1, 2], 9)[0]
        for c, one in enumerate(candidates):
            columns = ranked[one.components - 1, : one.size]
            x, z = columns_of(split.train, columns), columns_of(split.test, columns)
            other = batch_predictions(x @ x.T, z @ x.T, codes[:, :, [i]], one.components)[1][-1]
            assert_allclose(predicted[c, :, :, i], other[:, :, 0], atol=1e-9)


def test_a_panel_has_a_p_of_the_whole_procedure() -> None:
    """Markers of 1.5 standard deviations against none: 19 arrangements, smallest p 0.05."""
    p = []
    for shift in (1.5, 0.0):
        ill, blocks = planted(2, n=50, shift=shift)
        source, outcome = block_source(blocks), ClassOutcome.of(ill)
        panel = select_panel(source, outcome, [600, 150], repeats=1, largest=10, permutations=19)
        assert panel.test is not None
        assert_allclose(panel.test.observed, panel.performance.auc[0], rtol=1e-12)  # type: ignore[union-attr]
        p.append(panel.test.p)
    assert p[0] == 0.05
    assert p[1] > 0.05
