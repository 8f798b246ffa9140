"""Arrangements of one layer's rows worth a second look: exchanged pairs and cycles of three."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from workbench.engine.swaps.layer_match import LayerMatch
from workbench.engine.swaps.rearrangement import Rearrangement, States, agreement_gains
from workbench.engine.swaps.swap_layers import LayerState

FloatArray = NDArray[np.float64]
IndexArray = NDArray[np.intp]
BoolArray = NDArray[np.bool_]
Matches = Mapping[frozenset[str], LayerMatch]

MOST_PAIRS = 6
MOST_CYCLES = 3
TIE = 1e-6

ALIKE, APART, TUBES, SHEET = "alike", "apart", "tubes", "sheet"


@dataclass(frozen=True)
class Bounds:
    """Evidence that an exchange has to pass.

    Attributes
    ----------
    pairs : mapping of str to float
        By kind: ``alike``, where the design expects the same of both, so that the layers' agreement alone can
        tell; ``apart``, rows of which it expects different things; ``tubes`` of different groups, exchanged
        before the runs; ``sheet``, entries of the sample sheet. Kinds that nothing can tell of are missing.
    cycle : float
        How much more a cycle of three has to pass: the log of how many more of them there are.
    """

    pairs: Mapping[str, float]
    cycle: float

    def of(self, kind: str, size: int) -> float:
        """Return the bound of an exchange of ``size`` samples."""
        return self.pairs.get(kind, np.inf) + (self.cycle if size > 2 else 0.0)


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
    kind : str
        See :class:`Bounds`.
    """

    move: Rearrangement
    partner: str
    penalty: float
    shared_gain: float
    design_gain: float
    kind: str

    @property
    def gain(self) -> float:
        """Whole evidence."""
        return self.shared_gain + self.design_gain

    @property
    def size(self) -> int:
        """Number of samples."""
        return int(self.move.places.size)

    def samples(self, states: States) -> frozenset[int]:
        """Return the samples that change places."""
        return frozenset(states[self.move.layer].layer.samples[self.move.places].tolist())

    @property
    def asks_design(self) -> bool:
        """Whether the design counts: of rows that it takes to be alike it says nothing but noise."""
        return self.kind != ALIKE


@dataclass(frozen=True, eq=False)
class LayerGains:
    """Evidence for exchanging each two rows of one layer, all of one kind.

    Attributes
    ----------
    layer : str
    kind : str
        See :class:`Bounds`.
    tubes : bool
        See :class:`~workbench.engine.swaps.rearrangement.Rearrangement`.
    shared : ndarray of shape (n_samples, n_samples)
        Gain in agreement, the largest over the other layers less the penalty for choosing; 0 where none tells.
    partners : ndarray of int, shape (n_samples, n_samples)
        Position of that layer in ``names``, -1 for none.
    names : tuple of str
    design : ndarray of shape (n_samples, n_samples)
        Gain in agreement with the design; 0 where it is not asked.
    counted : ndarray of bool, shape (n_samples, n_samples)
        The pairs (above the diagonal) of this kind.
    """

    layer: str
    kind: str
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

    def total(self) -> FloatArray:
        """Return the whole evidence, minus infinity for pairs of another kind."""
        total: FloatArray = np.where(self.counted, self.shared + self.design, -np.inf)
        return total

    def candidate(self, i: int, j: int) -> Candidate:
        """Return the exchange of rows i and j."""
        partner = self.partners[i, j]
        move = Rearrangement(self.layer, np.array([i, j]), np.array([j, i]), self.tubes)
        name = self.names[partner] if partner >= 0 else ""
        gains = float(self.shared[i, j]), float(self.design[i, j])
        return Candidate(move, name, self.penalty, *gains, self.kind)


def layer_gains(states: States, matches: Matches) -> list[LayerGains]:
    """Return the evidence for exchanging each two rows, for every layer; where nothing can tell, none."""
    found = []
    for name, state in states.items():
        shared, partners, names = _shared_gains(state, matches)
        for kind, tubes, counted in _kinds(state, partners >= 0):
            if counted.any():
                design = np.zeros_like(shared) if kind == ALIKE else state.design_gains(tubes)
                found.append(LayerGains(name, kind, tubes, shared, partners, names, design, counted))
    return found


def _kinds(state: LayerState, shared: BoolArray) -> Iterator[tuple[str, bool, BoolArray]]:
    """Yield the pairs of each kind, as rows and as tubes; tubes of one group carry nothing that it knows."""
    apart, told = state.apart(), shared | state.design_told
    rows, tubes, grouped = state.compared(False), state.compared(True) & apart, state.differ_in_group()
    yield ALIKE, False, rows & ~apart & shared
    yield ALIKE, True, tubes & ~grouped & shared
    yield APART, False, rows & apart & told
    yield TUBES, True, tubes & grouped & told


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


def pair_candidates(gains: list[LayerGains], bounds: Bounds, slack: float) -> list[Candidate]:
    """Return the pairs that pass their bound by most, or miss it by ``slack`` at most, in that order.

    Exchanges of the same samples that no design tells apart (equal evidence) give one candidate.
    """
    flat = []
    for place, one in enumerate(gains):
        total = one.total() - bounds.of(one.kind, 2)
        rows, columns = np.nonzero(total >= -slack)
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
    pairs: list[Candidate], states: States, matches: Matches, bounds: Bounds, slack: float
) -> list[Candidate]:
    """Return the cycles of three that pass their bound by most among those that hold one of the given pairs."""
    every = [cycle for pair in pairs for cycle in _cycles_with(pair, states, matches)]
    found: dict[tuple[str, frozenset[tuple[int, int]]], Candidate] = {}
    for one in sorted(every, key=lambda one: bounds.of(one.kind, 3) - one.gain):
        if one.gain >= bounds.of(one.kind, 3) - slack:
            found.setdefault((one.move.layer, one.move.moves), one)
    return list(found.values())[:MOST_CYCLES]


def _cycles_with(pair: Candidate, states: States, matches: Matches) -> Iterator[Candidate]:
    """Yield the cycles of three, both ways round, that hold a pair's two rows."""
    state, (i, j) = states[pair.move.layer], pair.move.places.tolist()
    third = [k for k in range(state.order.size) if k not in (i, j)]
    places = np.repeat([[i, j, k] for k in third], 2, axis=0)
    sources = np.array([row for k in third for row in ((j, k, i), (k, i, j))])
    match = matches.get(frozenset((pair.move.layer, pair.partner)))
    tubes = pair.move.tubes
    shared = agreement_gains(pair.move.layer, places, sources, match) - pair.penalty * (match is not None)
    design = state.moves_gain(places, sources, tubes)
    apart = state.apart()[places, sources].any(axis=1)
    for k in range(len(places)):
        move = Rearrangement(pair.move.layer, places[k], sources[k], tubes)
        kind = APART if pair.kind == ALIKE and apart[k] else pair.kind
        gains = float(shared[k]), 0.0 if kind == ALIKE else float(design[k])
        yield Candidate(move, pair.partner, pair.penalty, *gains, kind)
