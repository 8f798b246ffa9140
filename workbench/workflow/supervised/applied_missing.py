"""Features of a model that another project lacks or has at other levels, and what that costs."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from workbench.intake.faults import counted
from workbench.workflow.supervised.applied_shift import shifted_levels
from workbench.workflow.supervised.supervised_outcome import SupervisedStudy
from workbench.workflow.supervised.supervised_source import predictor_features

FloatArray = NDArray[np.float64]


def shifted_features(
    study: SupervisedStudy,
    blocks: Sequence[str],
    kept: Sequence[NDArray[np.intp]],
    absent: Sequence[NDArray[np.bool_]],
    parts: Sequence[FloatArray],
) -> tuple[pd.DataFrame, list[str]]:
    """Return the features of the model that are there, at levels far from those here."""
    names = [np.array(predictor_features(study, name))[own] for name, own in zip(blocks, kept, strict=True)]
    features = [own[~gone].tolist() for own, gone in zip(names, absent, strict=True)]
    values = [part[:, ~gone] for part, gone in zip(parts, absent, strict=True)]
    return shifted_levels(blocks, features, values, study.n)


def missing_table(
    study: SupervisedStudy,
    blocks: Sequence[str],
    kept: tuple[NDArray[np.intp], ...],
    absent: list[NDArray[np.bool_]],
    coefficients: FloatArray,
    vip: FloatArray,
) -> tuple[pd.DataFrame, float]:
    """Return the features of the model that are not there, the weightiest first, and their share in all.

    Parameters
    ----------
    study : SupervisedStudy
    blocks : sequence of str
        Blocks of the model.
    kept : sequence of ndarray of int
        Features of the model among those of each block.
    absent : sequence of ndarray of bool
        Which of them are not there.
    coefficients : ndarray of shape (n_columns, n_features)
        For standardised features, blocks side by side.
    vip : ndarray of shape (n_features,)
    """
    rows, start = [], 0
    squares = (coefficients**2).sum(axis=0)
    share = squares / squares.sum() if squares.sum() > 0.0 else squares
    for name, inside, gone in zip(blocks, kept, absent, strict=True):
        features = predictor_features(study, name)
        for k in np.flatnonzero(gone):
            rows.append((features[inside[k]], name, share[start + k], vip[start + k]))
        start += inside.size
    table = pd.DataFrame(rows, columns=["feature", "block", "share", "vip"])
    table = table.sort_values("share", ascending=False, kind="stable", ignore_index=True)
    return table, float(table["share"].sum())


def agreement(x: FloatArray, coefficients: FloatArray, gone: NDArray[np.bool_]) -> float:
    """Return how the model's values without some features go with those with all: a correlation over the samples.

    Parameters
    ----------
    x : ndarray of shape (n_samples, n_features)
        Standardised.
    coefficients : ndarray of shape (n_columns, n_features)
    gone : ndarray of bool, shape (n_features,)

    Examples
    --------
    >>> round(agreement(np.array([[1.0, 1.0], [1.0, -1.0], [-1.0, 0.0]]), np.ones((1, 2)), np.array([False, True])), 2)
    0.76
    """
    whole = x @ coefficients.T
    without = x[:, ~gone] @ coefficients[:, ~gone].T
    if not gone.any() or without.std() == 0.0:
        return 0.0 if gone.any() else 1.0
    return float(np.corrcoef(whole.ravel(), without.ravel())[0, 1])


def missing_lines(missing: pd.DataFrame, cost: float, agreed: float, total: int) -> list[str]:
    """Return in words what is missing, its share of the squared coefficients, and what is left of the values."""
    if missing.empty:
        return [f"all {total:,} features of the model are there"]
    named = ", ".join(f"{row.feature} ({row.block})" for row in missing.head(5).itertuples())
    named += ", ..." if len(missing) > 5 else ""
    return [
        f"not there: {counted(len(missing), 'feature')} of the model's {total:,} ({named}), with {cost:.0%} of its "
        "squared coefficients; each counts as its mean here, which draws predictions to the middle. Over the samples "
        f"here the model's values without them go with those with all at r = {agreed:.2f}"
    ]
