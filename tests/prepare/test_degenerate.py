"""Whatever small table comes, it is prepared whole or refused in words."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from hypothesis.extra.numpy import array_shapes, arrays
from prepare.measured import KINDS, table_of, with_runs

from workbench.errors import InputError
from workbench.prepare import MeasuredTable, Recipe, recipe_for
from workbench.settings import prepare_settings

CELLS = st.sampled_from([np.nan, np.nan, 0.0, 0.0, 1.0, 2.0, 12.0, 40.0, 5000.0, 1e-300, 1e100])
TABLES = arrays(float, array_shapes(min_dims=2, max_dims=2, min_side=2, max_side=12), elements=CELLS)


@pytest.mark.parametrize("kind", KINDS)
@settings(max_examples=60, deadline=None)
@given(TABLES, st.integers(0, 5), st.data())
def test_small_tables_are_prepared_whole_or_refused_in_words(
    kind: str, values: np.ndarray, seed: int, data
) -> None:
    size = data.draw(st.one_of(st.none(), st.integers(1, len(values))))
    table = table_of(values)
    try:
        fitted = recipe_for("a layer", kind).fit(table, smallest_group=size, seed=seed)
    except InputError as error:
        way_out = "of project.toml" in str(error)
        assert way_out, error  # noqa: PT017
        return
    assert np.isfinite(fitted.prepared.values).all()
    assert np.isfinite(fitted.transform(table.take([0])).values).all()


CHOICES = [
    ("counts", {"normalisation": "upper_quartile"}),
    ("counts", {"normalisation": "trimmed_mean"}),
    ("intensities", {"zeros": "amounts"}),
    ("log", {"check_values": False, "centring": "none"}),
    ("proportions", {"log_ratio": "none", "prevalence": 0.0}),
    ("continuous", {"transform": "rank"}),
    ("continuous", {"transform": "log", "transform_features": "skewed"}),
]


def test_a_value_over_a_tiny_concentration_is_no_overflow() -> None:
    values = np.full((8, 10), 1e-300)
    values[[0, 0, 5, 6, 7, 7], [0, 1, 7, 9, 2, 5]] = 0.0
    values[[1, 3, 7], [3, 4, 6]] = 1.0
    values[5, 8] = 1e100
    recipe = recipe_for("x", "intensities", prepare_settings("x", "intensities", {"zeros": "amounts"}))
    outcome_is_whole_or_told(recipe, table_of(values))


@pytest.mark.parametrize(("kind", "choice"), CHOICES, ids=[f"{kind}-{choice}" for kind, choice in CHOICES])
@settings(max_examples=30, deadline=None)
@given(TABLES)
def test_small_tables_under_other_choices_too(
    kind: str, choice: dict[str, object], values: np.ndarray
) -> None:
    recipe = recipe_for("x", kind, prepare_settings("x", kind, choice))
    outcome_is_whole_or_told(recipe, table_of(values))


@pytest.mark.parametrize("kind", ["intensities", "log"])
@settings(max_examples=30, deadline=None)
@given(TABLES, st.integers(0, 9), st.integers(0, 2), st.data())
def test_small_tables_of_runs_too(kind: str, values: np.ndarray, pools: int, blanks: int, data) -> None:
    shape = (pools + blanks, values.shape[1])
    controls = data.draw(arrays(float, shape, elements=CELLS))
    table = with_runs(table_of(values), pools=pools, blanks=blanks, controls=controls)
    recipe = recipe_for("x", kind, prepare_settings("x", kind, {"check_values": False, "fewest_pools": 5}))
    outcome_is_whole_or_told(recipe, table)


def outcome_is_whole_or_told(recipe: Recipe, table: MeasuredTable) -> None:
    try:
        fitted = recipe.fit(table, smallest_group=None, seed=1)
    except InputError as error:
        assert "of project.toml" in str(error), error  # noqa: PT017
        return
    assert np.isfinite(fitted.prepared.values).all()
    assert np.isfinite(fitted.transform(table.take([0])).values).all()


@given(st.lists(st.sampled_from(["x", "y", "z", None]), min_size=4, max_size=12))
def test_small_text_columns_are_prepared_whole_or_refused_in_words(cells: list[str | None]) -> None:
    codes = np.array([np.nan if cell is None else "xyz".index(cell) for cell in cells])
    table = table_of(np.column_stack([codes, np.arange(len(cells))]), (("x", "y", "z"), None))
    result = recipe_for("clinical", "mixed").fit_transform(table, smallest_group=None, seed=1)
    assert np.isfinite(result.values).all()
    assert ((result.values[:, :-1] >= 0) & (result.values[:, :-1] <= 1)).all()
    assert set(result.origins) | {name.split("=")[0] for name in result.dropped} == {"F0", "F1"}
