"""The disparity filter on small graphs worked by hand, and its p under its own null."""

from __future__ import annotations

import networkx as nx
import numpy as np
import pytest
from scipy.integrate import quad
from scipy.stats import kstest

from workbench.network import backbone_p


def weighted(edges: list[tuple[str, str, float]]) -> nx.Graph:
    graph = nx.Graph()
    graph.add_weighted_edges_from(edges)
    return graph


def test_a_small_graph_worked_by_the_formula_of_the_paper() -> None:
    """Serrano, Boguna & Vespignani 2009, equation 2: ``1 - (k - 1) * integral of (1 - x)^(k - 2) from 0 to p``.

    a: k = 3, s = 10; b: k = 2, s = 8; the others have one edge. Worked by numerical integration and by hand:
    a-b: min((1 - 0.6)^2, (1 - 0.75)^1) = min(0.16, 0.25); a-c: (1 - 0.3)^2; a-d: (1 - 0.1)^2; b-e: (1 - 0.25)^1.
    """
    graph = weighted([("a", "b", 6.0), ("a", "c", 3.0), ("a", "d", 1.0), ("b", "e", 2.0)])
    by_hand = {("a", "b"): 0.16, ("a", "c"): 0.49, ("a", "d"): 0.81, ("b", "e"): 0.75}
    found = backbone_p(graph)
    for edge, expected in by_hand.items():
        assert found[edge] == pytest.approx(expected, abs=1e-12)
    for k, share in ((2, 0.75), (3, 0.6), (7, 0.35), (30, 0.2)):
        integral = quad(lambda x, k=k: (1 - x) ** (k - 2), 0, share)[0]
        star = weighted(
            [("hub", "first", share)] + [("hub", f"n{i}", (1 - share) / (k - 1)) for i in range(k - 1)]
        )
        assert backbone_p(star)["hub", "first"] == pytest.approx(1 - (k - 1) * integral, abs=1e-9)


def test_p_is_uniform_when_weights_split_at_random() -> None:
    """400 stars whose hub splits its weight uniformly at random among 6 edges; one edge of each is looked at."""
    random = np.random.default_rng(4)
    found = []
    for _ in range(400):
        shares = random.dirichlet(np.ones(6))
        found.append(backbone_p(weighted([("hub", i, share) for i, share in enumerate(shares)]))["hub", 0])
    assert kstest(found, "uniform").pvalue > 0.01


def test_two_features_of_one_edge_have_no_p_and_equal_weights_are_no_backbone() -> None:
    assert backbone_p(weighted([("a", "b", 0.9)])) == {}
    clique = nx.complete_bipartite_graph(5, 5)
    assert min(backbone_p(clique).values()) == pytest.approx((1 - 1 / 5) ** 4)
    assert set(backbone_p(weighted([("a", "b", 0.0), ("a", "c", 0.0)])).values()) == {1.0}
