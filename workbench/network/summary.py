"""What a network holds, in numbers and in plain words."""

from __future__ import annotations

from collections import Counter
from collections.abc import Iterable
from dataclasses import dataclass

import networkx as nx

from workbench.network.backbone import BACKBONE_LEVEL
from workbench.network.builder import STABILITY_METHOD
from workbench.network.keys import Key
from workbench.network.stability import STABLE, UNSTABLE

DENSE = 4.0
"""Edges a feature from which on a network is hard to read whole, and its backbone is told."""

FEWEST_RATED = 6
"""Features under which the stability of a community says little: a star of four stays together whatever is drawn."""

LONGEST_NAME = 60
"""Characters of a name that are shown; the rest is cut."""


@dataclass(frozen=True)
class PairCount:
    """Edges between two blocks: with ``r`` above and below zero, by what they rest on, carried by a module alone."""

    blocks: tuple[str, str]
    edges: int
    positive: int
    negative: int
    basis: dict[str, int]
    by_module: int


@dataclass(frozen=True)
class Community:
    """One community: its number, its features in each layer, the edges that lie inside it, how stable it is.

    ``stability`` is the mean over its features of the share of resamples in which they stay together; None where
    nobody measured it.
    """

    number: int
    layers: dict[str, int]
    edges: int
    stability: float | None = None

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
    """Counts of a network.

    ``components`` are the sizes of its connected components, largest first; ``density`` is the share of all pairs of
    its features that are edges; ``backbone`` counts the edges that the disparity filter keeps; ``clustered`` the
    features that have near-duplicates in the network, ``clusters`` their clusters.
    """

    features: int
    edges: int
    pairs: tuple[PairCount, ...]
    communities: tuple[Community, ...]
    hubs: tuple[Hub, ...]
    components: tuple[int, ...]
    density: float
    backbone: int
    clustered: int
    clusters: int

    @property
    def mean_degree(self) -> float:
        """Return the edges of a feature on average."""
        return 2.0 * self.edges / self.features if self.features else 0.0

    def sentences(self, *, shown: int = 5) -> tuple[str, ...]:
        """Return the summary in plain words, at most ``shown`` communities and hubs of it."""
        if not self.edges:
            return ("No edges: no pair of features passed the evidence rules.",)
        return (
            f"{_count(self.edges, 'edge')} {_verb(self.edges, 'join')} {self.features} features, "
            f"{self.mean_degree:.1f} edges a feature on average.",
            *map(_pair_sentence, self.pairs),
            f"{_count(len(self.components), 'connected component')}; the largest holds "
            f"{self.components[0]} of {self.features} features.",
            *_community_sentences(self.communities, shown),
            *(_hub_sentence(hub) for hub in self.hubs[:shown]),
            *self._dense_sentences(),
        )

    def _dense_sentences(self) -> Iterable[str]:
        """Yield what helps to read a network of many edges."""
        if self.clusters:
            yield (
                f"{_count(self.clustered, 'feature')} {_verb(self.clustered, 'fall')} into "
                f"{_count(self.clusters, 'cluster')} of near-duplicates; one of each says what the others say."
            )
        if self.mean_degree >= DENSE and not self.backbone:
            yield f"Backbone: no edge stands out among its features' edges (backbone_p over {BACKBONE_LEVEL:g})."
        elif self.mean_degree >= DENSE:
            yield (
                f"Backbone: {_count(self.backbone, 'edge')} with backbone_p at most {BACKBONE_LEVEL:g} "
                f"{_verb(self.backbone, 'carry')} more of their features' weight than chance would."
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
    clusters = {name: count for name, count in _clusters(graph).items() if count > 1}
    return NetworkSummary(
        features=graph.number_of_nodes(),
        edges=graph.number_of_edges(),
        pairs=_pair_counts(graph),
        communities=_communities(graph),
        hubs=_hubs(graph, hubs),
        components=tuple(sorted(map(len, nx.connected_components(graph)), reverse=True)),
        density=float(nx.density(graph)),
        backbone=sum(p <= BACKBONE_LEVEL for _, _, p in graph.edges(data="backbone_p", default=1.0)),
        clustered=sum(clusters.values()),
        clusters=len(clusters),
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


def _clusters(graph: nx.Graph) -> Counter[tuple[str, str]]:
    """Return the features of each cluster of near-duplicates, a cluster known by its block and name."""
    return Counter(
        (node[0], str(found["cluster"])) for node, found in graph.nodes(data=True) if "cluster" in found
    )


def _pair_counts(graph: nx.Graph) -> tuple[PairCount, ...]:
    """Return the edges between each two blocks, most edges first."""
    counts: dict[tuple[str, str], Counter[str]] = {}
    for first, second, found in graph.edges(data=True):
        start, end = sorted((first[0], second[0]))
        if found.get("source_block") == end:
            start, end = end, start
        told = counts.setdefault((start, end), Counter())
        told.update(edges=1, positive=int(found["r"] > 0), negative=int(found["r"] < 0))
        told.update(by_module=int(found.get("support") == "module"))
        told[f"basis {found.get('basis', '')}"] += 1
    ordered = sorted(counts, key=lambda pair: (-counts[pair]["edges"], pair))
    return tuple(_pair_count(pair, counts[pair]) for pair in ordered)


def _pair_count(pair: tuple[str, str], told: Counter[str]) -> PairCount:
    """Return the counts of two blocks by name."""
    basis = {name.partition(" ")[2]: number for name, number in told.items() if name.startswith("basis ")}
    return PairCount(
        blocks=pair,
        edges=told["edges"],
        positive=told["positive"],
        negative=told["negative"],
        basis=_sorted_counts(Counter({name: number for name, number in basis.items() if name})),
        by_module=told["by_module"],
    )


def _communities(graph: nx.Graph) -> tuple[Community, ...]:
    """Return the communities by number."""
    layers: dict[int, Counter[str]] = {}
    shares: dict[int, list[float]] = {}
    for node, found in graph.nodes(data=True):
        layers.setdefault(found["community"], Counter())[_layer(graph, node)] += 1
        if STABILITY_METHOD in graph.graph and "community_stability" in found:
            shares.setdefault(found["community"], []).append(found["community_stability"])
    inside = Counter(
        graph.nodes[first]["community"]
        for first, second in graph.edges
        if graph.nodes[first]["community"] == graph.nodes[second]["community"]
    )
    return tuple(
        Community(
            number,
            _sorted_counts(layers[number]),
            inside[number],
            sum(shares[number]) / len(shares[number]) if number in shares else None,
        )
        for number in sorted(layers)
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
        f"and {pair.negative} below{''.join(_rests(pair))}."
    )


def _rests(pair: PairCount) -> Iterable[str]:
    """Yield what the edges of two blocks rest on, where that is more than their own test within groups."""
    if pair.by_module:
        yield f"; {pair.by_module} carried by their module, not by their own test"
    if pair.basis and set(pair.basis) != {"within"}:
        words = {"within": "hold within groups", "group": "rest on the group alone", "unclear": "are unclear"}
        yield "; " + ", ".join(f"{number} {words.get(name, name)}" for name, number in pair.basis.items())


def _community_sentences(communities: Iterable[Community], shown: int) -> list[str]:
    """Return sentences about the largest communities and a count of the others."""
    found = list(communities)
    said = [
        f"Community {one.number}: {_count(one.features, 'feature')} ({_listed(one.layers)}), "
        f"{_count(one.edges, 'edge')} inside{_stability(one)}."
        for one in found[:shown]
    ]
    if len(found) > shown:
        largest = found[shown].features
        said.append(
            f"{_count(len(found) - shown, 'more community')} of at most {_count(largest, 'feature')}."
        )
    return said


def _stability(one: Community) -> str:
    """Return how stable a community is, in words."""
    if one.stability is None or one.features < FEWEST_RATED:
        return ""
    word = "stable" if one.stability >= STABLE else "doubtful" if one.stability >= UNSTABLE else "unstable"
    return f"; {word} ({one.stability:.2f} of resamples)"


def _hub_sentence(hub: Hub) -> str:
    """Return one sentence about a feature with many edges."""
    reached = hub.other_layers | ({f"its own layer {hub.layer}": hub.own_layer} if hub.own_layer else {})
    return (
        f"Hub {shown_name(hub.label)} ({shown_name(hub.layer)}): {_count(hub.degree, 'edge')}, "
        f"{', '.join(f'{number} to {shown_name(layer)}' for layer, number in reached.items())}."
    )
