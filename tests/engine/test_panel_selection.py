"""Marker panels: planted markers are found, noise is told as noise, and other routes give the same."""

from __future__ import annotations

import numpy as np
from numpy.testing import assert_allclose, assert_array_equal

from workbench.engine.double_outcome import ClassOutcome, NumberOutcome
from workbench.engine.double_splits import BlockSplit, block_source
from workbench.engine.multiblock_pls import MultiblockPLS
from workbench.engine.panel_candidates import Candidate, columns_of, rank_features, try_candidates
from workbench.engine.panel_selection import select_panel


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
    assert_array_equal(rank_features([x], y, [1], 10)[0], np.argsort(-np.abs(x.T @ y[:, 0]))[:10])


def test_columns_of_blocks_and_candidates_by_hand() -> None:
    rng = np.random.default_rng(4)
    blocks = [rng.normal(size=(12, 5)), rng.normal(size=(12, 3))]
    assert_array_equal(columns_of(blocks, np.array([6, 0, 4])), np.hstack(blocks)[:, [6, 0, 4]])
    centred = [block - block.mean(axis=0) for block in blocks]
    split = BlockSplit(tuple(centred), tuple(block[:4] for block in centred), (np.arange(5), np.arange(3)))
    y = centred[1][:, :1]
    predicted, chosen = try_candidates(split, y, [Candidate(1, 1), Candidate(3, 1)])
    assert chosen[0].tolist() == [5]
    assert_allclose(predicted[0, :, 0, 0], y[:4, 0], atol=1e-9)
