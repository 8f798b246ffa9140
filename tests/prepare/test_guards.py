"""Samples far from the rest, groups scaled apart, shares filled in: told, and only then."""

from __future__ import annotations

import numpy as np
import pytest
from numpy.testing import assert_allclose
from prepare.measured import BUILDERS, intensities, table_of

from workbench.errors import InputError
from workbench.prepare import PreparedTable, group_cautions, group_differences, imputed_shares, recipe_for
from workbench.settings import prepare_settings

GROUPS = np.repeat([0, 1], 20)
LEVELS = ("control", "treated")


def prepared(kind: str, values: np.ndarray) -> PreparedTable:
    return recipe_for("x", kind).fit_transform(table_of(values), smallest_group=20, seed=1)


def reads(seed: int, depth: float) -> np.ndarray:
    rng = np.random.default_rng(seed)
    means = rng.lognormal(5, 1, 400) * np.exp(rng.normal(0, 0.4, (40, 400)))
    return rng.poisson(means * np.where(GROUPS, depth, 1.0)[:, None] * rng.lognormal(0, 0.2, (40, 1))).astype(
        float
    )


@pytest.mark.parametrize("normalisation", ["median_of_ratios", "upper_quartile", "trimmed_mean"])
def test_a_size_factor_far_from_the_rest_is_told(normalisation: str) -> None:
    values = reads(1, 1.0)
    values[7] = np.floor(values[7] / 12)
    settings = prepare_settings("x", "counts", {"normalisation": normalisation})
    result = recipe_for("x", "counts", settings).fit_transform(table_of(values), smallest_group=20, seed=1)
    [caution] = result.cautions
    assert caution.startswith("size factor far from the rest in 'S007' (0.0")


@pytest.mark.parametrize("kind", ["counts", "intensities"])
def test_usual_factors_are_not_told(kind: str) -> None:
    values = reads(2, 1.0) * (1.0 if kind == "counts" else 1000.0)
    assert prepared(kind, values).cautions == ()


def test_a_dilution_and_a_median_far_from_the_rest_are_told() -> None:
    values = intensities(n=30).values.copy()
    values[4] *= 40
    result = recipe_for("x", "intensities").fit_transform(table_of(values), smallest_group=15, seed=1)
    assert result.cautions[0].startswith("concentration far from the rest in 'S004'")
    logs = BUILDERS["log"](n=30).values.copy()
    logs[9] += 6
    result = recipe_for("x", "log").fit_transform(table_of(logs), smallest_group=15, seed=1)
    assert result.cautions[0].startswith("median far from the rest in 'S009'")


def test_groups_of_unequal_depth_are_told_and_of_equal_depth_are_not() -> None:
    [caution] = group_cautions(prepared("counts", reads(3, 2.0)), GROUPS, LEVELS)
    assert caution.startswith("depth or dilution differs between the groups (control: 0.7")
    assert group_cautions(prepared("counts", reads(3, 1.0)), GROUPS, LEVELS) == ()


def test_the_difference_in_scale_is_what_was_planted() -> None:
    scale, imputed = group_differences(prepared("counts", reads(4, 2.0)), GROUPS)
    assert_allclose(scale.difference, 1.0, atol=0.2)
    assert scale.p < 1e-4
    assert scale.changed_share > 0.9
    assert (imputed.difference, imputed.p) == (0.0, 1.0)


def test_gaps_that_one_group_has_more_of_are_told() -> None:
    rng = np.random.default_rng(5)
    logs = rng.normal(10, 1, (40, 200)) + rng.normal(0, 2, 200)
    share = np.where(GROUPS, 0.25, 0.05)[:, None]
    result = prepared("log", np.where(rng.random((40, 200)) < share, np.nan, logs))
    [caution] = group_cautions(result, GROUPS, LEVELS)
    assert caution.startswith("the share of filled-in values differs between the groups (control: ")


def test_samples_without_a_group_take_no_part() -> None:
    result = prepared("counts", reads(6, 1.0))
    groups = GROUPS.copy()
    groups[[3, 30]] = -1
    scale, _ = group_differences(result, groups)
    by_hand = result.scale[groups == 1].mean() - result.scale[groups == 0].mean()
    assert_allclose(scale.difference, abs(by_hand), rtol=1e-12)
    with pytest.raises(InputError, match="39 groups for 40 samples; give one for each"):
        group_differences(result, groups[1:])


def test_false_alarms_are_as_rare_as_their_level() -> None:
    """60 studies without any difference: more than 3 told has a chance under 0.1 % at a level of 0.01."""
    told = 0
    for seed in range(60):
        rng = np.random.default_rng(seed)
        values = rng.poisson(
            rng.lognormal(4, 1, 60) * rng.lognormal(0, 0.6, (40, 1)) * rng.lognormal(0, 0.3, (40, 60))
        )
        told += bool(group_cautions(prepared("counts", values), GROUPS, LEVELS))
    assert told <= 3


def test_samples_and_features_that_are_mostly_filled_in_are_told() -> None:
    rng = np.random.default_rng(8)
    logs = rng.normal(10, 1, (40, 100))
    logs[3, rng.random(100) < 0.5] = np.nan
    logs[rng.random(40) < 0.6, 5] = np.nan
    result = prepared("log", logs)
    rows, columns = imputed_shares(result)
    assert rows["S003"] > 0.3
    assert_allclose(rows["S003"], result.imputed[3].mean())
    assert "more than 30 % of the values filled in, not measured, in 'S003'" in result.cautions
    assert (columns["F5"] > 0.5) == any("'F5'" in caution for caution in result.cautions)


def test_a_group_without_spread_is_compared_without_a_warning() -> None:
    """Four samples, two of a group: shares of filled-in values that are equal but for rounding."""
    values = np.arange(20.0).reshape(4, 5)
    scale = np.array([0.1 + 0.2, 0.3, 0.8, 0.9])
    prepared = PreparedTable(
        values=values,
        imputed=np.zeros((4, 5), dtype=bool),
        samples=("a", "b", "c", "d"),
        features=tuple("vwxyz"),
        account=(),
        origins=tuple("vwxyz"),
        scale=scale,
    )
    found, imputed = group_differences(prepared, np.array([0, 0, 1, 1]))
    assert 0.0 < found.p < 0.1
    assert imputed.p == 1.0
