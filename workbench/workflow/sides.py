"""The two sides of a canonical analysis: blocks of one layer joined, for all samples or for a fold."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from workbench.engine import Nuisance, Split, SplitSource, fit_residuals, standardise
from workbench.prepare import recipe_for
from workbench.workflow.analysis_view import AnalysisView, Shared
from workbench.workflow.loaded_block import LoadedBlock
from workbench.workflow.preparing import SEED

FloatArray = NDArray[np.float64]


@dataclass(frozen=True, eq=False)
class Side:
    """One side over the shared samples: adjusted values at unit variance and where each column comes from.

    The columns of one block stand together, ``sizes`` tells how many each block has.
    """

    layer: str
    blocks: tuple[str, ...]
    sizes: tuple[int, ...]
    values: FloatArray
    features: tuple[str, ...]

    @property
    def feature_block(self) -> list[str]:
        """Return the block of every column."""
        return [block for block, size in zip(self.blocks, self.sizes, strict=True) for _ in range(size)]


def whole_side(view: AnalysisView, layer: str, shared: Shared, nuisance: FloatArray) -> Side:
    """Return a side over all shared samples, the nuisance removed."""
    names = view.sides[layer]
    removed = Nuisance.of(nuisance, shared.n)
    parts, features = [], []
    for name in names:
        block = view.blocks[name]
        scaled = standardise(block.values[block.rows(shared.samples)], removed)
        parts.append(scaled.values)
        features += [block.features[k] for k in scaled.kept]
    sizes = tuple(part.shape[1] for part in parts)
    return Side(layer, names, sizes, np.hstack(parts), tuple(features))


def fold_source(
    view: AnalysisView, sides: Sequence[str], shared: Shared, nuisance: FloatArray
) -> SplitSource:
    """Return what cross-validation asks for: both sides of any split, all learnt from its training rows."""
    first, second = sides

    def source(train: NDArray[np.intp], test: NDArray[np.intp]) -> Split:
        x_train, x_test = _fold_side(view, first, shared, nuisance, train, test)
        y_train, y_test = _fold_side(view, second, shared, nuisance, train, test)
        rank = Nuisance.of(nuisance[train], train.size).rank
        return Split(x_train, x_test, y_train, y_test, rank)

    return source


def _fold_side(
    view: AnalysisView,
    layer: str,
    shared: Shared,
    nuisance: FloatArray,
    train: NDArray[np.intp],
    test: NDArray[np.intp],
) -> tuple[FloatArray, FloatArray]:
    trained, tested = [], []
    for name in view.sides[layer]:
        x_train, x_test = _fold_block(view.blocks[name], shared, train, test)
        fitted = fit_residuals(nuisance[train], x_train)
        e_train = fitted.standardised(nuisance[train], x_train)
        e_test = fitted.standardised(nuisance[test], x_test)
        e_test[~fitted.estimable(nuisance[test], test.size)] = np.nan
        width = np.sqrt(max(e_train.shape[1], 1))
        trained.append(e_train / width)
        tested.append(e_test / width)
    return np.hstack(trained), np.hstack(tested)


def _fold_block(
    block: LoadedBlock, shared: Shared, train: NDArray[np.intp], test: NDArray[np.intp]
) -> tuple[FloatArray, FloatArray]:
    samples = np.array(shared.samples, dtype=object)
    taught = block.measured_rows(list(samples[train]))
    smallest = None
    if shared.groups is not None:
        counts = np.bincount(shared.groups.codes[train])
        smallest = int(counts[counts > 0].min())
    recipe = recipe_for(block.layer, block.settings.values, block.settings.prepare)
    fitted = recipe.fit(taught, smallest_group=smallest, seed=SEED)
    unseen = fitted.transform(block.measured_rows(list(samples[test])))
    return fitted.prepared.values, unseen.values
