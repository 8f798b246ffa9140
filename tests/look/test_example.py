"""In the example study each planted source of variation is found, in the words of the reading."""

from __future__ import annotations

import shutil
from pathlib import Path

import numpy as np
import pandas as pd
import pytest

from workbench import Project
from workbench.look import BlockLook, block_reading, look_at_block
from workbench.workflow.entry.looking import SEED, view_block

EXAMPLE = Path(__file__).resolve().parents[2] / "example_project"
DAYS = {"transcripts": "rna_day", "metabolites": "ms_day"}
PLANTED = {"transcripts": 8, "metabolites": 9}
"""Four modules, the drought, a private factor, three run days (two directions), and two extractions."""


@pytest.fixture(scope="module")
def project(tmp_path_factory: pytest.TempPathFactory) -> Project:
    kept = shutil.ignore_patterns("results", "blocks", "prepared", ".workbench")
    folder = shutil.copytree(EXAMPLE, tmp_path_factory.mktemp("example") / "study", ignore=kept)
    project = Project.open(folder)
    project.prepare()
    return project


@pytest.fixture(scope="module", params=list(DAYS))
def look(request: pytest.FixtureRequest, project: Project) -> BlockLook:
    return look_at_block(view_block(project.state(), request.param), seed=SEED)


def test_the_planted_sources_are_counted(look: BlockLook) -> None:
    assert PLANTED[look.name] <= look.number.number <= PLANTED[look.name] + 2


def test_run_day_and_drought_are_each_told_on_one_component(look: BlockLook) -> None:
    told = next(line for line in block_reading(look) if line.startswith("Then:"))
    assert f"goes with {DAYS[look.name]} (R2 0." in told
    assert "goes with condition (R2 0." in told


def test_the_private_factor_is_the_main_source_and_goes_with_nothing_on_the_sheet(look: BlockLook) -> None:
    main = next(line for line in block_reading(look) if line.startswith("Main source"))
    assert "goes with no column of the sample sheet" in main
    factors = pd.read_csv(EXAMPLE / "planted_factors.tsv", sep="\t", index_col="plant")
    private = factors.loc[list(look.samples), f"private {look.name}"]
    assert abs(np.corrcoef(look.scores[:, 0], private)[0, 1]) > 0.9


def test_the_features_that_follow_the_drought_lie_along_its_component(look: BlockLook) -> None:
    planted = pd.read_csv(EXAMPLE / "planted.tsv", sep="\t")
    followers = set(planted.query("layer == @look.name and planted == 'follows the drought'")["feature"])
    row = look.association.columns.index("condition")
    component = int(look.association.r2[row].argmax())
    strongest = np.argsort(-np.abs(look.correlations[:, component]))[:20]
    assert sum(look.features[j] in followers for j in strongest) >= 18
