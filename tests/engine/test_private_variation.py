"""Private variation: what one layer has alone is removed, what layers share stays, and chance stays chance."""

from __future__ import annotations

import numpy as np
import pytest
from simulated import (
    Design,
    Study,
    by_hand,
    design_matrix,
    logs,
    metabolites,
    oracle,
    score,
    simulate,
    transcripts,
)

from workbench.engine.private_variation import LayerBlock, PrivateScreen, screen_without_private
from workbench.engine.screen import BlockPair, screen_blocks
from workbench.errors import NumericsError

PAIR = (transcripts(features=1500, module_size=40), metabolites(features=200))


def layer_blocks(study: Study) -> list[LayerBlock]:
    """Return the blocks as an analyst would take them, with the design as their nuisance."""
    names = [block.name for block in study.design.blocks]
    made = []
    for block in study.design.blocks:
        table = logs(study, block)
        rows = study.samples.index.get_indexer(table.index)
        known = design_matrix(study.samples.loc[table.index], *names)
        made.append(LayerBlock(block.name, block.layer, table.to_numpy(), rows, known))
    return made


def screened(study: Study, **changes: object) -> PrivateScreen:
    return screen_without_private(layer_blocks(study), study.design.block_pairs(), **changes)


def recall(study: Study, screen: PrivateScreen) -> float:
    names = tuple(block.name for block in study.design.blocks)
    return score({names: np.column_stack([screen.screen.i, screen.screen.j])}, study.truth).recall


def test_removal_finds_what_private_variation_buries() -> None:
    """The oracle knows the private factors; the route by hand leaves them in."""
    study = simulate(Design(n=96, blocks=PAIR), 3)
    found = screened(study)
    assert [len(block) for block in found.removed] == [5, 3]
    assert recall(study, found) > 0.9 * score(oracle(study), study.truth).recall
    assert recall(study, found) > 2 * score(by_hand(study), study.truth).recall


def test_removed_scores_are_the_private_factors_and_shared_components_stay() -> None:
    study = simulate(Design(n=96, blocks=PAIR, strength=1.4), 4)
    known = design_matrix(study.samples, "transcripts", "metabolites")
    for block, components in zip(study.design.blocks, screened(study).components, strict=True):
        truth = study.truth.private[block.name].to_numpy()
        truth = np.linalg.qr(truth - known @ (known.T @ truth))[0]
        for one in components:
            inside = np.sum((truth.T @ one.scores) ** 2)
            assert inside > 0.8 if one.removed else inside < 0.2
            assert bool(one.shared_with) != one.removed


def test_too_few_samples_turn_removal_off_with_the_reason() -> None:
    study = simulate(Design(n=24, blocks=PAIR), 5)
    blocks = layer_blocks(study)
    found = screen_without_private(blocks, [(0, 1)])
    plain = screen_blocks([BlockPair("both", blocks[0].values, blocks[1].values, blocks[0].nuisance)])
    assert "share 24 samples" in found.off[0]
    assert found.removed == ((), ())
    assert np.array_equal(found.screen.i, plain.i)


def test_blocks_meet_on_the_samples_that_they_share() -> None:
    """A component of one block is found on all of its samples; the pairs are tested on the common ones."""
    blocks = (PAIR[0], metabolites(features=200, lacking=16))
    study = simulate(Design(n=96, blocks=blocks, strength=1.4), 6)
    found = screened(study)
    assert set(found.screen.n) == {80}
    assert found.components[0][0].scores.size == 96
    assert recall(study, found) > 0.9 * score(oracle(study), study.truth).recall


def test_two_blocks_of_one_layer_are_refused() -> None:
    x = np.random.default_rng(0).normal(size=(30, 4))
    blocks = [LayerBlock(name, "lipids", x, np.arange(30), np.empty((30, 0))) for name in ("a", "b")]
    with pytest.raises(NumericsError, match="are of one layer, 'lipids'"):
        screen_without_private(blocks, [(0, 1)])
