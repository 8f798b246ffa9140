"""Levels that hardly any sample has: slips are told with the level that was meant, the others are noted."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from checks.studies import checked, sheet_of, small_study

from workbench.checks.rare_levels import alike, rare_levels


def with_levels(cells):
    """Return a study whose first block has one feature of text, and its cells."""
    data = checked(small_study())
    block = next(iter(data.blocks.values()))
    levels = tuple(dict.fromkeys(cell for cell in cells if cell))
    measured = block.measured.copy()
    measured[:, 0] = [levels.index(cell) if cell else np.nan for cell in cells]
    texts = (levels, *[None] * (len(block.features) - 1))
    return replace(data, blocks={block.name: replace(block, measured=measured, levels=texts, values="mixed")})


def test_a_misspelt_level_is_a_warning_with_the_level_that_was_meant():
    (found,) = rare_levels(with_levels(["moderate"] * 12 + ["severe"] * 10 + ["moderat"] * 2))
    assert found.severity == "warning"
    assert "level 'moderat'" in found.what
    assert "(2 samples) is written nearly like 'moderate'" in found.what
    assert "write 'moderate' in the delivered table" in found.todo


def test_a_word_for_unknown_is_told_to_be_left_empty():
    (found,) = rare_levels(with_levels(["g1"] * 12 + ["g2"] * 10 + ["unkown"] * 2))
    assert (found.severity, found.id.endswith("-unkown")) == ("warning", True)
    assert "leave such cells empty (missing)" in found.todo


def test_other_rare_levels_are_one_note_of_the_block():
    (found,) = rare_levels(with_levels(["g1"] * 12 + ["g2"] * 9 + ["g3"] * 2 + ["g4"]))
    assert found.severity == "note"
    assert "'g3' 2, 'g4' 1" in found.what
    assert rare_levels(with_levels(["g1"] * 12 + ["g2"] * 9 + [""] * 3)) == []


def test_levels_of_the_design_are_looked_at_in_the_sample_sheet():
    study = small_study()
    sheet = sheet_of(study)
    sheet["group"] = ["control"] * 12 + ["treated"] * 11 + ["Control"]
    (found,) = rare_levels(checked(study, sheet=sheet))
    assert (found.severity, found.block) == ("warning", "")
    assert found.todo.startswith("write 'control' in samples.tsv")


@pytest.mark.parametrize(
    ("word", "other"),
    [
        ("treated", "untreated"),
        ("male", "female"),
        ("stage II", "stage III"),
        ("grade 1", "grade 2"),
        ("IIA", "IIB"),
        ("increase", "decrease"),
        ("positive", "negative"),
        ("+", "-"),
        ("day1", "day2"),
    ],
)
def test_levels_that_are_meant_to_differ_are_no_slips(word, other):
    assert not alike(word, other)


@pytest.mark.parametrize(
    ("word", "other"),
    [
        ("Watered", "watered"),
        ("well_watered", "well watered"),
        ("contol", "control"),
        ("intermedaite", "intermediate"),
    ],
)
def test_slips_are_known_again(word, other):
    assert alike(word, other)
    assert alike(other, word)
