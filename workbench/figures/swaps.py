"""Figure of a swap: every sample's score beside the one expected of it, the exchanged samples before and after."""

from __future__ import annotations

import numpy as np
from matplotlib.axes import Axes

from workbench.checks.swapped import SwapPicture
from workbench.figures.labels import place_labels
from workbench.figures.style import COLOURS, GUIDE, INK, MARKS, PALE, figure_name

SMALL_MARK, LARGE_MARK = 9.0, 26.0


def swap_plot(evidence: SwapPicture, axes: Axes) -> Axes:
    """Draw score against expectation: the line of agreement, the exchanged samples as delivered and exchanged.

    Filled triangles are the samples as delivered, open circles the same when exchanged; a swap moves them to the
    line along which all others lie. The score is the one on which the exchanged samples differ most.
    """
    values = np.concatenate(
        [evidence.expected, evidence.score, evidence.expected_after, evidence.score_after]
    )
    ends = np.array([values.min(), values.max()])
    axes.plot(ends, ends, color=PALE, linewidth=0.8, zorder=1)
    axes.scatter(evidence.expected, evidence.score, s=SMALL_MARK, color=GUIDE, linewidths=0.0, zorder=2)
    swapped = list(evidence.swapped)
    before = np.column_stack([evidence.expected[swapped], evidence.score[swapped]])
    after = np.column_stack([evidence.expected_after, evidence.score_after])
    for start, end in zip(before, after, strict=True):
        axes.annotate(
            "",
            xy=(end[0], end[1]),
            xytext=(start[0], start[1]),
            arrowprops={"arrowstyle": "->", "color": INK, "linewidth": 0.6, "shrinkA": 3.0, "shrinkB": 3.0},
            zorder=3,
        )
    axes.scatter(
        before[:, 0],
        before[:, 1],
        s=LARGE_MARK,
        marker=MARKS[1],
        color=COLOURS[4],
        linewidths=0.0,
        zorder=4,
        label="delivered",
    )
    axes.scatter(
        after[:, 0],
        after[:, 1],
        s=LARGE_MARK,
        marker="o",
        facecolors="none",
        edgecolors=COLOURS[0],
        zorder=4,
        label="exchanged",
    )
    axes.set_xlabel(figure_name(evidence.labels[0], 60), parse_math=False)
    axes.set_ylabel(figure_name(evidence.labels[1], 60), parse_math=False)
    axes.margins(0.12)
    axes.legend(loc="best")
    axes.autoscale_view()
    place_labels(axes, before, [figure_name(evidence.samples[row]) for row in swapped])
    return axes
