"""GraphML out and in: one network, every attribute typed, the same bytes every time."""

from __future__ import annotations

import itertools
import warnings
from collections.abc import Iterable
from dataclasses import dataclass
from pathlib import Path
from xml.etree.ElementTree import Element, ParseError

import defusedxml.ElementTree
import networkx as nx
from defusedxml import DefusedXmlException
from lxml import etree
from networkx.readwrite.graphml import GraphMLReader

from workbench.errors import InputError
from workbench.network.attributes import meaning_of
from workbench.network.encoding import ESCAPES, NOTES, Account, Column, checked_edges, encode
from workbench.network.xml_text import legal_text, restore_text

NAMESPACE = "http://graphml.graphdrawing.org/xmlns"
SCHEMA_PLACE = "http://graphml.graphdrawing.org/xmlns/1.0/graphml.xsd"

MAXIMUM_BYTES = 256 * 2**20
"""Largest file that is read."""

_INSTANCE = "http://www.w3.org/2001/XMLSchema-instance"


@dataclass(frozen=True)
class GraphmlExport:
    """A network as GraphML: the file's bytes, and one note for each thing not written as it was."""

    data: bytes
    notes: tuple[str, ...]


def graphml_bytes(graph: nx.Graph) -> bytes:
    """Return the network as a GraphML file; :func:`export_graphml` returns the notes too."""
    return export_graphml(graph).data


def export_graphml(graph: nx.Graph) -> GraphmlExport:
    r"""Return the network as GraphML with a note for each thing that could not be written as it was.

    Nodes are ``n0``, ``n1`` ... and edges ``e0`` ... in sorted order. Every attribute has a type and a
    description; a missing one is left out. Characters that XML forbids are written as ``\uXXXX``, and the
    network's attribute ``text_escapes`` says so; an infinite number is left out; one nearer to zero than
    2.2e-308 is written as that. The notes are kept in the attribute ``export_notes``.

    Parameters
    ----------
    graph : networkx.Graph
        Nodes that sort. An edge with ``source_block`` starts at its node of that ``block``.

    Returns
    -------
    GraphmlExport
        The same bytes for equal networks, whatever the order in which they were built.

    Raises
    ------
    InputError
        The graph is directed or holds several edges for a pair.

    References
    ----------
    Brandes U, Eiglsperger M, Herman I, Himsolt M, Marshall MS (2002). GraphML progress report: structural
    layer proposal. Graph Drawing 2001, LNCS 2265:501.

    Examples
    --------
    >>> graph = nx.Graph([("a", "b", {"r": -0.8})])
    >>> print(graphml_bytes(graph).decode().splitlines()[-4].strip())
    <data key="d0">-0.8</data>
    """
    nodes = sorted(graph.nodes)
    edges = checked_edges(graph, nodes)
    account, keys = Account(), itertools.count()
    own = {name: value for name, value in graph.graph.items() if name not in NOTES}
    of_graph = encode("graph", [own], account, keys)
    of_nodes = encode("node", [graph.nodes[node] for node in nodes], account, keys)
    of_edges = encode("edge", [attributes for _, _, attributes in edges], account, keys)
    told = encode("graph", [account.attributes()], Account(), keys)
    root, body = _document(itertools.chain(*(part.columns for part in (of_graph, of_nodes, of_edges, told))))
    _add_data(body, of_graph.rows[0] + told.rows[0])
    for index, row in enumerate(of_nodes.rows):
        _add_data(etree.SubElement(body, _tag("node"), id=f"n{index}"), row)
    for index, ((source, target, _), row) in enumerate(zip(edges, of_edges.rows, strict=True)):
        ends = {"id": f"e{index}", "source": f"n{source}", "target": f"n{target}"}
        _add_data(etree.SubElement(body, _tag("edge"), ends), row)
    data = etree.tostring(root, xml_declaration=True, encoding="UTF-8", pretty_print=True)
    return GraphmlExport(data, account.notes())


def _document(columns: Iterable[Column]) -> tuple[etree._Element, etree._Element]:
    """Return the root of the file with its keys declared, and the graph inside it, still empty."""
    place = {f"{{{_INSTANCE}}}schemaLocation": f"{NAMESPACE} {SCHEMA_PLACE}"}
    root = etree.Element(_tag("graphml"), place, nsmap={None: NAMESPACE, "xsi": _INSTANCE})
    for column in columns:
        declared = {"id": column.identifier, "for": column.domain}
        declared |= {"attr.name": column.name, "attr.type": column.kind}
        key = etree.SubElement(root, _tag("key"), declared)
        etree.SubElement(key, _tag("desc")).text = legal_text(meaning_of(column.domain, column.meaning))
    return root, etree.SubElement(root, _tag("graph"), id="network", edgedefault="undirected")


def _tag(name: str) -> str:
    """Return the name of an element in GraphML's namespace."""
    return f"{{{NAMESPACE}}}{name}"


def _add_data(parent: etree._Element, row: Iterable[tuple[str, str]]) -> None:
    """Add one ``data`` element for each value."""
    for identifier, text in row:
        etree.SubElement(parent, _tag("data"), key=identifier).text = text


def read_graphml(path: Path | str, *, maximum_bytes: int = MAXIMUM_BYTES) -> nx.Graph:
    """Return the network of a GraphML file.

    Where every node has a ``block`` and a ``feature``, nodes are keyed by them, as
    :func:`~workbench.network.builder.build_network` does, and a network written by this program comes back
    equal; otherwise by the ids of the file. A file is not trusted: one with a document type declaration
    (entities that swell or reach outside) or larger than ``maximum_bytes`` is refused.

    Raises
    ------
    InputError
        The file cannot be read, is too large, is not GraphML, or declares entities.
    """
    path = Path(path)
    data = _gated_bytes(path, maximum_bytes)
    try:
        graph = _parsed(defusedxml.ElementTree.fromstring(data, forbid_dtd=True))
    except DefusedXmlException as error:
        raise InputError(
            f"{path}: declares a document type, which a network does not need and which can swell or read "
            "other files; export it again without one"
        ) from error
    except (ParseError, nx.NetworkXException, LookupError, ValueError, TypeError, AttributeError) as error:
        raise InputError(f"{path}: is not GraphML that can be read: {error}; export it again") from error
    return _as_built(graph)


def _parsed(root: Element) -> nx.Graph:
    """Return the first graph of a GraphML document that has been parsed already."""
    body = root.find(_tag("graph"))
    if root.tag != _tag("graphml") or body is None:
        raise ValueError("it holds no graph")
    reader = GraphMLReader()
    with warnings.catch_warnings():
        warnings.simplefilter("ignore", UserWarning)
        return reader.make_graph(body, *reader.find_graphml_keys(root))


def _gated_bytes(path: Path, maximum_bytes: int) -> bytes:
    """Return the bytes of a file that is not too large."""
    try:
        with path.open("rb") as file:
            data = file.read(maximum_bytes + 1)
    except OSError as error:
        raise InputError(f"{path}: cannot be read: {error.strerror}") from error
    if len(data) > maximum_bytes:
        raise InputError(
            f"{path}: has more than {maximum_bytes} bytes, the most that is read; lower maximum_edges in "
            "project.toml, or read the file with a graph program"
        )
    return data


def _as_built(graph: nx.Graph) -> nx.Graph:
    """Return the graph without what the reader added, texts restored, nodes keyed by block and feature."""
    escaped = graph.graph.get("text_escapes") == ESCAPES
    for name in ("node_default", "edge_default", *NOTES):
        graph.graph.pop(name, None)
    records = [graph.graph, *(found for _, found in graph.nodes(data=True))]
    for _, _, attributes in graph.edges(data=True):
        attributes.pop("id", None)
        records.append(attributes)
    if escaped:
        for record in records:
            record |= {name: restore_text(v) for name, v in record.items() if isinstance(v, str)}
    keys = {node: (found.get("block"), found.get("feature")) for node, found in graph.nodes(data=True)}
    whole = all(isinstance(part, str) for key in keys.values() for part in key)
    return nx.relabel_nodes(graph, keys) if whole and len(set(keys.values())) == len(keys) else graph
