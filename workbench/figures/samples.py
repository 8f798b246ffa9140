"""Figures of the samples: scores with groups and odd samples, and the map of odd samples."""

from __future__ import annotations

import numpy as np
from matplotlib.axes import Axes
from numpy.typing import NDArray
from scipy.stats import f as f_law

from workbench.figures.labels import place_labels
from workbench.figures.marks import colour_of, draw_samples, line_of
from workbench.figures.style import GUIDE, SMALL, component_label, figure_name, note, plain_legend
from workbench.look.block import BlockLook, flagged_samples
from workbench.look.view import Levels

FloatArray = NDArray[np.float64]

FEWEST_FOR_ELLIPSE = 8
ELLIPSE_LEVEL = 0.95
ALL_LABELLED = 12
MOST_LABELLED = 12
NAME_BESIDE_POINT = 14


def score_plot(look: BlockLook, axes: Axes, first: int = 1, second: int = 2) -> Axes:
    """Draw the samples on two components: colour and line by group, mark by the shaping column.

    Both axes have one unit of length. Groups of at least 8 samples get the ellipse that covers the next sample
    of a normal group with probability 0.95. Labelled are the samples to check, and all where they are few.

    Parameters
    ----------
    look : BlockLook
    axes : matplotlib Axes
        Its size must be final: labels are placed by it.
    first, second : int
        Components, from 1; a second one that the block lacks is drawn as 0.
    """
    has_second = second <= look.scores.shape[1]
    along = look.scores[:, first - 1]
    points = np.column_stack([along, look.scores[:, second - 1] if has_second else np.zeros_like(along)])
    outlines = _ellipses(points, look.groups) if look.groups is not None and has_second else {}
    _square(axes, points, list(outlines.values()))
    axes.axhline(0.0, color=GUIDE, linewidth=0.4, zorder=0)
    axes.axvline(0.0, color=GUIDE, linewidth=0.4, zorder=0)
    draw_samples(look, axes, points, 22.0)
    for group, (x, y) in outlines.items():
        axes.plot(x, y, color=colour_of(group), linestyle=line_of(group), linewidth=0.9, zorder=2)
    _label_samples(look, axes, points, all_if_few=True)
    axes.set_xlabel(component_label(first, float(look.shares[first - 1])))
    axes.set_ylabel(
        component_label(second, float(look.shares[second - 1])) if has_second else "no further component"
    )
    return axes


def _square(axes: Axes, points: FloatArray, outlines: list[FloatArray]) -> None:
    """Give both axes one length, with room for labels, and for outlines that do not squeeze the points."""
    span = float(np.ptp(points, axis=0).max())
    every = np.vstack(
        [points, *(outline.T for outline in outlines if np.ptp(outline, axis=1).max() <= 2.0 * span)]
    )
    low, high = every.min(axis=0), every.max(axis=0)
    room = 1.1 if len(every) > len(points) else 1.36
    half = max(float((high - low).max()) / 2.0 * room, span * 0.68, 1e-9)
    centre = (low + high) / 2.0
    axes.set_xlim(centre[0] - half, centre[0] + half)
    axes.set_ylim(centre[1] - half, centre[1] + half)
    axes.set_aspect("equal", adjustable="box")


def _ellipses(points: FloatArray, groups: Levels) -> dict[int, FloatArray]:
    """For each group that is large enough the outline that holds its next sample with probability 0.95."""
    members = {group: points[groups.members(group)] for group in range(len(groups.levels))}
    return {g: prediction_ellipse(own).T for g, own in members.items() if len(own) >= FEWEST_FOR_ELLIPSE}


def prediction_ellipse(points: FloatArray, level: float = ELLIPSE_LEVEL, places: int = 120) -> FloatArray:
    """Outline that covers the next point of a bivariate normal sample with probability ``level``.

    ``(x - m)' S^-1 (x - m) = 2 (n - 1)(n + 1) / (n (n - 2)) F(level; 2, n - 2)``.

    Parameters
    ----------
    points : ndarray of shape (n, 2)
        At least 3.

    Returns
    -------
    ndarray of shape (places, 2)
    """
    n = len(points)
    scale = 2.0 * (n - 1) * (n + 1) / (n * (n - 2)) * f_law.ppf(level, 2, n - 2)
    values, vectors = np.linalg.eigh(np.cov(points.T))
    angle = np.linspace(0.0, 2.0 * np.pi, places)
    circle = np.column_stack([np.cos(angle), np.sin(angle)])
    outline: FloatArray = points.mean(axis=0) + circle * np.sqrt(np.maximum(values, 0.0) * scale) @ vectors.T
    return outline


def _label_samples(look: BlockLook, axes: Axes, points: FloatArray, all_if_few: bool) -> None:
    """Label the samples to check, furthest past their limits first, then the others where they are few."""
    flagged = flagged_samples(look.flags)
    others = (
        [i for i in range(len(points)) if i not in flagged]
        if all_if_few and len(points) <= ALL_LABELLED
        else []
    )
    chosen = (flagged + others)[:MOST_LABELLED]
    texts = [figure_name(look.samples[i], NAME_BESIDE_POINT) for i in chosen]
    place_labels(axes, points[chosen], texts, obstacles=points)


def outlier_map(look: BlockLook, axes: Axes) -> Axes:
    """Draw Hotelling's T2 against the squared prediction error of every sample, with 95 % and 99 % limits.

    To the right: far out within the model. At the top: not explained by the model. Both axes count in units
    of their 99 % limit.
    """
    found = look.distances
    unit = np.array([found.t2_limits[-1], found.spe_limits[-1]])
    if not np.isfinite(unit).all() or (unit <= 0.0).any():
        return note(axes, f"{len(look.samples)} samples: no limits exist")
    points = np.column_stack([found.t2, found.spe]) / unit
    right, top = np.maximum(points.max(axis=0) * 1.18, 1.25)
    axes.set_xlim(0.0, right)
    axes.set_ylim(0.0, top)
    limits = np.column_stack([found.t2_limits, found.spe_limits]) / unit
    for level, (x, y), line in zip(found.levels, limits, ("--", "-"), strict=True):
        axes.axvline(x, color=GUIDE, linestyle=line, linewidth=0.8, label=f"{100 * level:.0f} % limit")
        axes.axhline(y, color=GUIDE, linestyle=line, linewidth=0.8)
    draw_samples(look, axes, points, 18.0)
    _label_samples(look, axes, points, all_if_few=False)
    inside = f"first {found.n_components} components" if found.n_components > 1 else "first component"
    axes.set_xlabel(f"T2 within the {inside} / 99 % limit")
    axes.set_ylabel("squared prediction error / 99 % limit")
    plain_legend(
        axes, loc="lower left", bbox_to_anchor=(0.0, 1.0), ncols=2, borderaxespad=0.2, fontsize=SMALL
    )
    return axes
