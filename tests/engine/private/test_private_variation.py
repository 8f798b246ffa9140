"""Private variation: what one layer has alone is removed, what layers share stays, and chance stays chance."""

from __future__ import annotations

import numpy as np
import pytest
from numpy.testing import assert_allclose
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

from workbench.engine.nuisance import Nuisance
from workbench.engine.pairs.screen import BlockPair, screen_blocks
from workbench.engine.private.private_variation import (
    LayerBlock,
    PrivateScreen,
    cleaned_features,
    pairs_without_private,
    screen_cleaned,
    screen_without_private,
)
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


def test_modules_carry_pairs_that_no_test_of_pairs_finds() -> None:
    """A third more than the oracle, which knows the private factors but judges pair by pair."""
    study = simulate(Design(n=96, blocks=PAIR), 3)
    found = screened(study)
    assert set(found.support) == {"pair", "module", "both"}
    assert recall(study, found) > 1.3 * score(oracle(study), study.truth).recall
    truth = {tuple(pair) for pair in study.truth.pairs["transcripts", "metabolites"].tolist()}
    only = found.support == "module"
    carried = zip(found.screen.i[only].tolist(), found.screen.j[only].tolist(), strict=True)
    assert np.mean([pair in truth for pair in carried]) > 0.9


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


def test_a_sample_odd_in_both_layers_is_brought_to_size_and_told() -> None:
    """Only that sample; both sides of the pair can be made again from what is told."""
    study = simulate(Design(n=40, blocks=PAIR, odd=1, strength=1.4), 3)
    blocks = layer_blocks(study)
    made = pairs_without_private(blocks, [(0, 1)])
    odd = [np.flatnonzero(steady < 1.0) for steady in made.steady]
    assert odd[0].size == 1
    assert np.array_equal(*odd)
    assert all(steady.min() < 0.6 for steady in made.steady)
    pair = made.pairs[0]
    nuisance = Nuisance.of(np.hstack([block.nuisance for block in blocks]), 40)
    for block, side, own, steady in zip(
        blocks, (pair.x, pair.y), (pair.x_private, pair.y_private), made.steady, strict=True
    ):
        assert_allclose(cleaned_features(block.values, nuisance, own, steady), side, atol=1e-9)
    assert len(screen_cleaned(made).steady) == 2
    ranked = pairs_without_private(blocks, [(0, 1)], correlation="spearman")
    assert all((steady == 1.0).all() for steady in ranked.steady)


def test_blocks_meet_on_the_samples_that_they_share() -> None:
    """A component of one block is found on all of its samples; the pairs are tested on the common ones."""
    blocks = (PAIR[0], metabolites(features=200, lacking=16))
    study = simulate(Design(n=96, blocks=blocks, strength=1.4), 6)
    found = screened(study)
    assert set(found.screen.n) == {80}
    assert found.components[0][0].scores.size == 96
    assert recall(study, found) > 0.9 * score(oracle(study), study.truth).recall


def test_spearman_removes_the_components_of_ranks() -> None:
    study = simulate(Design(n=96, blocks=PAIR, strength=1.4), 7)
    found = screened(study, correlation="spearman")
    assert [len(block) for block in found.removed] == [5, 3]
    assert recall(study, found) > 0.85 * score(oracle(study), study.truth).recall


def test_what_any_other_layer_shares_stays() -> None:
    """A factor that the first block has in common with the third alone is not private to it."""
    rng, n = np.random.default_rng(8), 80
    factor = rng.normal(size=(n, 1))
    values = [rng.normal(size=(n, 300)) for _ in range(3)]
    for k in (0, 2):
        values[k] += factor * rng.choice([-1.0, 1.0], 300)
    blocks = [LayerBlock(str(k), str(k), x, np.arange(n), np.empty((n, 0))) for k, x in enumerate(values)]
    three = screen_without_private(blocks, [(0, 1), (0, 2), (1, 2)])
    two = screen_without_private(blocks[:2], [(0, 1)])
    assert [one.shared_with for one in three.components[0]] == ["2"]
    assert three.components[0][0].stays == "shared"
    assert [len(block) for block in two.removed] == [1, 0]


def test_edges_are_seldom_found_where_nothing_is_shared() -> None:
    """60 studies with strong private variation and heavy tails: at most 5 % + 3 errors have an edge."""
    blocks = (transcripts(features=300, tails=3.0), metabolites(features=80, tails=3.0))
    design = Design(n=60, blocks=blocks, modules=0)
    edges = [screened(simulate(design, seed)).screen.n_edges for seed in range(60)]
    assert np.mean(np.array(edges) > 0) <= 0.05 + 3 * np.sqrt(0.05 * 0.95 / 60)


def test_the_result_does_not_depend_on_units_or_on_the_order_of_samples() -> None:
    study = simulate(Design(n=60, blocks=PAIR, strength=1.4), 9)
    blocks = layer_blocks(study)
    order = np.random.default_rng(0).permutation(60)
    moved = [
        LayerBlock(one.name, one.layer, 7.0 * one.values[order], one.rows[order], one.nuisance[order])
        for one in blocks
    ]
    first, second = (screen_without_private(one, [(0, 1)]).screen for one in (blocks, moved))
    assert first.n_edges > 50
    assert np.array_equal(first.i, second.i)
    assert_allclose(first.r, second.r, atol=1e-9)


def test_two_blocks_of_one_layer_are_refused() -> None:
    x = np.random.default_rng(0).normal(size=(30, 4))
    blocks = [LayerBlock(name, "lipids", x, np.arange(30), np.empty((30, 0))) for name in ("a", "b")]
    with pytest.raises(NumericsError, match="are of one layer, 'lipids'"):
        screen_without_private(blocks, [(0, 1)])
