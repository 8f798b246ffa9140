"""A nuisance column that tells the group stops the analysis, with the equation between the two in words."""

from __future__ import annotations

import shutil
from pathlib import Path

import pandas as pd
import pytest

from workbench import Project
from workbench.errors import InputError


def test_a_batch_that_is_the_group_stops_with_its_equation(made_once: Path, tmp_path: Path) -> None:
    folder = shutil.copytree(made_once, tmp_path / "study")
    sheet = pd.read_csv(folder / "samples.tsv", sep="\t", dtype=str)
    sheet["plate"] = sheet["group"].map({"control": "p2", "treated": "p1"})
    sheet.to_csv(folder / "samples.tsv", sep="\t", index=False)
    settings = (folder / "project.toml").read_text()
    assert 'adjust = ["run_day"]' in settings
    (folder / "project.toml").write_text(settings.replace('["run_day"]', '["plate"]', 1))
    with pytest.raises(InputError, match=r"samples 'group=treated' = 1 - 'plate=p2' \(a class counts 1"):
        Project.open(folder).integrate()
