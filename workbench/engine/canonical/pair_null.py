"""In-sample correlations that a canonical fit reaches when nothing is shared: the band behind the observed ones."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from workbench.engine.arrangements import Exchange
from workbench.engine.canonical.generalised_components import PlacedBasis, generalised_components
from workbench.engine.canonical.generalised_correlations import mean_over_pairs, pair_correlations
from workbench.errors import NumericsError

FloatArray = NDArray[np.float64]


def null_correlations(
    blocks: Sequence[PlacedBasis],
    exchanges: Sequence[Exchange],
    ridges: Sequence[float],
    n_components: int,
    *,
    draws: int = 99,
    seed: int = 0,
) -> FloatArray:
    """In-sample correlations (mean over the pairs of blocks) of fits to rearranged rows, (draws, n_components).

    The ridges stay, each block but the first is rearranged within the samples that it has. Rows are taken as they
    are: dimensions that a nuisance took count as free ones, so that the band is a little low with many columns.

    Parameters
    ----------
    blocks : sequence of PlacedBasis
    exchanges : sequence of Exchange
        Of each block's own rows.
    ridges : sequence of float
        Absolute.
    """
    still = [exchanges[0].staying(), *exchanges[1:]]
    every = Exchange.side_by_side(still)
    ends = np.cumsum([one.size for one in still])
    found = np.full((draws, n_components), np.nan)
    drawn = np.vstack(list(every.batches(draws, False, np.random.SeedSequence(seed), draws)))
    for k, arrangement in enumerate(drawn):
        rows = [
            part - start
            for part, start in zip(np.split(arrangement, ends[:-1]), [0, *ends[:-1]], strict=True)
        ]
        moved = [
            replace(block, basis=replace(block.basis, vectors=block.basis.vectors[order]))
            for block, order in zip(blocks, rows, strict=True)
        ]
        try:
            fitted = generalised_components(moved, ridges, n_components)
        except NumericsError:
            continue
        found[k] = mean_over_pairs(pair_correlations(fitted.variates))
    return found
