"""Tables that are no plain ones but leave no doubt: read knowingly, and every decision is told."""

import gzip

import numpy as np
import pandas as pd
import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st
from intake.delivered import SHEET, tabbed, workbook, write

from workbench.errors import InputError
from workbench.intake import delivered_table
from workbench.intake.marks import MarkFinder, Marks
from workbench.intake.quick import quick_numbers
from workbench.intake.tokens import MISSING, number_of

HEAD = "id S1 S2 S3"
FILES = settings(deadline=None, max_examples=60, suppress_health_check=[HealthCheck.function_scoped_fixture])
nan = np.nan

# name of the case: (content, options, values samples x features, pieces of the notes)
REPAIRED = {
    "decimal commas": (
        "id;S1;S2\ng1;1,5;2\ng2;-0,25;1,5E3\n",
        {},
        [[1.5, -0.25], [2, 1500]],
        ["written with decimal commas"],
    ),
    "a title that holds what parts the fields": (
        "Table S2, raw areas, peak picking of May\nid,S1,S2,S3,note 1,note 2\ng1,1,2,3,4,5\ng2,4,5,6,7,8\n",
        {},
        [[1, 4], [2, 5], [3, 6]],
        ["1 line before the header left out: 'Table S2, raw areas, peak picking of May'"],
    ),
    "a title longer than the table": (
        "Areas of run 3, by mode, by day, by plate, raw\nid,S1,S2\ng1,1,2\ng2,4,5\n",
        {},
        [[1, 4], [2, 5]],
        ["1 line before the header left out"],
    ),
    "decimal commas parted by tabs": (tabbed(HEAD, "g1 1,5 2,25 3"), {}, [[1.5], [2.25], [3]], ["commas"]),
    "decimal commas with points for thousands": (
        tabbed(HEAD, "g1 1.234.567,8 1,5 3"),
        {},
        [[1234567.8], [1.5], [3]],
        ["decimal commas, thousands apart by points"],
    ),
    "thousands apart by commas": (
        tabbed(HEAD, "g1 1,234 1,234,567 3"),
        {},
        [[1234], [1234567], [3]],
        ["decimal points, thousands apart by commas"],
    ),
    "counts with commas": (
        tabbed(HEAD, "g1 1,234 12,345 3"),
        {"values": "counts"},
        [[1234], [12345], [3]],
        ["thousands apart by commas"],
    ),
    "thousands apart by blanks": (
        "id\tS1\tS2\ng1\t1 234,5\t12\u00a0000\n",
        {},
        [[1234.5], [12000]],
        ["decimal commas, thousands apart by blanks"],
    ),
    "thousands apart by apostrophes": (
        tabbed(HEAD, "g1 1'234.5 12\u2019000 7"),
        {},
        [[1234.5], [12000], [7]],
        ["thousands apart by apostrophes"],
    ),
    "a comma named as the decimal mark": (
        tabbed(HEAD, "g1 1,234 1.234 3"),
        {"decimal": ","},
        [[1.234], [1234], [3]],
        ["decimal commas, thousands apart by points"],
    ),
    "a point named as the decimal mark": (
        tabbed(HEAD, "g1 1,234 12,345 3"),
        {"decimal": "."},
        [[1234], [12345], [3]],
        ["thousands apart by commas"],
    ),
    "under a limit": (
        tabbed(HEAD, "g1 <LOD <0.5 BLQ", "g2 1 n.d. 3"),
        {},
        [[nan, 1], [nan, nan], [nan, 3]],
        ["4 cells of 2 features under a limit or not detected ('<LOD', '<0.5', 'BLQ' and 1 more)"],
    ),
    "under a limit with a decimal comma": (
        tabbed(HEAD, "g1 <0,5 1,5 2"),
        {},
        [[nan], [1.5], [2]],
        ["('<0,5')", "decimal commas"],
    ),
    "UTF-16 with a mark": (
        tabbed(HEAD, "µ 1 2 3").encode("utf-16"),
        {},
        [[1], [2], [3]],
        ["the text is UTF-16, as its byte-order mark says"],
    ),
    "UTF-16 without a mark": (
        tabbed(HEAD, "g1 1 2 3").encode("utf-16-be"),
        {},
        [[1], [2], [3]],
        ["UTF-16 without a byte-order mark"],
    ),
    "Windows-1252": (
        tabbed(HEAD, "µ-opioid 1 2 3", "17\u03b2 1 2 3".replace("\u03b2", "ß")).encode("cp1252"),
        {},
        [[1, 1], [2, 2], [3, 3]],
        ["Windows-1252, not UTF-8", "2 lines hold letters of it: 'µ-opioid', '17ß'"],
    ),
    "Windows-1252 in gzip": (
        gzip.compress(tabbed(HEAD, "Größe 1 2 3").encode("cp1252")),
        {},
        [[1], [2], [3]],
        ["gzip", "Windows-1252"],
    ),
    "a title above the header": (
        "Table S2. Metabolites, in mmol/l\n\n" + tabbed(HEAD, "g1 1 2 3"),
        {},
        [[1], [2], [3]],
        ["2 lines before the header left out: 'Table S2. Metabolites, in mmol/l'"],
    ),
    "a title filled up with separators": (
        "Table S2,,,\n,,,\nOperator:,J,,\nid,S1,S2,S3\ng1,1,2,3\n",
        {},
        [[1], [2], [3]],
        ["3 lines before the header left out", "Operator:"],
    ),
    "names over groups of columns": (
        ",watered,,\nid,S1,S2,S3\ng1,1,2,3\n",
        {},
        [[1], [2], [3]],
        ["1 line before the header left out: 'watered'"],
    ),
    "groups above the sample names": (
        tabbed("group a a b", HEAD, "g1 1 2 3"),
        {},
        [[1], [2], [3]],
        ["1 line of text about the samples left out: 'group'"],
    ),
    "groups under the header": (
        tabbed(HEAD, "group a a b", "unit mg/l mg/l mg/l", "g1 1 2 3"),
        {},
        [[1], [2], [3]],
        ["2 lines of text about the samples left out: 'group', 'unit'"],
    ),
    "a second header line without a name": (
        tabbed(HEAD, "_ ctrl ctrl drug", "g1 1 2 3"),
        {},
        [[1], [2], [3]],
        ["1 line of text about the samples left out: 'line 2'"],
    ),
    "groups beside the sample names": (
        tabbed("id group g1 g2", "S1 a 1 10", "S2 b 2 20"),
        {},
        [[1, 10], [2, 20]],
        ["left out: 'group'"],
    ),
    "a blank first line": (
        "\n" + tabbed(HEAD, "g1 1 2 3"),
        {},
        [[1], [2], [3]],
        ["1 line before the header"],
    ),
}


@pytest.mark.parametrize("case", REPAIRED)
def test_a_table_that_leaves_no_doubt_is_read_and_told(case, tmp_path):
    content, options, expected, pieces = REPAIRED[case]
    path = write(tmp_path, "a.tsv", content)
    table = delivered_table(path, **{"sample_ids": SHEET, "values": "continuous", **options})
    np.testing.assert_array_equal(table.values.to_numpy(), np.array(expected, dtype=float))
    notes = "\n".join(table.notes)
    for piece in pieces:
        assert piece in notes
    assert len(table.decisions) <= 5
    assert all(note.partition(": ")[2] in "\n".join(table.decisions) for note in table.notes)


@pytest.mark.parametrize("case", REPAIRED)
def test_what_was_decided_reads_the_same_again(case, tmp_path):
    content, options, _, _ = REPAIRED[case]
    path = write(tmp_path, "a.tsv", content)
    options = {"sample_ids": SHEET, "values": "continuous", **options}
    first = delivered_table(path, **options)
    again = delivered_table(path, **{**options, "decimal": first.decimal, "samples_in": first.samples_in})
    pd.testing.assert_frame_equal(first.values, again.values)
    assert again.decimal == first.decimal


def test_leading_columns_become_annotations_of_the_features(tmp_path):
    head = "gene_id symbol chrom length S1 S2"
    path = write(tmp_path, "t.tsv", tabbed(head, "g1 TP53 17 2629 1 2", "g2 _ X NA 3 4"))
    table = delivered_table(path, sample_ids=SHEET, values="counts")
    expected = pd.DataFrame(
        {"symbol": ["TP53", ""], "chrom": ["17", "X"], "length": ["2629", "NA"]}, ["g1", "g2"], dtype=object
    )
    pd.testing.assert_frame_equal(table.annotations, expected)
    assert table.values.to_numpy().tolist() == [[1, 3], [2, 4]]
    assert "t.tsv: kept as annotations of the features: 'symbol', 'chrom', 'length'" in table.notes
    assert table.only_table == ()


def test_rows_before_the_first_sample_are_annotations_too(tmp_path):
    path = write(tmp_path, "t.tsv", tabbed("id f1 f2", "unit mM mg/l", "mz 180.06 _", "S1 1 2", "S2 3 4"))
    table = delivered_table(path, sample_ids=SHEET, values="continuous")
    assert table.annotations.to_dict("index") == {
        "f1": {"unit": "mM", "mz": "180.06"},
        "f2": {"unit": "mg/l", "mz": ""},
    }
    assert table.values.to_numpy().tolist() == [[1, 2], [3, 4]]


@pytest.mark.parametrize("name", ["S9", "pool1", "QC", "Blank_2"])
def test_a_column_like_a_sample_is_no_annotation(tmp_path, name):
    path = write(tmp_path, "t.tsv", tabbed(f"id chrom {name} S1", "g1 X 5 1"))
    table = delivered_table(path, sample_ids=SHEET, values="continuous")
    assert list(table.annotations.columns) == ["chrom"]
    assert table.only_table == (name,)


def test_faults_keep_their_places_when_lines_are_set_apart(tmp_path):
    lines = ["group _ a a b", "id chrom S1 S2 S3", "g1 X 1 2 3", "g2 X 1 -2 3", "g1 Y 0 0 0"]
    path = write(tmp_path, "t.tsv", "A title\n" + tabbed(*lines[:-1]))
    with pytest.raises(InputError, match=r"line 5, column 4 \(feature 'g2', sample 'S2'\): '-2'"):
        delivered_table(path, sample_ids=SHEET, values="counts")
    path = write(tmp_path, "t.tsv", "A title\n" + tabbed(*lines))
    with pytest.raises(InputError, match=r"'g1': line 4, column 1, line 6, column 1"):
        delivered_table(path, sample_ids=SHEET, values="counts")
    path = write(tmp_path, "t.tsv", tabbed("id chrom S1 S1", "group _ a a", "g1 X 1 2"))
    with pytest.raises(InputError, match=r"'S1': line 1, column 3, line 1, column 4"):
        delivered_table(path, sample_ids=SHEET, values="counts")


def test_a_workbook_with_titles_groups_and_annotations_comes_in(tmp_path):
    rows = [
        ["Table S2. Metabolites"],
        [],
        [None, None, "watered", None, "drought"],
        ["id", "hmdb", "S1", "S2", "S3"],
        [None, None, "mg/l", "mg/l", "mg/l"],
        ["g1", "HMDB0000122", "1,5", 2, "<LOD"],
        ["g2", "HMDB0000123", 1, 2, "x"],
    ]
    path = workbook(tmp_path / "t.xlsx", rows)
    with pytest.raises(InputError, match=r"cell E7 \(feature 'g2', sample 'S3'\): 'x'"):
        delivered_table(path, sample_ids=SHEET, values="continuous")
    rows[-1][-1] = 3
    table = delivered_table(workbook(path, rows), sample_ids=SHEET, values="continuous")
    np.testing.assert_array_equal(table.values.to_numpy(), [[1.5, 1], [2, 2], [nan, 3]])
    assert table.annotations["hmdb"].tolist() == ["HMDB0000122", "HMDB0000123"]
    assert (table.decimal, table.sheet, table.under_limit) == (",", "data", {"g1": 1})
    assert (
        "t.xlsx: 3 rows before the header left out: 'Table S2. Metabolites', 'watered', 'drought'"
        in table.notes
    )


def test_units_in_feature_names_are_kept_beside_them(tmp_path):
    path = write(tmp_path, "t.tsv", "id\tGlucose [mmol/l]\tCRP (mg/dl)\tage\nS1\t1\t2\t3\n")
    table = delivered_table(path, sample_ids=SHEET, values="continuous")
    assert table.annotations["unit"].to_dict() == {
        "Glucose [mmol/l]": "mmol/l",
        "CRP (mg/dl)": "mg/dl",
        "age": "",
    }


def test_a_mixed_table_reads_commas_and_limits_in_its_readings(tmp_path):
    lines = [f"P{k} {k},5 {'mild' if k % 2 else 'severe'}" for k in range(12)]
    path = write(tmp_path, "c.tsv", tabbed("id ldl stage", *lines, "P12 <5 mild"))
    table = delivered_table(path, sample_ids=[f"P{k}" for k in range(13)], values="mixed")
    np.testing.assert_array_equal(table.values["ldl"], [*(k + 0.5 for k in range(12)), nan])
    assert table.levels == {"stage": ("mild", "severe")}
    assert (table.decimal, table.under_limit) == (",", {"ldl": 1})


@FILES
@given(
    data=st.data(),
    decimal=st.sampled_from(".,"),
    thousands=st.sampled_from(["", " ", "\u00a0", "'", "x"]),
    separator=st.sampled_from("\t;"),
)
def test_any_way_to_write_numbers_comes_back(tmp_path, data, decimal, thousands, separator):
    """``x`` stands for the mark that is not the decimal one."""
    thousands = {"x": {".": ",", ",": "."}[decimal]}.get(thousands, thousands)
    cells = data.draw(st.lists(st.decimals(-(10**9), 10**9, places=2), min_size=3, max_size=9))
    shown = [f"{cell:,.2f}".translate({44: thousands, 46: decimal}) for cell in cells]
    lines = [separator.join([f"g{k}", text]) for k, text in enumerate(shown)]
    path = write(tmp_path, "t.txt", "\n".join([separator.join(["id", "S1"]), *lines]))
    table = delivered_table(path, sample_ids=SHEET, values="continuous", decimal=decimal)
    np.testing.assert_array_equal(table.values.loc["S1"], [float(cell) for cell in cells])


@FILES
@given(
    data=st.lists(st.decimals(-(10**6), 10**6, places=3, allow_nan=False), min_size=1, max_size=20),
    decimal=st.sampled_from(".,"),
    grouped=st.booleans(),
)
def test_found_marks_never_give_other_numbers(data, decimal, grouped):
    """Whatever is found without being named gives the numbers that were written, or nothing is found."""
    other = {".": ",", ",": "."}[decimal]
    texts = [f"{x:,.3f}".translate({44: other if grouped else "", 46: decimal}) for x in data]
    finder = MarkFinder()
    finder.look(texts)
    marks = finder.marks()
    if marks is not None:
        assert [marks.number(text) for text in texts] == [float(x) for x in data]


PIECES = ["1", "0", "-2", "2.5", "1e5", "+3", "NA", "nan", "N/A", "-", ".", "inf", "9007199254740993", "1_0"]
PIECES += ["0x1F", "NAN", "nan(1)", "1-2", "12345678901234567890", "<1", "-0", "1.5.2", "NA1", "\u00e9"]
pieces = st.sampled_from([*PIECES, "", " 1", "1 2", "1\v2"])


@settings(max_examples=400, deadline=None)
@given(cells=st.lists(pieces, min_size=1, max_size=8), separator=st.sampled_from("\t,;"))
@pytest.mark.filterwarnings("error::DeprecationWarning")
def test_quick_numbers_are_those_read_cell_by_cell(cells, separator):
    found = quick_numbers(separator.join(cells), separator, len(cells))
    if found is not None:
        slowly = [nan if cell in MISSING else number_of(cell) for cell in cells]
        np.testing.assert_array_equal(found, np.array(slowly, dtype=float))


def test_marks_read_only_their_own_writing():
    assert Marks(",", ".").number("1.234,5") == 1234.5
    for text in ("1.5", "12.34,5", "1,234.5", "0.123", "1.234.56"):
        assert Marks(",", ".").number(text) is None


def test_an_unknown_row_of_numbers_is_a_sample_that_the_sheet_lacks(tmp_path):
    path = write(tmp_path, "t.tsv", tabbed("id f1 f2", "rt 1.2 3.4", "control 5 6", "S1 1 2"))
    table = delivered_table(path, sample_ids=SHEET, values="continuous")
    assert list(table.annotations.columns) == ["rt"]
    assert table.only_table == ("control",)


def test_quoted_thousands_in_a_table_parted_by_commas(tmp_path):
    path = write(tmp_path, "t.csv", 'id,symbol,S1,S2\n"g1","A, b","1,234.5","2,000,000"\n')
    table = delivered_table(path, sample_ids=SHEET, values="continuous")
    assert table.values["g1"].tolist() == [1234.5, 2e6]
    assert table.annotations["symbol"].tolist() == ["A, b"]


def test_a_header_of_one_name_is_no_title(tmp_path):
    path = write(tmp_path, "t.csv", "sample,,\nS1,a,b\nS2,c,d\n")
    with pytest.raises(InputError, match=r"2 columns without an id"):
        delivered_table(path, sample_ids=SHEET, values="mixed")
