"""A rearrangement of some rows of one layer, and what it gains with the others and with the design."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from workbench.engine.swaps.exchange_gain import row_gains
from workbench.engine.swaps.layer_match import LayerMatch
from workbench.engine.swaps.swap_layers import LayerState

FloatArray = NDArray[np.float64]
IndexArray = NDArray[np.intp]
States = Mapping[str, LayerState]


@dataclass(frozen=True, eq=False)
class Rearrangement:
    """Rows of one layer put into other places.

    Attributes
    ----------
    layer : str
    places, sources : ndarray of int
        Row ``sources[k]`` of the layer comes to place ``places[k]``; the same rows in another order.
    tubes : bool
        Whether the batch columns' part of the rows stays where it is: the tubes were exchanged before the runs.
    """

    layer: str
    places: IndexArray
    sources: IndexArray
    tubes: bool

    @property
    def moves(self) -> frozenset[tuple[int, int]]:
        """What comes where, whatever the order of writing."""
        return frozenset(zip(self.places.tolist(), self.sources.tolist(), strict=True))

    def back(self) -> Rearrangement:
        """Return the rearrangement that undoes this one."""
        return replace(self, places=self.sources, sources=self.places)

    def done(self, states: States) -> LayerState:
        """Return the layer with its rows rearranged."""
        return states[self.layer].rearranged(self.places, self.sources, self.tubes)

    def carried(self, layer: str, states: States) -> Rearrangement | None:
        """Return what mends the same mismatch in another layer: the inverse there; None where samples lack."""
        if layer == self.layer:
            return self
        names, there = states[self.layer].layer.samples, states[layer].layer.samples
        row = {sample: place for place, sample in enumerate(there.tolist())}
        wanted = [[row.get(names[k], -1) for k in rows] for rows in (self.sources, self.places)]
        if min(min(rows) for rows in wanted) < 0:
            return None
        return Rearrangement(layer, np.array(wanted[0]), np.array(wanted[1]), self.tubes)


def design_gain(one: Rearrangement, states: States) -> float:
    """Return what a rearrangement gains in the layer's agreement with its own design."""
    return float(states[one.layer].moves_gain(one.places[None], one.sources[None], one.tubes)[0])


def agreement_gain(one: Rearrangement, match: LayerMatch) -> float:
    """Return what a rearrangement gains in the layer's agreement with another; 0 where it cannot tell."""
    return float(agreement_gains(one.layer, one.places[None], one.sources[None], match)[0])


def agreement_gains(
    layer: str, places: IndexArray, sources: IndexArray, match: LayerMatch | None
) -> FloatArray:
    """Return what several rearrangements of a layer's rows gain in agreement with another, shape (count,).

    ``places`` and ``sources`` have the shape (count, s); 0 where the match cannot tell.
    """
    gains = np.zeros(len(places))
    if match is None or match.untestable or layer not in (match.first, match.second):
        return gains
    inside = np.full(int(max(places.max(), match.rows_of(layer).max())) + 1, -1)
    inside[match.rows_of(layer)] = np.arange(match.samples.size)
    places, sources = inside[places], inside[sources]
    known = (places >= 0).all(axis=1)
    if known.any():
        gains[known] = match.rearranged(layer, places[known], sources[known])
    return gains


def least_share(one: Rearrangement, match: LayerMatch | None, states: States | None) -> float:
    """Return the smallest share that any of the samples has in what the rearrangement mends.

    Of samples that were exchanged every one goes better with its new row. Where one row belongs to nobody, the
    sample that it is exchanged with went well with its own: its share is negative. Without ``states`` the design
    is not asked.
    """
    state = None if states is None else states[one.layer]
    gains = np.zeros(one.places.size)
    inside = _inside(one, match) if match is not None else None
    if match is not None and inside is not None:
        gains += match.row_gains(one.layer, *inside)
    if state is not None and state.design_told and not one.tubes:
        gains += row_gains(state.components, state.hat(), state.df, one.places, one.sources)
    total = float(gains.sum())
    return float(gains.min()) / total if total > 0.0 else 0.0


def worst_fit(one: Rearrangement, match: LayerMatch | None) -> float:
    """Return the smallest chance of a worse fit that any rearranged sample has; 1 where nothing can tell."""
    inside = _inside(one, match) if match is not None else None
    return 1.0 if match is None or inside is None else match.mismatch(one.layer, *inside)


def _inside(one: Rearrangement, match: LayerMatch) -> tuple[IndexArray, IndexArray] | None:
    """Return places and sources among the common samples of a match; None where it cannot tell."""
    if match.untestable or one.layer not in (match.first, match.second):
        return None
    inside = {row: place for place, row in enumerate(match.rows_of(one.layer).tolist())}
    if any(row not in inside for row in one.places.tolist()):
        return None
    places, sources = (np.array([inside[row] for row in rows.tolist()]) for rows in (one.places, one.sources))
    return places, sources
