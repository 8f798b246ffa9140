"""Faults in project.toml that a question does not touch are told and do not stop it; those that it touches do."""

from __future__ import annotations

from pathlib import Path

import pytest

ELSEWHERE = '\n[analyses.second]\nblocks = ["rna", "lcms"]\nmethod = "ridge"\n\n[check]\naccept = 3\n'


def spoil(project: Path, text: str, instead_of: str = "") -> None:
    """Write lines at the end of the settings, or in the place of the first line that begins so."""
    settings = project / "project.toml"
    before = settings.read_text()
    old = next(line for line in before.splitlines(True) if line.startswith(instead_of)) if instead_of else ""
    settings.write_text(before.replace(old, text, 1) if old else before + text)


@pytest.mark.parametrize("values", ["prepared", "measured"])
def test_a_block_leaves_although_an_analysis_is_at_fault(command, finished, values):
    code, before, _ = command("export", "rna", "--values", values, "--project", finished)
    assert code == 0
    spoil(finished, ELSEWHERE)
    code, out, err = command("export", "rna", "--values", values, "--project", finished)
    assert (code, out) == (0, before)
    assert "set aside, since it does not concern this" in err
    assert "analyses.second.method" in err
    assert command("run", "--project", finished)[0] == 2


def test_a_block_that_must_be_prepared_first_waits_for_the_settings(command, finished):
    spoil(finished, ELSEWHERE)
    (finished / "prepared" / "rna.h5ad").unlink()
    code, _, err = command("export", "rna", "--project", finished)
    assert (code, "analyses.second.method" in err) == (2, True)


def test_a_feature_is_shown_although_another_analysis_is_at_fault(command, finished):
    feature = (finished / "results" / "main" / "edges.tsv").read_text().splitlines()[1].split("\t")[0]
    code, before, _ = command("show", feature, "--project", finished)
    spoil(finished, ELSEWHERE)
    code, out, err = command("show", feature, "--project", finished)
    assert (code, out) == (0, before)
    assert "set aside" in err
    assert "analyses.second.method" in err
    assert command("show", feature, "--analysis", "second", "--project", finished)[0] == 2


@pytest.mark.parametrize(
    ("text", "instead_of", "key"),
    [
        ('method = "ridge"\n', "permutations", "analyses.main.method"),
        ('layer = "transkripts"\nlayr = 1\n', "layer", "blocks.rna"),
        ("[samplez]\n", "[samples]", "samplez"),
        ('group = "grup"\n', "group", "samples.group"),
    ],
)
def test_a_fault_that_the_answer_rests_on_stops_it(command, finished, text, instead_of, key):
    feature = (finished / "results" / "main" / "edges.tsv").read_text().splitlines()[1].split("\t")[0]
    spoil(finished, text, instead_of)
    code, _, err = command("show", feature, "--project", finished)
    assert (code, key in err) == (2, True)
