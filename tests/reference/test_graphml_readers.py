"""Two graph libraries read the GraphML with equal nodes, edges and typed attributes.

Outside check: networkx (``networkx.read_graphml``, plain) and igraph (``Graph.Read_GraphML``), which share
no code with the writer here and none with each other.
"""

from __future__ import annotations

import math
from pathlib import Path

import networkx as nx
import numpy as np
import pytest
from hypothesis import HealthCheck, given, settings
from network.networks import ATTRIBUTES, columns, edges_table, features_table, names, one_edge, small_network

from workbench.network import build_network, graphml_bytes, legal_text

igraph = pytest.importorskip("igraph")
ADDED = {"id"}


def written(graph: nx.Graph, folder: Path) -> str:
    """Return the path of the network as a file."""
    path = folder / "network.graphml"
    path.write_bytes(graphml_bytes(graph))
    return str(path)


def as_written(attributes: dict) -> dict:
    """Return attributes under the names and texts that the file holds."""
    renamed = {name.replace(" ", "_"): value for name, value in attributes.items()}
    return {name: legal_text(v) if isinstance(v, str) else v for name, v in renamed.items()}


def present(attributes: dict) -> dict:
    """Return what igraph read without its marks for missing: NaN and the empty text."""
    kept = {name: v for name, v in attributes.items() if name not in ADDED and v != ""}
    return {name: v for name, v in kept.items() if not (isinstance(v, float) and math.isnan(v))}


def test_networkx_reads_equal_nodes_edges_and_types(tmp_path: Path) -> None:
    graph = small_network()
    found = nx.read_graphml(written(graph, tmp_path))
    key = {node: (data["block"], data["feature"]) for node, data in found.nodes(data=True)}
    assert {key[node]: data for node, data in found.nodes(data=True)} == {
        node: as_written(data) for node, data in graph.nodes(data=True)
    }
    edges = {frozenset((key[a], key[b])): data for a, b, data in found.edges(data=True)}
    assert len(edges) == graph.number_of_edges()
    for first, second, data in graph.edges(data=True):
        read = edges[frozenset((first, second))]
        read.pop("id")
        assert read == data
        assert {name: type(v) for name, v in read.items()} == {name: type(v) for name, v in data.items()}
    assert {name: found.graph[name] for name in graph.graph} == graph.graph


def test_igraph_reads_equal_nodes_edges_and_types(tmp_path: Path) -> None:
    graph = small_network()
    found = igraph.Graph.Read_GraphML(written(graph, tmp_path))
    assert not found.is_directed()
    key = [(vertex["block"], vertex["feature"]) for vertex in found.vs]
    assert {key[v.index]: present(v.attributes()) for v in found.vs} == {
        node: as_written(data) for node, data in graph.nodes(data=True)
    }
    assert {frozenset((key[e.source], key[e.target])): present(e.attributes()) for e in found.es} == {
        frozenset((first, second)): data for first, second, data in graph.edges(data=True)
    }
    assert {name: found[name] for name in graph.graph} == graph.graph
    assert {type(value) for value in found.es["r"]} == {float}


def test_extreme_numbers_and_booleans_are_equal_in_both(tmp_path: Path) -> None:
    edges = edges_table([(0, 0), (1, 1)]).assign(
        p=[5e-324, 1e-300],
        q=[np.inf, 0.1 + 0.2],
        checked=[True, False],
        doubted=[True, None],
        big=[2**53, -(2**53)],
    )
    path = written(build_network(edges, features_table(2, 2), attributes=ATTRIBUTES, seed=1), tmp_path)
    read, other = nx.read_graphml(path), igraph.Graph.Read_GraphML(path)
    pairs = [(data, other.es[int(data["id"][1:])]) for _, _, data in read.edges(data=True)]
    assert sorted(data["p"] for data, _ in pairs) == [2.2250738585072014e-308, 1e-300]
    assert [data.get("q") for data, _ in pairs if "q" in data] == [0.1 + 0.2]
    assert {data["checked"] for data, _ in pairs} == {True, False}
    assert [data.get("doubted", "") for data, _ in pairs] == [edge["doubted"] for _, edge in pairs]
    for name in ("p", "r", "checked", "big", "weight"):
        assert [data[name] for data, _ in pairs] == [edge[name] for _, edge in pairs]


def test_empty_network_is_read_by_both(tmp_path: Path) -> None:
    path = written(
        build_network(edges_table([]), features_table(1, 1), attributes=ATTRIBUTES, seed=1), tmp_path
    )
    assert len(nx.read_graphml(path)) == 0
    assert igraph.Graph.Read_GraphML(path).vcount() == 0


@settings(suppress_health_check=[HealthCheck.function_scoped_fixture], max_examples=150)
@given(names, names, columns)
def test_any_names_and_cells_are_read_by_both(tmp_path: Path, source: str, target: str, more: dict) -> None:
    path = written(one_edge((source, target), **more), tmp_path)
    read, other = nx.read_graphml(path), igraph.Graph.Read_GraphML(path)
    assert [read.nodes[node]["label"] for node in ("n0", "n1")] == [legal_text(source), legal_text(target)]
    assert other.vs["label"] == [legal_text(source), legal_text(target)]
    (_, _, data), (edge,) = next(iter(read.edges(data=True))), other.es
    assert present(edge.attributes()) == {name: value for name, value in data.items() if name != "id"}
