"""HDF5 and Parquet files are looked at before they are believed, and faults in them are placed like any other."""

import datetime
import sys
import time

import anndata as ad
import h5py
import numpy as np
import pandas as pd
import pytest
from intake.delivered import SHEET

from workbench.errors import InputError
from workbench.intake import delivered_table, read_delivered


def read(path, **options):
    return delivered_table(path, **{"sample_ids": SHEET, "values": "continuous", **options})


@pytest.fixture
def h5ad(tmp_path):
    """Return a small .h5ad file: 3 samples, 2 features, a layer ``raw``."""
    path = tmp_path / "t.h5ad"
    adata = ad.AnnData(
        np.array([[1.5, 2], [3, np.nan], [5, 6]]),
        obs=pd.DataFrame(index=list(SHEET)),
        var=pd.DataFrame(index=["g1", "g2"]),
    )
    adata.layers["raw"] = np.array([[1, 2], [3, 4], [-5, 6]])
    adata.write_h5ad(path)
    return path


def test_the_array_must_be_named_when_there_are_several(h5ad, tmp_path):
    assert read(h5ad, array="X").values["g1"].tolist() == [1.5, 3, 5]
    table = read(h5ad, array="raw")
    assert table.values["g1"].tolist() == [1, 3, -5]
    assert table.array == "raw"
    with pytest.raises(InputError, match=r"the file has 2 arrays: 'X', 'raw'; name the one"):
        read(h5ad)
    adata = ad.read_h5ad(h5ad)
    del adata.layers["raw"]
    adata.write_h5ad(tmp_path / "one.h5ad")
    assert read(tmp_path / "one.h5ad").array == "X"
    assert "t.h5ad: read from array 'raw'" in table.notes
    with pytest.raises(InputError, match=r"no array 'counts'; the file has 'X', 'raw'; name one of them"):
        read(h5ad, array="counts")


def test_faulty_numbers_are_placed_by_row_column_feature_and_sample(h5ad):
    with pytest.raises(InputError, match=r"row 3, column 1 \(feature 'g1', sample 'S3'\): '-5'"):
        read(h5ad, array="raw", values="counts")
    with pytest.raises(InputError, match=r"not whole.*row 1, column 1 \(feature 'g1', sample 'S1'\): '1.5'"):
        read(h5ad, array="X", values="counts")


def test_a_file_that_declares_too_much_is_refused_before_it_is_read(h5ad):
    with h5py.File(h5ad, "r+") as file:
        del file["X"]
        file.create_dataset("X", shape=(3, 2), dtype="f8")
        del file["obs/_index"], file["var/_index"]
        for part in ("obs", "var"):
            file.create_dataset(
                f"{part}/_index", shape=(40_000_000_000,), dtype=h5py.string_dtype(), chunks=(1000,)
            )
    assert h5ad.stat().st_size < 100_000
    with pytest.raises(InputError, match=r"declares 40,000,000,000 cells, more than 8 GB"):
        read(h5ad, array="X")


@pytest.mark.parametrize("link", [h5py.SoftLink("/layers/raw"), h5py.ExternalLink("other.h5", "/x")])
def test_links_are_refused(h5ad, link):
    with h5py.File(h5ad, "r+") as file:
        del file["X"]
        file["X"] = link
    with pytest.raises(InputError, match=r"'X' in '/' is a link to another place"):
        read(h5ad, array="X")


def test_data_kept_in_another_file_are_refused(h5ad, tmp_path):
    with h5py.File(h5ad, "r+") as file:
        del file["X"]
        file.create_dataset("X", shape=(3, 2), dtype="f8", external=[(tmp_path / "x.bin", 0, 48)])
    with pytest.raises(InputError, match=r"'X' in '/' is a link to another place"):
        read(h5ad, array="X")


def test_hdf5_files_of_another_kind_are_told(tmp_path, h5ad):
    path = tmp_path / "other.h5"
    with h5py.File(path, "w") as file:
        file["matrix"] = np.eye(3)
    with pytest.raises(InputError, match=r"there is no 'obs' in '/', so this is no \.h5ad file"):
        read(path)
    with h5py.File(h5ad, "r+") as file:
        del file["X"]
        file["X"] = np.eye(5)
    with pytest.raises(InputError, match=r"'/X' is float64 of shape \(5, 5\); .* shape \(3, 2\)"):
        read(h5ad, array="X")


def _unstored(file):
    file.create_dataset("X", shape=(30_000, 20_000), dtype="f8", chunks=(1000, 1000), compression="gzip")
    for part, n in (("obs", 30_000), ("var", 20_000)):
        del file[f"{part}/_index"]
        file[f"{part}/_index"] = np.array([f"{part}{k}" for k in range(n)], dtype=h5py.string_dtype())


HOSTILE = {
    "a link to another file": (
        lambda f: f.__setitem__("X", h5py.ExternalLink("/etc/passwd", "/")),
        "is a link",
    ),
    "a link to itself": (lambda f: f.__setitem__("X", h5py.SoftLink("/X")), "is a link"),
    "numbers that are not there": (_unstored, "declares 600,000,000 cells, and the file stores 0 bytes"),
    "references": (
        lambda f: f.create_dataset("X", data=np.full((3, 2), f.ref), dtype=h5py.ref_dtype),
        "is object of shape",
    ),
    "texts": (lambda f: f.create_dataset("X", data=[["a", "b"]] * 3), "is object of shape"),
    "records": (lambda f: f.create_dataset("X", shape=(3, 2), dtype=[("a", "f8")]), "of shape"),
    "a group of an unknown kind": (lambda f: f.create_group("X"), "is stored as 'unknown'"),
    "other links to the ids": (
        lambda f: (f.move("obs", "other"), f.__setitem__("obs", h5py.SoftLink("/other"))),
        "'obs' in '/' is a link",
    ),
}


@pytest.mark.parametrize("kind", HOSTILE)
def test_a_hostile_file_is_refused_within_a_second(h5ad, kind):
    change, told = HOSTILE[kind]
    with h5py.File(h5ad, "r+") as file:
        del file["X"]
        change(file)
    start = time.perf_counter()
    with pytest.raises(InputError, match=told):
        read(h5ad, array="X")
    assert time.perf_counter() - start < 1


@pytest.mark.parametrize("share", [0.2, 0.5, 0.95])
def test_an_hdf5_file_cut_short_is_told_as_damaged(h5ad, share):
    data = h5ad.read_bytes()
    h5ad.write_bytes(data[: int(share * len(data))])
    with pytest.raises(InputError, match=r"t\.h5ad: the HDF5 file is damaged or cut short"):
        read(h5ad, array="X")


def test_sparse_arrays_with_damaged_indices_are_told(tmp_path):
    from scipy import sparse

    path = tmp_path / "t.h5ad"
    table = sparse.csr_matrix(np.array([[1.0, 0], [0, 2], [3, 0]]))
    ad.AnnData(table, obs=pd.DataFrame(index=list(SHEET)), var=pd.DataFrame(index=["g1", "g2"])).write_h5ad(
        path
    )
    assert read(path).values.to_numpy().tolist() == [[1, 0], [0, 2], [3, 0]]
    with h5py.File(path, "r+") as file:
        file["X/indices"][0] = 77
    with pytest.raises(InputError, match="damaged"):
        read(path)


def test_parquet_cells_that_are_no_numbers_are_placed(tmp_path):
    path = tmp_path / "t.parquet"
    frame = pd.DataFrame({"id": ["g1", "g2"], "S1": ["1", ">LOD"], "S2": [1.5, None], "S3": [1, 2]})
    frame.to_parquet(path)
    with pytest.raises(InputError, match=r"row 2, column 2 \(feature 'g2', sample 'S1'\): '>LOD'"):
        read(path)
    frame["S1"] = [datetime.date(2024, 9, 2), None]
    frame.to_parquet(path)
    with pytest.raises(InputError, match=r"row 1, column 2 .*: the date 2024-09-02"):
        read(path)
    frame["S1"] = ["NA", "1e3"]
    frame.to_parquet(path)
    np.testing.assert_array_equal(read(path).values.loc["S1"], [np.nan, 1000])


def test_parquet_ids_are_text_or_whole_numbers(tmp_path):
    path = tmp_path / "t.parquet"
    pd.DataFrame({"id": [1.5, 2.5], "S1": [1, 2]}).to_parquet(path)
    with pytest.raises(
        InputError, match=r"row 1, column 'id': the id is '1.5', neither text nor a whole number"
    ):
        read(path)
    pd.DataFrame({"id": [12, 13], "S1": [1, 2]}).to_parquet(path)
    assert read_delivered(path).rows == ("12", "13")
    pd.DataFrame({"id": ["g", "g"], "S1": [1, 2]}).to_parquet(path)
    with pytest.raises(InputError, match=r"'g': row 1, row 2"):
        read(path)
    pd.DataFrame({"id": ["g"]}).to_parquet(path)
    with pytest.raises(InputError, match=r"empty: 1 row, and 0 columns beside the ids"):
        read(path)


def test_without_pyarrow_the_way_out_is_told(tmp_path, monkeypatch):
    path = tmp_path / "t.parquet"
    pd.DataFrame({"id": ["g"], "S1": [1]}).to_parquet(path)
    monkeypatch.setitem(sys.modules, "pyarrow", None)
    with pytest.raises(InputError, match=r"needs pyarrow, .* 'parquet' extra"):
        read(path)
