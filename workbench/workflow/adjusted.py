"""Two features as their test saw them: the values before and after what was removed."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, replace

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from workbench.engine import Nuisance, SubjectDesign, subject_means
from workbench.engine.far_values import withstand
from workbench.engine.nuisance import indicators
from workbench.intake import Groups
from workbench.workflow.analysis_view import AnalysisView
from workbench.workflow.screening import design_columns_of, is_repeated

FloatArray = NDArray[np.float64]


@dataclass(frozen=True, eq=False)
class PairValues:
    """Two features on the samples that their blocks share.

    ``x``, ``y`` are prepared values; ``x_adjusted``, ``y_adjusted`` what is left of them once ``removed`` (in words)
    is taken away, in the same units; ``x_imputed``, ``y_imputed`` mark values that were filled in; ``freedom`` are
    the degrees of freedom of their correlation.
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

    @property
    def r(self) -> float:
        """Correlation of the adjusted values."""
        return correlation(self.x_adjusted, self.y_adjusted)

    def r_by_group(self) -> dict[str, tuple[int, float]]:
        """Return the number of samples and the correlation of the adjusted values in each group."""
        if self.groups is None:
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
    private: Mapping[str, pd.DataFrame | None],
) -> PairValues:
    """Return two features, each given as (block, feature), as the screen of the analysis saw them.

    ``private`` holds, for each block that had some removed, the scores of its private variation by sample.
    """
    (first, x_name), (second, y_name) = ends
    shared = view.shared((first, second))
    columns = design_columns_of(view, shared, within)
    x, x_imputed = _column(view, first, x_name, shared.samples)
    y, y_imputed = _column(view, second, y_name, shared.samples)
    removed = list(shared.nuisance_names)
    if within and view.factors:
        removed.append(f"{'+'.join(view.factors)} (group)")
    taken = _Taken(shared.samples, shared.groups, np.column_stack([x, y]), columns, x_imputed, y_imputed)
    if is_repeated(shared) and shared.subjects is not None:
        if view.settings.level == "subjects":
            taken = _means(taken, shared.subjects, view.study.samples.subject or "", view)
        else:
            taken = _deviations(taken, shared.subjects)
            removed += ["each subject's own mean", "the visits' common course"]
    removed += [
        f"private variation of {block}" for block in (first, second) if private.get(block) is not None
    ]
    sides = [_left(taken, k, private.get(block)) for k, block in enumerate((first, second))]
    return PairValues(
        samples=taken.samples,
        groups=taken.groups,
        x=taken.values[:, 0],
        y=taken.values[:, 1],
        x_adjusted=sides[0],
        y_adjusted=sides[1],
        x_imputed=taken.x_imputed,
        y_imputed=taken.y_imputed,
        removed=tuple(removed),
        freedom=len(taken.samples) - Nuisance.of(taken.columns, len(taken.samples)).rank - 1,
    )


@dataclass(frozen=True, eq=False)
class _Taken:
    """Both features (n, 2) on some rows, what is to be removed from them, and which values were filled in."""

    samples: tuple[str, ...]
    groups: Groups | None
    values: FloatArray
    columns: FloatArray
    x_imputed: NDArray[np.bool_]
    y_imputed: NDArray[np.bool_]


def _deviations(taken: _Taken, design: SubjectDesign) -> _Taken:
    """Add subjects and visits to what is removed: what is left are the changes that the screen compares."""
    columns = np.hstack([taken.columns, indicators(design.subject), indicators(design.visit)])
    return replace(taken, columns=columns)


def _means(taken: _Taken, design: SubjectDesign, column: str, view: AnalysisView) -> _Taken:
    """Return one row for each subject: the mean of its samples."""
    first = np.unique(design.subject, return_index=True)[1]
    groups = taken.groups
    if groups is not None:
        constant = np.array_equal(groups.codes, groups.codes[first][design.subject])
        groups = replace(groups, codes=groups.codes[first]) if constant else None
    filled = [
        subject_means(design, mask.astype(np.float64)[:, None])[:, 0] > 0.0
        for mask in (taken.x_imputed, taken.y_imputed)
    ]
    return _Taken(
        tuple(str(view.sheet.loc[taken.samples[row], column]) for row in first),
        groups,
        subject_means(design, taken.values),
        subject_means(design, taken.columns),
        filled[0],
        filled[1],
    )


def _left(taken: _Taken, side: int, private: pd.DataFrame | None) -> FloatArray:
    """Return what the screen tested of one feature: residuals, heavy tails taken off where private variation went."""
    x, n = taken.values[:, [side]], len(taken.samples)
    if private is None:
        return Nuisance.of(taken.columns, n).residuals(x)[:, 0]
    own = Nuisance.of(np.column_stack([taken.columns, private.loc[list(taken.samples)]]), n)
    return withstand(own.residuals(x), own.n_samples - own.rank)[:, 0]


def _column(
    view: AnalysisView, block: str, feature: str, samples: tuple[str, ...]
) -> tuple[FloatArray, NDArray[np.bool_]]:
    loaded = view.blocks[block]
    rows, place = loaded.rows(samples), loaded.features.index(feature)
    return loaded.values[rows, place], loaded.imputed[rows, place]
