"""Drift over the run order, read off the pools: runs of one and the same mixture, spread over each batch.

For every feature three courses compete: none (one level for all batches), a level per batch (the median of its
pools), and a curve per batch (robust local regression of the pools' logarithms on run order; Dunn et al. 2011,
Nature Protocols 6:1060). Each pool is predicted from the others, left out in turn, and the simplest course
that predicts well is taken away from all runs. Where there are too few pools for a curve or a level, nothing is
changed and the account says so; before the first and after the last pool the course is held, never drawn on.
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import ClassVar

import numpy as np
from numpy.typing import NDArray

from workbench.errors import InputError
from workbench.intake.faults import counted
from workbench.prepare.drift_courses import (
    CURVE,
    FEWEST_FOR_LEVEL,
    LEVEL,
    NONE,
    BatchPools,
    CourseQuestion,
    Courses,
    answered,
)
from workbench.prepare.local_lines import medians, read_off
from workbench.prepare.refusal import PrepareRefusal
from workbench.prepare.runs import Runs, RunTable
from workbench.prepare.steps import FitContext, Settled
from workbench.prepare.tables import Matrix, StepAccount, StepTable, some
from workbench.prepare.words import percent

DUNN = "Dunn et al. 2011, Nature Protocols 6:1060; Cleveland 1979, JASA 74:829"
FEWEST_POOLS = 6
SPAN = 0.75
LARGEST_EXPONENT = 500.0


@dataclass(frozen=True)
class Drift(Settled):
    """Takes away each feature's drift over the run order.

    Parameters
    ----------
    logged : bool
        Whether the values are logarithms already; drift is taken from the logarithms in any case.
    fewest_pools : int
        Of a batch, for a curve.
    span : float
        Share of the pools in a window of the local regression.
    """

    logged: bool = False
    fewest_pools: int = FEWEST_POOLS
    span: float = SPAN
    step: str = "drift"
    rule: str = (
        "reads each feature's course over the run order off the pools and takes it away, where that predicts pools "
        "that were left out better than doing nothing"
    )
    why: ClassVar[str] = (
        "an instrument changes while it runs, for each feature in its own way; pools are one mixture and show how"
    )
    paper: ClassVar[str] = DUNN
    keys: ClassVar[tuple[str, ...]] = ("drift", "fewest_pools", "span")
    runs_only: ClassVar[bool] = True

    def fit(self, table: StepTable, context: FitContext) -> FittedDrift:  # noqa: ARG002
        """Return the step as learnt from the pools; sample runs teach it nothing.

        Courses are fitted to all features as delivered, before samples have decided which of them are left: so the
        answer is one and the same for every set of training samples, and is worked out once.
        """
        if table.delivered is None or table.controls is None:
            raise InputError("drift is read off the pools of a run sheet, and there is none")
        courses = answered(self.question(table.delivered.controls))
        return FittedDrift(self, _pools_of(table.controls), courses.of_features(table.delivered.places))

    def question(self, controls: RunTable) -> CourseQuestion:
        """Return what is asked of the pools among some controls; those without an order say nothing."""
        pools = _pools_of(controls)
        placed = pools.take(np.flatnonzero(~np.isnan(pools.order)))
        return CourseQuestion(
            _batches(placed, as_logs(placed.values, self.logged)), self.fewest_pools, self.span
        )


@dataclass(frozen=True)
class FittedDrift:
    """The courses of all features, learnt from pools."""

    settings: Drift
    pools: RunTable
    courses: Courses

    def transform(self, table: StepTable) -> tuple[StepTable, StepAccount]:
        """Return sample runs and pools without drift.

        A pool is corrected by a course that has not seen it, so that what its scatter shows holds for samples too.

        Raises
        ------
        InputError
            When a run of a corrected batch has no order.
        """
        if table.runs is None or table.controls is None:
            return table, StepAccount(self.settings.step, "no run sheet: no drift removed")
        removed = self.removed(table.runs)
        values = self._without(table.values, removed)
        controls = self.corrected(table.controls)
        account = self._account(table, controls, removed)
        return replace(table, values=values, controls=controls), account

    def _without(self, values: Matrix, removed: Matrix) -> Matrix:
        return values - removed if self.settings.logged else values * 2.0**-removed

    def removed(self, runs: Runs) -> Matrix:
        """Return what is taken from the logarithms of each run, (n_runs, n_features)."""
        removed = np.zeros((len(runs.runs), self.pools.values.shape[1]))
        batch = np.array(runs.batch, dtype=object)
        for place in self.courses.batches:
            rows = np.flatnonzero(batch == place.batch)
            placeless = [runs.runs[row] for row in rows if np.isnan(runs.order[row])]
            if placeless:
                raise PrepareRefusal(
                    f"{counted(len(placeless), 'run has', 'runs have')} no order: {some(placeless)}",
                    key="prepare.drift",
                    fitting=("none",),
                    advice="add the order to the run sheet",
                )
            removed[rows] = read_off(place.x, place.course, runs.order[rows])
        return removed

    def corrected(self, controls: RunTable) -> RunTable:
        """Return the controls with each pool corrected by a course fitted without it."""
        values = controls.values.copy()
        row_of = {name: row for row, name in enumerate(self.courses.pools)}
        for row, name in enumerate(controls.runs):
            if name in row_of:
                removed = self.courses.left_out[row_of[name]]
                values[row] = self._without(values[row], removed)
        return replace(controls, values=values)

    def _account(self, table: StepTable, controls: RunTable, removed: Matrix) -> StepAccount:
        kinds, runs = self.courses.kinds, table.runs
        assert runs is not None
        before, after = (
            relative_sd(relative_amounts(part, self.settings.logged)) for part in self._pool_values(controls)
        )
        corrected = kinds != NONE
        numbers: dict[str, float | int | str] = {
            "pools": len(self.pools.runs),
            "batches_corrected": len(self.courses.batches),
            "features_with_curve": int((kinds == CURVE).sum()),
            "features_with_levels": int((kinds == LEVEL).sum()),
            "features_left_alone": int((kinds == NONE).sum()),
            "runs_outside_pools": self._outside(runs),
            "runs_left_alone": self._alone(runs),
            **_typical("pool_scatter_before", before[corrected]),
            **_typical("pool_scatter_after", after[corrected]),
            **_typical(
                "drift_range_log2", np.ptp(removed[:, corrected], axis=0) if removed.size else np.empty(0)
            ),
        }
        return StepAccount(
            self.settings.step,
            self._sentence(numbers),
            numbers,
            reference=DUNN,
            cautions=self._cautions(numbers),
        )

    def _pool_values(self, controls: RunTable) -> tuple[Matrix, Matrix]:
        rows = controls.rows_as("pool")
        return self.pools.values, controls.values[rows]

    def _outside(self, runs: Runs) -> int:
        batch = np.array(runs.batch, dtype=object)
        return sum(
            int(((runs.order < place.x[0]) | (runs.order > place.x[-1]))[batch == place.batch].sum())
            for place in self.courses.batches
        )

    def _alone(self, runs: Runs) -> int:
        """Return how many runs are in batches that are not corrected."""
        corrected = {place.batch for place in self.courses.batches}
        return sum(batch not in corrected for batch in runs.batch)

    def _sentence(self, numbers: dict[str, float | int | str]) -> str:
        if not self.courses.batches:
            return f"no drift removed: {counted(int(numbers['pools']), 'pool')}, and {self.courses.reason}"
        curve, level = numbers["features_with_curve"], numbers["features_with_levels"]
        sentence = (
            f"drift over the run order taken from {curve:,} features by a curve and from {level:,} by the level of "
            f"each batch, read off {numbers['pools']} pools; {numbers['features_left_alone']:,} are left alone, as "
            "left-out pools were predicted no better"
        )
        if "median_pool_scatter_before" in numbers:
            sentence += (
                f"; median scatter of left-out pools {percent(float(numbers['median_pool_scatter_before']))} before, "
                f"{percent(float(numbers['median_pool_scatter_after']))} after"
            )
        return sentence

    def _cautions(self, numbers: dict[str, float | int | str]) -> tuple[str, ...]:
        told = list(self.courses.cautions)
        outside = int(numbers["runs_outside_pools"])
        if outside:
            told.append(
                f"{counted(outside, 'run')} before the first or after the last pool of the batch: corrected as at that "
                "pool, as nothing is known beyond"
            )
        alone = int(numbers["runs_left_alone"])
        if alone and self.courses.batches:
            told.append(
                f"{counted(alone, 'run')} in batches with fewer than {FEWEST_FOR_LEVEL} pools: left as they are"
            )
        return tuple(told)


def _pools_of(controls: RunTable) -> RunTable:
    return controls.take(controls.rows_as("pool"))


def _batches(pools: RunTable, logs: Matrix) -> tuple[BatchPools, ...]:
    """Return the pools batch by batch, in run order."""
    batch = np.array(pools.batch, dtype=object)
    parts = []
    for name in sorted(set(pools.batch)):
        rows = np.flatnonzero(batch == name)
        rows = rows[np.argsort(pools.order[rows], kind="stable")]
        parts.append(BatchPools(name, tuple(pools.runs[row] for row in rows), pools.order[rows], logs[rows]))
    return tuple(parts)


def as_logs(values: Matrix, logged: bool) -> Matrix:
    """Return log2 of what is above zero, NaN for the rest; logarithms as they are."""
    if logged:
        return values
    positive = values > 0
    logs: Matrix = np.where(positive, np.log2(values, where=positive, out=np.zeros_like(values)), np.nan)
    return logs


def relative_amounts(values: Matrix, logged: bool) -> Matrix:
    """Return amounts up to a factor of each feature's own: from log2 values less their median (within 2^-+500).

    >>> relative_amounts(np.array([[5000.0], [5001.0], [5002.0]]), logged=True).ravel().tolist()
    [0.5, 1.0, 2.0]
    """
    if not logged:
        return values
    return np.exp2(np.clip(values - medians(values), -LARGEST_EXPONENT, LARGEST_EXPONENT))


def relative_sd(values: Matrix) -> Matrix:
    """Return standard deviation (ddof 1) over mean of each column, missing values aside; NaN for fewer than two.

    >>> relative_sd(np.array([[1.0, 5.0], [3.0, np.nan]])).round(4).tolist()
    [0.7071, nan]
    """
    seen = ~np.isnan(values)
    count = seen.sum(axis=0)
    mean = np.where(seen, values, 0.0).sum(axis=0) / np.maximum(count, 1)
    squares = np.where(seen, (values - mean) ** 2, 0.0).sum(axis=0)
    usable = (count >= 2) & (mean > 0)
    ratio: Matrix = np.divide(
        np.sqrt(squares / np.maximum(count - 1, 1)), mean, where=usable, out=np.full(mean.shape, np.nan)
    )
    return ratio


def _typical(name: str, values: NDArray[np.float64]) -> dict[str, float]:
    known = values[~np.isnan(values)]
    return {f"median_{name}": float(np.median(known))} if known.size else {}
