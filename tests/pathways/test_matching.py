"""Identifier columns are chosen by overlap, cells hold alternatives, and no overlap is explained."""

from __future__ import annotations

import pandas as pd
import pytest

from workbench.errors import InputError
from workbench.pathways import (
    FeatureSet,
    KnownLinks,
    SetTable,
    alternatives,
    edge_columns,
    identifier_columns,
    known_evidence,
    match_sets,
)

FEATURES = pd.DataFrame(
    {
        "feature": ["g1", "g2", "g3", "m1", "m2", "m3"],
        "block": ["rna"] * 3 + ["lcms"] * 3,
        "layer": ["transcripts"] * 3 + ["metabolites"] * 3,
        "label": ["ABC1", "DEF2", "GHI3", "glucose", "hexose", "proline"],
        "degree": [1, 1, 0, 1, 1, 0],
        "kegg": ["", "", "", "C00031", "C00031; C00221|C00267", "C00148"],
        "pair1_own": [0.1] * 6,
        "group_p": [0.5] * 6,
    }
)


def sets(**members: str) -> SetTable:
    return SetTable(
        "sets.tsv", tuple(FeatureSet(k, f"set {k}", frozenset(v.split())) for k, v in members.items()), ()
    )


def links(*pairs: tuple[str, str, str]) -> KnownLinks:
    return KnownLinks("links.tsv", {frozenset((a, b)): said for a, b, said in pairs}, ())


def test_only_names_of_features_are_identifiers() -> None:
    assert identifier_columns(FEATURES) == ["feature", "label", "kegg"]


def test_each_block_is_matched_by_its_own_column_and_says_so() -> None:
    found = match_sets(FEATURES, sets(p1="ABC1 GHI3 C00221 C00148", p2="C00031 C00267"))
    assert [(one.block, one.column, one.matched) for one in found.choices] == [
        ("rna", "label", 2),
        ("lcms", "kegg", 3),
    ]
    assert found.matrix.toarray().astype(int).tolist() == [[1, 0], [0, 0], [1, 0], [0, 1], [1, 1], [1, 0]]
    assert found.sentences()[0] == "rna: 2 of 3 features are in sets.tsv, by column 'label'"


def test_a_cell_of_several_identifiers_counts_once_a_set() -> None:
    """m2 is in the set by all three of its alternatives, and counts once."""
    found = match_sets(FEATURES, sets(p1="C00031 C00221 C00267"))
    assert found.matrix.toarray().sum() == 2
    assert alternatives("a ;b | c /// d") >= {"a", "b", "c", "d"}
    assert alternatives(float("nan")) == alternatives("") == alternatives(pd.NA) == frozenset()


def test_a_block_without_any_is_told_and_matches_nothing() -> None:
    found = match_sets(FEATURES, sets(p1="ABC1 DEF2 GHI3"))
    assert (
        found.choices[1].sentence("sets.tsv") == "lcms: none of its 3 features has an identifier of sets.tsv"
    )
    assert found.matrix.toarray()[3:].sum() == 0


@pytest.mark.parametrize(
    ("members", "hint"),
    [
        ("abc1 def2", "Read in small letters, 2 features of column 'label' would match"),
        ("cpd:C00031", "Read without what stands before the colon, 2 features of column 'kegg'"),
        ("g1.7 g9.1", "Read without their version .*, 1 feature of column 'feature'"),
        ("X1 X2", "bring the ones that the table uses as a column: `workbench add-block"),
    ],
)
def test_no_overlap_says_what_both_sides_use_and_what_to_do(members: str, hint: str) -> None:
    with pytest.raises(InputError, match=r"rna: feature \('g1', 'g2', 'g3'\); label .* lcms: .*kegg") as told:
        match_sets(FEATURES, sets(p1=members))
    assert repr(members.split()[0]) in str(told.value)
    with pytest.raises(InputError, match=hint):
        match_sets(FEATURES, sets(p1=members))


def test_columns_of_the_edges_name_links_and_shared_sets() -> None:
    edges = pd.DataFrame(
        {
            "source": ["g1", "g2", "g3"],
            "source_block": "rna",
            "target": ["m2", "m1", "m3"],
            "target_block": "lcms",
        },
        index=[7, 8, 9],
    )
    table = sets(wide="ABC1 DEF2 GHI3 C00031 C00221 C00148", small="ABC1 C00267", other="DEF2")
    known = links(("C00267", "ABC1", "assay"), ("DEF2", "C00148", "x"), ("ABC1", "DEF2", "same layer"))
    found = edge_columns(edges, FEATURES, table, known)
    assert found["shared_sets"].tolist() == ["set small; set wide", "set wide", "set wide"]
    assert found["known"].tolist() == ["assay", "", ""]
    assert found.index.tolist() == [7, 8, 9]
    none = edge_columns(edges, FEATURES, None, None)
    assert set(none["known"]) == set(none["shared_sets"]) == {""}
    assert known_evidence(FEATURES, known)[1] == 2


def test_many_sets_of_an_edge_are_counted() -> None:
    edges = pd.DataFrame(
        {"source": ["g1"], "source_block": ["rna"], "target": ["m1"], "target_block": ["lcms"]}
    )
    table = sets(**{f"p{k}": "ABC1 C00031" for k in range(8)})
    (told,) = edge_columns(edges, FEATURES, table, None)["shared_sets"]
    assert told == "set p0; set p1; set p2; set p3; set p4; and 3 more"
