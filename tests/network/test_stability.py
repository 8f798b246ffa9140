"""Communities that are there come back from half of the edges; those of chance edges do not."""

from __future__ import annotations

import networkx as nx
import numpy as np
import pytest
from network.networks import ATTRIBUTES, edges_table, features_table, random_tables
from network.test_communities import MODULES, planted_pairs

from workbench.network import (
    build_network,
    community_stability,
    rated_network,
    with_degrees,
    with_stability,
)
from workbench.network.stability import STABLE, UNSTABLE


def planted(seed: int) -> nx.Graph:
    edges = edges_table(planted_pairs(seed, 0.5, 0.02), seed)
    return build_network(edges, features_table(240, 48), attributes=ATTRIBUTES, seed=1)


@pytest.mark.parametrize("seed", range(3))
def test_planted_modules_are_stable_and_chance_communities_are_not(seed: int) -> None:
    found = community_stability(planted(seed), resamples=20, seed=1)
    assert len(found.of_community) >= MODULES
    assert min(found.of_community[number] for number in range(1, MODULES + 1)) > STABLE
    chance = build_network(*random_tables(300, 100, 60, seed), attributes=ATTRIBUTES, seed=1)
    assert np.mean(list(community_stability(chance, resamples=20, seed=1).of_community.values())) < UNSTABLE


def test_the_same_seed_gives_the_same_whatever_the_order_of_rows() -> None:
    edges, features = random_tables(150, 60, 25)
    graphs = [
        build_network(table, features, attributes=ATTRIBUTES, seed=1)
        for table in (edges, edges.sample(frac=1, random_state=3))
    ]
    first, second = (community_stability(graph, resamples=10, seed=5) for graph in graphs)
    assert first == second
    assert first != community_stability(graphs[0], resamples=10, seed=6)


def test_half_samples_take_the_place_of_draws() -> None:
    graph = planted(0)
    same = list(graph.edges)
    found = community_stability(
        graph, resamples=3, seed=1, halves=[same, same, [*same, (("x", "y"), ("z", "z"))]]
    )
    assert (found.resamples, set(found.of_community.values())) == (3, {1.0})
    assert set(found.of_feature.values()) == {1.0}
    assert "half of the samples" in found.how


def test_the_shares_reach_nodes_and_table() -> None:
    edges, features = random_tables(60, 30, 12)
    graph = build_network(edges, features, attributes=ATTRIBUTES, seed=1)
    rated = with_stability(graph, community_stability(graph, resamples=10, seed=1))
    assert "community_stability" not in next(iter(graph.nodes.values()))
    told = with_degrees(features, rated).set_index(["block", "feature"])["community_stability"]
    for node, share in rated.nodes(data="community_stability"):
        assert told[node] == pytest.approx(share)
        assert 0.0 <= share <= 1.0
    assert rated.graph["community_stability_method"].startswith("10 resamples: half of the edges")
    assert "community_stability" not in with_degrees(features, graph)


def test_an_empty_network_and_a_large_one(monkeypatch: pytest.MonkeyPatch) -> None:
    empty = build_network(edges_table([]), features_table(1, 1), attributes=ATTRIBUTES, seed=1)
    assert community_stability(empty, resamples=5, seed=1).resamples == 0
    graph = build_network(*random_tables(100, 60, 40), attributes=ATTRIBUTES, seed=1)
    monkeypatch.setattr("workbench.network.stability.MOST_EDGES", 50 * 12)
    assert community_stability(graph, resamples=30, seed=1).resamples == 12
    assert community_stability(graph, resamples=5, seed=1).resamples == 5


def test_the_network_that_leaves_is_rated_and_placed() -> None:
    graph = build_network(*random_tables(60, 30, 12), attributes=ATTRIBUTES, seed=1)
    rated = rated_network(graph, resamples=5, seed=1)
    assert all({"x", "y", "community_stability"} <= set(found) for _, found in rated.nodes(data=True))
    plain = rated_network(graph, resamples=0, seed=1)
    assert "community_stability" not in next(iter(plain.nodes.values()))
    empty = build_network(edges_table([]), features_table(1, 1), attributes=ATTRIBUTES, seed=1)
    assert len(rated_network(empty, resamples=5, seed=1)) == 0
    halves = rated_network(graph, resamples=5, seed=1, halves=[list(graph.edges)] * 3)
    assert halves.graph["community_stability_method"] == "3 resamples: the edges of half of the samples"
