"""The whole figures of a supervised analysis, with their captions."""

from __future__ import annotations

from collections.abc import Iterator

from workbench.figures.drawing import Drawing, settled, sized_figure
from workbench.figures.style import ONE_COLUMN, TWO_COLUMNS, figure_style
from workbench.figures.supervised import (
    MEASURES,
    block_importance,
    by_components,
    class_scores,
    importance_of_features,
    permutation_null,
    predicted_numbers,
    roc_curves,
)
from workbench.figures.supervised_view import SupervisedView
from workbench.intake.faults import counted

MOST_CLASSES = 4
ALIKE = {
    "blocks": "blocks count alike beforehand",
    "features": "features count alike beforehand, so that a block of many has much of it whatever it tells",
}


def draw_supervised(view: SupervisedView) -> tuple[Drawing, ...]:
    """Draw all figures of a supervised analysis that its outcome allows."""
    with figure_style():
        return tuple(map(settled, _drawings(view)))


def _drawings(view: SupervisedView) -> Iterator[Drawing]:
    if view.truth.size:
        yield _scores(view)
    yield _importance(view)
    yield _components(view)
    if view.levels:
        yield _roc(view)
    if view.names:
        yield _features(view)
    yield _permutations(view)


def _importance(view: SupervisedView) -> Drawing:
    figure = sized_figure(ONE_COLUMN, 1.3 + 0.26 * len(view.importance))
    block_importance(view, figure.add_subplot())
    caption = (
        f"Share of each block in each component of the fit on all samples that explains {view.outcome} (squared "
        f"super weights; {ALIKE[view.alike]}). Says what the fit uses, not what each block can do alone: for that see "
        "performance.tsv."
    )
    return Drawing("block_importance", figure, caption)


def _components(view: SupervisedView) -> Drawing:
    figure = sized_figure(ONE_COLUMN, 2.9)
    by_components(view, figure.add_subplot())
    caption = (
        f"{_measure(view)} of samples held out by number of components, {_repeats(view)}, beside the share of the "
        "outcome explained in sample (R2), which grows whatever the data. Dashed: how many were chosen; horizontal: "
        "what knowing nothing gives."
    )
    return Drawing("components", figure, caption)


def _roc(view: SupervisedView) -> Drawing:
    figure = sized_figure(ONE_COLUMN, ONE_COLUMN)
    roc_curves(view, figure.add_subplot())
    caption = (
        f"ROC curve of samples held out: {_repeats(view)}, of double cross-validation; band from the lowest to the "
        "highest. Repeats share the samples: the band is not a confidence band over patients."
    )
    return Drawing("roc", figure, caption)


def _features(view: SupervisedView) -> Drawing:
    figure = sized_figure(ONE_COLUMN, 1.0 + 0.17 * len(view.names))
    importance_of_features(view, figure.add_subplot())
    caption = (
        "Features of greatest variable importance in the fit on all samples. Beside each the share of training parts "
        "whose panel had it; a dot marks the features of the final panel. Dashed: 1, the mean square over all "
        "features. Not a diagnostic test."
    )
    return Drawing("features", figure, caption)


def _permutations(view: SupervisedView) -> Drawing:
    figure = sized_figure(ONE_COLUMN, 2.5)
    permutation_null(view, figure.add_subplot())
    arrangements = counted(view.null.size, "arrangement")
    caption = (
        f"{_measure(view)} of samples held out, for the outcome as it is and for {arrangements} of it, each with the "
        "whole procedure repeated." + ("" if view.p is None else f" p = {view.p:.3g}.")
    )
    return Drawing("permutations", figure, caption)


def _measure(view: SupervisedView) -> str:
    return MEASURES.get(view.measure, view.measure)


def _repeats(view: SupervisedView) -> str:
    count = len(view.by_components)
    return f"mean of {count} repeats and each of them" if count > 1 else "one repeat"


def _scores(view: SupervisedView) -> Drawing:
    caption = (
        "Hollow: scores of the fit, which has seen the sample and looks good whatever the data. Full: mean score over "
        "the repeats by models that had not seen it; only these count."
    )
    middle = (
        "Short lines: medians; dashed: the cut between the classes."
        if view.columns == 1
        else "Lines: medians."
    )
    if not view.levels:
        figure = sized_figure(ONE_COLUMN, ONE_COLUMN)
        predicted_numbers(view, figure.add_subplot())
        return Drawing("scores", figure, f"Predicted and true {view.outcome}. {caption}")
    count = min(view.columns, MOST_CLASSES)
    figure = sized_figure(ONE_COLUMN if count == 1 else TWO_COLUMNS, 2.9 * -(-count // 2))
    for k, axes in enumerate(figure.subplots(-(-count // 2), min(count, 2), squeeze=False).flat):
        if k < count:
            class_scores(view, axes, k)
        else:
            axes.set_axis_off()
    return Drawing("scores", figure, f"Scores by class of {view.outcome}. {caption} {middle}")
