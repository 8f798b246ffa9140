"""The assay runs of a block are stored beside it, and come back as they were or are refused."""

import anndata as ad
import h5py
import numpy as np
import pandas as pd
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from workbench.errors import DamageError, InputError
from workbench.store.h5ad import block_bytes, read_block, write_block

RUNS = pd.DataFrame(
    {
        "sample": ["S1", "S2", "", "S1"],
        "role": ["sample", "sample", "pool", "sample"],
        "order": [1.0, 2, np.nan, 4],
    },
    index=pd.Index(["r1", "r2", "r3", "r4"], name="run"),
)
VALUES = np.array([[1.0, 2.0], [np.nan, -0.0], [5.0, 6.0], [7.0, np.inf]])


def block(**uns):
    frames = {"obs": pd.DataFrame(index=["S1", "S2"]), "var": pd.DataFrame(index=["a", "b"])}
    whole = {"workbench": "{}", "run_sheet": RUNS, "run_values": VALUES} | uns
    return ad.AnnData(X=np.ones((2, 2)), uns={k: v for k, v in whole.items() if v is not None}, **frames)


def test_runs_come_back_as_they_were(tmp_path):
    write_block(tmp_path / "a.h5ad", block())
    back = read_block(tmp_path / "a.h5ad")
    pd.testing.assert_frame_equal(back.uns["run_sheet"], RUNS)
    np.testing.assert_array_equal(back.uns["run_values"], VALUES)
    assert back.uns["run_values"].dtype == np.float64
    assert bytes(block_bytes(back)) == (tmp_path / "a.h5ad").read_bytes()


def test_plain_anndata_finds_the_runs(tmp_path):
    write_block(tmp_path / "a.h5ad", block())
    plain = ad.read_h5ad(tmp_path / "a.h5ad")
    assert plain.uns["run_sheet"].loc["r3", "role"] == "pool"
    np.testing.assert_array_equal(plain.uns["run_values"], VALUES)


@settings(max_examples=40, deadline=None)
@given(
    names=st.lists(st.text(st.characters(exclude_categories=["Cs"], exclude_characters="\0"), max_size=5), max_size=4,
                   unique=True),
    cells=st.lists(st.text(st.characters(exclude_categories=["Cs"], exclude_characters="\0"), max_size=4), min_size=4,
                   max_size=4),
)  # fmt: skip
def test_columns_of_any_name_come_back(tmp_path_factory, names, cells):
    path = tmp_path_factory.mktemp("runs") / "a.h5ad"
    sheet = pd.DataFrame(dict.fromkeys(names, cells), index=RUNS.index, dtype=object)
    write_block(path, block(run_sheet=sheet))
    back = read_block(path)
    assert list(back.uns["run_sheet"].columns) == names
    assert all(back.uns["run_sheet"][name].tolist() == cells for name in names)
    assert bytes(block_bytes(back)) == path.read_bytes()


REFUSED = {
    "values alone": ({"run_sheet": None}, "must be a table of runs, and uns.*got NoneType and ndarray"),
    "a sheet alone": ({"run_values": None}, "got DataFrame and NoneType"),
    "no table": ({"run_sheet": "x"}, "must be a table of runs"),
    "too few values": ({"run_values": VALUES[:3]}, "a row for each of 4 runs .* 2 features, got 3 x 2"),
    "other features": ({"run_values": VALUES[:, :1]}, "got 4 x 1"),
    "text": ({"run_values": VALUES.astype(str)}, "must be a table of numbers"),
    "no runs": ({"run_sheet": RUNS[:0], "run_values": VALUES[:0]}, "a row for each of 0 runs"),
    "a run twice": ({"run_sheet": RUNS.set_axis(list("aabc"))}, "1 runs have a name twice: 'a'"),
}


@pytest.mark.parametrize("case", REFUSED)
def test_runs_that_do_not_fit_the_block_are_not_stored(case, tmp_path):
    uns, told = REFUSED[case]
    with pytest.raises(InputError, match=told):
        write_block(tmp_path / "a.h5ad", block(**uns))
    assert not (tmp_path / "a.h5ad").exists()


def replaced(name, **data):
    def change(file):
        del file[name]
        file.create_dataset(name, **data)

    return change


HOSTILE = {
    "no values": (
        lambda f: f["uns"].__delitem__("run_values"),
        "the values of its runs are not a table of numbers",
    ),
    "no sheet": (lambda f: f["uns"].__delitem__("run_sheet"), "'run_sheet' is missing"),
    "whole numbers": (
        replaced("uns/run_values", data=np.ones((4, 2), dtype=int)),
        "are not a table of numbers",
    ),
    "other runs": (
        replaced("uns/run_values", data=np.ones((5, 2))),
        "column .* of 'run_sheet' does not fit its 5",
    ),
    "other features": (replaced("uns/run_values", data=np.ones((4, 3))), "do not fit 'X' of 2 features"),
    "packed": (
        replaced("uns/run_values", shape=(4, 2), dtype="f8", chunks=(4, 2), compression="gzip"),
        "is not stored in one piece",
    ),
    "a sheet that is no table": (replaced("uns/run_sheet", data=np.ones(4)), "'run_sheet' is missing"),
    "a column that is a table": (
        lambda f: f["uns/run_sheet"].create_group("order2"),
        "'run_sheet' is not a table of named columns",
    ),
    "elsewhere": (
        lambda f: (
            f["uns"].__delitem__("run_values"),
            f["uns"].__setitem__("run_values", h5py.SoftLink("/X")),
        ),
        "'/uns/run_values' is a link",
    ),
}


@pytest.mark.parametrize("case", HOSTILE)
def test_runs_that_this_program_did_not_write_are_refused(case, tmp_path):
    change, told = HOSTILE[case]
    write_block(tmp_path / "a.h5ad", block())
    with h5py.File(tmp_path / "a.h5ad", "r+") as file:
        change(file)
    with pytest.raises(DamageError, match=told):
        read_block(tmp_path / "a.h5ad")


def test_the_runs_count_against_the_budget(tmp_path):
    write_block(tmp_path / "a.h5ad", block(run_values=VALUES, workbench="{}"))
    with pytest.raises(InputError, match=r"'/uns/run_values' needs .* of memory"):
        read_block(tmp_path / "a.h5ad", budget=220)
