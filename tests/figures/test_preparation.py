"""Figures of what preparation did: drawn where there is something to see, true to their numbers, whole on the page."""

from __future__ import annotations

import dataclasses

import numpy as np
import pytest
from look.test_preparation import looked
from look_views import planted
from numpy.testing import assert_allclose
from prepare.measured import log, table_of, with_runs
from prepare.sequences import sequence

from workbench.figures import draw_preparation, figure_files
from workbench.look import look_at_preparation

POOLS = looked("intensities", sequence(p=60).table)
BATCHES = looked("intensities", sequence(p=60, batches=3, steps=0.5).table)


def named(look) -> dict:
    return {drawing.name: drawing for drawing in draw_preparation(look)}


def with_groups():
    view = planted(n=30)
    scale = np.log2(np.linspace(0.2, 3.0, 30))
    return look_at_preparation(view, scale, (), shapes=None)


def test_only_steps_that_changed_something_are_drawn() -> None:
    assert set(named(POOLS)) == {"drift", "pool_scatter", "scale", "levels"}
    assert set(named(looked("log", log()))) == {"scale", "levels"}
    few = with_runs(table_of(2.0 ** np.random.default_rng(1).normal(14, 2, (12, 40))), pools=4,
                    controls=2.0 ** np.random.default_rng(2).normal(14, 0.1, (4, 40)))  # fmt: skip
    assert set(named(looked("intensities", few))) == {"pool_scatter", "scale", "levels"}
    assert draw_preparation(dataclasses.replace(looked("log", log()), scale=np.zeros(14), before=None)) == ()


@pytest.mark.parametrize("look", [POOLS, BATCHES, with_groups()], ids=["pools", "batches", "groups"])
def test_every_text_stays_on_its_page_and_every_caption_says_what_may_be_concluded(look) -> None:
    for drawing in draw_preparation(look):
        drawn, page = drawing.figure.get_tightbbox(), drawing.figure.get_size_inches()
        assert drawn.min.min() >= -0.02, drawing.name
        assert (drawn.max <= page + 0.02).all(), drawing.name
        assert len(drawing.caption) > 200
        assert ".tsv" in drawing.caption


def test_pools_lie_where_they_are_and_the_course_breaks_between_batches() -> None:
    axes = named(BATCHES)["drift"].figure.axes
    effect, left, right = BATCHES.drift, axes[0], axes[1]
    drawn = left.collections[1].get_offsets()
    pool = np.array(effect.runs.role) == "pool"
    assert_allclose(drawn[:, 1], effect.before[pool, 0])
    assert_allclose(right.collections[1].get_offsets()[:, 1], effect.after[pool, 0])
    assert len([line for line in left.lines if line.get_linestyle() == "-"]) == 3
    assert left.get_ylim() == right.get_ylim()


def test_scatter_curves_end_where_all_features_are() -> None:
    axes = named(POOLS)["pool_scatter"].figure.axes[0]
    before, after, limit = axes.lines
    assert before.get_ydata()[-1] == after.get_ydata()[-1] == pytest.approx(100.0)
    assert np.median(after.get_xdata()) < np.median(before.get_xdata())
    assert limit.get_xdata()[0] == pytest.approx(30.0)


def test_groups_stand_side_by_side_with_their_means() -> None:
    look = with_groups()
    left, right = named(look)["scale"].figure.axes
    bars = [
        line
        for line in right.collections
        if len(line.get_paths()) == 1 and line.get_offsets().shape == (1, 2)
    ]
    heights = [float(bar.get_paths()[0].vertices[0, 1]) for bar in bars]
    assert_allclose(sorted(heights), sorted(look.scale[look.groups.members(k)].mean() for k in (0, 1)))
    assert [label.get_text() for label in right.get_xticklabels()] == ["control", "drought"]
    assert "concentration" in left.get_ylabel()


def test_a_second_drawing_gives_the_same_bytes() -> None:
    look = dataclasses.replace(POOLS, before=None)
    assert dict(figure_files(draw_preparation(look)[:1])) == dict(figure_files(draw_preparation(look)[:1]))
