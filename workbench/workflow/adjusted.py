"""Two features as their test saw them: the values before and after what was removed."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from workbench.engine import Nuisance
from workbench.intake import Groups
from workbench.workflow.analysis_view import AnalysisView

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
    view: AnalysisView, ends: tuple[tuple[str, str], tuple[str, str]], within: bool
) -> PairValues:
    """Return two features, each given as (block, feature), as the screen of the analysis saw them."""
    (first, x_name), (second, y_name) = ends
    shared = view.shared((first, second))
    nuisance = Nuisance.of(shared.within if within else shared.nuisance, shared.n)
    columns = [_column(view, first, x_name, shared.samples), _column(view, second, y_name, shared.samples)]
    (x, x_imputed), (y, y_imputed) = columns
    left = nuisance.residuals(np.column_stack([x, y]))
    removed = list(shared.nuisance_names)
    if within and view.factors:
        removed.append(f"{'+'.join(view.factors)} (group)")
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


def _column(
    view: AnalysisView, block: str, feature: str, samples: tuple[str, ...]
) -> tuple[FloatArray, NDArray[np.bool_]]:
    loaded = view.blocks[block]
    rows, place = loaded.rows(samples), loaded.features.index(feature)
    return loaded.values[rows, place], loaded.imputed[rows, place]
