"""The commands ``pathways`` and ``compare`` as a user types them."""

from __future__ import annotations

from pathlib import Path

import pytest


def sets_of(folder: Path, project: Path) -> Path:
    """Return a table of sets that holds the first features of the short list."""
    from workbench.store import read_table

    edges = read_table(project / "results" / "main" / "edges.tsv").head(8)
    path = folder / "sets.gmt"
    path.write_text(
        "P1\tfirst\t" + "\t".join([*edges["source"].astype(str), *edges["target"].astype(str)]) + "\n"
    )
    return path


def test_pathways_prints_the_head_of_the_list_and_where_the_files_are(command, finished, tmp_path):
    sets = sets_of(tmp_path, finished)
    code, out, err = command("pathways", "main", "--sets", sets, "--project", finished)
    assert (code, "Traceback" in err) == (0, False)
    assert out.splitlines()[0].startswith("main: ")
    assert "  1. " in out
    assert " with " in out or " when " in out
    for file in ("followup.tsv", "pathways.tsv", "figures"):
        assert str(finished / "results" / "main" / file) in out
    assert "sets.gmt: 1 set of" in err
    assert 'sets = "source/sets.gmt"' in (finished / "project.toml").read_text()
    code, out, err = command("pathways", "main", "--project", finished)
    assert (code, "nothing to do" in out) == (0, True)
    assert "next: " in err


def test_pathways_refuses_what_it_cannot_use(command, finished, tmp_path):
    code, _, err = command("pathways", "mian", "--sets", sets_of(tmp_path, finished), "--project", finished)
    assert (code, "no analysis 'mian'" in err) == (2, True)
    code, _, err = command("pathways", "--links", tmp_path / "none.tsv", "--project", finished)
    assert (code, "no such file" in err) == (2, True)


def test_compare_prints_what_became_of_the_edges(command, finished):
    code, out, err = command("compare", "main", "main", "--project", finished)
    assert code == 0
    assert "matched by feature" in out
    assert "no setting differs" in out
    assert f"tables and figure: {finished / 'results' / 'compare'}" in err
    assert command("check", "--files", "--project", finished)[0] == 0


@pytest.mark.parametrize("words", [("main", "other"), ("main", "/none/at/all")])
def test_compare_names_what_it_does_not_know(command, finished, words):
    code, _, err = command("compare", *words, "--project", finished)
    assert (code, words[1] in err, "(main)" in err) == (2, True, True)


def test_compare_works_outside_of_a_project(command, finished, tmp_path, monkeypatch):
    outside = tmp_path / "elsewhere"
    outside.mkdir()
    monkeypatch.chdir(outside)
    code, out, _ = command("compare", finished, f"{finished}:main", "--quiet")
    assert (code, "0 gained, 0 lost" in out) == (0, True)
