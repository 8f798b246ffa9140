"""GraphML files are the same every time, typed, legal whatever the labels, and come back equal."""

from __future__ import annotations

import re
from pathlib import Path

import networkx as nx
import numpy as np
import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st
from lxml import etree
from network.networks import ATTRIBUTES, columns, names, one_edge, random_tables, small_network

from workbench.errors import InputError
from workbench.network import build_network, export_graphml, graphml_bytes, read_graphml

SPACE = {"g": "http://graphml.graphdrawing.org/xmlns"}
BOMB = b"""<!DOCTYPE graphml [<!ENTITY a "aaaaaaaaaa"><!ENTITY b "&a;&a;&a;&a;&a;&a;&a;&a;&a;&a;">]>
<graphml xmlns="http://graphml.graphdrawing.org/xmlns">
<graph edgedefault="undirected"><desc>&b;</desc></graph></graphml>"""


def read_back(folder: Path, data: bytes) -> nx.Graph:
    """Return the network of a file with these bytes."""
    path = folder / "network.graphml"
    path.write_bytes(data)
    return read_graphml(path)


def keys_of(data: bytes) -> dict[tuple[str, str], tuple[str, str]]:
    """Return type and description of each attribute that a file declares."""
    found = etree.fromstring(data).findall("g:key", SPACE)
    return {
        (k.get("for"), k.get("attr.name")): (k.get("attr.type"), k.findtext("g:desc", None, SPACE))
        for k in found
    }


def test_second_export_has_the_same_bytes_whatever_the_order_of_rows() -> None:
    edges, features = random_tables(80, 40, 15)
    first = graphml_bytes(build_network(edges, features, attributes=ATTRIBUTES, seed=1))
    mixed = edges.sample(frac=1, random_state=1)[list(edges.columns[::-1])], features.iloc[::-1]
    backwards = dict(reversed(ATTRIBUTES.items()))
    assert graphml_bytes(build_network(*mixed, attributes=backwards, seed=1)) == first
    assert graphml_bytes(build_network(edges, features, attributes=ATTRIBUTES, seed=1)) == first


def test_every_attribute_is_declared_with_type_and_meaning() -> None:
    keys = keys_of(graphml_bytes(small_network()))
    assert keys["edge", "weight"] == ("double", "size of r, without its sign")
    assert keys["edge", "n"][0] == "int"
    assert keys["node", "label"][0] == "string"
    assert keys["graph", "fdr"][0] == "double"
    assert keys["node", "HMDB_ID"] == ("string", "column 'HMDB ID' of the features table")
    assert {"title", "analysis", "fdr", "version", "cautions"} <= {
        name for domain, name in keys if domain == "graph"
    }
    assert all(meaning for _, meaning in keys.values())


def test_ids_are_plain_and_unique_and_edges_start_at_their_source_block() -> None:
    graph = small_network()
    root = etree.fromstring(graphml_bytes(graph))
    nodes, edges = root.findall(".//g:node", SPACE), root.findall(".//g:edge", SPACE)
    assert [node.get("id") for node in nodes] == [f"n{i}" for i in range(len(graph))]
    assert [edge.get("id") for edge in edges] == [f"e{i}" for i in range(graph.number_of_edges())]
    block = {key.get("attr.name"): key.get("id") for key in root.findall("g:key[@for='node']", SPACE)}[
        "block"
    ]
    of = {node.get("id"): node.findtext(f"g:data[@key='{block}']", None, SPACE) for node in nodes}
    assert {(of[edge.get("source")], of[edge.get("target")]) for edge in edges} == {("rna", "lcms")}


def test_missing_values_are_left_out() -> None:
    data = graphml_bytes(one_edge(p=np.nan, basis=None, q=0.01))
    names_of_edge = {name for domain, name in keys_of(data) if domain == "edge"}
    assert "q" in names_of_edge
    assert not {"p", "basis"} & names_of_edge


def test_changes_are_told_in_the_file_and_to_the_caller() -> None:
    graph = one_edge(("g\x07", "m"), r_high=np.inf, p=5e-324, **{"odd name": 1})
    found = export_graphml(graph)
    assert found.notes == (
        "texts with characters that XML forbids: 2; a backslash, u and four hexadecimal digits stand for the "
        "character of that code",
        "infinite numbers left out: 1",
        "numbers nearer to zero than 2.23e-308, written as that: 1",
        "attribute 'odd name' is named 'odd_name'",
    )
    keys = keys_of(found.data)
    assert ("graph", "text_escapes") in keys
    assert "; ".join(found.notes).encode() in found.data
    assert b">2.2250738585072014e-308<" in found.data
    assert b"g\\u0007" in found.data


def test_nothing_is_told_where_nothing_was_changed() -> None:
    found = export_graphml(one_edge(("<g> & 'co'", "שלום 🧬")))
    assert found.notes == ()
    assert b"export_notes" not in found.data
    assert b"text_escapes" not in found.data


def test_network_comes_back_equal_and_exports_to_the_same_bytes(tmp_path: Path) -> None:
    graph = small_network()
    for _, found in graph.nodes(data=True):
        found.pop("HMDB ID", None)
    back = read_back(tmp_path, graphml_bytes(graph))
    assert nx.utils.graphs_equal(graph, back)
    assert graphml_bytes(back) == graphml_bytes(graph)


@settings(suppress_health_check=[HealthCheck.function_scoped_fixture])
@given(names, names, columns)
def test_any_network_is_written_and_labels_come_back(
    tmp_path: Path, source: str, target: str, more: dict
) -> None:
    graph = one_edge((source, target), **more)
    found = export_graphml(graph)
    back = read_back(tmp_path, found.data)
    assert set(back) == {("a", source), ("b", target)}
    assert back.nodes["a", source]["label"] == source
    assert set(back.edges[("a", source), ("b", target)]) <= {name for _, name in keys_of(found.data)}
    assert export_graphml(graph).data == found.data


@pytest.mark.parametrize("kind", [nx.DiGraph, nx.MultiGraph])
def test_other_graphs_are_refused(kind: type) -> None:
    with pytest.raises(InputError, match="edges without direction, one for each pair"):
        graphml_bytes(kind([("a", "b")]))


def test_entities_are_refused(tmp_path: Path) -> None:
    with pytest.raises(InputError, match=r"network\.graphml: declares a document type"):
        read_back(tmp_path, BOMB)


def test_large_and_lacking_files_are_refused(tmp_path: Path) -> None:
    path = tmp_path / "network.graphml"
    with pytest.raises(InputError, match=r"network\.graphml: cannot be read: No such file"):
        read_graphml(path)
    path.write_bytes(graphml_bytes(small_network()))
    with pytest.raises(InputError, match="has more than 1000 bytes"):
        read_graphml(path, maximum_bytes=1000)
    assert len(read_graphml(path, maximum_bytes=path.stat().st_size)) > 2


@pytest.mark.parametrize(
    "data", [b"", b"<a/>", b"not xml", b"\xff\xfe\x00", b"<graphml", b"PK\x03\x04", b"\x00" * 40]
)
def test_foreign_files_are_refused(tmp_path: Path, data: bytes) -> None:
    with pytest.raises(InputError, match=r"network\.graphml: is not GraphML that can be read"):
        read_back(tmp_path, data)


@settings(suppress_health_check=[HealthCheck.function_scoped_fixture], max_examples=200)
@given(st.data())
def test_damaged_files_give_a_network_or_an_explained_error(tmp_path: Path, data: st.DataObject) -> None:
    whole = bytearray(graphml_bytes(one_edge(p=0.5)))
    for _ in range(data.draw(st.integers(1, 3))):
        place = data.draw(st.integers(0, len(whole) - 1))
        whole[place : place + data.draw(st.integers(0, 30))] = data.draw(st.binary(max_size=6))
    try:
        outcome = type(read_back(tmp_path, bytes(whole))).__name__
    except InputError as error:
        outcome = str(error).partition("network.graphml: ")[2]
    assert re.match("Graph$|is not GraphML that can be read|declares a document type", outcome)


def test_foreign_network_keeps_its_own_ids(tmp_path: Path) -> None:
    nx.write_graphml(nx.Graph([("a", "b", {"weight": 0.5})]), tmp_path / "network.graphml")
    back = read_graphml(tmp_path / "network.graphml")
    assert list(back.edges(data=True)) == [("a", "b", {"weight": 0.5})]
