"""The table of accepted names is checked line by line, and a block is built with it as with the names of the sheet."""

import json

import pandas as pd
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from intake.delivered import tabbed, write

from workbench.errors import InputError
from workbench.intake import build_block, match_names, names_table, offered_names, read_names
from workbench.settings.schema import BlockSettings
from workbench.store import table_bytes

IDS = ["S1", "S2", "S3"]
SHEET = pd.DataFrame({"group": ["a", "b", "b"]}, index=pd.Index(IDS, name="sample"), dtype=object)
TABLE = tabbed("id s_3 S1 s_2", "g1 3 1 2")


def declared(root, table=TABLE, **entries):
    (root / "source").mkdir(exist_ok=True)
    write(root, "source/t.tsv", table)
    return BlockSettings(**{"file": "source/t.tsv", "layer": "lipids", "values": "log", **entries})


def accepted(root, block, sheet=SHEET):
    """Return the block's settings with all candidates accepted, as a command does it."""
    match = offered_names(block, root, sheet)
    write(root, "source/lipids_names.tsv", table_bytes(names_table(match)))
    return block.model_copy(update={"names": "source/lipids_names.tsv"})


def test_accepted_candidates_make_a_block(tmp_path):
    build = build_block(accepted(tmp_path, declared(tmp_path)), "lipids", tmp_path, SHEET)
    assert build.adata.X[:, 0].tolist() == [1.0, 2.0, 3.0]
    assert "t.tsv: 2 samples found by the table of names" in build.lines
    assert len(json.loads(build.adata.uns["workbench"])["names_sha256"]) == 64


def test_without_acceptance_nothing_is_built(tmp_path):
    with pytest.raises(InputError, match="say --accept-names"):
        build_block(declared(tmp_path), "lipids", tmp_path, SHEET)


def test_names_that_match_as_they_are_offer_nothing(tmp_path):
    match = offered_names(declared(tmp_path, tabbed("id S3 S1 pool", "g1 3 1 2")), tmp_path, SHEET)
    assert (match.exact, match.candidates) == (("S1", "S3"), ())
    assert (match.only_table, match.only_sheet) == (("pool",), ("S2",))


def test_names_of_runs_and_of_their_samples_are_accepted_together(tmp_path):
    block = declared(tmp_path, tabbed("id X1.raw X2.raw X3.raw", "g1 1 2 3"), runs="source/runs.tsv")
    write(
        tmp_path,
        "source/runs.tsv",
        tabbed("run sample role", "x1 s_1 sample", "x2 s_1 sample", "x3 S2 sample"),
    )
    both = accepted(tmp_path, block)
    text = (tmp_path / "source/lipids_names.tsv").read_text("utf-8")
    assert text == "delivered\tsample\ns_1\tS1\nX1.raw\tx1\nX2.raw\tx2\nX3.raw\tx3\n"
    adata = build_block(both, "lipids", tmp_path, SHEET).adata
    assert adata.X.tolist() == [[1.5], [3.0]]


def test_a_run_that_is_called_as_a_sample_is_no_trouble(tmp_path):
    block = declared(tmp_path, tabbed("id S1 S2", "g1 1 2"), runs="source/runs.tsv")
    write(tmp_path, "source/runs.tsv", tabbed("run sample role", "S1 s_1 sample", "S2 s_2 sample"))
    adata = build_block(accepted(tmp_path, block), "lipids", tmp_path, SHEET).adata
    assert adata.X.tolist() == [[1.0], [2.0]]


FAULTS = {
    "another header": (tabbed("from to", "s_2 S2"), ["'delivered' and 'sample'", "has 'from', 'to'"]),
    "an empty cell": (tabbed("delivered sample", "s_2 _"), ["1 cell is empty", "line 2, column 2"]),
    "a sample that is none": (tabbed("delivered sample", "s_2 S9"), ["line 2, column 1: 'S9' is not known"]),
    "a name twice": (tabbed("delivered sample", "s_2 S2", "s_2 S3"), ["line 3", "'s_2' stands in line 2"]),
    "a sample twice": (
        tabbed("delivered sample", "s_2 S2", "s_3 S2"),
        ["not one to one", "'S2' stands in line 2"],
    ),
    "an exchange": (
        tabbed("delivered sample", "S1 S2", "S2 S1"),
        [
            "2 rows are of samples",
            "line 2, column 1: 'S1' is a sample itself, and is said to be 'S2'",
            "swap",
        ],
    ),
    "a name that the table lacks": (
        tabbed("delivered sample", "s_4 S2"),
        ["does not have in its columns: 's_4'"],
    ),
    "a sample under two names": (tabbed("delivered sample", "s_2 S1"), ["would stand there twice"]),
}


@pytest.mark.parametrize("case", FAULTS)
def test_a_table_of_names_that_does_not_fit_is_refused(case, tmp_path):
    text, pieces = FAULTS[case]
    block = declared(tmp_path, names="source/n.tsv")
    write(tmp_path, "source/n.tsv", text)
    with pytest.raises(InputError, match=r"(n|t)\.tsv: ") as caught:
        build_block(block, "lipids", tmp_path, SHEET)
    for piece in pieces:
        assert piece in str(caught.value)


@pytest.mark.parametrize(
    "text", ["delivered\tsample\n", "delivered\tsample", "\ufeffdelivered,sample\r\n\r\n"]
)
def test_a_table_without_rows_holds_no_names(text, tmp_path):
    block = declared(tmp_path, names="source/n.tsv")
    write(tmp_path, "source/n.tsv", text)
    assert read_names(tmp_path / "source/n.tsv").rows == ()
    build = build_block(block, "lipids", tmp_path, SHEET)
    assert list(build.adata.obs_names) == ["S1"]
    assert any("left out, since the table of names does not name them" in line for line in build.lines)


def test_a_person_may_add_columns_and_use_commas(tmp_path):
    path = write(tmp_path, "n.csv", 'sample,why,delivered\nS2,"typo, says the lab",s_2\n')
    assert read_names(path).of(IDS, "sample") == {"s_2": "S2"}


disguises = st.lists(
    st.text(alphabet="sS 0123_-.#'=", min_size=1, max_size=6).filter(lambda t: t.strip()),
    max_size=6,
    unique=True,
)


@settings(max_examples=60, deadline=None)
@given(table=disguises, sheet=disguises)
def test_every_candidate_comes_back_from_the_table_of_names(tmp_path_factory, table, sheet):
    match = match_names(table, sheet)
    path = tmp_path_factory.mktemp("names") / "n.tsv"
    path.write_bytes(table_bytes(names_table(match)))
    expected = {delivered: sample for delivered, sample, _ in match.candidates}
    assert read_names(path).of(sheet, "sample") == expected


def test_exchanged_rows_are_put_right_along_a_chain_and_told(tmp_path):
    swap = [{"samples": ["S1", "S2", "S3"], "reason": "rack turned"}]
    block = declared(tmp_path, tabbed("id S1 S2 S3", "g1 1 2 3"), swap=swap)
    build = build_block(block, "lipids", tmp_path, SHEET)
    assert build.adata.X[:, 0].tolist() == [3.0, 1.0, 2.0]
    assert list(build.adata.obs_names) == IDS
    told = "swap undone: each row of 'S1' -> 'S2' -> 'S3' -> 'S1' belongs to the next (rack turned)"
    assert told in build.lines
    assert f"swap: {told}" in build.decisions
    assert json.loads(build.adata.uns["workbench"])["swap"] == swap


def test_a_swap_with_a_sample_that_has_no_row_moves_the_other(tmp_path):
    block = declared(
        tmp_path, tabbed("id S1 S2", "g1 1 2"), swap=[{"samples": ["S2", "S3"], "reason": "labels"}]
    )
    adata = build_block(block, "lipids", tmp_path, SHEET).adata
    assert dict(zip(adata.obs_names, adata.X[:, 0], strict=True)) == {"S1": 1.0, "S3": 2.0}


def test_exchanged_samples_exchange_all_their_runs(tmp_path):
    swap = [{"samples": ["S1", "S2"], "reason": "labels"}]
    block = declared(tmp_path, tabbed("id a b c", "g1 1 3 8"), runs="source/runs.tsv", swap=swap)
    write(tmp_path, "source/runs.tsv", tabbed("run sample role", "a S1 sample", "b S1 sample", "c S2 sample"))
    adata = build_block(block, "lipids", tmp_path, SHEET).adata
    assert adata.X[:, 0].tolist() == [8.0, 2.0]
    assert adata.uns["run_sheet"]["sample"].tolist() == ["S2", "S2", "S1"]


@pytest.mark.parametrize(
    ("samples", "told"),
    [([["S1", "S9"]], "swap names samples that the sheet does not have: 'S9'"),
     ([["S1", "S2"], ["S2", "S3"]], "swap names 'S2' more than once; join the chains")],
)  # fmt: skip
def test_a_swap_that_is_none_is_refused(samples, told, tmp_path):
    block = declared(tmp_path, swap=[{"samples": chain, "reason": "x"} for chain in samples])
    with pytest.raises(InputError, match=told):
        build_block(block, "lipids", tmp_path, SHEET)


@settings(max_examples=40, deadline=None)
@given(
    order=st.permutations(IDS),
    chain=st.permutations(IDS).flatmap(lambda p: st.integers(2, 3).map(lambda k: p[:k])),
)
def test_undoing_a_swap_gives_every_sample_its_own_row(tmp_path_factory, order, chain):
    """Rows are exchanged along the chain, then put right by it."""
    root = tmp_path_factory.mktemp("swap")
    truth = {name: float(k) for k, name in enumerate(IDS)}
    label = {owner: name for name, owner in zip(chain, [*chain[1:], chain[0]], strict=True)}
    cells = {label.get(owner, owner): value for owner, value in truth.items()}
    table = tabbed(" ".join(["id", *order]), " ".join(["g1", *(str(cells[name]) for name in order)]))
    block = declared(root, table, swap=[{"samples": list(chain), "reason": "x"}])
    adata = build_block(block, "lipids", root, SHEET).adata
    assert dict(zip(adata.obs_names, adata.X[:, 0], strict=True)) == truth
