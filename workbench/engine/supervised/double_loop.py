"""One outer fold of double cross-validation: blocks and components chosen inside, test samples predicted once."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from itertools import combinations

import numpy as np
from numpy.typing import NDArray

from workbench.engine.supervised.double_outcome import HeldOut, Outcome
from workbench.engine.supervised.double_splits import SplitKernels
from workbench.engine.supervised.multiblock_kernel import batch_predictions

FloatArray = NDArray[np.float64]
IndexArray = NDArray[np.intp]

BATCH_NUMBERS = 4_000_000
"""Numbers that the predictions of one batch of arrangements may take."""

MOST_BLOCKS = 5
"""Blocks up to which every set of them is a candidate."""


@dataclass(frozen=True)
class Choice:
    """Blocks that a model takes, its number of components, and what counts alike in it: ``features`` or ``blocks``."""

    blocks: tuple[int, ...]
    components: int
    alike: str


def choices(n_blocks: int, components: Sequence[int], *, choose_blocks: bool) -> tuple[Choice, ...]:
    """Return what the inner loop chooses from: all blocks first, then ever fewer, each with 1, 2, ... components.

    Up to five blocks every set of blocks is tried; of more all, all but one, and each alone. Where there are several
    blocks, either features or blocks count alike: blocks alike when a small block tells as much as a large one,
    features alike when it would only bring noise. One block alone is the same either way.

    Examples
    --------
    >>> [(one.blocks, one.alike) for one in choices(2, [1], choose_blocks=True)]
    [((0, 1), 'features'), ((0, 1), 'blocks'), ((0,), 'blocks'), ((1,), 'blocks')]
    """
    every = tuple(range(n_blocks))
    sizes = [n_blocks]
    if choose_blocks:
        sizes = list(range(n_blocks, 0, -1)) if n_blocks <= MOST_BLOCKS else [n_blocks, n_blocks - 1, 1]
    sets = [blocks for size in sizes for blocks in combinations(every, size)]
    return tuple(
        Choice(blocks, count, alike)
        for blocks in sets
        for count in components
        for alike in (("features", "blocks") if len(blocks) > 1 else ("blocks",))
    )


@dataclass(frozen=True, eq=False)
class FoldKernels:
    """Kernels of an outer fold and of the inner folds of its training part, repeat by repeat."""

    outer: SplitKernels
    inner: Sequence[Sequence[SplitKernels]]


@dataclass(frozen=True, eq=False)
class NestedFold:
    """What one outer fold gives.

    Attributes
    ----------
    chosen : int
        Position of the choice of the inner loop, for the outcome as delivered.
    test : HeldOut
        Test samples that can be scored, for every arrangement by its own choice, less the inner loop's level.
    inner : HeldOut
        Training samples that the inner loop held out, once for each of its repeats, by the choice; the outcome as
        delivered.
    every : HeldOut
        Test samples by each candidate; the outcome as delivered.
    """

    chosen: int
    test: HeldOut
    inner: HeldOut
    every: HeldOut


def nested_fold(kernels: FoldKernels, outcome: Outcome, candidates: Sequence[Choice]) -> NestedFold:
    """Choose blocks and components on the training part alone, and predict the test samples.

    Parameters
    ----------
    kernels : FoldKernels
    outcome : Outcome
    candidates : sequence of Choice
        In the order of preference.
    """
    rows = kernels.outer.train.shape[1] + kernels.outer.test.shape[1]
    total = kernels.outer.train.shape[1] * len(kernels.inner)
    numbers = outcome.columns * (len(candidates) * total + 12 * rows)
    step = max(1, BATCH_NUMBERS // numbers)
    parts = []
    for start in range(0, outcome.size, step):
        arranged = outcome.part(slice(start, start + step))
        inner = [[held_out(one, arranged, candidates) for one in repeat] for repeat in kernels.inner]
        parts.append(best_inside(inner, held_out(kernels.outer, arranged, candidates), arranged))
    first = parts[0]
    together = np.concatenate([part.test.predicted for part in parts], axis=3)
    return NestedFold(
        first.chosen, HeldOut(first.test.train, first.test.rows, together), first.inner, first.every
    )


def best_inside(inner: Sequence[Sequence[HeldOut]], outer: HeldOut, outcome: Outcome) -> NestedFold:
    """Choose a candidate for each arrangement by the inner loop, and predict the outer fold's test samples by it.

    Parameters
    ----------
    inner : sequence of sequence of HeldOut
        Samples that the inner folds held out, by every candidate, repeat by repeat.
    outer : HeldOut
        Test samples by every candidate.
    outcome : Outcome
    """
    place = outcome.choose(inner)
    parts = [part for repeat in inner for part in repeat]
    rows = np.concatenate([part.rows for part in parts])
    predicted = np.concatenate([part.predicted for part in parts], axis=1)
    levels = np.array([outcome.level(rows, one) for one in predicted])
    every = outer.predicted - levels[:, None]
    inside = predicted[[place[0]], :, :, :1] - levels[[place[0]], None, :, :1]
    return NestedFold(
        chosen=int(place[0]),
        test=HeldOut(outer.train, outer.rows, _taken(every, place)),
        inner=HeldOut(outer.train, rows, inside),
        every=HeldOut(outer.train, outer.rows, every[:, :, :, :1]),
    )


def held_out(split: SplitKernels, outcome: Outcome, candidates: Sequence[Choice]) -> HeldOut:
    """Predictions of a split's test samples that can be scored, by each candidate."""
    scored = np.isfinite(split.test).all(axis=(0, 2))
    codes = outcome.codes(split.train_rows)
    most: dict[tuple[tuple[int, ...], str], int] = {}
    for one in candidates:
        key = (one.blocks, one.alike)
        most[key] = max(most.get(key, 0), one.components)
    found = {}
    for (blocks, alike), count in most.items():
        train, cross = split.of(blocks, alike)
        found[blocks, alike] = batch_predictions(train, cross[scored], codes, count)[1]
    predicted = np.array([found[one.blocks, one.alike][one.components - 1] for one in candidates])
    return HeldOut(split.train_rows, split.test_rows[scored], predicted)


def _taken(predicted: FloatArray, place: IndexArray) -> FloatArray:
    """Predictions by each arrangement's own candidate, as the one candidate."""
    taken: FloatArray = np.take_along_axis(predicted, place[None, None, None, :], axis=0)
    return taken
