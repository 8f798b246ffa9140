"""The sets that communities hold more of than chance gives, with both of their p's."""

from __future__ import annotations

import numpy as np
import pandas as pd
from matplotlib.axes import Axes
from matplotlib.backends.backend_agg import FigureCanvasAgg
from matplotlib.figure import Figure
from matplotlib.lines import Line2D

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
from workbench.look.words import small

MOST_SHOWN = 24
NAME = 34
SMALLEST_TEXT = 6.0
MARGIN = 0.12
"""Inches at the sides: names are up to 2 % wider in print than when they are laid out."""

LIMIT = 0.05
SMALLEST_P = 1e-12
"""Smaller p's are drawn as this, so that those of permuted samples keep their room."""


def draw_pathways(table: pd.DataFrame) -> tuple[Drawing, ...]:
    """Return the drawing of the leading rows of pathways.tsv; nothing for an empty table."""
    if not len(table):
        return ()
    with figure_style():
        rows = min(len(table), MOST_SHOWN)
        figure = Figure(figsize=(TWO_COLUMNS, 0.95 + 0.165 * max(rows, 3)))
        figure.set_layout_engine("constrained", w_pad=MARGIN)
        FigureCanvasAgg(figure)
        axes = figure.add_subplot()
        leading_sets(table, axes)
        figure.draw_without_rendering()
        figure.set_layout_engine("none")
        return (Drawing("pathways", figure, _caption(table)),)


def leading_sets(table: pd.DataFrame, axes: Axes) -> Axes:
    """Draw the leading rows: both p's as -log10, filled where the row holds, hollow where not.

    Parameters
    ----------
    table : pandas.DataFrame
        As pathways.tsv, best evidence first.
    axes : matplotlib Axes
    """
    shown = table.head(MOST_SHOWN).reset_index(drop=True)
    places = np.arange(len(shown))[::-1]
    for column, mark, colour in (("p", "o", COLOURS[0]), ("p_permutation", "s", COLOURS[1])):
        x = -np.log10(np.maximum(shown[column].to_numpy(dtype=float), SMALLEST_P))
        for holds in (True, False):
            mine = shown["holds"].to_numpy(dtype=bool) == holds
            face = colour if holds else "none"
            axes.scatter(
                x[mine], places[mine], s=16.0, marker=mark, facecolors=face, edgecolors=colour, zorder=3,
                clip_on=False,
            )  # fmt: skip
    axes.axvline(-np.log10(LIMIT), color=GUIDE, linewidth=0.6, linestyle="--", zorder=1)
    for place in places:
        axes.axhline(place, color="#EEEEEE", linewidth=0.5, zorder=0)
    names = [
        f"{figure_name(str(row.name_shown), NAME)}  {row.community}, {figure_name(str(row.layer), 12)}"
        for row in shown.rename(columns={"name": "name_shown"}).itertuples()
    ]
    plain_ticks(axes, "y", places, names, fontsize=SMALLEST_TEXT)
    right = axes.get_xlim()[1]
    for place, found, expected, q in zip(places, shown["found"], shown["expected"], shown["q"], strict=True):
        told = f"{found} found, {expected:.1f} expected, q {small(float(q))}"
        say(axes, right * 1.02, place, told, va="center", fontsize=SMALLEST_TEXT, color=INK, clip_on=False)
    axes.set_xlim(0.0, right)
    axes.set_ylim(-0.7, max(len(shown), 3) - 0.3)
    axes.tick_params(axis="y", length=0.0)
    axes.set_xlabel("-log10 p (12: 12 or more)")
    _legend(axes)
    return axes


def _legend(axes: Axes) -> None:
    handles = [
        Line2D(
            [], [], marker="o", color=COLOURS[0], linestyle="none", markersize=4.0, label="hypergeometric"
        ),
        Line2D(
            [], [], marker="s", color=COLOURS[1], linestyle="none", markersize=4.0, label="samples permuted"
        ),
    ]
    axes.legend(handles=handles, loc="lower right", bbox_to_anchor=(1.0, 1.0), ncols=2, borderaxespad=0.2)


def _caption(table: pd.DataFrame) -> str:
    holds = int(table["holds"].sum())
    return (
        f"Sets found in communities, the {min(len(table), MOST_SHOWN)} with the best evidence of {len(table)} "
        f"(community and layer beside the name). {holds} hold (filled): false-discovery rate of the hypergeometric "
        "test at or under the level of the analysis, and p with samples permuted at or under 0.05 (dashed). The "
        "hypergeometric p takes features one by one and is too small where they go together; a wide gap between the "
        "two marks says so. A layer's permutation p cannot be smaller than one over the number of permutations; "
        "that of all layers joins them by Stouffer's sum."
    )
