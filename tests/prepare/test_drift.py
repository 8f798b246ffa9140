"""Drift is read off the pools: it goes, the biology stays, and what cannot be known is left alone."""

from __future__ import annotations

import pickle
from dataclasses import replace

import numpy as np
import pytest
from numpy.testing import assert_allclose, assert_array_equal
from prepare.sequences import NOISE, Sequence, sequence
from statsmodels.nonparametric.smoothers_lowess import lowess

from workbench.errors import InputError
from workbench.prepare import MeasuredTable, RunTable, recipe_for
from workbench.prepare.drift import Drift, FittedDrift
from workbench.prepare.drift_courses import BatchPools, Courses, answered, choose_courses
from workbench.prepare.local_lines import local_lines, read_off
from workbench.prepare.steps import FitContext
from workbench.prepare.tables import StepTable

NO_GROUPS = FitContext(None, 1)


def fitted(made: Sequence | MeasuredTable, **how: int) -> tuple[FittedDrift, StepTable]:
    table = StepTable.of(made.table if isinstance(made, Sequence) else made)
    return Drift(**how).fit(table, NO_GROUPS), table


def with_runs_changed(made: Sequence, **changes: object) -> MeasuredTable:
    assert made.table.runs is not None
    return replace(made.table, runs=replace(made.table.runs, **changes))  # type: ignore[arg-type]


def spread(values: np.ndarray, made: Sequence) -> float:
    """Return the mean variance of log2 values over that of biology and noise."""
    logs = np.log2(values) - made.base
    return float(logs.var(axis=0).mean() / (made.biology.var(axis=0).mean() + NOISE**2))


@pytest.mark.parametrize("p", [1, 40])
def test_local_regression_agrees_with_an_independent_one(p: int) -> None:
    """Statsmodels' lowess, three robust rounds, uneven places, one failed pool."""
    rng = np.random.default_rng(p)
    x = np.sort(rng.uniform(0, 100, 14))
    y = np.sin(x / 20)[:, None] + 0.1 * rng.standard_normal((14, p))
    y[3] += 3.0
    expected = [lowess(column, x, frac=0.75, it=3, return_sorted=False) for column in y.T]
    assert_allclose(local_lines(x, y, 0.75), np.transpose(expected), rtol=0, atol=1e-9)


def test_pools_that_lack_a_feature_take_no_part() -> None:
    rng = np.random.default_rng(3)
    x = np.arange(12.0)
    y = 0.3 * x[:, None] + rng.normal(0, 0.05, (12, 20))
    gappy = y.copy()
    gappy[[0, 5, 11]] = np.nan
    course = local_lines(x, gappy, 0.75)
    assert np.isfinite(course).all()
    assert_allclose(course[2:10], y[2:10], atol=0.25)
    assert_array_equal(course[0], course[1])
    assert_array_equal(course[11], course[10])


def test_drift_goes_and_the_biology_stays() -> None:
    made = sequence(drift=0.5)
    step, table = fitted(made)
    after, account = step.transform(table)
    assert spread(table.values, made) > 1.3
    assert_allclose(spread(after.values, made), 1.0, atol=0.03)
    slope = (np.log2(after.values) * (made.biology - made.biology.mean(0))).sum(0) / made.biology.var(0) / 60
    assert_allclose(slope.mean(), 1.0, atol=0.02)
    assert account.numbers["median_pool_scatter_after"] < 0.5 * account.numbers["median_pool_scatter_before"]
    assert account.cautions == ()


def test_without_drift_next_to_nothing_changes() -> None:
    made = sequence(seed=1, drift=0.0)
    step, table = fitted(made)
    after, account = step.transform(table)
    assert account.numbers["features_left_alone"] > 0.7 * 300
    assert_allclose(spread(after.values, made), spread(table.values, made), rtol=0.01)


def test_scatter_is_that_of_pools_which_the_course_has_not_seen() -> None:
    """With noise alone a curve through its own pools would take half of the scatter; choosing takes 5 % at most."""
    made = sequence(seed=2, drift=0.0, p=1000)
    step, table = fitted(made)
    controls = step.transform(table)[0].controls
    assert controls is not None
    left_out = np.sqrt(np.log2(controls.values).var(axis=0, ddof=1).mean())
    assert_allclose(left_out, NOISE, rtol=0.05)


def test_levels_of_batches_are_brought_together() -> None:
    made = sequence(seed=3, drift=0.0, batches=3, steps=0.5, every=6)
    step, table = fitted(made)
    after, account = step.transform(table)
    assert spread(table.values, made) > 1.3
    assert_allclose(spread(after.values, made), 1.0, atol=0.05)
    assert account.numbers["features_with_levels"] > 0.8 * 300
    assert account.cautions == (
        "fewer than 6 pools in batches 'b0', 'b1', 'b2': the batch's level at most, no curve",
    )


def test_too_few_pools_leave_drift_alone_and_say_so() -> None:
    made = sequence(every=20)
    step, table = fitted(made)
    after, account = step.transform(table)
    assert_array_equal(after.values, table.values)
    reason = "a batch needs 6 with their order for a curve and the fullest has 4"
    assert account.sentence == f"no drift removed: 4 pools, and {reason}"
    assert account.cautions == (f"drift left alone: {reason}",)


def test_nothing_is_drawn_on_past_the_outermost_pools() -> None:
    made = sequence(seed=4, drift=1.0, every=6, n=61, outer=False)
    step, table = fitted(made)
    after, account = step.transform(table)
    removed = np.log2(table.values / after.values)
    [course] = step.courses.batches
    assert_allclose(removed[0], course.course[0], atol=1e-9)
    assert "1 run before the first or after the last pool" in account.cautions[0]
    far = read_off(course.x, course.course, np.array([-1e6, 1e6]))
    assert_array_equal(far, course.course[[0, -1]])


def test_one_failed_injection_of_a_pool_does_not_bend_the_course() -> None:
    made = sequence(seed=5)
    runs = made.table.runs
    assert runs is not None
    values = runs.values.copy()
    failed = runs.rows_as("pool")[4]
    values[failed] /= 30.0
    spoilt, table = fitted(with_runs_changed(made, values=values))
    assert_allclose(spread(spoilt.transform(table)[0].values, made), 1.0, atol=0.08)


def test_sample_runs_teach_nothing_and_held_out_ones_change_nothing() -> None:
    made = sequence(seed=6)
    whole, _ = fitted(made)
    part, _ = fitted(made.table.take(range(20)))
    assert_array_equal(whole.courses.batches[0].course, part.courses.batches[0].course)
    before = pickle.dumps(part)
    other = part.transform(StepTable.of(made.table.take(range(20, 60))))[0]
    assert pickle.dumps(part) == before
    _, table = fitted(made)
    assert_array_equal(other.values, whole.transform(table)[0].values[20:])


def test_runs_without_order_are_named() -> None:
    made = sequence(seed=7)
    runs = made.table.runs
    assert runs is not None
    order = runs.order.copy()
    order[runs.rows_as("sample")[3]] = np.nan
    step, table = fitted(with_runs_changed(made, order=order))
    with pytest.raises(
        InputError,
        match=r"1 run has no order: 'run4'; add the order to the run sheet, or set drift = \"none\" in",
    ):
        step.transform(table)


def test_logarithms_are_shifted_where_intensities_are_divided() -> None:
    made = sequence(seed=8)
    runs: RunTable | None = made.table.runs
    assert runs is not None
    logs = replace(
        made.table, values=np.log2(made.table.values), runs=replace(runs, values=np.log2(runs.values))
    )
    plain, table = fitted(made)
    logged, log_table = fitted(logs, logged=True)
    assert_allclose(
        logged.transform(log_table)[0].values, np.log2(plain.transform(table)[0].values), rtol=0, atol=1e-9
    )


def test_a_whole_recipe_with_pools_prepares_samples_without_drift() -> None:
    made = sequence(seed=9)
    result = recipe_for("metabolites", "intensities").fit_transform(made.table, smallest_group=30, seed=1)
    assert result.samples == made.table.samples
    assert [step.step for step in result.account][2:5] == ["blanks", "drift", "pool scatter"]
    place = [made.table.features.index(name) for name in result.features]
    drift = made.drift[:, place] - made.drift[:, place].mean(axis=0)
    left = (result.values * drift).sum(axis=0) / (drift**2).sum(axis=0)
    assert abs(np.median(left)) < 0.05


def plain_courses(table: StepTable) -> Courses:
    """Return the courses of the features that are left, fitted to them alone and kept nowhere."""
    pools = table.controls.take(table.controls.rows_as("pool"))
    logs = np.log2(np.where(pools.values > 0, pools.values, np.nan))
    return choose_courses((BatchPools("", pools.runs, pools.order, logs),), 6, 0.75)


def test_courses_kept_from_the_whole_table_are_those_of_the_features_alone() -> None:
    """Whatever the training samples leave: features dropped before drift change no other feature's course."""
    table = StepTable.of(sequence(seed=5).table)
    left = np.random.default_rng(1).random(len(table.features)) < 0.6
    step = Drift().fit(table.keep(left), NO_GROUPS)
    alone = plain_courses(table.keep(left))
    assert_array_equal(step.courses.kinds, alone.kinds)
    assert_allclose(step.courses.batches[0].course, alone.batches[0].course, rtol=0, atol=1e-12)
    assert_allclose(step.courses.left_out, alone.left_out, rtol=0, atol=1e-12)


def test_folds_fit_the_courses_once_and_prepare_the_same_values() -> None:
    """Every prepared value of a fold is bit by bit what a fit without anything kept gives."""
    table, recipe = sequence(seed=6).table, recipe_for("x", "intensities")
    parts = [np.arange(len(table.samples))[k::5] for k in range(5)]
    answered.cache_clear()
    kept = [recipe.fit(table.take(part), smallest_group=None, seed=1) for part in parts]
    assert answered.cache_info().misses == 1
    for part, fold in zip(parts, kept, strict=True):
        answered.cache_clear()
        afresh = recipe.fit(table.take(part), smallest_group=None, seed=1)
        assert_array_equal(fold.prepared.values, afresh.prepared.values)
        assert_array_equal(fold.transform(table).values, afresh.transform(table).values)


def test_kept_courses_notice_any_change_and_cannot_be_written_into() -> None:
    made = sequence(seed=7)
    table = StepTable.of(made.table)
    answered.cache_clear()
    first = Drift().fit(table, NO_GROUPS)
    with pytest.raises(ValueError, match="read-only"):
        answered(Drift().question(table.controls)).left_out[0, 0] = 1.0
    runs = made.table.runs
    moved, other_values, pool = runs.order.copy(), runs.values.copy(), runs.rows_as("pool")[2]
    moved[pool] += 0.5
    other_values[pool, 0] *= 1.1
    for change in ({"order": moved}, {"values": other_values}):
        other = Drift().fit(StepTable.of(with_runs_changed(made, **change)), NO_GROUPS)
        assert not np.array_equal(other.courses.left_out, first.courses.left_out)
    Drift(span=0.5).fit(table, NO_GROUPS)
    assert (answered.cache_info().misses, answered.cache_info().hits) == (4, 1)
