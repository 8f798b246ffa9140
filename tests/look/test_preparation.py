"""What preparation did to samples, features and runs, as tables and as data of figures."""

from __future__ import annotations

import dataclasses

import numpy as np
import pandas as pd
import pytest
from look_views import planted
from numpy.testing import assert_allclose
from prepare.measured import counts, intensities, log, proportions
from prepare.sequences import sequence

from workbench.errors import InputError
from workbench.look import (
    BlockView,
    PreparationLook,
    look_at_preparation,
    preparation_reading,
    preparation_tables,
)
from workbench.prepare import MeasuredTable, StepAccount, drift_effect, recipe_for


def looked(values: str, table: MeasuredTable, layer: str = "x") -> PreparationLook:
    """Return the look at a recipe's work on a table, without groups."""
    recipe = recipe_for(layer, values)
    prepared = recipe.fit_transform(table, smallest_group=5, seed=1)
    effect = drift_effect(recipe, table, smallest_group=5, seed=1, among=set(prepared.features))
    view = BlockView(
        name="block",
        layer=layer,
        values=values,
        samples=prepared.samples,
        features=prepared.features,
        prepared=prepared.values,
        columns=pd.DataFrame(index=pd.Index(prepared.samples)),
        imputed=prepared.imputed,
        measured=np.where(table.values == 0, np.nan, table.values)
        if values == "intensities"
        else table.values,
        measured_features=table.features,
    )
    return look_at_preparation(view, prepared.scale, prepared.account, effect)


@pytest.mark.parametrize(
    ("values", "table"), [("counts", counts()), ("intensities", intensities()), ("log", log())]
)
def test_levels_are_level_afterwards_and_follow_the_scale_before(values: str, table: MeasuredTable) -> None:
    look = looked(values, table)
    assert np.ptp(look.after[:, 2]) < 0.35 * np.ptp(look.before[:, 2])
    assert np.corrcoef(look.before[:, 2], look.scale)[0, 1] > 0.95
    assert look.scaled


def test_deviations_are_exact_on_a_small_table() -> None:
    logs = np.array([[1, 5.0], [2, 6], [3, 7], [4, np.nan]])
    view = dataclasses.replace(planted(n=4, p=2), measured=2.0**logs, imputed=np.isnan(logs))
    look = look_at_preparation(view, np.zeros(4), ())
    assert_allclose(look.before[:, 2], [-1.25, -0.25, 0.75, 1.5])
    assert not look.scaled


def test_parts_of_a_whole_have_levels_and_no_scale() -> None:
    look = looked("proportions", proportions())
    assert look.before is not None
    assert not look.scaled


def test_every_delivered_feature_is_in_the_table_with_its_reason_or_its_share_filled_in() -> None:
    made = sequence(p=120)
    look = looked("intensities", made.table)
    table = preparation_tables(look)["prepared_features"].set_index("feature")
    assert set(table.index) == set(made.table.features)
    gone = table["dropped_by"] != ""
    assert table.loc[gone, "reason"].str.len().gt(10).all()
    assert list(table.index[~gone]) == list(look.features)
    assert (table.loc[~gone, "drift"] == "curve").mean() > 0.8
    assert table["pool_scatter_after"].median() < 0.6 * table["pool_scatter_before"].median()


def test_the_drawn_features_are_those_that_moved_most_and_add_up() -> None:
    look = looked("intensities", sequence(p=120).table)
    effect = look.drift
    allowed = [effect.features.index(name) for name in look.features]
    assert effect.moved[effect.shown[0]] == effect.moved[allowed].max()
    sample = np.array(effect.runs.role) == "sample"
    left = effect.before - effect.after - effect.course
    assert_allclose(left[sample] - left[sample].mean(axis=0), 0.0, atol=1e-9)
    table = preparation_tables(look)["drift_runs"]
    assert len(table) == len(effect.runs.runs) * len(effect.shown)
    first = table[table["feature"] == effect.features[effect.shown[0]]]
    assert (np.diff(first["order"]) > 0).all()


def test_batches_that_count_from_one_again_are_drawn_one_after_the_other() -> None:
    made = sequence(batches=2, drift=0.0, steps=1.0)
    runs = made.table.runs
    again = np.concatenate([np.arange(sum(name == batch for name in runs.batch)) for batch in ("b0", "b1")])
    table = dataclasses.replace(made.table, runs=dataclasses.replace(runs, order=again.astype(float)))
    effect = looked("intensities", table).drift
    assert list(effect.runs.batch) == sorted(effect.runs.batch)


def test_without_pools_or_without_measured_values() -> None:
    assert looked("intensities", intensities()).drift is None
    view = dataclasses.replace(planted(), measured=None)
    with pytest.raises(InputError, match="cannot be seen without the measured values"):
        look_at_preparation(view, np.zeros(36), ())


def test_the_reading_tells_the_warnings_and_counts_those_that_are_many() -> None:
    look = look_at_preparation(
        planted(), np.zeros(36), (StepAccount("gaps", "filled", cautions=("one", "two")),)
    )
    assert preparation_reading(look) == ("Preparation warns (gaps): one.", "Preparation warns (gaps): two.")
    many = dataclasses.replace(look, account=look.account * 3)
    assert preparation_reading(many)[-1] == "4 more warnings of the preparation: preparation.md."
    assert len(preparation_reading(many)) == 3
    assert preparation_reading(dataclasses.replace(look, account=())) == ()
