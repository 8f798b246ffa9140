"""How much evidence for a swap a clean study reaches: simulated from what the study at hand shows."""

from __future__ import annotations

import math
from collections.abc import Collection, Mapping
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from workbench.engine.swaps.layer_match import LayerMatch
from workbench.engine.swaps.swap_candidates import SHEET, TUBES, Bounds, layer_gains
from workbench.engine.swaps.swap_layers import LayerState
from workbench.engine.swaps.swap_sheet import sheet_gains

FloatArray = NDArray[np.float64]
IndexArray = NDArray[np.intp]
BoolArray = NDArray[np.bool_]

DRAWS = 60
TAILS = 8.0
EULER = 0.5772156649015329
LEAST_BOUND = 3.75
SMALLEST_SPREAD = 0.1
STANDING = 0.5
RARER = {TUBES: 1.0, SHEET: 1.5}


def clean_bounds(
    states: Mapping[str, LayerState],
    matches: Mapping[frozenset[str], LayerMatch],
    level: float,
    random_state: int | np.random.Generator,
    left_out: Collection[int] = (),
) -> Bounds:
    """Evidence for an exchange that a clean study passes with probability ``level``.

    Studies are drawn in which every layer's components scatter around what its design explains, and matched
    factors and predictions go together, with the covariances that the study itself shows; the scatter of a
    sample is Student-t with ``TAILS`` degrees of freedom. In each the largest evidence of every kind of exchange
    is taken, over all pairs and layers. Bounds lie equally many spreads above each kind's mean (``RARER`` more
    for some), so that any is passed with probability ``level`` by Gumbel's law. They thereby grow with the log of
    the number of pairs, and are small where the layers tell much of each other; none is under ``LEAST_BOUND``.

    Parameters
    ----------
    states, matches
        As delivered.
    level : float
    random_state : int or Generator
    left_out : collection of int
        Samples whose rows do not count in how far the layers agree.

    References
    ----------
    Gumbel 1958, Statistics of Extremes (moments of the law of the largest value).
    """
    rng = np.random.default_rng(random_state)
    n = 1 + max(int(state.layer.samples.max()) for state in states.values())
    draws = []
    for _ in range(DRAWS):
        drawn = _Drawn.of(n, rng)
        of_layers = {name: drawn.state(state) for name, state in states.items()}
        of_pairs = {key: drawn.match(match, left_out) for key, match in matches.items()}
        draws.append(_largest(of_layers, of_pairs))
    kinds = sorted(set().union(*draws))
    largest = {kind: np.array([draw.get(kind, 0.0) for draw in draws]) for kind in kinds}
    pairs = _common_bounds(largest, level)
    return Bounds(pairs, math.log(max((n - 2) * 2.0 / 3.0, 1.0)))


def _common_bounds(largest: Mapping[str, FloatArray], level: float) -> dict[str, float]:
    """Return bounds, equally many spreads above each kind's mean (and ``RARER``), that any passes at ``level``.

    Drawn studies have no second look, which at most a share ``STANDING`` of the largest evidence in clean studies
    stands: each sample has to gain, and to go with its new row (half is more than was measured).
    """
    centre = {kind: float(most.mean()) for kind, most in largest.items()}
    spread = {kind: max(float(most.std(ddof=1)), SMALLEST_SPREAD) for kind, most in largest.items()}
    excess = [(most - centre[kind]) / spread[kind] - RARER.get(kind, 0.0) for kind, most in largest.items()]
    passed = _quantile(np.max(excess, axis=0), min(level / STANDING, 0.5)) if excess else 0.0
    return {
        kind: max(centre[kind] + spread[kind] * (passed + RARER.get(kind, 0.0)), LEAST_BOUND)
        for kind in largest
    }


def _quantile(largest: FloatArray, level: float) -> float:
    scale = float(largest.std(ddof=1)) * math.sqrt(6.0) / math.pi
    return float(largest.mean()) + scale * (-math.log(-math.log1p(-level)) - EULER)


@dataclass(frozen=True, eq=False)
class _Drawn:
    """Layers and matches of a drawn study; ``mixing`` makes its rows of those of the study at hand."""

    mixing: FloatArray
    scale: FloatArray

    @classmethod
    def of(cls, n: int, rng: np.random.Generator) -> _Drawn:
        scale = np.sqrt(TAILS / rng.chisquare(TAILS, n)) * np.sqrt((TAILS - 2.0) / TAILS)
        return cls(rng.standard_normal((n, n)), scale)

    def rows(self, samples: IndexArray, residual: FloatArray, counts: BoolArray, df: int) -> FloatArray:
        """Return rows of the covariance of those residuals that count, none of them its own sample's."""
        mixing = self.mixing[np.ix_(samples, samples[counts])] / np.sqrt(max(df, 1))
        drawn: FloatArray = self.scale[samples, None] * (mixing @ residual[counts])
        return drawn

    def state(self, state: LayerState) -> LayerState:
        fitted = state.hat() @ state.components
        every = np.ones(state.order.size, dtype=bool)
        noise = self.rows(state.layer.samples, state.components - fitted, every, state.df)
        return replace(state, components=fitted + noise)

    def match(self, match: LayerMatch, left_out: Collection[int]) -> LayerMatch:
        counts = ~np.isin(match.samples, list(left_out))
        df = int(counts.sum()) - match.basis.shape[1]
        predictions = []
        for one in match.predictions:
            rows = self.rows(match.samples, np.hstack([one.scores, one.predicted]), counts, df)
            scores, predicted = np.hsplit(rows - match.basis @ (match.basis.T @ rows), 2)
            predictions.append(replace(one, scores=scores, predicted=predicted))
        return replace(match, predictions=tuple(predictions))


def _largest(
    states: Mapping[str, LayerState], matches: Mapping[frozenset[str], LayerMatch]
) -> dict[str, float]:
    """Return the largest evidence of every kind of exchange that anything can tell of."""
    most: dict[str, float] = {}
    for gains in layer_gains(states, matches):
        most[gains.kind] = max(most.get(gains.kind, -np.inf), float(gains.total().max()))
    if all(state.design_told for state in states.values()):
        most[SHEET] = max(float(sheet_gains(states).max()), 0.0)
    return most
