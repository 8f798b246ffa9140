"""Simulated studies as the search for swapped samples takes them, and what was exchanged in them."""

from dataclasses import replace

import numpy as np
import pandas as pd
from simulated import Study
from simulated.sheet import day_column, indicators

from workbench.engine.swaps.swap_layers import SwapLayer
from workbench.engine.swaps.swapped_samples import SwapSearch
from workbench.prepare import MeasuredTable, PreparedTable, recipe_for


def swap_layers(study: Study, *, named: bool = True) -> list[SwapLayer]:
    """Return a study's blocks prepared by their recipes, with run days and order apart from the group.

    With ``named=False`` the settings name neither run days nor order.
    """
    return [_layer(study, place, named) for place in range(len(study.design.blocks))]


def prepared_block(study: Study, place: int) -> PreparedTable:
    """Return a study's block prepared by its recipe."""
    block = study.design.blocks[place]
    table = study.aligned(block.name)
    sheet = study.samples.loc[table.index]
    smallest = int(sheet["group"].value_counts().min()) if "group" in sheet else None
    measured = MeasuredTable(table.to_numpy(dtype=float), tuple(table.index), tuple(table.columns))
    return recipe_for(block.layer, block.values).fit_transform(measured, smallest_group=smallest, seed=1)


def _layer(study: Study, place: int, named: bool) -> SwapLayer:
    block = study.design.blocks[place]
    table = study.aligned(block.name)
    sheet = study.samples.loc[table.index]
    prepared = prepared_block(study, place)
    batch = []
    day = day_column(sheet, block.name)
    if named and day is not None:
        batch.append(indicators(sheet[day])[:, 1:])
    if named and block.drift:
        batch.append(sheet[[f"{block.name}_order"]].to_numpy(dtype=float))
    return SwapLayer(
        block.name,
        prepared.values,
        study.samples.index.get_indexer(table.index),
        np.hstack(batch) if batch else None,
        indicators(sheet["group"])[:, 1:] if "group" in sheet else None,
    )


def exchanged(study: Study) -> set[frozenset[int]]:
    """Return the sets of samples that were exchanged."""
    cycles = [cycle for block in study.truth.swaps.values() for cycle in block]
    return {frozenset(study.samples.index.get_indexer(list(cycle)).tolist()) for cycle in cycles}


def found_in(search: SwapSearch) -> set[frozenset[int]]:
    """Return the sets of samples that a search found."""
    return {frozenset(swap.samples) for swap in search.swaps}


def crosses(study: Study, samples: frozenset[int]) -> str:
    """Return what differs between exchanged samples: ``day``, ``group``, ``day group`` or ``nothing``."""
    rows = study.samples.iloc[sorted(samples)]
    words = [
        word
        for word, column in (("day", "run_day"), ("group", "group"))
        if column in rows and rows[column].nunique() > 1
    ]
    return " ".join(words) or "nothing"


def factor_layers(
    n: int, seed: int, *, names: tuple[str, ...] = ("x", "y"), factors: int = 3, batches: int = 1
) -> list[SwapLayer]:
    """Return layers of 300, 120, 120 ... features that share factors, with run batches and two groups.

    Every factor is in a fifth of a layer's features. With one batch there is no design at all.
    """
    rng = np.random.default_rng(seed)
    shared = rng.normal(size=(n, factors))
    layers = []
    for place, name in enumerate(names):
        p = 120 if place else 300
        loadings = 1.2 * rng.normal(size=(factors, p)) * (rng.random((factors, p)) < 0.2)
        values = shared @ loadings + rng.normal(size=(n, p))
        batch = group = None
        if batches > 1:
            batch = indicators(pd.Series(rng.permutation(n) % batches))[:, 1:]
            group = (np.arange(n) % 2).astype(float)[:, None]
            values += batch @ rng.normal(0.0, 0.7, (batches - 1, p)) + group @ rng.normal(0.0, 0.7, (1, p))
        layers.append(SwapLayer(name, values, np.arange(n), batch, group))
    return layers


def exchange(layer: SwapLayer, places: list[int], sources: list[int]) -> SwapLayer:
    """Return a layer in which the rows of ``sources`` stand under the names of ``places``."""
    values = layer.values.copy()
    values[places] = layer.values[sources]
    return replace(layer, values=values)
