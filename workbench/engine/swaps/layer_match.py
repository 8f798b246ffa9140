"""How two layers agree about their samples, and what exchanging two of them would gain."""

from __future__ import annotations

from collections.abc import Collection, Iterator
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.stats import t as student

from workbench.engine.nuisance import Nuisance
from workbench.engine.swaps.cross_prediction import Features, count_private, predict_left_out
from workbench.engine.swaps.exchange_gain import (
    exchange_gains,
    hat_matrix,
    rearrangement_gains,
    row_gains,
    row_mismatch,
)
from workbench.engine.swaps.swap_layers import LayerState

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
    basis : ndarray of shape (n_common, c)
        Orthonormal basis of the design.
    p : float
        Chance of the best factor's prediction (one-sided, Bonferroni over the factors).
    information : float
        Nats that the other layer tells of a sample: ``-log(1 - r^2) / 2``, summed over the factors.
    """

    target: str
    source: str
    scores: FloatArray
    predicted: FloatArray
    basis: FloatArray
    p: float
    information: float

    @property
    def hat(self) -> FloatArray:
        """Projection onto the design and all of ``predicted``."""
        return hat_matrix(np.hstack([self.basis, self.predicted]))

    @property
    def df(self) -> int:
        """Degrees of freedom beside :attr:`hat`."""
        return int(self.basis.shape[0] - self.basis.shape[1] - self.predicted.shape[1])

    @property
    def fitted(self) -> FloatArray:
        """Each factor by its own prediction, the design's part included, shape (n_common, n_matched)."""
        columns = [(hat @ score)[:, 0] for score, hat, _ in self._singly()]
        return np.column_stack(columns)

    def _singly(self) -> Iterator[tuple[FloatArray, FloatArray, int]]:
        """Yield each factor, the projection onto the design and its own prediction, and what df that leaves.

        A joint regression of all factors would have to learn all their covariances from few samples.
        """
        design = self.basis @ self.basis.T
        df = self.basis.shape[0] - self.basis.shape[1] - 1
        for score, predicted in zip(self.scores.T, self.predicted.T, strict=True):
            unit = predicted / np.linalg.norm(predicted)
            yield score[:, None], design + np.outer(unit, unit), df

    def gains(self) -> FloatArray:
        """Return the log likelihood ratio of exchanging each two samples, shape (n_common, n_common)."""
        total = np.zeros((self.scores.shape[0],) * 2)
        for one in self._singly():
            total += exchange_gains(*one)
        return total

    def rearranged(self, places: IndexArray, sources: IndexArray) -> FloatArray:
        """Return the log likelihood ratio of rearrangements of the target's rows, shape (count,)."""
        total = np.zeros(len(places))
        for one in self._singly():
            total += rearrangement_gains(*one, places, sources)
        return total

    def row_gains(self, places: IndexArray, sources: IndexArray) -> FloatArray:
        """Return how much better each of the target's rows fits in its new place, shape (s,)."""
        total = np.zeros(len(places))
        for one in self._singly():
            total += row_gains(*one, places, sources)
        return total

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
            total += weight * one.row_gains(*ahead)
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
    best = float(min(1.0, p.min() * p.size))
    information = -0.5 * float(np.log1p(-(r[kept] ** 2)).sum())
    return Prediction(target, source, scores[:, kept], predicted[:, kept], basis, best, information)
