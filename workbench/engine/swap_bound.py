"""How much evidence for a swap a clean study reaches: simulated from what the study at hand shows."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from workbench.engine.exchange_gain import exchange_gains, hat_matrix
from workbench.engine.layer_match import LayerMatch, Prediction
from workbench.engine.swap_layers import LayerState
from workbench.engine.swap_sheet import sheet_gains

FloatArray = NDArray[np.float64]
IndexArray = NDArray[np.intp]

DRAWS = 60
TAILS = 8.0
EULER = 0.5772156649015329


@dataclass(frozen=True, eq=False)
class _Rows:
    """Rows of scores at their places in the study: what is fitted, and residuals over the root of df."""

    places: IndexArray
    fitted: FloatArray
    residual: FloatArray

    def drawn(self, mixing: FloatArray, scale: FloatArray) -> FloatArray:
        """Return rows of the same covariance that have nothing to do with the samples they stand for."""
        noise = mixing[np.ix_(self.places, self.places)] @ self.residual
        rows: FloatArray = self.fitted + scale[self.places, None] * noise
        return rows


def clean_bound(
    states: Mapping[str, LayerState],
    matches: Mapping[frozenset[str], LayerMatch],
    level: float,
    random_state: int | np.random.Generator,
) -> float:
    """Evidence for an exchanged pair that a clean study passes with probability ``level``.

    Studies are drawn in which every layer's components scatter around what its design explains, and matched
    factors and predictions go together, with the covariances that the study itself shows; the scatter of a
    sample is Student-t with ``TAILS`` degrees of freedom. The largest evidence over all pairs, layers and ways
    of exchanging is taken in each, and the quantile from Gumbel's law with their mean and spread. The bound
    thereby grows with the log of the number of pairs, and the less the layers tell of each other.

    Parameters
    ----------
    states, matches
        As delivered.
    level : float
    random_state : int or Generator

    References
    ----------
    Gumbel 1958, Statistics of Extremes (moments of the law of the largest value).
    """
    rng = np.random.default_rng(random_state)
    n = 1 + max(int(state.layer.samples.max()) for state in states.values())
    parts = _Parts.of(states, matches)
    largest = np.empty(DRAWS)
    for draw in range(DRAWS):
        mixing = rng.standard_normal((n, n))
        scale = np.sqrt(TAILS / rng.chisquare(TAILS, n)) * np.sqrt((TAILS - 2.0) / TAILS)
        largest[draw] = parts.largest(mixing, scale)
    spread = float(largest.std(ddof=1)) * np.sqrt(6.0) / np.pi
    return float(largest.mean() + spread * (-np.log(-np.log1p(-level)) - EULER))


@dataclass(frozen=True, eq=False)
class _Parts:
    states: Mapping[str, LayerState]
    matches: Mapping[frozenset[str], LayerMatch]
    components: dict[str, _Rows]
    predictions: dict[frozenset[str], list[tuple[Prediction, _Rows, _Rows]]]

    @classmethod
    def of(cls, states: Mapping[str, LayerState], matches: Mapping[frozenset[str], LayerMatch]) -> _Parts:
        components, predictions = {}, {}
        for name, state in states.items():
            fitted = state.hat() @ state.components
            residual = (state.components - fitted) / np.sqrt(state.df)
            components[name] = _Rows(state.layer.samples, fitted, residual)
        for key, match in matches.items():
            predictions[key] = [
                (one, _residual_rows(match, one.scores), _residual_rows(match, one.predicted))
                for one in match.predictions
            ]
        return cls(states, matches, components, predictions)

    def largest(self, mixing: FloatArray, scale: FloatArray) -> float:
        """Return the largest evidence in one drawn study."""
        shared = {key: self._shared(key, mixing, scale) for key in self.matches}
        every = {name: rows.drawn(mixing, scale) for name, rows in self.components.items()}
        most = float(sheet_gains(self.states, every).max())
        for name, state in self.states.items():
            rows = every[name]
            best = self._best_partner(name, shared)
            for tubes in (False, True):
                compared = state.compared(tubes)
                if not compared.any():
                    continue
                design = state.design_gains(tubes, rows)
                most = max(most, float(np.max((best + design)[compared])))
        return most

    def _shared(self, key: frozenset[str], mixing: FloatArray, scale: FloatArray) -> FloatArray:
        match = self.matches[key]
        gains = np.zeros((match.samples.size,) * 2)
        for weight, (one, scores, predicted) in zip(match.weights(), self.predictions[key], strict=True):
            u, p = scores.drawn(mixing, scale), predicted.drawn(mixing, scale)
            hat = hat_matrix(np.hstack([match.basis, p]))
            gains += weight * exchange_gains(u - match.basis @ (match.basis.T @ u), hat, one.df)
        return gains

    def _best_partner(self, name: str, shared: Mapping[frozenset[str], FloatArray]) -> FloatArray:
        n = self.states[name].order.size
        asked = [key for key in self.matches if name in key and not self.matches[key].untestable]
        best = np.full((n, n), -np.inf)
        for key in asked:
            rows = self.matches[key].rows_of(name)
            block = np.ix_(rows, rows)
            best[block] = np.maximum(best[block], shared[key])
        return np.where(np.isfinite(best), best - np.log(max(len(asked), 1)), 0.0)


def _residual_rows(match: LayerMatch, rows: FloatArray) -> _Rows:
    df = match.samples.size - match.basis.shape[1]
    return _Rows(match.samples, np.zeros_like(rows), rows / np.sqrt(df))
