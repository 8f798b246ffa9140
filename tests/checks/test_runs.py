"""What pools, blanks and repeated runs show: planted faults of an assay are found."""

from __future__ import annotations

import numpy as np
import pandas as pd
import pytest
from checks.studies import measured_of, settings_of, sheet_of, small_study

from workbench.checks import study_data
from workbench.checks.run_quality import check_runs, relative_spread, trends

STUDY = small_study()
FEATURES = STUDY.blocks["metabolites"].shape[1]


def assay(*, pools=8, scatter=0.1, drift=0.0, drifting=0, blank=0.01, carried=0, repeats=False, mixed=False):
    """Return a run sheet and the values of its runs; every third run or so is a pool."""
    rng = np.random.default_rng(3)
    table = np.nan_to_num(STUDY.aligned("metabolites").to_numpy(dtype=float), nan=1e4)
    names = list(STUDY.samples.index)
    rows, sample, role = [table], list(names), ["sample"] * len(names)
    if repeats:
        again = table * np.exp(0.05 * rng.standard_normal(table.shape))
        rows, sample, role = (
            [*rows, again[::-1] if mixed else again],
            sample + names,
            role + ["sample"] * len(names),
        )
    pool = np.median(table, axis=0) * np.exp(scatter * rng.standard_normal((pools, FEATURES)))
    blanks = np.tile(blank * np.median(table, axis=0), (3, 1))
    blanks[:, :carried] = 0.6 * np.median(table, axis=0)[:carried]
    values = np.vstack([*rows, pool, blanks])
    sample += [""] * (pools + 3)
    role += ["pool"] * pools + ["blank"] * 3
    order = rng.permutation(len(role)) + 1.0
    values[:, :drifting] *= np.exp2(drift * order[:, None] / order.max())
    sheet = pd.DataFrame(
        {"sample": sample, "role": role, "order": order}, index=[f"r{k}" for k in range(len(role))]
    )
    return sheet, values


def findings(runs, values):
    sheet = sheet_of(STUDY)
    measured = measured_of(STUDY.blocks["metabolites"], sheet)
    measured.uns["run_sheet"], measured.uns["run_values"] = runs, values
    settings = settings_of(STUDY, own={"metabolites": []})
    data = study_data(settings, sheet, {"metabolites": measured})
    return {finding.check: finding for finding in check_runs(data)}


def test_a_good_assay_gives_no_finding():
    assert findings(*assay()) == {}


def test_pools_that_scatter_are_a_warning_and_few_pools_a_note():
    found = findings(*assay(scatter=0.6))
    assert found["pools_scatter"].severity == "warning"
    assert len(found["pools_scatter"].features) > FEATURES / 2
    assert findings(*assay(pools=2))["few_pools"].severity == "note"


@pytest.mark.parametrize(("pools", "severity"), [(5, "warning"), (10, "note")])
def test_drift_is_a_warning_where_the_pools_are_too_few_to_correct_it(pools, severity):
    found = findings(*assay(pools=pools, scatter=0.02, drift=2.0, drifting=40))["drift"]
    assert found.severity == severity
    assert set(found.features) <= set(STUDY.blocks["metabolites"].columns[:40])
    assert len(found.features) >= 35


def test_blanks_that_carry_signal_are_named_feature_by_feature():
    found = findings(*assay(carried=60))["blanks_carry"]
    assert (found.severity, found.features) == ("warning", tuple(STUDY.blocks["metabolites"].columns[:60]))
    assert findings(*assay(carried=5))["blanks_carry"].severity == "note"


def test_repeats_that_disagree_are_named_and_good_ones_are_not():
    assert "repeats_disagree" not in findings(*assay(repeats=True))
    found = findings(*assay(repeats=True, mixed=True))["repeats_disagree"]
    assert found.severity == "warning"
    assert len(found.samples) >= 5


def test_a_run_of_no_sample_of_the_sheet_is_listed():
    runs, values = assay()
    runs.loc["r3", "sample"] = "S999"
    found = findings(runs, values)["runs_without_sample"]
    assert "'r3'" in found.what


def test_the_relative_spread_of_log_normal_values_is_known():
    logs = np.log2(np.exp(0.5 * np.random.default_rng(1).standard_normal((40_000, 1))))
    np.testing.assert_allclose(relative_spread(logs), np.sqrt(np.expm1(0.25)), rtol=0.02)


def test_the_change_of_a_line_is_its_whole_rise():
    order = np.array([1.0, 4.0, 5.0, 9.0, 11.0, 15.0])
    change, q = trends(np.column_stack([0.2 * order, np.ones(6)]), order)
    np.testing.assert_allclose(change, [2.8, np.nan], rtol=1e-9)
    assert q[0] < 1e-6
