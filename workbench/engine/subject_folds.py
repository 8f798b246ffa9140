"""Folds that keep the rows of a subject together, where there are subjects."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
from numpy.typing import NDArray

from workbench.engine.folds import Fold, Seed, balanced_folds
from workbench.engine.subjects import SubjectDesign, whole_subject_folds


def make_folds(
    labels: NDArray[np.generic] | None,
    subjects: NDArray[np.intp] | None,
    n: int,
    folds: int,
    random_state: Seed,
) -> Sequence[Fold]:
    """Train and test rows of each fold: by rows, or with subjects by whole subjects; levels spread over the folds.

    Parameters
    ----------
    labels : ndarray of shape (n,) or (n, n_factors), optional
    subjects : ndarray of int, shape (n,), optional
    n, folds : int
    random_state : int, SeedSequence, Generator or None

    Examples
    --------
    >>> sorted(test.tolist() for _, test in make_folds(None, np.array([0, 0, 1, 1]), 4, 2, 0))
    [[0, 1], [2, 3]]
    """
    if subjects is None:
        return balanced_folds(labels, n, folds, random_state)
    cells = None
    if labels is not None:
        table = np.asarray(labels).reshape(n, -1)
        cells = np.unique(table, axis=0, return_inverse=True)[1].reshape(-1)
    return whole_subject_folds(SubjectDesign.of(subjects), cells, folds, random_state)
