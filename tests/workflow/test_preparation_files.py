"""A delivered table with pools, from the files to the account and the figures of what preparation did."""

from __future__ import annotations

import shutil
from pathlib import Path

import pandas as pd
import pytest
from prepare.sequences import with_controls

from workbench import Project
from workbench.errors import InputError

FOLDER = Path("results") / "look" / "lcms"


@pytest.fixture(scope="module")
def delivered_runs(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """Return a folder with a table of runs, its run sheet and a sample sheet of two groups."""
    folder = tmp_path_factory.mktemp("runs")
    table = with_controls("intensities")
    runs = table.runs
    assert runs is not None
    pd.DataFrame(runs.values, index=pd.Index(runs.runs, name="run"), columns=table.features).to_csv(
        folder / "lcms.csv"
    )
    sheet = {
        "run": runs.runs,
        "sample": runs.sample,
        "role": runs.role,
        "order": runs.order,
        "batch": runs.batch,
    }
    pd.DataFrame(sheet).to_csv(folder / "runs.tsv", sep="\t", index=False)
    group = ["early" if k % 2 else "late" for k in range(len(table.samples))]
    pd.DataFrame({"sample": table.samples, "group": group}).to_csv(
        folder / "samples.tsv", sep="\t", index=False
    )
    return folder


@pytest.fixture(scope="module")
def looked(delivered_runs: Path, tmp_path_factory: pytest.TempPathFactory) -> Project:
    project = Project.create(tmp_path_factory.mktemp("project") / "study", title="Runs with pools")
    project.add_samples(delivered_runs / "samples.tsv", group="group")
    project.add_block(
        "lcms",
        delivered_runs / "lcms.csv",
        layer="metabolites",
        values="intensities",
        runs=delivered_runs / "runs.tsv",
    )
    project.look("lcms")
    return project


def test_account_figures_and_their_numbers_lie_beside_the_look(looked: Project) -> None:
    folder = looked.paths.root / FOLDER
    page = (folder / "preparation.md").read_text("utf-8")
    recipe = pd.read_csv(folder / "recipe.tsv", sep="\t")
    captions = pd.read_csv(folder / "captions.tsv", sep="\t").set_index("figure")["caption"]
    for figure in ("drift", "pool_scatter", "scale", "levels"):
        assert (folder / f"{figure}.png").stat().st_size > 10_000
        assert len(captions[figure]) > 200
    assert [f"## {k}. {name}" for k, name in zip(recipe["step"], recipe["name"], strict=True)] == [
        line for line in page.splitlines() if line.startswith("## ") and line[3].isdigit()
    ]
    assert recipe["name"].iloc[-1] == "groups"


def test_every_delivered_feature_stands_in_the_table_once(looked: Project) -> None:
    table = pd.read_csv(looked.paths.root / FOLDER / "prepared_features.tsv", sep="\t").fillna(
        {"dropped_by": ""}
    )
    assert len(table) == 120
    assert table["feature"].is_unique
    told = set(table["dropped_by"]) - {""}
    assert {"blanks", "pool scatter"} <= told
    assert table.loc[table["dropped_by"] != "", "reason"].notna().all()


def test_deleting_the_results_gives_the_same_bytes_again(looked: Project) -> None:
    folder = looked.paths.root / FOLDER
    names = (
        "preparation.md",
        "recipe.tsv",
        "prepared_features.tsv",
        "prepared_samples.tsv",
        "drift_runs.tsv",
        "drift.svg",
    )
    before = {name: (folder / name).read_bytes() for name in names}
    assert looked.look("lcms").done == []
    shutil.rmtree(looked.paths.root / "results")
    shutil.rmtree(looked.paths.root / "prepared")
    looked.look("lcms")
    assert {name: (folder / name).read_bytes() for name in names} == before


def test_a_refusal_names_block_file_and_line(looked: Project, tmp_path: Path) -> None:
    folder = shutil.copytree(looked.paths.root, tmp_path / "study")
    settings = folder / "project.toml"
    settings.write_text(settings.read_text().replace('values = "intensities"', 'values = "log"', 1))
    with pytest.raises(
        InputError, match=r"block 'lcms' \(source/.*\): .*set values = .intensities. in \[blocks.lcms\]"
    ):
        Project.open(folder).prepare()
