"""What to draw for a swap: every sample's own score beside the one that is expected of it."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from workbench.engine.swaps.layer_match import LayerMatch, Prediction
from workbench.engine.swaps.rearrangement import States, agreement_gain
from workbench.engine.swaps.swap_candidates import Candidate

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


def swap_evidence(candidate: Candidate, states: States, match: LayerMatch | None) -> SwapEvidence:
    """Return what to draw: from the agreement of the layers or from the design, whichever says more.

    Parameters
    ----------
    candidate : Candidate
    states : mapping of str to LayerState
    match : LayerMatch or None
        Of its layer and the partner, best with no fit learning from the samples.
    """
    agrees = 0.0 if match is None else agreement_gain(candidate.move, match) - candidate.penalty
    if match is not None and match.predictions and agrees >= candidate.design_gain:
        return _from_agreement(candidate, match)
    state = states[candidate.move.layer]
    known = state.batch_part(state.components) if candidate.move.tubes else 0.0
    moved = state.components - known
    rows, fitted = state.components, state.hat() @ state.components
    residual = rows - fitted
    weights = _telling_weights(fitted, residual, residual.T @ residual, candidate.move.places)
    after = (moved[candidate.move.sources] + (rows - moved)[candidate.move.places]) @ weights
    expected = fitted @ weights
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
    """Take the direction (who predicts whom) that says more of these samples."""
    move = candidate.move
    rows = match.rows_of(move.layer)
    inside = {row: place for place, row in enumerate(rows.tolist())}
    places = np.array([inside[row] for row in move.places.tolist()])
    sources = np.array([inside[row] for row in move.sources.tolist()])
    best = max(match.predictions, key=lambda one: _gain(one, move.layer, places, sources))
    fitted = best.fitted
    residual = best.scores - fitted
    weights = _telling_weights(fitted, residual, np.diag((residual**2).sum(axis=0)), places)
    score, expected = best.scores @ weights, fitted @ weights
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


def _gain(one: Prediction, layer: str, places: IndexArray, sources: IndexArray) -> float:
    ahead = (places, sources) if one.target == layer else (sources, places)
    return float(one.rearranged(ahead[0][None], ahead[1][None])[0])


def _telling_weights(
    fitted: FloatArray, residual: FloatArray, squares: FloatArray, places: IndexArray
) -> FloatArray:
    """Weights ``S^-1 (f_a - f_b)`` of the two exchanged rows whose fits f lie farthest apart, S the squares."""
    inverse = np.linalg.pinv(squares, hermitian=True)
    steps = [fitted[a] - fitted[b] for a in places for b in places]
    step = max(steps, key=lambda one: float(one @ inverse @ one))
    weights = inverse @ step
    spread = float(np.std(residual @ weights))
    scaled: FloatArray = weights / spread if spread > 0.0 else weights
    return scaled
