"""Simulated studies as the search for swapped samples takes them, and what was exchanged in them."""

import numpy as np
from simulated import Study
from simulated.sheet import day_column, indicators

from workbench.engine.swap_layers import SwapLayer
from workbench.engine.swapped_samples import SwapSearch
from workbench.prepare import MeasuredTable, recipe_for


def swap_layers(study: Study) -> list[SwapLayer]:
    """Return a study's blocks prepared by their recipes, with run days and order apart from the group."""
    return [_layer(study, place) for place in range(len(study.design.blocks))]


def _layer(study: Study, place: int) -> SwapLayer:
    block = study.design.blocks[place]
    table = study.aligned(block.name)
    sheet = study.samples.loc[table.index]
    smallest = int(sheet["group"].value_counts().min()) if "group" in sheet else None
    measured = MeasuredTable(table.to_numpy(dtype=float), tuple(table.index), tuple(table.columns))
    prepared = recipe_for(block.layer, block.values).fit_transform(measured, smallest_group=smallest, seed=1)
    batch = []
    day = day_column(sheet, block.name)
    if day is not None:
        batch.append(indicators(sheet[day])[:, 1:])
    if block.drift:
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
