"""Predicting blocks of any training and test part: prepared, brought to the level asked for, nuisance removed."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
from numpy.typing import NDArray

from workbench.engine import BlockSource, BlockSplit, standard_split
from workbench.prepare import recipe_for
from workbench.workflow.entry.preparing import SEED
from workbench.workflow.loaded_block import LoadedBlock
from workbench.workflow.supervised.supervised_outcome import SupervisedStudy

FloatArray = NDArray[np.float64]
IndexArray = NDArray[np.intp]


def supervised_source(study: SupervisedStudy) -> BlockSource:
    """Return what double cross-validation asks for: everything is learnt from the training rows.

    Features are those of the blocks as prepared with all samples, less the outcome's own; of these a fold has
    the ones that its training samples let through.
    """
    places = {name: _places(study, name) for name in study.predictors}
    units = study.units

    def source(train: IndexArray, test: IndexArray) -> BlockSplit:
        trained, tested, kept = [], [], []
        for name in study.predictors:
            x, z, features = _prepared(study, study.view.blocks[name], train, test)
            known = [k for k, feature in enumerate(features) if feature in places[name]]
            trained.append(units.values_of(train, x[:, known]))
            tested.append(units.values_of(test, z[:, known]))
            kept.append(np.array([places[name][features[k]] for k in known], dtype=np.intp))
        split = standard_split(trained, tested, units.nuisance if units.nuisance.size else None, train, test)
        named = tuple(own[inside] for own, inside in zip(kept, split.kept, strict=True))
        return BlockSplit(split.train, split.test, named)

    return source


def whole_split(study: SupervisedStudy) -> BlockSplit:
    """Return all units as the training part, from the values as they were prepared with all samples."""
    every = np.arange(study.n)
    parts = [study.units.values_of(every, predictor_values(study, name)) for name in study.predictors]
    return standard_split(
        parts, parts, study.units.nuisance if study.units.nuisance.size else None, every, every
    )


def blocks_of_split(split: BlockSplit, blocks: Sequence[int]) -> BlockSplit:
    """Return some blocks of a split."""
    return BlockSplit(
        tuple(split.train[b] for b in blocks),
        tuple(split.test[b] for b in blocks),
        tuple(split.kept[b] for b in blocks),
    )


def predictor_values(study: SupervisedStudy, name: str) -> FloatArray:
    """Return the prepared values of a block's predicting features, samples in their order."""
    block = study.view.blocks[name]
    place = {feature: k for k, feature in enumerate(block.features)}
    columns = [place[feature] for feature in predictor_features(study, name)]
    values: FloatArray = block.values[block.rows(study.shared.samples)][:, columns]
    return values


def predictor_features(study: SupervisedStudy, name: str) -> tuple[str, ...]:
    """Return a block's features less those that are the outcome."""
    gone = set(study.excluded.get(name, ()))
    return tuple(feature for feature in study.view.blocks[name].features if feature not in gone)


def _places(study: SupervisedStudy, name: str) -> dict[str, int]:
    return {feature: k for k, feature in enumerate(predictor_features(study, name))}


def _prepared(
    study: SupervisedStudy, block: LoadedBlock, train: IndexArray, test: IndexArray
) -> tuple[FloatArray, FloatArray, tuple[str, ...]]:
    samples = np.array(study.shared.samples, dtype=object)
    taught = samples[study.units.samples_of(train)]
    unseen = samples[study.units.samples_of(test)]
    groups = study.shared.groups
    smallest = None
    if groups is not None:
        counts = np.bincount(groups.codes[study.units.samples_of(train)])
        smallest = int(counts[counts > 0].min())
    recipe = recipe_for(block.layer, block.settings.values, block.settings.prepare)
    fitted = recipe.fit(block.measured_rows(list(taught)), smallest_group=smallest, seed=SEED)
    prepared = fitted.transform(block.measured_rows(list(unseen)))
    return fitted.prepared.values, prepared.values, fitted.prepared.features
