"""What is written in any of the formats comes back: the same ids, letter for letter, and every bit."""

import csv
import gzip
import io

import anndata as ad
import numpy as np
import pandas as pd
import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st
from intake.delivered import workbook
from scipy import sparse

from workbench.intake import delivered_table, read_delivered, read_sample_sheet
from workbench.intake.dates import is_date

# Ids that other readers take for missing values, numbers or booleans.
TRICKY = [
    "NA",
    "nan",
    "NaN",
    "NULL",
    "None",
    "null",
    "N/A",
    "#N/A",
    "0012",
    "1e5",
    "TRUE",
    "inf",
    "-",
    ".",
    "1.0",
    "+3",
    "x y",
]
FILES = settings(deadline=None, max_examples=60, suppress_health_check=[HealthCheck.function_scoped_fixture])

letters = st.characters(codec="utf-8", exclude_categories=("Cc", "Cs", "Zl", "Zp"), exclude_characters='"')
names = st.one_of(st.sampled_from(TRICKY), st.text(letters, min_size=1, max_size=8)).filter(
    lambda name: name.strip() and not name.startswith("#") and not is_date(name)
)
numbers = st.floats(allow_infinity=False, allow_nan=True)


@st.composite
def tables(draw, most=6):
    """Return a table of random ids and numbers, samples x features."""
    samples = draw(st.lists(names, min_size=2, max_size=most, unique=True))
    features = draw(
        st.lists(names.filter(lambda name: name not in samples), min_size=2, max_size=most, unique=True)
    )
    cells = draw(
        st.lists(numbers, min_size=len(samples) * len(features), max_size=len(samples) * len(features))
    )
    return pd.DataFrame(np.array(cells).reshape(len(samples), len(features)), samples, features)


def assert_same(found, table):
    """Ids and order the same, numbers equal bit for bit, missing where missing."""
    assert list(found.index) == list(table.index)
    assert list(found.columns) == list(table.columns)
    ours, theirs = found.to_numpy(), table.to_numpy()
    missing = np.isnan(theirs)
    np.testing.assert_array_equal(np.isnan(ours), missing)
    np.testing.assert_array_equal(ours[~missing].view(np.int64), theirs[~missing].view(np.int64))


def text_of(table, separator, *, samples_in, missing):
    """Return a table as text with the shortest digits that give each number back."""
    frame = table if samples_in == "rows" else table.T
    out = io.StringIO()
    writer = csv.writer(out, delimiter=separator, lineterminator="\n")
    writer.writerow(["the id", *frame.columns])
    for name, row in zip(frame.index, frame.to_numpy(), strict=True):
        writer.writerow([name, *(missing if np.isnan(x) else repr(float(x)) for x in row)])
    return out.getvalue()


def read(path, table, **options):
    return delivered_table(path, sample_ids=list(table.index), values="continuous", **options)


@FILES
@given(
    table=tables(),
    separator=st.sampled_from("\t,;"),
    samples_in=st.sampled_from(["rows", "columns"]),
    missing=st.sampled_from(["", "NA", "NaN", "nan", "N/A", "#N/A", "null", "-", "."]),
)
def test_text_tables_come_back(tmp_path, table, separator, samples_in, missing):
    path = tmp_path / "table.txt"
    path.write_text(text_of(table, separator, samples_in=samples_in, missing=missing), "utf-8", newline="")
    found = read(path, table, samples_in=samples_in)
    assert_same(found.values, table)
    assert found.samples_in == samples_in


@FILES
@given(
    table=tables(),
    end=st.sampled_from(["\n", "\r\n", "\r"]),
    mark=st.sampled_from(["", "\ufeff"]),
    packed=st.booleans(),
)
def test_line_ends_marks_and_gzip_change_nothing(tmp_path, table, end, mark, packed):
    text = mark + text_of(table, "\t", samples_in="rows", missing="NA").replace("\n", end)
    data = text.encode("utf-8")
    path = tmp_path / "table.tsv"
    path.write_bytes(gzip.compress(data) if packed else data)
    found = read(path, table, samples_in="rows")
    assert_same(found.values, table)
    notes = " ".join(found.notes)
    assert ("byte-order mark" in notes) == bool(mark)
    assert ("gzip" in notes) == packed


@FILES
@given(table=tables(most=4))
def test_workbooks_come_back(tmp_path, table):
    """The library that writes these workbooks keeps 16 digits, and no sign of a zero: what it wrote must come back."""
    written = table.map(lambda x: float(f"{x:.16g}")).replace([np.inf, -np.inf], 1.5) + 0.0
    rows = [
        [name, *(None if np.isnan(x) else float(x) for x in row)]
        for name, row in zip(table.index, written.to_numpy(), strict=True)
    ]
    path = workbook(tmp_path / "table.xlsx", [["id", *table.columns], *rows])
    assert_same(read(path, table, samples_in="rows").values, written)


@FILES
@given(table=tables(), form=st.sampled_from(["dense", "csr", "csc"]), layer=st.booleans())
def test_h5ad_comes_back(tmp_path, table, form, layer):
    values = table.to_numpy()
    array = {"dense": np.asarray, "csr": sparse.csr_matrix, "csc": sparse.csc_matrix}[form](values)
    adata = ad.AnnData(
        obs=pd.DataFrame(index=table.index.astype(str)), var=pd.DataFrame(index=table.columns.astype(str))
    )
    if layer:
        adata.layers["raw"] = array
    else:
        adata.X = array
    path = tmp_path / "table.h5ad"
    adata.write_h5ad(path)
    found = read(path, table, samples_in="rows", array="raw" if layer else None)
    negative_zero = (values == 0) if form != "dense" else np.zeros_like(values, dtype=bool)
    assert_same(found.values, table.mask(negative_zero, 0.0))


@FILES
@given(table=tables(), indexed=st.booleans())
def test_parquet_comes_back(tmp_path, table, indexed):
    pytest.importorskip("pyarrow")
    path = tmp_path / "table.parquet"
    frame = table if indexed else table.rename_axis("the id").reset_index()
    frame.to_parquet(path)
    assert_same(read(path, table, samples_in="rows").values, table)


@FILES
@given(
    table=tables(),
    encoding=st.sampled_from(["utf-16", "utf-16-le", "utf-16-be", "utf-8-sig", "cp1252"]),
    separator=st.sampled_from("\t,;"),
)
def test_encodings_come_back(tmp_path, table, encoding, separator):
    """Names of ASCII letters, and one with letters that the encoding writes in its own way."""
    table = table.set_axis([f"g{k}" for k in range(table.shape[1] - 1)] + ["µ-Größe °C"], axis=1)
    table = table.set_axis([f"S{k}" for k in range(len(table))])
    text = text_of(table, separator, samples_in="columns", missing="NA")
    path = tmp_path / "table.txt"
    path.write_bytes(text.encode(encoding))
    found = read(path, table)
    assert_same(found.values, table)
    told = {"cp1252": "Windows-1252", "utf-8-sig": "byte-order mark"}.get(encoding, "UTF-16")
    assert any(told in note for note in found.notes)


words = st.text(st.characters(codec="ascii", categories=("L",)), min_size=1, max_size=6).filter(
    lambda word: (
        word.casefold()
        not in ("na", "nan", "null", "inf", "nd", "lod", "loq", "blod", "bloq", "und", "infinity")
    )
)


@FILES
@given(
    table=tables(most=4),
    data=st.data(),
    form=st.sampled_from(["tsv", "csv", "xlsx", "parquet"]),
    titles=st.integers(0, 2),
    groups=st.booleans(),
)
def test_titles_groups_and_annotations_come_apart(tmp_path, table, data, form, titles, groups):
    """Parquet tables have no lines above their header, and one type in a column: there annotations alone."""
    table = table.set_axis([f"S{k}" for k in range(len(table))])
    table = table.map(lambda x: float(f"{x:.6g}")).replace([np.inf, -np.inf], 1.5) + 0.0
    n, p = table.shape
    notes = data.draw(st.lists(st.lists(words, min_size=p, max_size=p), max_size=3))
    groups, titles = groups and form != "parquet", titles if form != "parquet" and n + len(notes) > 1 else 0
    names = [f"about{k}" for k in range(len(notes))]
    cells = [[None if np.isnan(x) else float(x) for x in row] for row in table.T.to_numpy()]
    rows = [["id", *names, *table.index]]
    rows += [["group", *[""] * len(notes), *(data.draw(words) for _ in range(n))]] if groups else []
    rows += [[f, *(c[k] for c in notes), *cells[k]] for k, f in enumerate(table.columns)]
    path = tmp_path / f"table.{form}"
    if form == "parquet":
        pytest.importorskip("pyarrow")
        pd.DataFrame(rows[1:], columns=rows[0]).to_parquet(path, index=False)
    elif form == "xlsx":
        workbook(path, [["a title"]] * titles + rows)
    else:
        out = io.StringIO()
        writer = csv.writer(out, delimiter={"tsv": "\t", "csv": ","}[form], lineterminator="\n")
        writer.writerows([["a title"]] * titles + rows)
        path.write_text(out.getvalue(), "utf-8", newline="")
    found = read(path, table, samples_in="columns")
    assert_same(found.values, table)
    assert found.annotations.T.to_numpy().tolist() == notes
    assert any("line of text about the samples" in note for note in found.notes) == groups
    assert any("before the header" in note for note in found.notes) == bool(titles)


@FILES
@given(data=st.data(), separator=st.sampled_from("\t,;"))
def test_sample_sheets_come_back(tmp_path, data, separator):
    ids = data.draw(st.lists(names, min_size=1, max_size=6, unique=True))
    columns = data.draw(st.lists(names.filter(lambda n: n != "sample"), min_size=1, max_size=4, unique=True))
    words = st.text(st.characters(codec="utf-8", categories=("L", "N")), min_size=1, max_size=5)
    cells = data.draw(
        st.lists(
            st.lists(words, min_size=len(columns), max_size=len(columns)),
            min_size=len(ids),
            max_size=len(ids),
        )
    )
    out = io.StringIO()
    csv.writer(out, delimiter=separator, lineterminator="\n").writerows(
        [["sample", *columns], *([name, *row] for name, row in zip(ids, cells, strict=True))]
    )
    path = tmp_path / "samples.txt"
    path.write_text(out.getvalue(), "utf-8", newline="")
    sheet = read_sample_sheet(path, id_column="sample")
    assert list(sheet.frame.index) == ids
    expected = [
        [np.nan if word in ("NA", "NaN", "nan", "null", "NULL") else word for word in row] for row in cells
    ]
    pd.testing.assert_frame_equal(
        sheet.frame, pd.DataFrame(expected, pd.Index(ids, name="sample"), columns, dtype=object)
    )


def test_every_tricky_id_survives_on_both_axes(tmp_path):
    path = tmp_path / "table.tsv"
    path.write_text(
        "\t".join(["NA", *TRICKY])
        + "\n"
        + "".join(f"{name}\t" + "\t".join("1" * len(TRICKY)) + "\n" for name in TRICKY)
    )
    raw = read_delivered(path)
    assert list(raw.columns) == TRICKY
    assert list(raw.rows) == TRICKY
    assert raw.corner == "NA"
