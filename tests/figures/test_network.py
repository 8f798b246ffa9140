"""Pictures of networks: every name legible, sign and strength without colour, nothing off the page, the same bytes."""

from __future__ import annotations

import networkx as nx
import numpy as np
import pandas as pd
import pytest
from matplotlib.colors import to_rgb
from matplotlib.patches import Wedge
from matplotlib.text import Text
from network.networks import ATTRIBUTES, edges_table, features_table, random_tables

from workbench.figures import figure_bytes
from workbench.figures.comparison import draw_comparison
from workbench.figures.drawing import Drawing
from workbench.figures.edge_matrix import SIGNED, EdgeMatrix, alike_order, draw_edge_matrix
from workbench.figures.network import MOST_DRAWN, draw_network
from workbench.figures.network_parts import NEGATIVE, POSITIVE, line_width
from workbench.figures.pathways import draw_pathways
from workbench.network import build_network

ODD = ("<b>&amp;</b>", r"$\alpha^2_i$", "N" * 300, "tab\tline\nbreak", "日本", "naïve µ")


def network(edges: int, transcripts: int, metabolites: int) -> nx.Graph:
    return build_network(*random_tables(edges, transcripts, metabolites), attributes=ATTRIBUTES, seed=1)


def three_layers() -> nx.Graph:
    edges, features = edges_table([(i, j) for i in range(6) for j in range(4)]), features_table(6, 4)
    features.loc[8:, "layer"], features["label"] = "lipids", [*ODD, *"abcd"]
    more = pd.DataFrame(
        {"source": ["m0"], "source_block": "lcms", "target": ["m3"], "target_block": "lcms", "r": [-0.7]}
    )
    return build_network(pd.concat([edges, more]), features, attributes=ATTRIBUTES, seed=1)


NETWORKS = {
    "one edge": network(1, 1, 1),
    "20": network(30, 14, 6),
    "150": network(500, 125, 25),
    "pairs": build_network(
        edges_table([(k, k) for k in range(70)]), features_table(70, 70), attributes={}, seed=1
    ),
    "star": build_network(
        edges_table([(k, 0) for k in range(100)]), features_table(100, 1), attributes={}, seed=1
    ),
    "three layers": three_layers(),
    "2000": network(6000, 1700, 300),
}


@pytest.mark.parametrize("name", NETWORKS)
def test_nothing_leaves_the_page_and_no_text_is_too_small(name: str) -> None:
    (drawing,) = draw_network(NETWORKS[name])
    drawing.figure.draw_without_rendering()
    box = drawing.figure.get_tightbbox()
    assert min(box.x0, box.y0) >= -0.02
    assert box.x1 <= drawing.figure.get_figwidth() + 0.02
    assert box.y1 <= drawing.figure.get_figheight() + 0.02
    assert drawing.figure.get_figheight() < 10.5
    assert min(text.get_fontsize() for text in drawing.figure.findobj(Text) if text.get_text()) >= 6.0


@pytest.mark.parametrize("name", ["20", "150", "pairs", "star", "three layers", "2000"])
def test_labels_do_not_overlap(name: str) -> None:
    """Boxes of all texts, to half a pixel of 100 a inch."""
    (drawing,) = draw_network(NETWORKS[name])
    drawing.figure.draw_without_rendering()
    texts = [t for axes in drawing.figure.axes for t in axes.texts if t.get_text()]
    boxes = np.array([t.get_window_extent().extents for t in texts])
    for k, (left, bottom, right, top) in enumerate(boxes):
        others = boxes[k + 1 :]
        across = np.minimum(right, others[:, 2]) - np.maximum(left, others[:, 0])
        up = np.minimum(top, others[:, 3]) - np.maximum(bottom, others[:, 1])
        meet = (across > 0.5) & (up > 1.5)
        assert not meet.any(), [texts[k].get_text(), texts[k + 1 + int(np.argmax(meet))].get_text()]


def test_every_feature_up_to_150_is_named() -> None:
    graph = NETWORKS["20"]
    (drawing,) = draw_network(graph)
    written = {text.get_text() for text in drawing.figure.axes[0].texts}
    assert {label for _, label in graph.nodes(data="label")} <= written
    assert len(NETWORKS["150"]) <= MOST_DRAWN < len(NETWORKS["2000"])


def test_sign_and_strength_show_without_colour() -> None:
    assert POSITIVE["linestyle"] != NEGATIVE["linestyle"]
    widths = [line_width(r) for r in (0.2, 0.4, 0.6, 0.8, 1.0)]
    assert widths == sorted(widths)
    assert len(set(widths)) == 5
    lightness = [float(np.dot(SIGNED(value)[:3], [0.3, 0.59, 0.11])) for value in np.linspace(0, 1, 9)]
    assert lightness == sorted(lightness)
    assert lightness[4] - lightness[0] > 0.3
    assert lightness[8] - lightness[4] > 0.2
    assert to_rgb(POSITIVE["color"]) != to_rgb(NEGATIVE["color"])


def test_a_large_network_is_drawn_as_communities_by_size() -> None:
    (drawing,) = draw_network(NETWORKS["2000"])
    wedges = [patch for patch in drawing.figure.axes[0].patches if isinstance(patch, Wedge)]
    radii = list(dict.fromkeys(round(wedge.r, 6) for wedge in wedges))
    assert radii == sorted(radii, reverse=True)
    assert "as its communities" in drawing.caption


def test_names_are_only_text() -> None:
    (drawing,) = draw_network(three_layers())
    for text in drawing.figure.findobj(Text):
        assert not ("$" in text.get_text() and text.get_parse_math()), text.get_text()
        assert len(text.get_text()) < 60


def test_an_empty_network_has_no_picture() -> None:
    assert draw_network(build_network(edges_table([]), features_table(1, 1), attributes={}, seed=1)) == ()


def matrix(size: int) -> EdgeMatrix:
    r = np.corrcoef(np.random.default_rng(0).normal(size=(size, 30)))
    layers = tuple("transcripts" if k % 3 else "metabolites" for k in range(size))
    return EdgeMatrix(
        tuple(f"f{k}" for k in range(size)), layers, tuple(1 + k // 10 for k in range(size)), r, 200, ""
    )


@pytest.mark.parametrize("size", [2, 20, 120])
def test_the_matrix_stays_on_its_page(size: int) -> None:
    (drawing,) = draw_edge_matrix(matrix(size))
    drawing.figure.draw_without_rendering()
    box = drawing.figure.get_tightbbox()
    assert min(box.x0, box.y0) >= -0.02
    assert box.x1 <= drawing.figure.get_figwidth() + 0.02
    assert box.y1 <= drawing.figure.get_figheight() + 0.02
    assert f"the {size} with the largest" in drawing.caption


def test_alike_features_become_neighbours() -> None:
    random = np.random.default_rng(1)
    course, signs = random.normal(size=60), random.choice([-1.0, 1.0], 12)
    r = np.corrcoef(signs[:, None] * course + random.normal(0, 0.4, (12, 60)))
    ordered = signs[alike_order(r)]
    assert (np.diff(ordered) != 0).sum() == 1


def sets_table(rows: int) -> pd.DataFrame:
    random = np.random.default_rng(0)
    table = pd.DataFrame({"community": 1, "layer": "transcripts", "set": [f"S{k}" for k in range(rows)]})
    table["name"] = [ODD[k % len(ODD)] for k in range(rows)]
    table = table.assign(found=3, expected=0.5, p=random.random(rows), q=0.04)
    table["p_permutation"] = [np.nan if k == 1 else 0.01 for k in range(rows)]
    return table.assign(holds=[k % 2 == 0 for k in range(rows)])


def compared_table() -> pd.DataFrame:
    random = np.random.default_rng(0)
    table = pd.DataFrame({"r_first": random.uniform(-1, 1, 80), "r_second": random.uniform(-1, 1, 80)})
    table["status"] = np.repeat(["kept", "gained", "lost", "reversed"], 20)
    table["changed"] = np.tile(["yes", "no", "not tested", "no"], 20)
    table.loc[0, "r_first"] = np.nan
    return table


DRAWN: dict[str, tuple[Drawing, ...]] = {
    "sets": draw_pathways(sets_table(40)),
    "one set": draw_pathways(sets_table(1)),
    "comparison": draw_comparison(compared_table(), ("$a_b$", "N" * 200)),
}


@pytest.mark.parametrize("name", DRAWN)
def test_figures_of_sets_and_of_comparisons_stay_on_their_page(name: str) -> None:
    (drawing,) = DRAWN[name]
    drawing.figure.draw_without_rendering()
    box = drawing.figure.get_tightbbox()
    assert min(box.x0, box.y0) >= -0.02
    assert box.x1 <= drawing.figure.get_figwidth() + 0.02
    for text in drawing.figure.findobj(Text):
        assert not ("$" in text.get_text() and text.get_parse_math()), text.get_text()


def test_nothing_is_drawn_of_nothing() -> None:
    assert draw_pathways(sets_table(0)) == ()
    assert draw_comparison(compared_table().head(0), ("a", "b")) == ()
    assert draw_edge_matrix(matrix(1)) == ()


def test_equal_networks_give_equal_bytes() -> None:
    for ending in ("svg", "png"):
        first, second = (figure_bytes(draw_network(network(30, 14, 6))[0], ending) for _ in range(2))
        assert first == second


def test_a_part_of_a_network_is_drawn_by_name() -> None:
    graph = NETWORKS["2000"]
    part = graph.edge_subgraph(sorted(graph.edges)[:30])
    (drawing,) = draw_network(part, name="followup", what="The short list")
    assert drawing.name == "followup"
    assert drawing.caption.startswith("The short list by community and layer: ")
