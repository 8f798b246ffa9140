"""In the example study each planted source of variation is found, in the words of the reading."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pandas as pd
import pytest

from workbench.look import BlockLook, BlockView, block_reading, levels_of, look_at_block
from workbench.prepare import MeasuredTable, recipe_for

EXAMPLE = Path(__file__).resolve().parents[2] / "example_project"
FILES = {
    "transcripts": ("counts.tsv", "counts", "rna_day"),
    "metabolites": ("metabolites.csv", "intensities", "ms_day"),
}


def view_of(block: str) -> BlockView:
    file, values, day = FILES[block]
    sheet = pd.read_csv(EXAMPLE / "samples.tsv", sep="\t", dtype=str).set_index("plant")
    table = pd.read_csv(EXAMPLE / "source" / file, sep="\t" if file.endswith(".tsv") else ",", index_col=0)
    table = (table.T if file.endswith(".tsv") else table).loc[sheet.index]
    given = MeasuredTable(table.to_numpy(dtype=np.float64), tuple(table.index), tuple(table.columns))
    prepared = recipe_for(block, values).fit_transform(given, smallest_group=24, seed=1)
    return BlockView(
        name=block, layer=block, values=values, samples=prepared.samples, features=prepared.features,
        prepared=prepared.values, imputed=prepared.imputed, columns=sheet, adjust=(day,), shape_by=day,
        groups=levels_of("condition", sheet["condition"].tolist(), ["watered", "drought"]),
    )  # fmt: skip


@pytest.fixture(scope="module", params=list(FILES))
def look(request: pytest.FixtureRequest) -> BlockLook:
    return look_at_block(view_of(request.param), seed=1)


def test_the_planted_sources_are_counted(look: BlockLook) -> None:
    """Four modules, the drought, a private factor and three run days (two directions): eight."""
    assert look.number.number == 8


def test_run_day_and_drought_are_each_told_on_one_component(look: BlockLook) -> None:
    day = FILES[look.name][2]
    told = next(line for line in block_reading(look) if line.startswith("Then:"))
    assert f"goes with {day} (R2 0." in told
    assert "goes with condition (R2 0." in told


def test_the_private_factor_is_the_main_source_and_goes_with_nothing_on_the_sheet(look: BlockLook) -> None:
    main = next(line for line in block_reading(look) if line.startswith("Main source"))
    assert "component 1, 20 % of the total, goes with no column of the sample sheet" in main


def test_the_features_that_follow_the_drought_lie_along_its_component(look: BlockLook) -> None:
    planted = pd.read_csv(EXAMPLE / "planted.tsv", sep="\t")
    followers = set(planted.query("layer == @look.name and planted == 'follows the drought'")["feature"])
    row = look.association.columns.index("condition")
    component = int(look.association.r2[row].argmax())
    strongest = np.argsort(-np.abs(look.correlations[:, component]))[:20]
    assert sum(look.features[j] in followers for j in strongest) >= 18
