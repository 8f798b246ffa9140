"""Near-duplicates inside a layer: adducts of one metabolite, isoforms of one gene, probes of one site.

Rule: two features are near-duplicates when their correlation after the nuisance is at least ``NEAR`` (0.9) and
beyond what chance could make of any pair in the block (Bonferroni at 0.05 over all pairs: at few samples the
bar is higher). The feature with most near-duplicates leads a cluster that takes in all of its near-duplicates;
of what is left the next one leads, and so on. Ties go to the larger mean, then to the place in ``order``. Every
member is thus a near-duplicate of its leader: chains of resemblance do not grow.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from workbench.engine.nuisance import Nuisance
from workbench.engine.pairs.unit_rows import UnitRows, check_side
from workbench.engine.tails import critical_r
from workbench.errors import NumericsError

FloatArray = NDArray[np.float64]
IndexArray = NDArray[np.intp]

#: Smallest correlation of near-duplicates.
NEAR = 0.9
#: Chance that any pair of unrelated features is taken for near-duplicates, at most.
CHANCE = 0.05
_BATCH = 256
#: Rounding that decides nothing.
_ROUNDING = 1e-10


@dataclass(frozen=True, eq=False)
class FeatureClusters:
    """Clusters of near-duplicates.

    Attributes
    ----------
    leader : ndarray of int, shape (n_features,)
        Position of the feature that leads each feature's cluster; a feature without near-duplicates leads
        itself.
    size : ndarray of int, shape (n_features,)
        Members of each feature's cluster, itself counted.
    correlation : ndarray of shape (n_features,)
        With the leader; 1 for leaders, NaN for a feature without variance.
    bar : float
        Correlation that near-duplicates needed.
    """

    leader: IndexArray
    size: IndexArray
    correlation: FloatArray
    bar: float

    @property
    def n_clusters(self) -> int:
        """Clusters of two features and more."""
        return int(np.unique(self.leader[self.size > 1]).size)


def near_duplicates(
    x: FloatArray,
    nuisance: FloatArray | Nuisance | None = None,
    *,
    near: float = NEAR,
    order: IndexArray | None = None,
) -> FeatureClusters:
    """Clusters of near-duplicates among the features of a block; no matrix of all pairs is ever held.

    Parameters
    ----------
    x : ndarray of shape (n_samples, n_features)
        Prepared values.
    nuisance : ndarray of shape (n_samples, n_columns), Nuisance, optional
        With the group among it, features are not near-duplicates for following the group alike.
    near : float
        Smallest correlation, above 0 and below 1.
    order : ndarray of shape (n_features,), optional
        Ranks that break the last ties (those of the names, so that the columns' order has no part).

    Raises
    ------
    NumericsError
        When shapes or values do not allow correlations.

    Examples
    --------
    >>> rng = np.random.default_rng(0)
    >>> x = rng.normal(size=(40, 6))
    >>> x[:, [1, 4]] = x[:, [2]] + 0.1 * rng.normal(size=(40, 2)) - 5.0
    >>> near_duplicates(x).leader
    array([0, 2, 2, 3, 2, 5])
    """
    check_side(x, None, "the block")
    if not 0.0 < near < 1.0:
        raise NumericsError(f"near is {near}; it must lie between 0 and 1")
    n, p = x.shape
    removed = nuisance if isinstance(nuisance, Nuisance) else Nuisance.of(nuisance, n)
    if removed.n_samples != n or n - removed.rank < 2:
        raise NumericsError(
            f"{n} samples and a nuisance of {removed.n_samples} with {removed.rank} dimensions (with intercept) "
            "leave no correlation; give the same samples, and fewer columns"
        )
    rows = UnitRows(x, removed, ranks=False)
    rows.hold()
    units = rows.rows(0, p)
    bar = max(near, float(critical_r(2.0 * CHANCE / max(p * (p - 1) / 2, 1), n - removed.rank - 1)))
    count = _neighbours(units, bar)
    with np.errstate(invalid="ignore"):
        mean = np.nan_to_num(np.asarray(x, dtype=np.float64).mean(axis=0))
    places = np.arange(p) if order is None else np.asarray(order)
    ranked = np.lexsort((places, -np.round(mean, 9), -count))
    leader, correlation = _lead(units, ranked[count[ranked] > 0], bar)
    correlation[~rows.testable] = np.nan
    return FeatureClusters(leader, np.bincount(leader, minlength=p)[leader], correlation, bar)


def _neighbours(units: FloatArray, bar: float) -> IndexArray:
    """Count the near-duplicates of each feature."""
    p = len(units)
    count = np.zeros(p, dtype=np.intp)
    for start in range(0, p, _BATCH):
        tile = units[start : start + _BATCH] @ units[start:].T
        close = tile >= bar - _ROUNDING
        size = len(tile)
        count[start : start + size] += close[:, size:].sum(axis=1)
        count[start + size :] += close[:, size:].sum(axis=0)
        count[start : start + size] += close[:, :size].sum(axis=1) - close[:, :size].diagonal()
    return count


def _lead(units: FloatArray, ranked: IndexArray, bar: float) -> tuple[IndexArray, FloatArray]:
    """Let each feature that is free lead all free near-duplicates, in the order given."""
    leader, correlation = np.arange(len(units)), np.ones(len(units))
    free = np.ones(len(units), dtype=np.bool_)
    while ranked.size:
        batch, ranked = ranked[:_BATCH], ranked[_BATCH:]
        tile = units[batch] @ units.T
        for k, feature in enumerate(batch):
            if not free[feature]:
                continue
            taken = free & (tile[k] >= bar - _ROUNDING)
            taken[feature] = False
            leader[taken], correlation[taken] = feature, np.minimum(tile[k, taken], 1.0)
            free[taken] = free[feature] = False
        ranked = ranked[free[ranked]]
    return leader, correlation
