"""A large network drawn as its communities: how large, of which layers, led by which features, joined how much."""

from __future__ import annotations

from collections import Counter

import networkx as nx
import numpy as np
from matplotlib.axes import Axes
from matplotlib.figure import Figure
from matplotlib.lines import Line2D
from matplotlib.patches import Wedge

from workbench.figures.labels import text_size
from workbench.figures.network_parts import layer_styles, layers_of, page
from workbench.figures.style import GUIDE, INK, TWO_COLUMNS, figure_name, say
from workbench.network import Key

COLUMNS, MOST_SHOWN = 4, 20
CELL = TWO_COLUMNS * 72.0 / COLUMNS
GAP, LARGEST = 12.0, 28.0
LEADING, NAME, LINE = 2, 12, 7.5
LAYERS_NAMED = 3
FOOT = 30.0
SMALLEST_TEXT = 6.0
WIDEST, MANY = 5.0, 50

Place = tuple[float, float]


def draw_bubbles(graph: nx.Graph) -> Figure:
    """Return the largest communities as discs: area by features, sectors by layer, lines by edges between them."""
    members = community_members(graph)
    shown = sorted(members)[:MOST_SHOWN]
    most = max(len(members[number]) for number in shown)
    radius = {number: max(4.0, LARGEST * float(np.sqrt(len(members[number]) / most))) for number in shown}
    place: dict[int, Place] = {}
    words = LINE * (1 + min(LAYERS_NAMED, len(layers_of(graph))))
    height = 0.0
    for start in range(0, len(shown), COLUMNS):
        row = shown[start : start + COLUMNS]
        reach = max(radius[number] for number in row)
        place |= {number: ((k + 0.5) * CELL, height + GAP + reach) for k, number in enumerate(row)}
        height += GAP + 2.0 * reach + words
    figure, axes = page(TWO_COLUMNS, height + FOOT)
    _links(axes, graph, place)
    for number in shown:
        _disc(axes, graph, members[number], place[number], radius[number])
        _words(axes, graph, number, members[number], (place[number][0], place[number][1] + radius[number]))
    _legend(axes, graph, height)
    return figure


def community_members(graph: nx.Graph) -> dict[int, list[Key]]:
    """Return the features of each community, those with most edges first."""
    members: dict[int, list[Key]] = {}
    for node in sorted(graph.nodes, key=lambda node: (-graph.degree[node], node)):
        members.setdefault(graph.nodes[node]["community"], []).append(node)
    return members


def edges_between(graph: nx.Graph) -> Counter[tuple[int, int]]:
    """Return the number of edges between each two communities."""
    number = dict(graph.nodes(data="community"))
    pairs = (sorted((number[first], number[second])) for first, second in graph.edges)
    return Counter((first, second) for first, second in pairs if first != second)


def _links(axes: Axes, graph: nx.Graph, place: dict[int, Place]) -> None:
    """Draw a line between communities that edges join, wider the more there are."""
    counts = {pair: count for pair, count in edges_between(graph).items() if set(pair) <= set(place)}
    most = max([*counts.values(), MANY])
    for (first, second), count in sorted(counts.items(), key=lambda item: item[1]):
        (x0, y0), (x1, y1) = place[first], place[second]
        width = WIDEST * float(np.sqrt(count / most))
        axes.plot([x0, x1], [y0, y1], color="#CFCFCF", linewidth=width, zorder=1, solid_capstyle="round")


def _disc(axes: Axes, graph: nx.Graph, members: list[Key], centre: Place, radius: float) -> None:
    """Draw a disc with a sector for each layer."""
    counts = Counter(str(graph.nodes[node].get("layer", node[0])) for node in members)
    start = 90.0
    for layer, (colour, _) in layer_styles(graph).items():
        turn = 360.0 * counts[layer] / len(members)
        if turn > 0.0:
            axes.add_patch(
                Wedge(
                    centre,
                    radius,
                    start,
                    start + turn,
                    facecolor=colour,
                    edgecolor="white",
                    linewidth=0.8,
                    zorder=3,
                )
            )
        start += turn


def _words(axes: Axes, graph: nx.Graph, number: int, members: list[Key], under: Place) -> None:
    """Write number, size and leading features under a disc."""
    x, y = under[0], under[1] + LINE
    noun = "feature" if len(members) == 1 else "features"
    lines = [(f"{number}: {len(members)} {noun}", "bold")]
    by_layer = Counter(str(graph.nodes[node].get("layer", node[0])) for node in members)
    for layer in [layer for layer in layers_of(graph) if by_layer[layer]][:LAYERS_NAMED]:
        leading = [node for node in members if graph.nodes[node].get("layer", node[0]) == layer][:LEADING]
        names = [figure_name(str(graph.nodes[node].get("label", node[1])), NAME) for node in leading]
        lines.append((_fitting(f"{figure_name(layer, 12)} {by_layer[layer]}", names), "normal"))
    for text, weight in lines:
        say(
            axes, x, y, text, ha="center", va="center", fontsize=SMALLEST_TEXT, weight=weight, color=INK, zorder=5,
            bbox={"facecolor": "white", "edgecolor": "none", "pad": 0.4, "alpha": 0.85},
        )  # fmt: skip
        y += LINE


def _fitting(head: str, names: list[str]) -> str:
    """Return a line with as many names as have room in a cell."""
    text = head
    for place, name in enumerate(names):
        longer = f"{text}{', ' if place else ': '}{name}"
        if text_size(longer, SMALLEST_TEXT)[0] > CELL - 6.0:
            break
        text = longer
    return text


def _legend(axes: Axes, graph: nx.Graph, top: float) -> None:
    handles = [
        Line2D([], [], marker="o", color=colour, linestyle="none", markersize=5.0, label=figure_name(layer))
        for layer, (colour, _) in layer_styles(graph).items()
    ]
    handles.append(Line2D([], [], color="#CFCFCF", linewidth=3.0, label="edges between communities"))
    legend = axes.legend(
        handles=handles, loc="upper center", bbox_to_anchor=(0.5, 1.0 - (top + 6.0) / (top + FOOT)), ncols=5,
        borderaxespad=0.0,
    )  # fmt: skip
    for text in legend.get_texts():
        text.set_parse_math(False)
        text.set_color(GUIDE if text.get_text().startswith("edges") else INK)


def bubble_caption(graph: nx.Graph) -> str:
    """Caption of the communities as discs."""
    members = community_members(graph)
    shown = min(len(members), MOST_SHOWN)
    text = (
        f"The network of {len(graph)} features and {graph.number_of_edges()} edges as its communities, the largest "
        f"{shown} of {len(members)}: area by number of features, sectors by layer, under each the features of each "
        "layer with most edges; lines, wider the more edges lead from one community to another. Where a disc stands "
        "means nothing. Communities are a way to read the edges, and no test."
    )
    return (
        text
        if shown == len(members)
        else f"{text} The others hold {len(members[MOST_SHOWN + 1])} features at most."
    )
