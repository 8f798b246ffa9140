"""Private variation is removed between visits and between subjects as between independent samples."""

from __future__ import annotations

import numpy as np
import pytest
from numpy.testing import assert_allclose

from workbench.engine import BlockPair, SubjectDesign, screen_blocks, screen_repeated
from workbench.engine.pairs.repeated import independent_pair
from workbench.engine.private.private_variation import LayerBlock
from workbench.engine.private.repeated_layers import cleaned_repeated
from workbench.errors import NumericsError


def _study(seed: int, private: float, shared: float = 0.0, subjects: int = 20, visits: int = 4):
    rng = np.random.default_rng(seed)
    subject, visit = np.repeat(np.arange(subjects), visits), np.tile(np.arange(visits), subjects)
    module = rng.normal(size=(subject.size, 1))
    blocks = []
    for name, p in (("x", 200), ("y", 80)):
        x = rng.normal(size=(subject.size, p)) + 2.0 * rng.normal(size=(subjects, p))[subject]
        x += private * rng.normal(size=(subject.size, 3)) @ rng.normal(size=(3, p)) / np.sqrt(3)
        x[:, : p // 10] += shared * module
        blocks.append(LayerBlock(name, name, x, np.arange(subject.size), np.empty((subject.size, 0))))
    return SubjectDesign.of(subject, visit), blocks


def _plain(blocks) -> BlockPair:
    return BlockPair("x and y", blocks[0].values, blocks[1].values)


def test_the_rows_are_those_of_the_screen_without_removal() -> None:
    design, blocks = _study(1, 1.0)
    made = cleaned_repeated(blocks, [(0, 1)], design, "visits")
    pair, _ = independent_pair(_plain(blocks), design, "visits")
    assert_allclose(made.layers[0].values, pair.x[:, :], atol=1e-12)
    assert_allclose(made.layers[1].values, pair.y[:, :], atol=1e-12)
    assert made.layers[0].values.shape == (20 * 3 + 1, 200)
    assert made.layers[0].nuisance.shape[1] == made.space.nuisance.rank - 1 == 3


def test_rows_seen_on_the_samples_have_the_same_products_and_no_mean_in_any_subject() -> None:
    design, blocks = _study(2, 1.0)
    made = cleaned_repeated(blocks, [(0, 1)], design, "visits")
    rows = made.layers[0].values
    seen = made.space.on_samples(rows)
    assert seen.shape == blocks[0].values.shape
    assert_allclose(seen.T @ seen, rows.T @ rows, atol=1e-9)
    assert_allclose(seen.reshape(20, 4, -1).mean(axis=1), 0.0, atol=1e-12)


def test_what_private_variation_buries_comes_to_light_and_nothing_false_with_it() -> None:
    design, blocks = _study(2, 4.0, shared=1.5)
    buried = screen_repeated([_plain(blocks)], [design], "visits")
    found = screen_blocks(cleaned_repeated(blocks, [(0, 1)], design, "visits").pairs)
    true = np.count_nonzero((found.i < 20) & (found.j < 8))
    assert true > 2 * np.count_nonzero((buried.i < 20) & (buried.j < 8))
    assert true > 120
    assert found.n_edges - true < 0.15 * found.n_edges


@pytest.mark.parametrize("level", ["visits", "subjects"])
def test_no_edges_where_nothing_is_shared(level) -> None:
    some = 0
    for seed in range(20):
        design, blocks = _study(100 + seed, 3.0, subjects=30)
        some += screen_blocks(cleaned_repeated(blocks, [(0, 1)], design, level).pairs).n_edges > 0
    assert some <= 4


def test_features_of_unusual_course_are_damped_after_removal_too() -> None:
    design, blocks = _study(3, 2.0, subjects=30, visits=8)
    rng = np.random.default_rng(4)
    slow = np.cumsum(rng.normal(size=(30, 8, 20)), axis=1).reshape(240, 20)
    blocks[0].values[:, :20] = slow
    (pair,) = cleaned_repeated(blocks, [(0, 1)], design, "visits").pairs
    assert pair.damping is not None
    assert pair.damping[0][:20].mean() < 0.97 < pair.damping[0][20:].mean()
    (means,) = cleaned_repeated(blocks, [(0, 1)], design, "subjects").pairs
    assert means.x.shape == (30, 200)


def test_with_few_changes_nothing_is_removed_and_the_reason_is_given() -> None:
    design, blocks = _study(6, 2.0, subjects=6)
    made = cleaned_repeated(blocks, [(0, 1)], design, "visits")
    assert made.off[0].startswith("18 changes within 6 subjects leave 15 dimensions after the nuisance")
    assert not made.components[0]


def test_blocks_of_other_samples_are_refused() -> None:
    design, blocks = _study(5, 1.0)
    part = LayerBlock("y", "y", blocks[1].values[:40], np.arange(40), blocks[1].nuisance[:40])
    with pytest.raises(NumericsError, match="x, y have different samples"):
        cleaned_repeated([blocks[0], part], [(0, 1)], design, "visits")
