"""A killed command costs nothing but its time: the next one goes on, and every file is as without a kill."""

from __future__ import annotations

import os
import shutil
from pathlib import Path

import pytest
from benchmarks.kills import Case, Moment, faults_after, kill, make_cases, moments, must, trial, unfinished

pytestmark = [
    pytest.mark.slow,
    pytest.mark.skipif(not hasattr(os, "killpg"), reason="no process groups on this system"),
]
KILLS = {"run": 3, "add-block": 2}
SEED = 20


@pytest.fixture(scope="module")
def cases(tmp_path_factory: pytest.TempPathFactory) -> dict[str, Case]:
    """Return the commands to kill, with their projects before and after."""
    return make_cases(tmp_path_factory.mktemp("kills"))


@pytest.mark.parametrize(
    ("name", "number"), [(name, k) for name, kills in KILLS.items() for k in range(kills)]
)
def test_project_goes_on_after_a_kill(cases: dict[str, Case], tmp_path: Path, name: str, number: int) -> None:
    moment = list(moments(cases[name], KILLS[name], SEED))[number]
    _, faults = trial(cases[name], tmp_path, moment)
    assert faults == []


def test_unfinished_files_of_a_killed_command_go_with_the_next(
    cases: dict[str, Case], tmp_path: Path
) -> None:
    left: tuple[str, ...] = ()
    for sight in range(1, 11):
        project = tmp_path / f"killed at {sight}"
        shutil.copytree(cases["run"].before, project)
        left = kill(cases["run"], project, Moment(0, sight)).left
        if left:
            break
    assert left
    must(project, "run")
    assert unfinished(project) == []


def test_faults_are_found_where_there_are_some(cases: dict[str, Case], tmp_path: Path) -> None:
    project = tmp_path / "project"
    shutil.copytree(cases["run"].after, project)
    assert faults_after(cases["run"], project) == []
    (project / "source" / ".counts.tsv.part").write_text("left")
    (project / "results" / "main" / "note.txt").write_text("new")
    assert faults_after(cases["run"], project) == [
        "source/.counts.tsv.part: an unfinished file is left",
        "results/main/note.txt: not what it is without a kill",
        "source/.counts.tsv.part: not what it is without a kill",
    ]
    (project / "blocks" / "rna.h5ad").write_bytes(b"damaged")
    assert faults_after(cases["run"], project)[0].startswith("check: exit 3")
