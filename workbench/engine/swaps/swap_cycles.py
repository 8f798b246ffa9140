"""Accepted exchanges put together: which sample's row belongs to which, layer by layer."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from workbench.engine.swaps.rearrangement import Rearrangement
from workbench.engine.swaps.swap_evidence import SwapEvidence

IndexArray = NDArray[np.intp]


@dataclass(frozen=True, eq=False)
class Accepted:
    """One accepted rearrangement.

    Attributes
    ----------
    move : Rearrangement
    places, sources : tuple of int
        The same as samples: what is delivered as ``sources[k]`` belongs to ``places[k]``, after the exchanges
        accepted before it.
    layers : tuple of str
        The layers in which it may have happened, likeliest first.
    gain, bound : float
    evidence : SwapEvidence
    """

    move: Rearrangement
    places: tuple[int, ...]
    sources: tuple[int, ...]
    layers: tuple[str, ...]
    gain: float
    bound: float
    evidence: SwapEvidence


@dataclass(frozen=True, eq=False)
class Swap:
    """Samples whose rows were exchanged in one layer.

    Attributes
    ----------
    samples : tuple of int
        A cycle: each one's row belongs to the next one, the last's to the first (in ``layers[0]``; the other
        way round in another layer).
    layers : tuple of str
        The layers in which it may have happened, the likeliest first: a single one when the data tell.
    everywhere : bool
        All layers that have the samples show it: the entries of the sample sheet were exchanged.
    before_runs : bool
        The marks of the run (batch columns) stayed where they are: the tubes were exchanged before the runs.
    gain : float
        Evidence: log likelihood ratio of the arrangement found to the delivered one, as the search weighs it;
        the sum over the exchanges that make up the cycle.
    bound : float
        The largest bound that one of them had to pass.
    evidence : tuple of SwapEvidence
        One for each exchange.
    """

    samples: tuple[int, ...]
    layers: tuple[str, ...]
    everywhere: bool
    before_runs: bool
    gain: float
    bound: float
    evidence: tuple[SwapEvidence, ...]


def swap_cycles(accepted: Sequence[Accepted], samples: Mapping[str, IndexArray]) -> tuple[Swap, ...]:
    """Return the cycles that accepted exchanges make up, strongest evidence first.

    Parameters
    ----------
    accepted : sequence of Accepted
        In the order of acceptance.
    samples : mapping of str to ndarray of int
        The samples of every layer.
    """
    found = []
    for layer in samples:
        own = [one for one in accepted if one.move.layer == layer]
        found += [_swap(layer, cycle, own) for cycle in _cycles(own)]
    together = _everywhere(found, samples)
    return tuple(sorted(together, key=lambda swap: -swap.gain))


def _cycles(accepted: Sequence[Accepted]) -> list[tuple[int, ...]]:
    """Return the cycles of one layer's exchanges done one after the other, each from its smallest sample."""
    now: dict[int, int] = {}
    for one in accepted:
        rows = [now.get(source, source) for source in one.sources]
        now.update(zip(one.places, rows, strict=True))
    owner = {row: place for place, row in now.items() if row != place}
    cycles = []
    while owner:
        start = min(owner)
        cycle, following = [start], owner.pop(start)
        while following != start:
            cycle.append(following)
            following = owner.pop(following)
        cycles.append(tuple(cycle))
    return cycles


def _swap(layer: str, cycle: tuple[int, ...], accepted: Sequence[Accepted]) -> Swap:
    parts = [one for one in accepted if set(one.places) & set(cycle)]
    others = set.intersection(*(set(one.layers) for one in parts)) - {layer}
    order = [name for name in parts[0].layers if name in others]
    return Swap(
        cycle,
        (layer, *order),
        False,
        all(one.move.tubes for one in parts),
        sum(one.gain for one in parts),
        max(one.bound for one in parts),
        tuple(one.evidence for one in parts),
    )


def _everywhere(swaps: list[Swap], samples: Mapping[str, IndexArray]) -> list[Swap]:
    """Return the swaps with those that all layers show as one."""
    found: dict[tuple[int, ...], list[Swap]] = {}
    for swap in swaps:
        found.setdefault(swap.samples, []).append(swap)
    together = []
    for cycle, same in found.items():
        layers = {swap.layers[0] for swap in same}
        holding = {name for name, held in samples.items() if np.isin(cycle, held).all()}
        if len(layers) < 2 or layers != holding:
            together += same
            continue
        whole = replace(
            same[0],
            layers=tuple(swap.layers[0] for swap in same),
            everywhere=True,
            before_runs=False,
            gain=sum(swap.gain for swap in same),
            evidence=tuple(one for swap in same for one in swap.evidence),
        )
        together.append(whole)
    return together
