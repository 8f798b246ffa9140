"""GEXF holds what the GraphML holds, is read by networkx with equal attributes, and bears no date."""

from __future__ import annotations

import datetime
from pathlib import Path

import networkx as nx
import numpy as np
import pytest
from network.networks import ATTRIBUTES, edges_table, features_table, one_edge, random_tables, small_network

from workbench.errors import InputError
from workbench.network import build_network, gexf_bytes, with_layout


def read_by_networkx(data: bytes, folder: Path) -> nx.Graph:
    path = folder / "network.gexf"
    path.write_bytes(data)
    return nx.read_gexf(path)


def test_networkx_reads_equal_nodes_edges_and_types(tmp_path: Path) -> None:
    """Outside check: ``networkx.read_gexf``."""
    graph = small_network()
    found = read_by_networkx(gexf_bytes(graph), tmp_path)
    key = {node: (data["block"], data["feature"]) for node, data in found.nodes(data=True)}
    assert not found.is_directed()
    for node, data in found.nodes(data=True):
        expected = {name.replace(" ", "_"): value for name, value in graph.nodes[key[node]].items()}
        assert data == expected
        assert {name: type(v) for name, v in data.items()} == {name: type(v) for name, v in expected.items()}
    assert found.number_of_edges() == graph.number_of_edges()
    for first, second, data in found.edges(data=True):
        assert {name: v for name, v in data.items() if name != "id"} == graph.edges[key[first], key[second]]


def test_the_same_bytes_whatever_the_order_of_rows_and_the_day(monkeypatch: pytest.MonkeyPatch) -> None:
    edges, features = random_tables(80, 40, 15)
    first = gexf_bytes(build_network(edges, features, attributes=ATTRIBUTES, seed=1))
    monkeypatch.setattr(
        "time.time", lambda: (datetime.datetime.now() + datetime.timedelta(days=1)).timestamp()
    )
    monkeypatch.setattr("time.strftime", lambda *_: "2001-01-01")
    mixed = edges.sample(frac=1, random_state=1), features.iloc[::-1]
    assert gexf_bytes(build_network(*mixed, attributes=ATTRIBUTES, seed=1)) == first
    assert b"lastmodified" not in first


def test_cautions_labels_and_places_are_in_the_file(tmp_path: Path) -> None:
    data = gexf_bytes(with_layout(small_network()))
    assert b"cautions: Research use." in data
    assert b"title: an invented study" in data
    found = read_by_networkx(data, tmp_path)
    assert {"position"} == set(found.nodes["n0"]["viz"])
    assert found.nodes["n0"]["viz"]["position"]["x"] == found.nodes["n0"]["x"]


def test_awkward_values_are_written_as_in_graphml(tmp_path: Path) -> None:
    graph = one_edge(("g\x07<b>", "m"), r_high=np.inf, p=5e-324, **{"odd name": 1})
    found = read_by_networkx(gexf_bytes(graph), tmp_path)
    assert {data["label"] for _, data in found.nodes(data=True)} == {"g\\u0007<b>", "m"}
    ((_, _, data),) = found.edges(data=True)
    assert (data["p"], data["odd_name"], "r_high" in data) == (2.2250738585072014e-308, 1, False)


def test_empty_and_directed_networks() -> None:
    empty = build_network(edges_table([]), features_table(1, 1), attributes=ATTRIBUTES, seed=1)
    assert b"<nodes/>" in gexf_bytes(empty)
    with pytest.raises(InputError, match="edges without direction, one for each pair"):
        gexf_bytes(nx.DiGraph([("a", "b")]))
