"""The correlations of the edges' features as an ordered matrix, communities and layers along its sides."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from itertools import groupby
from typing import Any

import numpy as np
from matplotlib.axes import Axes
from matplotlib.backends.backend_agg import FigureCanvasAgg
from matplotlib.colors import LinearSegmentedColormap
from matplotlib.figure import Figure
from matplotlib.lines import Line2D
from numpy.typing import NDArray

from workbench.figures.drawing import Drawing
from workbench.figures.style import (
    COLOURS,
    GUIDE,
    INK,
    TWO_COLUMNS,
    figure_name,
    figure_style,
    plain_ticks,
    say,
)

FloatArray = NDArray[np.float64]

HEIGHT = 5.6
MOST_NAMED = 60
NAME = 14
SMALLEST_TEXT = 6.0

#: Dark below zero, light above it, so that the sign shows in grey as well.
SIGNED = LinearSegmentedColormap.from_list(
    "signed", ["#08234F", "#4F79AE", "#BDBDBD", "#F4CE6A", "#FFFDE8"]
).with_extremes(bad="#FFFFFF")


@dataclass(frozen=True, eq=False)
class EdgeMatrix:
    """Correlations of features, ordered by community, then by layer, then so that alike ones are neighbours.

    Attributes
    ----------
    labels, layers : tuple of str
    communities : tuple of int
    r : ndarray of shape (features, features)
        NaN where two features were never measured on enough samples.
    features : int
        Features of the network, of which the strongest are shown.
    removed : str
        What was removed from both features, in words; empty for nothing.
    """

    labels: tuple[str, ...]
    layers: tuple[str, ...]
    communities: tuple[int, ...]
    r: FloatArray
    features: int
    removed: str


def alike_order(r: FloatArray) -> list[int]:
    """Return an order in which alike features are neighbours: along the leading direction of their correlations.

    Examples
    --------
    >>> r = np.array([[1.0, -0.9, 0.9], [-0.9, 1.0, -0.8], [0.9, -0.8, 1.0]])
    >>> alike_order(r)[1] in (0, 2)
    True
    """
    _, vectors = np.linalg.eigh(np.nan_to_num(r))
    leading = vectors[:, -1] * (1.0 if vectors[np.abs(vectors[:, -1]).argmax(), -1] > 0 else -1.0)
    return [int(place) for place in np.argsort(-leading, kind="stable")]


def draw_edge_matrix(matrix: EdgeMatrix) -> tuple[Drawing, ...]:
    """Return the drawing of a matrix; nothing for fewer than two features."""
    if len(matrix.labels) < 2:
        return ()
    with figure_style():
        figure = Figure(figsize=(TWO_COLUMNS, HEIGHT))
        FigureCanvasAgg(figure)
        axes = figure.add_axes((0.19, 0.55 / HEIGHT, 0.66, 0.66 * TWO_COLUMNS / HEIGHT))
        edge_matrix(matrix, axes)
        bar = figure.colorbar(axes.images[0], cax=figure.add_axes((0.89, 0.35, 0.018, 0.3)))
        bar.set_label("correlation")
        bar.outline.set_visible(False)
        return (Drawing("edge_correlations", figure, _caption(matrix)),)


def edge_matrix(matrix: EdgeMatrix, axes: Axes) -> Axes:
    """Draw the matrix: light above zero, dark below; communities outlined, layers as a strip along the sides."""
    size = len(matrix.labels)
    axes.imshow(matrix.r, cmap=SIGNED, vmin=-1.0, vmax=1.0, interpolation="nearest", aspect="equal")
    for number, start, length in _runs(matrix.communities):
        _outline(axes, start - 0.5, length)
        if length >= max(1, size // 40):
            say(axes, size - 0.5 + 0.02 * size, start + (length - 1) / 2, f"{number}", va="center", ha="left")
    for layer, start, length in _runs(matrix.layers):
        colour = COLOURS[_layers(matrix).index(layer) % len(COLOURS)]
        line: dict[str, Any] = {"color": colour, "linewidth": 3.0, "solid_capstyle": "butt", "clip_on": False}
        ends = [start - 0.5, start + length - 0.5]
        axes.plot([-0.5 - 0.012 * size] * 2, ends, **line)
        axes.plot(ends, [size - 0.5 + 0.012 * size] * 2, **line)
    _names(axes, matrix)
    axes.set_xlim(-0.5, size - 0.5)
    axes.set_ylim(size - 0.5, -0.5)
    beside = size - 0.5 + 0.02 * size
    say(axes, beside, -0.5, "community", va="bottom", ha="left", fontsize=SMALLEST_TEXT, color=GUIDE)
    return axes


def _names(axes: Axes, matrix: EdgeMatrix) -> None:
    for side in ("left", "bottom"):
        axes.spines[side].set_visible(False)
    if len(matrix.labels) <= MOST_NAMED:
        names = [figure_name(label, NAME) for label in matrix.labels]
        plain_ticks(axes, "y", np.arange(len(names)), names, fontsize=SMALLEST_TEXT)
    else:
        axes.set_yticks([])
    axes.set_xticks([])
    axes.tick_params(length=0.0, pad=6.0)
    handles = [
        Line2D([], [], color=COLOURS[k % len(COLOURS)], linewidth=3.0, label=figure_name(layer))
        for k, layer in enumerate(_layers(matrix))
    ]
    legend = axes.legend(handles=handles, loc="upper center", bbox_to_anchor=(0.5, -0.04), ncols=4)
    for text in legend.get_texts():
        text.set_parse_math(False)


def _layers(matrix: EdgeMatrix) -> list[str]:
    """Return the layers, the most numerous first, as in the picture of the network."""
    return sorted(set(matrix.layers), key=lambda layer: (-matrix.layers.count(layer), layer))


def _runs(values: Sequence[Any]) -> list[tuple[Any, int, int]]:
    """Return each run of equal values with its start and length."""
    found, start = [], 0
    for value, run in groupby(values):
        length = sum(1 for _ in run)
        found.append((value, start, length))
        start += length
    return found


def _outline(axes: Axes, start: float, length: int) -> None:
    ends = [start, start + length]
    x = [ends[0], ends[1], ends[1], ends[0], ends[0]]
    y = [ends[0], ends[0], ends[1], ends[1], ends[0]]
    axes.plot(x, y, color=INK, linewidth=0.7, zorder=3)


def _caption(matrix: EdgeMatrix) -> str:
    shown = len(matrix.labels)
    which = "all" if shown == matrix.features else f"the {shown} with the largest sum of |r|, of"
    removed = f", {matrix.removed} removed from both" if matrix.removed else ""
    return (
        f"Correlations of the features that have an edge ({which} {matrix.features}){removed}: light above zero, dark "
        "below. Features of a community stand together (outlined, number at the right), in it those of a layer "
        "(strip at the sides), next to those most like them; edge_correlations.tsv has the same order and the numbers. "
        "Correlations inside a layer are shown and were not tested. A block of strong correlations says that features "
        "go together, not why."
    )
