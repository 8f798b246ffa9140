"""Tables as they should not arrive: each is refused with file, place, names, what was found and the way out."""

import bz2
import gzip
import re

import pytest
from intake.delivered import SHEET, tabbed, write

from workbench.errors import InputError
from workbench.intake import delivered_table

HEAD = "id S1 S2 S3"
GOOD = "g1 1 2 3"

# name of the case: (file name, content, options, pieces of the message)
MALFORMED = {
    "an empty file": ("a.tsv", "", {}, ["a.tsv", "empty", "header line"]),
    "blank lines alone": ("a.tsv", "\n\n  \n", {}, ["a.tsv", "holds no text"]),
    "a header alone": ("a.tsv", tabbed(HEAD), {}, ["line 1", "no row follows"]),
    "a header and separators": ("a.csv", "id,S1,S2\n,,\n,,\n", {}, ["line 1", "no row follows"]),
    "one column": ("a.tsv", "id\ng1\n", {}, ["one column wide", "'id'", "tabs, commas or semicolons"]),
    "fields parted by blanks": ("a.tsv", "id S1 S2\ng1 1 2\n", {}, ["one column wide", "'id S1 S2'"]),
    "a blank line between": (
        "a.tsv",
        tabbed(HEAD, GOOD) + "\n" + tabbed("g2 1 2 3"),
        {},
        ["1 of 3 rows", "4 fields", "line 3 is empty"],
    ),
    "a short line": (
        "a.tsv",
        tabbed(HEAD, GOOD, "g2 1 2"),
        {},
        ["line 3 ('g2') has 3 fields", "column 3, is '2'"],
    ),
    "a long line": (
        "a.tsv",
        tabbed(HEAD, GOOD, "g2 1 2 3 4"),
        {},
        ["line 3 ('g2') has 5 fields", "column 5", "'4'"],
    ),
    "a tab at the end of one line": (
        "a.tsv",
        tabbed(HEAD, GOOD, "g2 1 2 3 _"),
        {},
        ["line 3 ('g2')", "a separator stands at the end", "column 5 has no name"],
    ),
    "a tab at the end of every row": (
        "a.tsv",
        tabbed(HEAD, "g1 1 2 3 _", "g2 1 2 3 _"),
        {},
        ["2 of 2 rows", "line 2 ('g1') has 5 fields", "separator"],
    ),
    "a tab at the end of every line": (
        "a.tsv",
        tabbed(HEAD + " _", "g1 1 2 3 _"),
        {},
        ["1 column without an id", "line 1, column 5", "separator at the end"],
    ),
    "seven ragged lines": (
        "a.tsv",
        tabbed(HEAD, GOOD, *(f"x{k} 1" for k in range(7))),
        {},
        ["7 of 8 rows", "line 3", "line 7", "and 2 more"],
    ),
    "decimal commas parted by commas": (
        "a.csv",
        "id,S1,S2\ng1,1,5,2,5\ng2,1,5,2,5\n",
        {},
        ["2 of 2 rows", "line 2 ('g1') has 5 fields", "decimal commas"],
    ),
    "a header short of the id column's name, or not": (
        "a.tsv",
        tabbed("feature S1 S2", "g1 1 2 3"),
        {},
        ["1 of 1 row", "line 2 ('g1') has 4 fields"],
    ),
    "a short header with a name that is no sample": (
        "a.tsv",
        tabbed("what S1 S2", "g1 1 2 3"),
        {},
        ["line 1, column 1", "one field short", "'what' is no sample", "one column off"],
    ),
    "a quote that stays open": (
        "a.tsv",
        tabbed(HEAD, '"g1 1 2 3', "g2 4 5 6"),
        {},
        ["1 line", "line 2, column 1", "'\"g1'", "close the quotes"],
    ),
    "a quote that stays open in the header": (
        "a.csv",
        'id,S1,"S2\ng1,1,2\n',
        {},
        ["line 1, column 3", "double quote"],
    ),
    "text after a closing quote": ("a.csv", 'id,S1,S2\n"g"1,1,2\n', {}, ["line 2, column 1", "double quote"]),
    "a line break in a quoted cell": (
        "a.csv",
        'id,S1,S2\n"g\n1",1,2\n',
        {},
        ["line 2, column 1: '\"g'", "line breaks out of cells"],
    ),
    "a feature twice": (
        "a.tsv",
        tabbed(HEAD, GOOD, "g2 1 2 3", "g1 4 5 6"),
        {},
        ["1 feature id occurs more than once", "'g1': line 2, column 1, line 4, column 1"],
    ),
    "a sample twice": (
        "a.tsv",
        tabbed("id S1 S2 S1", GOOD),
        {},
        ["1 sample id occurs more than once", "'S1': line 1, column 2, line 1, column 4"],
    ),
    "a sample twice in rows": (
        "a.tsv",
        tabbed("id g1", "S1 1", "S2 2", "S1 3"),
        {},
        ["'S1': line 2", "line 4, column 1"],
    ),
    "a feature twice in the header": (
        "a.tsv",
        tabbed("id g1 g1", "S1 1 2"),
        {},
        ["1 feature id", "'g1': line 1, column 2"],
    ),
    "a row without an id": (
        "a.tsv",
        tabbed(HEAD, GOOD, "_ 4 5 6"),
        {},
        ["1 row without an id", "line 3, column 1"],
    ),
    "a column without a name": (
        "a.tsv",
        tabbed("id S1 _ S3", GOOD),
        {},
        ["1 column without an id", "line 1, column 3"],
    ),
    "a unit": (
        "a.tsv",
        tabbed(HEAD, "g1 12mg/l 2 3"),
        {},
        ["'12mg/l', a number with a unit", "take the unit out"],
    ),
    "an underscore in a number": ("a.tsv", tabbed(HEAD, "g1 1_000 2 3"), {}, ["line 2, column 2", "'1_000'"]),
    "digits of another script": (
        "a.tsv",
        tabbed(HEAD, "g1 ١٢ 2 3"),
        {},
        ["line 2, column 2", "'١٢'", "missing value is"],
    ),
    "a hexadecimal number": ("a.tsv", tabbed(HEAD, "g1 0x1F 2 3"), {}, ["line 2, column 2", "'0x1F'"]),
    "a spreadsheet's error as text": (
        "a.tsv",
        tabbed(HEAD, "g1 #REF! #DIV/0! 3"),
        {},
        ["'#REF!', a spreadsheet's error value"],
    ),
    "seven texts": (
        "a.tsv",
        tabbed(HEAD, *(f"g{k} x{k} 1 2" for k in range(7))),
        {},
        ["7 cells hold no number", "'x4'", "and 2 more", "no cell of 'S1' is a number: take annotations out"],
    ),
    "infinity": (
        "a.tsv",
        tabbed(HEAD, "g1 1 inf -Infinity"),
        {},
        ["2 cells are infinite", "line 2, column 3 (feature 'g1', sample 'S2'): 'inf'", "'-Infinity'"],
    ),
    "a number too large": ("a.tsv", tabbed(HEAD, "g1 1 1e999 2"), {}, ["1 cell is infinite", "'1e999'"]),
    "negative counts": (
        "a.tsv",
        tabbed(HEAD, "g1 1 -2 3", "g2 -1 0 0"),
        {"values": "counts"},
        [
            "2 cells are negative",
            "line 2, column 3 (feature 'g1', sample 'S2'): '-2'",
            "line 3, column 2",
            "--values log",
            "leave empty",
        ],
    ),
    "fractions in counts": (
        "a.tsv",
        tabbed(HEAD, "g1 1 2.5 3"),
        {"values": "counts"},
        ["1 cell is not whole", "line 2, column 3 (feature 'g1', sample 'S2'): '2.5'", "round"],
    ),
    "dates in features": (
        "a.tsv",
        tabbed(HEAD, "2-Sep 1 2 3", "g2 1 2 3", "1-Mar 1 2 3"),
        {},
        ["2 feature ids are dates", "'2-Sep' (line 2, column 1)", "'1-Mar' (line 4, column 1)", "SEPT2"],
    ),
    "dates in a header of features": (
        "a.tsv",
        tabbed("id g1 2024-09-02", "S1 1 2"),
        {},
        ["'2024-09-02' (line 1, column 3)"],
    ),
    "a comma that may be either mark": (
        "a.csv",
        "id;S1;S2\ng1;1,234;2\n",
        {},
        ["1 cell has a comma", "line 2, column 2", "feature 'g1'", "'1,234'", "say decimal = ','"],
    ),
    "decimal commas and points": (
        "a.csv",
        "id;S1;S2\ng1;1,5;0.5\n",
        {},
        ["1 cell holds no number", "line 2, column 2 (feature 'g1', sample 'S1'): '1,5', a decimal comma"],
    ),
    "a comma among points, perhaps a slip": (
        "a.tsv",
        tabbed(HEAD, "g1 0.5 1,234 2.25"),
        {},
        ["1 cell", "line 2, column 3", "'1,234', a thousands separator, or a decimal comma"],
    ),
    "thousands with and without separators": (
        "a.tsv",
        tabbed(HEAD, "g1 1,234.5 2345.5 1"),
        {},
        ["1 cell", "'1,234.5', a thousands separator"],
    ),
    "thousands apart in two ways": (
        "a.csv",
        "id;S1;S2\ng1;1 234;1'234\n",
        {},
        ["2 cells", "'1 234', a thousands separator"],
    ),
    "decimal points where commas are named": (
        "a.csv",
        "id;S1;S2\ng1;1,5;2.5\n",
        {"decimal": ","},
        ["1 cell holds no number with decimal commas, as decimal = ','", "line 2, column 3", "'2.5'"],
    ),
    "fractions by a comma in counts": (
        "a.csv",
        "id;S1;S2\ng1;1,5;2\n",
        {"values": "counts"},
        ["1 cell is not whole", "written with decimal commas", "'1,5'", "choose other values"],
    ),
    "a decimal mark that is none": (
        "a.tsv",
        tabbed(HEAD, GOOD),
        {"decimal": ";"},
        ["decimal is ';'", "'.', ','"],
    ),
    "over a limit": (
        "a.tsv",
        tabbed(HEAD, "g1 >ULOQ 2 3", "g2 >50 1 2"),
        {},
        ["2 cells", "'>ULOQ', a value under or over a limit", "put the limit in their place"],
    ),
    "a row of labels among the features": (
        "a.tsv",
        tabbed(HEAD, GOOD, "group a a b", "g2 1 2 3"),
        {},
        ["3 cells", "feature 'group', sample 'S3'", "no cell of 'group' is a number"],
    ),
    "an annotation twice": (
        "a.tsv",
        tabbed("id chrom chrom S1", "g1 X X 1"),
        {},
        ["1 annotation id occurs", "'chrom': line 1, column 2, line 1, column 3"],
    ),
    "a title of several fields": (
        "a.csv",
        "Table_S2,metabolites\nid,S1,S2,S3\ng1,1,2,3\n",
        {},
        ["2 of 2 rows do not have the header's 2 fields", "line 2 ('id') has 4 fields"],
    ),
    "a title above numbers that are no header": (
        "a.csv",
        "S1\n1,2,3\n4,5,6\n",
        {},
        ["one column wide", "'S1'"],
    ),
    "UTF-16 cut in a letter": (
        "a.tsv",
        tabbed(HEAD, GOOD).encode("utf-16")[:-1],
        {},
        ["line 1", "UTF-16", "cut short", "CSV UTF-8"],
    ),
    "letters of another code page": (
        "a.tsv",
        tabbed(HEAD, GOOD, "Žluť 1 2 3").encode("cp1250"),
        {},
        ["1 line not in UTF-8", "Windows-1252", "line 3, character 1", "0x8E", "CSV UTF-8"],
    ),
    "Cyrillic letters of a code page": (
        "a.tsv",
        tabbed(HEAD, "мозг 1 2 3").encode("cp1251"),
        {},
        ["1 line not in UTF-8", "line 2, character 1"],
    ),
    "two encodings in one file": (
        "a.tsv",
        tabbed(HEAD, "Größe 1 2 3").encode() + tabbed("µ 1 2 3").encode("cp1252"),
        {},
        ["1 line not in UTF-8", "line 3, character 1", "0xB5"],
    ),
    "a NUL byte": (
        "a.tsv",
        tabbed(HEAD, *[f"g{k} 1 2 3" for k in range(500)]) + "g\0 1",
        {},
        ["line 502", "NUL"],
    ),
    "no sample matches": (
        "a.tsv",
        tabbed("id A B C D", "g1 1 2 3 4", "g2 1 2 3 4"),
        {},
        ["no sample of the sheet", "'S1', 'S2', 'S3'", "'A', 'B', 'C' and 1 more", "'g1', 'g2'", "same ids"],
    ),
    "samples written otherwise": (
        "a.tsv",
        tabbed("id s_1 s_2", "g1 1 2"),
        {},
        ["2 samples of the sheet's 3 may be", "'s_1'         'S1'          case, spaces", "--accept-names"],
    ),
    "both axes match": (
        "a.tsv",
        tabbed("id S1 S2", "S3 1 2", "S1 3 4"),
        {},
        ["rows and the columns match 2 samples", "samples_in = 'rows'"],
    ),
    "samples_in against the ids": (
        "a.tsv",
        tabbed(HEAD, GOOD),
        {"samples_in": "rows"},
        ["samples_in = 'rows'", "none of the rows", "3 of the columns are", "write samples_in = 'columns'"],
    ),
    "samples_in misspelt": (
        "a.tsv",
        tabbed(HEAD, GOOD),
        {"samples_in": "row"},
        ["'row'", "'rows', 'columns'"],
    ),
    "values misspelt": ("a.tsv", tabbed(HEAD, GOOD), {"values": "count"}, ["'count'", "counts, intensities"]),
    "a sheet of a text table": ("a.tsv", tabbed(HEAD, GOOD), {"sheet": "x"}, ["sheet 'x'", "no .xlsx"]),
    "an array of a text table": ("a.tsv", tabbed(HEAD, GOOD), {"array": "X"}, ["array 'X'", "no .h5ad"]),
    "counts declared as proportions": (
        "a.tsv",
        tabbed(HEAD, "g1 900 20 3", "g2 300 40 700"),
        {"values": "proportions"},
        [
            "no proportions",
            "2 samples add up to more than 100 ('S1' to 1,200, 'S3' to 703)",
            "these may be counts",
        ],
    ),
    "intensities with decimal commas declared as counts": (
        "a.csv",
        "id;S1;S2;S3\ng1;11204,5;2;3,25\ng2;1;2;3\n",
        {"values": "counts"},
        [
            "2 cells are not whole",
            "written with decimal commas",
            "line 2, column 2",
            "'11204,5'",
            "intensities, log",
        ],
    ),
    "intensities declared as proportions": (
        "a.tsv",
        tabbed(HEAD, "g1 1900.5 2e5 3e4", "g2 300 40 700"),
        {"values": "proportions"},
        ["3 samples add up to more than 100", "these may be intensities"],
    ),
    "a title parted like the table, and no header": (
        "a.csv",
        "Table S2, raw areas\ng1,1,2,3\ng2,3,4,5\n",
        {},
        ["2 of 2 rows", "line 2 ('g1') has 4 fields"],
    ),
    "a header cut short": (
        "a.csv",
        "id,S1\ng1,1,2,3\ng2,3,4,5\n",
        {},
        ["2 of 2 rows", "line 2 ('g1') has 4 fields"],
    ),
    "a header cut short over words": (
        "a.csv",
        "id,S1\ng1,a,b,c,d,e\ng2,a,b,c,d,e\n",
        {"values": "mixed"},
        ["2 of 2 rows", "line 2 ('g1') has 6 fields"],
    ),
    "features that resemble a few samples": (
        "a.tsv",
        tabbed("id P1 P2 P3", *(f"sig{k:03d} 1 2 3" for k in range(1, 20))),
        {},
        [
            "no sample of the sheet is in the table",
            "3 of the 19 rows resemble a sample",
            "say samples_in = 'rows'",
        ],
    ),
    "an unknown mark of parting": ("a.csv", "sep=|\nid|S1\ng1|1\n", {}, ["line 1", "'|'", "semicolon"]),
    "an old Excel file": ("a.xls", b"\xd0\xcf\x11\xe0" + bytes(90), {}, ["old Excel file", ".xlsx"]),
    "a web page": ("a.xls", "<html><table></table></html>", {}, ["a web page", "TSV, CSV or XLSX"]),
    "a PDF": ("a.tsv", "%PDF-1.7", {}, ["a PDF file"]),
    "a gzip file cut short": ("a.tsv.gz", b"\x1f\x8b\x08\x00" + bytes(9), {}, ["gzip", "damaged"]),
    "a zip package": ("a.xlsx", b"PK\x03\x04" + bytes(60), {}, ["damaged or cut short"]),
    "an HDF5 file cut short": ("a.h5ad", b"\x89HDF\r\n\x1a\n" + bytes(40), {}, ["HDF5 file is damaged"]),
    "a Parquet file cut short": ("a.parquet", b"PAR1" + bytes(40), {}, ["Parquet file is damaged"]),
}

MALFORMED_MIXED = {
    "readings with a word": (
        tabbed("id ldl", *(f"P{k} {k}.5" for k in range(12)), "P12 high"),
        ["1 cell holds no number", "line 14, column 2 (feature 'ldl', sample 'P12')", "'high'"],
    ),
    "readings over a limit": (
        tabbed("id ldl", *(f"P{k} {k}.5" for k in range(12)), "P12 >90"),
        ["1 cell holds no number", "'>90', a value under or over a limit"],
    ),
    "decimal commas and points": (
        tabbed("id ldl", "P1 1,5", "P2 2.5"),
        ["1 cell", "'1,5', a decimal comma", "decimal point"],
    ),
    "a comma that may be either mark": (
        tabbed("id ldl", "P1 1,500", "P2 2,500"),
        ["nothing in the table tells which", "say decimal = ','"],
    ),
    "infinity": (tabbed("id ldl", "P1 inf", "P2 2"), ["1 cell is infinite", "feature 'ldl', sample 'P1'"]),
}


@pytest.mark.parametrize("case", MALFORMED)
def test_a_malformed_table_is_refused_with_place_and_way_out(case, tmp_path):
    name, content, options, pieces = MALFORMED[case]
    path = write(tmp_path, name, content)
    with pytest.raises(InputError, match=re.escape(name)) as caught:
        delivered_table(path, **{"sample_ids": SHEET, "values": "continuous", **options})
    for piece in pieces:
        assert piece in str(caught.value)


@pytest.mark.parametrize("case", MALFORMED_MIXED)
def test_mixed_tables_refuse_text_among_readings(case, tmp_path):
    content, pieces = MALFORMED_MIXED[case]
    path = write(tmp_path, "clinic.tsv", content)
    with pytest.raises(InputError, match=r"clinic\.tsv") as caught:
        delivered_table(path, sample_ids=[f"P{k}" for k in range(13)], values="mixed")
    for piece in pieces:
        assert piece in str(caught.value)


def test_files_that_cannot_be_opened_are_told(tmp_path):
    with pytest.raises(InputError, match=r"nowhere\.tsv: there is no such file"):
        delivered_table(tmp_path / "nowhere.tsv", sample_ids=SHEET, values="log")
    with pytest.raises(InputError, match="this is a folder"):
        delivered_table(tmp_path, sample_ids=SHEET, values="log")


def test_no_message_names_a_library_or_shows_a_traceback(tmp_path):
    for name, content, options, _ in MALFORMED.values():
        path = write(tmp_path, name, content)
        with pytest.raises(InputError, match=re.escape(name)) as caught:
            delivered_table(path, **{"sample_ids": SHEET, "values": "continuous", **options})
        for word in ("pandas", "openpyxl", "Traceback", "codec", "DataFrame", "h5py", "arrow"):
            assert word not in str(caught.value)
        assert caught.value.__cause__ is None


def test_files_too_large_are_refused_before_they_are_read(tmp_path, monkeypatch):
    monkeypatch.setattr("workbench.intake.files.LARGEST_TEXT", 1000)
    content = tabbed("id S1", *(f"g{k} 1" for k in range(300)))
    for name, data in [("t.tsv", content.encode()), ("t.tsv.gz", gzip.compress(content.encode()))]:
        with pytest.raises(InputError, match=r"more than 0 GB of text; cut the table into parts"):
            delivered_table(write(tmp_path, name, data), sample_ids=SHEET, values="log")


def test_every_date_is_listed_since_each_must_be_mended(tmp_path):
    names = [f"{day}-Sep" for day in range(1, 13)]
    path = write(tmp_path, "t.tsv", tabbed(HEAD, *(f"{name} 1 2 3" for name in names)))
    with pytest.raises(InputError, match="12 feature ids are dates") as caught:
        delivered_table(path, sample_ids=SHEET, values="log")
    assert all(f"'{name}' (line" in str(caught.value) for name in names)


def test_a_file_that_only_starts_like_another_format_is_a_table(tmp_path):
    path = write(tmp_path, "t.tsv", tabbed("bzh12 S1 S2", "g1 1 2"))
    assert delivered_table(path, sample_ids=SHEET, values="log").values.shape == (2, 1)
    packed = write(tmp_path, "t.tsv.bz2", bz2.compress(tabbed(HEAD, GOOD).encode()))
    with pytest.raises(InputError, match=r"compressed \(bzip2\).*unpack it first"):
        delivered_table(packed, sample_ids=SHEET, values="log")
