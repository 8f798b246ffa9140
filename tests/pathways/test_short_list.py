"""The short list: ranked by what is written out, one row for near-duplicates, sentences that can be checked."""

from __future__ import annotations

from typing import Any

import pytest
from hypothesis import given
from hypothesis import strategies as st

from workbench.pathways import Candidate, GroupCorrelation, short_list
from workbench.pathways.short_list import FOLLOWUP_COLUMNS, check_first, judgements, sentence, verdict_of

GOOD: dict[str, Any] = {
    "r": 0.8,
    "r_low": 0.6,
    "r_high": 0.9,
    "n": 47,
    "q": 0.001,
    "stability": 0.95,
    "r_without_one": 0.78,
    "r_spearman": 0.77,
    "r_observed": 0.8,
    "imputed_share": 0.0,
    "basis": "within",
    "support": "both",
}


def candidate(
    source: str = "g1",
    target: str = "m1",
    groups: tuple[GroupCorrelation, ...] = (),
    clusters: tuple[Any, Any] = (None, None),
    **changes: Any,
) -> Candidate:
    """Return a good edge between a transcript and a metabolite, but for the changes."""
    edge = {
        "source": source,
        "source_block": "rna",
        "target": target,
        "target_block": "lcms",
        **GOOD,
        **changes,
    }
    ends = [
        {"feature": name, "block": block, "layer": layer, "label": f"label {name}", "cluster": cluster}
        for (name, block, layer), cluster in zip(
            [(source, "rna", "transcripts"), (target, "lcms", "metabolites")], clusters, strict=True
        )
    ]
    return Candidate(edge, ends[0], ends[1], groups, ())


def groups(*r: float) -> tuple[GroupCorrelation, ...]:
    return tuple(
        GroupCorrelation(level, 20, value) for level, value in zip(["watered", "drought"], r, strict=True)
    )


def test_a_good_edge_in_one_sentence() -> None:
    one = candidate(groups=groups(0.75, 0.85), shared_sets="starch breakdown", known="enzyme assay")
    assert sentence(one) == (
        "label g1 (g1, transcripts) rises with label m1 (m1, metabolites) (r = 0.80, 0.60 to 0.90 over 47 samples), in "
        "watered and drought alike; holds without any one sample (0.78 at the weakest); 0 % imputed; among the "
        "strongest pairs in 95 % of half-samples; a known link (enzyme assay); both in starch breakdown."
    )


def test_a_doubtful_edge_in_one_sentence() -> None:
    one = candidate(
        groups=groups(0.1, -0.9), r=-0.7, r_without_one=-0.2, r_spearman=-0.1, imputed_share=0.31, support="module",
        stability=float("nan"), r_low=float("nan"),
    )  # fmt: skip
    said = sentence(one)
    assert (
        "falls when label m1 (m1, metabolites) rises (r = -0.70 over 47 samples), not alike in the groups"
        in said
    )
    assert (
        "(0.10 in watered, -0.90 in drought); does not hold without any one sample (-0.20 at the weakest)"
        in said
    )
    assert "weak on ranks (-0.10); 31 % imputed; carried by its module, not by its own test." in said


@pytest.mark.parametrize(
    ("level", "counted", "words"),
    [
        ("visits", {"changes": 30}, "over 30 changes within subjects (47 samples))"),
        ("subjects", {"subjects": 17}, "over the means of 17 subjects (47 samples))"),
    ],
)
def test_several_samples_of_a_subject_are_told(level: str, counted: dict[str, int], words: str) -> None:
    one = candidate(**counted)
    said = sentence(Candidate(one.edge, one.source, one.target, (), (), level))
    assert words in said
    assert "holds without any one subject (0.78 at the weakest)" in said


def test_many_groups_are_counted() -> None:
    many = tuple(GroupCorrelation(f"dose {k}", 9, 0.8 if k else 0.1) for k in range(6))
    assert ", in 5 of 6 groups; holds" in sentence(candidate(groups=many))


def test_each_question_is_answered_by_its_figure() -> None:
    asked = judgements(0.05, informed=True, moduled=True)
    good = verdict_of(candidate(groups=groups(0.8, 0.8), known="x"), asked)
    assert (good.told, good.speaks_against, good.share) == ("10 of 10", (), 1.0)
    spoilt = {
        "q above 0.01": {"q": 0.03},
        "not among the strongest in 80 % of half-samples": {"stability": 0.5},
        "does not hold without any one sample": {"r_without_one": 0.5},
        "does not hold on ranks": {"r_spearman": -0.8},
        "does not hold without filled-in values": {"imputed_share": 0.3, "r_observed": 0.2},
        "does not hold within groups": {"basis": "group"},
        "does not pass by its own test": {"support": "module"},
        "does not pass by its module": {"support": "pair"},
        "no known link or shared set": {"known": ""},
    }
    for words, change in spoilt.items():
        verdict = verdict_of(candidate(groups=groups(0.8, 0.8), **{"known": "x", **change}), asked)
        assert verdict.speaks_against == (words,)
    assert verdict_of(candidate(groups=groups(0.8, 0.1), known="x"), asked).speaks_against == (
        "does not hold in every group",
    )


def test_what_was_not_measured_counts_neither_way() -> None:
    bare = candidate()
    edge = {name: bare.edge[name] for name in ("source", "source_block", "target", "target_block", "r")}
    verdict = verdict_of(Candidate(edge, bare.source, bare.target, (), ()), judgements(0.05, informed=False))
    assert verdict.told == "0 of 0"


def test_rows_are_ranked_by_evidence_then_q_then_strength() -> None:
    edges = [
        candidate("g1", "m1", stability=0.2, q=1e-9),
        candidate("g2", "m2", q=0.002),
        candidate("g3", "m3", q=0.001, r=0.79),
        candidate("g4", "m4", q=0.001, r=0.85),
    ]
    table = short_list(edges, fdr=0.05, informed=False)
    assert table["source"].tolist() == ["g4", "g3", "g2", "g1"]
    assert table["rank"].tolist() == [1, 2, 3, 4]
    assert table["evidence"].tolist() == ["8 of 8"] * 3 + ["7 of 8"]
    assert table["speaks_against"].tolist()[-1].startswith("not among the strongest in 80 %")
    assert tuple(table.columns) == FOLLOWUP_COLUMNS


def test_modules_are_asked_for_where_they_carry_any_edge() -> None:
    """A pair of its own ranks behind one that its module carries too; alone it is not asked for one."""
    lone = [candidate("g1", "m1", support="pair", q=1e-9), candidate("g2", "m2", support="pair")]
    assert short_list(lone, fdr=0.05, informed=False)["evidence"].tolist() == ["7 of 7"] * 2
    table = short_list([*lone, candidate("g3", "m3")], fdr=0.05, informed=False)
    assert table["source"].tolist() == ["g3", "g1", "g2"]
    assert table["speaks_against"].tolist() == ["", *["does not pass by its module"] * 2]


def test_near_duplicates_share_one_row_and_hubs_have_two() -> None:
    copies = [candidate(f"g{k}", "m1", clusters=("c1", None), r=0.8 + k / 100) for k in range(5)]
    table = short_list(copies, fdr=0.05, informed=False)
    assert table["source"].tolist() == ["g4"]
    assert table["stands_for"].tolist() == ["4 more edges between near-duplicates"]
    assert "which of its near-duplicates is meant by label g4" in table["check_first"][0]
    hub = short_list([candidate(f"g{k}", "m1") for k in range(5)], fdr=0.05, informed=False)
    assert len(hub) == 2


def test_one_community_does_not_fill_the_list() -> None:
    many = [candidate(f"g{k}", f"m{k}", community=1 + (k >= 30), q=0.001 + k / 1e5) for k in range(60)]
    table = short_list(many, fdr=0.05, informed=False)
    assert table["community"].value_counts().to_dict() == {1: 10, 2: 10}


def test_what_to_check_first_names_the_weak_group_and_the_identity() -> None:
    told = check_first(candidate(groups=groups(0.8, 0.1)))
    assert told[0].startswith("it is weaker or reversed in drought (0.10 on 20 samples)")
    assert "what label m1 is, against a standard" in told
    assert told[-1] == "the scatter (workbench show), then a targeted assay on new samples"


def test_no_edges_give_a_list_of_no_rows() -> None:
    table = short_list([], fdr=0.05, informed=True)
    assert (len(table), tuple(table.columns)) == (0, FOLLOWUP_COLUMNS)


numbers = st.none() | st.floats() | st.just("")


@given(st.dictionaries(st.sampled_from([*GOOD, "known", "shared_sets", "community"]), numbers))
def test_any_missing_figure_still_gives_a_sentence(changes: dict) -> None:
    changes.pop("r", None)
    one = candidate(groups=groups(0.5, float("nan")), **changes)
    assert sentence(one).endswith(".")
    assert len(short_list([one], fdr=0.05, informed=True)) == 1


@pytest.mark.parametrize("label", ["", None])
def test_a_feature_without_a_label_goes_by_its_own_name(label: Any) -> None:
    one = candidate()
    bare = Candidate(one.edge, {**one.source, "label": label}, one.target, (), ())
    assert sentence(bare).startswith("g1 (transcripts) rises with")
