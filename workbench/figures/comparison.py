"""Two analyses against each other: the correlations of every pair that is an edge in one of them."""

from __future__ import annotations

import numpy as np
import pandas as pd
from matplotlib.axes import Axes
from matplotlib.backends.backend_agg import FigureCanvasAgg
from matplotlib.figure import Figure

from workbench.figures.drawing import Drawing
from workbench.figures.style import (
    COLOURS,
    GUIDE,
    INK,
    TWO_COLUMNS,
    figure_name,
    figure_style,
    plain_legend,
    plain_ticks,
    say,
)
from workbench.intake.faults import counted
from workbench.network.comparison import STATUSES

MARK_OF = {
    "kept": ("o", COLOURS[0]),
    "reversed": ("X", COLOURS[4]),
    "gained": ("^", COLOURS[2]),
    "lost": ("v", COLOURS[1]),
}
MOST_POINTS = 5000


def draw_comparison(table: pd.DataFrame, names: tuple[str, str]) -> tuple[Drawing, ...]:
    """Return the drawing of compared.tsv; nothing without pairs."""
    if not len(table):
        return ()
    with figure_style():
        figure = Figure(figsize=(TWO_COLUMNS, 3.7), layout="constrained")
        FigureCanvasAgg(figure)
        left, right = figure.subplots(1, 2, width_ratios=(3, 2))
        compared_pairs(table, names, left)
        status_counts(table, right)
        figure.draw_without_rendering()
        figure.set_layout_engine("none")
        return (Drawing("comparison", figure, _caption(table, names)),)


def compared_pairs(table: pd.DataFrame, names: tuple[str, str], axes: Axes) -> Axes:
    """Draw the correlation of each pair in both analyses; hollow where a difference was not shown.

    Parameters
    ----------
    table : pandas.DataFrame
        As compared.tsv.
    names : tuple of str
        What the two analyses are called.
    axes : matplotlib Axes
    """
    axes.plot([-1.0, 1.0], [-1.0, 1.0], color=GUIDE, linewidth=0.6, linestyle="--", zorder=1)
    axes.axhline(0.0, color=GUIDE, linewidth=0.4, zorder=1)
    axes.axvline(0.0, color=GUIDE, linewidth=0.4, zorder=1)
    shown = table.dropna(subset=["r_first", "r_second"]).head(MOST_POINTS)
    for status in STATUSES:
        mark, colour = MARK_OF[status]
        for changed in (False, True):
            mine = shown[(shown["status"] == status) & ((shown["changed"] == "yes") == changed)]
            if len(mine):
                axes.scatter(
                    mine["r_first"], mine["r_second"], s=12.0, marker=mark, linewidths=0.6, edgecolors=colour,
                    facecolors=colour if changed else "none", zorder=3 if changed else 2,
                    label=f"{status}, changed" if changed else status, rasterized=len(shown) > 1000,
                )  # fmt: skip
    axes.set_xlim(-1.05, 1.05)
    axes.set_ylim(-1.05, 1.05)
    axes.set_aspect("equal", adjustable="box")
    axes.set_xlabel(f"r in {figure_name(names[0], 28)}", parse_math=False)
    axes.set_ylabel(f"r in {figure_name(names[1], 28)}", parse_math=False)
    plain_legend(axes, loc="upper left", handletextpad=0.2, borderaxespad=0.2)
    return axes


def status_counts(table: pd.DataFrame, axes: Axes) -> Axes:
    """Draw how many pairs were kept, reversed, gained and lost; dark: with a difference of r that was shown."""
    rows = np.arange(len(STATUSES))[::-1]
    every = np.array([(table["status"] == status).sum() for status in STATUSES])
    changed = np.array(
        [((table["status"] == status) & (table["changed"] == "yes")).sum() for status in STATUSES]
    )
    axes.barh(rows, every, color="#D9D9D9", edgecolor=INK, linewidth=0.5, height=0.6)
    axes.barh(rows, changed, color="#4D4D4D", edgecolor=INK, linewidth=0.5, height=0.6)
    tested = bool((table["changed"] != "not tested").any())
    for row, total, dark in zip(rows, every, changed, strict=True):
        told = f"{total} ({dark} changed)" if tested else f"{total}"
        say(axes, total + 0.02 * every.max(), row, told, va="center", fontsize=6.5)
    plain_ticks(axes, "y", rows, list(STATUSES))
    axes.set_xlim(0.0, 1.45 * every.max())
    axes.set_xlabel("pairs")
    axes.tick_params(axis="y", length=0.0)
    return axes


def _caption(table: pd.DataFrame, names: tuple[str, str]) -> str:
    untested = int((table["changed"] == "not tested").sum())
    first, second = (figure_name(name, 40) for name in names)
    text = (
        f"Every pair of features that is an edge in {first} or in {second}: its correlation in both, after what each "
        "analysis removes. Filled (dark): the difference passed Fisher's z test at a false-discovery rate of 5 % over "
        "all pairs measured in both. A pair that is an edge in one analysis alone need not have changed: it may lie on "
        "both sides of a threshold with nearly the same r, and edges, picked for being strong, look weaker elsewhere "
        "on average."
    )
    if untested == len(table):
        text += " Here no difference could be tested (compared.tsv says why)."
    elif untested:
        text += f" Not to be tested: {counted(untested, 'pair')} (compared.tsv says why)."
    return text
