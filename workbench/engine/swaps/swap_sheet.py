"""Entries of the sample sheet that were exchanged: every layer contradicts the design in the same two samples."""

from __future__ import annotations

from collections.abc import Mapping

import numpy as np
from numpy.typing import NDArray

from workbench.engine.swaps.rearrangement import Rearrangement, design_gain, least_share
from workbench.engine.swaps.swap_candidates import SHEET, Candidate
from workbench.engine.swaps.swap_layers import LayerState
from workbench.engine.swaps.swap_weighing import LEAST_SHARE

FloatArray = NDArray[np.float64]

LEAST_EACH = 2.0


def sheet_gains(states: Mapping[str, LayerState]) -> FloatArray:
    """Evidence that the entries of two samples were exchanged in the sample sheet, for each two samples.

    The sum of what exchanging them gains in every layer's agreement with its design; minus infinity for samples
    that a layer lacks, and where one layer says less than ``LEAST_EACH`` for it.

    Parameters
    ----------
    states : mapping of str to LayerState

    Returns
    -------
    ndarray of shape (n_samples, n_samples)
    """
    n = 1 + max(int(state.layer.samples.max()) for state in states.values())
    total = np.zeros((n, n))
    for state in states.values():
        own = np.full((n, n), -np.inf)
        gains = state.design_gains(False)
        gains = np.where(gains >= LEAST_EACH, gains, -np.inf)
        own[np.ix_(state.layer.samples, state.layer.samples)] = gains
        total += own
    return total


def sheet_candidates(states: Mapping[str, LayerState], bound: float) -> list[Candidate] | None:
    """Return the exchange of two samples in every layer that passes the bound by most; None when none does.

    Every layer's part must be mended for both samples.
    """
    total = sheet_gains(states)
    i, j = np.unravel_index(int(total.argmax()), total.shape)
    if total[i, j] < bound:
        return None
    found = []
    for name, state in states.items():
        a, b = (int(np.flatnonzero(state.layer.samples == sample)[0]) for sample in sorted((i, j)))
        move = Rearrangement(name, np.array([a, b]), np.array([b, a]), False)
        if least_share(move, None, states) < LEAST_SHARE:
            return None
        found.append(Candidate(move, "", 0.0, 0.0, design_gain(move, states), SHEET))
    return found
