"""Every key of the settings changes what comes out, and nothing but what it says."""

from __future__ import annotations

import json
import pickle
from dataclasses import asdict, replace

import numpy as np
import pytest
from numpy.testing import assert_allclose
from prepare.measured import BUILDERS, table_of
from prepare.sequences import with_controls

from workbench.prepare import MeasuredTable, PreparedTable, recipe_for
from workbench.settings import prepare_keys, prepare_settings

CHANGES: dict[str, dict[str, object]] = {
    "counts": {"smallest_count": 40, "normalisation": "none", "prior_count": 0.5},
    "proportions": {"prevalence": 0.9, "zero_share": 0.2, "log_ratio": "none"},
    "intensities": {
        "zeros": "amounts",
        "blanks": "none",
        "blank_ratio": 1.1,
        "drift": "none",
        "fewest_pools": 40,
        "span": 0.95,
        "pool_filter": "none",
        "pool_scatter": 0.2,
        "seen_share": 1.0,
        "normalisation": "none",
        "gaps": "neighbours",
    },
    "log": {
        "drift": "none",
        "fewest_pools": 40,
        "span": 0.95,
        "pool_filter": "none",
        "pool_scatter": 0.2,
        "seen_share": 1.0,
        "centring": "none",
        "gaps": "neighbours",
    },
    "beta": {"seen_share": 1.0, "offset": 0.05},
    "continuous": {"seen_share": 1.0, "transform": "log"},
    "mixed": {"seen_share": 1.0, "ordered": {"F2": ["low", "mid", "high"]}, "transform": "rank"},
}
CASES = [(kind, key, value) for kind, keys in CHANGES.items() for key, value in keys.items()]


def measured(kind: str) -> MeasuredTable:
    """Return a table in which every choice matters; with pools and blanks where there are any."""
    if kind in ("intensities", "log"):
        return with_controls(kind)
    table = BUILDERS[kind](n=20)
    values = table.values.copy()
    values[8:, 3] = np.nan
    return replace(table, values=values if kind in ("beta", "continuous", "mixed") else table.values)


def prepared(kind: str, settings: dict[str, object]) -> PreparedTable:
    recipe = recipe_for("x", kind, prepare_settings("x", kind, settings))
    return recipe.fit_transform(measured(kind), smallest_group=10, seed=1)


def test_the_list_of_choices_is_whole() -> None:
    elsewhere = {"check_values", "smallest_share", "transform_features"}
    for kind, keys in CHANGES.items():
        assert set(keys) == {key.key for key in prepare_keys("x", kind)} - elsewhere


@pytest.mark.parametrize(("kind", "key", "value"), CASES, ids=[f"{kind}-{key}" for kind, key, _ in CASES])
def test_a_choice_changes_what_comes_out(kind: str, key: str, value: object) -> None:
    plain, other = prepared(kind, {}), prepared(kind, {key: value})
    assert np.isfinite(other.values).all()
    same = plain.features == other.features and np.array_equal(plain.values, other.values)
    assert not same


@pytest.mark.parametrize(("kind", "key", "value"), CASES, ids=[f"{kind}-{key}" for kind, key, _ in CASES])
def test_held_out_samples_change_nothing_that_was_learnt(kind: str, key: str, value: object) -> None:
    table = measured(kind)
    n = len(table.samples)
    recipe = recipe_for("x", kind, prepare_settings("x", kind, {key: value}))
    fitted = recipe.fit(table.take(range(n - 6)), smallest_group=7, seed=1)
    before = pickle.dumps(fitted)
    together = fitted.transform(table.take(range(n - 6, n)))
    alone = [fitted.transform(table.take([row])).values[0] for row in range(n - 6, n)]
    assert_allclose(np.array(alone), together.values, rtol=1e-12, atol=1e-12)
    assert pickle.dumps(fitted) == before
    assert json.loads(json.dumps([asdict(step) for step in together.account]))


def test_the_share_without_groups_is_a_choice() -> None:
    table = BUILDERS["counts"](n=20)
    kept = []
    for share in (0.2, 0.9):
        settings = prepare_settings("x", "counts", {"smallest_share": share})
        recipe = recipe_for("x", "counts", settings)
        kept.append(len(recipe.fit_transform(table, smallest_group=None, seed=1).features))
    assert kept[0] > kept[1]


def test_zeros_as_amounts_are_the_lowest_values_and_no_gaps() -> None:
    values = np.random.default_rng(3).lognormal(8, 1, (12, 30))
    values[2, :10] = 0.0
    settings = prepare_settings("x", "intensities", {"zeros": "amounts", "normalisation": "none"})
    result = recipe_for("x", "intensities", settings).fit_transform(
        table_of(values), smallest_group=6, seed=1
    )
    assert not result.imputed.any()
    smallest = np.where(values > 0, values, np.inf).min(axis=0)
    assert_allclose(result.values[2, :10], np.log2(smallest[:10] / 2), rtol=1e-12)


def test_settings_given_out_and_left_out_are_the_same() -> None:
    plain = recipe_for("x", "log").fit_transform(BUILDERS["log"](), smallest_group=5, seed=1)
    written = recipe_for("x", "log", prepare_settings("x", "log", {})).fit_transform(
        BUILDERS["log"](), smallest_group=5, seed=1
    )
    assert_allclose(plain.values, written.values, rtol=0, atol=0)
