"""From the tables of edges and features to a network."""

from __future__ import annotations

import math
from collections.abc import Iterable, Iterator, Mapping, Sequence
from typing import Any

import networkx as nx
import pandas as pd

from workbench import __version__
from workbench.errors import InputError
from workbench.intake.faults import counted
from workbench.network.attributes import Plain, plain_value, uniform
from workbench.network.backbone import backbone_p
from workbench.network.communities import RESOLUTION, communities
from workbench.network.keys import Key
from workbench.network.layout import with_layout
from workbench.network.stability import CommunityStability, Pairs, community_stability

CAUTIONS = (
    "Research use. Association is not causation. Not for diagnosis or treatment. "
    "Confirm by a targeted assay before acting on an edge."
)

EDGE_COLUMNS = ("source", "source_block", "target", "target_block", "r")
FEATURE_COLUMNS = ("feature", "block")
STABILITY_METHOD = "community_stability_method"
FOUND_OF_NODES = (
    "degree",
    "strength",
    "layers_reached",
    "community",
    "community_stability",
    "connected_component",
)
FOUND_OF_EDGES = ("community", "weight", "backbone_p")
_SHOWN = 3


def build_network(
    edges: pd.DataFrame, features: pd.DataFrame, *, attributes: Mapping[str, Any], seed: int
) -> nx.Graph:
    """Return the network of an analysis: features with an edge, keyed by (block, feature).

    The order of rows and of columns changes nothing: nodes and edges are in sorted order.

    Parameters
    ----------
    edges : pandas.DataFrame
        One row per edge: ``source source_block target target_block r`` and any other columns. All but
        ``source`` and ``target`` become attributes of the edge; ``weight`` is ``|r|``, ``community`` the one
        that holds both ends, ``backbone_p`` the p of the disparity filter.
    features : pandas.DataFrame
        One row per feature: ``feature block`` and any other columns, which become attributes of the node.
        ``label`` is the feature where it is missing; ``degree``, ``strength``, ``layers_reached``, ``community`` and
        ``connected_component`` are those found here.
    attributes : mapping
        Attributes of the network: title, analysis, fdr ... ``cautions`` and ``community_method`` are added,
        ``version`` where it is not given.
    seed : int
        Order in which the community method visits the nodes.

    Returns
    -------
    networkx.Graph
        Attributes are plain bool, int, float or str; a missing one is absent.

    Raises
    ------
    InputError
        A column is lacking; an edge or feature is there twice; an edge joins a feature with itself or with
        one that the features table lacks; ``r`` is missing or not between -1 and 1.

    Examples
    --------
    >>> edges = pd.DataFrame({"source": ["g1"], "source_block": ["rna"], "target": ["m1"],
    ...                       "target_block": ["lcms"], "r": [-0.8]})
    >>> features = pd.DataFrame({"feature": ["g1", "m1"], "block": ["rna", "lcms"]})
    >>> graph = build_network(edges, features, attributes={"title": "a study"}, seed=1)
    >>> graph.nodes["rna", "g1"]["degree"], graph.edges[("rna", "g1"), ("lcms", "m1")]["weight"]
    (1, 0.8)
    """
    _check_columns("edges", edges, EDGE_COLUMNS)
    _check_columns("features", features, FEATURE_COLUMNS)
    ends = _ends(edges)
    nodes = _node_attributes(features, {key for pair in ends for key in pair})
    _check_known(ends, nodes)
    graph = nx.Graph()
    graph.add_nodes_from(sorted(nodes.items()))
    joined = ((*pair, found) for pair, found in zip(ends, _edge_attributes(edges, ends), strict=True))
    graph.add_edges_from(sorted(joined, key=lambda edge: edge[:2]))
    _set_structure(graph, seed)
    graph.graph.update(_graph_attributes(attributes, seed))
    return graph


def with_communities(edges: pd.DataFrame, graph: nx.Graph) -> pd.DataFrame:
    """Return the edges table with ``community`` (missing where the ends differ) and ``backbone_p`` of ``graph``."""
    found = [graph.edges[pair] for pair in _ends(edges)]
    return edges.assign(
        community=pd.array([edge.get("community") for edge in found], dtype="Int64"),
        backbone_p=pd.array([edge.get("backbone_p", math.nan) for edge in found], dtype="float64"),
    )


def with_degrees(features: pd.DataFrame, graph: nx.Graph) -> pd.DataFrame:
    """Return the features table with ``degree`` (0 outside the network) and ``community`` of ``graph``.

    ``community_stability`` stands there where :func:`with_stability` has set it.
    """
    nodes = [graph.nodes.get(key, {}) for key in _keys(features, "block", "feature")]
    table = features.assign(
        degree=pd.array([node.get("degree", 0) for node in nodes], dtype="Int64"),
        community=pd.array([node.get("community") for node in nodes], dtype="Int64"),
    )
    if STABILITY_METHOD in graph.graph:
        told = [node.get("community_stability", math.nan) for node in nodes]
        table["community_stability"] = pd.array(told, dtype="float64")
    return table


def rated_network(
    graph: nx.Graph, *, resamples: int, seed: int, halves: Sequence[Pairs] | None = None
) -> nx.Graph:
    """Return the network as it leaves: nodes with the stability of their community and a place.

    Parameters
    ----------
    graph : networkx.Graph
    resamples : int
        0 for no stability.
    seed : int
    halves : sequence of edge lists, optional
        The edges of half-samples; without any the edges are drawn.
    """
    if resamples and graph.number_of_edges():
        found = community_stability(graph, resamples=resamples, seed=seed, halves=halves or None)
        graph = with_stability(graph, found)
    return with_layout(graph)


def with_stability(graph: nx.Graph, found: CommunityStability) -> nx.Graph:
    """Return a copy of the network whose nodes carry ``community_stability``, and which says how it was had."""
    rated = graph.copy()
    for key, share in found.of_feature.items():
        rated.nodes[key]["community_stability"] = share
    rated.graph[STABILITY_METHOD] = f"{found.resamples} resamples: {found.how}"
    return rated


def _check_columns(table: str, frame: pd.DataFrame, needed: tuple[str, ...]) -> None:
    """Refuse a table that lacks a column or has one twice."""
    lacking = [name for name in needed if name not in frame.columns]
    if lacking:
        raise InputError(
            f"the {table} table has no column {_listed(lacking)}; "
            f"it needs {' '.join(needed)} and has {' '.join(map(str, frame.columns)) or 'none'}"
        )
    twice = list(frame.columns[frame.columns.duplicated()])
    if twice:
        raise InputError(f"the {table} table has more than one column {_listed(twice)}; keep one of each")


def _keys(frame: pd.DataFrame, block: str, feature: str) -> Iterator[Key]:
    """Yield the key of each row; a block or feature that is missing is refused."""
    for row, pair in enumerate(zip(frame[block], frame[feature], strict=True), start=1):
        key = tuple(plain_value(value) for value in pair)
        if None in key:
            raise InputError(f"row {row} has no {feature if key[1] is None else block}; give every row one")
        yield str(key[0]), str(key[1])


def _ends(edges: pd.DataFrame) -> list[tuple[Key, Key]]:
    """Return both ends of each edge, refusing loops and pairs that come twice."""
    ends = list(
        zip(_keys(edges, "source_block", "source"), _keys(edges, "target_block", "target"), strict=True)
    )
    seen: set[frozenset[Key]] = set()
    for row, (source, target) in enumerate(ends, start=1):
        if source == target:
            raise InputError(f"edges table, row {row}: {_named(source)} is joined with itself; take it out")
        pair = frozenset((source, target))
        if pair in seen:
            raise InputError(
                f"edges table, row {row}: {_named(source)} and {_named(target)} are already joined above; "
                "an edge has no direction, keep one of the two rows"
            )
        seen.add(pair)
    return ends


def _node_attributes(features: pd.DataFrame, wanted: set[Key]) -> dict[Key, dict[str, Plain]]:
    """Return the attributes of each feature that has an edge."""
    keys = list(_keys(features, "block", "feature"))
    rows = [row for row, key in enumerate(keys) if key in wanted]
    kept = [keys[row] for row in rows]
    if len(set(kept)) < len(kept):
        twice = next(key for place, key in enumerate(kept) if key in kept[:place])
        raise InputError(f"features table: {_named(twice)} has more than one row; keep one")
    found = _records("node", features.iloc[rows], skip=("block", "feature", *FOUND_OF_NODES))
    return {
        key: {"label": key[1], **record, "block": key[0], "feature": key[1]}
        for key, record in zip(kept, found, strict=True)
    }


def _edge_attributes(edges: pd.DataFrame, ends: list[tuple[Key, Key]]) -> list[dict[str, Plain]]:
    """Return the attributes of each edge, ``weight`` among them."""
    found = _records("edge", edges, skip=("source", "target", *FOUND_OF_EDGES))
    for row, (record, (source, target)) in enumerate(zip(found, ends, strict=True), start=1):
        r = record.get("r", math.nan)
        if isinstance(r, str) or not abs(r) <= 1:
            raise InputError(
                f"edges table, row {row}: r of {_named(source)} and {_named(target)} is {r}; "
                "allowed: a number from -1 to 1"
            )
        record["weight"] = abs(float(r))
    return found


def _records(domain: Any, frame: pd.DataFrame, skip: Iterable[str]) -> list[dict[str, Plain]]:
    """Return the rows of a table as dicts of plain values without those that are missing."""
    records: list[dict[str, Plain]] = [{} for _ in range(len(frame))]
    for column in frame.columns:
        if column in skip:
            continue
        values = uniform(domain, str(column), frame[column].tolist())
        for record, value in zip(records, values, strict=True):
            if value is not None:
                record[str(column)] = value
    return records


def _check_known(ends: list[tuple[Key, Key]], nodes: Mapping[Key, Any]) -> None:
    """Refuse edges to features that the features table lacks: their layer would be a guess."""
    unknown = sorted({key for pair in ends for key in pair} - set(nodes))
    if unknown:
        shown = ", ".join(_named(key) for key in unknown[:_SHOWN])
        raise InputError(
            f"the features table lacks {counted(len(unknown), 'feature')} of the edges table: {shown}"
            f"{' ...' if len(unknown) > _SHOWN else ''}; both tables must come from one analysis"
        )


def _set_structure(graph: nx.Graph, seed: int) -> None:
    """Set what the edges as a whole say of each node and each edge."""
    found: dict[Key, int] = communities(graph, seed)
    pieces = sorted(nx.connected_components(graph), key=lambda piece: (-len(piece), min(piece)))
    for number, piece in enumerate(pieces, start=1):
        for node in piece:
            graph.nodes[node]["connected_component"] = number
    for node, attributes in graph.nodes(data=True):
        attributes["degree"], attributes["community"] = graph.degree[node], found[node]
        attributes["strength"] = math.fsum(graph.edges[node, other]["weight"] for other in graph[node])
        reached = {graph.nodes[other].get("layer", other[0]) for other in graph[node]}
        attributes["layers_reached"] = len(reached)
    for pair, p in backbone_p(graph).items():
        graph.edges[pair]["backbone_p"] = p
    for source, target, attributes in graph.edges(data=True):
        if found[source] == found[target]:
            attributes["community"] = found[source]


def _graph_attributes(attributes: Mapping[str, Any], seed: int) -> dict[str, Plain]:
    """Return the attributes of the network, the cautions always among them."""
    given = {str(name): plain_value(value) for name, value in attributes.items()}
    method = f"Louvain on |r|, resolution {RESOLUTION:g}, seed {seed}, split into connected pieces"
    added = {"version": __version__} | given | {"cautions": CAUTIONS, "community_method": method}
    return {name: value for name, value in added.items() if value is not None}


def _named(key: Key) -> str:
    """Return a feature as messages name it."""
    return f"{key[1]!r} of block {key[0]!r}"


def _listed(names: Iterable[Any]) -> str:
    """Return names in quotes, joined by commas."""
    return ", ".join(repr(name) for name in names)
