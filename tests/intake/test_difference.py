"""Before a table or a sheet is replaced, what changes is told: names, values, gaps, and where the largest change is."""

import anndata as ad
import numpy as np
import pandas as pd
import pytest
from hypothesis import given
from hypothesis import strategies as st
from intake.delivered import tabbed, write

from workbench.intake import build_block, difference, sheet_difference
from workbench.settings.schema import BlockSettings

SAMPLES, FEATURES = ["S1", "S2", "S3"], ["a", "b"]
VALUES = np.array([[1.0, 2.0], [3.0, np.nan], [5.0, 6.0]])


def block(values=VALUES, samples=SAMPLES, features=FEATURES, **var):
    return ad.AnnData(
        X=np.array(values, dtype=float),
        obs=pd.DataFrame(index=list(samples)),
        var=pd.DataFrame(var, index=list(features)),
    )


def test_the_same_in_another_order_is_no_change():
    turned = block(VALUES[::-1, ::-1], SAMPLES[::-1], FEATURES[::-1])
    found = difference(block(), turned)
    assert found.same
    assert found.lines() == ("nothing changes: samples, features and values are the same",)


def test_names_of_one_side_are_gained_and_lost():
    found = difference(block(), block(VALUES, ["S2", "S3", "S9"], ["b", "c"]))
    assert (found.samples.gained, found.samples.lost, found.samples.kept) == (("S9",), ("S1",), 2)
    assert (found.features.gained, found.features.lost, found.features.kept) == (("c",), ("a",), 1)
    assert found.compared == 2
    assert found.lines()[:2] == (
        "samples: 1 gained ('S9'), 1 lost ('S1'), 2 kept",
        "features: 1 gained ('c'), 1 lost ('a'), 1 kept",
    )


def test_changed_values_and_gaps_are_counted_and_the_largest_is_shown():
    found = difference(block(), block([[1.5, 2], [3, 4], [np.nan, -60]]))
    assert (found.changed, found.gaps_filled, found.gaps_new, found.compared) == (2, 1, 1, 6)
    assert str(found.largest) == "sample 'S3', feature 'b': 6 before, -60 now"
    assert found.lines()[2] == (
        "values: 2 of 6 cells of both changed (33.3 %), most in sample 'S3', feature 'b': 6 before, -60 now; "
        "1 gap filled; 1 gap new"
    )


def test_nothing_in_common_is_told():
    found = difference(block(), block(VALUES, ["A", "B", "C"], ["x", "y"]))
    assert found.lines()[2] == "values: no cell of both to compare"
    assert not found.same


def built(root, name, text, **entries):
    write(root, name, text)
    settings = BlockSettings(**{"file": name, "layer": "clinical", "values": "mixed", **entries})
    return build_block(settings, "clinic", root, pd.DataFrame(index=pd.Index(SAMPLES, name="sample"))).adata


def test_texts_are_compared_as_texts_and_not_by_their_codes(tmp_path):
    old = built(tmp_path, "old.tsv", tabbed("id sex age", "S1 m 30", "S2 w 40", "S3 NA 50"))
    same_texts = built(tmp_path, "more.tsv", tabbed("id sex age", "S1 m 30", "S2 w 40", "S3 d 50"))
    found = difference(old, same_texts)
    assert (found.changed, found.gaps_filled) == (0, 1)
    other = built(tmp_path, "other.tsv", tabbed("id sex age", "S1 w 30", "S2 w 40", "S3 NA old"))
    found = difference(old, other)
    assert str(found.largest) == "sample 'S1', feature 'sex': 'm' before, 'w' now"
    assert found.retyped == ("age",)
    assert "features that change between number and text: 'age'" in found.lines()


def test_annotations_and_what_is_declared_are_compared(tmp_path):
    found = difference(block(kegg=["C1", ""]), block(kegg=["C1", "C2"], hmdb=["", ""]))
    assert found.annotations == ("b",)
    assert found.lines()[-1] == "annotations: other ones for 1 feature ('b')"
    text = tabbed("id S1 S2 S3", "g 1 2 3")
    one, other = (built(tmp_path, "t.tsv", text, values=v, layer="lipids") for v in ("counts", "log"))
    assert difference(one, other).lines()[-1] == "values: counts before, log now"


def test_runs_are_compared_by_name(tmp_path):
    text = tabbed("id r1 r2 r3", "g 1 2 3")
    blocks = []
    for name, last in (("a", "r2 S2 sample"), ("b", "r3 S2 sample")):
        write(tmp_path, f"{name}.tsv", tabbed("run sample role", "r1 S1 sample", last))
        blocks.append(built(tmp_path, "t.tsv", text, values="log", runs=f"{name}.tsv"))
    found = difference(*blocks)
    assert "runs: 1 gained ('r3'), 1 lost ('r2'), 1 kept" in found.lines()
    assert difference(blocks[0], blocks[0]).same


@given(
    values=st.lists(st.floats(allow_infinity=False, width=32), min_size=6, max_size=6),
    others=st.lists(st.floats(allow_infinity=False, width=32), min_size=6, max_size=6),
)
def test_the_account_adds_up_and_runs_both_ways(values, others):
    old, new = block(np.reshape(values, (3, 2))), block(np.reshape(others, (3, 2)))
    there, back = difference(old, new), difference(new, old)
    gaps, gaps_now = np.isnan(values), np.isnan(others)
    assert there.changed == back.changed == np.sum((np.array(values) != others) & ~gaps & ~gaps_now)
    assert (there.gaps_filled, there.gaps_new) == (back.gaps_new, back.gaps_filled)
    assert there.gaps_filled - there.gaps_new == gaps.sum() - gaps_now.sum()
    assert (there.largest is None) == (there.changed == 0)
    if there.largest:
        sizes = np.abs(np.array(values) - others)[~gaps & ~gaps_now]
        assert abs(there.largest.new - there.largest.old) == sizes.max()


SHEET = pd.DataFrame(
    {"group": ["dry", "wet", "wet"], "age": ["1", None, "3"]},
    index=pd.Index(SAMPLES, name="sample"),
    dtype=object,
)


def test_sheets_that_say_the_same_are_no_change():
    again = SHEET.copy()
    again.loc["S1", "group"], again.loc["S2", "age"] = " dry", "NA"
    assert sheet_difference(SHEET, again).lines() == ("nothing changes in the sample sheet: it is the same",)


CHANGES = {
    "a sample": (
        lambda s: s.drop("S1").rename({"S3": "S4"}),
        "samples: 1 gained ('S4'), 2 lost ('S1', 'S3'), 1 kept",
    ),
    "a column": (
        lambda s: s.rename(columns={"age": "years"}),
        "columns: 1 gained ('years'), 1 lost ('age'), 1 kept",
    ),
    "a cell": (
        lambda s: s.assign(group=["wet", "dry", "wet"]),
        "column 'group': another value for 2 samples, 'S1' first: 'dry' before, 'wet' now",
    ),
    "a gap": (
        lambda s: s.assign(age=["1", "2", None]),
        "column 'age': another value for 2 samples, 'S2' first: missing before, '2' now",
    ),
    "the order": (lambda s: s.iloc[[1, 0, 2]], "samples stand in another order"),
}


@pytest.mark.parametrize("case", CHANGES)
def test_a_change_of_the_sheet_is_told(case):
    change, told = CHANGES[case]
    before = SHEET.copy()
    found = sheet_difference(SHEET, change(SHEET))
    assert told in found.lines()
    assert not found.same
    pd.testing.assert_frame_equal(SHEET, before)
