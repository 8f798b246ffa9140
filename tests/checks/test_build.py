"""From stored blocks to what the checks look at: samples left out, designs with empty cells, runs."""

from __future__ import annotations

import numpy as np
import pandas as pd
import pytest
from checks.studies import checked, measured_of, prepared_of, settings_of, sheet_of, small_study

from workbench.checks import study_data
from workbench.errors import InputError


def test_samples_that_the_settings_leave_out_are_left_out():
    study = small_study()
    settings = settings_of(study, more='exclude = { S001 = "lost" }')
    own = settings.blocks["transcripts"].model_copy(update={"exclude": {"S002": "thawed"}})
    settings = settings.model_copy(update={"blocks": {**settings.blocks, "transcripts": own}})
    data = checked(study, settings=settings)
    assert set(study.samples.index) - set(data.blocks["transcripts"].samples) == {"S001", "S002"}
    assert set(study.samples.index) - set(data.blocks["metabolites"].samples) == {"S001"}
    assert data.blocks["transcripts"].prepared.shape[0] == 22


def test_a_sample_without_a_value_in_the_design_is_not_usable():
    study = small_study()
    sheet = sheet_of(study)
    sheet.loc["S003", "run_day"] = ""
    sheet.loc["S004", "group"] = "NA"
    block = checked(study, sheet=sheet).blocks["transcripts"]
    assert set(block.samples) - set(block.take(block.usable)) == {"S003", "S004"}
    assert np.isfinite(block.design()).all()
    assert block.design().shape == (22, 3)


def test_prepared_values_older_than_the_settings_are_refused():
    study = small_study()
    sheet, settings = sheet_of(study), settings_of(study)
    measured = {name: measured_of(table, sheet) for name, table in study.blocks.items()}
    old = prepared_of(measured["transcripts"][3:], "transcripts", "counts")
    with pytest.raises(
        InputError, match=r"prepared values of block 'transcripts' lack 'S001', 'S002', 'S003'"
    ):
        study_data(settings, sheet, measured, {"transcripts": old})


def test_a_block_not_prepared_yet_is_looked_at_as_measured():
    study = small_study()
    sheet, settings = sheet_of(study), settings_of(study)
    measured = {name: measured_of(table, sheet) for name, table in study.blocks.items()}
    block = study_data(settings, sheet, measured).blocks["metabolites"]
    assert block.prepared is None
    np.testing.assert_array_equal(block.measured, study.aligned("metabolites").to_numpy(dtype=float))


def test_columns_of_the_run_sheet_join_those_of_the_sample_sheet():
    study = small_study()
    sheet = sheet_of(study)
    measured = measured_of(study.blocks["metabolites"], sheet)
    samples = list(measured.obs_names)
    measured.uns["run_sheet"] = pd.DataFrame(
        {"sample": samples, "role": "sample", "order": np.arange(24.0)}, index=[f"r{k}" for k in range(24)]
    )
    measured.uns["run_values"] = np.asarray(measured.X)
    settings = settings_of(study, own={"metabolites": ["order"]})
    block = study_data(settings, sheet, {"metabolites": measured}).blocks["metabolites"]
    np.testing.assert_array_equal(block.nuisance[:, block.nuisance_names.index("order")], np.arange(24.0))
