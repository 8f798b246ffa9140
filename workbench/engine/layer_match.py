"""How two layers agree about their samples, and what exchanging two of them would gain."""

from __future__ import annotations

from collections.abc import Collection
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.stats import t as student

from workbench.engine.cross_prediction import Features, count_private, predict_left_out
from workbench.engine.exchange_gain import (
    exchange_gains,
    hat_matrix,
    rearrangement_gains,
    row_gains,
    row_mismatch,
)
from workbench.engine.nuisance import Nuisance
from workbench.engine.swap_layers import LayerState

FloatArray = NDArray[np.float64]
IndexArray = NDArray[np.intp]

MATCH_LEVEL = 0.1
TESTABLE_LEVEL = 0.005
DF_PER_FACTOR = 4
FEWEST_DF = 10


@dataclass(frozen=True, eq=False)
class Prediction:
    """Factors of one layer that the other layer's features predict.

    Attributes
    ----------
    target, source : str
        Layer of the factors, and the layer that predicts them.
    scores, predicted : ndarray of shape (n_common, n_matched)
        The factors, and what samples left out were predicted to have; the design removed from both.
    hat : ndarray of shape (n_common, n_common)
        Projection onto the design and ``predicted``.
    df : int
    p : float
        Chance of the best factor's prediction (one-sided, Bonferroni over the factors).
    information : float
        Half the log ratio of the factors' generalised variance without and with the prediction: nats that
        the other layer tells of a sample.
    """

    target: str
    source: str
    scores: FloatArray
    predicted: FloatArray
    hat: FloatArray
    df: int
    p: float
    information: float

    def gains(self) -> FloatArray:
        """Return the log likelihood ratio of exchanging each two samples, shape (n_common, n_common)."""
        return exchange_gains(self.scores, self.hat, self.df)

    def rearranged(self, places: IndexArray, sources: IndexArray) -> FloatArray:
        """Return the log likelihood ratio of rearrangements of the target's rows, shape (count,)."""
        return rearrangement_gains(self.scores, self.hat, self.df, places, sources)

    def mismatch(self, places: IndexArray, sources: IndexArray) -> FloatArray:
        """Return the chance of a worse fit of each of the target's rows in its new place, shape (s,)."""
        return row_mismatch(self.scores, self.hat, self.df, places, sources)


@dataclass(frozen=True, eq=False)
class LayerMatch:
    """Two layers on the samples that both have.

    Attributes
    ----------
    first, second : str
    rows : pair of ndarray of int
        Rows of the common samples in each layer.
    samples : ndarray of int
        The common samples.
    basis : ndarray of shape (n_common, c)
        Orthonormal basis of both layers' designs.
    predictions : tuple of Prediction
        First layer's factors by the second and the other way, where any is matched.
    private : dict
        Layer that predicts -> components that it does not share.
    untestable : str
        Why no swap can be seen between the two, or "".
    """

    first: str
    second: str
    rows: tuple[IndexArray, IndexArray]
    samples: IndexArray
    basis: FloatArray
    predictions: tuple[Prediction, ...]
    private: dict[str, int]
    untestable: str

    @property
    def information(self) -> float:
        """Nats that the better direction tells of a sample."""
        return max((one.information for one in self.predictions), default=0.0)

    def rows_of(self, layer: str) -> IndexArray:
        """Return the rows of the common samples in one of the two layers."""
        return self.rows[0 if layer == self.first else 1]

    def weights(self) -> list[float]:
        """Return the share of each direction in the evidence, by what it tells.

        Where two likelihood ratios have mean 1 at most, the exponential of a weighted mean of their logarithms
        has it too, however dependent they are (Hölder's inequality).
        """
        total = sum(one.information for one in self.predictions)
        return [one.information / total for one in self.predictions]

    def gains(self) -> FloatArray:
        """Return the evidence for exchanging each two of the common samples, shape (n_common, n_common)."""
        parts = zip(self.weights(), self.predictions, strict=True)
        gains: FloatArray = sum(
            (weight * one.gains() for weight, one in parts), np.zeros((self.samples.size,) * 2)
        )
        return gains

    def row_gains(self, layer: str, places: IndexArray, sources: IndexArray) -> FloatArray:
        """Return how much better each sample fits when rows of one layer are rearranged, shape (s,)."""
        total = np.zeros(len(places))
        for weight, one in zip(self.weights(), self.predictions, strict=True):
            ahead = (places, sources) if one.target == layer else (sources, places)
            total += weight * row_gains(one.scores, one.hat, one.df, *ahead)
        return total

    def mismatch(self, layer: str, places: IndexArray, sources: IndexArray) -> float:
        """Return the smallest chance of a worse fit of a sample when rows of one layer are rearranged."""
        moves = (
            (one, (places, sources) if one.target == layer else (sources, places)) for one in self.predictions
        )
        return min(float(one.mismatch(*ahead).min()) for one, ahead in moves)

    def rearranged(self, layer: str, places: IndexArray, sources: IndexArray) -> FloatArray:
        """Return the evidence for rearrangements of one layer's rows, shape (count,).

        Row ``sources[k]`` (among the common samples) comes to ``places[k]``.
        """
        total = np.zeros(len(places))
        for weight, one in zip(self.weights(), self.predictions, strict=True):
            ahead = (places, sources) if one.target == layer else (sources, places)
            total += weight * one.rearranged(*ahead)
        return total


def match_layers(
    one: LayerState,
    other: LayerState,
    before: LayerMatch | None = None,
    left_out: Collection[int] = (),
) -> LayerMatch:
    """Match two layers by what each one's features tell of the other's factors.

    Nothing counts unless the best factor of one layer is told with a p of ``TESTABLE_LEVEL`` at most.

    Parameters
    ----------
    one, other : LayerState
    before : LayerMatch, optional
        Of the same layers in another arrangement: its counts of private components are used again.
    left_out : collection of int
        Samples that no fit may learn from; they are predicted all the same.
    """
    names = one.layer.name, other.layer.name
    samples, first, second = np.intersect1d(one.layer.samples, other.layer.samples, return_indices=True)
    design = np.hstack([one.layer.design()[first], other.layer.design()[second]])
    basis = Nuisance.of(design, samples.size).basis if samples.size else np.empty((0, 0))
    private: dict[str, int] = {}
    weights = np.where(np.isin(samples, list(left_out)), 0.0, 1.0)
    if samples.size - basis.shape[1] < FEWEST_DF:
        reason = (
            f"{samples.size} common samples and a design of {basis.shape[1]} dimensions leave fewer than "
            f"{FEWEST_DF} to compare"
        )
        return LayerMatch(*names, (first, second), samples, basis, (), private, reason)
    features = {
        state.layer.name: Features.of(state.values[rows], basis)
        for state, rows in ((one, first), (other, second))
    }
    found = []
    for target, rows, source in ((one, first, names[1]), (other, second, names[0])):
        if target.factors.number == 0:
            continue
        scores = target.factors.scores[rows]
        scores = scores - basis @ (basis.T @ scores)
        known = before.private.get(source) if before else None
        private[source] = count_private(features[source], scores) if known is None else known
        predicted = predict_left_out(features[source], scores, private[source], weights)
        prediction = _matched(target.layer.name, source, scores, predicted, basis)
        found += [prediction] if prediction else []
    if min((one.p for one in found), default=1.0) > TESTABLE_LEVEL:
        reason = "no factor of one layer is told by the other beyond chance"
        return LayerMatch(*names, (first, second), samples, basis, (), private, reason)
    return LayerMatch(*names, (first, second), samples, basis, tuple(found), private, "")


def _matched(
    target: str, source: str, scores: FloatArray, predicted: FloatArray, basis: FloatArray
) -> Prediction | None:
    """Keep the factors whose prediction is better than chance (one-sided, Bonferroni)."""
    n, c = basis.shape
    lengths = np.linalg.norm(scores, axis=0) * np.linalg.norm(predicted, axis=0)
    r = np.einsum("nk,nk->k", scores, predicted) / np.where(lengths > 0.0, lengths, 1.0)
    r = np.clip(r, -1.0, 1.0 - 1e-12)
    p = student.sf(r * np.sqrt((n - c - 1) / (1.0 - r**2)), n - c - 1)
    most = max(1, (n - c) // DF_PER_FACTOR)
    kept = [k for k in np.argsort(p, kind="stable")[:most] if p[k] * p.size <= MATCH_LEVEL]
    if not kept:
        return None
    scores, predicted = scores[:, kept], predicted[:, kept]
    hat = hat_matrix(np.hstack([basis, predicted]))
    residual = scores - hat @ scores
    was, now = (np.linalg.slogdet(part.T @ part)[1] for part in (scores, residual))
    best = float(min(1.0, p.min() * p.size))
    return Prediction(
        target, source, scores, predicted, hat, n - c - len(kept), best, float(0.5 * (was - now))
    )
