"""The network drawn: communities side by side, layers in columns, every name legible; as bubbles when large."""

from __future__ import annotations

from collections import Counter
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Any

import networkx as nx
import numpy as np
from matplotlib.axes import Axes
from matplotlib.lines import Line2D
from matplotlib.patches import PathPatch
from matplotlib.path import Path

from workbench.figures.bubbles import bubble_caption, draw_bubbles
from workbench.figures.drawing import Drawing
from workbench.figures.network_parts import (
    NEGATIVE,
    POSITIVE,
    RULER,
    layer_styles,
    layers_of,
    line_width,
    page,
)
from workbench.figures.style import GUIDE, INK, TWO_COLUMNS, figure_name, figure_style, say
from workbench.intake.faults import counted
from workbench.network import Key

MOST_DRAWN = 150
"""Features up to which all are drawn by name; more are drawn as communities."""

MOST_ROWS = 60
CROWDED = 120
"""Edges of one community from which on its lines are drawn thinner."""

ROW, GAP, HEAD = 8.0, 10.0, 18.0
LABEL, LINKS, EDGE = 62.0, 47.0, 4.0
PANEL = 2 * LABEL + LINKS
COLUMNS = 3
TALLEST = 660.0
TOP, FOOT = 8.0, 44.0
NAME = 14
SMALLEST_TEXT = 6.0

Place = tuple[float, float]


@dataclass(frozen=True)
class Panel:
    """One community: its features left and right in order, and what was left out of it."""

    number: int
    left: tuple[Key, ...]
    right: tuple[Key, ...]
    left_out: int

    @property
    def rows(self) -> int:
        """Rows of the longer side."""
        return max(len(self.left), len(self.right))

    @property
    def head(self) -> float:
        """Height of the heading in points; a lone pair has none."""
        return HEAD if self.rows > 1 else 0.0

    @property
    def height(self) -> float:
        """Height in points, its heading and the note below it included."""
        return self.head + ROW * (self.rows + (1 if self.left_out else 0)) + GAP


def draw_network(graph: nx.Graph, *, name: str = "network", what: str = "The network") -> tuple[Drawing, ...]:
    """Return the picture of a network: by name up to 150 features, as communities beyond; nothing without edges.

    Sign and strength of an edge show without colour: dashed below zero, wider the stronger.

    Parameters
    ----------
    graph : networkx.Graph
        As :func:`~workbench.network.builder.build_network` makes it, or a part of such a network.
    name : str
        Of the drawing.
    what : str
        What is drawn, as the first words of the caption.
    """
    if not graph.number_of_edges():
        return ()
    with figure_style():
        if len(graph) > MOST_DRAWN:
            return (Drawing(name, draw_bubbles(graph), bubble_caption(graph)),)
        panels = [
            _panel(graph, number)
            for number in sorted(set(nx.get_node_attributes(graph, "community").values()))
        ]
        placed, unplaced, height = _placed(panels)
        figure, axes = page(TWO_COLUMNS, height + TOP + FOOT)
        for panel, corner in placed:
            _draw_panel(axes, graph, panel, corner)
        _legend(axes, graph, height)
        return (Drawing(name, figure, _caption(what, graph, placed, unplaced)),)


def _panel(graph: nx.Graph, number: int) -> Panel:
    """Return a community with its most numerous layer on the left, the others stacked on the right."""
    members = sorted(node for node, found in graph.nodes(data="community") if found == number)
    counts = Counter(dict(graph.nodes(data="layer", default=""))[node] for node in graph)
    first = max(
        sorted({graph.nodes[node].get("layer", node[0]) for node in members}), key=lambda layer: counts[layer]
    )
    sides = [
        [node for node in members if (graph.nodes[node].get("layer", node[0]) == first) == left]
        for left in (True, False)
    ]
    kept = [_strongest(graph, side) for side in sides]
    left, right = _untangled(graph, kept)
    return Panel(number, tuple(left), tuple(right), len(members) - len(left) - len(right))


def _strongest(graph: nx.Graph, side: list[Key]) -> list[Key]:
    ordered = sorted(side, key=lambda node: (-graph.nodes[node].get("strength", 0.0), node))
    return ordered[:MOST_ROWS]


def _untangled(graph: nx.Graph, sides: list[list[Key]]) -> tuple[list[Key], list[Key]]:
    """Order both sides so that edges cross little: each feature near the mean place of its partners, in turn."""
    order = [list(side) for side in sides]
    layers = list(layers_of(graph))
    for turn in range(8):
        moved, fixed = order[turn % 2], order[1 - turn % 2]
        place = {node: (k + 0.5) / max(len(fixed), 1) for k, node in enumerate(fixed)}
        own = {node: (k + 0.5) / max(len(moved), 1) for k, node in enumerate(moved)}
        means = {node: _mean_place(graph, node, place, own[node]) for node in moved}
        moved.sort(
            key=lambda node: (layers.index(graph.nodes[node].get("layer", node[0])), means[node], node)
        )
    return order[0], order[1]


def _mean_place(graph: nx.Graph, node: Key, place: Mapping[Key, float], own: float) -> float:
    weights = [(place[other], graph.edges[node, other]["weight"]) for other in graph[node] if other in place]
    total = sum(weight for _, weight in weights)
    return sum(where * weight for where, weight in weights) / total if total > 0.0 else own


def _placed(panels: Sequence[Panel]) -> tuple[list[tuple[Panel, Place]], list[Panel], float]:
    """Put each panel under the shortest column so far; return them with their corners, the rest, and the height."""
    filled = [0.0] * COLUMNS
    step = (TWO_COLUMNS * 72.0 - COLUMNS * PANEL) / max(COLUMNS - 1, 1) + PANEL
    placed, unplaced = [], []
    for panel in panels:
        column = int(np.argmin(filled))
        if filled[column] + panel.height > TALLEST:
            unplaced.append(panel)
            continue
        placed.append((panel, (column * step, filled[column])))
        filled[column] += panel.height
    return placed, unplaced, max(filled)


def _draw_panel(axes: Axes, graph: nx.Graph, panel: Panel, corner: Place) -> None:
    x, y = corner[0], corner[1] + TOP
    top = y + panel.head
    height = ROW * panel.rows
    place: dict[Key, Place] = {}
    for side, across in ((panel.left, x + LABEL), (panel.right, x + LABEL + LINKS)):
        step = min(height / len(side), 2.5 * ROW) if side else 0.0
        start = top + (height - step * len(side)) / 2.0
        place |= {node: (across, start + step * (k + 0.5)) for k, node in enumerate(side)}
    if panel.head:
        title = f"community {panel.number}"
        say(axes, x + LABEL + LINKS / 2, y + 5.0, title, ha="center", va="center", weight="bold")
    _edges(axes, graph, place, x + LABEL)
    styles = layer_styles(graph)
    for node, (across, down) in place.items():
        layer = graph.nodes[node].get("layer", node[0])
        colour, mark = styles[layer]
        axes.plot([across], [down], marker=mark, color=colour, markersize=3.6, markeredgecolor="white",
                  markeredgewidth=0.4, linestyle="none", zorder=4)  # fmt: skip
        left = node in panel.left
        name = figure_name(str(graph.nodes[node].get("label", node[1])), NAME)
        say(axes, across + (-EDGE if left else EDGE), down, name,
            ha="right" if left else "left", va="center", fontsize=SMALLEST_TEXT, zorder=5)  # fmt: skip
    if panel.left_out:
        say(axes, x + LABEL + LINKS / 2, top + height + ROW * 0.6, f"and {counted(panel.left_out, 'feature')} more",
            ha="center", va="center", fontsize=SMALLEST_TEXT, color=GUIDE)  # fmt: skip


def _edges(axes: Axes, graph: nx.Graph, place: Mapping[Key, Place], left: float) -> None:
    """Draw the edges of one community, weak ones first; those between features of one side as bows."""
    # A part of a graph gives the ends of its edges in no fixed order, and a dashed line shows where it began.
    found = [(*sorted((a, b)), data["r"]) for a, b, data in graph.subgraph(place).edges(data=True)]
    thinner = min(1.0, max(0.4, (CROWDED / max(len(found), 1)) ** 0.5))
    for first, second, r in sorted(found, key=lambda edge: (abs(edge[2]), edge[0], edge[1])):
        style: dict[str, Any] = dict(POSITIVE if r >= 0 else NEGATIVE)
        style |= {"linewidth": thinner * line_width(r), "alpha": 0.35 + 0.6 * abs(r), "zorder": 2}
        (x0, y0), (x1, y1) = place[first], place[second]
        if x0 != x1:
            axes.plot([x0, x1], [y0, y1], solid_capstyle="round", **style)
            continue
        bow = x0 + (0.45 if x0 == left else -0.45) * LINKS
        path = Path(
            [(x0, y0), (bow, y0), (bow, y1), (x1, y1)], [Path.MOVETO, Path.CURVE4, Path.CURVE4, Path.CURVE4]
        )
        colour = style.pop("color")
        axes.add_patch(PathPatch(path, facecolor="none", edgecolor=colour, **style))


def _legend(axes: Axes, graph: nx.Graph, height: float) -> None:
    """Write what marks and lines mean, below the panels."""
    handles = [
        Line2D([], [], marker=mark, color=colour, linestyle="none", markersize=4.0, label=figure_name(layer))
        for layer, (colour, mark) in layer_styles(graph).items()
    ]
    values = [r for _, _, r in graph.edges(data="r")]
    for r in (value for value in RULER if min(values) <= value <= max(values) or value in (0.7, -0.7)):
        style: dict[str, Any] = dict(POSITIVE if r > 0 else NEGATIVE)
        handles.append(Line2D([], [], linewidth=line_width(r), label=f"r = {r:g}", **style))
    legend = axes.legend(
        handles=handles, loc="upper center", bbox_to_anchor=(0.5, FOOT / (height + TOP + FOOT)), ncols=5,
        borderaxespad=0.0, columnspacing=1.4, handlelength=2.6,
    )  # fmt: skip
    for text in legend.get_texts():
        text.set_parse_math(False)
        text.set_color(INK)


def _caption(
    what: str, graph: nx.Graph, placed: Sequence[tuple[Panel, Place]], unplaced: Sequence[Panel]
) -> str:
    shown = {node for panel, _ in placed for node in (*panel.left, *panel.right)}
    drawn = sum(
        graph.nodes[first]["community"] == graph.nodes[second]["community"]
        for first, second in graph.subgraph(shown).edges
    )
    text = (
        f"{what} by community and layer: {len(shown)} of {len(graph)} features and {drawn} of "
        f"{counted(graph.number_of_edges(), 'edge')}. Marks: layers. Lines: edges, "
        "wider and darker the larger |r|, dashed where "
        "r is below zero. Features are ordered so that few lines cross; their height means nothing else."
    )
    between = sum(graph.nodes[a]["community"] != graph.nodes[b]["community"] for a, b in graph.edges)
    if between:
        text += f" Not drawn: {counted(between, 'edge')} between communities (edges.tsv has them)."
    if unplaced:
        text += f" No room was found for {counted(len(unplaced), 'small community', 'small communities')}."
    return f"{text} Edges are associations that passed the test; communities are a way to read them, and no test."
