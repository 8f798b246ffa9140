"""Figures of the components: explained variance, and what each component goes with."""

from __future__ import annotations

import numpy as np
from matplotlib.axes import Axes
from matplotlib.colors import LinearSegmentedColormap
from matplotlib.patheffects import withStroke

from workbench.figures.style import (
    COLOURS,
    GUIDE,
    INK,
    PALE,
    SMALL,
    figure_name,
    note,
    plain_legend,
    plain_ticks,
    say,
)
from workbench.look.block import BlockLook
from workbench.look.words import percent

COMPONENTS_DRAWN = 20
COLUMNS_DRAWN = 24
SIGNIFICANT = 0.05
BLUES = LinearSegmentedColormap.from_list("white to blue", ["#FFFFFF", "#9ECAE1", "#0072B2", "#00304D"])


def explained_variance(look: BlockLook, axes: Axes) -> Axes:
    """Draw the share of variance of each component, those with signal dark, and the limits of parallel analysis.

    An arrow marks the elbow. The number and its rule are in words elsewhere; the figure shows what it rests on.
    """
    count = min(look.shares.size, COMPONENTS_DRAWN)
    at = np.arange(1, count + 1)
    shares = 100.0 * look.shares[:count]
    number = look.number.number
    for mine, colour, label in (
        (at <= number, COLOURS[0], f"carries signal ({number})"),
        (at > number, PALE, "not told from noise"),
    ):
        if not mine.any():
            continue
        axes.bar(at[mine], shares[mine], color=colour, edgecolor=INK, linewidth=0.4, width=0.8, label=label)
    limits = 100.0 * look.number.parallel.limits[:count] / look.eigenvalues.sum()
    axes.plot(
        at, limits, color=COLOURS[4], linestyle="--", marker=".", markersize=3.0, linewidth=0.9,
        label=f"parallel analysis, 95 % ({look.number.parallel.number})",
    )  # fmt: skip
    axes.set_ylim(0.0, 1.12 * max(float(shares.max()), float(limits.max())))
    axes.set_xlim(0.3, count + 0.7)
    _component_ticks(axes, count)
    axes.set_xlabel("component")
    axes.set_ylabel("share of variance (%)")
    _elbow(look, axes, shares)
    plain_legend(axes, loc="upper right", fontsize=SMALL)
    return axes


def _component_ticks(axes: Axes, count: int) -> None:
    """Tick every component where they are few, else the first and every fifth."""
    axes.set_xticks(range(1, count + 1) if count <= 10 else [1, *range(5, count + 1, 5)])


def _elbow(look: BlockLook, axes: Axes, shares: np.ndarray) -> None:
    """Point to the last component before the elbow."""
    k = look.number.elbow.number
    if 1 <= k <= shares.size:
        label = axes.annotate(
            f"elbow ({k})", (k, shares[k - 1]), (0, 12), textcoords="offset points", ha="center", fontsize=SMALL,
            arrowprops={"arrowstyle": "-|>", "color": INK, "linewidth": 0.6, "mutation_scale": 5.0, "shrinkB": 1.0},
        )  # fmt: skip
        label.set_path_effects([withStroke(linewidth=1.5, foreground="white")])


def cumulative_variance(look: BlockLook, axes: Axes) -> Axes:
    """Draw the variance that the first components explain together, and the error of cross-validation beside it."""
    count = min(look.shares.size, COMPONENTS_DRAWN)
    at = np.arange(0, count + 1)
    together = 100.0 * np.concatenate([[0.0], look.cumulative[:count]])
    axes.plot(at, together, color=COLOURS[0], marker="o", markersize=2.5, label="explained together")
    crossed = look.number.cross_validated
    if crossed is not None:
        errors = 100.0 * crossed.errors[: count + 1]
        held = np.flatnonzero(errors <= 105.0)
        axes.plot(
            held, errors[held], color=COLOURS[4], linestyle="--", marker="s", markersize=2.5,
            label=f"error, cross-validated ({crossed.number})",
        )  # fmt: skip
        axes.plot(
            np.flatnonzero(np.arange(errors.size) == crossed.number),  # none where it is beyond what is drawn
            errors[crossed.number : crossed.number + 1],
            marker="s",
            markersize=5.5,
            color=COLOURS[4],
            fillstyle="none",
        )
    axes.set_ylim(0.0, 108.0)
    axes.set_xlim(-0.4, count + 0.4)
    _component_ticks(axes, count)
    axes.set_xlabel("components taken")
    axes.set_ylabel("% of variance, % of error with none")
    plain_legend(
        axes, loc="lower left", bbox_to_anchor=(0.0, 1.0), ncols=2, borderaxespad=0.2, fontsize=SMALL
    )
    return axes


def association_map(look: BlockLook, axes: Axes) -> Axes:
    """Draw R2 of every column of the sample sheet with every component, dark for strong.

    A number stands where q is at or under 0.05; the columns that the study adjusts for carry a star.
    """
    found = look.association
    rows = [j for j in range(len(found.columns)) if not found.untestable[j]]
    rows.sort(key=lambda j: -float(np.nanmax(found.r2_adjusted[j])))
    rows = rows[:COLUMNS_DRAWN]
    if not rows:
        return note(axes, "the sample sheet has no column that could be tested")
    r2, q = found.r2[rows], found.q[rows]
    axes.imshow(r2, cmap=BLUES, vmin=0.0, vmax=1.0, aspect="auto", interpolation="nearest")
    for i, k in np.argwhere(q <= SIGNIFICANT):
        ink = "white" if r2[i, k] > 0.45 else INK
        say(
            axes,
            float(k),
            float(i),
            f"{r2[i, k]:.2f}",
            ha="center",
            va="center",
            fontsize=SMALL - 0.5,
            color=ink,
        )
    names = [figure_name(found.columns[j]) + (" *" if found.columns[j] in look.adjust else "") for j in rows]
    plain_ticks(axes, "y", range(len(rows)), names)
    shown = range(r2.shape[1])
    plain_ticks(axes, "x", shown, [f"{k + 1}\n{percent(look.shares[k])}" for k in shown])
    for label in axes.get_xticklabels()[look.number.number :]:
        label.set_color(GUIDE)
    axes.tick_params(length=0.0)
    axes.set_xticks(np.arange(-0.5, r2.shape[1]), minor=True)
    axes.set_yticks(np.arange(-0.5, len(rows)), minor=True)
    axes.grid(which="minor", color="white", linewidth=1.0)
    axes.tick_params(which="minor", length=0.0)
    axes.spines[:].set_visible(False)
    axes.set_xlabel("component, share of variance")
    return axes
