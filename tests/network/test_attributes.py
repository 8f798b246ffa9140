"""Attributes get one plain type each, and lose nothing in it."""

from __future__ import annotations

import datetime

import numpy as np
import pandas as pd
import pytest
from hypothesis import given
from hypothesis import strategies as st
from network.networks import cells

from workbench.network.attributes import ATTRIBUTES, kind_of, meaning_of, plain_value, uniform


@pytest.mark.parametrize("missing", [None, np.nan, np.float32("nan"), pd.NA, pd.NaT, "", np.str_("")])
def test_missing_in_any_form_is_none(missing: object) -> None:
    assert plain_value(missing) is None


@pytest.mark.parametrize(
    ("value", "plain"),
    [
        (np.bool_(True), True),
        (np.int32(7), 7),
        (np.float32(0.5), 0.5),
        (np.str_("a"), "a"),
        (pd.Timestamp("2020-01-02"), "2020-01-02T00:00:00"),
        (datetime.date(2020, 1, 2), "2020-01-02"),
        (["K1", "K2"], "['K1', 'K2']"),
    ],
)
def test_values_become_plain(value: object, plain: object) -> None:
    found = plain_value(value)
    assert found == plain
    assert type(found) is type(plain)


@pytest.mark.parametrize(
    ("values", "kind"),
    [
        ([True, False], "boolean"),
        ([True, None], "string"),
        ([True, 1], "string"),
        ([1, None], "int"),
        ([2**31 - 1, -(2**31) + 1], "int"),
        ([2**31], "long"),
        ([2**53], "long"),
        ([2**53 + 1], "string"),
        ([0.5, 2**53 + 1], "string"),
        ([1, 0.5], "double"),
        ([float("inf")], "double"),
        ([1, "1"], "string"),
        ([], "string"),
        ([None], "string"),
    ],
)
def test_kind_is_the_narrowest_that_loses_nothing(values: list, kind: str) -> None:
    assert kind_of("node", "an identifier", values) == kind


def test_known_columns_keep_their_kind_whatever_the_table_reader_made_of_them() -> None:
    assert uniform("edge", "imputed_share", [0, 0]) == [0.0, 0.0]
    assert [type(value) for value in uniform("edge", "imputed_share", [0, 1])] == [float, float]
    assert [type(value) for value in uniform("edge", "n", [24.0, np.nan, 23.0])] == [int, type(None), int]
    assert kind_of("edge", "n", [24.5]) == "double"
    assert kind_of("edge", "n", [float("inf")]) == "double"
    assert kind_of("edge", "r", ["high"]) == "string"
    assert uniform("node", "label", [7, True]) == ["7", "true"]


@given(st.lists(cells, max_size=8))
def test_uniform_gives_one_type_and_is_at_rest(values: list) -> None:
    found = uniform("node", "anything", values)
    assert len({type(value) for value in found if value is not None}) <= 1
    assert [value is None for value in found] == [plain_value(value) is None for value in values]
    assert uniform("node", "anything", found) == found


def test_every_known_attribute_says_what_it_means() -> None:
    for domain, known in ATTRIBUTES.items():
        assert all(len(meaning_of(domain, name)) > 10 for name in known)
    assert (
        meaning_of("node", "pair2_other") == "correlation with the other side's variate of canonical pair 2"
    )
    assert meaning_of("edge", "pair2_other") == "column 'pair2_other' of the edges table"
