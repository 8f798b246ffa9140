"""Figures of a supervised analysis: fitted and held-out scores stay apart, curves are right, names are only text."""

from __future__ import annotations

import dataclasses

import numpy as np
import pytest
from matplotlib.backends.backend_agg import FigureCanvasAgg
from matplotlib.figure import Figure
from numpy.testing import assert_allclose
from sklearn.metrics import roc_auc_score

from workbench.figures import figure_bytes, figure_style
from workbench.figures.supervised import block_importance, class_scores, permutation_null, roc_curves
from workbench.figures.supervised_pages import draw_supervised
from workbench.figures.supervised_view import SupervisedView


def planted(classes: int = 2, n: int = 30) -> SupervisedView:
    """Return a view with made-up scores of two classes, of three, or (0) of a number."""
    rng = np.random.default_rng(0)
    columns = 1 if classes in (0, 2) else classes
    truth = (np.arange(n) % classes).astype(float) if classes else rng.normal(size=n)
    held_out = rng.normal(size=(n, columns)) + (truth[:, None] if columns == 1 else 0.0)
    return SupervisedView(
        outcome="a_b $x$",
        levels=("ill", "$\\alpha^2$", "odd")[:classes],
        truth=truth,
        fitted=held_out * 2.0,
        held_out=held_out,
        roc_scores=np.array([held_out, held_out + 0.2 * rng.normal(size=held_out.shape)]),
        blocks=("rna", "lcms"),
        alike="features",
        importance=np.array([[0.7, 0.3], [0.2, 0.8]]),
        measure="auc" if classes else "q2",
        candidates=(1, 2, 3),
        by_components=rng.uniform(0.5, 0.9, (4, 3)),
        in_sample=np.array([0.5, 0.8, 0.9]),
        chosen=2,
        names=("g1", "<b>", "m_3"),
        name_blocks=("rna", "rna", "lcms"),
        vip=np.array([2.0, 1.5, 1.1]),
        frequency=np.array([1.0, 0.5, np.nan]),
        in_panel=np.array([True, False, False]),
        observed=0.8,
        null=rng.normal(0.5, 0.1, 99),
        p=0.01,
        withheld=None,
    )


def blank() -> object:
    figure = Figure(figsize=(3.5, 3.0))
    FigureCanvasAgg(figure)
    return figure.add_subplot()


def test_held_out_scores_are_full_and_fitted_ones_hollow() -> None:
    with figure_style():
        axes = class_scores(planted(), blank())  # type: ignore[arg-type]
    faces = [len(points.get_facecolors()) > 0 for points in axes.collections]
    assert faces == [False, True, False, True]
    full = np.vstack([points.get_offsets() for points in axes.collections[1::2]])
    assert sorted(full[:, 1]) == pytest.approx(sorted(planted().held_out[:, 0]))
    texts = [text.get_text() for text in axes.get_legend().get_texts()]
    assert texts == ["fitted (has seen the sample)", "held out"]


def test_the_area_under_the_drawn_curve_is_the_auc() -> None:
    view = dataclasses.replace(planted(), roc_scores=planted().roc_scores[:1])
    with figure_style():
        axes = roc_curves(view, blank())  # type: ignore[arg-type]
    x, y = axes.lines[0].get_data()
    area = np.trapezoid(np.asarray(y, dtype=float), np.asarray(x, dtype=float))
    assert_allclose(area, roc_auc_score(view.truth, view.roc_scores[0, :, 0]), atol=0.02)


def test_bars_of_importance_add_up_to_one() -> None:
    with figure_style():
        axes = block_importance(planted(), blank())  # type: ignore[arg-type]
    assert_allclose(sum(bar.get_width() for bar in axes.patches), 2.0)


def test_without_permutations_the_reason_is_shown() -> None:
    view = dataclasses.replace(planted(), null=np.zeros(0), p=None, withheld="only 10 arrangements")
    with figure_style():
        axes = permutation_null(view, blank())  # type: ignore[arg-type]
    assert axes.texts[0].get_text() == "only 10 arrangements"


@pytest.mark.parametrize("classes", [0, 2, 3])
def test_all_figures_are_drawn_with_captions_and_are_the_same_twice(classes: int) -> None:
    first, second = draw_supervised(planted(classes)), draw_supervised(planted(classes))
    names = [drawing.name for drawing in first]
    roc = ["roc"] if classes else []
    assert names == ["scores", "block_importance", "components", *roc, "features", "permutations"]
    assert all(len(drawing.caption) > 60 for drawing in first)
    assert figure_bytes(first[0], "svg") == figure_bytes(second[0], "svg")
