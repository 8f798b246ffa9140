"""Folds of double cross-validation: whole per subject, balanced over classes, prepared once for all who look."""

from __future__ import annotations

from collections.abc import Iterator
from typing import Any

import numpy as np
from numpy.typing import NDArray

from workbench.engine.folds import Fold, Seed, balanced_folds
from workbench.engine.subjects import SubjectDesign, subject_labels
from workbench.engine.supervised.double_outcome import ClassOutcome, NumberOutcome
from workbench.engine.supervised.double_splits import BlockSource, FoldSplits
from workbench.errors import NumericsError

INNER_REPEATS = 2
"""Times that the inner loop deals its folds anew: what it chooses is the steadier, and held-out figures the better."""


def fold_splits(
    source: BlockSource,
    subjects: SubjectDesign,
    levels: NDArray[Any] | None,
    folds: int,
    seed: int,
    repeat: int,
) -> Iterator[FoldSplits]:
    """Yield the outer folds of one repeat, each with ``INNER_REPEATS`` times as many inner folds of its training part.

    Parameters
    ----------
    source : callable
        Split of given training and test positions.
    subjects : SubjectDesign
        Folds are whole per subject.
    levels : ndarray of shape (n_samples, n_factors) or None
        To be spread over the folds.
    folds : int
        Of either loop.
    seed, repeat : int
        A fold depends on these and on nothing else.

    Raises
    ------
    NumericsError
        When there are fewer subjects than folds, in a training part too.
    """
    every = np.arange(subjects.n_samples)
    drawn = np.random.SeedSequence(seed, spawn_key=(repeat,))
    for k, (train, test) in enumerate(_folds(subjects, levels, folds, drawn)):
        labels = None if levels is None else levels[train]
        rows = [(every[train], every[test])]
        for again in range(INNER_REPEATS):
            inside = np.random.SeedSequence(seed, spawn_key=(repeat, k, again))
            inner = _folds(subjects.take(train), labels, folds, inside)
            rows += [(train[taught], train[held]) for taught, held in inner]
        yield FoldSplits(repeat, k, folds, tuple(rows), tuple(source(*pair) for pair in rows))


def strata_of(outcome: ClassOutcome | NumberOutcome, strata: NDArray[Any] | None) -> NDArray[Any] | None:
    """Return what is to be spread over the folds: the classes, and other factors.

    Examples
    --------
    >>> strata_of(ClassOutcome.of(np.array([0, 1])), np.array([5, 5])).tolist()
    [[0, 5], [1, 5]]
    """
    columns = [outcome.labels[:, :1]] if isinstance(outcome, ClassOutcome) else []
    if strata is not None:
        columns.append(np.asarray(strata).reshape(len(strata), -1))
    return np.column_stack(columns) if columns else None


def _folds(design: SubjectDesign, levels: NDArray[Any] | None, folds: int, seed: Seed) -> list[Fold]:
    """Deal whole subjects out, each factor's levels spread over the folds."""
    if folds > design.n_subjects:
        raise NumericsError(
            f"{folds} folds for {design.n_subjects} subjects; a subject's samples stay together, so that "
            "there can be no more folds than subjects"
        )
    labels = None
    if levels is not None:
        labels = np.column_stack([subject_labels(design, column) for column in levels.T])
    dealt = balanced_folds(labels, design.n_subjects, folds, seed)
    rows = [[np.flatnonzero(np.isin(design.subject, part)) for part in fold] for fold in dealt]
    return [(train, test) for train, test in rows]
