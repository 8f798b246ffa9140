"""Figures of the features: correlation circle, biplot, loadings."""

from __future__ import annotations

import numpy as np
from matplotlib.axes import Axes
from matplotlib.colors import LinearSegmentedColormap, LogNorm
from numpy.typing import NDArray

from workbench.figures.labels import place_labels
from workbench.figures.marks import draw_samples
from workbench.figures.style import COLOURS, GUIDE, INK, SMALL, component_label, figure_name, plain_ticks, say
from workbench.look.block import BlockLook

FloatArray = NDArray[np.float64]

CIRCLE_ROOM = 1.3
MOST_POINTS = 400
LABELS_PER_END = 4
NAME_IN_CIRCLE = 16
LOADINGS_SHOWN = 10
ARROWS = 10
GREYS = LinearSegmentedColormap.from_list("pale greys", ["#EEEEEE", "#8C8C8C"])


def correlation_circle(look: BlockLook, axes: Axes, first: int = 1, second: int = 2) -> Axes:
    """Draw each feature at its correlations with two components, in the unit circle.

    The dashed circle is the radius that 19 of 20 random directions stay within at this number of samples.
    Labelled are the strongest features of each end beyond it; the others are points, or their density.

    Parameters
    ----------
    look : BlockLook
        With at least ``second`` components.
    axes : matplotlib Axes
        Its size must be final: labels are placed by it.
    """
    places = look.correlations[:, [first - 1, second - 1]]
    named = leading_features(places, look.relations.guide)
    held = places[~np.isnan(places).any(axis=1)]
    axes.set_xlim(-CIRCLE_ROOM, CIRCLE_ROOM)
    axes.set_ylim(-CIRCLE_ROOM, CIRCLE_ROOM)
    axes.set_aspect("equal", adjustable="box")
    _cloud(axes, held)
    _rings(axes, look.relations.guide)
    axes.scatter(places[named, 0], places[named, 1], s=9.0, color=COLOURS[0], zorder=4)
    texts = [figure_name(look.features[j], NAME_IN_CIRCLE) for j in named]
    place_labels(axes, places[named], texts, obstacles=places[named], outward=True)
    axes.set_xlabel(f"correlation with {component_label(first, float(look.shares[first - 1])).lower()}")
    axes.set_ylabel(f"correlation with {component_label(second, float(look.shares[second - 1])).lower()}")
    axes.set_xticks([-1.0, -0.5, 0.0, 0.5, 1.0])
    axes.set_yticks([-1.0, -0.5, 0.0, 0.5, 1.0])
    return axes


def leading_features(places: FloatArray, guide: float, per_end: int = LABELS_PER_END) -> list[int]:
    """Positions of the strongest features at each end of two components, beyond the guide where there is one.

    Each feature belongs to the end it lies nearest to; at each end those furthest out along it come first.
    """
    known = np.nan_to_num(places)
    beyond = np.linalg.norm(known, axis=1) > (guide if np.isfinite(guide) else 0.0)
    found: list[int] = []
    for end in (1.0, -1.0):
        for k in range(2):
            along = end * known[:, k]
            mine = np.flatnonzero(beyond & (along > 0.0) & (np.abs(known[:, k]) >= np.abs(known).max(axis=1)))
            found += mine[np.argsort(-along[mine], kind="stable")][:per_end].tolist()
    return sorted(found, key=lambda j: -float(np.hypot(*known[j])))


def _cloud(axes: Axes, places: FloatArray) -> None:
    """Draw few features as points, many as density."""
    if len(places) <= MOST_POINTS:
        axes.scatter(places[:, 0], places[:, 1], s=5.0, color="#A6A6A6", linewidths=0.0, zorder=1)
        return
    extent = (-CIRCLE_ROOM, CIRCLE_ROOM, -CIRCLE_ROOM, CIRCLE_ROOM)
    cells = int(np.clip(np.sqrt(len(places)) / 2.0, 16, 48))
    x, y = places.T
    axes.hexbin(
        x,
        y,
        gridsize=cells,
        extent=extent,
        cmap=GREYS,
        norm=LogNorm(vmin=1),
        mincnt=1,
        linewidths=0.1,
        zorder=1,
    )


def _rings(axes: Axes, guide: float) -> None:
    angle = np.linspace(0.0, 2.0 * np.pi, 181)
    axes.plot(np.cos(angle), np.sin(angle), color=INK, linewidth=0.8, zorder=2)
    axes.axhline(0.0, color=GUIDE, linewidth=0.4, zorder=2)
    axes.axvline(0.0, color=GUIDE, linewidth=0.4, zorder=2)
    if np.isfinite(guide):
        axes.plot(
            guide * np.cos(angle), guide * np.sin(angle), color=INK, linestyle="--", linewidth=0.7, zorder=2
        )


def biplot(look: BlockLook, axes: Axes, first: int = 1, second: int = 2) -> Axes:
    """Draw samples and leading features together, on two components.

    Samples are points at their scores divided by the component's standard deviation; features are arrows to
    their correlations with the components, lengthened by one common factor that the axes state. The projection
    of a sample on a feature's direction follows its scaled value as far as the two components explain it.
    """
    chosen = [first - 1, second - 1]
    points = look.scores[:, chosen] / np.sqrt(look.eigenvalues[chosen])
    places = look.correlations[:, chosen]
    named = leading_features(places, look.relations.guide, ARROWS // 4 + 1)[:ARROWS]
    reach = float(np.abs(points).max())
    factor = _round_down(0.9 * reach / max(float(np.abs(places[named]).max()), 1e-9)) if named else 1.0
    limit = 1.3 * reach
    axes.set_xlim(-limit, limit)
    axes.set_ylim(-limit, limit)
    axes.set_aspect("equal", adjustable="box")
    draw_samples(look, axes, points, 12.0, alpha=0.75, zorder=2)
    tips = places[named] * factor
    for x, y in tips:
        axes.annotate(
            "", (x, y), (0.0, 0.0), zorder=4,
            arrowprops={"arrowstyle": "-|>", "color": INK, "linewidth": 0.7, "mutation_scale": 6.0, "shrinkA": 0.0,
                        "shrinkB": 0.0},
        )  # fmt: skip
    texts = [figure_name(look.features[j], NAME_IN_CIRCLE) for j in named]
    place_labels(axes, tips, texts, obstacles=points, outward=True)
    axes.set_xlabel(f"{component_label(first, float(look.shares[first - 1]))}, scores / sd")
    axes.set_ylabel(f"{component_label(second, float(look.shares[second - 1]))}, scores / sd")
    say(
        axes, 0.01, 0.99, f"arrows: correlation x {factor:g}", transform=axes.transAxes, fontsize=SMALL, va="top",
        color=GUIDE,
    )  # fmt: skip
    return axes


def _round_down(value: float) -> float:
    """Return the largest of 1, 1.5, 2, 2.5, 3, 4, 5, 6, 8 times a power of ten that is not above the value."""
    power = 10.0 ** np.floor(np.log10(value))
    return float(
        max(step * power for step in (1.0, 1.5, 2.0, 2.5, 3.0, 4.0, 5.0, 6.0, 8.0) if step * power <= value)
    )


def loadings_plot(look: BlockLook, axes: Axes, component: int = 1) -> Axes:
    """Draw the correlations of the leading features with one component, strongest at the top."""
    r = look.correlations[:, component - 1]
    order = np.argsort(-np.nan_to_num(np.abs(r)), kind="stable")[:LOADINGS_SHOWN]
    order = order[~np.isnan(r[order])]
    order = order[np.argsort(-r[order], kind="stable")]
    rows = np.arange(order.size)[::-1]
    colours = [COLOURS[0] if r[j] > 0.0 else COLOURS[1] for j in order]
    axes.hlines(rows, 0.0, r[order], color=colours, linewidth=1.2, zorder=2)
    for mark, sign in (("o", 1.0), ("s", -1.0)):
        mine = np.flatnonzero(np.sign(r[order]) == sign)
        axes.scatter(
            r[order[mine]], rows[mine], s=14.0, marker=mark, color=[colours[i] for i in mine], zorder=3
        )
    axes.axvline(0.0, color=INK, linewidth=0.6, zorder=1)
    axes.set_xlim(-1.05, 1.05)
    axes.set_xticks([-1.0, -0.5, 0.0, 0.5, 1.0])
    axes.set_ylim(-0.7, max(order.size, 4) - 0.3)
    plain_ticks(axes, "y", rows, [figure_name(look.features[j]) for j in order])
    axes.set_xlabel("correlation with the component")
    axes.set_title(component_label(component, float(look.shares[component - 1])))
    return axes
