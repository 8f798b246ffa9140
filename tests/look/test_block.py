"""The look at one block: what was planted is found, and small or broken blocks are told with the reason."""

from __future__ import annotations

import dataclasses

import numpy as np
import pytest
from look_views import bare, planted
from numpy.testing import assert_allclose

from workbench.errors import InputError, NumericsError
from workbench.look import levels_of, look_at_block
from workbench.look.view import sample_columns


def row(look, column: str) -> np.ndarray:
    return look.association.r2[look.association.columns.index(column)]


def test_run_day_and_group_are_found_on_the_components_they_were_planted_on() -> None:
    look = look_at_block(planted(), seed=1)
    assert look.number.number == 3  # two for three days, one for two groups
    assert row(look, "run_day")[:2].min() > 0.9
    assert row(look, "condition")[2] > 0.8
    assert row(look, "age").max() < 0.4


def test_the_figures_add_up() -> None:
    look = look_at_block(planted(), seed=1)
    assert look.shares.sum() == pytest.approx(1.0, rel=1e-12)
    assert look.eigenvalues.sum() == pytest.approx(200.0, rel=1e-10)
    assert_allclose(look.scores.var(axis=0, ddof=1), look.eigenvalues[: look.scores.shape[1]], rtol=1e-9)


def test_an_odd_sample_is_told_first_with_the_component_it_makes() -> None:
    look = look_at_block(planted(odd=7), seed=1)
    assert {flag.sample for flag in look.flags if flag.kind == "alone"} == {7}
    assert any(flag.kind == "t2" and flag.sample == 7 for flag in look.flags)


def test_equal_seeds_give_equal_looks() -> None:
    one, other = (look_at_block(planted(), seed=4) for _ in range(2))
    assert np.array_equal(one.number.parallel.limits, other.number.parallel.limits)
    assert np.array_equal(one.scores, other.scores)


def test_constant_features_are_left_out_and_named() -> None:
    view = planted()
    x = view.prepared.copy()
    x[:, [3, 9]] = 1.5
    look = look_at_block(dataclasses.replace(view, prepared=x), seed=1)
    assert look.constant == ("m0003", "m0009")
    assert np.isnan(look.correlations[[3, 9]]).all()


def test_groups_that_are_no_column_are_associated_as_well() -> None:
    view = planted()
    cells = levels_of(
        "condition x run_day",
        [f"{c} {d}" for c, d in zip(view.columns.condition, view.columns.run_day, strict=True)],
    )
    columns = sample_columns(dataclasses.replace(view, groups=cells))
    assert [column.name for column in columns] == ["condition x run_day", "run_day", "condition", "age"]
    assert columns[3].kind == "number"


def test_a_stated_kind_overrules_the_cells() -> None:
    view = planted()
    view.columns["batch"] = [str(i % 4) for i in range(36)]
    kinds = {c.name: c.kind for c in sample_columns(view)}
    stated = {c.name: c.kind for c in sample_columns(dataclasses.replace(view, kinds={"batch": "number"}))}
    assert (kinds["batch"], stated["batch"]) == ("classes", "number")


@pytest.mark.parametrize(
    ("x", "reason"),
    [
        (np.ones((1, 4)), r"block 'block': 1 sample .* need at least 2"),
        (np.ones((6, 4)), "block 'block': none of the 4 features varies over the 6 samples"),
        (
            np.array([[1.0, np.nan], [2.0, 3.0]]),
            r"block 'block': its prepared table has 1 missing .* row 0, column 1",
        ),
    ],
)
def test_blocks_without_anything_to_see_are_refused(x: np.ndarray, reason: str) -> None:
    with pytest.raises(NumericsError, match=reason):
        look_at_block(bare(x), seed=1)


@pytest.mark.parametrize("n", [2, 3, 4, 5, 6, 7])
@pytest.mark.parametrize("p", [1, 2, 30])
def test_very_small_blocks_are_looked_at(n: int, p: int) -> None:
    x = np.random.default_rng(0).normal(size=(n, p))
    look = look_at_block(bare(x), seed=1)
    assert look.scores.shape[1] == min(n - 1, p)
    assert look.number.number <= (n - 1) // 2


def test_views_of_unequal_shape_are_refused() -> None:
    view = planted()
    with pytest.raises(
        InputError, match=r"block 'metabolites': prepared values of shape \(35, 200\) for 36 samples"
    ):
        dataclasses.replace(view, prepared=view.prepared[:35])
    with pytest.raises(InputError, match="has no column 'plate'; it has 'run_day', 'condition', 'age'"):
        dataclasses.replace(view, shape_by="plate")
