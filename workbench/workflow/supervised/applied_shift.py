"""Levels of another cohort against those here: told, never silently recentred."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from workbench.intake.faults import counted

FloatArray = NDArray[np.float64]

FAR = 1.0
"""Standard deviations here by which a feature's mean there must differ to be called shifted."""
ERRORS = 3.0
"""Standard errors of the difference of the two means by which it must differ as well."""
MANY = 0.1
"""Share of a block's features from which the shift is a warning."""
COLUMNS = ("block", "feature", "shift")


def shifted_levels(
    names: Sequence[str], features: Sequence[Sequence[str]], values: Sequence[FloatArray], n_here: int
) -> tuple[pd.DataFrame, list[str]]:
    """Return the features whose mean there is far from that here, the farthest first, and a warning for each block.

    Parameters
    ----------
    names : sequence of str
        Blocks.
    features : sequence of sequence of str
        Features of each block that are measured in both.
    values : sequence of ndarray of shape (n_there, n_features)
        Theirs, less the mean here and in standard deviations here; NaN rows lack the block.
    n_here : int
        Samples that taught mean and deviation.

    Examples
    --------
    >>> rng = np.random.default_rng(0)
    >>> moved = rng.normal(size=(40, 10)) + np.where(np.arange(10) < 4, 3.0, 0.0)
    >>> table, lines = shifted_levels(["rna"], [list("abcdefghij")], [moved], 60)
    >>> len(table), lines[0][:67]
    (4, 'levels there: 4 of 10 features of block rna (40%) lie more than 1 s')
    """
    rows: list[tuple[str, str, float]] = []
    lines: list[str] = []
    for name, own, block in zip(names, features, values, strict=True):
        held = block[np.isfinite(block).all(axis=1)]
        if not held.size:
            continue
        means = held.mean(axis=0)
        far = np.flatnonzero(np.abs(means) > max(FAR, ERRORS * np.sqrt(1.0 / len(held) + 1.0 / n_here)))
        rows += [(name, own[k], float(means[k])) for k in far.tolist()]
        if far.size and far.size >= MANY * len(own):
            lines.append(_warning(name, len(own), far.size, float(np.median(np.abs(means)))))
    table = pd.DataFrame(rows, columns=list(COLUMNS))
    order = table["shift"].abs().sort_values(ascending=False, kind="stable").index
    return table.loc[order].reset_index(drop=True), lines


def _warning(name: str, count: int, far: int, median: float) -> str:
    return (
        f"levels there: {far:,} of {counted(count, 'feature')} of block {name} ({far / count:.0%}) lie more than "
        f"{FAR:g} standard deviation from their mean here (median distance {median:.1f}): another batch, another assay "
        "or other people. Nothing was recentred. Who ranks above whom is little touched by a shift that all share; "
        "predicted classes, probabilities and numbers are moved by it. Measure some samples in both runs, or integrate "
        "both cohorts together with the cohort under adjust"
    )
