"""Figures of a supervised analysis: what was fitted is never drawn like what was held out."""

from __future__ import annotations

import numpy as np
from matplotlib.axes import Axes
from matplotlib.lines import Line2D
from numpy.typing import NDArray

from workbench.engine import roc_curve
from workbench.figures.style import (
    COLOURS,
    GUIDE,
    INK,
    LINES,
    MARKS,
    PALE,
    SMALL,
    figure_name,
    note,
    plain_legend,
    plain_ticks,
    say,
)
from workbench.figures.supervised_view import SupervisedView

FloatArray = NDArray[np.float64]

MEASURES = {"auc": "area under the ROC curve", "q2": "Q2", "q2_added": "Q2 beyond the nuisance"}
GRID = np.linspace(0.0, 1.0, 101)
CURVES_DRAWN = 6


def class_scores(view: SupervisedView, axes: Axes, column: int = 0) -> Axes:
    """Draw the score of one class for the units of every class: fitted hollow at the left, held out full at the right.

    Parameters
    ----------
    view : SupervisedView
        Of classes.
    axes : Axes
    column : int
        Column of the score.
    """
    spread = np.random.default_rng(0).uniform(-0.13, 0.13, view.truth.size)
    for g in range(len(view.levels)):
        inside = view.truth == g
        mark, colour = MARKS[g % len(MARKS)], COLOURS[g % len(COLOURS)]
        for values, shift, face in ((view.fitted, -0.2, "none"), (view.held_out, 0.2, colour)):
            axes.scatter(
                g + shift + spread[inside],
                values[inside, column],
                s=11.0,
                marker=mark,
                facecolors=face,
                edgecolors=colour,
                linewidths=0.6,
                zorder=3,
            )
            middle = np.nanmedian(values[inside, column])
            axes.plot(
                [g + shift - 0.16, g + shift + 0.16], [middle, middle], color=INK, linewidth=1.1, zorder=4
            )
    if view.columns == 1:
        axes.axhline(0.0, color=GUIDE, linewidth=0.7, linestyle="--", zorder=1)
    axes.set_xlim(-0.5, len(view.levels) - 0.5)
    plain_ticks(axes, "x", range(len(view.levels)), [figure_name(level, 16) for level in view.levels])
    _fitted_legend(axes)
    towards = view.levels[1] if view.columns == 1 else view.levels[column]
    axes.set_ylabel(figure_name(f"score towards {towards}", 40), parse_math=False)
    return axes


def predicted_numbers(view: SupervisedView, axes: Axes) -> Axes:
    """Draw predicted against true numbers: fitted hollow, held out full."""
    for values, face, size, order in ((view.fitted, "none", 13.0, 2), (view.held_out, COLOURS[0], 11.0, 3)):
        axes.scatter(
            view.truth,
            values[:, 0],
            s=size,
            facecolors=face,
            edgecolors=GUIDE if face == "none" else COLOURS[0],
            linewidths=0.6,
            zorder=order,
        )
    every = np.concatenate([view.truth, view.fitted[:, 0], view.held_out[:, 0]])
    low, high = np.nanmin(every), np.nanmax(every)
    room = 0.05 * (high - low)
    axes.plot([low, high], [low, high], color=GUIDE, linewidth=0.7, linestyle="--", zorder=1)
    axes.set_xlim(low - room, high + room)
    axes.set_ylim(low - room, high + room)
    axes.set_xlabel(figure_name(view.outcome, 40), parse_math=False)
    axes.set_ylabel("predicted")
    _fitted_legend(axes)
    return axes


def block_importance(view: SupervisedView, axes: Axes) -> Axes:
    """Draw the share of each block in each component, as bars that add up to 1."""
    count = len(view.importance)
    left = np.zeros(count)
    hatches = ("", "///", "...", "xxx", "---", "\\\\\\")
    for b, block in enumerate(view.blocks):
        axes.barh(
            np.arange(1, count + 1),
            view.importance[:, b],
            left=left,
            height=0.62,
            color=COLOURS[b % len(COLOURS)],
            edgecolor="white",
            linewidth=0.6,
            hatch=hatches[b % len(hatches)],
            label=figure_name(block),
        )
        left = left + view.importance[:, b]
    axes.set_ylim(count + 0.6, 0.4)
    axes.set_yticks(range(1, count + 1))
    axes.set_xlim(0.0, 1.0)
    axes.set_xlabel("share of the super weight")
    axes.set_ylabel("component")
    plain_legend(axes, loc="lower left", bbox_to_anchor=(0.0, 1.0), ncols=3, borderaxespad=0.2)
    return axes


def by_components(view: SupervisedView, axes: Axes) -> Axes:
    """Draw the held-out figure by number of components, every repeat, beside the fit in sample."""
    numbers = np.array(view.candidates)
    for k, row in enumerate(view.by_components):
        axes.plot(numbers, row, color=PALE, linewidth=0.8, zorder=1, label="each repeat" if k == 0 else None)
    axes.plot(
        numbers,
        view.in_sample,
        color=GUIDE,
        linestyle=":",
        marker="s",
        markerfacecolor="none",
        markersize=3.5,
        label="R2 in sample",
    )
    mean = view.by_components.mean(axis=0)
    axes.plot(
        numbers, mean, color=COLOURS[0], marker="o", markersize=4.0, label=f"{_measure(view)}, held out"
    )
    axes.axvline(view.chosen, color=GUIDE, linestyle="--", linewidth=0.7, zorder=0, label="chosen")
    axes.axhline(0.5 if view.levels else 0.0, color=INK, linewidth=0.5, zorder=0)
    axes.set_xticks(numbers)
    axes.set_xlabel("components")
    axes.set_ylabel(f"{'AUC' if view.levels else 'Q2'}, R2")
    plain_legend(axes, loc="lower left", bbox_to_anchor=(0.0, 1.0), ncols=2, borderaxespad=0.2)
    return axes


def roc_curves(view: SupervisedView, axes: Axes) -> Axes:
    """Draw the mean ROC curve of each class over the repeats, with the band from the lowest to the highest."""
    targets = [(0, 1)] if view.columns == 1 else [(g, g) for g in range(min(view.columns, CURVES_DRAWN))]
    for k, (column, g) in enumerate(targets):
        curves = np.array([_curve(view.truth == g, scores[:, column]) for scores in view.roc_scores])
        colour = COLOURS[k % len(COLOURS)]
        axes.fill_between(
            GRID, curves.min(axis=0), curves.max(axis=0), color=colour, alpha=0.22, linewidth=0.0
        )
        axes.plot(
            GRID,
            curves.mean(axis=0),
            color=colour,
            linestyle=LINES[k % len(LINES)],
            label=figure_name(view.levels[g]) if len(targets) > 1 else "held out",
        )
    axes.plot([0.0, 1.0], [0.0, 1.0], color=GUIDE, linewidth=0.6, linestyle="--", label="chance")
    axes.set_xlim(-0.02, 1.02)
    axes.set_ylim(-0.02, 1.02)
    axes.set_aspect("equal", adjustable="box")
    others, own = "others", "it"
    if view.columns == 1:
        others, own = (figure_name(level, 16) for level in view.levels)
    axes.set_xlabel(f"share of {others} taken for {own}", parse_math=False)
    axes.set_ylabel(
        f"share of {own} recognised" if view.columns == 1 else "share recognised", parse_math=False
    )
    plain_legend(axes, loc="lower right")
    return axes


def importance_of_features(view: SupervisedView, axes: Axes) -> Axes:
    """Draw the features of greatest VIP, with the share of training parts whose panel has each."""
    places = np.arange(len(view.names))
    blocks = {block: k for k, block in enumerate(view.blocks)}
    for block, k in blocks.items():
        inside = np.array([name == block for name in view.name_blocks])
        axes.barh(
            places[inside],
            view.vip[inside],
            height=0.6,
            color=COLOURS[k % len(COLOURS)],
            label=figure_name(block) if inside.any() else None,
        )
    for place, length, share, chosen in zip(places, view.vip, view.frequency, view.in_panel, strict=True):
        if np.isfinite(share):
            mark = "\N{BULLET} " if chosen else ""
            say(axes, length, float(place), f"  {mark}{share:.0%}", ha="left", va="center", fontsize=SMALL)
    axes.set_ylim(len(view.names) - 0.4, -0.6)
    plain_ticks(axes, "y", places, [figure_name(name, 22) for name in view.names])
    axes.set_xlim(0.0, 1.18 * float(view.vip.max(initial=1.0)))
    axes.axvline(1.0, color=GUIDE, linestyle="--", linewidth=0.6, zorder=0)
    told = (
        "\n\N{BULLET} in the panel; %: of the training parts' panels"
        if np.isfinite(view.frequency).any()
        else ""
    )
    axes.set_xlabel(f"variable importance (VIP){told}")
    plain_legend(axes, loc="lower left", bbox_to_anchor=(0.0, 1.0), ncols=3, borderaxespad=0.2)
    return axes


def permutation_null(view: SupervisedView, axes: Axes) -> Axes:
    """Draw the held-out figure of the arrangements of the outcome, and that of the outcome as it is."""
    if not view.null.size:
        return note(axes, view.withheld or "no permutations were asked for")
    axes.hist(
        view.null, bins=min(30, max(8, view.null.size // 10)), color=PALE, edgecolor=GUIDE, linewidth=0.4
    )
    axes.axvline(view.observed, color=COLOURS[4], linewidth=1.6)
    low, high = min(view.null.min(), view.observed), max(view.null.max(), view.observed)
    axes.set_xlim(low - 0.06 * (high - low), high + 0.06 * (high - low))
    axes.set_xlabel(f"{_measure(view)}, held out")
    axes.set_ylabel("arrangements of the outcome")
    said = "" if view.p is None else f"as it is: {view.observed:.2f}, p = {view.p:.3g}"
    axes.set_title(said, loc="right")
    return axes


def _curve(belongs: NDArray[np.bool_], scores: FloatArray) -> FloatArray:
    scored = np.isfinite(scores)
    false, true = roc_curve(belongs[scored].astype(np.intp), scores[scored])
    # The highest share recognised at each share of others: a curve of steps, read from above.
    steps: FloatArray = true[np.searchsorted(false, GRID, side="right") - 1]
    return steps


def _measure(view: SupervisedView) -> str:
    return MEASURES.get(view.measure, view.measure)


def _fitted_legend(axes: Axes) -> None:
    handles = [
        Line2D(
            [], [], linestyle="none", marker="o", markersize=4, markerfacecolor=face, color=GUIDE, label=label
        )
        for face, label in (("none", "fitted (has seen the sample)"), (GUIDE, "held out"))
    ]
    axes.legend(handles=handles, loc="lower left", bbox_to_anchor=(0.0, 1.0), ncols=2, borderaxespad=0.2)
