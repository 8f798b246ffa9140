"""Swapped samples become findings that say who, where, on what evidence, and how to undo it."""

import json
import tomllib

import numpy as np
import pytest
from checks.studies import checked
from matplotlib.figure import Figure
from simulated import Design, metabolites, simulate, transcripts

from workbench.checks.swapped import CHECK, swapped_samples
from workbench.figures.swaps import swap_plot

BLOCKS = (transcripts(features=800), metabolites(features=200, module_size=16, drift=0.0))


def study_of(swaps=(2,), seed=3, blocks=BLOCKS, **changes):
    design = Design(n=48, blocks=blocks, **{"modules": 4, "strength": 1.5, **changes})
    return simulate(design.with_block("metabolites", swaps=swaps), seed)


@pytest.fixture(scope="module")
def across_days():
    """Return a study whose exchanged samples were run on different days, and its finding."""
    study = next(
        study
        for study in (study_of(seed=seed) for seed in range(10))
        if study.samples.loc[list(study.truth.swaps["metabolites"][0]), "run_day"].nunique() == 2
    )
    (finding,) = swapped_samples(checked(study))
    return study, finding


def test_an_exchanged_pair_is_an_error_with_both_names_and_the_block(across_days):
    study, finding = across_days
    names = sorted(study.truth.swaps["metabolites"][0])
    assert (finding.check, finding.severity, finding.block) == ("swapped_samples", "error", "metabolites")
    assert sorted(finding.samples) == names
    assert finding.id == f"swapped_samples-metabolites-{names[0]}-{names[1]}"
    assert "look exchanged in block 'metabolites'" in finding.what


def test_the_line_that_undoes_it_is_a_line_of_the_settings(across_days):
    study, finding = across_days
    line = finding.todo.split("[blocks.metabolites] ")[1].split(", leave")[0]
    (entry,) = tomllib.loads(line)["swap"]
    assert sorted(entry["samples"]) == sorted(study.truth.swaps["metabolites"][0])
    table = study.blocks["metabolites"]
    one, other = entry["samples"]
    mended = table.rename(index={one: other, other: one})
    assert swapped_samples(checked(study, tables={"metabolites": mended})) == []


def test_the_same_study_gives_the_same_finding(across_days):
    study, finding = across_days
    (again,) = swapped_samples(checked(study))
    assert (again.id, again.what, again.todo) == (finding.id, finding.what, finding.todo)


def test_the_figure_draws_every_sample_and_names_the_exchanged_ones(across_days):
    _, finding = across_days
    figure = Figure(figsize=(3.5, 2.8))
    axes = swap_plot(finding.evidence, figure.add_subplot())
    assert axes.collections[0].get_offsets().shape == (48, 2)
    assert {text.get_text() for text in axes.texts} >= set(finding.samples)
    evidence = finding.evidence
    before = np.abs(evidence.score - evidence.expected)[list(evidence.swapped)]
    assert np.abs(evidence.score_after - evidence.expected_after).mean() < before.mean()


def test_a_clean_study_has_no_finding():
    assert swapped_samples(checked(study_of(swaps=()))) == []


def test_a_pair_without_a_design_may_be_in_either_block_and_says_so():
    study = study_of(groups=(), run_days=1, seed=4)
    (finding,) = swapped_samples(checked(study))
    names = sorted(study.truth.swaps["metabolites"][0])
    assert (finding.block, finding.id) == ("", f"swapped_samples-{names[0]}-{names[1]}")
    assert "the data cannot tell in which" in finding.what
    assert "[blocks.transcripts] swap" in finding.todo
    assert "[blocks.metabolites] swap" in finding.todo


def test_a_cycle_of_three_is_undone_by_its_line():
    study = study_of(swaps=(3,), seed=5)
    (finding,) = swapped_samples(checked(study))
    assert len(finding.samples) == 3
    assert set(finding.samples) == set(study.truth.swaps["metabolites"][0])
    entry = json.loads(
        finding.todo.split("[blocks.metabolites] swap = [{ samples = ")[1].split(", reason")[0]
    )
    owner = dict(zip(entry, entry[1:] + entry[:1], strict=True))
    mended = study.blocks["metabolites"].rename(index=owner)
    assert swapped_samples(checked(study, tables={"metabolites": mended})) == []


def test_where_nothing_is_shared_it_is_not_testable():
    study = study_of(swaps=(), modules=0, seed=4)
    (finding,) = swapped_samples(checked(study))
    assert (finding.id, finding.severity) == (f"{CHECK}-not-testable", "note")
    assert "not testable" in finding.what


def test_samples_that_the_settings_leave_out_are_not_looked_at(across_days):
    study, _ = across_days
    names = study.truth.swaps["metabolites"][0]
    out = "exclude = {" + ", ".join(f'{name} = "lost"' for name in names) + "}"
    assert swapped_samples(checked(study, more=out)) == []


def test_one_block_alone_has_nobody_to_be_compared_with():
    assert swapped_samples(checked(study_of(blocks=BLOCKS[1:], swaps=()))) == []
