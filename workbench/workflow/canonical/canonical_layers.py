"""The layers of a canonical analysis as matrices: blocks of one layer joined, for all units or for a fold."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from workbench.engine import Nuisance, SideSplit, Split, SplitSource, fit_residuals, standardise
from workbench.engine.canonical.generalised_validation import BlockSplit, BlocksSource
from workbench.engine.private.private_removal import PrivateRemoval, private_removals
from workbench.errors import InputError
from workbench.prepare import recipe_for
from workbench.workflow.analysis_view import AnalysisView
from workbench.workflow.canonical.canonical_units import Units
from workbench.workflow.entry.preparing import SEED
from workbench.workflow.loaded_block import LoadedBlock

FloatArray = NDArray[np.float64]
IndexArray = NDArray[np.intp]


@dataclass(frozen=True, eq=False)
class LayerMatrix:
    """One layer over the units: adjusted values at unit variance and where each column comes from.

    The columns of one block stand together, ``sizes`` tells how many each block has; a unit that the layer lacks
    is a row of NaN.  ``raw`` holds the same columns as the test takes them, with nothing removed.
    """

    layer: str
    blocks: tuple[str, ...]
    sizes: tuple[int, ...]
    values: FloatArray
    raw: FloatArray
    features: tuple[str, ...]

    @property
    def feature_block(self) -> list[str]:
        """Return the block of every column."""
        return [block for block, size in zip(self.blocks, self.sizes, strict=True) for _ in range(size)]

    @property
    def held(self) -> IndexArray:
        """Return the units that the layer has."""
        return np.flatnonzero(np.isfinite(self.values[:, 0]))


def layer_matrix(view: AnalysisView, layer: str, units: Units) -> LayerMatrix:
    """Return a layer over all units, the nuisance removed."""
    names = view.sides[layer]
    every = np.arange(units.n)
    parts, raws, features = [], [], []
    for name in names:
        block = view.blocks[name]
        rows = samples_held(view, layer, units.samples)
        values = np.full((len(units.samples), len(block.features)), np.nan)
        values[rows] = block.values[block.rows([units.samples[k] for k in rows])]
        formed = units.formed(every, values[units.samples_of(every)])
        held = np.flatnonzero(np.isfinite(formed).all(axis=1))
        if held.size < 3:
            raise InputError(
                f"analysis '{view.name}': layer '{layer}' has {held.size} of the {units.n} {units.words}; leave its "
                "blocks out"
            )
        scaled = standardise(formed[held], Nuisance.of(units.nuisance[held], held.size))
        placed = np.full((units.n, scaled.kept.size), np.nan)
        placed[held] = scaled.values
        parts.append(placed)
        tested = values if units.kind == "deviations" else formed
        raws.append(tested[:, scaled.kept])
        features += [block.features[k] for k in scaled.kept]
    sizes = tuple(part.shape[1] for part in parts)
    return LayerMatrix(layer, names, sizes, np.hstack(parts), np.hstack(raws), tuple(features))


def samples_held(view: AnalysisView, layer: str, samples: Sequence[str]) -> IndexArray:
    """Return the positions of the samples that all blocks of a layer have."""
    held = set(view.held_by_all(view.sides[layer]))
    return np.flatnonzero([sample in held for sample in samples])


def without_private(
    layers: Sequence[LayerMatrix], nuisance: FloatArray, seed: int
) -> tuple[list[FloatArray], dict[str, PrivateRemoval]]:
    """Return each layer's values as tested, freed of nuisance and private variation, and by block what was removed."""
    raw = [part for layer in layers for part in np.split(layer.raw, np.cumsum(layer.sizes)[:-1], axis=1)]
    owners = [layer.layer for layer in layers for _ in layer.blocks]
    made = private_removals(raw, owners, nuisance, seed=seed)
    cleaned = iter([one.transform(part, nuisance) for one, part in zip(made, raw, strict=True)])
    names = [block for layer in layers for block in layer.blocks]
    freed = [np.hstack([next(cleaned) for _ in layer.blocks]) for layer in layers]
    return freed, dict(zip(names, made, strict=True))


def two_side_source(view: AnalysisView, units: Units) -> SplitSource:
    """Return what cross-validation of two sides asks for: both of any split, all learnt from its training rows."""
    first, second = view.layers

    def source(train: IndexArray, test: IndexArray) -> Split:
        x, y = (_fold_layer(view, layer, units, train, test) for layer in (first, second))
        rank = Nuisance.of(units.nuisance[train], train.size).rank
        return Split(SideSplit.of(x.train, x.test), SideSplit.of(y.train, y.test), rank)

    return source


def layers_source(view: AnalysisView, units: Units) -> BlocksSource:
    """Return what cross-validation of several layers asks for: each on the units that it has."""

    def source(train: IndexArray, test: IndexArray) -> list[BlockSplit]:
        return [_fold_layer(view, layer, units, train, test) for layer in view.layers]

    return source


def _fold_layer(
    view: AnalysisView, layer: str, units: Units, train: IndexArray, test: IndexArray
) -> BlockSplit:
    held = samples_held(view, layer, units.samples)
    trained, tested = [], []
    for name in view.sides[layer]:
        taught, unseen = _fold_block(view.blocks[name], units, held, train, test)
        train_rows = np.flatnonzero(np.isfinite(taught).all(axis=1))
        test_rows = np.flatnonzero(np.isfinite(unseen).all(axis=1))
        columns = units.nuisance[train[train_rows]]
        fitted = fit_residuals(columns, taught[train_rows])
        scaled = fitted.standardised(columns, taught[train_rows])
        other = fitted.standardised(units.nuisance[test[test_rows]], unseen[test_rows])
        other[~fitted.estimable(units.nuisance[test[test_rows]], test_rows.size)] = np.nan
        width = np.sqrt(max(scaled.shape[1], 1))
        trained.append(scaled / width)
        tested.append(other / width)
    return BlockSplit(np.hstack(trained), train_rows, np.hstack(tested), test_rows)


def _fold_block(
    block: LoadedBlock, units: Units, held: IndexArray, train: IndexArray, test: IndexArray
) -> tuple[FloatArray, FloatArray]:
    """Units of a block, prepared by its recipe learnt from the training samples; NaN rows where it lacks one."""
    taught, unseen = units.samples_of(train), units.samples_of(test)
    known_taught, known_unseen = np.isin(taught, held), np.isin(unseen, held)
    smallest = None
    if units.groups is not None:
        counts = np.bincount(units.groups.codes[train])
        smallest = int(counts[counts > 0].min())
    recipe = recipe_for(block.layer, block.settings.values, block.settings.prepare)
    names = np.array(units.samples, dtype=object)
    fitted = recipe.fit(
        block.measured_rows(list(names[taught[known_taught]])), smallest_group=smallest, seed=SEED
    )
    prepared = fitted.transform(block.measured_rows(list(names[unseen[known_unseen]])))
    return (
        units.formed(train, _placed(fitted.prepared.values, known_taught)),
        units.formed(test, _placed(prepared.values, known_unseen)),
    )


def _placed(values: FloatArray, known: NDArray[np.bool_]) -> FloatArray:
    every = np.full((known.size, values.shape[1]), np.nan)
    every[known] = values
    return every
