"""Two features as their test saw them: the values before and after what was removed."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from workbench.engine import Nuisance, SubjectDesign, SubjectSpace, subject_means
from workbench.intake import Groups
from workbench.workflow.analysis_view import AnalysisView, Shared, subject_names
from workbench.workflow.network.private import PrivatePart
from workbench.workflow.network.screening import design_columns_of, is_repeated
from workbench.workflow.network.tested_values import tested_on_rows, tested_on_samples

FloatArray = NDArray[np.float64]


@dataclass(frozen=True, eq=False)
class PairValues:
    """Two features on the samples that their blocks share.

    ``x``, ``y`` are prepared values; ``x_adjusted``, ``y_adjusted`` what was tested: what is left of them (of their
    ranks, for Spearman's correlation) once ``removed`` (in words) is taken away. ``x_imputed``, ``y_imputed`` mark
    values that were filled in; ``freedom`` are the degrees of freedom of their correlation; ``apart`` tells whether the
    groups are of different subjects.
    """

    samples: tuple[str, ...]
    groups: Groups | None
    x: FloatArray
    y: FloatArray
    x_adjusted: FloatArray
    y_adjusted: FloatArray
    x_imputed: NDArray[np.bool_]
    y_imputed: NDArray[np.bool_]
    removed: tuple[str, ...]
    freedom: int
    apart: bool = True

    @property
    def r(self) -> float:
        """Correlation of the adjusted values."""
        return correlation(self.x_adjusted, self.y_adjusted)

    def r_by_group(self) -> dict[str, tuple[int, float]]:
        """Return the number of samples and the correlation of the adjusted values in each group.

        Nothing without groups, and where subjects change theirs: one subject's deviations then hang together.
        """
        if self.groups is None or not self.apart:
            return {}
        found = {}
        for code, level in enumerate(self.groups.levels):
            rows = self.groups.codes == code
            found[level] = int(rows.sum()), correlation(self.x_adjusted[rows], self.y_adjusted[rows])
        return found


def correlation(x: FloatArray, y: FloatArray) -> float:
    """Return Pearson's correlation, NaN with fewer than three samples or without variation.

    Examples
    --------
    >>> round(correlation(np.array([1.0, 2.0, 3.0]), np.array([2.0, 1.0, 4.0])), 3)
    0.655
    """
    if x.size < 3:
        return float("nan")
    a, b = x - x.mean(), y - y.mean()
    size = float(np.sqrt((a @ a) * (b @ b)))
    return float(a @ b) / size if size > 0.0 else float("nan")


def pair_values(
    view: AnalysisView,
    ends: tuple[tuple[str, str], tuple[str, str]],
    within: bool,
    private: Mapping[str, PrivatePart | None],
) -> PairValues:
    """Return two features, each given as (block, feature), as the screen of the analysis saw them.

    ``private`` holds what the network stage did to each block; where subjects have several samples it is done again.
    """
    (first, x_name), (second, y_name) = ends
    shared = view.shared((first, second))
    columns = design_columns_of(view, shared, within)
    x, x_imputed = _column(view, first, x_name, shared.samples)
    y, y_imputed = _column(view, second, y_name, shared.samples)
    removed = list(shared.nuisance_names)
    if within and view.factors:
        removed.append(f"{'+'.join(view.factors)} (group)")
    taken = _Taken(shared.samples, shared.groups, np.column_stack([x, y]), x_imputed, y_imputed)
    parts = {block: private.get(block) for block in (first, second)}
    gone = [f"private variation of {block}" for block, part in parts.items() if part and part.scores.shape[1]]
    if is_repeated(shared):
        rows = tested_on_rows(view, (first, second), shared, columns, within)
        places = [view.blocks[block].features.index(feature) for block, feature in ends]
        tested = [rows.values[block][:, [place]] for (block, _), place in zip(ends, places, strict=True)]
        sides = [rows.space.on_samples(side)[:, 0] for side in tested]
        freedom = rows.space.nuisance.n_samples - rows.space.nuisance.rank - 1
        taken = _at_level(taken, rows.space, shared, view)
        if rows.space.contrasts is not None:
            removed += ["each subject's own mean", "the visits' common course"]
            gone.append("the likeness of neighbouring visits")
    else:
        sides = [
            tested_on_samples(view, taken.values[:, [k]], shared.samples, columns, parts[block])[:, 0]
            for k, block in enumerate((first, second))
        ]
        freedom = shared.n - Nuisance.of(columns, shared.n).rank - 1
    return PairValues(
        samples=taken.samples,
        groups=taken.groups,
        x=taken.values[:, 0],
        y=taken.values[:, 1],
        x_adjusted=sides[0],
        y_adjusted=sides[1],
        x_imputed=taken.x_imputed,
        y_imputed=taken.y_imputed,
        removed=(*removed, *gone),
        freedom=freedom,
        apart=shared.groups_of_subjects,
    )


@dataclass(frozen=True, eq=False)
class _Taken:
    """Both features (n, 2) on some samples or subjects, and which values were filled in."""

    samples: tuple[str, ...]
    groups: Groups | None
    values: FloatArray
    x_imputed: NDArray[np.bool_]
    y_imputed: NDArray[np.bool_]


def _at_level(taken: _Taken, space: SubjectSpace, shared: Shared, view: AnalysisView) -> _Taken:
    """Return the samples of subjects that have several, or one row for each subject: the mean of its samples."""
    assert shared.subjects is not None
    if space.contrasts is not None:
        used = space.used
        groups = None if taken.groups is None else replace(taken.groups, codes=taken.groups.codes[used])
        samples = tuple(taken.samples[row] for row in used)
        return _Taken(samples, groups, taken.values[used], taken.x_imputed[used], taken.y_imputed[used])
    return _means(taken, shared, shared.subjects, view)


def _means(taken: _Taken, shared: Shared, design: SubjectDesign, view: AnalysisView) -> _Taken:
    first = np.unique(design.subject, return_index=True)[1]
    groups = taken.groups
    if groups is not None:
        groups = replace(groups, codes=groups.codes[first]) if shared.groups_of_subjects else None
    filled = [
        subject_means(design, mask.astype(np.float64)[:, None])[:, 0] > 0.0
        for mask in (taken.x_imputed, taken.y_imputed)
    ]
    names = tuple(subject_names(view, taken.samples))
    return _Taken(names, groups, subject_means(design, taken.values), filled[0], filled[1])


def _column(
    view: AnalysisView, block: str, feature: str, samples: tuple[str, ...]
) -> tuple[FloatArray, NDArray[np.bool_]]:
    loaded = view.blocks[block]
    rows, place = loaded.rows(samples), loaded.features.index(feature)
    return loaded.values[rows, place], loaded.imputed[rows, place]
