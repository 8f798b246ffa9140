"""Figures of the values: where they are missing, and how they are spread before and after preparation."""

from __future__ import annotations

import numpy as np
from matplotlib.axes import Axes
from matplotlib.colors import LinearSegmentedColormap
from numpy.typing import NDArray

from workbench.figures.marks import Marked
from workbench.figures.style import COLOURS, INK, figure_name, note, plain_ticks
from workbench.look.block import BlockLook

FloatArray = NDArray[np.float64]

ALL_NAMED = 40
GAPS = LinearSegmentedColormap.from_list("white to black", ["#FFFFFF", "#B5B5B5", "#000000"])


def sample_order(look: Marked) -> NDArray[np.intp]:
    """Order of the samples in figures: by group, within a group as they come."""
    codes = np.zeros(len(look.samples)) if look.groups is None else np.array(look.groups.codes)
    return np.argsort(codes, kind="stable")


def gap_figure(look: BlockLook, axes: Axes) -> Axes:
    """Draw the missing share of each sample (rows) in bins of features from rare to abundant, dark for missing."""
    gaps = look.gaps
    if gaps is None:
        return note(axes, "no measured values were given")
    if gaps.share == 0.0:
        return note(axes, "no measured value is missing")
    order = sample_order(look)
    axes.imshow(gaps.bins[order], cmap=GAPS, vmin=0.0, vmax=1.0, aspect="auto", interpolation="nearest")
    _sample_ticks(look, axes, order, "y")
    held = np.flatnonzero(~np.isnan(gaps.bin_abundance))
    if held.size:
        chosen = held[np.unique(np.linspace(0, held.size - 1, 5).round().astype(int))]
        plain_ticks(axes, "x", chosen, [f"{gaps.bin_abundance[i]:.2g}" for i in chosen])
    axes.set_xlabel(f"features from rare to abundant ({gaps.scale}, median)")
    axes.set_ylabel(_sample_axis(look))
    return axes


def _sample_axis(look: BlockLook) -> str:
    """Label of the samples' axis; the groups in their order where the ticks name samples."""
    if look.groups is None:
        return "samples"
    if len(look.samples) > ALL_NAMED:
        return f"samples, by {figure_name(look.groups.name)}"
    return "samples: " + ", then ".join(figure_name(level, 12) for level in look.groups.levels[:3])


def _sample_ticks(look: Marked, axes: Axes, order: NDArray[np.intp], which: str) -> None:
    """Name the samples where they are few, else the groups; lines part the groups."""
    codes = np.zeros(order.size, dtype=int) if look.groups is None else np.array(look.groups.codes)[order]
    starts = np.flatnonzero(np.diff(codes, prepend=codes[0] - 1))
    for start in starts[1:]:
        (axes.axhline if which == "y" else axes.axvline)(start - 0.5, color=COLOURS[4], linewidth=0.8)
    if order.size <= ALL_NAMED:
        names = [figure_name(look.samples[i], 12) for i in order]
        plain_ticks(axes, which, range(order.size), names, fontsize=5.5 if order.size > 20 else 6.5)
        axes.tick_params(axis="x", rotation=90 if which == "x" else 0)
    elif look.groups is not None:
        middles = (starts + np.append(starts[1:], order.size) - 1) / 2.0
        names = [look.groups.levels[codes[i]] if codes[i] >= 0 else "none" for i in starts]
        plain_ticks(axes, which, middles, [figure_name(name, 14) for name in names])
        axes.tick_params(axis="y" if which == "y" else "x", length=0.0)


def gaps_by_abundance(look: BlockLook, axes: Axes) -> Axes:
    """Draw the missing share of every feature against its abundance."""
    gaps = look.gaps
    if gaps is None or gaps.share == 0.0:
        return note(axes, "no measured value is missing")
    held = ~np.isnan(gaps.abundance)
    many = held.sum() > 1000
    axes.scatter(
        gaps.abundance[held], 100.0 * gaps.by_feature[held], s=3.0 if many else 8.0, color=COLOURS[0], linewidths=0.0,
        alpha=0.3 if many else 0.7, rasterized=bool(many),
    )  # fmt: skip
    axes.set_ylim(-3.0, 103.0)
    axes.set_xlabel(f"median of the feature ({gaps.scale})")
    axes.set_ylabel("missing (% of samples)")
    return axes


def spread_plot(look: BlockLook, axes: Axes, which: str) -> Axes:
    """Draw the spread of every sample's values: median, quartiles, and the middle 90 %.

    Parameters
    ----------
    which : {"measured", "prepared"}
    """
    found = look.distributions
    quantiles = found.measured if which == "measured" else found.prepared
    if quantiles is None:
        return note(axes, "no measured values were given")
    draw_spread(look, axes, quantiles)
    axes.set_title(f"{which} values")
    axes.set_ylabel(found.scale if which == "measured" else "prepared value")
    return axes


def draw_spread(look: Marked, axes: Axes, quantiles: FloatArray) -> None:
    """Draw every sample's quantiles (5, 25, 50, 75, 95 %), samples by group."""
    order = sample_order(look)
    low, first, middle, third, high = quantiles[order].T
    at = np.arange(order.size)
    wide = max(0.8, min(4.0, 120.0 / order.size))
    axes.vlines(at, low, high, color="#9A9A9A", linewidth=0.6, zorder=1)
    axes.vlines(at, first, third, color=COLOURS[0], linewidth=wide, zorder=2)
    axes.plot(at, middle, linestyle="none", marker="_", markersize=max(1.5, wide), color=INK, zorder=3)
    axes.set_xlim(-1.0, order.size)
    _sample_ticks(look, axes, order, "x")
