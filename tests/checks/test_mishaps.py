"""Each planted mishap is found, under its name, and the rest of the study is left alone."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from checks.studies import ALONE, checked, sheet_of
from simulated import Design, metabolites, simulate, transcripts

from workbench.checks import run_checks

BASE = Design(
    n=48,
    blocks=(transcripts(features=800, group_effect=1.0), metabolites(group_effect=1.0)),
)
STUDY = simulate(BASE, 5)
COUNTS, AREAS = STUDY.blocks["transcripts"], STUDY.blocks["metabolites"]


def told(data):
    """Return errors and warnings, by severity and id."""
    return {
        (finding.severity, finding.id)
        for finding in run_checks(data, checks=ALONE)
        if finding.severity != "note"
    }


def test_a_group_run_on_days_of_its_own_is_an_error_when_both_are_in_the_design():
    study = simulate(replace(BASE, tangle=1.0, run_days=2), 5)
    assert told(checked(study)) == {("error", "tangled_design-group-run_day")}


def test_a_group_run_on_days_of_its_own_is_a_warning_when_the_day_is_not_named():
    study = simulate(replace(BASE, tangle=1.0, run_days=2), 5)
    assert told(checked(study, adjust=())) == {("warning", "tangled_design-group-run_day")}


def test_a_group_that_nearly_tells_its_run_day_is_a_warning():
    study = simulate(replace(BASE, tangle=0.93, run_days=2), 5)
    assert told(checked(study)) == {("warning", "tangled_design-group-run_day")}


def test_a_run_day_that_the_settings_forget_is_found_in_both_blocks():
    expected = {("warning", f"unnamed_batch-{block}-run_day") for block in STUDY.blocks}
    assert told(checked(STUDY, adjust=())) == expected


def test_a_run_order_that_the_settings_forget_is_found():
    study = simulate(BASE.with_block("metabolites", drift=0.8), 5)
    found = told(checked(study, own={"metabolites": []}))
    assert found == {("warning", "unnamed_batch-metabolites-metabolites_order")}


@pytest.mark.parametrize("block", ["transcripts", "metabolites"])
@pytest.mark.parametrize("seed", [1, 2])
def test_an_odd_sample_is_found_and_no_other(block, seed):
    study = simulate(BASE.with_block(block, odd=1), seed)
    (odd,) = study.truth.odd[block]
    found = [finding for finding in run_checks(checked(study), checks=ALONE) if finding.severity != "note"]
    assert f"outlier-{block}-{odd}" in [finding.id for finding in found]
    assert {(finding.block, finding.samples) for finding in found} == {(block, (odd,))}


def test_three_samples_that_went_wrong_in_all_blocks_are_found_in_each():
    study = simulate(replace(BASE, odd=3), 3)
    expected = {
        ("warning", f"outlier-{block}-{odd}") for block in study.blocks for odd in study.truth.odd[block]
    }
    assert told(checked(study)) == expected


@pytest.mark.parametrize("factor", [1.0, 0.37])
def test_a_sample_copied_over_another_is_an_error(factor):
    table = AREAS.copy()
    table.loc["S003"] = factor * table.loc["S017"]
    found = told(checked(STUDY, tables={"metabolites": table}))
    assert found == {("error", "duplicated_samples-metabolites-S003-S017")}


def test_a_sample_sequenced_twice_is_a_warning():
    table = COUNTS.copy()
    table.loc["S003"] = np.random.default_rng(1).poisson(0.5 * table.loc["S017"])
    found = told(checked(STUDY, tables={"transcripts": table}))
    assert found == {("warning", "duplicated_samples-transcripts-S003-S017")}


KINDS = {
    "log as intensities": ("metabolites", np.log2(AREAS), "intensities", "warning", "logarithms"),
    "natural log as intensities": ("metabolites", np.log(AREAS), "intensities", "warning", "logarithms"),
    "log as counts": ("metabolites", np.log2(AREAS), "counts", "error", "no_counts"),
    "counts as intensities": ("transcripts", COUNTS, "intensities", "warning", "counts"),
    "counts as continuous": ("transcripts", COUNTS, "continuous", "warning", "counts"),
    "counts as log": ("transcripts", COUNTS, "log", "error", "no_logarithms"),
    "intensities as log": ("metabolites", AREAS, "log", "error", "no_logarithms"),
    "intensities as counts": ("metabolites", AREAS.round().fillna(0), "counts", "warning", "intensities"),
    "centred log as intensities": ("metabolites", np.log2(AREAS) - 18, "intensities", "error", "negative"),
    "log twice": ("metabolites", np.log2(np.log2(AREAS)), "log", "warning", "twice"),
}


@pytest.mark.parametrize("case", KINDS)
def test_values_of_another_kind_than_declared_are_found(case):
    block, table, declared, severity, word = KINDS[case]
    found = told(checked(STUDY, tables={block: table}, values={block: declared}))
    assert (severity, f"kind-{block}-{word}") in found
    assert {identity for _, identity in found if identity.startswith("kind-")} == {f"kind-{block}-{word}"}


RIGHT = {
    "log2": ("metabolites", np.log2(AREAS), "log"),
    "log10": ("metabolites", np.log10(AREAS), "log"),
    "centred": ("metabolites", np.log2(AREAS) - np.log2(AREAS).median(), "log"),
    "log of counts": ("transcripts", np.log2(COUNTS + 1.0), "log"),
    "whole intensities": ("metabolites", AREAS.round(), "intensities"),
    "log as continuous": ("metabolites", np.log2(AREAS), "continuous"),
}


@pytest.mark.parametrize("case", RIGHT)
def test_values_of_the_declared_kind_raise_no_doubt(case):
    block, table, declared = RIGHT[case]
    found = told(checked(STUDY, tables={block: table}, values={block: declared}))
    assert not [identity for _, identity in found if identity.startswith("kind-")]


def test_samples_that_add_up_to_one_sum_are_found():
    shares = COUNTS.div(COUNTS.sum(axis=1), axis=0) * 1e6
    found = told(checked(STUDY, tables={"transcripts": shares}, values={"transcripts": "intensities"}))
    assert ("warning", "kind-transcripts-same_sums") in found


def test_a_shallow_sample_and_one_full_of_gaps_are_found():
    table = AREAS.copy()
    table.loc["S010"] *= 0.1
    table.loc["S020", np.random.default_rng(0).random(table.shape[1]) < 0.4] = np.nan
    found = told(checked(STUDY, tables={"metabolites": table}))
    assert {("warning", "depth-metabolites-S010"), ("warning", "gaps-metabolites-S020")} <= found


@pytest.mark.parametrize(("column", "level"), [("group", "treated"), ("run_day", "day2")])
def test_gaps_that_follow_the_group_or_the_day_are_found(column, level):
    table = AREAS.copy()
    members = STUDY.samples.index[STUDY.samples[column] == level]
    table.loc[table.index.isin(members), table.columns[:40]] = np.nan
    assert told(checked(STUDY, tables={"metabolites": table})) == {
        ("warning", f"gaps_follow-metabolites-{column}")
    }


def test_a_sample_without_a_value_is_an_error():
    table = AREAS.copy()
    table.loc["S010"] = np.nan
    assert ("error", "empty_sample-metabolites-S010") in told(checked(STUDY, tables={"metabolites": table}))


def test_personal_data_in_the_sheet_are_named_by_column_and_never_quoted():
    sheet = sheet_of(STUDY)
    sheet["dob"], sheet["reached_by"] = "1961-02-03", [f"a{k}@clinic.org" for k in range(len(sheet))]
    found = [
        finding
        for finding in run_checks(checked(STUDY, sheet=sheet), checks=ALONE)
        if finding.check == "personal_data"
    ]
    assert {finding.id for finding in found} == {"personal_data-dob", "personal_data-reached_by"}
    assert not any("1961" in finding.what + finding.todo or "clinic.org" in finding.what for finding in found)
