"""What the figures of a network share: layers and their marks, lines of edges, a page measured in points."""

from __future__ import annotations

from collections import Counter
from typing import Any

import networkx as nx
from matplotlib.axes import Axes
from matplotlib.backends.backend_agg import FigureCanvasAgg
from matplotlib.figure import Figure

from workbench.figures.style import COLOURS, MARKS

POSITIVE: dict[str, Any] = {"color": COLOURS[0], "linestyle": "-"}
NEGATIVE: dict[str, Any] = {"color": COLOURS[4], "linestyle": (0, (3.0, 1.6))}
RULER = (0.5, 0.7, 0.9, -0.5, -0.7, -0.9)
_WEAKEST, _THINNEST, _WIDTHS = 0.3, 0.3, 1.7


def line_width(r: float) -> float:
    """Width of an edge's line in points: 0.3 up to |r| = 0.3, then in proportion, 2 at |r| = 1."""
    return _THINNEST + _WIDTHS * max(0.0, abs(r) - _WEAKEST) / (1.0 - _WEAKEST)


def layers_of(graph: nx.Graph) -> tuple[str, ...]:
    """Return the layers of a network, the most numerous first, equal ones by name."""
    counts = Counter(str(found.get("layer", node[0])) for node, found in graph.nodes(data=True))
    return tuple(sorted(counts, key=lambda layer: (-counts[layer], layer)))


def layer_styles(graph: nx.Graph) -> dict[str, tuple[str, str]]:
    """Return colour and mark of each layer; neighbours differ in lightness."""
    return {
        layer: (COLOURS[place % len(COLOURS)], MARKS[place % len(MARKS)])
        for place, layer in enumerate(layers_of(graph))
    }


def page(width: float, height: float) -> tuple[Figure, Axes]:
    """Return a figure and axes that fill it, measured in points from its upper left corner.

    Parameters
    ----------
    width : float
        Inches.
    height : float
        Points.
    """
    figure = Figure(figsize=(width, height / 72.0))
    FigureCanvasAgg(figure)
    axes = figure.add_axes((0.0, 0.0, 1.0, 1.0))
    axes.set_xlim(0.0, width * 72.0)
    axes.set_ylim(height, 0.0)
    axes.set_axis_off()
    return figure, axes
