"""Every recipe learns from its training samples alone and prepares others one by one."""

from __future__ import annotations

import json
import pickle
from dataclasses import asdict, replace

import numpy as np
import pytest
from numpy.testing import assert_allclose, assert_array_equal
from prepare.measured import BUILDERS, KINDS, table_of

from workbench.errors import InputError
from workbench.prepare import MeasuredTable, PreparedTable, recipe_for
from workbench.prepare.tables import StepTable
from workbench.settings import prepare_settings

every_kind = pytest.mark.parametrize("kind", KINDS)
TRAINING, HELD_OUT = range(10), range(10, 14)


def prepared(kind: str, table: MeasuredTable, **how: int | None) -> PreparedTable:
    return recipe_for("a layer", kind).fit_transform(table, **{"smallest_group": 5, "seed": 1, **how})


def permuted(table: MeasuredTable, rows: np.ndarray, columns: np.ndarray) -> MeasuredTable:
    return MeasuredTable(
        table.values[np.ix_(rows, columns)],
        tuple(table.samples[row] for row in rows),
        tuple(table.features[column] for column in columns),
        tuple(table.feature_levels[column] for column in columns),
    )


@every_kind
def test_prepared_values_are_whole_and_every_filled_cell_is_marked(kind: str) -> None:
    table = BUILDERS[kind]()
    result = prepared(kind, table)
    assert np.isfinite(result.values).all()
    assert result.values.shape == result.imputed.shape == (len(result.samples), len(result.features))
    columns = [table.features.index(origin) for origin in result.origins]
    measured = table.values[:, columns]
    missing = np.isnan(measured) | ((measured == 0) & (kind == "intensities"))
    assert_array_equal(result.imputed, missing)


@every_kind
def test_every_measured_feature_is_kept_or_dropped_with_a_reason(kind: str) -> None:
    table = BUILDERS[kind]()
    result = prepared(kind, table)
    dropped = {name.split("=")[0] for name in result.dropped}
    assert set(result.origins) | dropped == set(table.features)
    assert not set(result.features) & set(result.dropped)
    assert all(result.dropped.values())


@every_kind
def test_account_has_one_plain_entry_per_step(kind: str) -> None:
    recipe, table = recipe_for("a layer", kind), BUILDERS[kind]()
    account = prepared(kind, table).account
    assert [entry.step for entry in account] == [step.step for step in recipe.steps_for(table)]
    for entry in account:
        assert "\n" not in entry.sentence
        assert json.loads(json.dumps(asdict(entry)))["numbers"] == entry.numbers


@every_kind
def test_training_samples_seen_again_come_out_the_same(kind: str) -> None:
    table = BUILDERS[kind]()
    fitted = recipe_for("a layer", kind).fit(table, smallest_group=5, seed=1)
    again = fitted.transform(table)
    assert_allclose(again.values, fitted.prepared.values, rtol=1e-12, atol=1e-12)
    assert again.features == fitted.prepared.features
    assert_array_equal(again.imputed, fitted.prepared.imputed)


@every_kind
def test_held_out_values_change_nothing_that_a_step_has_learnt(kind: str) -> None:
    table = BUILDERS[kind]()
    training, held_out = StepTable.of(table.take(TRAINING)), StepTable.of(table.take(HELD_OUT))
    fitted = recipe_for("a layer", kind).fit(table.take(TRAINING), smallest_group=4, seed=1)
    for step in fitted.steps:
        before = pickle.dumps(step)
        wild = held_out.with_values(held_out.values if kind in ("mixed", "beta") else held_out.values * 7 + 1)
        step.transform(wild)
        assert pickle.dumps(step) == before
        training, held_out = step.transform(training)[0], step.transform(held_out)[0]
    assert_allclose(training.values, fitted.prepared.values, rtol=1e-12, atol=1e-12)


@every_kind
def test_garbage_in_held_out_rows_does_not_reach_the_prepared_ones(kind: str) -> None:
    table = BUILDERS[kind]()
    spoilt = table.values.copy()
    spoilt[HELD_OUT] = np.flip(spoilt[HELD_OUT], axis=0) if kind == "mixed" else 12345.0
    result = prepared(kind, table.take(TRAINING))
    other = prepared(kind, replace(table, values=spoilt).take(TRAINING))
    assert_array_equal(other.values, result.values)
    assert other.account == result.account


@every_kind
def test_unseen_sample_comes_out_alone_as_in_company(kind: str) -> None:
    table = BUILDERS[kind]()
    fitted = recipe_for("a layer", kind).fit(table.take(TRAINING), smallest_group=4, seed=1)
    together = fitted.transform(table.take(HELD_OUT))
    alone = [fitted.transform(table.take([row])).values[0] for row in HELD_OUT]
    assert_allclose(np.array(alone), together.values, rtol=1e-12, atol=1e-12)
    assert np.isfinite(together.values).all()
    assert together.features == fitted.prepared.features


@every_kind
def test_order_of_samples_and_features_is_free(kind: str) -> None:
    table = BUILDERS[kind]()
    rng = np.random.default_rng(3)
    rows, columns = rng.permutation(len(table.samples)), rng.permutation(len(table.features))
    result, other = prepared(kind, table), prepared(kind, permuted(table, rows, columns))
    assert set(other.features) == set(result.features)
    places = [other.features.index(name) for name in result.features]
    assert_allclose(other.values[:, places], result.values[rows], rtol=1e-10, atol=1e-10)


@every_kind
def test_unseen_features_are_found_by_name(kind: str) -> None:
    table = BUILDERS[kind]()
    fitted = recipe_for("a layer", kind).fit(table, smallest_group=5, seed=1)
    columns = np.arange(len(table.features))[::-1]
    reversed_table = permuted(table, np.arange(len(table.samples)), columns)
    assert_allclose(fitted.transform(reversed_table).values, fitted.prepared.values, rtol=1e-12, atol=1e-12)
    with pytest.raises(
        InputError, match=r"1 of the \d+ features .* not in the table: 'F2'; add their columns"
    ):
        fitted.transform(permuted(table, np.arange(4), np.delete(columns, -3)))


@every_kind
def test_fitted_recipe_survives_being_sent_elsewhere(kind: str) -> None:
    table = BUILDERS[kind]()
    fitted = recipe_for("a layer", kind).fit(table.take(TRAINING), smallest_group=4, seed=1)
    sent = pickle.loads(pickle.dumps(fitted))
    assert_array_equal(sent.transform(table).values, fitted.transform(table).values)


@every_kind
def test_two_samples_are_enough_and_none_can_be_prepared(kind: str) -> None:
    table = BUILDERS[kind]()
    fitted = recipe_for("a layer", kind).fit(table.take([0, 1]), smallest_group=1, seed=1)
    assert fitted.prepared.values.shape[0] == 2
    assert np.isfinite(fitted.prepared.values).all()
    assert fitted.transform(table.take([])).values.shape == (0, len(fitted.prepared.features))


@every_kind
def test_one_sample_and_impossible_group_sizes_are_refused(kind: str) -> None:
    table = BUILDERS[kind]()
    with pytest.raises(InputError, match="1 samples to learn from; at least 2 needed"):
        prepared(kind, table.take([0]))
    for size in (0, 15):
        with pytest.raises(InputError, match=rf"smallest group of {size} among 14 samples; allowed: 1 to 14"):
            prepared(kind, table, smallest_group=size)


@pytest.mark.parametrize("kind", ["counts", "intensities", "log", "continuous"])
def test_one_feature_keeps_its_variation(kind: str) -> None:
    values = 50.0 + np.arange(6.0)[:, None]
    result = prepared(kind, table_of(values))
    expected = {"counts": np.log2(values + 3), "intensities": np.log2(values)}.get(kind, values)
    assert_allclose(result.values, expected, rtol=1e-12)


@every_kind
def test_duplicated_samples_and_features_stay_duplicates(kind: str) -> None:
    table = BUILDERS[kind](n=8)
    rows, columns = np.arange(16) % 8, np.arange(2 * len(table.features)) % len(table.features)
    levels = tuple(table.feature_levels[column] for column in columns)
    twice = table_of(table.values[np.ix_(rows, columns)], levels)
    result = prepared(kind, twice)
    both = ~(result.imputed[:8] | result.imputed[8:])
    assert_allclose(result.values[8:][both], result.values[:8][both], rtol=1e-12, atol=1e-12)


@every_kind
def test_a_table_without_variation_is_refused_with_the_reasons(kind: str) -> None:
    flat = table_of(np.full((6, 3), 1.0))
    with pytest.raises(
        InputError, match=r"no feature is left of 3: unusable features: 3 \(constant: 1 wherever"
    ):
        prepared(kind, flat)


@pytest.mark.parametrize("kind", ["intensities", "log", "continuous", "mixed"])
def test_empty_features_are_dropped_and_listed(kind: str) -> None:
    table = BUILDERS[kind]()
    values = table.values.copy()
    values[:, 0] = np.nan
    result = prepared(kind, replace(table, values=values))
    assert result.dropped["F0"] == "no value in any sample"


def test_what_cannot_be_prepared_is_refused() -> None:
    with pytest.raises(
        InputError, match="no preparation for values `ratios` of layer 'x'; allowed: `counts`"
    ):
        recipe_for("x", "ratios")
    settings = prepare_settings("x", "log", {})
    with pytest.raises(
        InputError, match=r"settings are for another kind than values `counts` .* LogPreparation"
    ):
        recipe_for("x", "counts", settings)
    text = table_of(np.array([[0.0], [1.0]]), (("a", "b"),))
    with pytest.raises(InputError, match=r"text features in a block of `log`: 'F0'; set values = .mixed. in"):
        recipe_for("x", "log").fit(text, smallest_group=None, seed=1)


def test_tables_that_contradict_themselves_are_refused() -> None:
    values = np.ones((2, 2))
    with pytest.raises(InputError, match="sample names stand more than once: 'a'"):
        MeasuredTable(values, ("a", "a"), ("x", "y"))
    with pytest.raises(InputError, match="feature names stand more than once: 'x'"):
        MeasuredTable(values, ("a", "b"), ("x", "x"))
    with pytest.raises(InputError, match=r"shape \(2, 2\), the names say 2 samples x 1 features"):
        MeasuredTable(values, ("a", "b"), ("x",))
    with pytest.raises(InputError, match="levels are given for 1 of 2 features"):
        MeasuredTable(values, ("a", "b"), ("x", "y"), (None,))
    with pytest.raises(
        InputError,
        match=r"1 value is infinite or beyond 1e\+100, the first at feature 'y', sample 'b': inf",
    ):
        MeasuredTable(np.array([[1.0, 2.0], [3.0, np.inf]]), ("a", "b"), ("x", "y"))
