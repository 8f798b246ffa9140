"""The tables hold the look's numbers, one row per component, sample or feature."""

from __future__ import annotations

import dataclasses

import numpy as np
from look_views import bare, planted
from numpy.testing import assert_allclose

from workbench.look import look_at_block, look_tables


def test_every_table_has_its_rows() -> None:
    look = look_at_block(planted(), seed=1)
    tables = look_tables(look)
    rows = {name: len(table) for name, table in tables.items()}
    assert rows == {
        "explained": 35, "numbers": 4, "scores": 36, "loadings": 200, "association": 30, "samples": 36,
        "distributions": 36, "gaps": 200,
    }  # fmt: skip


def test_the_tables_hold_the_numbers_of_the_look() -> None:
    look = look_at_block(planted(odd=7), seed=1)
    tables = look_tables(look)
    assert_allclose(tables["explained"]["share"].sum(), 1.0)
    assert tables["explained"]["carries_signal"].sum() == look.number.number
    assert_allclose(tables["scores"]["component_2"], look.scores[:, 1])
    assert_allclose(tables["loadings"]["correlation_1"], look.correlations[:, 0])
    assert "alone" in tables["samples"].set_index("sample").loc["S008", "check"]
    one = tables["association"].query("column == 'run_day' and component == 1").iloc[0]
    assert one["r2"] == look.association.r2[0, 0]


def test_small_blocks_have_tables_too() -> None:
    for shape in ((2, 1), (2, 30), (3, 2), (7, 3)):
        tables = look_tables(look_at_block(bare(np.random.default_rng(0).normal(size=shape)), seed=1))
        assert len(tables["explained"]) == min(shape[0] - 1, shape[1])
        assert len(tables["association"]) == 0


def test_measured_features_may_be_others_than_the_prepared_ones() -> None:
    view = planted()
    names = (*view.features, "dropped")
    wider = np.column_stack([view.measured, np.full(36, np.nan)])
    tables = look_tables(
        look_at_block(dataclasses.replace(view, measured=wider, measured_features=names), seed=1)
    )
    assert tables["gaps"].set_index("feature").loc["dropped", "missing_share"] == 1.0
