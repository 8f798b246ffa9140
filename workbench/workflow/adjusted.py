"""Two features as their test saw them: the values before and after what was removed."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from workbench.engine import Nuisance
from workbench.engine.far_values import withstand
from workbench.intake import Groups
from workbench.workflow.analysis_view import AnalysisView, Shared
from workbench.workflow.screening import design_columns_of

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
    nuisance = Nuisance.of(columns, shared.n)
    x, x_imputed = _column(view, first, x_name, shared.samples)
    y, y_imputed = _column(view, second, y_name, shared.samples)
    left = np.column_stack(
        [_left(x, columns, private.get(first), shared), _left(y, columns, private.get(second), shared)]
    )
    removed = list(shared.nuisance_names)
    if within and view.factors:
        removed.append(f"{'+'.join(view.factors)} (group)")
    removed += [
        f"private variation of {block}" for block in (first, second) if private.get(block) is not None
    ]
    return PairValues(
        samples=shared.samples,
        groups=shared.groups,
        x=x,
        y=y,
        x_adjusted=left[:, 0],
        y_adjusted=left[:, 1],
        x_imputed=x_imputed,
        y_imputed=y_imputed,
        removed=tuple(removed),
        freedom=shared.n - nuisance.rank - 1,
    )


def _left(x: FloatArray, columns: FloatArray, private: pd.DataFrame | None, shared: Shared) -> FloatArray:
    """Return what the screen tested of one feature: residuals, heavy tails taken off where private variation went."""
    if private is None:
        return Nuisance.of(columns, shared.n).residuals(x[:, None])[:, 0]
    own = Nuisance.of(np.column_stack([columns, private.loc[list(shared.samples)]]), shared.n)
    return withstand(own.residuals(x[:, None]), own.n_samples - own.rank)[:, 0]


def _column(
    view: AnalysisView, block: str, feature: str, samples: tuple[str, ...]
) -> tuple[FloatArray, NDArray[np.bool_]]:
    loaded = view.blocks[block]
    rows, place = loaded.rows(samples), loaded.features.index(feature)
    return loaded.values[rows, place], loaded.imputed[rows, place]
