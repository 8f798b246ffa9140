"""Names that nearly match are offered by a stated rule, one to one or not at all, and used only when accepted."""

import pandas as pd
import pytest
from hypothesis import given
from hypothesis import strategies as st
from intake.delivered import tabbed, write

from workbench.errors import InputError
from workbench.intake import delivered_table, match_names, names_table
from workbench.intake.name_forms import WrittenName, differences
from workbench.intake.names import candidate_lines

S = [f"S{k:02}" for k in range(1, 8)]
PLAIN = [f"S{k}" for k in range(1, 8)]
PATIENTS = [f"Patient_{k}" for k in range(1, 8)]
NUMBERS = [str(k) for k in range(1, 8)]


def pairs(table, sheet):
    return [(delivered, sample) for delivered, sample, _ in match_names(table, sheet).candidates]


FOUND = {
    "case": ([n.lower() for n in S], S, "case"),
    "blanks at the end": ([f"{n} " for n in S], S, "spaces or punctuation"),
    "marks": ([f"S-{k:02}" for k in range(1, 8)], S, "spaces or punctuation"),
    "zeros": (PLAIN, S, "zeros before numbers"),
    "all of these": ([f"s_{k}" for k in range(1, 8)], S, "case, spaces or punctuation, zeros before numbers"),
    "letters in full width": ([f"\uff33{k}" for k in range(1, 8)], PLAIN, "the form of its letters"),
    "prefix and suffix": ([f"RNA_{n}_pos.raw" for n in S], S, "prefix 'RNA_', suffix '_pos.raw'"),
    "suffix of the sheet": (PLAIN, [f"{n}_plasma" for n in PLAIN], "suffix '_plasma' of the sheet"),
    "both sides": ([f"{k}_pos" for k in NUMBERS], PLAIN, "prefix 'S' of the sheet, suffix '_pos'"),
    "in short": ([f"Pat{k:03}" for k in range(1, 8)], PATIENTS, "'Pat' for 'Patient'"),
    "R's X": ([f"X{k}" for k in NUMBERS], NUMBERS, "prefix 'X'"),
    "one suffix for a batch": ([f"{n}_b{1 + (n > 'S04')}" for n in S], S, "suffix '_b1'"),
    "a number of its own": ([f"S{k}_S{9 - k}_L001" for k in range(1, 8)], PLAIN, "suffix '_S8_L001'"),
}


@pytest.mark.parametrize("case", FOUND)
def test_what_a_rule_covers_is_offered_with_the_rule(case):
    table, sheet, rule = FOUND[case]
    match = match_names([*table, "pool_1", "pool_2", "blank"], sheet)
    assert [(d, s) for d, s, _ in match.candidates] == list(zip(table, sheet, strict=True))
    assert match.candidates[0][2] == rule
    assert (match.only_table, match.only_sheet) == (("pool_1", "pool_2", "blank"), ())


NOT_OFFERED = {
    "two of the table are alike": (["s1", "S-1"], ["S1"]),
    "two of the sheet are alike": (["s_1"], ["S1", "S-1"]),
    "one that matches exactly is alike": (["S1", "s_1"], ["S1", "S01"]),
    "a name that the table repeats": (["s1", "s1"], ["S1"]),
    "marks that mean something": (["KO+", "D'", "a*"], ["KO-", "D", "a"]),
    "numbers parted otherwise": (["S1_2", "1.5h"], ["S12", "15h"]),
    "digits behind a decimal point": (["dose 1.05"], ["dose 1.5"]),
    "other letters": (["Gene1", "Gene2", "Gene3"], ["S1", "S2", "S3"]),
    "a suffix that two share": (["S1_rerun", "S2_rerun", "x"], ["S1", "S2", "S3", "S4"]),
    "two modes in one table": ([f"{n}_{m}" for n in S for m in ("pos", "neg")], S),
    "visits of patients": (
        [f"P{p}_{v}" for p in range(1, 5) for v in range(1, 5)],
        [str(k) for k in range(1, 17)],
    ),
    "nothing but marks": (["--", "__"], ["..", ";"]),
    "what a table of names cannot hold": (['"S1', "S\t2"], ["S1", "S2"]),
}


@pytest.mark.parametrize("case", NOT_OFFERED)
def test_what_is_not_one_to_one_or_no_rule_covers_is_not_offered(case):
    table, sheet = NOT_OFFERED[case]
    match = match_names(table, sheet)
    assert match.candidates == ()
    assert set(match.only_sheet) == set(sheet) - set(match.exact)


def test_what_is_not_one_to_one_is_named():
    match = match_names(["s1", "S-1", "s2"], ["S1", "S2"])
    assert match.ambiguous == (("S1", ("S-1", "s1")),)
    assert candidate_lines(match)[-1] == "  not one to one, so not offered: 'S1' is like 'S-1', 's1'"


names = st.lists(
    st.tuples(st.sampled_from(["S", "ctrl", "Pat", "T-"]), st.integers(1, 300)),
    min_size=1,
    max_size=25,
    unique=True,
)
disguises = st.fixed_dictionaries(
    {
        "case": st.sampled_from([str, str.lower, str.upper]),
        "mark": st.sampled_from(["", "_", " ", ".", "-"]),
        "width": st.sampled_from([1, 3, 4]),
        "prefix": st.sampled_from(["", "RNA_", "plate1 "]),
        "suffix": st.sampled_from(["", ".raw", "_pos"]),
    }
)


def disguised(word, number, how):
    plain = how["case"](f"{word}{how['mark']}{number:0{how['width']}}")
    return f"{how['prefix']}{plain}{how['suffix']}"


@given(names=names, how=disguises, order=st.randoms(use_true_random=False))
def test_a_disguise_is_seen_through_and_to_the_right_names(names, how, order):
    truth = {disguised(word, number, how): f"{word}{number:03}" for word, number in names}
    table = [*truth, "pool", "blank"]
    order.shuffle(table)
    match = match_names(table, list(truth.values()))
    found = {d: s for d, s, _ in match.candidates} | {name: name for name in match.exact}
    assert found == truth


SHEETS = {
    "one word": S,
    "groups": [f"{group}{k}" for group in ("WT", "KO", "HET") for k in range(1, 9)],
    "patients": [f"Patient_{k}" for k in range(7, 900, 37)],
    "visits": [f"D{d}_V{v}" for d in range(1, 7) for v in range(1, 5)],
    "codes": ["AFB-17", "AFC-17", "BBD-94", "CAB-30", "GHE-71", "HAD-55", "HDA-55"],
    "numbers": [str(k) for k in range(5, 400, 17)],
}
WRITTEN = {
    "one case": lambda name, _: name.lower(),
    "no marks": lambda name, _: name.replace("_", "").replace("-", ""),
    "as R does": lambda name, _: ("X" if name[0].isdigit() else "") + name.replace("-", "."),
    "as a file": lambda name, _: f"20240103_{name.lower()} (1).mzML",
    "with its lane": lambda name, k: f"{name}_S{k}_L001",
    "with its injection": lambda name, k: f"{name}_{k:03}",
}


@pytest.mark.parametrize("written", WRITTEN)
@pytest.mark.parametrize("kind", SHEETS)
def test_a_table_that_lacks_three_samples_and_has_pools_is_matched_without_a_wrong_name(kind, written):
    """Names that are numbers cannot be told from a running number behind them: nothing is offered then."""
    sheet = SHEETS[kind]
    truth = {WRITTEN[written](name, k): name for k, name in enumerate(sheet[:-3], start=1)}
    match = match_names([*reversed(truth), "pool_1", "pool_2", "QC3", "blank 1"], sheet)
    found = {d: s for d, s, _ in match.candidates} | {name: name for name in match.exact}
    hopeless = kind == "numbers" and written in ("with its lane", "with its injection")
    assert found == ({} if hopeless else truth)


anything = st.lists(st.text(alphabet="aB1_ 0-x.", max_size=5), max_size=12)


@given(table=anything, sheet=anything)
def test_every_name_is_accounted_for_once_and_candidates_are_one_to_one(table, sheet):
    match = match_names(table, sheet)
    delivered, samples = [d for d, _, _ in match.candidates], [s for _, s, _ in match.candidates]
    assert sorted([*match.exact, *delivered, *match.only_table]) == sorted(set(table))
    assert sorted([*match.exact, *samples, *match.only_sheet]) == sorted(set(sheet))
    assert set(match.exact) == set(table) & set(sheet)
    assert len(set(delivered)) == len(delivered)


@given(table=anything, sheet=anything, order=st.randoms(use_true_random=False))
def test_the_order_of_the_names_changes_nothing(table, sheet, order):
    before = set(match_names(table, sheet).candidates)
    order.shuffle(table)
    order.shuffle(sheet)
    assert set(match_names(table, sheet).candidates) == before


def test_the_parts_of_a_name():
    assert WrittenName("Patient A-007 ").parts == ("patient", "a", "7")
    assert WrittenName("Patient A-007 ").one_case == ("patienta", "007")
    assert WrittenName("T 1.05").unpadded == ("t", "1", "05")
    assert differences("e\u0301 1", "\u00e9 1") == ["the form of its letters"]


def test_the_table_of_names_holds_the_candidates_as_text():
    frame = names_table(match_names(["s_01", "x"], ["S1", "S2"]))
    pd.testing.assert_frame_equal(frame, pd.DataFrame({"delivered": ["s_01"], "sample": ["S1"]}))


def read(path, **options):
    return delivered_table(path, sample_ids=["S1", "S2", "S3"], values="continuous", **options)


def test_candidates_are_refused_and_shown_as_a_table(tmp_path):
    path = write(tmp_path, "t.tsv", "id\tS1\ts_02\tS3 \ng1\t1\t2\t3\n")
    with pytest.raises(InputError, match=r"t\.tsv: 2 samples of the sheet's 3 may be") as caught:
        read(path)
    assert str(caught.value).splitlines()[1:4] == [
        "  in the table  in the sheet  differs in",
        "  's_02'        'S2'          case, spaces or punctuation, zeros before numbers",
        "  'S3 '         'S3'          spaces or punctuation",
    ]
    assert "say --accept-names to add-block" in str(caught.value)


def test_accepted_names_are_used_and_told(tmp_path):
    path = write(tmp_path, "t.tsv", "id\tS1\ts_02\tS3 \ng1\t1\t2\t3\n")
    table = read(path, names={"s_02": "S2", "S3 ": "S3"})
    assert table.values["g1"].to_dict() == {"S1": 1.0, "S2": 2.0, "S3": 3.0}
    assert "t.tsv: 2 samples found by the table of names" in table.notes


def test_a_row_taken_out_of_the_table_of_names_leaves_its_sample_out(tmp_path):
    path = write(tmp_path, "t.tsv", "id\tS1\ts_02\tS3 \ng1\t1\t2\t3\n")
    for names, matched in (({"s_02": "S2"}, ("S1", "S2")), ({}, ("S1",))):
        table = read(path, names=names)
        assert table.matched == matched
        assert any("left out, since the table of names does not name them" in note for note in table.notes)


def test_the_samples_are_found_by_names_that_only_resemble_them(tmp_path):
    """Row numbers resemble samples as well; the axis where a larger share does so is the samples'."""
    lines = [f"{k} {k}.5 {k}.25 0" for k in range(1, 9)]
    path = write(tmp_path, "t.tsv", tabbed("id s01 s02 s03", *lines))
    with pytest.raises(InputError, match=r"3 samples of the sheet's 3 may be") as caught:
        read(path)
    assert "'s01'" in str(caught.value)
    accepted = {"s01": "S1", "s02": "S2", "s03": "S3"}
    assert read(path, names=accepted).samples_in == "columns"


def test_accepted_names_that_do_not_fit_the_table_are_refused(tmp_path):
    path = write(tmp_path, "t.tsv", "id\tS1\ts_02\tS3 \ng1\t1\t2\t3\n")
    with pytest.raises(InputError, match=r"1 name that the table does not have in its columns: 's_2'; take"):
        read(path, names={"s_2": "S2"})
    with pytest.raises(InputError, match=r"1 sample would stand there twice.*'S1 \(from s_02\)'"):
        read(path, names={"s_02": "S1"})


def test_names_that_nearly_match_are_found_under_titles_and_beside_annotations(tmp_path):
    text = "Group\t\tctl\tctl\tdrug\nid\tformula\ts_1\ts_2\ts_3\ng1\tC6H12\t1.5\t2.5\t3.5\n"
    path = write(tmp_path, "t.tsv", text)
    with pytest.raises(InputError, match=r"3 samples of the sheet's 3 may be"):
        read(path)
    table = read(path, names={"s_1": "S1", "s_2": "S2", "s_3": "S3"})
    assert table.values["g1"].tolist() == [1.5, 2.5, 3.5]


def test_a_long_table_of_candidates_is_cut(tmp_path):
    ids = [f"S{k}" for k in range(100)]
    path = write(tmp_path, "t.tsv", "\t".join(["id", *map(str.lower, ids)]) + "\ng" + "\t1" * 100 + "\n")
    with pytest.raises(InputError, match=r"\n  and 60 more\n"):
        delivered_table(path, sample_ids=ids, values="continuous")


def features_like_samples(columns, rows):
    """Return a table of counts whose feature ids resemble sample ids."""
    head = "\t".join(["gene", *columns])
    lines = [f"tran{k:05d}" + f"\t{k}" * len(columns) for k in range(1, rows + 1)]
    return "\n".join([head, *lines]) + "\n"


SHEET_OF_24 = [f"T{k:03d}" for k in range(1, 25)]


def test_features_that_resemble_samples_are_not_offered_where_the_columns_fit(tmp_path):
    """Ten of 24 samples stand in the columns under their own names; ``tran00001`` is like ``T001`` all the same."""
    path = write(tmp_path, "t.tsv", features_like_samples(SHEET_OF_24[:10], 60))
    table = delivered_table(path, sample_ids=SHEET_OF_24, values="counts")
    assert (table.samples_in, len(table.matched)) == ("columns", 10)


def test_a_few_features_of_many_that_resemble_samples_are_told_and_not_offered(tmp_path):
    path = write(tmp_path, "t.tsv", features_like_samples([f"P{k}_rna" for k in range(24)], 200))
    with pytest.raises(
        InputError, match=r"no sample of the sheet is in the table.*24 of the 200 rows resemble"
    ):
        delivered_table(path, sample_ids=SHEET_OF_24, values="counts")
    with pytest.raises(
        InputError, match=r"24 samples of the sheet's 24 may be in the table under another name"
    ):
        delivered_table(path, sample_ids=SHEET_OF_24, values="counts", samples_in="rows")


def test_resembling_features_are_no_reason_to_read_samples_from_the_rows(tmp_path):
    path = write(tmp_path, "t.tsv", features_like_samples([f"P{k}_rna" for k in range(24)], 30))
    with pytest.raises(
        InputError, match="none of the columns is a sample of the sheet: the sheet has 'T001'"
    ):
        delivered_table(path, sample_ids=SHEET_OF_24, values="counts", samples_in="columns")


def test_numbers_of_rows_that_are_sample_ids_do_not_win_over_columns_that_fit_one_to_one(tmp_path):
    ids = [str(k) for k in range(1, 7)]
    lines = [f"{k} " + " ".join("123456") for k in range(1, 41)]
    path = write(tmp_path, "t.tsv", tabbed("id S1 S2 S3 S4 S5 S6", *lines))
    with pytest.raises(
        InputError, match=r"6 of the columns resemble a sample one to one .*say samples_in = 'rows'"
    ):
        delivered_table(path, sample_ids=ids, values="counts")
    with pytest.raises(InputError, match="may be in the table under another name"):
        delivered_table(path, sample_ids=ids, values="counts", samples_in="columns")
