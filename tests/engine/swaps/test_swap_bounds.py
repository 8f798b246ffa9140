"""What an exchange has to pass: by kind, by what the layers tell of each other, without the accused samples."""

from dataclasses import replace
from itertools import combinations

import numpy as np
import pytest
from swap_studies import exchange, factor_layers

from workbench.engine.swaps.layer_match import match_layers
from workbench.engine.swaps.rearrangement import Rearrangement, agreement_gain, agreement_gains
from workbench.engine.swaps.strangers import spoilt_samples
from workbench.engine.swaps.swap_bound import LEAST_BOUND, clean_bounds
from workbench.engine.swaps.swap_candidates import layer_gains
from workbench.engine.swaps.swap_layers import layer_state
from workbench.engine.swaps.swap_weighing import Weighed, held_to_its_own


def looked_at(layers):
    states = {layer.name: layer_state(layer) for layer in layers}
    pairs = combinations(states, 2)
    return states, {frozenset((a, b)): match_layers(states[a], states[b]) for a, b in pairs}


def test_without_a_design_the_agreement_of_the_layers_alone_is_bounded():
    states, matches = looked_at(factor_layers(30, 1))
    bounds = clean_bounds(states, matches, 0.05, 0)
    assert set(bounds.pairs) == {"alike"}
    assert bounds.of("apart", 2) == np.inf


def test_with_groups_and_run_days_every_kind_has_a_bound_and_every_pair_one_kind():
    states, matches = looked_at(factor_layers(40, 2, batches=3))
    bounds = clean_bounds(states, matches, 0.05, 0)
    assert {"apart", "tubes", "sheet"} <= set(bounds.pairs)
    assert min(bounds.pairs.values()) >= LEAST_BOUND
    of_x = [one for one in layer_gains(states, matches) if one.layer == "x"]
    rows = sum((one.counted.astype(int) for one in of_x if not one.tubes), np.zeros((40, 40), dtype=int))
    np.testing.assert_array_equal(rows, np.triu(np.ones((40, 40), dtype=int), 1))


def test_layers_that_tell_more_of_each_other_have_a_smaller_bound():
    found = []
    for noise in (1.0, 3.0):
        x, y = factor_layers(30, 3, factors=4)
        rng = np.random.default_rng(0)
        y = replace(y, values=y.values + (noise - 1.0) * rng.normal(size=y.values.shape))
        states, matches = looked_at([x, y])
        found.append(
            (matches[frozenset("xy")].information, clean_bounds(states, matches, 0.05, 0).of("alike", 2))
        )
    (more, small), (less, large) = found
    assert more > less
    assert small < large


@pytest.mark.parametrize("seed", range(3))
def test_exchanged_samples_do_not_raise_the_bound_that_they_have_to_pass(seed):
    x, y = factor_layers(24, 20 + seed, factors=4)
    y = exchange(y, [3, 15], [15, 3])
    states, matches = looked_at([x, y])
    bound = clean_bounds(states, matches, 0.05, 0).of("alike", 2)
    (own, *_) = [one for one in layer_gains(states, matches) if one.layer == "y"]
    candidate = own.candidate(3, 15)
    without = match_layers(states["x"], states["y"], matches[frozenset("xy")], {3, 15})

    def own_bounds(**chosen):
        return clean_bounds(states, level=0.05, random_state=0, **chosen)

    held = held_to_its_own(Weighed(candidate, 9.0, bound, without), own_bounds, states, matches)
    assert held.bound <= bound
    assert held.gain == 9.0


def test_the_gain_of_a_match_is_the_sum_over_its_factors_of_refitted_squares():
    _, matches = looked_at(factor_layers(26, 4))
    (one, *_) = matches[frozenset("xy")].predictions
    gains, n = one.gains(), 26
    for i, j in [(0, 1), (4, 20), (7, 25)]:
        moved = one.scores.copy()
        moved[[i, j]] = one.scores[[j, i]]
        expected = 0.0
        for k in range(moved.shape[1]):
            design = np.column_stack([np.ones(n), one.predicted[:, k]])
            was, now = (np.linalg.lstsq(design, rows[:, k], rcond=None)[1][0] for rows in (one.scores, moved))
            expected += 0.5 * (n - 2) * np.log(was / now)
        np.testing.assert_allclose(gains[i, j], expected, atol=1e-9)


def test_gains_of_many_rearrangements_are_those_of_each():
    _, matches = looked_at(factor_layers(26, 5))
    match = matches[frozenset("xy")]
    places, sources = np.array([[0, 5, 9], [1, 2, 3]]), np.array([[5, 9, 0], [3, 1, 2]])
    singly = [
        agreement_gain(Rearrangement("y", *rows, False), match) for rows in zip(places, sources, strict=True)
    ]
    np.testing.assert_allclose(agreement_gains("y", places, sources, match), singly, atol=1e-12)
    np.testing.assert_array_equal(agreement_gains("z", places, sources, match), [0.0, 0.0])


def test_rows_that_went_wrong_as_a_whole_are_known_and_clean_ones_are_not():
    x, _ = factor_layers(40, 6)
    assert spoilt_samples([layer_state(x)]) == set()
    values = x.values.copy()
    values[[4, 17]] += 4.0 * np.random.default_rng(0).normal(size=(2, values.shape[1]))
    assert spoilt_samples([layer_state(replace(x, values=values))]) == {4, 17}
