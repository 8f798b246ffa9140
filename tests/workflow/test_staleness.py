"""What is stale is known from what matters: content and settings, not clocks and comments."""

import shutil

import pytest

from workbench import Project

LOOKS = ["check:data", "look:rna", "look:lcms", "look:between-blocks"]
ENGINE = ["integrate:main", "network:main", "pathways:main"]
STAGES = ["read:rna", "read:lcms", "prepare:rna", "prepare:lcms", *LOOKS, *ENGINE]


def edit(folder, old, new):
    path = folder / "project.toml"
    text = path.read_text()
    assert old in text
    path.write_text(text.replace(old, new, 1))


CHANGES = [
    ('title = "A small study"', 'title = "Another title"  # and a comment', []),
    ('blocks = "all"', 'blocks = "all"\nseed = 7', ENGINE),
    ("remove_private = false", "remove_private = false\nfdr = 0.1", ENGINE[1:]),
    ("[samples]\nid", '[samples]\nexclude = { S03 = "haemolysed" }\nid', STAGES[2:]),
    ('adjust = ["run_day"]', "adjust = []", [*LOOKS, *ENGINE]),
]


@pytest.mark.parametrize(("old", "new", "expected"), CHANGES, ids=[new for _, new, _ in CHANGES])
def test_a_change_reruns_what_it_matters_to(finished, old, new, expected):
    if "S03" in new:
        first = Project.open(finished).state().sheet.index[2]
        new = new.replace("S03", f'"{first}"')
    edit(finished, old, new)
    assert Project.open(finished).run().done == expected


def results(folder):
    return {
        str(path.relative_to(folder)): path.read_bytes()
        for place in ("blocks", "prepared", "results")
        for path in sorted((folder / place).rglob("*"))
        if path.is_file()
    }


def test_deleting_all_that_is_derived_and_running_again_gives_the_same_bytes(finished):
    before = results(finished)
    for place in ("blocks", "prepared", "results"):
        shutil.rmtree(finished / place)
    project = Project.open(finished)
    assert project.run().done == STAGES
    assert results(finished) == before
    assert project.run().done == []


def test_a_copy_without_hidden_files_runs_to_the_same_edges(finished, tmp_path):
    copy = shutil.copytree(
        finished, tmp_path / "copy", ignore=shutil.ignore_patterns(".workbench", "results")
    )
    Project.open(copy).run()
    edges = ("results", "main", "edges.tsv")
    assert copy.joinpath(*edges).read_bytes() == finished.joinpath(*edges).read_bytes()


def test_a_source_that_is_not_what_was_delivered_is_damage(finished):
    from workbench.errors import DamageError

    path = finished / "source" / "counts.tsv"
    path.write_text(path.read_text().replace("\t1", "\t2", 1))
    with pytest.raises(DamageError, match=r"source/counts\.tsv"):
        Project.open(finished).run()


def test_a_missing_result_is_made_again(finished):
    (finished / "results" / "main" / "edges.tsv").unlink()
    assert Project.open(finished).run().done == ["network:main"]


def test_one_journal_line_a_command(made):
    from workbench.store import read_journal

    before = len(read_journal(made))
    project = Project.open(made)
    project.run()
    project.run()
    lines = read_journal(made)
    assert len(lines) == before + 1
    assert lines[-1]["command"] == "run"
    assert lines[-1]["stages"] == STAGES[2:]
