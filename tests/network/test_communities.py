"""Planted modules are found, whatever the order of rows, and every community hangs together."""

from __future__ import annotations

import subprocess
import sys

import networkx as nx
import numpy as np
import pandas as pd
import pytest
from hypothesis import given
from hypothesis import strategies as st
from network.networks import ATTRIBUTES, edges_table, features_table, random_tables
from sklearn.metrics import adjusted_rand_score

from workbench.network import build_network, communities

MODULES, TRANSCRIPTS, METABOLITES = 4, 60, 12


def planted_pairs(seed: int, inside: float, outside: float) -> list[tuple[int, int]]:
    """Return edges of four modules of 60 transcripts and 12 metabolites, and chance edges between them."""
    random = np.random.default_rng(seed)
    i, j = np.meshgrid(np.arange(MODULES * TRANSCRIPTS), np.arange(MODULES * METABOLITES), indexing="ij")
    share = np.where(i // TRANSCRIPTS == j // METABOLITES, inside, outside)
    return [(int(a), int(b)) for a, b in np.argwhere(random.uniform(size=i.shape) < share)]


@pytest.mark.parametrize("seed", range(8))
@pytest.mark.parametrize(("inside", "outside"), [(0.8, 0.015), (0.4, 0.02), (0.5, 0.08)])
def test_planted_modules_are_found(seed: int, inside: float, outside: float) -> None:
    edges = edges_table(planted_pairs(seed, inside, outside), seed)
    features = features_table(MODULES * TRANSCRIPTS, MODULES * METABOLITES)
    graph = build_network(edges, features, attributes=ATTRIBUTES, seed=seed)
    size = {"g": TRANSCRIPTS, "m": METABOLITES}
    truth = [int(name[1:]) // size[name[0]] for _, name in graph.nodes]
    found = [community for _, community in graph.nodes(data="community")]
    assert adjusted_rand_score(truth, found) >= 0.9


@pytest.mark.parametrize("seed", range(5))
def test_order_of_rows_and_columns_changes_nothing(seed: int) -> None:
    edges, features = random_tables(150, 60, 25, seed)
    graph = build_network(edges, features, attributes=ATTRIBUTES, seed=3)
    shuffled = edges.sample(frac=1, random_state=seed)[list(edges.columns[::-1])]
    again = build_network(shuffled, features.sample(frac=1, random_state=seed), attributes=ATTRIBUTES, seed=3)
    assert dict(graph.nodes(data="community")) == dict(again.nodes(data="community"))
    assert list(graph.nodes) == list(again.nodes)
    assert len(set(dict(graph.nodes(data="community")).values())) > 2


def test_communities_do_not_depend_on_the_hash_of_text() -> None:
    program = (
        "import networkx as nx; from workbench.network import communities;"
        "g = nx.gnm_random_graph(80, 160, seed=5); g = nx.relabel_nodes(g, {i: ('b', f'f{i}') for i in g});"
        "print(sorted(communities(g, seed=2).items()))"
    )
    found = {
        subprocess.run(
            [sys.executable, "-c", program],
            env={"PYTHONHASHSEED": seed},
            capture_output=True,
            text=True,
            check=True,
        ).stdout
        for seed in ("1", "2")
    }
    assert len(found) == 1
    assert "('b', 'f79')" in found.pop()


graphs = st.lists(
    st.tuples(st.integers(0, 12), st.integers(0, 12), st.floats(0, 1)).filter(lambda edge: edge[0] != edge[1])
)


@given(graphs, st.integers(0, 2**32 - 1))
def test_communities_are_connected_and_numbered_by_size_then_name(edges: list, seed: int) -> None:
    graph = nx.Graph()
    graph.add_weighted_edges_from(edges)
    found = communities(graph, seed)
    members = pd.Series(found, dtype=object).groupby(found).groups if found else {}
    order = [(-len(members[number]), min(members[number])) for number in sorted(members)]
    assert set(found) == set(graph)
    assert sorted(members) == list(range(1, len(members) + 1))
    assert order == sorted(order)
    assert all(nx.is_connected(graph.subgraph(nodes)) for nodes in members.values())


def test_edges_of_weight_zero_hold_nothing_together() -> None:
    graph = nx.Graph()
    graph.add_weighted_edges_from([("a", "b", 0.0), ("b", "c", 0.9)])
    assert communities(graph, seed=1) == {"a": 2, "b": 1, "c": 1}
    assert communities(nx.Graph(), seed=1) == {}
