"""Places of the nodes: discs that do not overlap, the same whatever the order."""

from __future__ import annotations

import numpy as np
import pytest
from network.networks import ATTRIBUTES, edges_table, features_table, random_tables, small_network

from workbench.network import build_network, gexf_bytes, graphml_bytes, layout, with_layout
from workbench.network.layout import STEP


@pytest.mark.parametrize("edges", [1, 40, 400])
def test_communities_lie_apart(edges: int) -> None:
    graph = build_network(*random_tables(edges, 120, 60), attributes=ATTRIBUTES, seed=1)
    places = layout(graph)
    found: dict[int, list] = {}
    for node, number in graph.nodes(data="community"):
        found.setdefault(number, []).append(places[node])
    centres = {number: np.array(points) for number, points in found.items()}
    for number, points in centres.items():
        for other, away in centres.items():
            if other > number:
                distance = np.hypot(*(points[:, None] - away[None]).transpose(2, 0, 1))
                assert distance.min() >= 0.9 * STEP
    points = np.array(list(places.values()))
    apart = np.hypot(*(points[:, None] - points[None]).transpose(2, 0, 1)) + np.eye(len(points)) * 1e9
    assert apart.min() > 0.5 * STEP


def test_places_do_not_depend_on_the_order_of_rows_and_are_written() -> None:
    edges, features = random_tables(100, 40, 20)
    graph = build_network(edges, features, attributes=ATTRIBUTES, seed=1)
    again = build_network(edges.iloc[::-1], features.iloc[::-1], attributes=ATTRIBUTES, seed=1)
    assert layout(graph) == layout(again)
    placed = with_layout(small_network())
    assert b'attr.name="x"' in graphml_bytes(placed)
    assert b"viz:position" in gexf_bytes(placed)
    assert "x" not in next(iter(small_network().nodes.values()))


def test_an_empty_network_has_no_places() -> None:
    assert layout(build_network(edges_table([]), features_table(1, 1), attributes={}, seed=1)) == {}
