"""Every step says what it does, why, after which paper, with which numbers, and how to change it."""

from __future__ import annotations

import pytest
from prepare.measured import BUILDERS, KINDS, counts, with_runs

from workbench.prepare import explain_lines, recipe_for
from workbench.settings import parse_settings, prepare_keys, prepare_settings

LINE = '[blocks.b]\nfile = "source/b.tsv"\nlayer = "{layer}"\nvalues = "{values}"\n[blocks.b.prepare]\n{line}'


@pytest.mark.parametrize("kind", KINDS)
def test_every_step_is_explained_before_and_after(kind: str) -> None:
    recipe, table = recipe_for("a layer", kind), BUILDERS[kind]()
    before = recipe.explain(with_runs=False)
    account = recipe.fit_transform(table, smallest_group=5, seed=1).account
    assert [(e.step, e.rule, e.why, e.change) for e in before] == [
        (a.step, a.rule, a.why, a.change) for a in account
    ]
    assert all(step.rule and step.why for step in before)


@pytest.mark.parametrize(("layer", "kind"), [("x", kind) for kind in KINDS] + [("microbes", "counts")])
def test_every_key_changes_a_step_and_its_line_is_valid(layer: str, kind: str) -> None:
    settings = {}
    if kind in ("continuous", "mixed"):
        settings = {"transform": "rank"}
    recipe = recipe_for(layer, kind, prepare_settings(layer, kind, settings))
    changes = "; ".join(step.change for step in recipe.explain())
    for key in prepare_keys(layer, kind):
        if key.key == "check_values":
            continue
        assert f"{key.key} = " in changes
    for step in recipe.explain():
        for line in filter(None, step.change.split("); ")):
            parse_settings(LINE.format(layer=layer, values=kind, line=line.split(" (allowed")[0]))


def test_lines_are_plain_and_name_the_block() -> None:
    result = recipe_for("transcripts", "counts").fit_transform(counts(), smallest_group=5, seed=1)
    lines = explain_lines(result.account, "rna")
    text = "\n".join(lines)
    assert lines[0] == "1. unusable features"
    assert lines[1].startswith("   what     drops features with no value in any sample")
    assert "   numbers  before 150; after 148" in lines
    assert "   paper    Anders & Huber 2010, Genome Biology 11:R106" in lines
    assert (
        'under [blocks.rna.prepare]: normalisation = "median_of_ratios" (allowed: "median_of_ratios", '
        in text
    )
    assert "   dropped  'F0' (constant: 0 wherever it has a value); 'F1' (constant: 25" in text


def test_steps_that_need_a_run_sheet_are_told_only_with_one() -> None:
    recipe = recipe_for("metabolites", "intensities")
    extra = {step.step for step in recipe.explain()} - {step.step for step in recipe.explain(with_runs=False)}
    assert extra == {"blanks", "drift", "pool scatter", "runs"}
    plain = BUILDERS["intensities"]()
    table = with_runs(plain, pools=3, controls=plain.values[:3])
    account = recipe.fit_transform(table, smallest_group=5, seed=1).account
    assert extra <= {step.step for step in account}


def test_what_is_switched_off_stands_in_the_account() -> None:
    settings = prepare_settings("x", "intensities", {"normalisation": "none", "drift": "none"})
    recipe = recipe_for("x", "intensities", settings)
    rules = {step.step: step.rule for step in recipe.explain()}
    assert rules["quotient normalisation"] == "switched off by `normalisation` in the settings"
    assert rules["drift"] == "switched off by `drift` in the settings"
