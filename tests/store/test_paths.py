"""Where things stand in a project, and how it is found."""

import pytest

from workbench.errors import InputError
from workbench.store.paths import ProjectPaths, find_project


def test_the_places_are_those_of_the_layout(tmp_path):
    paths = ProjectPaths(tmp_path)
    names = ("settings", "samples", "source", "blocks", "prepared", "results", "journal", "hidden")
    places = [paths.relative(getattr(paths, name)) for name in names]
    expected = ["project.toml", "samples.tsv", "source", "blocks", "prepared", "results", "journal.jsonl"]
    assert places == [*expected, ".workbench"]
    assert paths.relative(paths.block("a")) == "blocks/a.h5ad"
    assert paths.relative(paths.prepared_block("a")) == "prepared/a.h5ad"
    assert paths.relative(paths.analysis("main")) == "results/main"
    assert paths.relative(paths.look("a")) == "results/look/a"


def test_the_nearest_project_upwards_is_found(tmp_path):
    inner = tmp_path / "outer/deep/inner"
    (inner / "results/main").mkdir(parents=True)
    (tmp_path / "outer/project.toml").touch()
    assert find_project(inner).root == (tmp_path / "outer").resolve()
    (inner / "project.toml").touch()
    assert find_project(inner / "results/main").root == inner.resolve()
    assert find_project(inner / "project.toml").root == inner.resolve()


def test_no_project_is_told_with_the_ways_out(tmp_path):
    (tmp_path / "project.toml").mkdir()
    with pytest.raises(
        InputError, match=r"no project.toml in .* or a folder above it; .*--project DIR.*init DIR"
    ):
        find_project(tmp_path)
