"""Correlations of edges inside each group: whether what holds on average holds everywhere."""

from __future__ import annotations

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from workbench.engine import Nuisance
from workbench.pathways import GroupCorrelation
from workbench.workflow.analysis_view import AnalysisView
from workbench.workflow.network.screening import is_repeated

FEWEST = 5
"""Samples of a group under which a correlation in it says nothing."""


def group_correlations(view: AnalysisView, edges: pd.DataFrame) -> list[tuple[GroupCorrelation, ...]]:
    """Return the correlation of each edge in every group of at least 5 samples, group and nuisance removed.

    None of them is a test. Empty without a group, and where subjects have several samples.
    """
    found: list[tuple[GroupCorrelation, ...]] = [()] * len(edges)
    for pair in view.pairs:
        rows = np.flatnonzero(
            ((edges["source_block"] == pair[0]) & (edges["target_block"] == pair[1])).to_numpy()
        )
        shared = view.shared(pair)
        if not rows.size or shared.groups is None or is_repeated(shared):
            continue
        nuisance = Nuisance.of(shared.within, shared.n)
        ends = [
            nuisance.residuals(_columns(view, name, shared.samples, edges[end].to_numpy()[rows]))
            for name, end in zip(pair, ("source", "target"), strict=True)
        ]
        levels = []
        for code, level in enumerate(shared.groups.levels):
            inside = shared.groups.codes == code
            if inside.sum() >= FEWEST:
                r = _correlations(ends[0][inside], ends[1][inside])
                levels.append([GroupCorrelation(level, int(inside.sum()), float(one)) for one in r])
        for place, told in zip(rows.tolist(), zip(*levels, strict=True), strict=False):
            found[place] = tuple(one for one in told if np.isfinite(one.r))
    return found


def _columns(
    view: AnalysisView, block: str, samples: tuple[str, ...], features: NDArray[np.object_]
) -> NDArray[np.float64]:
    loaded = view.blocks[block]
    place = {feature: column for column, feature in enumerate(loaded.features)}
    columns = np.array([place[feature] for feature in features], dtype=np.intp)
    return loaded.values[np.ix_(loaded.rows(samples), columns)]


def _correlations(x: NDArray[np.float64], y: NDArray[np.float64]) -> NDArray[np.float64]:
    """Return the correlation of each two columns of the same place; NaN without variation."""
    x, y = x - x.mean(axis=0), y - y.mean(axis=0)
    size = np.sqrt((x * x).sum(axis=0) * (y * y).sum(axis=0))
    with np.errstate(invalid="ignore", divide="ignore"):
        return np.asarray((x * y).sum(axis=0) / size)
