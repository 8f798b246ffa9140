"""Exchanged samples are found, in the layer where they were exchanged, and clean studies are not accused."""

from dataclasses import replace

import numpy as np
import pytest
from simulated import Design, metabolites, simulate, transcripts
from swap_studies import exchange, exchanged, factor_layers, found_in, swap_layers

from workbench.engine.swaps.swap_layers import SwapLayer
from workbench.engine.swaps.swapped_samples import find_swapped_samples
from workbench.errors import NumericsError


def swapped_design(swaps=(2,), **changes):
    return Design(n=60, modules=4, **changes).with_block("metabolites", swaps=swaps)


@pytest.mark.parametrize("seed", range(4))
def test_an_exchanged_pair_is_found_among_sixty(seed):
    study = simulate(swapped_design(), seed)
    found = find_swapped_samples(swap_layers(study))
    assert found_in(found) == exchanged(study)
    assert "metabolites" in found.swaps[0].layers
    assert found.swaps[0].gain > found.swaps[0].bound


@pytest.mark.parametrize("seed", range(4))
def test_clean_studies_are_not_accused(seed):
    found = find_swapped_samples(swap_layers(simulate(swapped_design(swaps=()), seed)))
    assert found.testable
    assert (found.swaps, found.strangers) == ((), ())


def test_two_pairs_are_found_one_after_the_other():
    study = simulate(swapped_design(swaps=(2, 2)), 1)
    assert found_in(find_swapped_samples(swap_layers(study))) == exchanged(study)


def test_a_cycle_of_three_is_told_with_its_direction():
    x, y, z = factor_layers(60, 3, names=("x", "y", "z"), factors=4)
    # The row of 4 belongs to 9, that of 9 to 20, that of 20 to 4.
    y = exchange(y, [4, 9, 20], [9, 20, 4])
    (swap,) = find_swapped_samples([x, y, z]).swaps
    assert (swap.samples, swap.layers) == ((4, 9, 20), ("y",)) or swap.samples == (4, 20, 9)
    undone = y.values.copy()
    for row, owner in zip(swap.samples, (*swap.samples[1:], swap.samples[0]), strict=True):
        undone[owner] = y.values[row]
    np.testing.assert_array_equal(undone, factor_layers(60, 3, names=("x", "y", "z"), factors=4)[1].values)


def test_a_third_layer_tells_in_which_the_samples_were_exchanged():
    layers = factor_layers(48, 5, names=("x", "y", "z"))
    layers[2] = exchange(layers[2], [7, 30], [30, 7])
    (swap,) = find_swapped_samples(layers).swaps
    assert (swap.samples, swap.layers, swap.everywhere) == ((7, 30), ("z",), False)


def test_without_a_design_two_layers_cannot_tell_which():
    layers = factor_layers(48, 6)
    layers[1] = exchange(layers[1], [7, 30], [30, 7])
    (swap,) = find_swapped_samples(layers).swaps
    assert (swap.samples, sorted(swap.layers)) == ((7, 30), ["x", "y"])


def test_tubes_exchanged_before_the_runs_keep_the_marks_of_the_runs():
    layers = factor_layers(60, 7, batches=3)
    plain = factor_layers(60, 7, batches=3)[1]
    group, batch = plain.group[:, 0], plain.batch
    other = next(j for j in range(1, 60) if group[j] != group[0] and (batch[j] != batch[0]).any())
    fit = np.linalg.lstsq(np.column_stack([np.ones(60), group, batch]), plain.values, rcond=None)[0]
    marks = batch @ fit[2:]
    rows = plain.values - marks
    rows[[0, other]] = rows[[other, 0]]
    layers[1] = replace(plain, values=rows + marks)
    (swap,) = find_swapped_samples(layers).swaps
    assert (swap.samples, swap.layers, swap.before_runs) == ((0, other), ("y",), True)


def test_entries_of_the_sample_sheet_that_were_exchanged_show_in_every_layer():
    layers = factor_layers(60, 8, batches=3)
    pair = [2, 9]
    for place in (0, 1):
        layers[place] = exchange(layers[place], pair, pair[::-1])
    (swap,) = find_swapped_samples(layers).swaps
    assert (swap.samples, swap.everywhere) == ((2, 9), True)


def test_samples_that_a_layer_lacks_and_the_order_of_rows_do_not_matter():
    x, y = factor_layers(50, 9)
    y = exchange(y, [11, 25], [25, 11])
    rows = np.random.default_rng(0).permutation(np.arange(4, 50))
    y = SwapLayer("y", y.values[rows], y.samples[rows])
    (swap,) = find_swapped_samples([x, y]).swaps
    assert swap.samples == (11, 25)


@pytest.mark.parametrize("sample", [3, 17, 40])
def test_a_row_that_matches_nobody_is_told_and_is_no_swap(sample):
    x, y = factor_layers(60, 10, factors=3)
    values = y.values.copy()
    values[sample] *= -1.5
    found = find_swapped_samples([x, replace(y, values=values)])
    assert found.swaps == ()
    assert [one.sample for one in found.strangers] == [sample]


def test_rows_that_went_wrong_as_a_whole_and_days_that_are_not_named_accuse_nobody():
    blocks = (transcripts(features=800, group_effect=1.0), metabolites(group_effect=1.0))
    odd = swap_layers(simulate(Design(n=48, blocks=blocks, odd=3), 3))
    tangled = swap_layers(simulate(Design(n=48, blocks=blocks, tangle=1.0, run_days=2), 5), named=False)
    for found in map(find_swapped_samples, (odd, tangled)):
        assert (found.swaps, found.strangers) == ((), ())


def test_where_nothing_is_shared_nothing_is_testable():
    one, other = factor_layers(40, 11)[0], factor_layers(40, 12)[1]
    found = find_swapped_samples([one, other])
    assert not found.testable
    assert "no factor of one layer" in found.matches[0].untestable
    assert found.swaps == ()


def test_too_few_common_samples_are_not_testable():
    x, y = factor_layers(24, 13)
    y = SwapLayer("y", y.values[:10], y.samples[:10])
    assert "10 common samples" in find_swapped_samples([x, y]).matches[0].untestable


def test_equal_seeds_give_equal_bounds_and_inputs_stay_as_they_are():
    layers = factor_layers(30, 14)
    kept = [layer.values.copy() for layer in layers]
    one, other = (find_swapped_samples(layers, random_state=3) for _ in range(2))
    assert one.bounds == other.bounds
    for layer, values in zip(layers, kept, strict=True):
        np.testing.assert_array_equal(layer.values, values)


def test_a_stricter_level_needs_more_evidence():
    layers = factor_layers(40, 15)
    loose, strict = (
        find_swapped_samples(layers, level=level).bounds.of("alike", 2) for level in (0.2, 0.001)
    )
    assert strict > loose


def test_a_cycle_needs_more_evidence_than_a_pair():
    bounds = find_swapped_samples(factor_layers(40, 16)).bounds
    assert bounds.of("alike", 3) > bounds.of("alike", 2) + 1.0


def test_constant_and_duplicated_features_change_nothing():
    x, y = factor_layers(40, 17)
    y = exchange(y, [1, 30], [30, 1])
    wide = np.hstack([y.values, np.ones((40, 3)), y.values[:, :5]])
    assert found_in(find_swapped_samples([x, replace(y, values=wide)])) == {frozenset((1, 30))}


@pytest.mark.parametrize(
    ("change", "message"),
    [
        (lambda layers: layers[:1], "give at least two"),
        (lambda layers: [layers[0], layers[0]], "a name of its own"),
        (
            lambda layers: [layers[0], replace(layers[1], samples=np.zeros(30, dtype=int))],
            "a sample of its own",
        ),
        (
            lambda layers: [layers[0], replace(layers[1], values=layers[1].values * np.nan)],
            "missing or infinite",
        ),
    ],
)
def test_layers_that_cannot_be_used_are_refused(change, message):
    with pytest.raises(NumericsError, match=message):
        find_swapped_samples(change(factor_layers(30, 18)))


def test_a_level_outside_its_range_is_refused():
    with pytest.raises(NumericsError, match="allowed: between 0 and 1"):
        find_swapped_samples(factor_layers(30, 19), level=1.0)
