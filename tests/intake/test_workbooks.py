"""Workbooks as people save them: cells that are no numbers are named by their cell, and nothing is taken on trust."""

import datetime
import re
import zipfile

import pytest
from intake.delivered import SHEET, workbook

from workbench.errors import InputError
from workbench.intake import delivered_table, read_delivered, read_sample_sheet
from workbench.intake.numbers import cell_number

HEAD = ["id", "S1", "S2", "S3"]
DAY = datetime.datetime(2024, 9, 2)

MALFORMED = {
    "a date among the values": (
        [HEAD, ["g1", 1, 2, 3], ["g2", 1, DAY, 3]],
        ["cell C3", "feature 'g2', sample 'S2'", "the date 2024-09-02"],
    ),
    "a time among the values": ([HEAD, ["g1", 1, datetime.time(12, 5), 3]], ["cell C2", "the date 12:05:00"]),
    "a boolean": ([HEAD, ["g1", True, 2, 3]], ["cell B2", "the boolean TRUE", "write 0 and 1"]),
    "an error value": (
        [HEAD, ["g1", "#N/A", 2, "#REF!"]],
        ["2 cells", "cell B2", "the error value #N/A", "cell D2", "formulas"],
    ),
    "a bare formula": (
        [HEAD, ["g1", "=1+1", 2, 3]],
        ["cell B2", "a formula without a stored value: =1+1", "save it"],
    ),
    "a decimal comma": ([HEAD, ["g1", "1,5", "0.5", 3]], ["cell B2", "'1,5', a decimal comma"]),
    "features that became dates": (
        [HEAD, ["g1", 1, 2, 3], [DAY, 1, 2, 3], [datetime.date(2024, 3, 1), 1, 2, 3]],
        ["2 row ids are no text", "cell A3 holds the date 2024-09-02", "cell A4", "SEPT2"],
    ),
    "features that are dates as text": ([HEAD, ["2-Sep", 1, 2, 3]], ["'2-Sep' (cell A2)"]),
    "a header that became a date": (
        [["id", "S1", DAY], ["g1", 1, 2]],
        ["1 name is no text", "cell C1", "the date"],
    ),
    "a feature twice": ([HEAD, ["g1", 1, 2, 3], ["g1", 1, 2, 3]], ["'g1': cell A2, cell A3"]),
    "an id missing": (
        [HEAD, ["g1", 1, 2, 3], [None, 1, 2, 3], ["g3", 1, 2, 3]],
        ["1 row without an id", "cell A3"],
    ),
    "a name missing": ([["id", "S1", None, "S3"], ["g1", 1, 2, 3]], ["1 column without an id", "cell C1"]),
    "a header alone": ([HEAD], ["row 1 is a header", "no row follows"]),
    "no cells": ([], ["no sheet of the workbook holds a cell"]),
}


def read(path, **options):
    return delivered_table(path, **{"sample_ids": SHEET, "values": "continuous", **options})


@pytest.mark.parametrize("case", MALFORMED)
def test_a_malformed_workbook_is_refused_with_the_cell(case, tmp_path):
    rows, pieces = MALFORMED[case]
    path = workbook(tmp_path / "t.xlsx", rows, formulas=True)
    with pytest.raises(InputError, match=r"t\.xlsx") as caught:
        read(path)
    for piece in pieces:
        assert piece in str(caught.value)


def test_negative_counts_are_named_by_cell_also_away_from_the_corner(tmp_path):
    rows = [[], [None, None, "id", "S1", "S2"], [None, None, "g1", 3, -4]]
    with pytest.raises(InputError, match=r"cell E3 \(feature 'g1', sample 'S2'\): '-4'"):
        read(workbook(tmp_path / "t.xlsx", rows), values="counts")


def test_the_sheet_must_be_named_when_several_hold_cells(tmp_path):
    rows = [HEAD, ["g1", 1, 2, 3]]
    others = [("legend", [["S1", "watered"], ["S2", "drought"]]), ("empty", []), ("remark", [["by us"]])]
    path = workbook(tmp_path / "t.xlsx", rows, others=others)
    with pytest.raises(
        InputError, match=r"3 sheets hold cells, 2 of them tables: 'data', 'legend'; name the"
    ):
        read(path)
    with pytest.raises(InputError, match=r"no sheet 'Data'; the workbook has 'data', 'legend', 'empty'"):
        read(path, sheet="Data")
    assert read(path, sheet="data").values.loc["S3"].tolist() == [3.0]
    alone = workbook(tmp_path / "u.xlsx", rows, others=[("empty", []), ("legend", [["what"], ["it means"]])])
    assert "u.xlsx: read from sheet 'data'" in read(alone).notes
    words = workbook(tmp_path / "v.xlsx", [["a"], ["b"]], others=[("c", [["d"]])])
    with pytest.raises(InputError, match=r"2 sheets hold cells: 'data', 'c'; name the one"):
        read(words)


def test_numeric_ids_become_text_and_padded_ones_keep_their_zeros(tmp_path):
    rows = [["id", "S1"], [12, 1], [13.0, 1], ["0014", 1], [7, 1]]
    raw = read_delivered(workbook(tmp_path / "t.xlsx", rows, formats={"A5": "0000"}))
    assert raw.rows == ("12", "13", "0014", "0007")
    assert any("2 ids are numbers" in note and "zeros" in note for note in raw.notes)


def test_the_stored_size_of_a_sheet_is_not_believed(tmp_path):
    """Some writers declare a sheet of one cell; all rows must be read all the same."""
    path = workbook(tmp_path / "t.xlsx", [HEAD, ["g1", 1, 2, 3], ["g2", 4, 5, 6]])
    whole = {}
    with zipfile.ZipFile(path) as package:
        whole = {name: package.read(name) for name in package.namelist()}
    sheet = "xl/worksheets/sheet1.xml"
    whole[sheet] = re.sub(rb'<dimension ref="[^"]*"', b'<dimension ref="A1"', whole[sheet])
    assert b'<dimension ref="A1"' in whole[sheet]
    with zipfile.ZipFile(path, "w") as package:
        for name, data in whole.items():
            package.writestr(name, data)
    assert read(path).values.shape == (3, 2)


def test_a_formula_with_a_stored_value_counts_as_its_value(tmp_path):
    path = workbook(tmp_path / "t.xlsx", [HEAD, ["g1", "=1+1", 2, 3]], formulas=True)
    with zipfile.ZipFile(path) as package:
        whole = {name: package.read(name) for name in package.namelist()}
    sheet = "xl/worksheets/sheet1.xml"
    assert b"<v />" in whole[sheet] or b"<v></v>" in whole[sheet] or b"<v/>" in whole[sheet]
    whole[sheet] = re.sub(rb"<v\s*/>|<v></v>", b"<v>2</v>", whole[sheet], count=1)
    with zipfile.ZipFile(path, "w") as package:
        for name, data in whole.items():
            package.writestr(name, data)
    assert read(path).values.loc["S1", "g1"] == 2.0


@pytest.mark.parametrize("share", [0.3, 0.6, 0.9])
def test_a_workbook_cut_short_is_told_as_damaged(tmp_path, share):
    data = workbook(tmp_path / "t.xlsx", [HEAD, ["g1", 1, 2, 3]]).read_bytes()
    path = tmp_path / "cut.xlsx"
    path.write_bytes(data[: int(share * len(data))])
    with pytest.raises(InputError, match=r"cut\.xlsx: the file is damaged or cut short"):
        read(path)


def test_other_packages_are_told_apart(tmp_path):
    for member, piece in [
        ("content.xml", "OpenDocument"),
        ("xl/workbook.bin", "xlsb"),
        ("a.txt", "without a spreadsheet"),
    ]:
        path = tmp_path / "t.xlsx"
        with zipfile.ZipFile(path, "w") as package:
            package.writestr(member, "x")
        with pytest.raises(InputError, match=piece):
            read(path)


def test_a_sample_sheet_keeps_dates_as_text_and_refuses_errors(tmp_path):
    rows = [["sample", "drawn", "dose", "well"], ["S1", DAY, 1, True], ["S2", DAY, 2.5, False]]
    sheet = read_sample_sheet(workbook(tmp_path / "s.xlsx", rows)).frame
    assert sheet.loc["S2"].tolist() == ["2024-09-02", "2.5", "FALSE"]
    rows[1][2] = "#N/A"
    with pytest.raises(
        InputError, match=r"cell C2 \(column 'dose', sample 'S1'\) holds the error value #N/A"
    ):
        read_sample_sheet(workbook(tmp_path / "s.xlsx", rows))


def test_a_first_column_of_dates_is_no_matter_when_another_holds_the_ids(tmp_path):
    path = workbook(tmp_path / "s.xlsx", [["drawn", "tube"], [DAY, "T1"], [DAY, "T2"]])
    assert list(read_sample_sheet(path, id_column="tube").frame.index) == ["T1", "T2"]
    with pytest.raises(InputError, match=r"2 sample ids are no text.*\n.*cell A2 holds the date"):
        read_sample_sheet(path)


def test_a_number_beyond_float_is_no_number():
    assert cell_number(10**400) is None
    assert cell_number(2**53) == 2.0**53


def test_numbers_stored_as_text_are_numbers(tmp_path):
    table = read(workbook(tmp_path / "t.xlsx", [HEAD, ["g1", "1.5", " 2e3 ", "NA"]]))
    assert table.values["g1"].tolist()[:2] == [1.5, 2000.0]


def test_a_workbook_that_unpacks_to_too_much_is_refused_unread(tmp_path, monkeypatch):
    path = workbook(tmp_path / "t.xlsx", [HEAD, ["g1", 1, 2, 3]])
    monkeypatch.setattr("workbench.intake.workbook.LARGEST_UNPACKED", 1000)
    with pytest.raises(InputError, match="unpacks to more than 0 GB"):
        read(path)
