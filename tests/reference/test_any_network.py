"""500 networks of any legal labels and cells: valid, read by two libraries with equal attributes, the same twice.

Outside checks: the GraphML schema (see ``test_graphml_schema.py``), ``networkx.read_graphml``, igraph's
``Graph.Read_GraphML`` and ``networkx.read_gexf``.
"""

from __future__ import annotations

from pathlib import Path

import networkx as nx
import pandas as pd
import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st
from lxml import etree
from network.networks import cells, names
from reference.test_graphml_readers import as_written, present
from reference.test_graphml_schema import faults, schema

from workbench.network import build_network, gexf_bytes, graphml_bytes, with_layout

igraph = pytest.importorskip("igraph")
__all__ = ["schema"]

more_columns = st.dictionaries(names.filter(lambda name: len(name) < 100), st.integers(0, 3), max_size=3)


@st.composite
def networks(draw: st.DrawFn) -> tuple[pd.DataFrame, pd.DataFrame, dict]:
    """Return tables of 1 to 5 features a side joined at will, with columns of any names and cells."""
    sides = [draw(st.lists(names, min_size=1, max_size=5, unique=True)) for _ in range(2)]
    pairs = st.tuples(st.sampled_from(sides[0]), st.sampled_from(sides[1]))
    ends = draw(st.lists(pairs, max_size=8, unique=True))
    r = draw(st.lists(st.floats(-1, 1), min_size=len(ends), max_size=len(ends)))
    edges = pd.DataFrame({"source": [a for a, _ in ends], "source_block": "one"}, dtype=object)
    edges = edges.assign(target=[b for _, b in ends], target_block="two", r=r)
    labels = [*sides[0], *sides[1]]
    blocks = ["one"] * len(sides[0]) + ["two"] * len(sides[1])
    features = pd.DataFrame({"feature": labels, "block": blocks}, dtype=object)
    for frame in (edges, features):
        for name in draw(more_columns):
            if name not in frame.columns and name not in ("label", "layer"):
                column = draw(st.lists(cells, min_size=len(frame), max_size=len(frame)))
                frame[name] = pd.Series(column, dtype=object)
    return (
        edges,
        features,
        draw(st.dictionaries(names.filter(lambda name: len(name) < 100), cells, max_size=2)),
    )


@settings(suppress_health_check=list(HealthCheck), max_examples=500, deadline=None)
@given(networks())
def test_any_network_leaves_and_is_read_elsewhere(
    schema: etree.XMLSchema, tmp_path: Path, tables: tuple[pd.DataFrame, pd.DataFrame, dict]
) -> None:
    edges, features, attributes = tables
    graph = with_layout(build_network(edges, features, attributes=attributes, seed=1))
    data, other = graphml_bytes(graph), gexf_bytes(graph)
    again = with_layout(build_network(edges.iloc[::-1], features.iloc[::-1], attributes=attributes, seed=1))
    assert (graphml_bytes(again), gexf_bytes(again)) == (data, other)
    assert faults(schema, data) == []
    graphml, gexf = tmp_path / "network.graphml", tmp_path / "network.gexf"
    graphml.write_bytes(data)
    gexf.write_bytes(other)
    read, second, third = (
        nx.read_graphml(graphml),
        igraph.Graph.Read_GraphML(str(graphml)),
        nx.read_gexf(gexf),
    )
    assert len(read) == second.vcount() == len(third) == len(graph)
    assert read.number_of_edges() == second.ecount() == third.number_of_edges() == len(edges)
    for vertex in second.vs:
        found = present(read.nodes[f"n{vertex.index}"])
        assert present(vertex.attributes()) == found
        in_gexf = {name: value for name, value in third.nodes[f"n{vertex.index}"].items() if name != "viz"}
        assert present(in_gexf) == found
    told = {data["id"]: present(data) for _, _, data in read.edges(data=True)}
    assert {f"e{edge.index}": present(edge.attributes()) for edge in second.es} == told
    for first, last, data in read.edges(data=True):
        back = {name: value for name, value in third.edges[first, last].items() if name != "id"}
        assert present(back) == told[data["id"]]
    expected = sorted(as_written({"label": node[1]})["label"] for node in graph.nodes)
    assert sorted(found for _, found in read.nodes(data="label")) == expected
