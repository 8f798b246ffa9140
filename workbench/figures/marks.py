"""Marks of the samples: colour and line by group, shape by a second column, told apart in grey too."""

from __future__ import annotations

from typing import Any, Protocol

import numpy as np
from matplotlib.axes import Axes
from matplotlib.colors import to_hex, to_rgb
from matplotlib.lines import Line2D
from numpy.typing import NDArray

from workbench.figures.style import COLOURS, GUIDE, INK, LINES, MARKS, figure_name
from workbench.look.view import Levels

FloatArray = NDArray[np.float64]

CROWDED = 120
NO_GROUPS = NO_SHAPES = -2
PALENESS = 0.6


class Marked(Protocol):
    """Samples that are told apart by group, and by a second column."""

    @property
    def samples(self) -> tuple[str, ...]:
        """Their names."""
        ...

    @property
    def groups(self) -> Levels | None:
        """What colours them."""
        ...

    @property
    def shapes(self) -> Levels | None:
        """What shapes their marks."""
        ...


def draw_samples(look: Marked, axes: Axes, points: FloatArray, size: float, **style: Any) -> None:
    """Draw one mark per sample; half the size where there are more than 120.

    Parameters
    ----------
    look : Marked
        Such as a look at a block.
    axes : Axes
    points : ndarray of shape (n_samples, 2)
    size : float
        Area of a mark in square points.
    """
    area = size if len(points) <= CROWDED else size / 2.0
    defaults = {"zorder": 3, "alpha": 1.0 if len(points) <= CROWDED else 0.75}
    for members, colour, mark, face in _marks(look):
        x, y = points[members].T
        axes.scatter(
            x,
            y,
            s=area,
            marker=mark,
            facecolors=face,
            edgecolors=colour,
            linewidths=0.7,
            **{**defaults, **style},
        )


def _marks(look: Marked) -> list[tuple[NDArray[np.intp], str, str, str]]:
    """Return the samples of each group and shape, with their colour, mark and filling.

    Without a shaping column each group has a mark of its own; with one, groups are filled, hollow or pale in
    turn, so that they are told apart without colour.
    """
    n = len(look.samples)
    groups = np.array(look.groups.codes) if look.groups is not None else np.full(n, NO_GROUPS)
    shapes = np.array(look.shapes.codes) if look.shapes is not None else np.full(n, NO_SHAPES)
    found = []
    for group, shape in sorted(set(zip(groups.tolist(), shapes.tolist(), strict=True))):
        mark = _mark(group) if shape == NO_SHAPES else _shape(shape)
        face = colour_of(group) if shape == NO_SHAPES else _filling(group)
        found.append((np.flatnonzero((groups == group) & (shapes == shape)), colour_of(group), mark, face))
    return found


def colour_of(group: int) -> str:
    """Colour of a group; dark where there are no groups, grey for samples without one."""
    if group == NO_GROUPS:
        return INK
    return GUIDE if group < 0 else COLOURS[group % len(COLOURS)]


def line_of(group: int) -> Any:
    """Line style of a group."""
    return LINES[group % len(LINES)]


def _mark(group: int) -> str:
    if group == NO_GROUPS:
        return MARKS[0]
    return "." if group < 0 else MARKS[group % len(MARKS)]


def _shape(shape: int) -> str:
    return "." if shape < 0 else MARKS[shape % len(MARKS)]


def _filling(group: int) -> str:
    """Face of a group's marks where their shape tells something else: full, none or pale."""
    colour = colour_of(group)
    if group < 0 or group % 3 == 0:
        return colour
    if group % 3 == 1:
        return "none"
    red, green, blue = (PALENESS + (1.0 - PALENESS) * part for part in to_rgb(colour))
    return to_hex((red, green, blue))


def sample_legend(look: Marked, axes: Axes, **where: Any) -> Axes:
    """Add the legend of the score plots: colours and lines of groups, marks of the shaping column."""
    handles = _group_handles(look) + _shape_handles(look)
    if handles:
        legend = axes.legend(handles=handles, title=_legend_title(look), **where)
        legend.get_title().set_parse_math(False)
        for text in legend.get_texts():
            text.set_parse_math(False)
    return axes


def _legend_title(look: Marked) -> str:
    parts = [("colour", look.groups), ("mark", look.shapes)]
    return ", ".join(f"{what}: {figure_name(levels.name)}" for what, levels in parts if levels is not None)


def _group_handles(look: Marked) -> list[Line2D]:
    if look.groups is None:
        return []
    handles = [_group_handle(look, i, level) for i, level in enumerate(look.groups.levels)]
    if -1 in look.groups.codes:
        handles.append(_handle("no group", GUIDE, ".", GUIDE, "none"))
    return handles


def _group_handle(look: Marked, group: int, level: str) -> Line2D:
    shaped = look.shapes is not None
    face = _filling(group) if shaped else colour_of(group)
    return _handle(level, colour_of(group), "o" if shaped else _mark(group), face, line_of(group))


def _shape_handles(look: Marked) -> list[Line2D]:
    if look.shapes is None:
        return []
    handles = [_handle(level, INK, _shape(i), INK, "none") for i, level in enumerate(look.shapes.levels)]
    if -1 in look.shapes.codes:
        handles.append(_handle(f"no {look.shapes.name}", INK, ".", INK, "none"))
    return handles


def _handle(level: str, colour: str, mark: str, face: str, line: Any) -> Line2D:
    return Line2D(
        [], [], linestyle=line, linewidth=0.9, color=colour, marker=mark, markersize=4.0, markerfacecolor=face,
        label=figure_name(level, 18),
    )  # fmt: skip
