"""Figures of what preparation did: scale of the samples, their levels before and after, drift over the run order."""

from __future__ import annotations

import numpy as np
from matplotlib.axes import Axes
from matplotlib.lines import Line2D
from numpy.typing import NDArray

from workbench.figures.gaps import draw_spread
from workbench.figures.marks import CROWDED, draw_samples
from workbench.figures.style import (
    COLOURS,
    GUIDE,
    INK,
    SMALL,
    figure_name,
    note,
    plain_legend,
    plain_ticks,
    say,
)
from workbench.look.preparation import PreparationLook
from workbench.prepare import DriftEffect

FloatArray = NDArray[np.float64]

POOL, SAMPLE, COURSE = COLOURS[1], "#8C8C8C", COLOURS[0]
FOLDS = (1 / 64, 1 / 32, 1 / 16, 1 / 8, 1 / 4, 1 / 2, 1 / 1.5, 1 / 1.2, 1, 1.2, 1.5, 2, 4, 8, 16, 32, 64)
MOST_TICKS = 7
UNITS = ((1e9, " (billions)"), (1e6, " (millions)"), (1e3, " (thousands)"), (1.0, ""))
SPREAD = 0.32
WIDEST_SCATTER = 100.0
MANY_POOLS = 30


def scale_plot(look: PreparationLook, axes: Axes) -> Axes:
    """Draw what was taken from each sample against its total of measured values."""
    if not look.scaled:
        return note(axes, "samples were not scaled")
    low = look.values == "log"
    across = look.total if low else np.log10(np.maximum(look.total, np.finfo(float).tiny))
    draw_samples(look, axes, np.column_stack([across, look.scale]), 16.0)
    if low:
        axes.set_xlabel("median of the sample as delivered (log2)")
    else:
        _amount_ticks(axes, look.total)
    _fold_axis(look, axes)
    return axes


def _amount_ticks(axes: Axes, total: FloatArray) -> None:
    """Label a log10 axis of totals in thousands, millions or billions."""
    low, high = float(total.min()), float(total.max())
    divisor, words = next((unit for unit in UNITS if high >= unit[0]), UNITS[-1])
    steps = [m * 10.0**k for k in range(-9, 16) for m in (1, 1.5, 2, 3, 5, 7)]
    inside = [step for step in steps if low * 0.97 <= step <= high * 1.03]
    wide = [step for step in inside if str(step).lstrip("0.")[0] in "125" and step * 2 % 3]
    ticks = inside if len(inside) <= MOST_TICKS else wide[:: -(-len(wide) // MOST_TICKS)]
    plain_ticks(axes, "x", np.log10(ticks), [f"{tick / divisor:g}" for tick in ticks])
    axes.set_xlabel(f"total of the sample as delivered{words}")


def _fold_axis(look: PreparationLook, axes: Axes) -> None:
    """Label a log2 axis with factors, or a shift with its log2 values."""
    axes.axhline(float(np.median(look.scale)), color=GUIDE, linewidth=0.5, zorder=0)
    if look.values == "log":
        axes.set_ylabel("shift taken from the sample (log2)")
        return
    low, high = axes.get_ylim()
    inside = [fold for fold in FOLDS if low <= np.log2(fold) <= high]
    if len(inside) > MOST_TICKS:
        inside = [fold for fold in inside if float(np.log2(fold)).is_integer()]
    plain_ticks(axes, "y", np.log2(inside), [f"{fold:.2g}" for fold in inside])
    axes.set_ylabel(f"{look.scale_word} of the sample")


def scale_by_group(look: PreparationLook, axes: Axes) -> Axes:
    """Draw what was taken from each sample group by group, a bar at each group's mean."""
    if look.groups is None or not look.scaled:
        return note(axes, "the study has no groups")
    codes = np.array(look.groups.codes)
    at = np.full(len(codes), np.nan)
    for group in range(len(look.groups.levels)):
        members = look.groups.members(group)
        at[members] = group + _side_by_side(look.scale[members])
        if members.size:
            axes.hlines(
                look.scale[members].mean(), group - 0.4, group + 0.4, color=INK, linewidth=1.2, zorder=2
            )
    held = np.isfinite(at)
    draw_samples(look, axes, np.column_stack([np.where(held, at, np.nan), look.scale]), 16.0)
    names = [figure_name(level, 14) for level in look.groups.levels]
    crowded = len(names) > 4
    plain_ticks(axes, "x", range(len(names)), names, rotation=90 if crowded else 0)
    axes.set_xlim(-0.6, len(names) - 0.4)
    axes.set_xlabel(figure_name(look.groups.name, 40))
    _fold_axis(look, axes)
    return axes


def _side_by_side(values: FloatArray) -> FloatArray:
    """Return offsets that spread neighbouring values over the width of a group, the same on every run."""
    ranks = np.argsort(np.argsort(values, kind="stable"), kind="stable")
    steps = (ranks * 0.618034) % 1.0 - 0.5
    return np.asarray(2.0 * SPREAD * steps) if values.size > 1 else np.zeros(values.size)


def levels_plot(look: PreparationLook, axes: Axes, which: str) -> Axes:
    """Draw each sample's deviations from the features' medians: median, quartiles, and the middle 90 %.

    Parameters
    ----------
    which : {"before", "after"}
    """
    levels = look.before if which == "before" else look.after
    if levels is None:
        return note(axes, "these values become no logarithms")
    axes.axhline(0.0, color=GUIDE, linewidth=0.5, zorder=0)
    draw_spread(look, axes, levels)
    axes.set_title(f"{which} preparation")
    axes.set_ylabel("deviation from the\nfeatures' medians (log)")
    return axes


def drift_plot(effect: DriftEffect, axes: Axes, place: int, which: str) -> Axes:
    """Draw one feature over the run order: samples, pools, and the course that is taken away.

    Parameters
    ----------
    effect : DriftEffect
    axes : matplotlib Axes
    place : int
        Place among the shown features.
    which : {"before", "after"}
    """
    values = (effect.before if which == "before" else effect.after)[:, place]
    pool = np.array(effect.runs.role, dtype=object) == "pool"
    at = np.arange(1.0, len(pool) + 1.0)
    axes.scatter(
        at[~pool], values[~pool], s=7.0 if len(pool) < CROWDED else 4.0, facecolors="none", edgecolors=SAMPLE,
        linewidths=0.6, zorder=2,
    )  # fmt: skip
    axes.scatter(
        at[pool], values[pool], s=18.0 if effect.pools < MANY_POOLS else 8.0, marker="D", facecolors=POOL,
        edgecolors=INK, linewidths=0.4, zorder=3,
    )  # fmt: skip
    starts = _batch_starts(effect)
    for start in starts[1:]:
        axes.axvline(at[start] - 0.5, color=GUIDE, linestyle=":", linewidth=0.7, zorder=1)
    if which == "before":
        for first, last in zip(starts, [*starts[1:], len(at)], strict=True):
            axes.plot(at[first:last], effect.course[first:last, place], color=COURSE, linewidth=1.2, zorder=4)
    else:
        axes.axhline(float(np.nanmedian(values[pool])), color=COURSE, linewidth=1.2, zorder=4)
    axes.set_xlim(0.0, len(at) + 1.0)
    return axes


def _batch_starts(effect: DriftEffect) -> list[int]:
    batch = effect.runs.batch
    return [row for row in range(len(batch)) if row == 0 or batch[row] != batch[row - 1]]


def drift_handles() -> list[Line2D]:
    """Return the legend entries of the drift figure."""

    def point(label: str, mark: str, face: str, edge: str) -> Line2D:
        return Line2D([], [], linestyle="none", marker=mark, markersize=4.0, markerfacecolor=face,
                      markeredgecolor=edge, markeredgewidth=0.6, label=label)  # fmt: skip

    return [
        point("sample", "o", "none", SAMPLE),
        point("pool", "D", POOL, INK),
        Line2D([], [], color=COURSE, linewidth=1.2, label="course, read off the pools"),
    ]


def pool_scatter_plot(effect: DriftEffect, axes: Axes) -> Axes:
    """Draw the share of features up to each relative standard deviation over the pools, before and after.

    One curve where no drift was taken away.
    """
    curves = [("before drift is taken away", effect.scatter_before, INK, "--")]
    if effect.corrected:
        curves.append(("after, each pool left out in turn", effect.scatter_after, COURSE, "-"))
    else:
        curves = [("as delivered: no drift was taken away", effect.scatter_before, INK, "-")]
    held = [np.sort(100.0 * values[np.isfinite(values)]) for _, values, _, _ in curves]
    if not held[0].size:
        return note(axes, "fewer than two pools have any feature")
    limit = 100.0 * effect.largest_scatter
    widest = min(WIDEST_SCATTER, max(float(np.quantile(values, 0.99)) for values in held) * 1.05)
    widest = max(widest, 10.0 if np.isnan(limit) else 1.3 * limit)
    for (label, _, colour, line), values in zip(curves, held, strict=True):
        share = 100.0 * np.arange(1, values.size + 1) / values.size
        axes.step(
            [0.0, *values],
            [0.0, *share],
            where="post",
            color=colour,
            linestyle=line,
            linewidth=1.2,
            label=label,
        )
    if np.isfinite(limit):
        axes.axvline(limit, color=COLOURS[4], linestyle=":", linewidth=1.0)
        say(axes, limit, 3.0, " largest allowed", fontsize=SMALL, color=COLOURS[4])
    axes.set_xlim(0.0, widest)
    axes.set_ylim(0.0, 101.0)
    axes.set_xlabel("relative standard deviation over the pools (%)")
    axes.set_ylabel("features up to that (%)")
    plain_legend(axes, loc="lower center", bbox_to_anchor=(0.5, 1.0), borderaxespad=0.2)
    return axes
