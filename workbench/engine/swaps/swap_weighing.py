"""A second look at candidates: what they are worth when all is refitted, and what clean studies would reach."""

from __future__ import annotations

import math
from collections.abc import Callable, Sequence
from dataclasses import dataclass

from workbench.engine.swaps.layer_match import LayerMatch, match_layers
from workbench.engine.swaps.rearrangement import States, agreement_gain, design_gain, least_share, worst_fit
from workbench.engine.swaps.swap_candidates import Bounds, Candidate, Matches

LEAST_SHARE = 0.05
LEAST_FIT = 1e-3
MENDED = 3.0
CLEAR = 15.0
NEAR = 3.0
SELECTED = 0.25

OwnBounds = Callable[..., Bounds]


@dataclass(frozen=True, eq=False)
class Weighed:
    """A candidate on a second look.

    Attributes
    ----------
    candidate : Candidate
    gain : float
        Mean of the gain as delivered, the gain without learning from the samples, and the loss after; minus
        infinity where one of the samples went as well with its own row, or does not go with the new one.
    bound : float
        What it has to pass.
    without : LayerMatch or None
        The match of its layers with no fit learning from the samples.
    """

    candidate: Candidate
    gain: float
    bound: float
    without: LayerMatch | None

    @property
    def margin(self) -> float:
        """By how much it passes."""
        return self.gain - self.bound


def best_weighed(
    candidates: Sequence[Candidate], bounds: Bounds, states: States, matches: Matches
) -> Weighed | None:
    """Return the candidate that passes its bound by most; None when none comes ``NEAR`` it.

    Parameters
    ----------
    candidates : sequence of Candidate
        The most promising first; those that lie ``CLEAR`` behind one that was weighed are not weighed.
    bounds : Bounds
    states, matches
        As now arranged.
    """
    best: Weighed | None = None
    for one in candidates:
        bound = bounds.of(one.kind, one.size)
        if best is not None and best.margin > one.gain - bound + CLEAR:
            break
        weighed = _weighed(one, bound, states, matches)
        if best is None or weighed.margin > best.margin:
            best = weighed
    return best if best is not None and best.margin >= -NEAR else None


def _weighed(candidate: Candidate, bound: float, states: States, matches: Matches) -> Weighed:
    """Weigh a candidate; what is ``NEAR`` under the bound without learning from its samples is not refitted."""
    move, asked = candidate.move, states if candidate.asks_design else None
    match = matches.get(frozenset((move.layer, candidate.partner)))
    unlearnt, without = candidate.gain, None
    if match is not None:
        samples = candidate.samples(states)
        without = match_layers(states[match.first], states[match.second], match, samples)
        unlearnt = agreement_gain(move, without) - candidate.penalty + candidate.design_gain
    one_sided = (not move.tubes or match is not None) and least_share(move, without, asked) < LEAST_SHARE
    # What does not fit after the exchange has to be little beside what it mends.
    least_fit = min(LEAST_FIT, math.exp(-unlearnt / MENDED))
    if one_sided or worst_fit(move, without) < least_fit or unlearnt < bound - NEAR:
        return Weighed(candidate, -math.inf, bound, without)
    gain = (candidate.gain + unlearnt + _loss_after(candidate, match, states)) / 3.0
    return Weighed(candidate, gain, bound, without)


def _loss_after(candidate: Candidate, match: LayerMatch | None, states: States) -> float:
    """Return what going back would lose, the samples exchanged and all refitted."""
    move = candidate.move
    after = {**states, move.layer: move.done(states)}
    lost = -design_gain(move.back(), after) if candidate.asks_design else 0.0
    if match is not None:
        again = match_layers(after[match.first], after[match.second], match)
        lost -= agreement_gain(move.back(), again) + candidate.penalty
    return lost


def held_to_its_own(one: Weighed, own_bounds: OwnBounds, states: States, matches: Matches) -> Weighed:
    """Return a candidate that the layers' agreement alone speaks for with the bound that the other samples give.

    Two exchanged samples among two dozen make the layers look as if they told little of each other, and raise
    the bound that they have to pass. Without the two that disagree most a clean study's bound falls a little
    as well: ``SELECTED`` is added again, and the bound never rises.

    Parameters
    ----------
    one : Weighed
    own_bounds : callable
        ``matches`` and ``left_out`` (samples) -> Bounds.
    states, matches
        As now arranged.
    """
    if one.without is None or one.candidate.asks_design:
        return one
    matches = {**matches, frozenset((one.without.first, one.without.second)): one.without}
    bounds = own_bounds(matches=matches, left_out=one.candidate.samples(states))
    bound = min(one.bound, bounds.of(one.candidate.kind, one.candidate.size) + SELECTED)
    return Weighed(one.candidate, one.gain, bound, one.without)
