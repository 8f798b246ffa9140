"""Whole figures at print size, with their captions, and their files: the same bytes on every run."""

from __future__ import annotations

import io
from collections.abc import Callable, Iterator
from dataclasses import dataclass
from functools import partial
from typing import Literal

from matplotlib.axes import Axes
from matplotlib.backends.backend_agg import FigureCanvasAgg
from matplotlib.figure import Figure

from workbench.figures import captions
from workbench.figures.agreement import agreement_map
from workbench.figures.features import biplot, correlation_circle, loadings_plot
from workbench.figures.gaps import gap_figure, gaps_by_abundance, spread_plot
from workbench.figures.marks import sample_legend
from workbench.figures.samples import outlier_map, score_plot
from workbench.figures.style import ONE_COLUMN, TWO_COLUMNS, figure_style
from workbench.figures.variance import association_map, cumulative_variance, explained_variance
from workbench.look.between import BetweenLook
from workbench.look.block import BlockLook

FORMATS: tuple[Literal["svg"], Literal["png"]] = ("svg", "png")
PRINT_DPI = 300
LOADINGS_DRAWN = 4


@dataclass(frozen=True, eq=False)
class Drawing:
    """A figure, the name of its file (without ending), and its caption."""

    name: str
    figure: Figure
    caption: str


def draw_look(look: BlockLook) -> tuple[Drawing, ...]:
    """Draw all figures of one block; those that the block has too few components for are left out."""
    with figure_style():
        return tuple(map(settled, _drawings(look)))


def draw_between(look: BetweenLook) -> tuple[Drawing, ...]:
    """Draw the agreement between blocks; nothing for a single block."""
    if len(look.blocks) < 2:
        return ()
    with figure_style():
        side = min(TWO_COLUMNS, max(ONE_COLUMN, 1.6 + 0.45 * len(look.blocks)))
        figure = sized_figure(side, side)
        agreement_map(look, figure.add_subplot())
        return (settled(Drawing("agreement", figure, captions.agreement_caption(look))),)


def figure_files(drawings: tuple[Drawing, ...]) -> Iterator[tuple[str, bytes]]:
    """Yield the name and the bytes of each figure's file: SVG, and PNG of 300 dots per inch.

    Equal drawings give equal bytes: no date, no random ids, settings of the user left aside.
    """
    for drawing in drawings:
        for ending in FORMATS:
            yield f"{drawing.name}.{ending}", figure_bytes(drawing, ending)


def caption_text(drawings: tuple[Drawing, ...]) -> str:
    """Return all captions as one text, a paragraph for each figure, headed by the name of its file."""
    return "\n".join(f"{drawing.name}\n{drawing.caption}\n" for drawing in drawings)


def figure_bytes(drawing: Drawing, ending: Literal["svg", "png"]) -> bytes:
    """Return a figure as a file of one format, with its caption in the file's own description."""
    file = io.BytesIO()
    with figure_style():
        metadata: dict[str, str | None] = {"Title": drawing.name, "Description": drawing.caption}
        metadata["Date" if ending == "svg" else "Software"] = None
        drawing.figure.savefig(file, format=ending, dpi=PRINT_DPI, metadata=metadata)
    return file.getvalue()


def settled(drawing: Drawing) -> Drawing:
    """Lay the figure out once, so that every format gets the same places."""
    if drawing.figure.get_layout_engine() is not None:
        drawing.figure.draw_without_rendering()
        drawing.figure.set_layout_engine("none")
    return drawing


def sized_figure(width: float, height: float, constrained: bool = True) -> Figure:
    """Return an empty figure of a size in inches."""
    figure = Figure(figsize=(width, height), layout="constrained" if constrained else None)
    FigureCanvasAgg(figure)
    return figure


def _drawings(look: BlockLook) -> Iterator[Drawing]:
    kept = look.scores.shape[1]
    yield Drawing("explained_variance", _explained(look), captions.explained_caption(look))
    for first, second in ((1, 2), (3, 4)):
        if first == 1 or second <= kept:
            figure = _square(look, partial(score_plot, look, first=first, second=second), legend=True)
            yield Drawing(f"scores_{first}_{second}", figure, captions.score_caption(look, first, second))
    if kept >= 2:
        circle = _square(look, partial(correlation_circle, look), legend=False)
        yield Drawing("correlation_circle", circle, captions.circle_caption(look))
        yield Drawing(
            "biplot",
            _square(look, partial(biplot, look), legend=True),
            captions.biplot_caption(look),
        )
    yield Drawing("loadings", _loadings(look), captions.loadings_caption(look))
    yield Drawing("association", _association(look), captions.association_caption(look))
    yield Drawing("outliers", _outliers(look), captions.outlier_caption(look))
    if look.gaps is not None and look.gaps.share > 0.0:
        yield Drawing("gaps", _gaps(look), captions.gap_caption(look))
    yield Drawing("distributions", _spread(look), captions.spread_caption(look))


def _explained(look: BlockLook) -> Figure:
    figure = sized_figure(TWO_COLUMNS, 2.5)
    left, right = figure.subplots(1, 2)
    explained_variance(look, left)
    cumulative_variance(look, right)
    return figure


def _square(look: BlockLook, draw: Callable[[Axes], Axes], legend: bool) -> Figure:
    """One square of fixed size, so that labels stay where they were placed, with the legend under it."""
    entries = 0
    if legend:
        entries = sum(len(levels.levels) for levels in (look.groups, look.shapes) if levels is not None)
    rows = -(-entries // 3)
    under = 0.5 + (0.2 + 0.16 * rows if rows else 0.0)
    height = ONE_COLUMN - 0.62 + under + 0.1
    figure = sized_figure(ONE_COLUMN, height, constrained=False)
    side = ONE_COLUMN - 0.62
    axes = figure.add_axes((0.54 / ONE_COLUMN, under / height, side / ONE_COLUMN, side / height))
    draw(axes)
    if legend:
        sample_legend(
            look,
            axes,
            loc="upper center",
            bbox_to_anchor=(0.45, -0.13),
            ncols=3,
            borderaxespad=0.0,
            columnspacing=1.0,
        )
    return figure


def _loadings(look: BlockLook) -> Figure:
    count = min(LOADINGS_DRAWN, look.scores.shape[1])
    figure = sized_figure(TWO_COLUMNS, 2.2 * -(-count // 2))
    grid = figure.subplots(-(-count // 2), 2, squeeze=False)
    for k, axes in enumerate(grid.flat, start=1):
        if k <= count:
            loadings_plot(look, axes, k)
        else:
            axes.set_axis_off()
    return figure


def _association(look: BlockLook) -> Figure:
    rows = max(3, min(24, sum(not why for why in look.association.untestable)))
    figure = sized_figure(TWO_COLUMNS, 0.75 + 0.22 * rows)
    axes = association_map(look, figure.add_subplot())
    if axes.images:
        figure.colorbar(axes.images[0], ax=axes, label="R2", aspect=12, pad=0.01).outline.set_visible(False)
    return figure


def _outliers(look: BlockLook) -> Figure:
    figure = sized_figure(ONE_COLUMN, 3.2, constrained=False)
    outlier_map(look, figure.add_axes((0.15, 0.14, 0.82, 0.78)))
    return figure


def _gaps(look: BlockLook) -> Figure:
    figure = sized_figure(TWO_COLUMNS, 3.4)
    left, right = figure.subplots(1, 2, width_ratios=(3, 2))
    gap_figure(look, left)
    gaps_by_abundance(look, right)
    return figure


def _spread(look: BlockLook) -> Figure:
    measured = look.distributions.measured is not None
    figure = sized_figure(TWO_COLUMNS, 4.2 if measured else 2.3)
    panels = ("measured", "prepared") if measured else ("prepared",)
    for axes, which in zip(figure.subplots(len(panels), 1, squeeze=False)[:, 0], panels, strict=True):
        spread_plot(look, axes, which)
    return figure
