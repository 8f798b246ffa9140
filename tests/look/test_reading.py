"""The reading in words: ten lines at most, each of them true."""

from __future__ import annotations

import dataclasses

import numpy as np
import pandas as pd
import pytest
from look_views import bare, planted

from workbench.look import block_reading, look_at_block


def line(lines: tuple[str, ...], start: str) -> str:
    return next(text for text in lines if text.startswith(start))


def test_the_main_source_is_told_with_what_it_goes_with() -> None:
    lines = block_reading(look_at_block(planted(), seed=1))
    assert len(lines) <= 10
    main = line(lines, "Main source of variation: component 1")
    assert "goes with run_day (R2 1.00, q " in main
    assert "component 3" in line(lines, "Then:")
    assert "goes with condition" in line(lines, "Then:")


def test_group_and_adjusted_columns_are_placed() -> None:
    where = line(block_reading(look_at_block(planted(), seed=1)), "Where the design shows")
    assert "condition most on component 3" in where
    assert "run_day (adjusted for) most on component" in where


def test_the_number_comes_with_its_rule_and_others_with_their_reasons() -> None:
    lines = block_reading(look_at_block(planted(), seed=1))
    assert "Rule: a component counts, and all before it" in line(lines, "3 components carry signal")
    others = line(lines, "Other suggestions: elbow 3")
    assert "parallel analysis 3; cross-validation 3" in others


def test_noise_is_called_noise() -> None:
    lines = block_reading(look_at_block(bare(np.random.default_rng(0).normal(size=(30, 300))), seed=1))
    assert line(lines, "No component carries signal. Rule:")
    main = line(lines, "Main source")
    assert "goes with no column of the sample sheet (none could be tested)" in main
    assert "does not stand out of noise" in main


def test_what_the_sheet_does_not_record_is_told_as_that() -> None:
    view = planted()
    silent = dataclasses.replace(view, columns=view.columns[["age"]], groups=None, adjust=(), shape_by="")
    lines = block_reading(look_at_block(silent, seed=1))
    assert "goes with no column of the sample sheet (nearest: age" in line(lines, "Main source")
    assert "go with nothing that the sample sheet records" in line(lines, "Then:")


def test_a_tangled_design_is_told_by_naming_both_columns() -> None:
    view = planted()
    sheet = view.columns.assign(plate=view.columns.run_day.map({"day1": "p", "day2": "q", "day3": "r"}))
    main = line(block_reading(look_at_block(dataclasses.replace(view, columns=sheet), seed=1)), "Main source")
    assert "run_day (R2" in main
    assert "plate (R2" in main


def test_samples_to_check_come_with_reasons_and_with_what_chance_gives() -> None:
    samples = line(block_reading(look_at_block(planted(odd=7), seed=1)), "Samples to check: S008 (")
    assert "alone" in samples
    assert "let about 0.7 of 36 good samples pass" in samples


def test_features_pull_together_and_against_with_their_correlations() -> None:
    rng = np.random.default_rng(3)
    factor = rng.normal(size=(40, 1))
    x = 0.4 * rng.normal(size=(40, 12))
    x[:, :5] += factor
    x[:, 5:10] -= factor
    lines = block_reading(look_at_block(bare(x), seed=1))
    text = line(lines, "Along component 1")
    assert "pull together" in text
    assert "the two ends pull against each other (median correlation -0.9" in text


def test_gaps_are_placed() -> None:
    gaps = block_reading(look_at_block(planted(), seed=1))[-1]
    assert gaps.startswith("5.0 % of the measured values are missing")
    none = block_reading(look_at_block(dataclasses.replace(planted(), measured=np.ones((36, 200))), seed=1))[
        -1
    ]
    assert none == "No measured value is missing."


@pytest.mark.parametrize("n", [2, 4, 6])
def test_few_samples_are_told_that_they_cannot_tell(n: int) -> None:
    lines = block_reading(look_at_block(bare(np.random.default_rng(n).normal(size=(n, 40))), seed=1))
    assert f"How many components carry signal cannot be told from {n} samples and 40 features" in "\n".join(
        lines
    )
    assert len(lines) <= 10


def test_long_and_odd_names_stay_on_one_line() -> None:
    view = planted()
    names = ("N" * 300, "a\nb\tc", "<b>$x^2_i$</b>", *view.features[3:])
    sheet = view.columns.rename(columns={"run_day": "day\n" + "x" * 300})
    changed = dataclasses.replace(view, features=names, columns=sheet, adjust=(), shape_by="", name="M" * 100)
    lines = block_reading(look_at_block(changed, seed=1))
    assert len(lines) <= 10
    assert all("\n" not in text and "xxxxxxxxxxxxxxxxxxxxxxxxxxxxx" not in text for text in lines)
    assert max(map(len, lines)) < 700


def test_numbers_of_a_sheet_that_is_all_missing() -> None:
    view = planted()
    sheet = view.columns.assign(empty=pd.Series([""] * 36, index=view.columns.index))
    look = look_at_block(dataclasses.replace(view, columns=sheet), seed=1)
    assert look.association.untestable[-1] == "only 0 samples have a value"
    assert len(block_reading(look)) <= 10
