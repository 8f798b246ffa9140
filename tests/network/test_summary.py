"""The summary counts what the network holds and says it in plain words."""

from __future__ import annotations

import networkx as nx
import pandas as pd
from hypothesis import given
from network.networks import ATTRIBUTES, edges_table, features_table, names, one_edge, small_network

from workbench.network import (
    build_network,
    community_stability,
    network_summary,
    shown_name,
    summarise,
    with_stability,
)


def test_counts_agree_with_the_network() -> None:
    graph = small_network()
    found = summarise(graph)
    assert (found.features, found.edges) == (len(graph), graph.number_of_edges())
    assert sum(pair.edges for pair in found.pairs) == found.edges
    assert sum(community.features for community in found.communities) == found.features
    assert sum(found.components) == found.features
    assert found.components[0] == max(map(len, nx.connected_components(graph)))
    inside = [data for _, _, data in graph.edges(data=True) if "community" in data]
    assert sum(community.edges for community in found.communities) == len(inside)
    assert found.hubs[0].degree == max(degree for _, degree in graph.degree)


def test_star_in_words() -> None:
    edges = edges_table([(0, 0), (1, 0), (2, 0), (3, 1)]).assign(r=[0.9, -0.8, 0.7, 0.6])
    graph = build_network(edges, features_table(4, 2), attributes=ATTRIBUTES, seed=1)
    assert network_summary(graph) == (
        "4 edges join 6 features, 1.3 edges a feature on average.",
        "rna - lcms: 4 edges, 3 with r above zero and 1 below.",
        "2 connected components; the largest holds 4 of 6 features.",
        "Community 1: 4 features (transcripts 3, metabolites 1), 3 edges inside.",
        "Community 2: 2 features (metabolites 1, transcripts 1), 1 edge inside.",
        "Hub label of m0 (metabolites): 3 edges, 3 to transcripts.",
    )


def test_density_and_degree_are_those_of_networkx() -> None:
    """Outside check: ``networkx.density`` and the mean of ``networkx.degree``."""
    graph = small_network()
    found = summarise(graph)
    assert found.density == nx.density(graph)
    assert abs(found.mean_degree - sum(degree for _, degree in nx.degree(graph)) / len(graph)) < 1e-12


def test_what_edges_rest_on_is_told() -> None:
    edges = edges_table([(i, 0) for i in range(5)]).assign(
        basis=["within", "group", "group", "unclear", "within"],
        support=["pair", "module", "both", "pair", "pair"],
    )
    graph = build_network(edges, features_table(5, 1), attributes=ATTRIBUTES, seed=1)
    said = network_summary(graph)[1]
    assert "; 1 carried by their module, not by their own test" in said
    assert said.endswith("; 2 rest on the group alone, 2 hold within groups, 1 are unclear.")


def test_clusters_and_the_backbone_are_counted() -> None:
    edges = edges_table([(i, j) for i in range(8) for j in range(8)])
    features = features_table(8, 8).assign(cluster=["a", "a", "b", "b", "b", *"cdefghijklm"])
    found = summarise(build_network(edges, features, attributes=ATTRIBUTES, seed=1))
    assert (found.clustered, found.clusters) == (5, 2)
    assert "5 features fall into 2 clusters of near-duplicates" in " ".join(found.sentences())
    assert found.sentences()[-1].startswith("Backbone: no edge stands out")
    heavy = edges.assign(r=[0.95 if i == j else 0.05 for i in range(8) for j in range(8)])
    sparse = summarise(build_network(heavy, features, attributes=ATTRIBUTES, seed=1))
    assert sparse.backbone == 8
    assert sparse.sentences()[-1].startswith("Backbone: 8 edges with backbone_p at most 0.05 carry")


def test_stability_of_communities_is_told() -> None:
    pairs = [(i, j) for i in range(6) for j in range(4)] + [(i, j) for i in range(6, 9) for j in (4, 5)]
    graph = build_network(edges_table(pairs), features_table(9, 6), attributes=ATTRIBUTES, seed=1)
    rated = with_stability(graph, community_stability(graph, resamples=20, seed=1))
    shares = [found["community_stability"] for _, found in rated.nodes(data=True) if found["community"] == 1]
    assert f" ({sum(shares) / len(shares):.2f} of resamples)." in " ".join(network_summary(rated))
    assert "of resamples" not in " ".join(network_summary(graph))


def test_hub_tells_its_own_layer_from_others() -> None:
    edges = edges_table([(0, 0), (0, 1)])[["source", "source_block", "target", "target_block", "r"]]
    inside = pd.DataFrame(
        {"source": ["g0"], "source_block": "rna", "target": ["g1"], "target_block": "rna", "r": 0.5}
    )
    graph = build_network(pd.concat([edges, inside]), features_table(2, 2), attributes=ATTRIBUTES, seed=1)
    hub = summarise(graph).hubs[0]
    assert (hub.key, hub.degree, hub.own_layer, hub.other_layers) == (("rna", "g0"), 3, 1, {"metabolites": 2})
    assert network_summary(graph)[-1].endswith("3 edges, 2 to metabolites, 1 to its own layer transcripts.")


def test_long_lists_are_cut_and_the_rest_counted() -> None:
    edges = edges_table([(i, i) for i in range(8)])
    graph = build_network(edges, features_table(8, 8), attributes=ATTRIBUTES, seed=1)
    said = summarise(graph).sentences(shown=3)
    assert said[-1] == "5 more communities of at most 2 features."
    assert len(said) == 7


def test_no_edges_are_said_in_one_sentence() -> None:
    graph = build_network(edges_table([]), features_table(1, 1), attributes=ATTRIBUTES, seed=1)
    assert network_summary(graph) == ("No edges: no pair of features passed the evidence rules.",)


@given(names, names)
def test_sentences_print_whatever_the_names(source: str, target: str) -> None:
    said = network_summary(one_edge((source, target)))
    assert all(sentence.isprintable() for sentence in said)
    assert shown_name(source).isprintable()
    assert len(shown_name("a" * 10_000)) == 60
