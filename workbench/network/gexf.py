"""GEXF out: the same network in the second open format of graph programs, the same bytes every time."""

from __future__ import annotations

import itertools
from collections.abc import Iterable

import networkx as nx
from lxml import etree

from workbench.network.attributes import Kind
from workbench.network.encoding import NOTES, Account, Column, Encoded, checked_edges, encode
from workbench.network.xml_text import legal_text

NAMESPACE = "http://www.gexf.net/1.2draft"
_VIZ = "http://www.gexf.net/1.2draft/viz"
_TYPES: dict[Kind, str] = {
    "boolean": "boolean",
    "int": "integer",
    "long": "long",
    "double": "double",
    "string": "string",
}


def gexf_bytes(graph: nx.Graph) -> bytes:
    """Return the network as a GEXF 1.2 file: what the GraphML holds, under the same names and types.

    Nodes are ``n0`` ... and edges ``e0`` ... in the same order as there. The file's ``meta`` holds the cautions and
    no date. Attributes of the network itself have no place in the format; they are part of the description. Nodes
    with ``x`` and ``y`` have a position.

    Raises
    ------
    InputError
        The graph is directed or holds several edges for a pair.

    References
    ----------
    GEXF 1.2draft primer, gexf.net.

    Examples
    --------
    >>> graph = nx.Graph([("a", "b", {"r": -0.8, "weight": 0.8})])
    >>> b'weight="0.8"' in gexf_bytes(graph)
    True
    """
    nodes = sorted(graph.nodes)
    edges = checked_edges(graph, nodes)
    account = Account()
    of_nodes = encode("node", [graph.nodes[node] for node in nodes], account, itertools.count())
    of_edges = encode("edge", [attributes for _, _, attributes in edges], account, itertools.count())
    root, body = _document(graph, account)
    _declare(body, "node", of_nodes.columns)
    _declare(body, "edge", of_edges.columns)
    _add_nodes(body, graph, nodes, of_nodes)
    holder = etree.SubElement(body, _tag("edges"))
    weight = next((column.identifier for column in of_edges.columns if column.name == "weight"), "")
    for index, ((source, target, _), row) in enumerate(zip(edges, of_edges.rows, strict=True)):
        ends = {"id": f"e{index}", "source": f"n{source}", "target": f"n{target}"}
        told = dict(row).get(weight)
        _add_values(etree.SubElement(holder, _tag("edge"), ends | ({"weight": told} if told else {})), row)
    data: bytes = etree.tostring(root, xml_declaration=True, encoding="UTF-8", pretty_print=True)
    return data


def _document(graph: nx.Graph, account: Account) -> tuple[etree._Element, etree._Element]:
    """Return the root of the file and the graph inside it, still empty."""
    root = etree.Element(_tag("gexf"), version="1.2", nsmap={None: NAMESPACE, "viz": _VIZ})
    meta = etree.SubElement(root, _tag("meta"))
    own = {name: value for name, value in graph.graph.items() if name not in NOTES} | account.attributes()
    encoded = encode("graph", [own], Account(), itertools.count())
    names = {column.identifier: column.name for column in encoded.columns}
    creator = legal_text(f"workbench {graph.graph.get('version', '')}".strip())
    etree.SubElement(meta, _tag("creator")).text = creator
    told = (f"{names[identifier]}: {text}" for identifier, text in encoded.rows[0])
    etree.SubElement(meta, _tag("description")).text = "; ".join(told)
    body = etree.SubElement(root, _tag("graph"), defaultedgetype="undirected", mode="static")
    return root, body


def _declare(body: etree._Element, domain: str, columns: Iterable[Column]) -> None:
    """Declare the attributes of nodes or of edges."""
    held = etree.SubElement(body, _tag("attributes"), {"class": domain, "mode": "static"})
    for column in columns:
        declared = {"id": column.identifier, "title": column.name, "type": _TYPES[column.kind]}
        etree.SubElement(held, _tag("attribute"), declared)


def _add_nodes(body: etree._Element, graph: nx.Graph, nodes: list[object], encoded: Encoded) -> None:
    """Add the nodes with their labels, values and places."""
    holder = etree.SubElement(body, _tag("nodes"))
    for index, (node, row) in enumerate(zip(nodes, encoded.rows, strict=True)):
        found = graph.nodes[node]
        label = legal_text(str(found.get("label", node)))
        element = etree.SubElement(holder, _tag("node"), id=f"n{index}", label=label)
        _add_values(element, row)
        if isinstance(found.get("x"), float) and isinstance(found.get("y"), float):
            place = {"x": repr(found["x"]), "y": repr(found["y"]), "z": "0.0"}
            etree.SubElement(element, f"{{{_VIZ}}}position", place)


def _add_values(element: etree._Element, row: list[tuple[str, str]]) -> None:
    """Add the values of one node or edge."""
    if row:
        holder = etree.SubElement(element, _tag("attvalues"))
        for identifier, text in row:
            etree.SubElement(holder, _tag("attvalue"), {"for": identifier, "value": text})


def _tag(name: str) -> str:
    """Return the name of an element in the format's namespace."""
    return f"{{{NAMESPACE}}}{name}"
