"""Communities of a network: groups of features with more correlation inside than chance would give."""

from __future__ import annotations

from collections.abc import Hashable
from typing import TypeVar

import networkx as nx

Node = TypeVar("Node", bound=Hashable)

RESOLUTION = 1.0
"""Newman's modularity as it is; more would give smaller communities."""

NOTHING = 1e-12
"""An edge of at most this share of the largest weight holds nothing together."""


def communities(graph: nx.Graph, seed: int) -> dict[Node, int]:
    """Return the community of every node, numbered from 1, largest first, then by first node.

    The Louvain method (Blondel et al. 2008) on the modularity of the edges' ``weight`` (1 where an edge has
    none), run on the sorted graph, so that the order of rows in a table changes nothing. A community that
    the method leaves in disconnected pieces (Traag et al. 2019) is split into them. Weights count in
    proportion to the largest; an edge of weight 0 holds nothing together.

    Parameters
    ----------
    graph : networkx.Graph
        Nodes that sort, such as (block, feature); weights of zero and more.
    seed : int
        Order in which the method visits the nodes.

    Returns
    -------
    dict of node to int

    Notes
    -----
    Communities are a way to read the network, not a test: a network of chance edges has some too, and those
    under about ``sqrt(2 * edges)`` edges may be merged (Fortunato & Barthelemy 2007).

    References
    ----------
    Blondel V, Guillaume J, Lambiotte R, Lefebvre E (2008). Fast unfolding of communities in large networks.
    J Stat Mech P10008.

    Fortunato S, Barthelemy M (2007). Resolution limit in community detection. PNAS 104:36.

    Traag V, Waltman L, van Eck N (2019). From Louvain to Leiden: guaranteeing well-connected communities.
    Sci Rep 9:5233.

    Examples
    --------
    >>> graph = nx.Graph([("a", "x"), ("b", "x"), ("b", "y"), ("a", "y"), ("c", "z")])
    >>> communities(graph, seed=0)
    {'a': 1, 'b': 1, 'c': 2, 'x': 1, 'y': 1, 'z': 2}
    """
    nodes = sorted(graph.nodes)
    numbered = _numbered(graph, nodes)
    parts = nx.community.louvain_communities(numbered, weight="weight", resolution=RESOLUTION, seed=seed)
    pieces = [piece for part in parts for piece in nx.connected_components(numbered.subgraph(part))]
    pieces.sort(key=lambda piece: (-len(piece), min(piece)))
    found = {index: number for number, piece in enumerate(pieces, start=1) for index in piece}
    return {node: found[index] for index, node in enumerate(nodes)}


def _numbered(graph: nx.Graph, nodes: list[Node]) -> nx.Graph:
    """Return the graph on 0, 1, ... in sorted order: sets of text have no order that lasts."""
    place = {node: index for index, node in enumerate(nodes)}
    edges = [
        (*sorted((place[source], place[target])), float(weight))
        for source, target, weight in graph.edges(data="weight", default=1.0)
    ]
    largest = max((weight for _, _, weight in edges), default=0.0)
    numbered = nx.Graph()
    numbered.add_nodes_from(range(len(nodes)))
    numbered.add_weighted_edges_from(
        (source, target, weight / largest)
        for source, target, weight in sorted(edges)
        if weight > NOTHING * largest
    )
    return numbered
