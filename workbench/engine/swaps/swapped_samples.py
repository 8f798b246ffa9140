"""Samples whose tubes were exchanged in one layer: found by what layers tell of each other and of the design."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass, replace
from functools import partial
from itertools import combinations

import numpy as np
from numpy.typing import NDArray

from workbench.engine.swaps.layer_match import LayerMatch, match_layers
from workbench.engine.swaps.rearrangement import Rearrangement, agreement_gain, design_gain
from workbench.engine.swaps.strangers import Stranger, find_strangers, spoilt_samples
from workbench.engine.swaps.swap_bound import clean_bounds
from workbench.engine.swaps.swap_candidates import (
    SHEET,
    Bounds,
    LayerGains,
    cycle_candidates,
    layer_gains,
    pair_candidates,
)
from workbench.engine.swaps.swap_cycles import Accepted, Swap, swap_cycles
from workbench.engine.swaps.swap_evidence import swap_evidence
from workbench.engine.swaps.swap_layers import LayerState, SwapLayer, layer_state
from workbench.engine.swaps.swap_sheet import sheet_candidates
from workbench.engine.swaps.swap_weighing import best_weighed, held_to_its_own
from workbench.errors import NumericsError

FloatArray = NDArray[np.float64]
IndexArray = NDArray[np.intp]
States = dict[str, LayerState]
Matches = dict[frozenset[str], LayerMatch]

LEVEL = 0.05
SLACK = 8.0
CYCLE_SLACK = 3.0
MOST_EXCHANGES = 10
TOLD = math.log(200.0)


@dataclass(frozen=True, eq=False)
class SwapSearch:
    """What the search found.

    Attributes
    ----------
    swaps : tuple of Swap
        Strongest evidence first.
    strangers : tuple of Stranger
        Rows that match nobody.
    matches : tuple of LayerMatch
        How each two layers agree, the swaps undone; those that cannot tell say why.
    level : float
        Family-wise rate for which the bounds are set.
    bounds : Bounds
        Evidence that an exchange has to pass.
    """

    swaps: tuple[Swap, ...]
    strangers: tuple[Stranger, ...]
    matches: tuple[LayerMatch, ...]
    level: float
    bounds: Bounds

    @property
    def testable(self) -> bool:
        """Whether any two layers share what is needed to see a swap."""
        return any(not match.untestable for match in self.matches)


def find_swapped_samples(
    layers: Sequence[SwapLayer], *, level: float = LEVEL, random_state: int | np.random.Generator = 0
) -> SwapSearch:
    """Search for samples that were exchanged in one of several layers.

    Every layer is reduced to factors of its own, found without a look at the others. For each two layers the
    factors of one are predicted from the features of the other, every sample by a fit that has not seen it;
    for each two samples the log likelihood ratio of "exchanged" to "as delivered" is taken, summed over the
    factors (:func:`~workbench.engine.swaps.exchange_gain.exchange_gains`). Of samples that the layer's design expects
    to differ the same ratio counts for the layer's components given its design, which catches exchanges across
    run days and groups and tells the layer. Where every layer contradicts the design in the same two samples it
    is the sample sheet that has them exchanged.

    The best few pairs are looked at again: with no fit learning from the two, and with the two exchanged and
    all refitted (:mod:`~workbench.engine.swaps.swap_weighing`). The evidence is the mean of the gain at first, the gain
    without learning from them, and the loss after. It is accepted above a bound that any exchange in clean
    studies like this one passes with probability ``level`` (:func:`~workbench.engine.swaps.swap_bound.clean_bounds`),
    when every one of the samples has a share of what is mended and goes with its new row: a row that belongs to
    nobody is no swap. A cycle of three has to pass ``log(cycles / pairs)`` more, and by ``log(1 / level)`` more
    than a pair to be preferred to it. The search goes on from the accepted arrangement until none passes.

    Parameters
    ----------
    layers : sequence of SwapLayer
        At least two, of different names.
    level : float
        Family-wise rate of accusing a clean study, between 0 and 1.
    random_state : int or Generator
        Of the draws for the bound.

    Raises
    ------
    NumericsError
        For fewer than two layers, equal names, or values that cannot be used.

    References
    ----------
    Wilks 1932, Biometrika 24:471 (ratio of generalised variances as a likelihood ratio).

    Examples
    --------
    >>> rng = np.random.default_rng(5)
    >>> shared = rng.normal(size=(40, 3))
    >>> x, y = (shared @ rng.normal(size=(3, p)) + rng.normal(size=(40, p)) for p in (300, 100))
    >>> y[[4, 9]] = y[[9, 4]]
    >>> everyone = np.arange(40)
    >>> found = find_swapped_samples([SwapLayer("x", x, everyone), SwapLayer("y", y, everyone)])
    >>> [(swap.samples, sorted(swap.layers)) for swap in found.swaps]
    [((4, 9), ['x', 'y'])]
    """
    states = _check_layers(layers, level)
    matches = {frozenset((a, b)): match_layers(states[a], states[b]) for a, b in combinations(states, 2)}
    gains = layer_gains(states, matches)
    seed = int(np.random.default_rng(random_state).integers(2**63))
    bounds = clean_bounds(states, matches, level, seed)
    accepted = _sheet_steps(states, bounds.of(SHEET, 2))
    if accepted:
        matches = {key: _again(match, states) for key, match in matches.items()}
        gains = layer_gains(states, matches)
    while len(accepted) < MOST_EXCHANGES:
        one = _best_step(states, matches, gains, bounds, level, seed, accepted)
        if one is None:
            break
        accepted.append(one)
        states[one.move.layer] = one.move.done(states).settled()
        matches = _rematched(states, matches, one.move.layer)
        gains = layer_gains(states, matches)
    swaps = swap_cycles(accepted, {name: state.layer.samples for name, state in states.items()})
    explained = {sample for swap in swaps for sample in swap.samples} | spoilt_samples(states.values())
    strangers = find_strangers(list(matches.values()), explained)
    return SwapSearch(swaps, strangers, tuple(matches.values()), level, bounds)


def _check_layers(layers: Sequence[SwapLayer], level: float) -> States:
    """Return the layers as delivered, by name."""
    names = [layer.name for layer in layers]
    if len(names) < 2 or len(set(names)) < len(names):
        raise NumericsError(
            f"layers {', '.join(map(repr, names)) or 'none'}; give at least two, each under a name of its own"
        )
    if not 0.0 < level < 1.0:
        raise NumericsError(f"level {level}; allowed: between 0 and 1")
    return {layer.name: layer_state(layer) for layer in layers}


def _best_step(
    states: States,
    matches: Matches,
    gains: list[LayerGains],
    bounds: Bounds,
    level: float,
    seed: int,
    earlier: Sequence[Accepted],
) -> Accepted | None:
    """Return the rearrangement that passes its bound by most; None when none does."""
    pairs = pair_candidates(gains, bounds, SLACK)
    cycles = cycle_candidates(pairs, states, matches, bounds, CYCLE_SLACK)
    pair, cycle = (best_weighed(found, bounds, states, matches) for found in (pairs, cycles))
    # A cycle holds every pair of its three with one sample more: it has to be worth that one.
    best = cycle if cycle and (pair is None or cycle.margin >= pair.margin - math.log(level)) else pair
    if best is not None:
        best = held_to_its_own(
            best, partial(clean_bounds, states, level=level, random_state=seed), states, matches
        )
    if best is None or best.margin < 0.0:
        return None
    candidate = best.candidate
    layers = _likely_layers(candidate.move, states, matches)
    move = _in_same_layer(candidate.move, layers, states, earlier)
    samples = states[move.layer].layer.samples
    return Accepted(
        move,
        tuple(samples[move.places].tolist()),
        tuple(samples[move.sources].tolist()),
        layers,
        best.gain,
        best.bound,
        swap_evidence(candidate, states, best.without),
    )


def _sheet_steps(states: States, bound: float) -> list[Accepted]:
    """Exchange samples in all layers as long as all of them ask for it; ``states`` takes the arrangements."""
    accepted: list[Accepted] = []
    while len(accepted) < MOST_EXCHANGES * len(states):
        every = sheet_candidates(states, bound)
        if every is None:
            break
        for one in every:
            name = one.move.layer
            samples = states[name].layer.samples
            accepted.append(
                Accepted(
                    one.move,
                    tuple(samples[one.move.places].tolist()),
                    tuple(samples[one.move.sources].tolist()),
                    (name,),
                    one.gain,
                    bound,
                    swap_evidence(one, states, None),
                )
            )
            states[name] = one.move.done(states).settled()
    return accepted


def _again(match: LayerMatch, states: States) -> LayerMatch:
    return match_layers(states[match.first], states[match.second], match)


def _rematched(states: States, matches: Matches, layer: str) -> Matches:
    """Return the matches, those of a rearranged layer made anew."""
    return {key: _again(match, states) if layer in key else match for key, match in matches.items()}


def _likely_layers(move: Rearrangement, states: States, matches: Matches) -> tuple[str, ...]:
    """Return the layers in which it may have happened, likeliest first: evidence within a factor of 200."""
    support = {}
    for name in states:
        there = move.carried(name, states)
        if there is None:
            continue
        own = max(design_gain(replace(there, tubes=tubes), states) for tubes in (False, True))
        support[name] = own + sum(agreement_gain(there, match) for match in matches.values())
    most = max(support.values())
    near = [name for name in support if support[name] > most - TOLD]
    return tuple(sorted(near, key=lambda name: -support[name]))


def _in_same_layer(
    move: Rearrangement, layers: tuple[str, ...], states: States, earlier: Sequence[Accepted]
) -> Rearrangement:
    """Return an exchange that may be in several layers in the one where its samples were exchanged before."""
    samples = set(states[move.layer].layer.samples[move.places].tolist())
    for one in earlier:
        if samples & set(one.places) and one.move.layer in layers:
            return move.carried(one.move.layer, states) or move
    if move.layer in layers:
        return move
    return move.carried(layers[0], states) or move
