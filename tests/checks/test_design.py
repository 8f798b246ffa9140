"""What the design can tell: aliased columns, small groups, samples alone, subjects, shared samples."""

from __future__ import annotations

import numpy as np
import pytest
from checks.studies import ALONE, SMALL_THREE, checked, sheet_of, small_study
from scipy import stats

from workbench.checks import run_checks
from workbench.checks.alignment import check_alignment
from workbench.checks.tangled import check_design, smallest_r, units


def ids(findings, severity):
    return {finding.id for finding in findings if finding.severity == severity}


def test_two_columns_that_say_the_same_are_an_error_naming_both():
    study = small_study()
    sheet = sheet_of(study)
    sheet["plate"] = sheet["run_day"].map({"day1": "p", "day2": "q", "day3": "r"})
    found = check_design(checked(study, sheet=sheet, own={"metabolites": ["plate"]}))
    (error,) = [finding for finding in found if finding.severity == "error"]
    assert error.id == "tangled_design-plate-run_day"
    assert "[samples] adjust = []" in error.todo


def test_the_table_of_a_tangled_design_counts_every_sample():
    study = small_study(tangle=1.0, run_days=2)
    (error,) = [finding for finding in check_design(checked(study)) if finding.severity == "error"]
    assert error.evidence.rows == ("control", "treated")
    assert error.evidence.counts.sum() == 24
    assert (np.count_nonzero(error.evidence.counts, axis=1) == 1).all()


def test_a_group_of_two_samples_is_a_warning_and_one_group_alone_an_error():
    study = small_study()
    sheet = sheet_of(study)
    sheet["group"] = ["treated"] * 2 + ["control"] * 22
    assert "unbalanced_groups-group" in ids(check_design(checked(study, sheet=sheet, adjust=())), "warning")
    four = checked(study, sheet=sheet.iloc[[0, 1, 2, 3]], adjust=(), own={})
    told = next(finding for finding in check_design(four) if finding.check == "small_groups")
    assert (told.severity, "control 2, treated 2" in told.what) == ("warning", True)
    assert "unequal" not in told.what
    sheet["group"] = "control"
    assert "one_group-group" in ids(check_design(checked(study, sheet=sheet, adjust=())), "error")


def test_a_sample_alone_on_its_day_is_named():
    study = small_study()
    sheet = sheet_of(study)
    sheet.loc["S005", "run_day"] = "day9"
    (note,) = [
        finding for finding in check_design(checked(study, sheet=sheet)) if finding.check == "samples_alone"
    ]
    assert note.samples == ("S005",)


def test_too_few_degrees_of_freedom_are_an_error():
    study = small_study(n=8)
    sheet = sheet_of(study)
    sheet["plate"] = ["a", "a", "b", "b", "c", "c", "d", "d"]
    sheet["group"] = ["x", "y"] * 4
    found = check_design(
        checked(
            study,
            sheet=sheet,
            own={"transcripts": ["plate"], "metabolites": ["metabolites_order"]},
            adjust=(),
        )
    )
    (error,) = [finding for finding in found if finding.severity == "error"]
    assert error.check == "degrees_of_freedom"
    assert (
        "less 6 for mean, nuisance and group leave 1 degree of freedom for a correlation, and 3 are"
        in error.what
    )
    assert (
        error.todo
        == "take columns out of adjust that matter little, or add samples: with this design 10 at least"
    )
    assert not error.acceptable


def test_a_design_without_nuisance_is_not_told_to_take_columns_out():
    study = small_study(n=6)
    sheet = sheet_of(study).iloc[:4]
    sheet["group"] = ["a", "b", "a", "b"]
    own = {"transcripts": [], "metabolites": []}
    found = check_design(checked(study, sheet=sheet, own=own, adjust=()))
    (error,) = [finding for finding in found if finding.severity == "error"]
    assert (
        "4 samples of blocks 'transcripts' and 'metabolites' less 2 for mean and group leave 1 degree"
        in error.what
    )
    assert error.todo == "add samples: with this design 6 at least"


def test_samples_that_the_design_fits_are_not_to_be_left_out_where_none_would_stay():
    study = small_study(n=6)
    sheet = sheet_of(study)
    sheet["group"], sheet["run_day"] = ["a", "b"] * 3, ["p", "p", "q", "q", "r", "r"]
    own = {"transcripts": [], "metabolites": []}
    found = check_design(checked(study, sheet=sheet, own=own, adjust=(), group=("group", "run_day")))
    (error,) = [finding for finding in found if finding.severity == "error"]
    assert "less 6 for mean and group leave no degree of freedom" in error.what
    assert not any("exclude" in finding.todo for finding in found)


def test_a_column_of_subjects_that_is_not_named_is_a_warning():
    study = small_study(visits=2, subject_share=0.5)
    assert "repeated_subjects-subject" in ids(check_design(checked(study)), "warning")
    named = checked(study, more='subject = "subject"')
    assert "repeated_subjects-subject" not in {finding.id for finding in check_design(named)}


@pytest.mark.parametrize(("freedom", "p"), [(3, 0.05), (20, 1e-6), (90, 0.01)])
def test_the_smallest_r_has_the_p_asked_for(freedom, p):
    r = smallest_r(freedom, p)
    t = r * np.sqrt(freedom / (1 - r**2))
    np.testing.assert_allclose(2 * stats.t.sf(t, freedom), p, rtol=1e-9)


def test_each_design_is_told_once():
    study = small_study(n=48, blocks=SMALL_THREE)
    made = list(units(checked(study)))
    assert [unit.adjust for unit in made] == [("run_day",)]
    assert made[0].block == ""


def test_samples_that_a_block_lacks_are_named_and_a_lost_group_is_a_warning():
    study = small_study(n=40)
    table = study.blocks["metabolites"]
    some = checked(study, tables={"metabolites": table.drop(index=["S004", "S009"])})
    (note,) = check_alignment(some)
    assert (note.severity, note.samples) == ("note", ("S004", "S009"))
    treated = study.samples.index[study.samples["group"] == "treated"][:15]
    (warning,) = check_alignment(checked(study, tables={"metabolites": table.drop(index=treated)}))
    assert (warning.severity, warning.id) == ("warning", "alignment-metabolites-lacks")
    assert "15 of 20 of 'treated'" in warning.what


def test_blocks_that_share_hardly_a_sample_are_an_error():
    study = small_study()
    tables = {
        "transcripts": study.aligned("transcripts").iloc[:13],
        "metabolites": study.aligned("metabolites").iloc[11:],
    }
    found = run_checks(checked(study, tables=tables), checks=ALONE)
    assert "alignment-shared-transcripts-metabolites" in ids(found, "error")


def test_samples_without_a_value_in_the_design_are_named():
    study = small_study()
    sheet = sheet_of(study)
    sheet.loc[["S003", "S007"], "run_day"] = ""
    found = [
        finding for finding in check_alignment(checked(study, sheet=sheet)) if finding.severity == "warning"
    ]
    assert [finding.id for finding in found] == ["alignment-no_value-run_day"]
    assert (
        "2 samples without a value in column 'run_day' (adjust): 'S003', 'S007'; every analysis"
        in found[0].what
    )
    assert found[0].samples == ("S003", "S007")


def test_nuisance_columns_that_cannot_be_read_are_told_as_the_reader_tells_them():
    study = small_study()
    sheet = sheet_of(study)
    sheet["barcode"] = [f"b{k}" for k in range(24)]
    found = check_design(checked(study, sheet=sheet, own={"metabolites": ["barcode"]}))
    (error,) = [finding for finding in found if finding.severity == "error"]
    assert error.id == "unread_design-metabolites"
    assert "a level of its own for each of 24 samples" in error.what
    sheet["run_day"] = sheet["barcode"]
    found = check_design(checked(study, sheet=sheet, own={"transcripts": [], "metabolites": []}))
    assert [(finding.id, finding.block) for finding in found] == [("unread_design", "")]
