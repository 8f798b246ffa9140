"""Private variation is removed between visits as between independent samples."""

from __future__ import annotations

import numpy as np
import pytest
from numpy.testing import assert_allclose

from workbench.engine import BlockPair, SubjectDesign, screen_repeated
from workbench.engine.private_variation import LayerBlock, screen_without_private
from workbench.engine.repeated import independent_pair
from workbench.engine.repeated_layers import independent_layers
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


def test_two_blocks_have_the_rows_of_the_plain_screen() -> None:
    design, blocks = _study(1, 1.0)
    one, two = independent_layers(blocks, design, "visits")
    pair, space = independent_pair(BlockPair("a", blocks[0].values, blocks[1].values), design, "visits")
    assert_allclose(one.values, pair.x[:, :], atol=1e-12)
    assert_allclose(two.values, pair.y[:, :], atol=1e-12)
    assert one.values.shape == (20 * 3 + 1, 200)
    assert one.nuisance.shape[1] == space.nuisance.rank - 1 == 3


def test_what_private_variation_buries_comes_to_light_and_nothing_false_with_it() -> None:
    design, blocks = _study(2, 4.0, shared=1.5)
    buried = screen_repeated([BlockPair("a", blocks[0].values, blocks[1].values)], [design], "visits")
    found = screen_without_private(independent_layers(blocks, design, "visits"), [(0, 1)]).screen
    true = np.count_nonzero((found.i < 20) & (found.j < 8))
    assert true > 2 * np.count_nonzero((buried.i < 20) & (buried.j < 8))
    assert true > 120
    assert found.n_edges - true < 0.15 * found.n_edges


def test_no_edges_where_nothing_is_shared() -> None:
    some = 0
    for seed in range(20):
        design, blocks = _study(100 + seed, 3.0)
        some += (
            screen_without_private(independent_layers(blocks, design, "visits"), [(0, 1)]).screen.n_edges > 0
        )
    assert some <= 4


def test_blocks_are_taken_on_the_samples_that_all_have() -> None:
    design, blocks = _study(3, 1.0)
    kept = np.random.default_rng(4).permutation(80)[:60]
    part = LayerBlock("y", "y", blocks[1].values[kept], kept, blocks[1].nuisance[kept])
    one, two = independent_layers([blocks[0], part], design, "visits")
    same = np.sort(kept)
    again = independent_layers(
        [
            LayerBlock("x", "x", blocks[0].values[same], same, blocks[0].nuisance[same]),
            LayerBlock("y", "y", blocks[1].values[same], same, blocks[1].nuisance[same]),
        ],
        design,
        "visits",
    )
    assert_allclose(one.values, again[0].values, atol=1e-12)
    assert_allclose(two.values, again[1].values, atol=1e-12)
    assert independent_layers(blocks, design, "subjects")[0].values.shape == (20, 200)


def test_blocks_without_common_samples_are_refused() -> None:
    design, blocks = _study(5, 1.0)
    halves = [
        LayerBlock(block.name, block.layer, block.values[rows], rows, block.nuisance[rows])
        for block, rows in zip(blocks, (np.arange(40), np.arange(40, 80)), strict=True)
    ]
    with pytest.raises(NumericsError, match="the blocks share 0 samples"):
        independent_layers(halves, design, "visits")
