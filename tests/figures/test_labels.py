"""Labels beside points never overlap, never leave the axes, and say when there is no room."""

from __future__ import annotations

from itertools import combinations

import numpy as np
import pytest
from matplotlib.backends.backend_agg import FigureCanvasAgg
from matplotlib.figure import Figure
from matplotlib.transforms import Bbox

from workbench.figures.labels import place_labels, text_size
from workbench.figures.style import figure_style


def square(limit: float = 1.0) -> tuple[Figure, object]:
    figure = Figure(figsize=(3.5, 3.5))
    FigureCanvasAgg(figure)
    axes = figure.add_axes((0.15, 0.15, 0.8, 0.8))
    axes.set_xlim(-limit, limit)
    axes.set_ylim(-limit, limit)
    return figure, axes


def boxes(figure: Figure, axes) -> list[Bbox]:
    renderer = figure.canvas.get_renderer()
    return [text.get_window_extent(renderer) for text in axes.texts if text.get_text()]


@pytest.mark.parametrize("seed", range(6))
@pytest.mark.parametrize("outward", [True, False])
def test_no_label_overlaps_another_or_leaves_the_axes(seed: int, outward: bool) -> None:
    """Between 10 and 60 points, half of them crowded together; boxes as drawn, to half a pixel."""
    rng = np.random.default_rng(seed)
    points = np.vstack([rng.uniform(-1.0, 1.0, (5 + 5 * seed, 2)), rng.normal(0.4, 0.05, (5 + 5 * seed, 2))])
    with figure_style():
        figure, axes = square()
        names = [f"sample {i}" for i in range(len(points))]
        left_out = place_labels(axes, points, names, outward=outward)
        drawn = boxes(figure, axes)
    assert len(drawn) == len(points) - len(left_out) >= 9
    frame = axes.get_window_extent()
    for box in drawn:
        assert frame.x0 - 0.5 <= box.x0 <= box.x1 <= frame.x1 + 0.5
        assert frame.y0 - 0.5 <= box.y0 <= box.y1 <= frame.y1 + 0.5
    for one, other in combinations(drawn, 2):
        across = min(one.x1, other.x1) - max(one.x0, other.x0)
        up = min(one.y1, other.y1) - max(one.y0, other.y0)
        assert across <= 0.5 or up <= 0.5


def test_what_finds_no_room_is_reported_and_not_drawn() -> None:
    with figure_style():
        figure, axes = square()
        left_out = place_labels(axes, np.zeros((80, 2)), ["a rather long label"] * 80)
        assert len(left_out) > 20
        assert len(boxes(figure, axes)) == 80 - len(left_out)


def test_a_free_label_lies_beside_its_point_and_looks_outward() -> None:
    with figure_style():
        figure, axes = square()
        place_labels(axes, np.array([[0.5, 0.0], [-0.5, 0.0]]), ["right", "left"], outward=True)
        right, left = boxes(figure, axes)
        points = axes.transData.transform([[0.5, 0.0], [-0.5, 0.0]])
    assert 0.0 < right.x0 - points[0, 0] < 10.0
    assert 0.0 < points[1, 0] - left.x1 < 10.0


def test_nothing_to_label_is_nothing_done() -> None:
    with figure_style():
        figure, axes = square()
        assert place_labels(axes, np.empty((0, 2)), []) == ()
        assert boxes(figure, axes) == []


def test_sizes_are_those_of_the_drawn_text() -> None:
    with figure_style():
        figure, axes = square()
        figure.set_dpi(300)
        axes.text(0.0, 0.0, "$meta_1^2$ PC(18:1)", fontsize=6.5, parse_math=False)
        drawn = boxes(figure, axes)[0]
        width, _ = text_size("$meta_1^2$ PC(18:1)", 6.5)
    assert width * figure.dpi / 72.0 == pytest.approx(drawn.width, rel=0.02)
