"""Tables become a network that holds what they hold, and bad tables are refused by row."""

from __future__ import annotations

import networkx as nx
import numpy as np
import pandas as pd
import pytest
from hypothesis import given
from hypothesis import strategies as st
from network.networks import ATTRIBUTES, NUMBERS, cells, edges_table, features_table, names, random_tables

import workbench
from workbench.errors import InputError
from workbench.network import CAUTIONS, build_network, with_communities, with_degrees
from workbench.network.builder import FOUND_OF_NODES

FOUND = set(FOUND_OF_NODES)
ENDS = ["source", "source_block", "target", "target_block", "r"]


def test_nodes_are_the_features_with_an_edge_and_carry_their_columns() -> None:
    edges, features = edges_table([(0, 0), (0, 1), (3, 1)]), features_table(5, 3)
    graph = build_network(edges, features, attributes=ATTRIBUTES, seed=1)
    assert list(graph.nodes) == [("lcms", "m0"), ("lcms", "m1"), ("rna", "g0"), ("rna", "g3")]
    assert graph.nodes["rna", "g3"] == {
        "label": "label of g3",
        "layer": "transcripts",
        "entrez": 3,
        "mean": features["mean"][3],
        "pair1_own": features["pair1_own"][3],
        "block": "rna",
        "feature": "g3",
        "degree": 1,
        "strength": abs(edges["r"][2]),
        "layers_reached": 1,
        "community": graph.nodes["lcms", "m1"]["community"],
        "connected_component": 1,
    }
    assert graph.nodes["lcms", "m1"]["HMDB ID"] == "HMDB0000001"
    assert dict(graph.nodes(data="degree")) == dict(graph.degree)


def test_edges_carry_their_numbers_and_weight() -> None:
    edges, features = random_tables(40, 20, 10)
    graph = build_network(edges, features, attributes=ATTRIBUTES, seed=1)
    for row in edges.itertuples():
        found = graph.edges[("rna", row.source), ("lcms", row.target)]
        assert found["weight"] == abs(row.r)
        assert (found["n"], found["basis"], found["source_block"]) == (40, "within", "rna")
        assert [found[name] for name in ["r", *NUMBERS]] == [getattr(row, name) for name in ["r", *NUMBERS]]
        assert {type(value) for value in found.values()} <= {int, float, str}
    assert graph.number_of_edges() == 40


def test_network_says_what_it_is_and_what_it_may_not_be_used_for() -> None:
    given_attributes = {**ATTRIBUTES, "cautions": "none", "note": None}
    graph = build_network(edges_table([(0, 0)]), features_table(1, 1), attributes=given_attributes, seed=7)
    assert graph.graph["cautions"] == CAUTIONS
    for words in ("Research use", "not causation", "Not for diagnosis", "targeted assay"):
        assert words in CAUTIONS
    assert graph.graph["version"] == workbench.__version__
    assert (graph.graph["title"], graph.graph["fdr"]) == ("an invented study", 0.05)
    assert "seed 7" in graph.graph["community_method"]
    assert "note" not in graph.graph


def test_the_least_tables_are_enough() -> None:
    graph = build_network(
        edges_table([(0, 0)])[ENDS], features_table(1, 1)[["feature", "block"]], attributes={}, seed=1
    )
    assert graph.nodes["rna", "g0"]["label"] == "g0"
    assert set(graph.nodes["rna", "g0"]) == {"label", "block", "feature", *FOUND} - {"community_stability"}


def test_no_edges_give_an_empty_network() -> None:
    graph = build_network(edges_table([]), features_table(2, 2), attributes=ATTRIBUTES, seed=1)
    assert (len(graph), graph.graph["cautions"]) == (0, CAUTIONS)


def test_tables_get_the_communities_and_degrees_back() -> None:
    edges, features = random_tables(80, 40, 15)
    graph = build_network(edges, features, attributes=ATTRIBUTES, seed=1)
    told, placed = with_communities(edges, graph), with_degrees(features, graph)
    community = placed.set_index("feature")["community"]
    for row in told.itertuples():
        same = community[row.source] == community[row.target]
        assert row.community == community[row.source] if same else row.community is pd.NA
        kept = graph.edges[("rna", row.source), ("lcms", row.target)].get("backbone_p", np.nan)
        assert row.backbone_p == pytest.approx(kept, nan_ok=True)
    assert placed["degree"].sum() == 2 * len(edges)
    assert placed["community"].isna().tolist() == (placed["degree"] == 0).tolist()
    assert "community" not in edges.columns
    again = build_network(told, placed, attributes=ATTRIBUTES, seed=1)
    assert dict(again.nodes(data=True)) == dict(graph.nodes(data=True))


def test_degree_strength_and_components_are_those_of_networkx() -> None:
    """Outside check: networkx's own ``degree``, weighted ``degree`` and ``connected_components``."""
    graph = build_network(*random_tables(80, 60, 25), attributes=ATTRIBUTES, seed=1)
    assert dict(graph.nodes(data="degree")) == dict(nx.degree(graph))
    strength = dict(nx.degree(graph, weight="weight"))
    for node, found in graph.nodes(data="strength"):
        assert found == pytest.approx(strength[node], rel=1e-12)
    numbers = nx.get_node_attributes(graph, "connected_component")
    pieces = [{node for node in graph if numbers[node] == k} for k in range(1, max(numbers.values()) + 1)]
    assert sorted(map(sorted, pieces)) == sorted(map(sorted, nx.connected_components(graph)))
    assert [len(piece) for piece in pieces] == sorted(map(len, pieces), reverse=True)


def test_layers_reached_are_counted() -> None:
    edges = edges_table([(0, 0), (0, 1)])
    features = features_table(1, 2)
    features.loc[2, "layer"] = "lipids"
    graph = build_network(edges, features, attributes={}, seed=1)
    reached = {node[1]: found for node, found in graph.nodes(data="layers_reached")}
    assert reached == {"g0": 2, "m0": 1, "m1": 1}


def test_tables_are_not_changed() -> None:
    edges, features = random_tables(30, 20, 10)
    before = edges.copy(deep=True), features.copy(deep=True)
    build_network(edges, features, attributes=ATTRIBUTES, seed=1)
    pd.testing.assert_frame_equal(edges, before[0])
    pd.testing.assert_frame_equal(features, before[1])


@pytest.mark.parametrize(
    ("change", "message"),
    [
        (
            {"r": [np.nan, 0.5]},
            "edges table, row 1: r of 'g0' of block 'rna' and 'm0' of block 'lcms' is nan",
        ),
        ({"r": [0.5, np.inf]}, "row 2: r of .* is inf; allowed: a number from -1 to 1"),
        ({"r": [0.5, 1.5]}, "row 2: r of .* is 1.5"),
        ({"r": ["0.5", "high"]}, "row 1: r of .* is 0.5; allowed: a number"),
        ({"target": ["m0", "m9"]}, "lacks 1 feature of the edges table: 'm9' of block 'lcms'"),
        ({"target": ["m0", None]}, "row 2 has no target"),
        ({"source_block": ["rna", ""]}, "row 2 has no source_block"),
        ({"source": ["g0", "g0"], "target": ["m0", "m0"]}, "row 2: 'g0' .* already joined above"),
        (
            {
                "source": ["g0", "m0"],
                "source_block": ["rna", "lcms"],
                "target": ["m0", "g0"],
                "target_block": ["lcms", "rna"],
            },
            "row 2: 'm0' .* already joined above",
        ),
        ({"target": ["m0", "g1"], "target_block": ["lcms", "rna"]}, "row 2: 'g1' .* is joined with itself"),
    ],
)
def test_edges_that_cannot_be_are_refused_by_row(change: dict, message: str) -> None:
    edges = edges_table([(0, 0), (1, 1)]).assign(**change)
    with pytest.raises(InputError, match=message):
        build_network(edges, features_table(2, 2), attributes={}, seed=1)


def test_tables_without_their_columns_are_refused() -> None:
    edges, features = edges_table([(0, 0)]), features_table(1, 1)
    with pytest.raises(InputError, match="edges table has no column 'source_block', 'r'; it needs source"):
        build_network(edges.drop(columns=["source_block", "r"]), features, attributes={}, seed=1)
    with pytest.raises(InputError, match="features table has no column 'block'"):
        build_network(edges, features.drop(columns="block"), attributes={}, seed=1)
    with pytest.raises(InputError, match="features table: 'g0' of block 'rna' has more than one row"):
        build_network(edges, pd.concat([features, features]), attributes={}, seed=1)
    with pytest.raises(InputError, match="edges table has more than one column 'p'"):
        build_network(pd.concat([edges, edges[["p"]]], axis=1), features, attributes={}, seed=1)


@given(names, names, st.lists(cells, min_size=2, max_size=2), cells)
def test_any_names_and_cells_make_a_network(
    source: str, target: str, identifiers: list, cell: object
) -> None:
    features = pd.DataFrame({"feature": [source, target], "block": ["a", "b"]}, dtype=object)
    edges = pd.DataFrame(
        {"source": [source], "source_block": "a", "target": [target], "target_block": "b", "r": 0.5}
    )
    features["identifier"], edges["extra"] = (
        pd.Series(identifiers, dtype=object),
        pd.Series([cell], dtype=object),
    )
    graph = build_network(edges, features, attributes={}, seed=1)
    assert list(graph.nodes) == [("a", source), ("b", target)]
    assert all(
        type(v) in (bool, int, float, str) for _, node in graph.nodes(data=True) for v in node.values()
    )
