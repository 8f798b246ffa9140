"""The equation that ties a column of the design to others is the one that was planted."""

from __future__ import annotations

import numpy as np
import pytest

from workbench.engine.alias_equations import alias_equations
from workbench.errors import NumericsError

DAY = np.arange(12) % 3
DAYS = np.column_stack([DAY == 1, DAY == 2]).astype(float)


def test_a_batch_that_is_the_group_and_its_mirror_image() -> None:
    batch = (np.arange(12) >= 6).astype(float)
    names = ["batch=2", "group=drought"]
    assert alias_equations(np.column_stack([batch, batch]), names) == ("'group=drought' = 'batch=2'",)
    assert alias_equations(np.column_stack([batch, 1 - batch]), names) == ("'group=drought' = 1 - 'batch=2'",)


def test_a_group_told_by_two_days_together() -> None:
    first = (DAY == 0).astype(float)
    [equation] = alias_equations(np.column_stack([DAYS, first]), ["day=2", "day=3", "group=early"])
    assert equation == "'group=early' = 1 - 'day=2' - 'day=3'"


def test_numbers_have_their_factors_and_a_constant_is_a_number() -> None:
    age = np.random.default_rng(1).normal(50, 9, 12)
    columns = np.column_stack([age, 0.5 * age - 3.0, np.full(12, 7.0), age / 365.25])
    assert alias_equations(columns, ["age", "dose", "site", "years"]) == (
        "'dose' = -3 + 1/2 'age'",
        "'site' = 7",
        "'years' = 0.002738 'age'",
    )


def test_columns_that_tell_something_have_no_equation() -> None:
    assert alias_equations(DAYS, ["day=2", "day=3"]) == ()
    with pytest.raises(NumericsError, match="1 names for columns of shape"):
        alias_equations(DAYS, ["day=2"])
