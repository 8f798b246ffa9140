"""Preparation never sees who is in which group, and makes no group effect of its own."""

from __future__ import annotations

import numpy as np
import pandas as pd
import pytest
from numpy.testing import assert_array_equal
from prepare.measured import BUILDERS, KINDS, table_of
from scipy import stats

from workbench.intake import group_codes
from workbench.prepare import PreparedTable, group_cautions, recipe_for

STUDIES = 24
HALF = np.repeat([0, 1], 15)


@pytest.mark.parametrize("kind", KINDS)
def test_permuting_the_group_leaves_every_prepared_value_the_same(kind: str) -> None:
    table = BUILDERS[kind]()
    labels = np.array(["a"] * 5 + ["b"] * 9)
    results = []
    for seed in range(3):
        frame = pd.DataFrame({"group": np.random.default_rng(seed).permutation(labels)}, index=table.samples)
        size = int(np.bincount(group_codes(frame, ["group"], {}).codes).min())
        results.append(recipe_for("x", kind).fit_transform(table, smallest_group=size, seed=1))
    assert_array_equal(results[1].values, results[0].values)
    assert_array_equal(results[2].values, results[0].values)
    assert results[2].account == results[0].account


def null_counts(seed: int, depth: float) -> np.ndarray:
    """Return counts without group effect; the second group is sequenced to another depth."""
    rng = np.random.default_rng(seed)
    means = rng.lognormal(4, 1.5, 250) * rng.gamma(8.0, 1 / 8.0, (30, 250))
    return rng.poisson(means * np.where(HALF, depth, 1.0)[:, None] * rng.lognormal(0, 0.3, (30, 1)))


def null_intensities(seed: int, dilution: float) -> np.ndarray:
    """Return intensities with 20 % gaps, four in five of them low, without group effect but for a dilution."""
    rng = np.random.default_rng(seed)
    factors = rng.standard_normal((30, 3)) @ rng.standard_normal((3, 250)) / 2.5
    logs = (
        rng.normal(14, 2, 250)
        + 0.7 * (factors + rng.standard_normal((30, 250)))
        + rng.normal(0, 0.4, (30, 1))
    )
    read = logs + HALF[:, None] * np.log2(dilution)
    lost = (read < np.quantile(read, 0.16)) | (rng.random(read.shape) < 0.04)
    return np.where(lost, np.nan, 2.0**read)


def prepared(kind: str, values: np.ndarray) -> PreparedTable:
    return recipe_for("x", kind).fit_transform(table_of(values), smallest_group=15, seed=1)


def shares(kind: str, factor: float) -> np.ndarray:
    """Return, for each study, the share of features with a group p-value under 0.05."""
    make = {"counts": null_counts, "intensities": null_intensities}[kind]
    found = []
    for seed in range(STUDIES):
        values = prepared(kind, make(seed, factor)).values
        found.append(np.mean(stats.ttest_ind(values[:15], values[15:]).pvalue < 0.05))
    return np.array(found)


@pytest.mark.parametrize("kind", ["counts", "intensities"])
def test_no_group_effect_is_made(kind: str) -> None:
    """At equal depth and dilution, with 20 % gaps: 0.05 within three standard errors over studies."""
    found = shares(kind, 1.0)
    assert abs(found.mean() - 0.05) <= 3 * max(found.std(ddof=1), 0.01) / np.sqrt(STUDIES)


def test_twice_the_depth_in_one_group_makes_few_and_is_told() -> None:
    """At most 0.07: the logarithm of small counts cannot be rid of depth altogether."""
    assert shares("counts", 2.0).mean() <= 0.07
    assert group_cautions(prepared("counts", null_counts(1, 2.0)), HALF, ("a", "b"))
    assert group_cautions(prepared("intensities", null_intensities(1, 0.5)), HALF, ("a", "b"))
