"""A refusal names what was seen, and the setting of the block that mends it, word for word."""

from __future__ import annotations

import numpy as np
import pytest
from prepare.measured import counts, intensities, log, table_of

from workbench.prepare import MeasuredTable, PrepareRefusal, recipe_for
from workbench.settings import prepare_settings


def refusal_of(values: str, table: MeasuredTable, **choices: object) -> PrepareRefusal | None:
    return recipe_for("x", values, prepare_settings("x", values, choices)).refusal(table)


def test_logarithms_declared_as_intensities_carry_block_file_and_setting() -> None:
    told = refusal_of("intensities", log()).at("lipids", "source/lipids.csv")
    assert isinstance(told, PrepareRefusal)
    assert str(told).startswith("block 'lipids' (source/lipids.csv): intensities from ")
    assert str(told).endswith(
        'set values = "log" in [blocks.lipids] of project.toml, or set check_values = false in '
        "[blocks.lipids.prepare] of project.toml if the values are what they are said to be"
    )
    assert (told.key, told.fitting, told.trusted_by) == ("values", ("log",), "prepare.check_values")
    assert "lipids" not in told.reason


def test_the_key_that_trusts_a_table_is_honoured_and_its_values_fit() -> None:
    assert refusal_of("intensities", log(), check_values=False) is None
    assert refusal_of("log", log()) is None
    assert refusal_of("log", intensities()).fitting == ("intensities", "counts")
    assert refusal_of("intensities", intensities()) is None


def test_an_empty_sample_is_excluded_by_its_name_as_toml_writes_it() -> None:
    values = counts().values.copy()
    values[0] = 0
    told = refusal_of("counts", MeasuredTable(values, ("a b", *counts().samples[1:]), counts().features))
    assert told.key == "exclude"
    assert 'set exclude = { "a b" = "the reason" } in [blocks.NAME]' in str(told)


@pytest.mark.parametrize("kind", ["counts", "intensities", "proportions", "beta"])
def test_negative_numbers_are_told_with_the_values_that_may_be_negative(kind: str) -> None:
    values = np.full((4, 30), -2.5)
    told = refusal_of(kind, table_of(values))
    assert "log" in told.fitting
    assert "120" in told.reason


def test_fit_refuses_for_the_same_reason() -> None:
    recipe = recipe_for("x", "intensities")
    with pytest.raises(PrepareRefusal, match="look like logarithms already") as caught:
        recipe.fit(log(), smallest_group=7, seed=1)
    assert caught.value.reason == recipe.refusal(log()).reason
