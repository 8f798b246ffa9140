"""Several samples of one subject: their order, and that they are never pooled unasked."""

import numpy as np
import pandas as pd
import pytest

from workbench.errors import InputError
from workbench.intake import group_codes
from workbench.settings import parse_settings
from workbench.workflow.subjects import require_level, subject_design, time_levels

SHEET = pd.DataFrame(
    {
        "donor": ["a", "a", "b", "b", "c", "c"],
        "day": ["day2", "day10", "day10", "day2", "day2", "day10"],
        "tissue": ["normal", "tumour"] * 3,
        "arm": ["x", "x", "y", "y", "x", "x"],
    },
    index=pd.Index([f"S{k}" for k in range(6)], name="sample"),
)


def design(lines, sheet=SHEET):
    settings = parse_settings(f'[samples]\nid = "sample"\n{lines}')
    factors = list(settings.samples.group)
    groups = group_codes(sheet, factors, settings.samples.order) if factors else None
    return subject_design(sheet, settings, groups, "here"), settings


def test_numbers_inside_a_time_are_taken_by_value():
    found, _ = design('subject = "donor"\ntime = "day"')
    assert found.kind == "pairs"
    np.testing.assert_array_equal(found.pairs, [[0, 1], [3, 2], [4, 5]])


def test_a_stated_order_of_times_holds():
    found, _ = design('subject = "donor"\ntime = "day"\norder = { day = ["day10", "day2"] }')
    np.testing.assert_array_equal(found.pairs, [[1, 0], [2, 3], [5, 4]])
    assert time_levels(SHEET["day"], ("day10", "day2")) == ("day10", "day2")


def test_a_group_with_one_sample_of_each_subject_orders_them():
    assert design('subject = "donor"\ngroup = "tissue"')[0].kind == "pairs"
    assert design('subject = "donor"\ngroup = "arm"')[0].kind == "replicates"
    assert design('group = "arm"')[0] is None


def test_pooling_is_refused_until_the_question_is_said():
    found, settings = design('subject = "donor"\ntime = "day"')
    with pytest.raises(InputError, match='level = "visits"'):
        require_level(found, None, settings, "analysis 'main'")
    require_level(found, "subjects", settings, "analysis 'main'")
    require_level(design('subject = "donor"', SHEET.iloc[::2])[0], None, settings, "analysis 'main'")


def test_two_samples_at_one_time_are_refused():
    with pytest.raises(InputError, match="subject a has two samples at time"):
        design('subject = "donor"\ntime = "arm"')
