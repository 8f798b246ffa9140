"""What to draw for a swap: every sample's own score beside the one that is expected of it."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from workbench.engine.layer_match import LayerMatch
from workbench.engine.rearrangement import States
from workbench.engine.swap_candidates import Candidate, Matches

FloatArray = NDArray[np.float64]
IndexArray = NDArray[np.intp]


@dataclass(frozen=True, eq=False)
class SwapEvidence:
    """One score of every sample, chosen so that the exchanged samples lie far apart on what is expected.

    Attributes
    ----------
    layer : str
        Layer that the score is of.
    expected_from : str
        Layer that predicts it; "" for the layer's own design.
    samples : ndarray of int
        The samples, in the order of the scores.
    score, expected : ndarray of shape (n_samples,)
        As delivered, in standard deviations of ``score - expected``.
    places : ndarray of int
        Positions of the exchanged samples.
    score_after, expected_after : ndarray
        What they come to when exchanged, in the order of ``places``.
    shared_gain, design_gain : float
        Log likelihood ratios for the exchange, before all is refitted.
    """

    layer: str
    expected_from: str
    samples: IndexArray
    score: FloatArray
    expected: FloatArray
    places: IndexArray
    score_after: FloatArray
    expected_after: FloatArray
    shared_gain: float
    design_gain: float


def swap_evidence(candidate: Candidate, states: States, matches: Matches) -> SwapEvidence:
    """Return what to draw: from the agreement of the layers or from the design, whichever says more."""
    match = matches.get(frozenset((candidate.move.layer, candidate.partner)))
    if match is not None and candidate.shared_gain >= candidate.design_gain:
        return _from_agreement(candidate, match)
    state = states[candidate.move.layer]
    known = state.batch_part(state.components) if candidate.move.tubes else 0.0
    moved = state.components - known
    rows, hat = state.components, state.hat()
    weights = _telling_weights(rows, hat, candidate.move.places)
    after = (moved[candidate.move.sources] + (rows - moved)[candidate.move.places]) @ weights
    expected = hat @ rows @ weights
    return SwapEvidence(
        candidate.move.layer,
        "",
        state.layer.samples,
        rows @ weights,
        expected,
        candidate.move.places,
        after,
        expected[candidate.move.places],
        candidate.shared_gain,
        candidate.design_gain,
    )


def _from_agreement(candidate: Candidate, match: LayerMatch) -> SwapEvidence:
    """Take the direction (who predicts whom) that tells more."""
    best = max(match.predictions, key=lambda one: one.information)
    move = candidate.move
    rows = match.rows_of(move.layer)
    inside = {row: place for place, row in enumerate(rows.tolist())}
    places = np.array([inside[row] for row in move.places.tolist()])
    sources = np.array([inside[row] for row in move.sources.tolist()])
    weights = _telling_weights(best.scores, best.hat, places)
    score, expected = best.scores @ weights, best.hat @ best.scores @ weights
    mine = best.target == move.layer
    return SwapEvidence(
        best.target,
        best.source,
        match.samples,
        score,
        expected,
        places,
        score[sources if mine else places],
        expected[places if mine else sources],
        candidate.shared_gain,
        candidate.design_gain,
    )


def _telling_weights(rows: FloatArray, hat: FloatArray, places: IndexArray) -> FloatArray:
    """Weights ``(E'E)^-1 (f_a - f_b)`` of the two exchanged rows whose fits f lie farthest apart."""
    fitted = hat @ rows
    residual = rows - fitted
    inverse = np.linalg.pinv(residual.T @ residual, hermitian=True)
    steps = [fitted[a] - fitted[b] for a in places for b in places]
    step = max(steps, key=lambda one: float(one @ inverse @ one))
    weights = inverse @ step
    spread = float(np.std(residual @ weights))
    scaled: FloatArray = weights / spread if spread > 0.0 else weights
    return scaled
