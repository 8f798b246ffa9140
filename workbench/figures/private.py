"""Real components of each block: which ones other layers share, and which were removed as private."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

from matplotlib.axes import Axes
from matplotlib.backends.backend_agg import FigureCanvasAgg
from matplotlib.figure import Figure

from workbench.figures.drawing import Drawing
from workbench.figures.style import (
    COLOURS,
    INK,
    PALE,
    TWO_COLUMNS,
    figure_name,
    figure_style,
    note,
    plain_legend,
)

MOST_BARS = 25
HEADROOM = 1.4
"""Height of a panel in heights of its tallest bar: the legend stands above a bar that fills the panel."""


@dataclass(frozen=True)
class ComponentBar:
    """One component: its number, its share of the block's variance, and why it stays (empty: it was removed)."""

    number: int
    share: float
    stays: str


def draw_private(bars: Mapping[str, Sequence[ComponentBar]]) -> tuple[Drawing, ...]:
    """Return the figure: a panel for each block, a bar for each of its real components."""
    with figure_style():
        rows = -(-len(bars) // 2)
        figure = Figure(figsize=(TWO_COLUMNS, 0.5 + 2.1 * rows), layout="constrained")
        FigureCanvasAgg(figure)
        grid = figure.subplots(rows, 2, squeeze=False)
        for axes, (name, components) in zip(grid.flat, bars.items(), strict=False):
            component_bars(axes, name, components)
        for axes in grid.flat[len(bars) :]:
            axes.set_axis_off()
        figure.draw_without_rendering()
        figure.set_layout_engine("none")
        return (Drawing("private_variation", figure, _caption(bars)),)


def component_bars(axes: Axes, name: str, components: Sequence[ComponentBar]) -> Axes:
    """Draw the share of variance of each real component, by what became of it."""
    if not components:
        note(axes, f"{figure_name(name)}: no component told from noise")
        return axes
    shown = components[:MOST_BARS]
    for fate, colour, hatch, label in (
        ("shared", COLOURS[0], "", "shared, stays"),
        ("undecided", COLOURS[1], "", "undecided, stays"),
        ("removed", PALE, "////", "private, removed"),
    ):
        mine = [one for one in shown if _fate(one) == fate]
        if mine:
            axes.bar(
                [one.number for one in mine],
                [100.0 * one.share for one in mine],
                color=colour,
                edgecolor=INK,
                hatch=hatch,
                linewidth=0.4,
                width=0.8,
                label=label,
            )
    axes.set_xticks(range(1, len(shown) + 1) if len(shown) <= 10 else [1, *range(5, len(shown) + 1, 5)])
    axes.set_ylim(0.0, 100.0 * HEADROOM * max(one.share for one in shown))
    axes.set_xlabel("component")
    axes.set_ylabel("share of variance (%)")
    axes.set_title(figure_name(name, 32), parse_math=False)
    plain_legend(axes, loc="upper right")
    return axes


def _fate(one: ComponentBar) -> str:
    """Return whether a component is shared, was removed, or is too weak or too like a shared one to be removed."""
    return "removed" if not one.stays else "shared" if one.stays == "shared" else "undecided"


def _caption(bars: Mapping[str, Sequence[ComponentBar]]) -> str:
    parts = []
    for name, components in bars.items():
        private = sum(not one.stays for one in components)
        parts.append(f"{name}: {len(components)} real components, {private} removed")
    return (
        "Share of each block's variance (nuisance, and within groups the group, removed) on its real components. Pale, "
        "hatched: private to the block and removed before pairs were tested. Those shared with another layer stay, and "
        "so do undecided ones, which are too weak for their removal to gain anything or cannot be told from a shared "
        f"one. {'; '.join(parts)}."
    )
