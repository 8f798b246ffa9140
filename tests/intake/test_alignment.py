"""Tables meet the sample sheet by id alone: orientation, order, and what each side has alone are found and told."""

import numpy as np
import pandas as pd
import pytest
from hypothesis import given
from hypothesis import strategies as st
from intake.delivered import SHEET, tabbed, write
from simulated import Design, metabolites, simulate, transcripts

from workbench.errors import InputError
from workbench.intake import delivered_table


def read(path, ids=SHEET, **options):
    return delivered_table(path, **{"sample_ids": ids, "values": "continuous", **options})


def test_samples_are_found_in_columns_and_put_into_the_order_of_the_sheet(tmp_path):
    path = write(tmp_path, "t.tsv", tabbed("id S3 S1 X9", "g1 3 1 9", "g2 30 10 90"))
    table = read(path)
    expected = pd.DataFrame([[1.0, 10.0], [3.0, 30.0]], ["S1", "S3"], ["g1", "g2"])
    pd.testing.assert_frame_equal(table.values, expected)
    assert (table.samples_in, table.matched) == ("columns", ("S1", "S3"))
    assert (table.only_sheet, table.only_table) == (("S2",), ("X9",))
    assert table.notes == (
        "t.tsv: samples are in columns, found by their ids: 2 of the sheet's 3 match",
        "t.tsv: 1 sample only in the sheet: 'S2'",
        "t.tsv: 1 name only in the table, left out: 'X9'",
    )


def test_the_same_table_lying_down_gives_the_same(tmp_path):
    upright = read(write(tmp_path, "a.tsv", tabbed("id S3 S1", "g1 3 1", "g2 30 10")))
    lying = read(write(tmp_path, "b.tsv", tabbed("id g1 g2", "S3 3 30", "S1 1 10")))
    pd.testing.assert_frame_equal(upright.values, lying.values)
    assert (upright.samples_in, lying.samples_in) == ("columns", "rows")


@given(seed=st.integers(0, 2**32 - 1))
def test_no_order_of_rows_and_columns_changes_what_is_read(tmp_path_factory, seed):
    rng = np.random.default_rng(seed)
    frame = pd.DataFrame(rng.normal(size=(4, 3)), [f"g{k}" for k in range(4)], list(SHEET))
    path = tmp_path_factory.mktemp("shuffled") / "t.tsv"
    shuffled = frame.iloc[rng.permutation(4), rng.permutation(3)]
    shuffled.to_csv(path, sep="\t")
    found = read(path).values
    pd.testing.assert_frame_equal(found[frame.index], frame.T, check_exact=True)


def test_samples_in_overrules_when_both_axes_match(tmp_path):
    path = write(tmp_path, "t.tsv", tabbed("id S1 S2", "S3 1 2", "S1 3 4"))
    assert read(path, samples_in="rows").values.to_numpy().tolist() == [[3, 4], [1, 2]]
    assert read(path, samples_in="columns").values.to_numpy().tolist() == [[1, 3], [2, 4]]


def test_ten_names_are_listed_and_the_rest_counted(tmp_path):
    ids = [f"S{k:02}" for k in range(30)]
    extra = [f"X{k:02}" for k in range(12)]
    path = write(tmp_path, "t.tsv", tabbed(" ".join(["id", *ids[:3], *extra]), " ".join(["g1", *["1"] * 15])))
    notes = read(path, ids).notes
    assert notes[1].startswith("t.tsv: 27 samples only in the sheet: 'S03', 'S04'")
    assert notes[1].endswith("'S12' and 17 more")
    assert notes[2].endswith("'X09' and 2 more")


def test_columns_that_are_no_samples_may_hold_anything(tmp_path):
    """Pools that all have one name, and remarks behind the samples, are left out unread."""
    path = write(tmp_path, "t.tsv", tabbed("id S1 pool pool S2 remark", "g1 1 <LOD ? 2 good"))
    table = read(path)
    assert table.values.to_numpy().tolist() == [[1.0], [2.0]]
    assert table.only_table == ("pool", "remark")
    assert "t.tsv: 2 names only in the table, left out: 'pool (2 times)', 'remark'" in table.notes


def test_what_is_accepted_knowingly_is_told(tmp_path):
    cases = {
        "one field short": tabbed("S1 S2", "g1 1 2"),
        "1 line before the header": "# made by a counter\n" + tabbed("id S1 S2", "g1 1 2"),
        "2 lines before the header": "sep=,\n# version 2\nid,S1,S2\ng1,1,2\n",
        "2 lines of separators": tabbed("id S1 S2", "g1 1 2") + "\t\t\n\t\t\n",
        "byte-order mark": "\ufeff" + tabbed("id S1 S2", "g1 1 2"),
        "carriage return": tabbed("id S1 S2", "g1 1 2", end="\r"),
        "1 feature id with blanks": "id\tS1\tS2\ng1 \t1\t2\n",
        "letters were lost": "id\tS1\tS2\ng\ufffd\t1\t2\n",
        "1 cell of 2 (50.0 %) missing": tabbed("id S1 S2", "g1 NA 2"),
    }
    for piece, content in cases.items():
        table = read(write(tmp_path, "t.tsv", content))
        assert any(piece in note for note in table.notes), piece
        assert table.values["g1" if "g1" in table.values else table.values.columns[0]].iloc[1] == 2.0


def test_a_commented_header_is_the_header(tmp_path):
    path = write(tmp_path, "t.tsv", "# made from a biom file\n" + tabbed("#OTU S1 S2", "o1 1 2"))
    assert read(path).values.to_numpy().tolist() == [[1.0], [2.0]]


def test_quoted_fields_may_hold_separators_and_quotes(tmp_path):
    path = write(tmp_path, "t.csv", 'id,"S1","S2"\n"1,3-diol ""a""","1","2.5"\n5" end,3,4\n')
    table = read(path)
    assert list(table.values.columns) == ['1,3-diol "a"', '5" end']
    assert table.values.to_numpy().tolist() == [[1.0, 3.0], [2.5, 4.0]]


def test_negative_intensities_and_suspicious_ids_are_warned_of(tmp_path):
    lines = [f"gene{k} 1 2" for k in range(98)]
    path = write(tmp_path, "t.tsv", tabbed("id S1 S2", *lines, "44075 -1 2", "2.31E+19 1 2"))
    notes = read(path, values="intensities").notes
    assert any("t.tsv: 1 intensity is negative" in note and "--values log" in note for note in notes)
    assert any("'44075', '2.31E+19'" in note for note in notes)


def test_a_mixed_table_codes_text_by_sorted_levels(tmp_path):
    path = write(
        tmp_path,
        "t.tsv",
        tabbed(
            "id sex age code marker stage", "S1 male 61 007 + 2", "S2 female NA 008 - 3a", "S3 NA 47 007 NA 2"
        ),
    )
    table = read(path, values="mixed")
    nan = np.nan
    expected = [[1, 61, 0, 0, 0], [0, nan, 1, 1, 1], [nan, 47, 0, nan, 0]]
    np.testing.assert_array_equal(table.values.to_numpy(), expected)
    assert table.levels == {
        "sex": ("female", "male"),
        "code": ("007", "008"),
        "marker": ("+", "-"),
        "stage": ("2", "3a"),
    }


def test_a_simulated_study_comes_in_as_it_was_made(tmp_path):
    blocks = (transcripts(features=120, module_size=15), metabolites(features=40, module_size=6))
    study = simulate(Design(n=12, blocks=blocks, modules=2), seed=3)
    files = study.write(tmp_path)
    for name, values, where in (("transcripts", "counts", "columns"), ("metabolites", "intensities", "rows")):
        table = read(files[name], ids=list(study.samples.index), values=values)
        truth = study.aligned(name)
        assert table.samples_in == where
        np.testing.assert_array_equal(table.values.to_numpy(), truth.to_numpy(dtype=float))
        assert list(table.values.index) == list(truth.index)


def test_counts_must_be_whole_but_may_be_missing_or_written_with_a_point(tmp_path):
    path = write(tmp_path, "t.tsv", tabbed("id S1 S2 S3", "g1 1.0 NA 2e3"))
    assert read(path, values="counts").values["g1"].tolist()[::2] == [1.0, 2000.0]


def test_nothing_is_written_and_the_file_stays(tmp_path):
    path = write(tmp_path, "t.tsv", tabbed("id S1 S2", "g1 1 2"))
    before = path.read_bytes()
    read(path)
    assert path.read_bytes() == before
    assert [p.name for p in tmp_path.iterdir()] == ["t.tsv"]


def test_a_matching_sample_that_occurs_twice_is_refused_in_a_table_without_a_corner(tmp_path):
    """In a header that is one field short the columns are counted as they stand in it."""
    path = write(tmp_path, "t.tsv", tabbed("S1 S2 S1", "g1 1 2 3"))
    with pytest.raises(InputError, match=r"'S1': line 1, column 1, line 1, column 3"):
        read(path)


def test_one_matching_sample_is_enough(tmp_path):
    table = read(write(tmp_path, "t.tsv", tabbed("id X S2 Y", "g1 a 2 b", "g2 c 4 d")))
    assert table.values.loc["S2"].tolist() == [2.0, 4.0]
