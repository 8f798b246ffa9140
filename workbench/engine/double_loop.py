"""One outer fold of double cross-validation: components chosen inside, test samples predicted once."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from workbench.engine.double_outcome import HeldOut, Outcome
from workbench.engine.double_splits import SplitKernels
from workbench.engine.multiblock_kernel import batch_predictions

FloatArray = NDArray[np.float64]
IndexArray = NDArray[np.intp]

BATCH_NUMBERS = 20_000_000
"""Numbers that the predictions of one batch of arrangements may take."""


@dataclass(frozen=True, eq=False)
class FoldKernels:
    """Kernels of an outer fold and of the inner folds of its training part."""

    outer: SplitKernels
    inner: tuple[SplitKernels, ...]


@dataclass(frozen=True, eq=False)
class NestedFold:
    """What one outer fold gives for every arrangement.

    Attributes
    ----------
    chosen : ndarray of int, shape (size,)
        Number of components that the inner loop chose.
    test : HeldOut
        Test samples that can be scored, by the chosen number (one candidate), less the inner loop's level.
    inner : HeldOut
        Training samples that the inner loop held out, the same.
    every : HeldOut
        Test samples by each candidate number, less the inner loop's level at that number.
    """

    chosen: IndexArray
    test: HeldOut
    inner: HeldOut
    every: HeldOut


def nested_fold(
    kernels: FoldKernels, blocks: Sequence[int] | slice, outcome: Outcome, candidates: Sequence[int]
) -> NestedFold:
    """Choose the number of components on the training part alone, and predict the test samples.

    Parameters
    ----------
    kernels : FoldKernels
    blocks : sequence of int or slice
        Blocks that the model takes.
    outcome : Outcome
    candidates : sequence of int
        Numbers of components to choose from, fewest first.
    """
    parts = [held_out(split, blocks, outcome, candidates) for split in kernels.inner]
    place = outcome.choose(parts)
    rows = np.concatenate([part.rows for part in parts])
    predicted = np.concatenate([part.predicted for part in parts], axis=1)
    levels = np.array([outcome.level(rows, one) for one in predicted])
    outer = held_out(kernels.outer, blocks, outcome, candidates)
    every = outer.predicted - levels[:, None]
    inside = predicted - levels[:, None]
    return NestedFold(
        chosen=np.asarray(candidates)[place],
        test=HeldOut(outer.train, outer.rows, _taken(every, place)),
        inner=HeldOut(outer.train, rows, _taken(inside, place)),
        every=HeldOut(outer.train, outer.rows, every),
    )


def held_out(
    split: SplitKernels, blocks: Sequence[int] | slice, outcome: Outcome, candidates: Sequence[int]
) -> HeldOut:
    """Predictions of a split's test samples that can be scored, by each number of components."""
    train, cross = split.of(blocks)
    scored = np.isfinite(cross).all(axis=1)
    codes = outcome.codes(split.train_rows)
    numbers = (max(candidates) + 3) * (train.shape[0] + cross.shape[0]) * outcome.columns
    step = max(1, BATCH_NUMBERS // numbers)
    places = np.asarray(candidates) - 1
    parts = [
        batch_predictions(train, cross[scored], codes[:, :, start : start + step], max(candidates))[1][places]
        for start in range(0, outcome.size, step)
    ]
    return HeldOut(split.train_rows, split.test_rows[scored], np.concatenate(parts, axis=3))


def _taken(predicted: FloatArray, place: IndexArray) -> FloatArray:
    """Predictions by each arrangement's own candidate, as the one candidate."""
    taken: FloatArray = np.take_along_axis(predicted, place[None, None, None, :], axis=0)
    return taken
