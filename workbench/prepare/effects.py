"""What taking drift away did, run by run: for a reader who wants to see it before trusting it."""

from __future__ import annotations

from collections.abc import Collection
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from workbench.prepare.controls import PoolScatter
from workbench.prepare.drift import FittedDrift, as_logs, relative_amounts, relative_sd
from workbench.prepare.drift_courses import CURVE, LEVEL, NONE
from workbench.prepare.recipe import Recipe
from workbench.prepare.runs import Runs, RunTable
from workbench.prepare.steps import FitContext
from workbench.prepare.tables import Matrix, MeasuredTable, StepTable

MOST_SHOWN = 4
COURSE_NAMES = {NONE: "left alone", LEVEL: "level of each batch", CURVE: "curve"}


@dataclass(frozen=True, eq=False)
class DriftEffect:
    """What the drift step did to the runs of a block; all values are log2.

    Attributes
    ----------
    features : tuple of str
        All features that reached the step, and of each in that order
    courses : tuple of str
        which course it took (``curve``, ``level of each batch``, ``left alone``),
    moved : ndarray of shape (n_features,)
        the range of what was taken from the sample runs,
    scatter_before, scatter_after : ndarrays of shape (n_features,)
        the relative standard deviation over the pools, after with each pool corrected by a course that has not
        seen it; NaN with fewer than two pools.
    largest_scatter : float
        Features that scatter more over the pools are dropped in the next step; NaN where that is switched off.
    shown : tuple of int
        Positions of the features that moved most, the first one most.
    runs : Runs
        Sample runs and pools that have an order, batch after batch; a pool without one takes no part in anything.
    before, course, after : ndarrays of shape (n_runs, n_shown)
        The shown features' values as delivered, what was taken (plus the feature's middle), and what is left.
    """

    features: tuple[str, ...]
    courses: tuple[str, ...]
    moved: Matrix
    scatter_before: Matrix
    scatter_after: Matrix
    largest_scatter: float
    shown: tuple[int, ...]
    runs: Runs
    before: Matrix
    course: Matrix
    after: Matrix

    @property
    def pools(self) -> int:
        """Number of pools that are drawn."""
        return len(self.runs.rows_as("pool"))

    @property
    def corrected(self) -> int:
        """Number of features from which something was taken."""
        return sum(course != COURSE_NAMES[NONE] for course in self.courses)


def drift_effect(
    recipe: Recipe,
    table: MeasuredTable,
    *,
    smallest_group: int | None,
    seed: int,
    among: Collection[str] | None = None,
    most: int = MOST_SHOWN,
) -> DriftEffect | None:
    """Return what the drift step of a recipe does to a table; None where it has no such step, or no pool.

    Parameters
    ----------
    recipe : Recipe
    table : MeasuredTable
    smallest_group, seed
        As for :meth:`workbench.prepare.Recipe.fit`.
    among : collection of str, optional
        Features that may be shown, such as those that preparation has kept; None: all.
    most : int, default 4
        How many features are shown.
    """
    limit = next((step.largest for step in recipe.steps if isinstance(step, PoolScatter)), float("nan"))
    current, context = StepTable.of(table), FitContext(smallest_group, seed)
    for step in recipe.steps_for(table):
        fitted = step.fit(current, context)
        if isinstance(fitted, FittedDrift):
            return _effect(current, fitted, among, most, limit)
        current, _ = fitted.transform(current)
    return None


def _effect(
    table: StepTable, fitted: FittedDrift, among: Collection[str] | None, most: int, limit: float
) -> DriftEffect | None:
    runs, controls = table.runs, table.controls
    assert runs is not None
    assert controls is not None
    pools = controls.take(controls.rows_as("pool"))
    pools = pools.take(np.flatnonzero(~np.isnan(pools.order)))
    if not pools.runs:
        return None
    corrected = fitted.corrected(pools)
    removed = fitted.removed(runs)
    kinds = fitted.courses.kinds
    moved = np.ptp(removed, axis=0)
    logged = fitted.settings.logged
    shown = _shown(moved, kinds != NONE, table.features, among, most)
    order, drawn = _sequence(runs, pools)
    columns = list(shown)

    def in_order(samples: Matrix, of_pools: Matrix) -> Matrix:
        return np.vstack([samples[:, columns], of_pools[:, columns]])[order]

    before = in_order(as_logs(table.values, logged), as_logs(pools.values, logged))
    taken = in_order(removed, fitted.removed(pools))
    after = in_order(as_logs(table.values, logged) - removed, as_logs(corrected.values, logged))
    return DriftEffect(
        features=table.features,
        courses=tuple(COURSE_NAMES[int(kind)] for kind in kinds),
        moved=moved,
        scatter_before=relative_sd(relative_amounts(pools.values, logged)),
        scatter_after=relative_sd(relative_amounts(corrected.values, logged)),
        largest_scatter=limit,
        shown=shown,
        runs=drawn,
        before=before,
        course=taken + np.nanmedian(before - taken, axis=0) if columns else taken,
        after=after,
    )


def _shown(
    moved: Matrix,
    corrected: NDArray[np.bool_],
    features: tuple[str, ...],
    among: Collection[str] | None,
    most: int,
) -> tuple[int, ...]:
    """Return the features that moved most; equal ones in the order of the table."""
    allowed = np.array([among is None or name in among for name in features]) & corrected
    ranked = np.argsort(-np.where(allowed, moved, -1.0), kind="stable")
    return tuple(int(place) for place in ranked[:most] if allowed[place])


def _sequence(samples: Runs, pools: RunTable) -> tuple[NDArray[np.intp], Runs]:
    """Return the places of sample runs and then pools, batch after batch in run order, and what is known of them."""
    batch = np.array([*samples.batch, *pools.batch], dtype=object)
    place = np.concatenate([samples.order, pools.order])
    known = np.flatnonzero(~np.isnan(place))
    start = {name: float(place[known][batch[known] == name].min()) for name in set(batch[known])}
    first = [(start[batch[row]], batch[row], place[row], row) for row in known]
    order = np.array([row for *_, row in sorted(first)], dtype=np.intp)

    def joined(one: tuple[str, ...], other: tuple[str, ...]) -> tuple[str, ...]:
        both = (*one, *other)
        return tuple(both[row] for row in order)

    drawn = Runs(
        runs=joined(samples.runs, pools.runs),
        sample=joined(samples.sample, pools.sample),
        role=joined(samples.role, pools.role),
        order=place[order],
        batch=joined(samples.batch, pools.batch),
        replicate=joined(samples.replicate, pools.replicate),
    )
    return order, drawn
