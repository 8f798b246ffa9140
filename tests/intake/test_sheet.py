"""Sample sheets: ids and levels stay text, faults are named, likely parts of the design are pointed out."""

import re

import numpy as np
import pandas as pd
import pytest
from intake.delivered import tabbed, workbook, write

from workbench.errors import InputError
from workbench.intake import column_kind, read_sample_sheet, suggest_columns

MALFORMED = {
    "an id twice": (
        "sample\tcondition\nS1\ta\nS2\ta\nS1\tb\n",
        ["'S1': line 2, column 1, line 4, column 1", "column 'sample'"],
    ),
    "an id missing": ("sample\tcondition\nS1\ta\n\tb\n", ["1 row without an id", "line 3, column 1"]),
    "a ragged line": ("sample,condition\nS1,a\nS2,a,b\n", ["line 3 ('S2') has 3 fields", "'b'"]),
    "a column twice": (
        "sample\tdose\tdose\nS1\t1\t2\n",
        ["1 column id occurs more than once", "'dose': line 1, column 2"],
    ),
    "a column without a name": ("sample\t\tdose\nS1\t1\t2\n", ["1 column without an id", "line 1, column 2"]),
    "an open quote": ('sample,note\nS1,"fine\nS2,bad\n', ["line 2, column 2", "double quote"]),
    "no rows": ("sample\tcondition\n", ["no row follows"]),
    "another code page": (
        "sample\tsite\nS1\tPlzeň\n".encode("cp1250") + b"S2\t\x9aum\n",
        ["line 2, character 8"],
    ),
}


@pytest.mark.parametrize("case", MALFORMED)
def test_a_malformed_sheet_is_refused_with_its_place(case, tmp_path):
    content, pieces = MALFORMED[case]
    path = write(tmp_path, "s.txt", content)
    with pytest.raises(InputError, match=r"s\.txt") as caught:
        read_sample_sheet(path)
    for piece in pieces:
        assert piece in str(caught.value)


def test_ids_and_levels_stay_text_and_missing_cells_are_missing(tmp_path):
    path = write(
        tmp_path, "s.csv", "sample,code,dose,drug\nNA,007,1.50,+\nnan,008,.,-\n0012,,2,+\n1e5,NA,3,+\n"
    )
    frame = read_sample_sheet(path).frame
    assert list(frame.index) == ["NA", "nan", "0012", "1e5"]
    assert frame.index.name == "sample"
    assert frame["code"].tolist()[:2] == ["007", "008"]
    assert frame["code"].isna().tolist() == [False, False, True, True]
    assert frame["dose"].tolist()[::2] == ["1.50", "2"]
    assert frame["dose"].isna().tolist() == [False, True, False, False]
    assert frame["drug"].tolist() == ["+", "-", "+", "+"]


def test_the_id_column_is_found_by_its_name_or_taken_as_told(tmp_path):
    path = write(tmp_path, "s.tsv", tabbed("tube Sample_ID donor", "t1 S1 d1", "t2 S2 d1"))
    found = read_sample_sheet(path)
    assert list(found.frame.index) == ["S1", "S2"]
    assert "s.tsv: sample ids taken from column 'Sample_ID'" in found.notes
    assert list(read_sample_sheet(path, id_column="tube").frame.columns) == ["Sample_ID", "donor"]
    with pytest.raises(InputError, match=r"no column 'id' .* 'tube', 'Sample_ID', 'donor'"):
        read_sample_sheet(path, id_column="id")
    with pytest.raises(
        InputError, match=r"'d1': line 2.*columns without repeated values: 'tube', 'Sample_ID'"
    ):
        read_sample_sheet(path, id_column="donor")


def test_row_names_without_a_name_are_the_samples(tmp_path):
    for content in (",group\nS1,a\nS2,b\n", "group\tage\nS1\ta\t3\nS2\tb\t4\n"):
        sheet = read_sample_sheet(write(tmp_path, "s.txt", content))
        assert list(sheet.frame.index) == ["S1", "S2"]
        assert sheet.frame.index.name == "sample"
        assert sheet.frame["group"].tolist() == ["a", "b"]


def test_blanks_and_case_in_levels_are_told(tmp_path):
    sheet = read_sample_sheet(
        write(tmp_path, "s.csv", "sample,group\nS1,control \nS2,Control\nS3,case\nS4,control\n")
    )
    assert sheet.frame["group"].tolist() == ["control", "Control", "case", "control"]
    assert "s.csv: blanks at the ends of 1 cell of column 'group' left out" in sheet.notes
    assert any("differ in case alone: 'control', 'Control'" in note for note in sheet.notes)


def test_a_sheet_of_ids_alone_is_a_sheet(tmp_path):
    frame = read_sample_sheet(write(tmp_path, "s.txt", "sample\nS1\nS2\n")).frame
    assert (list(frame.index), list(frame.columns)) == (["S1", "S2"], [])


def test_the_same_sheet_comes_from_every_format(tmp_path):
    rows = [["sample", "group", "age"], ["S1", "a", "61"], ["S2", "b", "47.5"]]
    frames = [
        read_sample_sheet(write(tmp_path, "s.tsv", "\n".join("\t".join(row) for row in rows))).frame,
        read_sample_sheet(write(tmp_path, "s.csv", "\r\n".join(";".join(row) for row in rows))).frame,
        read_sample_sheet(workbook(tmp_path / "s.xlsx", [rows[0], ["S1", "a", 61], ["S2", "b", 47.5]])).frame,
    ]
    for frame in frames[1:]:
        pd.testing.assert_frame_equal(frame, frames[0])


def test_other_formats_are_no_sample_sheets(tmp_path):
    path = tmp_path / "s.parquet"
    pd.DataFrame({"sample": ["S1"], "age": [1.0]}).to_parquet(path)
    with pytest.raises(InputError, match=re.escape("a sample sheet is TSV, CSV or XLSX, not parquet")):
        read_sample_sheet(path)


KINDS = [
    (["a", "b", "b"], "classes"),
    (["1", "2", "high"], "classes"),
    (["007", "008", "009"], "classes"),
    (["inf", "1", "2"], "classes"),
    ([None, np.nan, ""], "classes"),
    (["1.5", "2", "NA", "-"], "number"),
    (["30", "41", "52", "30"], "number"),
    ([1, 2, 3] * 3, "unclear"),
    (["0", "1"] * 3, "unclear"),
    ([1.0, 2.0] * 3, "unclear"),
    (["1", "2", "3"] * 2, "number"),
    ([str(k) for k in range(10)] * 3, "unclear"),
    ([str(k) for k in range(11)] * 3, "number"),
    (["0.5", "1.5"] * 5, "number"),
]


@pytest.mark.parametrize(("cells", "kind"), KINDS)
def test_the_kind_of_a_column_follows_the_stated_rule(cells, kind):
    assert column_kind(pd.Series(cells, dtype=object)) == kind


def sheet_of(**columns):
    return pd.DataFrame(columns, index=[f"S{k}" for k in range(12)], dtype=object)


def test_group_batch_and_subject_are_pointed_out_with_a_reason_each():
    frame = sheet_of(
        Treatment=["a"] * 6 + ["b"] * 6,
        plateNumber=list("112233112233"),
        operator=["x", "y"] * 6,
        donor=[f"d{k % 4}" for k in range(12)],
        age=[str(30 + k) for k in range(12)],
        colour=["red"] * 5 + ["blue"] * 7,
        comment=[f"note {k}" for k in range(12)],
        organism=["mouse"] * 12,
        weight_after=[None] * 12,
    )
    found = suggest_columns(frame)
    assert found.group == ("Treatment", "colour")
    assert found.adjust == ("plateNumber", "operator", "age")
    assert found.subject == ("donor",)
    assert set(found.reasons) == {*found.group, *found.adjust, *found.subject}
    assert found.reasons["Treatment"] == "its name ('treatment') and 2 levels, 6 samples each"
    assert found.reasons["donor"] == "its name ('donor') and repeated values: 4 levels, 3 samples each"
    assert found.reasons["colour"] == "text with 2 levels, 5 to 7 samples each"


def test_columns_that_cannot_serve_are_not_suggested():
    frame = sheet_of(
        group=[f"g{k}" for k in range(12)],
        batch=["only"] * 12,
        patient=[f"p{k}" for k in range(12)],
        condition=["a"] * 11 + ["b"],
        status=[f"s{k % 9}" for k in range(12)],
    )
    found = suggest_columns(frame)
    assert (found.group, found.adjust, found.subject) == ((), (), ())
    assert suggest_columns(frame.iloc[:, :0]).group == ()


def test_columns_that_are_nearly_numbers_are_told(tmp_path):
    rows = [
        "sample,age,weight,site,dose",
        *(f'S{k},{40 + k},"{60 + k},5",Ulm,{k}' for k in range(5)),
        "S5,unknown,60.5,Ulm,6",
    ]
    sheet = read_sample_sheet(write(tmp_path, "s.csv", "\n".join(rows)))
    told = [note for note in sheet.notes if "counts as classes" in note]
    assert told == [
        "s.csv: column 'age' has text among its numbers ('unknown'), so it counts as classes",
        "s.csv: column 'weight' has decimal commas or thousands separators ('60,5', '61,5', '62,5' and 2 more), so it "
        "counts as classes",
    ]
    assert [column_kind(sheet.frame[name]) for name in ("age", "weight", "site", "dose")] == [
        "classes",
        "classes",
        "classes",
        "number",
    ]


def test_decimal_commas_are_read_where_a_whole_column_agrees(tmp_path):
    rows = [
        "sample;bmi;dose;area;code;lot",
        "S1;23,5;1,5;1.234,5;007;1,234",
        "S2;NA;2;;1,5;2,345",
        "S3;19,25;;9,0;2;3",
    ]
    sheet = read_sample_sheet(write(tmp_path, "s.csv", "\n".join(rows) + "\n"))
    assert sheet.frame["bmi"].tolist()[::2] == ["23.5", "19.25"]
    assert sheet.frame["dose"].tolist()[:2] == ["1.5", "2"]
    assert sheet.frame["area"].tolist()[::2] == ["1234.5", "9"]
    assert [column_kind(sheet.frame[name]) for name in ("bmi", "dose", "area")] == ["number"] * 3
    assert (
        "s.csv: column 'bmi' has decimal commas, as all its numbers agree: '23,5' is read as 23.5"
        in sheet.notes
    )
    assert sheet.frame["code"].tolist() == ["007", "1,5", "2"]
    assert sheet.frame["lot"].tolist() == ["1,234", "2,345", "3"]
    assert any("'lot' has decimal commas or thousands separators" in note for note in sheet.notes)
