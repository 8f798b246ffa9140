"""Two features against each other: prepared values beside what is left of them after adjustment."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
from matplotlib.axes import Axes
from matplotlib.backends.backend_agg import FigureCanvasAgg
from matplotlib.figure import Figure
from matplotlib.lines import Line2D
from numpy.typing import NDArray

from workbench.figures.drawing import Drawing
from workbench.figures.style import COLOURS, GUIDE, INK, MARKS, TWO_COLUMNS, figure_name, figure_style, say

FloatArray = NDArray[np.float64]
NAMED = 3


@dataclass(frozen=True, eq=False)
class PairPoints:
    """What the figure of a pair shows.

    ``raw`` and ``adjusted`` are of shape (n_samples, 2): the two features before and after adjustment;
    ``filled`` marks samples in which one of the two was filled in; ``codes`` and ``levels`` are the groups
    (empty without); ``r`` the correlation in each panel; ``removed`` says what was taken away.
    """

    names: tuple[str, str]
    samples: tuple[str, ...]
    raw: FloatArray
    adjusted: FloatArray
    filled: NDArray[np.bool_]
    codes: NDArray[np.intp]
    levels: tuple[str, ...]
    r: tuple[float, float]
    removed: tuple[str, ...]


def draw_pair(points: PairPoints, name: str) -> Drawing:
    """Return the figure of a pair: prepared values on the left, adjusted ones on the right."""
    with figure_style():
        figure = Figure(figsize=(TWO_COLUMNS, 3.5), layout="constrained")
        FigureCanvasAgg(figure)
        left, right = figure.subplots(1, 2)
        pair_scatter(points, left, adjusted=False)
        pair_scatter(points, right, adjusted=True)
        handles = _handles(points)
        if handles:
            legend = figure.legend(handles=handles, loc="outside lower center", ncols=min(5, len(handles)))
            for text in legend.get_texts():
                text.set_parse_math(False)
        figure.draw_without_rendering()
        figure.set_layout_engine("none")
        return Drawing(name, figure, _caption(points))


def pair_scatter(points: PairPoints, axes: Axes, *, adjusted: bool) -> Axes:
    """Draw one panel; the samples farthest out are named, filled-in values are hollow."""
    values = points.adjusted if adjusted else points.raw
    for code in np.unique(points.codes):
        for filled in (False, True):
            rows = (points.codes == code) & (points.filled == filled)
            axes.scatter(*values[rows].T, **_mark(int(code), filled, bool(points.levels)))
    for row in _far(values):
        axes.annotate(
            figure_name(points.samples[row], 14),
            values[row],
            xytext=(3, 3),
            textcoords="offset points",
            fontsize=6.0,
            color=GUIDE,
            parse_math=False,
        )
    axes.margins(0.08)
    what = "after adjustment" if adjusted else "prepared value"
    for axis, place in ((axes.xaxis, 0), (axes.yaxis, 1)):
        label = axis.set_label_text(f"{figure_name(points.names[place], 32)}, {what}")
        label.set_parse_math(False)
    say(axes, 0.02, 1.02, f"r = {points.r[adjusted]:.2f}", transform=axes.transAxes, ha="left", va="bottom")
    return axes


def _mark(code: int, filled: bool, grouped: bool) -> dict[str, Any]:
    colour = COLOURS[code % len(COLOURS)] if grouped else INK
    return {
        "s": 18.0,
        "marker": MARKS[code % len(MARKS)] if grouped else MARKS[0],
        "facecolors": "none" if filled else colour,
        "edgecolors": colour,
        "linewidths": 0.8,
        "zorder": 3,
    }


def _far(values: FloatArray) -> NDArray[np.intp]:
    """Return the samples farthest from the middle, in units of each axis' spread."""
    spread = np.ptp(values, axis=0)
    scaled = (values - np.median(values, axis=0)) / np.where(spread > 0.0, spread, 1.0)
    return np.argsort(-(scaled**2).sum(axis=1), kind="stable")[:NAMED]


def _handles(points: PairPoints) -> list[Line2D]:
    marks = [
        (level, MARKS[code % len(MARKS)], COLOURS[code % len(COLOURS)], COLOURS[code % len(COLOURS)])
        for code, level in enumerate(points.levels)
    ]
    if points.filled.any():
        marks.append(("hollow: filled in", MARKS[0], GUIDE, "none"))
    return [
        Line2D([], [], linestyle="", marker=mark, markersize=4.5, color=edge, markerfacecolor=face,
               label=figure_name(label, 24))
        for label, mark, edge, face in marks
    ]  # fmt: skip


def _caption(points: PairPoints) -> str:
    first, second = points.names
    removed = ", ".join(points.removed) or "the mean alone"
    filled = int(points.filled.sum())
    text = (
        f"{first} against {second} on {len(points.samples)} samples. Left: prepared values, r = {points.r[0]:.2f}. "
        f"Right: what is left after removal of {removed}, r = {points.r[1]:.2f}; this is what was tested."
    )
    return text + (f" Hollow: one of the two values was filled in ({filled} samples)." if filled else "")
