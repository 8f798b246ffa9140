"""Whatever small table comes, it is prepared whole or refused in words."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from hypothesis.extra.numpy import array_shapes, arrays
from prepare.measured import KINDS, table_of

from workbench.errors import InputError
from workbench.prepare import recipe_for

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
        way_out = "exclude" in str(error) or "check the block's `values`" in str(error)
        assert way_out, error  # noqa: PT017
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
