"""Whole figures of what preparation did, at print size, with their captions."""

from __future__ import annotations

from collections.abc import Iterator

from matplotlib.figure import Figure

from workbench.figures.drawing import Drawing, settled, sized_figure
from workbench.figures.marks import sample_legend
from workbench.figures.preparation import (
    drift_handles,
    drift_plot,
    levels_plot,
    pool_scatter_plot,
    scale_by_group,
    scale_plot,
)
from workbench.figures.style import ONE_COLUMN, SMALL, TWO_COLUMNS, figure_name, figure_style
from workbench.look.preparation import PreparationLook
from workbench.look.words import percent, short
from workbench.prepare import DriftEffect

ROW = 1.35
LEGEND_COLUMNS = 5
SCALE_MEANS = {
    "size factor": "how deeply the sample was read, against the typical one",
    "concentration": "how concentrated the sample was, against the typical one",
    "shift": "how far the sample's median lay from the typical one",
    "scale": "what was taken from the sample",
}


def draw_preparation(look: PreparationLook) -> tuple[Drawing, ...]:
    """Draw what preparation did to a block: only the steps that changed something."""
    with figure_style():
        return tuple(map(settled, _drawings(look)))


def _drawings(look: PreparationLook) -> Iterator[Drawing]:
    effect = look.drift
    if effect is not None and effect.shown:
        yield Drawing("drift", _drift(effect), _drift_caption(look, effect))
    if effect is not None:
        figure = sized_figure(ONE_COLUMN, 3.0)
        pool_scatter_plot(effect, figure.add_subplot())
        yield Drawing("pool_scatter", figure, _scatter_caption(look, effect))
    if look.scaled:
        yield Drawing("scale", _scale(look), _scale_caption(look))
    if look.before is not None:
        yield Drawing("levels", _levels(look), _levels_caption(look))


def _drift(effect: DriftEffect) -> Figure:
    rows = len(effect.shown)
    figure = sized_figure(TWO_COLUMNS, 0.75 + ROW * rows)
    grid = figure.subplots(rows, 2, squeeze=False, sharex=True, sharey="row")
    for place, feature in enumerate(effect.shown):
        for axes, which in zip(grid[place], ("before", "after"), strict=True):
            drift_plot(effect, axes, place, which)
            scatter = (effect.scatter_before if which == "before" else effect.scatter_after)[feature]
            title = f"{figure_name(effect.features[feature])}, {which}: pools scatter by {percent(scatter)}"
            axes.set_title(title, parse_math=False)
        grid[place, 0].set_ylabel("log2 value")
    for axes in grid[-1]:
        axes.set_xlabel("runs in order" + (", batch after batch" if len(set(effect.runs.batch)) > 1 else ""))
    figure.legend(handles=drift_handles(), loc="outside upper center", ncols=3)
    return figure


def _drift_caption(look: PreparationLook, effect: DriftEffect) -> str:
    return (
        f"Drift of {short(look.name)}: the {len(effect.shown)} features that moved most, of {effect.corrected} from "
        f"which something was taken ({len(effect.features)} features, {effect.pools} pools). Left: values as "
        "delivered, and the course over the run order that was read off the pools and taken away. Right: what is left; "
        "each pool is corrected by a course that has not seen it, as a sample is. A step that works brings the pools "
        "onto one line and leaves the samples their spread. Pools that lie level say nothing of runs before the first "
        "and after the last of them. Every run: drift_runs.tsv."
    )


def _scatter_caption(look: PreparationLook, effect: DriftEffect) -> str:
    kept = (
        f" Features to the right of the dotted line, {percent(effect.largest_scatter)}, are dropped."
        if effect.largest_scatter == effect.largest_scatter
        else ""
    )
    return (
        f"How well the assay repeats {short(look.name)}: relative standard deviation of every feature over the pools, "
        f"which are one mixture measured {effect.pools} times; share of the features up to each value, before and "
        f"after drift is taken away, each pool by a course that has not seen it.{kept} Pools that agree show that an "
        "amount can be repeated, not that it is right. Every feature: prepared_features.tsv."
    )


def _scale(look: PreparationLook) -> Figure:
    if look.groups is None:
        figure = sized_figure(ONE_COLUMN, 3.0)
        scale_plot(look, figure.add_subplot())
        return figure
    figure = sized_figure(TWO_COLUMNS, 3.3)
    left, right = figure.subplots(1, 2, width_ratios=(3, 2), sharey=True)
    scale_plot(look, left)
    scale_by_group(look, right)
    right.set_ylabel("")
    right.tick_params(axis="y", labelleft=False)
    entries = sum(len(levels.levels) for levels in (look.groups, look.shapes) if levels is not None)
    where = {"loc": "lower left", "bbox_to_anchor": (0.0, 1.0), "borderaxespad": 0.2}
    sample_legend(look, left, ncols=min(entries, LEGEND_COLUMNS), fontsize=SMALL, **where)
    return figure


def _scale_caption(look: PreparationLook) -> str:
    word = look.scale_word
    taken = "what was taken from its logarithms" if word == "shift" else "what its values were divided by"
    groups = ""
    if look.groups is not None:
        groups = (
            f" Right: the same by {short(look.groups.name)}, a bar at each group's mean. Groups that lie apart here "
            "were scaled apart: then a difference between them in every weak feature rests on the scaling, and the "
            "numbers cannot tell whether depth or biology made it."
        )
    return (
        f"The {word} of each sample of {short(look.name)}, {taken}: {SCALE_MEANS[word]}."
        f"{' Left: against' if groups else ' Against'} the sample's total as delivered; a sample far off the common "
        f"line has its total in a few features.{groups} Every sample: prepared_samples.tsv."
    )


def _levels(look: PreparationLook) -> Figure:
    figure = sized_figure(TWO_COLUMNS, 4.2)
    upper, lower = figure.subplots(2, 1, sharex=True, sharey=True)
    levels_plot(look, upper, "before")
    levels_plot(look, lower, "after")
    upper.tick_params(axis="x", labelbottom=False)
    return figure


def _levels_caption(look: PreparationLook) -> str:
    return (
        f"Each sample of {short(look.name)} against the typical one, before and after preparation: logarithms of the "
        "same measured values less their feature's median over the samples; median, quartiles (thick) and middle 90 % "
        "(thin). A sample whose box lies off the line is higher or lower in most features at once, which is depth, "
        "dilution or loading sooner than biology. After preparation the boxes should lie level; one that is wider than "
        "the others is a sample to check. Every sample: prepared_samples.tsv."
    )
