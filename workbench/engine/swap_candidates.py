"""Arrangements of one layer's rows worth a second look: exchanged pairs and cycles of three."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from workbench.engine.layer_match import LayerMatch
from workbench.engine.rearrangement import Rearrangement, States, agreement_gain, design_gain
from workbench.engine.swap_layers import LayerState

FloatArray = NDArray[np.float64]
IndexArray = NDArray[np.intp]
BoolArray = NDArray[np.bool_]
Matches = Mapping[frozenset[str], LayerMatch]

MOST_PAIRS = 6
MOST_CYCLES = 3
TIE = 1e-6


@dataclass(frozen=True, eq=False)
class Candidate:
    """A rearrangement with its evidence.

    Attributes
    ----------
    move : Rearrangement
    partner : str
        Layer whose agreement counts; "" when none can tell.
    penalty : float
        Log of the number of layers among which ``partner`` was the best.
    shared_gain, design_gain : float
        Log likelihood ratios from the agreement with ``partner`` (less the penalty), and from the layer's
        own design.
    """

    move: Rearrangement
    partner: str
    penalty: float
    shared_gain: float
    design_gain: float

    @property
    def gain(self) -> float:
        """Whole evidence."""
        return self.shared_gain + self.design_gain


@dataclass(frozen=True, eq=False)
class LayerGains:
    """Evidence for exchanging each two rows of one layer, in one of the two ways.

    Attributes
    ----------
    layer : str
    tubes : bool
        See :class:`~workbench.engine.rearrangement.Rearrangement`.
    shared : ndarray of shape (n_samples, n_samples)
        Gain in agreement, the largest over the other layers less the penalty for choosing; 0 where none tells.
    partners : ndarray of int, shape (n_samples, n_samples)
        Position of that layer in ``names``, -1 for none.
    names : tuple of str
    design : ndarray of shape (n_samples, n_samples)
    counted : ndarray of bool, shape (n_samples, n_samples)
        The pairs (above the diagonal) that are compared.
    """

    layer: str
    tubes: bool
    shared: FloatArray
    partners: IndexArray
    names: tuple[str, ...]
    design: FloatArray
    counted: BoolArray

    @property
    def penalty(self) -> float:
        """Log of the number of layers that were asked."""
        return float(np.log(max(len(self.names), 1)))

    def candidate(self, i: int, j: int) -> Candidate:
        """Return the exchange of rows i and j."""
        partner = self.partners[i, j]
        move = Rearrangement(self.layer, np.array([i, j]), np.array([j, i]), self.tubes)
        name = self.names[partner] if partner >= 0 else ""
        return Candidate(move, name, self.penalty, float(self.shared[i, j]), float(self.design[i, j]))


def layer_gains(states: States, matches: Matches) -> list[LayerGains]:
    """Return the evidence for exchanging each two rows, for every layer; where nothing can tell, none."""
    found = []
    for name, state in states.items():
        shared, partners, names = _shared_gains(state, matches)
        for tubes in (False, True):
            counted = state.compared(tubes) & ((partners >= 0) | state.design_told)
            if counted.any():
                design = state.design_gains(tubes)
                found.append(LayerGains(name, tubes, shared, partners, names, design, counted))
    return found


def _shared_gains(state: LayerState, matches: Matches) -> tuple[FloatArray, IndexArray, tuple[str, ...]]:
    """Return the largest gain in agreement over the other layers, and which layer it comes from."""
    n, name = state.order.size, state.layer.name
    best, partners = np.full((n, n), -np.inf), np.full((n, n), -1)
    names: list[str] = []
    for key, match in matches.items():
        if name not in key or match.untestable:
            continue
        rows = match.rows_of(name)
        gains = np.full((n, n), -np.inf)
        gains[np.ix_(rows, rows)] = match.gains()
        partners[gains > best] = len(names)
        best = np.maximum(best, gains)
        names.append(match.second if match.first == name else match.first)
    # Union bound over the layers among which the best was taken.
    shared = np.where(np.isfinite(best), best - np.log(max(len(names), 1)), 0.0)
    return shared, partners, tuple(names)


def pair_candidates(gains: list[LayerGains], least: float) -> list[Candidate]:
    """Return the pairs with the most evidence, no less than ``least``, strongest first.

    Exchanges of the same samples that no design tells apart (equal evidence) give one candidate.
    """
    flat = []
    for place, one in enumerate(gains):
        total = np.where(one.counted, one.shared + one.design, -np.inf)
        rows, columns = np.nonzero(total >= least)
        flat += [(-total[i, j], place, int(i), int(j)) for i, j in zip(rows, columns, strict=True)]
    found: list[Candidate] = []
    taken: list[float] = []
    for negative, place, i, j in sorted(flat):
        if any(abs(negative - known) < TIE for known in taken):
            continue
        taken.append(negative)
        found.append(gains[place].candidate(i, j))
        if len(found) == MOST_PAIRS:
            break
    return found


def cycle_candidates(
    pairs: list[Candidate], states: States, matches: Matches, least: float
) -> list[Candidate]:
    """Return the cycles of three with the most evidence among those that hold one of the given pairs."""
    every = [cycle for pair in pairs for cycle in _cycles_with(pair, states, matches)]
    found: dict[tuple[str, frozenset[tuple[int, int]]], Candidate] = {}
    for one in sorted(every, key=lambda one: -one.gain):
        if one.gain >= least:
            found.setdefault((one.move.layer, one.move.moves), one)
    return list(found.values())[:MOST_CYCLES]


def _cycles_with(pair: Candidate, states: States, matches: Matches) -> Iterator[Candidate]:
    """Yield the cycles of three, both ways round, that hold a pair's two rows."""
    layer, (i, j) = pair.move.layer, pair.move.places.tolist()
    match = matches.get(frozenset((layer, pair.partner)))
    for k in range(states[layer].order.size):
        if k in (i, j):
            continue
        for sources in ((j, k, i), (k, i, j)):
            move = Rearrangement(layer, np.array([i, j, k]), np.array(sources), pair.move.tubes)
            shared = agreement_gain(move, match) - pair.penalty if match else 0.0
            yield Candidate(move, pair.partner, pair.penalty, shared, design_gain(move, states))
