"""The backbone of a dense network: edges that are too heavy for their features' other edges to explain."""

from __future__ import annotations

import math

import networkx as nx

from workbench.network.keys import Key

BACKBONE_LEVEL = 0.05
"""Edges with ``backbone_p`` at or under it are the backbone (the level used by the authors, among others)."""


def backbone_p(graph: nx.Graph) -> dict[tuple[Key, Key], float]:
    r"""Return for each edge the p of the disparity filter; edges between two features of one edge have none.

    A feature of ``k`` edges splits its whole weight among them. Were that done at random, uniformly, an edge would
    take a share of ``w_ij / s_i`` or more with probability

    .. math:: \alpha_{ij} = (1 - w_{ij} / s_i)^{k_i - 1} .

    The smaller of the two ends' p counts: an edge belongs to the backbone as soon as one end needs it. An end of a
    single edge says nothing (its p is 1). Not corrected for the number of edges; it orders edges for the eye, and is
    no evidence that a pair is correlated: all edges passed that test.

    Parameters
    ----------
    graph : networkx.Graph
        Edges with ``weight`` of zero and more (1 where an edge has none).

    References
    ----------
    Serrano MA, Boguna M, Vespignani A (2009). Extracting the multiscale backbone of complex weighted networks. PNAS
    106:6483, equation 2.

    Examples
    --------
    >>> graph = nx.Graph()
    >>> graph.add_weighted_edges_from([("a", "b", 8.0), ("a", "c", 1.0), ("a", "d", 1.0)])
    >>> {edge: round(p, 3) for edge, p in backbone_p(graph).items()}
    {('a', 'b'): 0.04, ('a', 'c'): 0.81, ('a', 'd'): 0.81}
    """
    strength = {
        node: math.fsum(graph.edges[node, other].get("weight", 1.0) for other in graph[node])
        for node in graph.nodes
    }
    found = {}
    for first, second, weight in graph.edges(data="weight", default=1.0):
        shares = [_share_p(float(weight), strength[end], graph.degree[end]) for end in (first, second)]
        if max(graph.degree[first], graph.degree[second]) > 1:
            found[first, second] = min(shares)
    return found


def _share_p(weight: float, strength: float, degree: int) -> float:
    """Return the probability of a share as large as ``weight`` of ``strength`` among ``degree`` edges."""
    if degree < 2 or strength <= 0.0:
        return 1.0
    return float(max(0.0, 1.0 - weight / strength) ** (degree - 1))
