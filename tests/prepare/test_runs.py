"""Runs are prepared as runs and combined to samples; pools and blanks never come out."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pandas as pd
import pytest
from numpy.testing import assert_allclose, assert_array_equal
from prepare.measured import BUILDERS, table_of, with_runs

from workbench.errors import InputError
from workbench.prepare import recipe_for, run_table
from workbench.prepare.combining import CombineRuns
from workbench.prepare.steps import DropRarelySeen, FitContext
from workbench.prepare.tables import StepTable

with_runs_kinds = pytest.mark.parametrize("kind", ["counts", "intensities", "log", "continuous"])


@with_runs_kinds
def test_one_run_per_sample_without_controls_is_the_plain_table(kind: str) -> None:
    table = BUILDERS[kind]()
    recipe = recipe_for("a layer", kind)
    plain = recipe.fit_transform(table, smallest_group=5, seed=1)
    run = recipe.fit_transform(with_runs(table), smallest_group=5, seed=1)
    assert_array_equal(run.values, plain.values)
    assert_array_equal(run.imputed, plain.imputed)
    assert (run.samples, run.features) == (plain.samples, plain.features)


@with_runs_kinds
def test_a_held_out_sample_with_runs_comes_out_alone_as_in_company(kind: str) -> None:
    table = with_runs(BUILDERS[kind](), copies=2)
    fitted = recipe_for("a layer", kind).fit(table.take(range(10)), smallest_group=4, seed=1)
    together = fitted.transform(table.take(range(10, 14)))
    alone = [fitted.transform(table.take([row])).values[0] for row in range(10, 14)]
    assert_allclose(np.array(alone), together.values, rtol=1e-12, atol=1e-12)
    assert together.samples == table.samples[10:]


def test_combined_is_the_mean_over_the_runs_that_have_a_value() -> None:
    table = table_of(np.zeros((2, 3)))
    values = np.array([[1.0, np.nan, 3.0], [4.0, 5.0, np.nan], [3.0, np.nan, np.nan], [8.0, 7.0, np.nan]])
    start = StepTable.of(with_runs(table, values, copies=2))
    mean, _ = CombineRuns().transform(start)
    assert_array_equal(mean.values, [[2.0, np.nan, 3.0], [6.0, 6.0, np.nan]])
    total, account = CombineRuns("sum").transform(start)
    assert_array_equal(total.values, [[4.0, np.nan, 3.0], [12.0, 12.0, np.nan]])
    assert (total.samples, account.numbers["samples_with_several_runs"]) == (table.samples, 2)


def test_runs_of_one_sample_count_as_one_sample() -> None:
    table = table_of(np.ones((6, 1)))
    values = np.full((12, 1), np.nan)
    values[[0, 6]] = 1.0
    start = StepTable.of(with_runs(table, values, copies=2))
    fitted = DropRarelySeen().fit(start, FitContext(None, 1))
    assert fitted.account.dropped == {"F0": "measured in 1 of 6 samples; 5 needed"}


def test_taken_samples_keep_their_runs_and_all_controls() -> None:
    table = with_runs(BUILDERS["log"](), copies=2, pools=3, blanks=1)
    taken = table.take([4, 2])
    assert taken.runs is not None
    assert taken.runs.runs == ("S004_0", "S004_1", "S002_0", "S002_1", "pool0", "pool1", "pool2", "blank0")
    assert_array_equal(taken.runs.values[[0, 2]], table.values[[4, 2]])


def test_pools_and_blanks_never_come_out() -> None:
    table = with_runs(BUILDERS["continuous"](), pools=3, blanks=2)
    result = recipe_for("a layer", "continuous").fit_transform(table, smallest_group=5, seed=1)
    assert result.samples == table.samples


def test_a_run_sheet_is_read_with_what_it_has() -> None:
    sheet = pd.DataFrame(
        {"sample": ["a", None], "role": ["sample", "blank"], "run_by": ["x", "y"]}, index=["r1", "r2"]
    )
    runs = run_table(sheet, np.ones((2, 4)))
    assert (runs.sample, runs.batch) == (("a", ""), ("", ""))
    assert np.isnan(runs.order).all()


def test_run_sheets_that_contradict_themselves_are_refused() -> None:
    table = with_runs(BUILDERS["log"]())
    runs = table.runs
    assert runs is not None
    with pytest.raises(InputError, match="roles of runs that are none: 'qc'; allowed: sample, pool, blank"):
        replace(runs, role=("qc", *runs.role[1:]))
    with pytest.raises(InputError, match="runs of samples without the sample's name: 'S000_0'"):
        replace(runs, sample=("", *runs.sample[1:]))
    with pytest.raises(InputError, match="1 of 14 samples have no run: 'S003'"):
        replace(table, runs=runs.for_samples([name for name in table.samples if name != "S003"]))
    with pytest.raises(InputError, match="run names stand more than once"):
        replace(runs, runs=("S001_0", *runs.runs[1:]))
    with pytest.raises(InputError, match="columns of the run sheet differ in length"):
        replace(runs, batch=())


def test_training_with_runs_and_applying_without_is_refused() -> None:
    table = BUILDERS["log"]()
    fitted = recipe_for("x", "log").fit(with_runs(table), smallest_group=None, seed=1)
    with pytest.raises(
        InputError, match="this table has no run sheet, the preparation was learnt from a table with one"
    ):
        fitted.transform(table)
    with pytest.raises(InputError, match="text of several runs cannot be averaged"):
        recipe_for("x", "mixed").fit(with_runs(BUILDERS["mixed"]()), smallest_group=None, seed=1)
