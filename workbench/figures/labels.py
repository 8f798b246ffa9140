"""Labels beside points, without overlap: what finds no room is left out and reported."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
from matplotlib.axes import Axes
from matplotlib.font_manager import FontProperties
from matplotlib.patheffects import withStroke
from matplotlib.textpath import text_to_path
from numpy.typing import NDArray

from workbench.figures.style import GUIDE, SMALL

FloatArray = NDArray[np.float64]

_ANGLES = np.deg2rad(np.arange(0.0, 360.0, 22.5))
_REACHES = (3.0, 6.0, 10.0, 15.0, 21.0, 28.0, 36.0)
_LINE_FROM = 7.0
_PADDING = 1.0
_COVERED, _OFF_DIRECTION = 3.0, 6.0


@dataclass(frozen=True)
class _Box:
    """A rectangle in points of the page."""

    left: float
    bottom: float
    right: float
    top: float

    def meets(self, other: _Box) -> bool:
        """Whether two boxes overlap."""
        return (
            self.left < other.right
            and other.left < self.right
            and self.bottom < other.top
            and other.bottom < self.top
        )

    def inside(self, other: _Box) -> bool:
        """Whether this box lies in the other one."""
        across = self.left >= other.left and self.right <= other.right
        return across and self.bottom >= other.bottom and self.top <= other.top

    def holds(self, points: FloatArray) -> int:
        """How many points lie in the box."""
        x, y = points[:, 0], points[:, 1]
        return int(np.count_nonzero((x > self.left) & (x < self.right) & (y > self.bottom) & (y < self.top)))

    def crossed(self, start: FloatArray, end: FloatArray) -> bool:
        """Whether a straight line passes through the box (looked at in 20 places)."""
        return self.holds(start + np.linspace(0.0, 1.0, 20)[:, None] * (end - start)) > 0


def text_size(text: str, size: float) -> tuple[float, float]:
    """Width and height of a text in points."""
    width, height, _ = text_to_path.get_text_width_height_descent(
        text, FontProperties(family=["DejaVu Sans"], size=size), ismath=False
    )
    return float(width), float(max(height, size))


def place_labels(
    axes: Axes,
    points: FloatArray,
    texts: Sequence[str],
    *,
    obstacles: FloatArray | None = None,
    outward: bool = False,
    size: float = SMALL,
    colours: Sequence[str] | None = None,
) -> tuple[int, ...]:
    """Write labels beside points so that none overlaps another or leaves the axes.

    Greedy, in the order given: each label takes the place that covers fewest points and lies nearest, with a
    thin line to its point where it lies further off. Limits and size of the axes must be final.

    Parameters
    ----------
    axes : Axes
    points : ndarray of shape (n_labels, 2)
        In data coordinates.
    texts : sequence of str
    obstacles : ndarray of shape (n, 2), optional
        Points better not covered; the labelled ones when left out.
    outward : bool
        Prefer the side that looks away from the origin.
    size : float
        Points.
    colours : sequence of str, optional
        Colour of each text.

    Returns
    -------
    tuple of int
        Labels that found no room, and are not drawn.
    """
    if not len(texts):
        return ()
    unit = 72.0 / axes.figure.dpi
    anchors = axes.transData.transform(points) * unit
    around = anchors if obstacles is None else axes.transData.transform(obstacles) * unit
    origin = axes.transData.transform((0.0, 0.0)) * unit if outward else None
    frame = axes.get_window_extent()
    room = _Box(frame.x0 * unit, frame.y0 * unit, frame.x1 * unit, frame.y1 * unit)
    taken: list[_Box] = []
    lines: list[tuple[FloatArray, FloatArray]] = []
    left_out = []
    for i, text in enumerate(texts):
        found = _best(anchors[i], text_size(text, size), room, taken, lines, around, origin)
        if found is None:
            left_out.append(i)
            continue
        box, end, reach = found
        taken.append(box)
        lines.append((anchors[i], end))
        _write(axes, points[i], text, box, anchors[i], reach, size, colours[i] if colours else None)
    return tuple(left_out)


def _best(
    anchor: FloatArray,
    extent: tuple[float, float],
    room: _Box,
    taken: Sequence[_Box],
    lines: Sequence[tuple[FloatArray, FloatArray]],
    around: FloatArray,
    origin: FloatArray | None,
) -> tuple[_Box, FloatArray, float] | None:
    """Cheapest free place of a label: its box, the end of its line, and how far off it is."""
    best, cheapest = None, np.inf
    away = None if origin is None else _direction(anchor - origin)
    for reach in _REACHES:
        for angle in _ANGLES:
            step = np.array([np.cos(angle), np.sin(angle)])
            cost = reach + (0.0 if away is None else _OFF_DIRECTION * (1.0 - float(step @ away)))
            if cost >= cheapest:
                continue
            end = anchor + reach * step
            box = _box(end, step, extent)
            if not box.inside(room) or _blocked(box, anchor, end, taken, lines):
                continue
            cost += _COVERED * box.holds(around)
            if cost < cheapest:
                best, cheapest = (box, end, reach), cost
    return best


def _direction(step: FloatArray) -> FloatArray:
    length = float(np.hypot(*step))
    return step / length if length > 0.0 else np.zeros(2)


def _box(end: FloatArray, step: FloatArray, extent: tuple[float, float]) -> _Box:
    """Box of a text that touches ``end`` and lies beyond it in the direction of ``step``."""
    width, height = extent
    x = end[0] + (step[0] - 1.0) * width / 2.0
    y = end[1] + (step[1] - 1.0) * height / 2.0
    return _Box(x - _PADDING, y - _PADDING, x + width + _PADDING, y + height + _PADDING)


def _blocked(
    box: _Box,
    anchor: FloatArray,
    end: FloatArray,
    taken: Sequence[_Box],
    lines: Sequence[tuple[FloatArray, FloatArray]],
) -> bool:
    if any(box.meets(other) or other.crossed(anchor, end) for other in taken):
        return True
    return any(box.crossed(start, stop) for start, stop in lines)


def _write(
    axes: Axes,
    point: FloatArray,
    text: str,
    box: _Box,
    anchor: FloatArray,
    reach: float,
    size: float,
    colour: str | None,
) -> None:
    """Write the text at its box, as an offset from its point, with a line where it lies off."""
    offset = (box.left + _PADDING - anchor[0], box.bottom + _PADDING - anchor[1])
    style: dict[str, Any] = {"color": colour} if colour else {}
    place = (float(point[0]), float(point[1]))
    written = axes.annotate(
        text,
        place,
        offset,
        textcoords="offset points",
        fontsize=size,
        ha="left",
        va="bottom",
        zorder=6,
        **style,
    )
    written.set_parse_math(False)
    written.set_path_effects([withStroke(linewidth=1.5, foreground="white")])
    if reach >= _LINE_FROM:
        nearest = np.clip(anchor, [box.left, box.bottom], [box.right, box.top]) - anchor
        line = {"arrowstyle": "-", "color": GUIDE, "linewidth": 0.4, "shrinkA": 0.0, "shrinkB": 1.0}
        axes.annotate("", place, tuple(nearest), textcoords="offset points", zorder=5, arrowprops=line)
