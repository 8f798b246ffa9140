"""Figures of what layers share: what they show, and the same bytes twice."""

from __future__ import annotations

import numpy as np
import pytest
from matplotlib.figure import Figure

from workbench.engine.look.association import SampleColumn, associate
from workbench.figures import figure_bytes
from workbench.figures.canonical import (
    CanonicalView,
    LayerDrawn,
    account_figure,
    correlation_figure,
    draw_canonical,
)


def view_of(components: int, layers: int = 3, groups: bool = True, validated: bool = True) -> CanonicalView:
    rng = np.random.default_rng(0)
    scores = rng.normal(size=(20, components))
    drawn = []
    for k in range(layers):
        variates = scores + 0.3 * rng.normal(size=scores.shape)
        if k == 2:
            variates[:4] = np.nan
        correlations = rng.uniform(-0.9, 0.9, size=(30, components))
        names = tuple(f"$x_{{{k}}}$ feature {j}" for j in range(30))
        drawn.append(LayerDrawn(f"layer{k}", variates, names, correlations, 0.8 * correlations))
    column = SampleColumn("dose", "number", scores[:, 0])
    return CanonicalView(
        layers=tuple(drawn),
        units="samples",
        correlations=np.linspace(0.9, 0.6, components),
        cross_validated=np.linspace(0.7, 0.1, components) if validated else np.full(components, np.nan),
        errors=np.full(components, 0.1) if validated else np.full(components, np.nan),
        null=rng.uniform(0.4, 0.6, size=(40, components)),
        p=np.full(components, 0.01),
        axes=components,
        groups=("a", "b") * 10 if groups else (),
        levels=("a", "b") if groups else (),
        accounts=tuple((f"block{k}", (0.3, 0.1, 0.2, 0.4)) for k in range(layers)),
        association=associate(scores, (column,)),
    )


@pytest.mark.parametrize(("components", "layers"), [(1, 2), (3, 3)])
def test_every_figure_that_the_components_allow_is_drawn(components: int, layers: int) -> None:
    """Circles need two components; every figure has a caption that ends a sentence."""
    drawings = draw_canonical(view_of(components, layers))
    names = [one.name for one in drawings]
    assert ("circles" in names) == (components > 1)
    assert {"correlations", "variates", "leading_features", "account", "association"} <= set(names)
    assert all(one.caption.endswith(".") for one in drawings)


def test_equal_views_give_equal_bytes() -> None:
    first, second = (draw_canonical(view_of(2, groups=False)) for _ in "ab")
    for one, other in zip(first, second, strict=True):
        assert figure_bytes(one, "svg") == figure_bytes(other, "svg")


def test_in_and_out_of_sample_stand_beside_each_other() -> None:
    """Without a cross-validation only the in-sample points and the band are there."""
    for validated, entries in ((True, 3), (False, 2)):
        axes = correlation_figure(view_of(2, validated=validated), Figure().add_subplot())
        assert len(axes.get_legend_handles_labels()[1]) == entries
        assert any("p = 0.01" in text.get_text() for text in axes.texts)


def test_the_account_fills_the_whole_bar() -> None:
    """Four parts for three layers, three for two, which have nothing shared by some."""
    axes = account_figure(view_of(1, 3), Figure().add_subplot())
    widths = np.array([patch.get_width() for patch in axes.patches]).reshape(4, 3)
    assert widths.sum(axis=0) == pytest.approx(100.0)
    assert len(account_figure(view_of(1, 2), Figure().add_subplot()).patches) == 6
