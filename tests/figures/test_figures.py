"""Every figure: its geometry is right, its text is only text, it stays on its page, in colour and in grey."""

from __future__ import annotations

import dataclasses

import numpy as np
import pytest
from look_views import bare, planted
from matplotlib.backends.backend_agg import FigureCanvasAgg
from matplotlib.colors import to_rgb
from matplotlib.figure import Figure
from matplotlib.text import Text
from numpy.testing import assert_allclose

from workbench.figures import (
    agreement_map,
    association_map,
    biplot,
    correlation_circle,
    cumulative_variance,
    draw_look,
    explained_variance,
    figure_style,
    gap_figure,
    gaps_by_abundance,
    loadings_plot,
    outlier_map,
    score_plot,
    spread_plot,
)
from workbench.figures.features import leading_features
from workbench.figures.marks import _marks
from workbench.figures.samples import prediction_ellipse
from workbench.figures.style import COLOURS, figure_name, legible
from workbench.look import levels_of, look_at_block, look_between

LOOK = look_at_block(planted(odd=7), seed=1)
ODD_NAMES = (
    "<b>&amp;</b>",
    r"$\alpha^2_i$",
    "a_b^c$x",
    "{%d}",
    "N" * 300,
    "tab\tline\nbreak",
    "日本",
    "",
    "naïve µ",
)


def blank() -> object:
    figure = Figure(figsize=(3.5, 3.5))
    FigureCanvasAgg(figure)
    return figure.add_axes((0.16, 0.16, 0.8, 0.8))


FUNCTIONS = {
    "score": lambda axes: score_plot(LOOK, axes),
    "score 3 4": lambda axes: score_plot(LOOK, axes, 3, 4),
    "circle": lambda axes: correlation_circle(LOOK, axes),
    "biplot": lambda axes: biplot(LOOK, axes),
    "loadings": lambda axes: loadings_plot(LOOK, axes, 2),
    "explained": lambda axes: explained_variance(LOOK, axes),
    "cumulative": lambda axes: cumulative_variance(LOOK, axes),
    "association": lambda axes: association_map(LOOK, axes),
    "outliers": lambda axes: outlier_map(LOOK, axes),
    "gaps": lambda axes: gap_figure(LOOK, axes),
    "gaps by abundance": lambda axes: gaps_by_abundance(LOOK, axes),
    "measured": lambda axes: spread_plot(LOOK, axes, "measured"),
    "prepared": lambda axes: spread_plot(LOOK, axes, "prepared"),
    "agreement": lambda axes: agreement_map(
        look_between([planted(), planted(seed=2)], seed=1, permutations=9), axes
    ),
}


@pytest.mark.parametrize("name", FUNCTIONS)
def test_a_figure_function_returns_its_axes_with_something_on_them(name: str) -> None:
    with figure_style():
        axes = blank()
        assert FUNCTIONS[name](axes) is axes
        assert axes.has_data()
        assert axes.get_xlabel() or axes.get_title()


@pytest.mark.parametrize("name", ["score", "score 3 4", "circle", "biplot"])
def test_one_unit_is_one_length_on_both_axes(name: str) -> None:
    with figure_style():
        axes = FUNCTIONS[name](blank())
        axes.figure.draw_without_rendering()
        origin, right, up = axes.transData.transform([[0.0, 0.0], [1.0, 0.0], [0.0, 1.0]])
    assert right[0] - origin[0] == pytest.approx(up[1] - origin[1], rel=1e-6)


def test_scores_are_drawn_where_they_are_and_labelled_with_shares() -> None:
    with figure_style():
        axes = score_plot(LOOK, blank())
    drawn = np.vstack([points.get_offsets() for points in axes.collections])
    expected = LOOK.scores[:, :2]
    assert_allclose(drawn[np.lexsort(drawn.T)], expected[np.lexsort(expected.T)], rtol=1e-12)
    assert axes.get_xlabel() == f"Component 1 ({100 * LOOK.shares[0]:.0f} % of variance)"
    assert "S008" in [text.get_text() for text in axes.texts]


def test_a_prediction_ellipse_holds_the_next_sample_in_95_of_100() -> None:
    """4,000 groups of 10 normal samples, to 4 standard errors; judged by the ellipse's own outline."""
    rng = np.random.default_rng(0)
    inside = 0
    for _ in range(4000):
        points = rng.normal(size=(11, 2)) @ [[2.0, 0.0], [1.0, 0.5]]
        outline = prediction_ellipse(points[:10])
        centre, shape = points[:10].mean(axis=0), np.linalg.inv(np.cov(points[:10].T))
        reach = np.einsum("ij,jk,ik->i", outline - centre, shape, outline - centre)
        assert np.ptp(reach) < 1e-8 * reach[0]
        step = points[10] - centre
        inside += step @ shape @ step <= reach[0]
    assert inside / 4000 == pytest.approx(0.95, abs=4.0 * np.sqrt(0.95 * 0.05 / 4000))


def test_small_groups_get_no_ellipse() -> None:
    with figure_style():
        for n, expected in ((36, 2), (12, 0)):
            axes = score_plot(look_at_block(planted(n=n), seed=1), blank())
            assert sum(len(line.get_xdata()) == 120 for line in axes.lines) == expected


def test_the_circle_names_the_strongest_features_of_each_end() -> None:
    places = np.array(
        [[0.9, 0.1], [0.8, 0.0], [-0.7, 0.2], [0.1, 0.95], [0.0, -0.5], [0.1, 0.1], [np.nan, np.nan]]
    )
    assert leading_features(places, 0.3, per_end=1) == [3, 0, 2, 4]
    assert leading_features(places, 0.6, per_end=2) == [3, 0, 1, 2]


def test_groups_are_told_apart_without_colour() -> None:
    """No two groups share mark and filling, with or without a shaping column; fillings differ in lightness."""
    view = planted(n=90)
    three = levels_of("dose", [str(i // 3 % 3) for i in range(90)])
    for shape_by in ("run_day", ""):
        look = look_at_block(dataclasses.replace(view, groups=three, shape_by=shape_by), seed=1)
        seen: dict[tuple[str, float], str] = {}
        for _, colour, mark, face in _marks(look):
            lightness = 1.0 if face == "none" else round(float(np.dot(to_rgb(face), [0.3, 0.59, 0.11])), 1)
            assert seen.setdefault((mark, lightness), colour) == colour
    lightness = [float(np.dot(to_rgb(colour), [0.3, 0.59, 0.11])) for colour in COLOURS[:2]]
    assert abs(lightness[0] - lightness[1]) > 0.25


def odd_look() -> object:
    view = planted()
    strongest = np.argsort(-np.abs(look_at_block(view, seed=1).correlations[:, :2]).max(axis=1))
    names = np.array(view.features, dtype=object)
    names[strongest[: len(ODD_NAMES)]] = ODD_NAMES
    samples = ("$S_1^2$", "<i>" + "long" * 70, *view.samples[2:])
    sheet = view.columns.rename(columns={"run_day": "$day_1$ " + "x" * 300})
    day = str(sheet.columns[0])
    groups = levels_of("$g_1^2$", ["$a$" if code else "<b>" * 99 for code in view.groups.codes])
    changed = {
        "features": tuple(names),
        "samples": samples,
        "columns": sheet,
        "adjust": (day,),
        "shape_by": day,
    }
    return look_at_block(dataclasses.replace(view, **changed, groups=groups, name="$b_1$"), seed=1)


def test_names_are_taken_as_text_whatever_they_hold() -> None:
    for drawing in draw_look(odd_look()):
        drawing.figure.draw_without_rendering()
        for text in drawing.figure.findobj(Text):
            assert not ("$" in text.get_text() and text.get_parse_math()), text.get_text()
            assert len(text.get_text()) < 90


@pytest.mark.parametrize(
    "look", [LOOK, odd_look(), look_at_block(planted(n=150), seed=1)], ids=["plain", "odd", "150"]
)
def test_nothing_leaves_the_page(look) -> None:
    """To 1/50 inch, for all figures of a block: the box around all that is drawn lies on the page."""
    for drawing in draw_look(look):
        drawing.figure.draw_without_rendering()
        box = drawing.figure.get_tightbbox()
        assert min(box.x0, box.y0) >= -0.02, drawing.name
        assert box.x1 <= drawing.figure.get_figwidth() + 0.02, drawing.name
        assert box.y1 <= drawing.figure.get_figheight() + 0.02, drawing.name


def test_fonts_can_be_read_at_print_size() -> None:
    for drawing in draw_look(LOOK):
        assert 3.4 <= drawing.figure.get_figwidth() <= 7.3
        sizes = [text.get_fontsize() for text in drawing.figure.findobj(Text) if text.get_text()]
        assert min(sizes) >= 5.5


def test_characters_without_a_glyph_become_squares() -> None:
    assert legible("µ-β 日本") == "µ-β □□"
    assert figure_name("a\nb") == "a b"


@pytest.mark.parametrize("shape", [(2, 1), (2, 40), (3, 3), (4, 2), (7, 600)])
def test_small_blocks_are_drawn_without_what_they_lack(shape: tuple[int, int]) -> None:
    look = look_at_block(bare(np.random.default_rng(0).normal(size=shape)), seed=1)
    names = [drawing.name for drawing in draw_look(look)]
    kept = min(shape[0] - 1, shape[1])
    assert ("correlation_circle" in names) == (kept >= 2)
    assert ("scores_3_4" in names) == (kept >= 4)
    assert {"explained_variance", "scores_1_2", "loadings", "outliers", "distributions"} <= set(names)


def test_more_components_held_up_than_are_drawn_leave_the_curve_unmarked() -> None:
    crossed = LOOK.number.cross_validated
    errors = np.concatenate([crossed.errors, np.full(60, 0.5)])
    many = dataclasses.replace(crossed, number=60, errors=errors)
    look = dataclasses.replace(LOOK, number=dataclasses.replace(LOOK.number, cross_validated=many))
    axes = cumulative_variance(look, blank())
    assert [line.get_xdata().size for line in axes.lines][-1] == 0
    assert "error, cross-validated (60)" in axes.get_legend_handles_labels()[1]
