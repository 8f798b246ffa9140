"""Run sheets: every fault with its line, runs combined into samples, nothing left out in silence."""

import numpy as np
import pandas as pd
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from intake.delivered import tabbed, workbook, write

from workbench.errors import InputError
from workbench.intake import (
    OfferedNamesError,
    block_design_columns,
    build_block,
    read_names,
    read_run_sheet,
    run_columns,
    run_columns_of,
    with_run_columns,
)
from workbench.settings.schema import BlockSettings
from workbench.store import read_block, write_block

IDS = ["S1", "S2", "S3"]
SHEET = pd.DataFrame({"batch": ["x", "x", "y"]}, index=pd.Index(IDS, name="sample"), dtype=object)
RUNS = tabbed(
    "run sample role order batch column_age",
    "p1 - pool 1 b1 10",
    "r1 S1 sample 2 b1 11",
    "r2 S2 sample 3 b1 12",
    "k1 - blank 4 b2 13",
    "r3 S1 sample 5 b2 14",
)
TABLE = tabbed("id r3 k1 r1 p1 r2", "g1 8 0 2 5 3", "g2 NA 1 4 6 7")


def sheet_of(tmp_path, text, ids=IDS, **options):
    return read_run_sheet(write(tmp_path, "runs.tsv", text), ids, **options)


def built(root, runs=RUNS, table=TABLE, sheet=SHEET, **entries):
    (root / "source").mkdir(exist_ok=True)
    write(root, "source/t.tsv", table)
    base = {"file": "source/t.tsv", "layer": "metabolites", "values": "intensities"}
    if runs is not None:
        write(root, "source/runs.tsv", runs)
        base["runs"] = "source/runs.tsv"
    return build_block(BlockSettings(**{**base, **entries}), "pos", root, sheet)


def test_a_run_sheet_is_read_and_told(tmp_path):
    found = sheet_of(tmp_path, RUNS)
    assert found.frame["sample"].to_dict() == {"p1": "", "r1": "S1", "r2": "S2", "k1": "", "r3": "S1"}
    assert found.frame["order"].tolist() == [1, 2, 3, 4, 5]
    assert found.frame["replicate"].tolist() == [""] * 5
    assert found.frame.loc["k1", ["role", "batch", "column_age"]].tolist() == ["blank", "b2", "13"]
    assert found.notes == ("runs.tsv: 3 runs of 2 samples, 1 pool, 1 blank",)
    assert run_columns(tmp_path / "runs.tsv") == ("order", "batch", "column_age")


def test_columns_and_roles_are_known_in_any_case_and_any_order(tmp_path):
    found = sheet_of(tmp_path, tabbed("Role ORDER Run Sample", "POOL 1 p -", "Sample 2 r S1"))
    assert found.frame["role"].to_dict() == {"p": "pool", "r": "sample"}
    assert run_columns(tmp_path / "runs.tsv") == ("order",)


def test_other_words_of_laboratories_are_taken_and_told(tmp_path):
    text = "Sample Type\tFile Name\tsample name\tInjection Order\tsample\n"
    text += "Unknown\tr1\tx\t1\tS1\nPooled QC\tr2\t\t2\t\nBlank\tr3\t\t3\t\n"
    found = sheet_of(tmp_path, text)
    assert found.frame["role"].to_dict() == {"r1": "sample", "r2": "pool", "r3": "blank"}
    assert found.frame["sample"]["r1"] == "S1"
    assert found.notes[:2] == (
        "runs.tsv: columns read: 'File Name' as run, 'Sample Type' as role, 'Injection Order' as order",
        "runs.tsv: roles read: 'Unknown' as sample, 'Pooled QC' as pool",
    )
    assert run_columns(tmp_path / "runs.tsv") == ("sample name", "order")


def test_without_a_sample_column_a_run_is_named_as_its_sample(tmp_path):
    found = sheet_of(tmp_path, tabbed("run role", "S2 sample", "qc pool"))
    assert found.frame["sample"].to_dict() == {"S2": "S2", "qc": ""}


def test_runs_without_a_sample_of_the_sheet_are_left_out_and_listed(tmp_path):
    found = sheet_of(
        tmp_path, tabbed("run sample role", "a S1 sample", "b - sample", "c X9 sample", "d NA pool")
    )
    assert found.left_out == ("b", "c")
    assert list(found.frame.index) == ["a", "d"]
    assert found.notes[1] == (
        "runs.tsv: 2 runs without a sample of the sample sheet, left out: 'b (none)', 'c (X9)'"
    )


def test_row_names_without_a_header_are_the_runs(tmp_path):
    found = sheet_of(tmp_path, tabbed("role sample", "a sample S1", "b sample S2"))
    assert list(found.frame.index) == ["a", "b"]
    assert "the header is one field short" in found.notes[0]


def test_a_sample_that_is_called_like_a_missing_value_is_a_sample(tmp_path):
    found = sheet_of(tmp_path, tabbed("run sample role", "a NA sample"), ids=["NA"])
    assert found.frame["sample"].tolist() == ["NA"]


def test_an_order_that_is_not_whole_or_stands_twice_is_told(tmp_path):
    text = tabbed("run sample role order batch", "a S1 sample 1.5 x", "b S2 sample NA x", "c S3 sample 1.5 x")
    found = sheet_of(tmp_path, text)
    np.testing.assert_array_equal(found.frame["order"], [1.5, np.nan, 1.5])
    assert found.notes[1:] == (
        "runs.tsv: 1 run without an order: 'b'",
        "runs.tsv: 2 runs share an order within a batch: 'a', 'c'",
    )


HEAD = "run sample role order"
FAULTS = {
    "no role column": (
        tabbed("run sample", "a S1"),
        ["'run' and 'role'", "it lacks 'role'", "has 'run', 'sample'"],
    ),
    "no run column": (tabbed("id sample role", "a S1 sample"), ["it lacks 'run'"]),
    "a column twice": (
        tabbed("run role Role", "a sample pool"),
        ["columns 'role', 'Role' of the run sheet may both be the role"],
    ),
    "a run twice": (
        tabbed(HEAD, "a S1 sample 1", "a S2 sample 2"),
        ["'a': line 2, column 1, line 3, column 1"],
    ),
    "a run without a name": (tabbed(HEAD, "a S1 sample 1") + "\tS2\tsample\t2\n", ["line 3, column 1"]),
    "a role that is none": (
        tabbed(HEAD, "a S1 sample 1", "b - pol 2"),
        ["line 3, column 3 (run 'b'): the role is 'pol'; roles are sample, pool and blank"],
    ),
    "two columns for one thing": (
        "File Name\tRaw file\trole\na\tb\tsample\n",
        ["columns 'File Name', 'Raw file' of the run sheet may both be the run; name one of them 'run'"],
    ),
    "a role that nobody knows": (tabbed(HEAD, "a S1 xyz 1"), ["the role is 'xyz'; roles are"]),
    "no role": (tabbed(HEAD, "a S1 - 1"), ["line 2, column 3 (run 'a'): the role is '-'"]),
    "an order in words": (
        tabbed(HEAD, "a S1 sample first"),
        ["line 2, column 4 (run 'a'): the order is 'first'"],
    ),
    "an endless order": (tabbed(HEAD, "a S1 sample inf"), ["the order is 'inf'"]),
    "a pool of one sample": (
        tabbed(HEAD, "a S1 sample 1", "b S2 pool 2"),
        ["line 3, column 2 (run 'b'): a pool, and yet the sample 'S2' of the sample sheet"],
    ),
    "several at once": (
        tabbed(HEAD, "a S1 smpl x", "b S2 blank 2", "c S3 Qpool 3"),
        [
            "4 cells of the run sheet",
            "line 2, column 3",
            "line 2, column 4",
            "line 3, column 2",
            "line 4, column 3",
        ],
    ),
    "only pools": (tabbed(HEAD, "a - pool 1"), ["no run is of a sample"]),
    "other samples": (tabbed(HEAD, "a X sample 1"), ["no run is of a sample", "'X'", "'S1', 'S2', 'S3'"]),
    "a ragged line": ("run\trole\na\tsample\nb\tpool\tx\n", ["line 3 ('b') has 3 fields"]),
    "a short header": ("run\trole\na\tsample\tx\n", ["line 1: the header is one field short"]),
    "a header alone": ("run\trole\n", ["line 1 is a header, and no row follows"]),
}


@pytest.mark.parametrize("case", FAULTS)
def test_a_faulty_run_sheet_is_refused_with_its_place(case, tmp_path):
    text, pieces = FAULTS[case]
    with pytest.raises(InputError, match=r"runs\.tsv: ") as caught:
        sheet_of(tmp_path, text)
    for piece in pieces:
        assert piece in str(caught.value)


def test_samples_that_are_nearly_those_of_the_sheet_are_offered(tmp_path):
    text = tabbed("run sample role", "a s_1 sample", "b s_1 sample", "c S2 sample", "d s_3 pool")
    with pytest.raises(OfferedNamesError, match=r"runs\.tsv: 1 sample of the sheet's 3 may be") as caught:
        sheet_of(tmp_path, text)
    assert caught.value.match.candidates[0][:2] == ("s_1", "S1")
    assert sheet_of(tmp_path, text, names={"s_1": "S1"}).frame["sample"].tolist() == ["S1", "S1", "S2", ""]


def test_a_workbook_is_a_run_sheet_too(tmp_path):
    rows = [["run", "sample", "role", "order"], ["a", "S1", "sample", 1], ["b", None, "pool", 2.5]]
    found = read_run_sheet(workbook(tmp_path / "runs.xlsx", rows), IDS)
    assert found.frame["order"].tolist() == [1.0, 2.5]
    assert found.frame["sample"].tolist() == ["S1", ""]


@settings(max_examples=150, deadline=None)
@given(
    text=st.text(alphabet='runolesampbkch,\t\n"S1-. ', max_size=60),
    head=st.sampled_from(["", "run\tsample\trole\n"]),
)
def test_no_text_is_more_than_refused(tmp_path_factory, text, head):
    path = tmp_path_factory.mktemp("any") / "runs.tsv"
    path.write_text(head + text, encoding="utf-8", newline="")
    told = []
    for read in (lambda: read_run_sheet(path, IDS), lambda: read_names(path), lambda: run_columns(path)):
        try:
            read()
        except InputError as error:
            told.append(str(error))
    assert all(str(path) in message for message in told)


def test_the_columns_of_all_run_sheets_that_are_there(tmp_path):
    write(tmp_path, "runs.tsv", RUNS)
    base = {"file": "t.tsv", "layer": "lipids", "values": "log"}
    runs = {"a": "runs.tsv", "b": None, "c": "gone.tsv"}
    blocks = {name: BlockSettings(**base, runs=file) for name, file in runs.items()}
    assert run_columns_of(blocks, tmp_path) == {"a": ("order", "batch", "column_age")}


cells = st.text(alphabet="ab1 +_", min_size=1, max_size=4).map(str.strip).filter(lambda t: t not in ("", "-"))
rows = st.lists(
    st.tuples(st.sampled_from(["S1", "S2", "S3"]), st.sampled_from(["sample", "pool", "blank"]), cells,
              st.none() | st.integers(0, 99)), min_size=1, max_size=12,
)  # fmt: skip


@settings(max_examples=60, deadline=None)
@given(rows=rows)
def test_every_run_sheet_comes_back_as_it_was_written(tmp_path_factory, rows):
    path = tmp_path_factory.mktemp("runs") / "runs.tsv"
    frame = pd.DataFrame(
        [(s if role == "sample" else "", role, batch, order) for s, role, batch, order in rows],
        columns=["sample", "role", "batch", "order"],
        index=pd.Index([f"r{k}" for k in range(len(rows))], name="run"),
    )
    frame.to_csv(path, sep="\t")
    if not (frame["role"] == "sample").any():
        with pytest.raises(InputError, match="no run is of a sample"):
            read_run_sheet(path, IDS)
        return
    found = read_run_sheet(path, IDS).frame
    for name in ("sample", "role", "batch"):
        assert found[name].tolist() == frame[name].tolist()
    np.testing.assert_array_equal(found["order"], frame["order"].astype(float))


def test_a_block_has_samples_as_rows_and_keeps_every_run_beside_them(tmp_path):
    build = built(tmp_path)
    adata = build.adata
    assert list(adata.obs_names) == ["S1", "S2"]
    np.testing.assert_array_equal(adata.X, [[5.0, 4.0], [3.0, 7.0]])
    assert list(adata.uns["run_sheet"].index) == ["p1", "r1", "r2", "k1", "r3"]
    np.testing.assert_array_equal(adata.uns["run_values"], [[5, 6], [2, 4], [3, 7], [0, 1], [8, np.nan]])
    assert build.lines[0] == "block 'pos': 2 features, 2 samples of the sheet's 3"
    assert "runs.tsv: 3 runs of 2 samples, 1 pool, 1 blank" in build.lines
    assert "runs.tsv: 1 sample with several runs, whose values are averaged here" in build.lines
    assert sum(line.startswith("runs: runs.tsv: 3 runs of 2 samples") for line in build.decisions) == 1
    assert len(build.decisions) <= 6


def test_counts_of_several_runs_are_added_up_and_missing_where_one_is(tmp_path):
    build = built(tmp_path, values="counts")
    np.testing.assert_array_equal(build.adata.X, [[10.0, np.nan], [3.0, 7.0]])
    assert "runs.tsv: 1 sample with several runs, whose values are added up here" in build.lines


def test_runs_of_one_side_alone_are_counted_and_listed(tmp_path):
    table = tabbed("id r1 r2 x7", "g1 2 3 1")
    build = built(tmp_path, table=table)
    told = "\n".join(build.lines)
    assert "t.tsv: runs are in columns, found by their ids: 2 of the run sheet's 5 match" in told
    assert "t.tsv: 3 runs only in the run sheet: 'p1', 'k1', 'r3'" in told
    assert "t.tsv: 1 name only in the table, left out: 'x7'" in told
    assert build.adata.uns["run_values"].shape == (2, 1)


def test_a_table_of_pools_alone_is_refused(tmp_path):
    with pytest.raises(InputError, match=r"none of its runs is of a sample: 'p1', 'k1' are pools and blanks"):
        built(tmp_path, table=tabbed("id p1 k1", "g1 2 3"))


def test_the_block_comes_back_from_the_disk_with_its_runs(tmp_path):
    adata = built(tmp_path).adata
    write_block(tmp_path / "pos.h5ad", adata)
    back = read_block(tmp_path / "pos.h5ad")
    pd.testing.assert_frame_equal(back.uns["run_sheet"], adata.uns["run_sheet"])
    np.testing.assert_array_equal(back.uns["run_values"], adata.uns["run_values"])
    pd.testing.assert_frame_equal(block_design_columns(back), block_design_columns(adata))


def test_a_sample_has_the_columns_of_its_runs(tmp_path):
    build = built(tmp_path, adjust=("batch",))
    own = block_design_columns(build.adata)
    assert own.index.tolist() == ["S1", "S2"]
    assert own["order"].tolist() == [3.5, 3.0]
    assert own["batch"].tolist() == ["b1+b2", "b1"]
    assert own["column_age"].tolist() == ["12.5", "12"]
    told = "\n".join(build.lines)
    assert "runs.tsv: column 'batch' differs between the runs of 1 sample, which count as classes of" in told
    assert (
        "runs.tsv: column 'batch' stands in the sample sheet too; for this block it is the run sheet's"
        in told
    )
    assert with_run_columns(build.adata)["batch"].tolist() == ["b1+b2", "b1"]
    assert build.adata.obs["batch"].tolist() == ["x", "x"]


def test_what_a_run_lacks_its_sample_lacks(tmp_path):
    runs = tabbed(
        "run sample role batch order", "r1 S1 sample _ 1", "r3 S1 sample b1 NA", "r2 S2 sample b1 2"
    )
    own = block_design_columns(built(tmp_path, runs=runs).adata)
    assert own["batch"].isna().tolist() == [True, False]
    assert own["order"].isna().tolist() == [True, False]
    assert own["replicate"].isna().all()


def test_a_block_without_runs_has_no_columns_of_runs(tmp_path):
    adata = built(tmp_path, table=tabbed("id S1 S2", "g1 1 2"), runs=None).adata
    assert block_design_columns(adata).shape == (2, 0)
    pd.testing.assert_frame_equal(with_run_columns(adata), adata.obs)
    assert sorted(adata.uns) == ["workbench"]


@settings(max_examples=40, deadline=None)
@given(
    samples=st.lists(st.sampled_from(IDS), min_size=2, max_size=9),
    seed=st.integers(0, 2**32 - 1),
    total=st.booleans(),
)
def test_samples_are_the_mean_or_sum_of_their_runs_in_any_order(tmp_path_factory, samples, seed, total):
    rng = np.random.default_rng(seed)
    names = [f"r{k}" for k in range(len(samples))]
    values = pd.DataFrame(rng.integers(0, 50, (len(names), 3)), index=names, columns=["a", "b", "c"])
    shuffled = values.loc[rng.permutation(names)].T
    runs = tabbed("run sample role", *(f"{n} {s} sample" for n, s in zip(names, samples, strict=True)))
    root = tmp_path_factory.mktemp("runs")
    table = tabbed(" ".join(["id", *shuffled]), *(f"{i} " + " ".join(map(str, row)) for i, row in
                                                  zip(shuffled.index, shuffled.to_numpy(), strict=True)))  # fmt: skip
    adata = built(root, runs, table, values="counts" if total else "log").adata
    groups = values.groupby(pd.Series(samples, index=names))
    expected = (groups.sum() if total else groups.mean()).loc[list(adata.obs_names)]
    np.testing.assert_allclose(adata.X, expected, rtol=1e-14)
