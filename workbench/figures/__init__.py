"""Figures: each function takes a result and matplotlib axes and returns the axes; whole figures come as files."""

from workbench.figures.agreement import agreement_map
from workbench.figures.drawing import (
    Drawing,
    caption_text,
    draw_between,
    draw_look,
    figure_bytes,
    figure_files,
)
from workbench.figures.features import biplot, correlation_circle, loadings_plot
from workbench.figures.gaps import gap_figure, gaps_by_abundance, spread_plot
from workbench.figures.marks import sample_legend
from workbench.figures.preparation import (
    drift_plot,
    levels_plot,
    pool_scatter_plot,
    scale_by_group,
    scale_plot,
)
from workbench.figures.preparation_pages import draw_preparation
from workbench.figures.samples import outlier_map, score_plot
from workbench.figures.style import figure_style
from workbench.figures.variance import association_map, cumulative_variance, explained_variance

__all__ = [
    "Drawing",
    "agreement_map",
    "association_map",
    "biplot",
    "caption_text",
    "correlation_circle",
    "cumulative_variance",
    "draw_between",
    "draw_look",
    "draw_preparation",
    "drift_plot",
    "explained_variance",
    "figure_bytes",
    "figure_files",
    "figure_style",
    "gap_figure",
    "gaps_by_abundance",
    "levels_plot",
    "loadings_plot",
    "outlier_map",
    "pool_scatter_plot",
    "sample_legend",
    "scale_by_group",
    "scale_plot",
    "score_plot",
    "spread_plot",
]
