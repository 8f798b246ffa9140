"""Places for the nodes: communities as discs that do not overlap, features with many edges in their middle."""

from __future__ import annotations

import math
from collections.abc import Iterator

import networkx as nx
import numpy as np
from numpy.typing import NDArray

from workbench.network.keys import Key

FloatArray = NDArray[np.float64]

STEP = 40.0
"""Distance of neighbouring features in a disc, in the units of graph programs (pixels)."""

_GOLDEN = math.pi * (3.0 - math.sqrt(5.0))
_DIGITS = 2


def layout(graph: nx.Graph) -> dict[Key, tuple[float, float]]:
    """Return a place for every node of a network with communities; no chance is in it.

    The largest community lies in the middle and the others follow on a spiral, each at the first place where its disc
    meets no other one. Inside a disc, features lie on a sunflower's spiral, those with most edges innermost. Distances
    between communities mean nothing.

    Parameters
    ----------
    graph : networkx.Graph
        With ``community`` of its nodes.

    Examples
    --------
    >>> graph = nx.Graph([("a", "b")])
    >>> nx.set_node_attributes(graph, 1, "community")
    >>> layout(graph)
    {'a': (0.0, 0.0), 'b': (-29.49, 27.02)}
    """
    members: dict[int, list[Key]] = {}
    for node in sorted(graph.nodes, key=lambda node: (-graph.degree[node], node)):
        members.setdefault(graph.nodes[node]["community"], []).append(node)
    numbers = sorted(members)
    radii = np.array([STEP * (math.sqrt(len(members[number])) + 1.0) for number in numbers])
    found = {}
    for number, (x, y) in zip(numbers, _discs(radii).tolist(), strict=True):
        for place, node in enumerate(members[number]):
            reach, turn = STEP * math.sqrt(place), place * _GOLDEN
            found[node] = (
                round(x + reach * math.cos(turn), _DIGITS) + 0.0,
                round(y + reach * math.sin(turn), _DIGITS) + 0.0,
            )
    return {node: found[node] for node in sorted(found)}


def with_layout(graph: nx.Graph) -> nx.Graph:
    """Return a copy of the network whose nodes have a place, ``x`` and ``y``; exports write them."""
    placed = graph.copy()
    for node, (x, y) in layout(graph).items():
        placed.nodes[node].update(x=x, y=y)
    return placed


def _discs(radii: FloatArray) -> FloatArray:
    """Return centres of discs that do not overlap, in the order given, along a spiral from the middle."""
    centres = np.zeros((radii.size, 2))
    start = 0
    for number, radius in enumerate(radii):
        if number and radius < radii[number - 1]:
            start //= 2
        for turn, (x, y) in _spiral(float(radii[-1]), start):
            apart = np.hypot(centres[:number, 0] - x, centres[:number, 1] - y)
            if (apart >= radii[:number] + radius).all():
                centres[number], start = (x, y), turn
                break
    return centres


def _spiral(step: float, start: int) -> Iterator[tuple[int, tuple[float, float]]]:
    """Yield places of a spiral that fills the plane evenly, about ``step`` apart."""
    turn = start
    while True:
        reach, angle = step * math.sqrt(turn), turn * _GOLDEN
        yield turn, (reach * math.cos(angle), reach * math.sin(angle))
        turn += 1
