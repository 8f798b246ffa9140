"""Whatever stands in a file: it is read as a table, or refused in words; no other error comes through."""

import anndata as ad
import numpy as np
import pandas as pd
import pytest
from hypothesis import HealthCheck, example, given, settings
from hypothesis import strategies as st
from intake.delivered import SHEET, tabbed, workbook

from workbench.errors import InputError
from workbench.intake import delivered_table, read_sample_sheet

FILES = settings(deadline=None, max_examples=150, suppress_health_check=[HealthCheck.function_scoped_fixture])
VALUES = st.sampled_from(["counts", "intensities", "log", "continuous", "mixed"])


def outcome(read):
    """Return what ``read`` returns, or the message with which it refuses; any other error passes through."""
    try:
        return read()
    except InputError as error:
        return str(error)


def table_or_message(path, values="continuous"):
    found = outcome(lambda: delivered_table(path, sample_ids=SHEET, values=values))
    assert not isinstance(found, str) or str(path) in found
    return found


@FILES
@given(data=st.binary(max_size=200), values=VALUES)
@example(b"id\tS1\n", "counts")
@example(b"\xef\xbb\xbf", "counts")
def test_any_bytes(tmp_path, data, values):
    path = tmp_path / "any"
    path.write_bytes(data)
    table_or_message(path, values)


pieces = st.sampled_from(
    [
        "S1",
        "S2",
        "g1",
        "1",
        "1.5",
        "-2",
        "NA",
        "",
        '"',
        "\t",
        ",",
        ";",
        "\n",
        "\r",
        "#",
        "2-Sep",
        "1,5",
        " ",
        "_",
    ]
)


@FILES
@given(parts=st.lists(pieces, max_size=30), values=VALUES)
def test_any_text_of_pieces_of_tables(tmp_path, parts, values):
    path = tmp_path / "t.tsv"
    path.write_text("".join(parts), "utf-8", newline="")
    table = table_or_message(path, values)
    if not isinstance(table, str):
        assert set(table.matched) <= set(SHEET)
        assert table.values.shape == (len(table.matched), len(set(table.values.columns)))
        assert not np.isinf(table.values.to_numpy()).any()


@FILES
@given(parts=st.lists(pieces, max_size=30))
def test_any_text_as_a_sample_sheet(tmp_path, parts):
    path = tmp_path / "s.tsv"
    path.write_text("".join(parts), "utf-8", newline="")
    sheet = outcome(lambda: read_sample_sheet(path))
    if isinstance(sheet, str):
        assert str(path) in sheet
    else:
        assert sheet.frame.index.is_unique
        assert sheet.frame.columns.is_unique


def bytes_of(form, folder):
    """Return the bytes of a small table in a format."""
    frame = pd.DataFrame(np.arange(6.0).reshape(3, 2), list(SHEET), ["g1", "g2"])
    path = folder / f"whole.{form}"
    if form == "xlsx":
        workbook(
            path,
            [
                ["id", *frame.columns],
                *([name, *row] for name, row in zip(SHEET, frame.to_numpy(), strict=True)),
            ],
        )
    elif form == "h5ad":
        ad.AnnData(frame.to_numpy(), obs=frame[[]], var=frame.T[[]]).write_h5ad(path)
    elif form == "parquet":
        frame.to_parquet(path)
    else:
        path.write_text(tabbed("id S1 S2", "g1 1 2", "g2 NA 4"))
    return path.read_bytes()


@pytest.mark.parametrize("form", ["tsv", "xlsx", "parquet"])
def test_flipped_bytes(form, tmp_path):
    """A flipped byte may give another number, which the stored hash is for; it may not give another error.

    Not for HDF5: its library can loop for ever on a damaged file.
    """
    whole = bytes_of(form, tmp_path)
    rng = np.random.default_rng(5)
    path = tmp_path / f"t.{form}"
    found = []
    for _ in range(120):
        damaged = bytearray(whole)
        place, length = int(rng.integers(len(whole))), int(rng.integers(1, 5))
        damaged[place : place + length] = rng.bytes(length)
        path.write_bytes(bytes(damaged))
        found.append(table_or_message(path))
    assert any(isinstance(one, str) for one in found)


@pytest.mark.parametrize("form", ["xlsx", "h5ad", "parquet"])
def test_files_cut_short_are_refused(form, tmp_path):
    whole = bytes_of(form, tmp_path)
    path = tmp_path / f"t.{form}"
    for length in np.linspace(0, len(whole) - 1, 40).astype(int):
        path.write_bytes(whole[:length])
        assert isinstance(table_or_message(path), str)
