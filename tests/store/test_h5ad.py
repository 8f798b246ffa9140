"""Blocks come back as they were stored, in equal bytes; what is not a block is refused in plain words."""

import datetime
import json
import subprocess
import sys
import time
from pathlib import Path

import anndata as ad
import h5py
import numpy as np
import pandas as pd
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy import sparse

from workbench.errors import DamageError, InputError, StorageError, WorkbenchError
from workbench.store.h5ad import block_bytes, read_block, write_block


def block(**changes):
    """Return a block of three samples and two features."""
    obs = pd.DataFrame(
        {"condition": ["dry", "wet", "dry"], "age": [1.0, np.nan, 3.0]}, index=["S1", "S2", "S3"]
    )
    obs.index.name = "sample"
    var = pd.DataFrame({"kegg": ["C00031", ""], "m/z": [180.06, np.nan]}, index=["glucose", "unknown/1"])
    parts = {"X": np.array([[1.0, 2.0], [np.nan, 4.0], [5.0, -0.0]]), "obs": obs, "var": var}
    parts["layers"] = {"imputed": np.array([[False, True], [True, False], [False, False]])}
    parts["uns"] = {"workbench": '{"kind": "prepared"}'}
    return ad.AnnData(**(parts | changes))


def with_obs(**columns):
    """Return a block whose samples have other columns."""
    return block(obs=pd.DataFrame(columns, index=["S1", "S2", "S3"]))


def written(path, adata):
    write_block(path, adata)
    return read_block(path)


def test_a_block_comes_back_as_it_was(tmp_path):
    back = written(tmp_path / "a.h5ad", block())
    np.testing.assert_array_equal(back.X, block().X)
    assert back.X.dtype == np.float64
    assert back.layers["imputed"].dtype == bool
    np.testing.assert_array_equal(back.layers["imputed"], block().layers["imputed"])
    pd.testing.assert_frame_equal(back.obs, block().obs)
    pd.testing.assert_frame_equal(back.var, block().var)
    assert dict(back.uns) == {"workbench": '{"kind": "prepared"}'}


def test_plain_anndata_opens_the_file_and_finds_text_as_text(tmp_path):
    write_block(tmp_path / "a.h5ad", block())
    plain = ad.read_h5ad(tmp_path / "a.h5ad")
    assert plain.obs["condition"].tolist() == ["dry", "wet", "dry"]
    assert plain.obs["condition"].dtype == object
    assert plain.var_names.tolist() == ["glucose", "unknown/1"]
    assert list(plain.var.columns) == ["kegg", "m_z"]
    assert json.loads(plain.uns["workbench"]) == {"kind": "prepared"}


def test_a_second_write_gives_the_same_bytes_later_and_after_reading(tmp_path):
    write_block(tmp_path / "a.h5ad", block())
    first = (tmp_path / "a.h5ad").read_bytes()
    time.sleep(1.1)
    write_block(tmp_path / "b.h5ad", block())
    assert (tmp_path / "b.h5ad").read_bytes() == first
    assert bytes(block_bytes(read_block(tmp_path / "b.h5ad"))) == first


def test_another_process_writes_the_same_bytes(tmp_path):
    write_block(tmp_path / "a.h5ad", block())
    program = (
        "import sys; from pathlib import Path; from workbench.store.h5ad import read_block, write_block; "
        "write_block(Path(sys.argv[2]), read_block(Path(sys.argv[1])))"
    )
    subprocess.run([sys.executable, "-c", program, tmp_path / "a.h5ad", tmp_path / "b.h5ad"], check=True)
    assert (tmp_path / "b.h5ad").read_bytes() == (tmp_path / "a.h5ad").read_bytes()


def test_the_callers_block_is_not_changed(tmp_path):
    given_block = block(X=np.array([[1, 2], [3, 4], [5, 6]]))
    write_block(tmp_path / "a.h5ad", given_block)
    assert given_block.X.dtype == np.int64
    pd.testing.assert_frame_equal(given_block.var, block().var)


def test_columns_that_anndata_cannot_store_are_turned_into_what_it_can(tmp_path):
    day = datetime.datetime(2026, 1, 2)
    back = written(
        tmp_path / "a.h5ad",
        with_obs(
            mixed=[1, "x", None],
            gaps=[True, None, False],
            flags=[True, False, True],
            days=[day, None, datetime.datetime(2026, 1, 2, 3, 4)],
            nullable=pd.array([1, None, 3], dtype="Int64"),
            maybe=pd.array([True, None, False], dtype="boolean"),
            words=pd.Categorical(["a", None, "b"]),
            whole=[1, 2, 3],
            nothing=[None, None, None],
            halves=np.array([1.5, np.nan, 2], dtype=np.float32),
            text=pd.array(["p", None, "q"], dtype="string"),
        ),
    ).obs
    assert back["mixed"].tolist() == ["1", "x", ""]
    assert back["gaps"].tolist() == ["true", "", "false"]
    assert back["flags"].dtype == bool
    assert back["days"].tolist() == ["2026-01-02", "", "2026-01-02T03:04:00"]
    np.testing.assert_array_equal(back["nullable"], [1, np.nan, 3])
    assert back["maybe"].tolist() == ["true", "", "false"]
    assert back["words"].tolist() == ["a", "", "b"]
    assert back["whole"].dtype == np.int64
    assert back["nothing"].tolist() == ["", "", ""]
    np.testing.assert_array_equal(back["halves"], [1.5, np.nan, 2])
    assert back["text"].tolist() == ["p", "", "q"]


def test_names_that_hdf5_or_anndata_reserve_come_back(tmp_path):
    names = ["m/z", "m_z", "_index", "column_index", ".", "..", "a/b/c", "", "sample/id"]
    obs = pd.DataFrame({name: [place] * 3 for place, name in enumerate(names[:-1])}, index=["S1", "S2", "S3"])
    obs.index.name = names[-1]
    back = written(tmp_path / "a.h5ad", block(obs=obs)).obs
    pd.testing.assert_frame_equal(back, obs)


def test_an_index_name_that_is_a_column_too_is_left_out(tmp_path):
    obs = pd.DataFrame({"sample": ["x", "y", "z"]}, index=pd.Index(["S1", "S2", "S3"], name="sample"))
    back = written(tmp_path / "a.h5ad", block(obs=obs)).obs
    assert back.index.name is None
    assert back["sample"].tolist() == ["x", "y", "z"]


def test_whole_numbers_and_sparse_matrices_become_dense_numbers(tmp_path):
    numbers = np.array([[1, 0], [0, 2], [3, 0]])
    for matrix in (
        numbers,
        numbers.astype(np.float32),
        sparse.csr_matrix(numbers),
        np.asfortranarray(numbers),
    ):
        back = written(tmp_path / "a.h5ad", block(X=matrix))
        np.testing.assert_array_equal(back.X, numbers)
        assert back.X.dtype == np.float64


NAMES = st.text(st.characters(exclude_categories=["Cs"], exclude_characters="\0"), min_size=1, max_size=8)
CELLS = st.none() | st.booleans() | st.integers(-(2**70), 2**70) | st.floats() | st.text(max_size=6)


@settings(max_examples=60, deadline=None)
@given(
    samples=st.lists(NAMES, min_size=1, max_size=4, unique=True),
    columns=st.dictionaries(st.text(max_size=6), st.lists(CELLS, min_size=4, max_size=4), max_size=4),
    data=st.data(),
)
def test_any_table_can_be_stored_and_what_came_back_is_stored_as_it_is(
    tmp_path_factory, samples, columns, data
):
    path = tmp_path_factory.mktemp("any") / "a.h5ad"
    obs = pd.DataFrame(
        {name: pd.Series(cells[: len(samples)], dtype=object) for name, cells in columns.items()}
    )
    obs.index = pd.Index(samples, dtype=object) if columns else obs.index
    obs = obs if columns else pd.DataFrame(index=pd.Index(samples, dtype=object))
    values = data.draw(st.lists(st.floats(), min_size=len(samples), max_size=len(samples)))
    first = ad.AnnData(X=np.array(values)[:, None], obs=obs, var=pd.DataFrame(index=["f"]))
    back = written(path, first)
    assert back.obs_names.tolist() == samples
    np.testing.assert_array_equal(back.X[:, 0], values)
    assert set(back.obs.columns) <= {
        name.replace("\0", "").encode("utf-8", "replace").decode() for name in columns
    } | set(columns)
    assert bytes(block_bytes(back)) == path.read_bytes()


def refused_names(names):
    """Return a block whose samples have these names."""
    adata = block()
    adata.obs = adata.obs.set_axis(pd.Index(names, dtype=object), axis=0)
    return adata


@pytest.mark.filterwarnings("ignore:Observation names are not unique")
def test_names_that_are_missing_or_stand_twice_are_refused(tmp_path):
    with pytest.raises(InputError, match="1 samples have a name twice: 'S1'; each name may stand once"):
        write_block(tmp_path / "a.h5ad", refused_names(["S1", "S1", "S2"]))
    with pytest.raises(InputError, match="samples without a name, at position 2; name them"):
        write_block(tmp_path / "a.h5ad", refused_names(["S1", "", "S2"]))
    with pytest.raises(InputError, match="hold characters that cannot be stored"):
        write_block(tmp_path / "a.h5ad", refused_names(["S1", "S\0", "S2"]))
    assert not (tmp_path / "a.h5ad").exists()


def test_what_is_no_part_of_a_block_is_refused(tmp_path):
    for part, value in (("obsm", np.zeros((3, 2))), ("varm", np.zeros((2, 2)))):
        adata = block()
        getattr(adata, part)["scores"] = value
        with pytest.raises(InputError, match=f"a block holds no '{part}'"):
            write_block(tmp_path / "a.h5ad", adata)
    with pytest.raises(InputError, match="must be one text under a name without '/', got dict"):
        write_block(tmp_path / "a.h5ad", block(uns={"log1p": {}}))
    with pytest.raises(InputError, match="0 samples and 2 features"):
        write_block(tmp_path / "a.h5ad", block()[:0].copy())
    with pytest.raises(InputError, match="X of a block must be a table of numbers, got 0 axes of object"):
        write_block(tmp_path / "a.h5ad", ad.AnnData(obs=block().obs, var=block().var))
    with pytest.raises(InputError, match="must be a table of numbers, got 2 axes of complex"):
        write_block(tmp_path / "a.h5ad", block(layers={"x": np.ones((3, 2), dtype=complex)}))


def test_a_refused_or_failing_write_leaves_the_file_before(tmp_path, monkeypatch):
    path = tmp_path / "a.h5ad"
    write_block(path, block())
    before = path.read_bytes()
    monkeypatch.setattr("os.write", lambda *_: (_ for _ in ()).throw(OSError(28, "No space left on device")))
    with pytest.raises(StorageError, match=r"a.h5ad: the disk .* is full; .*nothing was changed"):
        write_block(path, block())
    assert path.read_bytes() == before
    assert [file.name for file in tmp_path.iterdir()] == ["a.h5ad"]


def test_a_missing_file_says_how_to_make_it(tmp_path):
    with pytest.raises(InputError, match=r"a.h5ad: is missing; run `workbench run`"):
        read_block(tmp_path / "a.h5ad")


def test_a_file_cut_off_anywhere_is_damaged(tmp_path):
    write_block(tmp_path / "a.h5ad", block())
    whole = (tmp_path / "a.h5ad").read_bytes()
    for length in (0, 4, 8, 100, 800, len(whole) // 2, len(whole) - 1):
        (tmp_path / "a.h5ad").write_bytes(whole[:length])
        with pytest.raises(
            DamageError, match=r"a.h5ad: is (not an HDF5 file|cut off or damaged).*delete it and run"
        ):
            read_block(tmp_path / "a.h5ad")


def test_foreign_files_are_refused(tmp_path):
    path = tmp_path / "a.h5ad"
    path.write_text("feature\tS1\n")
    with pytest.raises(DamageError, match="is not an HDF5 file, or its start is damaged"):
        read_block(path)
    path.unlink()
    path.mkdir()
    with pytest.raises(DamageError, match="is cut off or damaged"):
        read_block(path)
    path.rmdir()
    with h5py.File(path, "w") as file:
        file["X"] = np.zeros((3, 2))
    with pytest.raises(
        DamageError, match="is not a block that this program wrote: it is not marked as AnnData"
    ):
        read_block(path)


def change_x(file, **options):
    del file["X"]
    file.create_dataset("X", **options)


def link_loop(file):
    file["uns/again"] = file["uns"]


def deep(file):
    group = file["uns"]
    for _ in range(40):
        group = group.create_group("x")


def virtual(file):
    layout = h5py.VirtualLayout(shape=(3, 2), dtype="f8")
    layout[:] = h5py.VirtualSource("/etc/passwd", "X", shape=(3, 2))
    del file["X"]
    file.create_virtual_dataset("X", layout)


def reference(file):
    file["uns"].create_dataset("r", data=file["X"].ref, dtype=h5py.ref_dtype)


def nested(file):
    file["uns"].create_dataset("v", shape=(1,), dtype=h5py.vlen_dtype(np.float64))


def one_text_many_times(file):
    """Point 40,000 times at one text of a megabyte: 40 GB to read, 2 MB in the file."""
    cells = file["obs"].create_dataset(
        "big", data=["x" * 1_000_000] + ["y"] * 39_999, dtype=h5py.string_dtype()
    )
    place = cells.id.get_offset()
    name = Path(file.filename)
    file.close()
    with name.open("r+b") as stream:
        stream.seek(place)
        pointer = stream.read(16)
        stream.seek(place)
        stream.write(pointer * 40_000)


HOSTILE = {
    "external link": (
        lambda f: f.__setitem__("uns/x", h5py.ExternalLink("/etc/passwd", "/")),
        "'/uns/x' is a link",
    ),
    "soft link": (lambda f: f.__setitem__("uns/x", h5py.SoftLink("/X")), "'/uns/x' is a link to elsewhere"),
    "loop": (link_loop, "stands there under a second name"),
    "deep": (deep, "more than 16 groups deep"),
    "virtual": (virtual, "takes its numbers from another file"),
    "external storage": (
        lambda f: change_x(f, shape=(3, 2), dtype="f8", external=[("/etc/passwd", 0, 48)]),
        "takes its numbers from another file",
    ),
    "reference": (reference, "neither numbers nor text"),
    "nested": (nested, "neither numbers nor text"),
    "records": (
        lambda f: f["uns"].create_dataset("c", shape=(2,), dtype=[("a", "f8")]),
        "neither numbers nor text",
    ),
    "type": (lambda f: f.__setitem__("uns/t", np.dtype("f8")), "is a type without data"),
    "note": (lambda f: f.attrs.create("r", f["X"].ref, dtype=h5py.ref_dtype), "note 'r' of '/' is neither"),
    "160 GB": (
        lambda f: change_x(f, shape=(3, 2), dtype="f8", chunks=(3, 2), compression="gzip"),
        "not stored in one",
    ),
    "not all there": (lambda f: change_x(f, shape=(3, 2), dtype="f8"), "'/X' is not stored in one piece"),
    "whole numbers": (
        lambda f: change_x(f, data=np.ones((3, 2), dtype=int)),
        "'X' is not a table of numbers",
    ),
    "other shape": (
        lambda f: change_x(f, data=np.ones((4, 2))),
        "layer 'imputed' is not a table of the shape",
    ),
    "column": (
        lambda f: (f["obs"].__delitem__("age"), f["obs"].create_dataset("age", data=np.ones(4))),
        "column 'age' of 'obs' does not fit its 3 rows",
    ),
    "no names": (lambda f: f["obs"].attrs.__delitem__("_index"), "'obs' is not a table of named columns"),
    "no table": (lambda f: f.__delitem__("var"), "'var' is missing"),
    "layer": (
        lambda f: f["layers"].create_dataset("l", data=np.ones((2, 2))),
        "layer 'l' is not a table of the shape",
    ),
    "note list": (lambda f: f["uns"].create_dataset("n", data=[1.0]), "note 'n' is not one text"),
    "obsm": (
        lambda f: f["obsm"].create_dataset("m", data=np.ones((3, 1))),
        "it holds more than a block does",
    ),
}


@pytest.mark.parametrize("kind", HOSTILE)
def test_hostile_and_foreign_content_is_refused_at_once(tmp_path, kind):
    change, told = HOSTILE[kind]
    write_block(tmp_path / "a.h5ad", block())
    with h5py.File(tmp_path / "a.h5ad", "r+") as file:
        change(file)
    start = time.perf_counter()
    with pytest.raises(DamageError, match=f"is not a block that this program wrote: .*{told}"):
        read_block(tmp_path / "a.h5ad")
    assert time.perf_counter() - start < 1


def test_a_small_file_that_claims_much_memory_is_refused_at_once(tmp_path):
    write_block(tmp_path / "a.h5ad", block())
    with h5py.File(tmp_path / "a.h5ad", "r+") as file:
        change_x(file, shape=(100_000, 200_000), dtype="f8", chunks=(1000, 1000), compression="gzip")
    assert (tmp_path / "a.h5ad").stat().st_size < 50_000
    with pytest.raises(InputError, match=r"'/X' needs 160.0 GB of memory; at most 8.6 GB are taken"):
        read_block(tmp_path / "a.h5ad")


def test_texts_that_are_pointed_at_many_times_are_added_up(tmp_path):
    write_block(tmp_path / "a.h5ad", block())
    with h5py.File(tmp_path / "a.h5ad", "r+") as file:
        one_text_many_times(file)
    with pytest.raises(InputError, match=r"its texts need 40.0 GB of memory; at most 8.6 GB are taken"):
        read_block(tmp_path / "a.h5ad")


def test_the_budget_is_the_callers(tmp_path):
    write_block(tmp_path / "a.h5ad", block())
    assert read_block(tmp_path / "a.h5ad", budget=2000).shape == (3, 2)
    with pytest.raises(InputError, match=r"needs .* of memory; at most 100 bytes are taken"):
        read_block(tmp_path / "a.h5ad", budget=100)


@settings(max_examples=80, deadline=None)
@given(place=st.integers(0, 25_000), bit=st.integers(0, 7))
def test_a_flipped_bit_is_read_or_refused_but_never_an_unexplained_error(tmp_path_factory, place, bit):
    path = tmp_path_factory.mktemp("flip") / "a.h5ad"
    write_block(path, block())
    data = bytearray(path.read_bytes())
    data[place % len(data)] ^= 1 << bit
    path.write_bytes(bytes(data))
    try:
        assert read_block(path).shape == (3, 2)
    except WorkbenchError:
        return
