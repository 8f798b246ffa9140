"""Figures of what layers share: correlations, variates, features, the account, and what components go with."""

from __future__ import annotations

from collections.abc import Callable, Iterator, Sequence
from dataclasses import dataclass

import numpy as np
from matplotlib.axes import Axes
from matplotlib.backends.backend_agg import FigureCanvasAgg
from matplotlib.figure import Figure
from numpy.typing import NDArray

from workbench.engine.look.association import AssociationMap
from workbench.figures.drawing import Drawing
from workbench.figures.features import CIRCLE_ROOM, NAME_IN_CIRCLE, leading_features
from workbench.figures.labels import place_labels
from workbench.figures.style import (
    COLOURS,
    GUIDE,
    INK,
    MARKS,
    ONE_COLUMN,
    PALE,
    SMALL,
    TWO_COLUMNS,
    figure_name,
    figure_style,
    plain_legend,
    plain_ticks,
    say,
)
from workbench.figures.variance import BLUES
from workbench.look.words import listed

FloatArray = NDArray[np.float64]

PAIRS_DRAWN = 3
COLUMNS_DRAWN = 24
LEADING = 10
SIGNIFICANT = 0.05
PARTS = ("shared by all", "shared by some", "private", "noise")
HATCHES = ("", "///", "", "")
PART_COLOURS = (COLOURS[0], COLOURS[5], COLOURS[1], PALE)


@dataclass(frozen=True, eq=False)
class LayerDrawn:
    """One layer: its variates (n_units, k; NaN where it lacks one) and its features' correlations (p, k)."""

    name: str
    variates: FloatArray
    features: tuple[str, ...]
    own: FloatArray
    other: FloatArray


@dataclass(frozen=True, eq=False)
class CanonicalView:
    """What the figures show.

    Attributes
    ----------
    layers : tuple of LayerDrawn
    units : str
        What a point is, in the plural.
    correlations, cross_validated, errors : ndarray of shape (n_components,)
        In and out of sample (NaN where there is none), standard error of the latter.
    null : ndarray of shape (draws, n_components)
        In-sample correlations by chance.
    p : ndarray of shape (n_components,)
        Cumulated; NaN where not tested.
    axes : int
        Components told from chance.
    groups : tuple of str
        Level of each unit; empty without a group.
    levels : tuple of str
    accounts : mapping in order, block name to shares of ``PARTS``
    association : AssociationMap
    """

    layers: tuple[LayerDrawn, ...]
    units: str
    correlations: FloatArray
    cross_validated: FloatArray
    errors: FloatArray
    null: FloatArray
    p: FloatArray
    axes: int
    groups: tuple[str, ...]
    levels: tuple[str, ...]
    accounts: tuple[tuple[str, tuple[float, ...]], ...]
    association: AssociationMap

    @property
    def count(self) -> int:
        """Number of components."""
        return int(self.correlations.size)


def draw_canonical(view: CanonicalView) -> tuple[Drawing, ...]:
    """Draw all figures of an analysis that its components allow."""
    with figure_style():
        return tuple(map(_settled, _drawings(view)))


def correlation_figure(view: CanonicalView, axes: Axes) -> Axes:
    """Draw the correlation of each component in and out of sample, over what chance alone reaches in sample."""
    at = np.arange(1, view.count + 1)
    known = view.null[np.isfinite(view.null).all(axis=1)]
    if len(known):
        low, high = np.quantile(known, [0.025, 0.975], axis=0)
        axes.bar(
            at, high - low, bottom=low, width=0.62, color=PALE, label="in sample by chance, 95 of 100", zorder=1
        )  # fmt: skip
    axes.plot(at - 0.12, view.correlations, "o", color=COLOURS[0], label="in sample", zorder=3)
    if np.isfinite(view.cross_validated).any():
        axes.errorbar(
            at + 0.12, view.cross_validated, yerr=2.0 * view.errors, fmt="s", color=COLOURS[4], capsize=2.0,
            linewidth=0.9, label="in unseen samples, +- 2 standard errors", zorder=4,
        )  # fmt: skip
    for k, p in enumerate(view.p):
        if np.isfinite(p):
            say(axes, at[k], 1.06, f"p = {p:.2g}", ha="center", va="bottom", fontsize=SMALL)
    axes.axhline(0.0, color=GUIDE, linewidth=0.6)
    axes.set_ylim(min(-0.15, float(np.nanmin(view.cross_validated - 2.2 * view.errors, initial=0.0))), 1.15)
    axes.set_xlim(0.4, view.count + 0.6)
    axes.set_xticks(at)
    axes.set_xlabel("component")
    axes.set_ylabel("correlation of the variates")
    plain_legend(axes, loc="upper left", bbox_to_anchor=(0.0, -0.2), ncols=1, borderaxespad=0.0)
    return axes


def variates_figure(view: CanonicalView, axes: Axes, component: int, pair: tuple[int, int]) -> Axes:
    """Draw one layer's variate against another's, samples marked by their group."""
    first, second = (view.layers[k] for k in pair)
    x, y = (_unit(layer.variates[:, component - 1]) for layer in (first, second))
    groups = np.array(view.groups or [""] * x.size)
    for k, level in enumerate(view.levels or ("",)):
        mine = groups == level
        axes.scatter(
            x[mine], y[mine], s=16.0, marker=MARKS[k % len(MARKS)], color=COLOURS[k % len(COLOURS)],
            linewidths=0.4, edgecolors="white", label=figure_name(level) if level else None,
        )  # fmt: skip
    axes.axhline(0.0, color=PALE, linewidth=0.6, zorder=0)
    axes.axvline(0.0, color=PALE, linewidth=0.6, zorder=0)
    axes.set_title(f"component {component}")
    axes.set_xlabel(f"{figure_name(first.name)} variate")
    axes.set_ylabel(f"{figure_name(second.name)} variate")
    return axes


def circle_figure(view: CanonicalView, axes: Axes, layer: int) -> Axes:
    """Draw a layer's features at their correlations with the other layers' variates of components 1 and 2."""
    drawn = view.layers[layer]
    places = drawn.other[:, :2]
    known = np.isfinite(places).all(axis=1)
    guide = float(np.sqrt(1.0 - 0.05 ** (2.0 / max(np.isfinite(drawn.variates[:, 0]).sum() - 2, 1))))
    named = leading_features(places, guide, per_end=3)
    axes.set_xlim(-CIRCLE_ROOM, CIRCLE_ROOM)
    axes.set_ylim(-CIRCLE_ROOM, CIRCLE_ROOM)
    axes.set_aspect("equal", adjustable="box")
    axes.scatter(
        places[known, 0], places[known, 1], s=4.0, color="#B0B0B0", linewidths=0.0, zorder=1, rasterized=True
    )
    angle = np.linspace(0.0, 2.0 * np.pi, 181)
    for radius, line in ((1.0, "-"), (guide, "--")):
        axes.plot(radius * np.cos(angle), radius * np.sin(angle), color=GUIDE, linestyle=line, linewidth=0.7)
    axes.axhline(0.0, color=PALE, linewidth=0.6, zorder=0)
    axes.axvline(0.0, color=PALE, linewidth=0.6, zorder=0)
    colour = COLOURS[layer % len(COLOURS)]
    axes.scatter(places[named, 0], places[named, 1], s=9.0, color=colour, zorder=4)
    texts = [figure_name(drawn.features[j], NAME_IN_CIRCLE) for j in named]
    place_labels(axes, places[named], texts, obstacles=places[named], outward=True)
    axes.set_title(figure_name(drawn.name))
    axes.set_xlabel("component 1")
    axes.set_ylabel("component 2")
    axes.set_xticks([-1.0, 0.0, 1.0])
    axes.set_yticks([-1.0, 0.0, 1.0])
    return axes


def leading_figure(view: CanonicalView, axes: Axes, layer: int, component: int = 1) -> Axes:
    """Draw the features of a layer that go best with the other layers' variate of a component."""
    drawn = view.layers[layer]
    values = np.nan_to_num(drawn.other[:, component - 1])
    best = np.argsort(-np.abs(values), kind="stable")[:LEADING][::-1]
    axes.barh(np.arange(best.size), values[best], color=COLOURS[layer % len(COLOURS)], height=0.7)
    plain_ticks(axes, "y", np.arange(best.size), [figure_name(drawn.features[j]) for j in best])
    axes.axvline(0.0, color=INK, linewidth=0.6)
    axes.set_xlim(-1.0, 1.0)
    axes.set_xticks([-1.0, -0.5, 0.0, 0.5, 1.0])
    axes.set_title(figure_name(drawn.name))
    axes.set_xlabel(f"correlation with the\nother layers' variate\nof component {component}")
    return axes


def account_figure(view: CanonicalView, axes: Axes) -> Axes:
    """Draw one bar for each block, split in what is shared by all layers, by some, private and noise."""
    names = [name for name, _ in view.accounts]
    shares = 100.0 * np.array([parts for _, parts in view.accounts])
    start = np.zeros(len(names))
    at = np.arange(len(names))[::-1]
    for k, part in enumerate(PARTS):
        if k == 1 and len(view.layers) < 3:
            continue
        axes.barh(
            at, shares[:, k], left=start, color=PART_COLOURS[k], edgecolor=INK, linewidth=0.4, hatch=HATCHES[k],
            height=0.6, label="shared" if k == 0 and len(view.layers) < 3 else part,
        )  # fmt: skip
        for j, share in enumerate(shares[:, k]):
            if share >= 6.0:
                ink = "white" if k == 0 else INK
                say(axes, start[j] + share / 2.0, at[j], f"{share:.0f}", ha="center", va="center", color=ink)
        start += shares[:, k]
    plain_ticks(axes, "y", at, [figure_name(name) for name in names])
    axes.set_xlim(0.0, 100.0)
    axes.set_xlabel("share of the block's variance (%)")
    plain_legend(axes, loc="lower left", bbox_to_anchor=(0.0, 1.0), ncols=4, borderaxespad=0.2)
    return axes


def association_figure(view: CanonicalView, axes: Axes) -> Axes:
    """Draw R2 of every column of the sample sheet with every component; a number stands where q is 0.05 or less."""
    found = view.association
    rows = [j for j in range(len(found.columns)) if not found.untestable[j]]
    rows.sort(key=lambda j: -float(np.nanmax(found.r2_adjusted[j])))
    rows = rows[:COLUMNS_DRAWN]
    r2 = found.r2[rows]
    axes.imshow(r2, cmap=BLUES, vmin=0.0, vmax=1.0, aspect="auto", interpolation="nearest")
    for i, k in np.argwhere(found.q[rows] <= SIGNIFICANT):
        ink = "white" if r2[i, k] > 0.45 else INK
        say(axes, float(k), float(i), f"{r2[i, k]:.2f}", ha="center", va="center", fontsize=SMALL, color=ink)
    plain_ticks(axes, "y", range(len(rows)), [figure_name(found.columns[j]) for j in rows])
    plain_ticks(axes, "x", range(view.count), [str(k + 1) for k in range(view.count)])
    axes.tick_params(length=0.0)
    axes.spines[:].set_visible(False)
    axes.set_xlabel("component")
    return axes


def _unit(values: FloatArray) -> FloatArray:
    """Return values in standard deviations from their mean, as far as they are there."""
    spread = float(np.nanstd(values, ddof=1))
    centred: FloatArray = values - np.nanmean(values)
    return centred / spread if spread > 0.0 else centred


def _drawings(view: CanonicalView) -> Iterator[Drawing]:
    names = listed([layer.name for layer in view.layers])
    figure = _figure(ONE_COLUMN, 3.4)
    correlation_figure(view, figure.add_subplot())
    yield Drawing("correlations", figure, _correlation_caption(names))
    yield Drawing("variates", _variates(view), _variates_caption(view))
    if view.count >= 2:
        circles = _row(view, lambda axes, k: circle_figure(view, axes, k), square=True)
        yield Drawing("circles", circles, CIRCLES)
    bars = _row(view, lambda axes, k: leading_figure(view, axes, k), square=False)
    yield Drawing("leading_features", bars, LEADING_CAPTION)
    account = _figure(TWO_COLUMNS, 1.0 + 0.34 * len(view.accounts))
    account_figure(view, account.add_subplot())
    yield Drawing("account", account, ACCOUNT)
    if not all(view.association.untestable):
        yield Drawing("association", _association(view), ASSOCIATION)


def _variates(view: CanonicalView) -> Figure:
    layers = len(view.layers)
    pairs = [(a, b) for a in range(layers) for b in range(a + 1, layers)]
    panels = [(k, pair) for k in range(1, view.count + 1) for pair in pairs][: PAIRS_DRAWN * len(pairs)]
    columns = min(3, len(panels))
    rows = -(-len(panels) // columns)
    figure = _figure(max(ONE_COLUMN, TWO_COLUMNS * columns / 3.0), 2.4 * rows + 0.4)
    grid = figure.subplots(rows, columns, squeeze=False)
    for axes, panel in zip(grid.flat, [*panels, *[None] * (grid.size - len(panels))], strict=True):
        if panel is None:
            axes.set_axis_off()
        else:
            variates_figure(view, axes, *panel)
    if view.levels:
        handles, labels = grid.flat[0].get_legend_handles_labels()
        legend = figure.legend(handles, labels, loc="outside lower center", ncols=min(4, len(labels)))
        for text in legend.get_texts():
            text.set_parse_math(False)
    return figure


def _row(view: CanonicalView, draw: Callable[[Axes, int], Axes], square: bool) -> Figure:
    """One panel for each layer, two or three side by side; circles in squares of fixed size, as labels need."""
    count = len(view.layers)
    columns = min(count, 3)
    rows = -(-count // columns)
    if not square:
        figure = _figure(TWO_COLUMNS, 2.7 * rows)
        grid: Sequence[Axes] = list(figure.subplots(rows, columns, squeeze=False).flat)
    else:
        side = (TWO_COLUMNS - 0.65 * columns) / columns
        height = (side + 0.75) * rows
        figure = _figure(TWO_COLUMNS, height, constrained=False)
        grid = [
            figure.add_axes(
                (
                    (0.5 + (k % columns) * (side + 0.65)) / TWO_COLUMNS,
                    (0.45 + (rows - 1 - k // columns) * (side + 0.75)) / height,
                    side / TWO_COLUMNS,
                    side / height,
                )
            )
            for k in range(count)
        ]
    for k, axes in enumerate(grid):
        if k < count:
            draw(axes, k)
        else:
            axes.set_axis_off()
    return figure


def _association(view: CanonicalView) -> Figure:
    rows = max(3, min(COLUMNS_DRAWN, sum(not why for why in view.association.untestable)))
    figure = _figure(ONE_COLUMN + 0.5 * min(view.count, 6), 0.75 + 0.22 * rows)
    axes = association_figure(view, figure.add_subplot())
    if axes.images:
        figure.colorbar(axes.images[0], ax=axes, label="R2", aspect=12, pad=0.02).outline.set_visible(False)
    return figure


def _figure(width: float, height: float, constrained: bool = True) -> Figure:
    figure = Figure(figsize=(width, height), layout="constrained" if constrained else None)
    FigureCanvasAgg(figure)
    return figure


def _settled(drawing: Drawing) -> Drawing:
    """Lay the figure out once, so that every format gets the same places."""
    if drawing.figure.get_layout_engine() is not None:
        drawing.figure.draw_without_rendering()
        drawing.figure.set_layout_engine("none")
    return drawing


CIRCLES = (
    "Each feature at its correlation with the other layers' variates of components 1 and 2, a circle for each layer. "
    "The dashed circle is what 19 of 20 features that have nothing to do with a component pair stay within; labelled "
    "are the strongest features of each end beyond it. Features on the same side of different circles go together."
)
LEADING_CAPTION = (
    "The features of each layer that go best with the other layers' variate of component 1. Correlations in sample, "
    "of features chosen for their size: read them as an order, and the edges for evidence."
)
ACCOUNT = (
    "Variance of each block, nuisance removed: in components that all layers share, that some share, in further "
    "components of the block's own, and noise. Shared parts are measured by the other layers' variates, less what "
    "chance takes; only components that the test tells from chance count as shared."
)
ASSOCIATION = (
    "Share of each component's variance (mean of the layers' variates) that a column of the sample sheet explains, one "
    "column at a time; numbers where the false-discovery rate over the figure is 0.05 or less."
)


def _correlation_caption(names: str) -> str:
    return (
        f"Correlation of the variates of {names}, component by component. With many features any in-sample correlation "
        "is high: the grey bars show what fits to rearranged rows reach. The squares are correlations in samples that "
        "the fit has not seen, everything learnt anew from the training samples; they are the ones to trust. p is "
        "cumulated over the components, from permutations."
    )


def _variates_caption(view: CanonicalView) -> str:
    by = ", marked by group" if view.levels else ""
    return (
        f"Variates of two layers against each other, in standard deviations; each point one of the "
        f"{view.units}{by}. In sample: points near the diagonal are no evidence by themselves."
    )
