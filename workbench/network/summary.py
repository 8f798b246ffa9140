"""What a network holds, in numbers and in plain words."""

from __future__ import annotations

from collections import Counter
from collections.abc import Iterable
from dataclasses import dataclass

import networkx as nx

from workbench.network.builder import Key

LONGEST_NAME = 60
"""Characters of a name that are shown; the rest is cut."""


@dataclass(frozen=True)
class PairCount:
    """Edges between two blocks, and how many of them have ``r`` above and below zero."""

    blocks: tuple[str, str]
    edges: int
    positive: int
    negative: int


@dataclass(frozen=True)
class Community:
    """One community: its number, its features in each layer, and the edges that lie inside it."""

    number: int
    layers: dict[str, int]
    edges: int

    @property
    def features(self) -> int:
        """Return the number of features."""
        return sum(self.layers.values())


@dataclass(frozen=True)
class Hub:
    """A feature with many edges: how many reach into its own layer, how many into each other one."""

    key: Key
    label: str
    layer: str
    degree: int
    own_layer: int
    other_layers: dict[str, int]


@dataclass(frozen=True)
class NetworkSummary:
    """Counts of a network; ``components`` are the sizes of its connected components, largest first."""

    features: int
    edges: int
    pairs: tuple[PairCount, ...]
    communities: tuple[Community, ...]
    hubs: tuple[Hub, ...]
    components: tuple[int, ...]

    def sentences(self, *, shown: int = 5) -> tuple[str, ...]:
        """Return the summary in plain words, at most ``shown`` communities and hubs of it."""
        if not self.edges:
            return ("No edges: no pair of features passed the evidence rules.",)
        return (
            f"{_count(self.edges, 'edge')} {_verb(self.edges, 'join')} {self.features} features.",
            *map(_pair_sentence, self.pairs),
            f"{_count(len(self.components), 'connected component')}; the largest holds "
            f"{self.components[0]} of {self.features} features.",
            *_community_sentences(self.communities, shown),
            *(_hub_sentence(hub) for hub in self.hubs[:shown]),
        )


def summarise(graph: nx.Graph, *, hubs: int = 10) -> NetworkSummary:
    """Return what a network of :func:`~workbench.network.builder.build_network` holds.

    Parameters
    ----------
    graph : networkx.Graph
    hubs : int, default 10
        Features with the most edges to name, of those with two and more; equal ones in order of their key.

    Examples
    --------
    >>> graph = nx.Graph([(("rna", "g1"), ("lcms", "m1"), {"r": -0.8})])
    >>> nx.set_node_attributes(graph, 1, "community")
    >>> summarise(graph).sentences()[1]
    'lcms - rna: 1 edge, 0 with r above zero and 1 below.'
    """
    return NetworkSummary(
        features=graph.number_of_nodes(),
        edges=graph.number_of_edges(),
        pairs=_pair_counts(graph),
        communities=_communities(graph),
        hubs=_hubs(graph, hubs),
        components=tuple(sorted(map(len, nx.connected_components(graph)), reverse=True)),
    )


def network_summary(graph: nx.Graph) -> tuple[str, ...]:
    """Return what a network holds in plain words; :func:`summarise` returns the counts."""
    return summarise(graph).sentences()


def shown_name(text: str) -> str:
    r"""Return a name of the data safe to print: what does not print as ``\uXXXX``, cut when long.

    Examples
    --------
    >>> shown_name("red \x1b[31m"), shown_name("a" * 100)[-4:]
    ('red \\u001b[31m', 'aaa…')
    """
    cut = text if len(text) <= LONGEST_NAME else f"{text[: LONGEST_NAME - 1]}…"
    return "".join(letter if letter.isprintable() else f"\\u{ord(letter):04x}" for letter in cut)


def _pair_counts(graph: nx.Graph) -> tuple[PairCount, ...]:
    """Return the edges between each two blocks, most edges first."""
    edges: Counter[tuple[str, str]] = Counter()
    positive: Counter[tuple[str, str]] = Counter()
    negative: Counter[tuple[str, str]] = Counter()
    for first, second, found in graph.edges(data=True):
        start, end = sorted((first[0], second[0]))
        if found.get("source_block") == end:
            start, end = end, start
        edges[start, end] += 1
        positive[start, end] += found["r"] > 0
        negative[start, end] += found["r"] < 0
    ordered = sorted(edges, key=lambda pair: (-edges[pair], pair))
    return tuple(PairCount(pair, edges[pair], positive[pair], negative[pair]) for pair in ordered)


def _communities(graph: nx.Graph) -> tuple[Community, ...]:
    """Return the communities by number."""
    layers: dict[int, Counter[str]] = {}
    for node, found in graph.nodes(data=True):
        layers.setdefault(found["community"], Counter())[_layer(graph, node)] += 1
    inside = Counter(
        graph.nodes[first]["community"]
        for first, second in graph.edges
        if graph.nodes[first]["community"] == graph.nodes[second]["community"]
    )
    return tuple(
        Community(number, _sorted_counts(layers[number]), inside[number]) for number in sorted(layers)
    )


def _hubs(graph: nx.Graph, number: int) -> tuple[Hub, ...]:
    """Return the features with the most edges."""
    ordered = sorted((-degree, key) for key, degree in graph.degree if degree > 1)
    return tuple(_hub(graph, key) for _, key in ordered[:number])


def _hub(graph: nx.Graph, key: Key) -> Hub:
    """Return one feature with its edges counted by the layer that they reach."""
    layer = _layer(graph, key)
    reached = Counter(_layer(graph, partner) for partner in graph[key])
    own = reached.pop(layer, 0)
    label = str(graph.nodes[key].get("label", key[1]))
    return Hub(key, label, layer, graph.degree[key], own, _sorted_counts(reached))


def _layer(graph: nx.Graph, key: Key) -> str:
    """Return the layer of a feature, its block where no layer is known."""
    return str(graph.nodes[key].get("layer", key[0]))


def _sorted_counts(counts: Counter[str]) -> dict[str, int]:
    """Return counts as a dict, largest first, equal ones by name."""
    return dict(sorted(counts.items(), key=lambda item: (-item[1], item[0])))


def _count(number: int, noun: str) -> str:
    """Return a number with its noun."""
    return f"{number} {noun if number == 1 else _plural(noun)}"


def _plural(noun: str) -> str:
    """Return the plural of a noun."""
    return f"{noun[:-1]}ies" if noun.endswith("y") else f"{noun}s"


def _verb(number: int, verb: str) -> str:
    """Return the verb of a subject that is counted."""
    return f"{verb}s" if number == 1 else verb


def _listed(counts: dict[str, int]) -> str:
    """Return counts by name as words."""
    return ", ".join(f"{shown_name(name)} {number}" for name, number in counts.items())


def _pair_sentence(pair: PairCount) -> str:
    """Return one sentence about the edges between two blocks."""
    first, second = map(shown_name, pair.blocks)
    return (
        f"{first} - {second}: {_count(pair.edges, 'edge')}, {pair.positive} with r above zero "
        f"and {pair.negative} below."
    )


def _community_sentences(communities: Iterable[Community], shown: int) -> list[str]:
    """Return sentences about the largest communities and a count of the others."""
    found = list(communities)
    said = [
        f"Community {one.number}: {_count(one.features, 'feature')} ({_listed(one.layers)}), "
        f"{_count(one.edges, 'edge')} inside."
        for one in found[:shown]
    ]
    if len(found) > shown:
        largest = found[shown].features
        said.append(
            f"{_count(len(found) - shown, 'more community')} of at most {_count(largest, 'feature')}."
        )
    return said


def _hub_sentence(hub: Hub) -> str:
    """Return one sentence about a feature with many edges."""
    reached = hub.other_layers | ({f"its own layer {hub.layer}": hub.own_layer} if hub.own_layer else {})
    return (
        f"Hub {shown_name(hub.label)} ({shown_name(hub.layer)}): {_count(hub.degree, 'edge')}, "
        f"{', '.join(f'{number} to {shown_name(layer)}' for layer, number in reached.items())}."
    )
