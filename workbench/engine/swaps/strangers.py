"""Rows that match nobody: what one layer says of a sample is told by no other layer."""

from __future__ import annotations

from collections.abc import Collection, Iterable, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from workbench.engine.swaps.layer_match import LayerMatch
from workbench.engine.swaps.swap_layers import LayerState

FloatArray = NDArray[np.float64]

STRANGER_LEVEL = 0.001
SPOILT = 3.0


@dataclass(frozen=True, eq=False)
class Stranger:
    """A sample whose rows in two layers do not belong together, without another that would fit.

    Attributes
    ----------
    sample : int
    layers : tuple of str
        The layers whose row may be someone else's.
    p : float
        Chance of so large a mismatch anywhere in a study without one.
    """

    sample: int
    layers: tuple[str, ...]
    p: float


def find_strangers(
    matches: Sequence[LayerMatch], explained: Collection[int], level: float = STRANGER_LEVEL
) -> tuple[Stranger, ...]:
    """Return the samples that two layers disagree about more than chance allows, worst first.

    The mismatch of each sample is :func:`~workbench.engine.swaps.exchange_gain.row_mismatch`; p by Bonferroni over
    samples, directions and matches.

    Parameters
    ----------
    matches : sequence of LayerMatch
    explained : collection of int
        Samples that are not looked at: they were found exchanged, or went wrong as a whole.
    level : float
        Family-wise rate.
    """
    tested = [match for match in matches if match.predictions]
    worst: dict[int, float] = {}
    layers: dict[int, list[set[str]]] = {}
    for match in tested:
        every = np.arange(match.samples.size)
        p = np.min([one.mismatch(every, every) for one in match.predictions], axis=0)
        p = np.minimum(p * match.samples.size * len(match.predictions) * len(tested), 1.0)
        for sample, chance in zip(match.samples.tolist(), p.tolist(), strict=True):
            if chance <= level and sample not in explained:
                worst[sample] = min(chance, worst.get(sample, 1.0))
                layers.setdefault(sample, []).append({match.first, match.second})
    found = [Stranger(sample, _to_blame(layers[sample]), p) for sample, p in worst.items()]
    return tuple(sorted(found, key=lambda one: (one.p, one.sample)))


def spoilt_samples(states: Iterable[LayerState]) -> set[int]:
    """Return samples whose row went wrong as a whole in a layer, which belongs to nobody for that reason.

    Around the design it scatters ``SPOILT`` times as much (variance) as the median row.
    """
    found: set[int] = set()
    for state in states:
        scatter = np.mean(state.residuals**2, axis=1)
        found |= set(state.layer.samples[scatter > SPOILT * np.median(scatter)].tolist())
    return found


def _to_blame(pairs: list[set[str]]) -> tuple[str, ...]:
    common = set.intersection(*pairs)
    return tuple(sorted(common or set.union(*pairs)))
