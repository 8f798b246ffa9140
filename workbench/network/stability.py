"""How stable the communities of a network are when part of its evidence is taken away."""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from dataclasses import dataclass

import networkx as nx
import numpy as np

from workbench.network.communities import communities
from workbench.network.keys import Key

SHARE_KEPT = 0.5
"""Share of the edges that a resample keeps: as much is taken away as half of the samples would be."""

MOST_EDGES = 200_000
"""Edges that all resamples may hold together; large networks are resampled fewer times, and 10 at least."""

FEWEST = 10
UNSTABLE, STABLE = 0.6, 0.75
"""Hennig's advice: under 0.6 a cluster should not be trusted, from 0.75 on it is a real pattern of the data."""

Pairs = Sequence[tuple[Key, Key]]


@dataclass(frozen=True)
class CommunityStability:
    """How the communities of a network come back in resamples.

    Attributes
    ----------
    of_community : dict of int to float
        Mean over resamples of the largest Jaccard similarity with a community of the resample.
    of_feature : dict of Key to float
        Share of the resamples that hold the feature in which it lies in the community that matches its own best.
    resamples : int
    how : str
        What a resample is, in words.
    """

    of_community: dict[int, float]
    of_feature: dict[Key, float]
    resamples: int
    how: str


def community_stability(
    graph: nx.Graph, *, resamples: int, seed: int, halves: Sequence[Pairs] | None = None
) -> CommunityStability:
    """Return how far the communities of ``graph`` come back when evidence is taken away.

    Each community is held against the communities of every resample by the Jaccard similarity, on the features that
    the resample still holds (an edge is left to them); the best match counts, averaged over the resamples.

    Parameters
    ----------
    graph : networkx.Graph
        With ``community`` of its nodes.
    resamples : int
        Number of draws that keep half of the edges; fewer where they would hold more than 200,000 edges together.
    seed : int
        Of the draws, and of the communities.
    halves : sequence of edge lists, optional
        The edges found in half-samples of the study, in place of draws: the better evidence where it was computed.

    References
    ----------
    Hennig C (2007). Cluster-wise assessment of cluster stability. Comput Stat Data Anal 52:258.
    """
    drawn = _drawn(graph, resamples, seed) if halves is None else _of_halves(graph, halves)
    how = "half of the edges, drawn at random" if halves is None else "the edges of half of the samples"
    own = _members(dict(graph.nodes(data="community")))
    similarity: dict[int, list[float]] = {number: [] for number in own}
    seen, together = dict.fromkeys(graph.nodes, 0), dict.fromkeys(graph.nodes, 0)
    count = 0
    for part in drawn:
        count += 1
        found: dict[Key, int] = communities(part, seed)
        others = _members(found)
        for number, members in own.items():
            here = members & found.keys()
            best, matched = _best_match(here, found, others)
            if here:
                similarity[number].append(best)
            for node in here:
                seen[node] += 1
                together[node] += node in matched
    return CommunityStability(
        {number: float(np.mean(values)) for number, values in similarity.items() if values},
        {node: together[node] / seen[node] for node in graph.nodes if seen[node]},
        count,
        how,
    )


def _members(found: dict[Key, int]) -> dict[int, set[Key]]:
    """Return the features of each community."""
    members: dict[int, set[Key]] = {}
    for node, number in found.items():
        members.setdefault(number, set()).add(node)
    return members


def _best_match(
    members: set[Key], found: dict[Key, int], others: dict[int, set[Key]]
) -> tuple[float, set[Key]]:
    """Return the largest Jaccard similarity of some features with a community, and that community."""
    best: tuple[float, set[Key]] = (0.0, set())
    for number in sorted({found[node] for node in members}):
        other = others[number]
        similarity = len(members & other) / len(members | other)
        if similarity > best[0]:
            best = (similarity, other)
    return best


def _drawn(graph: nx.Graph, resamples: int, seed: int) -> Iterable[nx.Graph]:
    """Yield networks of half of the edges, drawn at random."""
    edges = sorted(graph.edges)
    keep = max(1, round(SHARE_KEPT * len(edges)))
    allowed = max(FEWEST, MOST_EDGES // max(keep, 1))
    for number in range(min(resamples, allowed) if edges else 0):
        random = np.random.default_rng(np.random.SeedSequence(seed, spawn_key=(number,)))
        chosen = np.sort(random.choice(len(edges), keep, replace=False))
        yield _with_edges(graph, [edges[place] for place in chosen])


def _of_halves(graph: nx.Graph, halves: Sequence[Pairs]) -> Iterable[nx.Graph]:
    """Yield the networks of half-samples, as many as allowed; features outside the network are left out."""
    allowed = max(FEWEST, MOST_EDGES // max(graph.number_of_edges(), 1))
    for pairs in halves[:allowed]:
        yield _with_edges(graph, [pair for pair in pairs if pair[0] in graph and pair[1] in graph])


def _with_edges(graph: nx.Graph, edges: Pairs) -> nx.Graph:
    """Return a network of some edges with their weights in ``graph``, their mean for edges that it lacks."""
    weights = nx.get_edge_attributes(graph, "weight", default=1.0)
    mean = float(np.mean(list(weights.values()))) if weights else 1.0
    part = nx.Graph()
    for first, second in edges:
        weight = weights.get((first, second), weights.get((second, first), mean))
        part.add_edge(first, second, weight=weight)
    return part
