"""Figures of findings: one function for each kind of evidence, and whole figures of all findings that have one."""

from __future__ import annotations

import hashlib
from collections.abc import Callable, Iterable
from typing import Any

import matplotlib as mpl
import numpy as np
from matplotlib.axes import Axes
from matplotlib.backends.backend_agg import FigureCanvasAgg
from matplotlib.figure import Figure
from matplotlib.ticker import FuncFormatter, LogLocator, NullFormatter
from numpy.typing import NDArray

from workbench.checks import Finding
from workbench.checks.evidence import (
    CrossTable,
    FeatureShares,
    GapShares,
    RunFigures,
    SamplePlane,
    SampleValues,
    ScoresByColumn,
    TwoSamples,
    ValueSpread,
)
from workbench.checks.swapped import SwapPicture
from workbench.figures.drawing import Drawing
from workbench.figures.labels import place_labels
from workbench.figures.style import (
    COLOURS,
    GUIDE,
    INK,
    MARKS,
    ONE_COLUMN,
    PALE,
    figure_name,
    figure_style,
    plain_legend,
    plain_ticks,
    say,
)
from workbench.figures.swaps import swap_plot

FloatArray = NDArray[np.float64]
Drawer = Callable[[Any, Axes], Axes]

HEIGHT = 2.8
MOST_TICKS = 30
LONGEST_NAME = 100
JITTER = 0.18
WIDE = 100.0
SMALL_MARK, LARGE_MARK = 9.0, 26.0


def sample_values(evidence: SampleValues, axes: Axes) -> Axes:
    """Draw one value per sample, those of the finding marked and named, with the limit and the median."""
    known = np.isfinite(evidence.values) & ((evidence.values > 0) | (not evidence.log_scale))
    at = np.arange(evidence.values.size)
    axes.scatter(at[known], evidence.values[known], s=SMALL_MARK, color=GUIDE, linewidths=0.0, zorder=2)
    if evidence.log_scale:
        _log_axis(axes)
    if known.any():
        axes.axhline(float(np.median(evidence.values[known])), color=PALE, linewidth=0.8, zorder=1)
    if np.isfinite(evidence.limit):
        axes.axhline(evidence.limit, color=COLOURS[4], linewidth=0.8, linestyle="--", zorder=1)
    axes.set_xlabel("samples, in the order of the sheet")
    axes.set_ylabel(evidence.label)
    axes.margins(x=0.04, y=0.12)
    _mark(axes, evidence.samples, at.astype(np.float64), evidence.values, evidence.flagged)
    return axes


def _log_axis(axes: Axes) -> None:
    """Make the vertical axis logarithmic, its ticks plain numbers."""
    axes.set_yscale("log")
    axes.yaxis.set_major_locator(LogLocator(subs=(1.0, 2.0, 5.0)))
    axes.yaxis.set_major_formatter(FuncFormatter(lambda value, _: f"{value:g}"))
    axes.yaxis.set_minor_formatter(NullFormatter())


def sample_plane(evidence: SamplePlane, axes: Axes) -> Axes:
    """Draw the samples on two components, those of the finding marked and named."""
    axes.scatter(evidence.x, evidence.y, s=SMALL_MARK, color=GUIDE, linewidths=0.0, zorder=2)
    axes.set_xlabel(evidence.labels[0])
    axes.set_ylabel(evidence.labels[1])
    axes.margins(0.12)
    _mark(axes, evidence.samples, evidence.x, evidence.y, evidence.flagged)
    return axes


def _mark(axes: Axes, samples: tuple[str, ...], x: FloatArray, y: FloatArray, rows: tuple[int, ...]) -> None:
    """Mark and name some samples; what has no place in the axes is left out."""
    held = [row for row in rows if np.isfinite(y[row]) and (axes.get_yscale() != "log" or y[row] > 0)]
    if not held:
        return
    points = np.column_stack([x[held], y[held]])
    axes.scatter(
        points[:, 0], points[:, 1], s=LARGE_MARK, marker=MARKS[1], color=COLOURS[4], linewidths=0.0, zorder=4
    )
    axes.autoscale_view()
    place_labels(axes, points, [figure_name(samples[row]) for row in held])


def scores_by_column(evidence: ScoresByColumn, axes: Axes) -> Axes:
    """Draw a component against a number, or by the classes of a column with their means."""
    held = ~np.isnan(evidence.places)
    x, y = evidence.places[held], evidence.scores[held]
    if evidence.levels:
        spread = np.linspace(-JITTER, JITTER, 7)[np.arange(x.size) % 7]
        axes.scatter(x + spread, y, s=SMALL_MARK, color=COLOURS[0], linewidths=0.0, zorder=2)
        for level in np.unique(x):
            axes.hlines(y[x == level].mean(), level - 0.3, level + 0.3, color=INK, linewidth=1.2, zorder=3)
        count = len(evidence.levels)
        names = [figure_name(level, 12) for level in evidence.levels]
        if count <= MOST_TICKS:
            plain_ticks(axes, "x", range(count), names, rotation=90 if count > 6 else 0)
    else:
        axes.scatter(x, y, s=SMALL_MARK, color=COLOURS[0], linewidths=0.0, zorder=2)
    axes.set_xlabel(figure_name(evidence.column), parse_math=False)
    axes.set_ylabel(evidence.label)
    return axes


def cross_table(evidence: CrossTable, axes: Axes) -> Axes:
    """Draw how many samples each two levels share, as numbers on shades."""
    counts = evidence.counts
    axes.imshow(counts, cmap="Greys", vmin=0, vmax=1.6 * max(1, int(counts.max(initial=0))), aspect="auto")
    if counts.size <= MOST_TICKS**2 // 4:
        for (row, column), count in np.ndenumerate(counts):
            say(axes, float(column), float(row), str(count), ha="center", va="center")
    _level_ticks(axes, "y", evidence.rows)
    _level_ticks(axes, "x", evidence.columns)
    axes.set_ylabel(figure_name(evidence.row_name), parse_math=False)
    axes.set_xlabel(figure_name(evidence.column_name), parse_math=False)
    return axes


def _level_ticks(axes: Axes, which: str, levels: tuple[str, ...]) -> None:
    if len(levels) <= MOST_TICKS:
        turned = 90 if which == "x" and len(levels) > 6 else 0
        plain_ticks(
            axes, which, range(len(levels)), [figure_name(level, 14) for level in levels], rotation=turned
        )


def two_samples(evidence: TwoSamples, axes: Axes) -> Axes:
    """Draw the features of one sample against those of another, with the line on which they are equal."""
    held = np.isfinite(evidence.x) & np.isfinite(evidence.y)
    x, y = evidence.x[held], evidence.y[held]
    wide = bool(x.size) and min(x.min(), y.min()) >= 0 and max(x.max(), y.max()) > WIDE
    if wide:
        x, y = np.log10(x + 1.0), np.log10(y + 1.0)
    axes.scatter(x, y, s=3.0, color=COLOURS[0], linewidths=0.0, alpha=0.5, zorder=2, rasterized=x.size > 1000)
    axes.axline((0.0, 0.0), (1.0, 1.0), color=GUIDE, linewidth=0.6, zorder=1)
    unit = f", log10(1 + {evidence.label})" if wide else f", {evidence.label}"
    axes.set_xlabel(figure_name(evidence.names[0]) + unit, parse_math=False)
    axes.set_ylabel(figure_name(evidence.names[1]) + unit, parse_math=False)
    return axes


def value_spread(evidence: ValueSpread, axes: Axes) -> Axes:
    """Draw a histogram of the values as delivered, on a logarithmic axis where they span a hundredfold."""
    values = evidence.values[np.isfinite(evidence.values)]
    positive = values[values > 0]
    wide = (
        positive.size > 0.5 * values.size and positive.max() > 100 * positive.min() and not (values < 0).any()
    )
    shown = np.log10(positive) if wide else values
    axes.hist(shown, bins=40, color=COLOURS[0], linewidth=0.0)
    axes.set_xlabel(f"log10 of {evidence.label}" if wide else evidence.label, parse_math=False)
    axes.set_ylabel("cells")
    axes.set_title(f"declared as {evidence.declared}")
    return axes


def gap_shares(evidence: GapShares, axes: Axes) -> Axes:
    """Draw the missing share of features by the level of a column."""
    shades = mpl.colormaps["Greys"].with_extremes(bad=COLOURS[1])
    axes.imshow(100 * evidence.shares, cmap=shades, vmin=0, vmax=100, aspect="auto", interpolation="nearest")
    _level_ticks(axes, "x", evidence.levels)
    if len(evidence.features) <= MOST_TICKS:
        names = [figure_name(name, 16) for name in evidence.features]
        plain_ticks(axes, "y", range(len(names)), names, fontsize=5.5)
    axes.set_xlabel(figure_name(evidence.column), parse_math=False)
    axes.set_title("missing: white none, black all samples")
    return axes


def run_figures(evidence: RunFigures, axes: Axes) -> Axes:
    """Draw one figure per run over the injection order, by role."""
    for place, role in enumerate(dict.fromkeys(evidence.roles)):
        own = np.array([one == role for one in evidence.roles])
        axes.scatter(
            evidence.order[own], evidence.values[own], s=SMALL_MARK, marker=MARKS[place], color=COLOURS[place],
            linewidths=0.0, label=role,
        )  # fmt: skip
    axes.set_xlabel("injection order")
    axes.set_ylabel(evidence.label)
    plain_legend(axes)
    return axes


def feature_shares(evidence: FeatureShares, axes: Axes) -> Axes:
    """Draw a histogram over features and the limit."""
    axes.hist(evidence.values, bins=40, color=COLOURS[0], linewidth=0.0)
    axes.axvline(evidence.limit, color=COLOURS[4], linewidth=0.8, linestyle="--")
    axes.set_xlabel(evidence.label)
    axes.set_ylabel("features")
    return axes


DRAWERS: dict[type, Drawer] = {
    SampleValues: sample_values,
    SamplePlane: sample_plane,
    ScoresByColumn: scores_by_column,
    CrossTable: cross_table,
    TwoSamples: two_samples,
    ValueSpread: value_spread,
    GapShares: gap_shares,
    RunFigures: run_figures,
    FeatureShares: feature_shares,
    SwapPicture: swap_plot,
}


def draw_finding(finding: Finding, axes: Axes) -> Axes | None:
    """Draw what a finding rests on; None when it has nothing to show."""
    drawer = DRAWERS.get(type(finding.evidence))
    return None if drawer is None else drawer(finding.evidence, axes)


def draw_findings(findings: Iterable[Finding]) -> tuple[Drawing, ...]:
    """Draw every finding that has something to show, in one figure each, named by its id and told by its words."""
    drawings = []
    with figure_style():
        for finding in findings:
            if type(finding.evidence) not in DRAWERS:
                continue
            figure = Figure(figsize=(ONE_COLUMN, HEIGHT))
            FigureCanvasAgg(figure)
            draw_finding(finding, figure.add_axes((0.17, 0.2, 0.79, 0.68)))
            drawings.append(Drawing(figure_file(finding.id), figure, f"{finding.what}."))
    return tuple(drawings)


def figure_file(identity: str) -> str:
    """Return the name of a finding's figure: its id, cut where a disk might not take it.

    >>> figure_file("outlier-metabolites-S12")
    'outlier-metabolites-S12'
    >>> len(figure_file("outlier-" + 300 * "x"))
    107
    """
    if len(identity) <= LONGEST_NAME:
        return identity
    return f"{identity[:LONGEST_NAME]}.{hashlib.sha256(identity.encode()).hexdigest()[:6]}"
