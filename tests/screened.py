"""A simulated study taken through the preparation and the screen, as far as its edges."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import pandas as pd
from simulated import Block, Study, design_matrix

from workbench.engine import BlockPair, BlockScreen, screen_blocks
from workbench.prepare import MeasuredTable, recipe_for


@dataclass(frozen=True)
class Screened:
    """The screen of a study, and its edges under (block, other block) as columns of the delivered tables."""

    screen: BlockScreen
    edges: dict[tuple[str, str], np.ndarray]


def prepared_block(study: Study, block: Block) -> pd.DataFrame:
    """Return a block's prepared values by the default recipe, its samples in sheet order.

    Numbers only: text columns of clinical readings have no place here.
    """
    table = study.aligned(block.name)
    measured = MeasuredTable(table.to_numpy(dtype=float), tuple(table.index), tuple(table.columns))
    samples = study.samples.loc[table.index]
    smallest = int(samples["group"].value_counts().min()) if "group" in samples else None
    prepared = recipe_for(block.layer, block.values).fit_transform(measured, smallest_group=smallest, seed=1)
    return pd.DataFrame(prepared.values, index=list(prepared.samples), columns=list(prepared.features))


def screen_study(
    study: Study, correlation: str = "pearson", fdr: float = 0.05, hide: tuple[str, ...] = ()
) -> Screened:
    """Return the edges of a study: every two blocks of different layers, with the design as nuisance.

    Columns of the sample sheet that are to `hide` take no part in the nuisance.
    """
    prepared = {block.name: prepared_block(study, block) for block in study.design.blocks}
    known = study.samples.drop(columns=list(hide))
    pairs = []
    for one, other in study.truth.pairs:
        common = study.common_samples(one, other)
        x, y = (prepared[name].loc[common].to_numpy() for name in (one, other))
        pairs.append(BlockPair(f"{one}-{other}", x, y, design_matrix(known.loc[common], one, other)))
    screen = screen_blocks(pairs, fdr=fdr, correlation=correlation)
    edges = {}
    for k, (one, other) in enumerate(study.truth.pairs):
        here = screen.pair_index == k
        ends = (prepared[one].columns[screen.i[here]], prepared[other].columns[screen.j[here]])
        places = [study.positions(name, end) for name, end in zip((one, other), ends, strict=True)]
        edges[one, other] = np.column_stack(places)
    return Screened(screen, edges)
