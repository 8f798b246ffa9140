"""Intensities of mass spectrometry and the like: zeros, blanks, drift, dilution, logarithm, gaps."""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import ClassVar

import numpy as np

from workbench.prepare.cells import OFF_BACKGROUND, check_not_negative
from workbench.prepare.combining import CombineRuns
from workbench.prepare.controls import BlankFilter, PoolScatter
from workbench.prepare.drift import Drift
from workbench.prepare.gaps import low_gaps
from workbench.prepare.quotients import Quotients
from workbench.prepare.steps import (
    DropFlat,
    DropRarelySeen,
    DropUnusable,
    FitContext,
    Settled,
    Step,
    SwitchedOff,
    column_range,
)
from workbench.prepare.tables import Matrix, MeasuredTable, StepAccount, StepTable
from workbench.settings.prepare_schema import IntensitiesPreparation, LogPreparation


def intensity_steps(settings: IntensitiesPreparation) -> tuple[Step, ...]:
    """Return the steps for intensities, in order."""
    missing = settings.zeros == "missing"
    quotient = settings.normalisation == "quotient"
    blanks: Step = BlankFilter(settings.blank_ratio)
    if settings.blanks == "none":
        blanks = SwitchedOff("blanks", "blanks", needs_runs=True)
    return (
        ZerosAreMissing() if missing else SwitchedOff("zeros", "zeros"),
        DropUnusable(),
        blanks,
        *pool_steps(settings, logged=False),
        DropRarelySeen(settings.seen_share),
        Quotients() if quotient else SwitchedOff("quotient normalisation", "normalisation"),
        LogOfIntensities() if missing else LogWithZeros(),
        CombineRuns(),
        low_gaps(settings.gaps),
        DropFlat(),
    )


def pool_steps(settings: IntensitiesPreparation | LogPreparation, logged: bool) -> tuple[Step, ...]:
    """Return the steps that rest on pools: drift, and features that scatter."""
    drift: Step = Drift(logged, settings.fewest_pools, settings.span)
    if settings.drift == "none":
        drift = SwitchedOff("drift", "drift", needs_runs=True)
    scatter: Step = PoolScatter(logged, settings.pool_scatter)
    if settings.pool_filter == "none":
        scatter = SwitchedOff("pool scatter", "pool_filter", needs_runs=True)
    return (drift, scatter)


def check_intensities(table: MeasuredTable) -> None:
    """Refuse negative intensities.

    Raises
    ------
    PrepareRefusal
        Naming the first negative cell.
    """
    rule = "intensities are 0 or more, logarithms and readings may be less"
    check_not_negative(table, "intensity", "intensities", rule, OFF_BACKGROUND)


@dataclass(frozen=True)
class ZerosAreMissing(Settled):
    """Turns zero into missing: the instrument saw nothing, which is not an amount of nothing."""

    step: str = "zeros"
    why: ClassVar[str] = "an instrument that sees nothing writes zero; that is not an amount of nothing"
    keys: ClassVar[tuple[str, ...]] = ("zeros",)
    rule: str = "takes a zero for a missing value"

    def fit(self, table: StepTable, context: FitContext) -> ZerosAreMissing:  # noqa: ARG002
        """Return the step itself: there is nothing to learn."""
        return self

    def transform(self, table: StepTable) -> tuple[StepTable, StepAccount]:
        """Return the table with NaN for zero."""
        zero = table.values == 0
        count, cells = int(zero.sum()), zero.size
        sentence = f"{count:,} of {cells:,} values are zero, and missing from here on"
        account = StepAccount(self.step, sentence, {"zeros": count, "values": cells})
        return self._without(table), account

    def _without(self, table: StepTable) -> StepTable:
        controls = table.controls
        if controls is not None:
            controls = replace(controls, values=np.where(controls.values == 0, np.nan, controls.values))
        return replace(table, values=np.where(table.values == 0, np.nan, table.values), controls=controls)


@dataclass(frozen=True)
class LogOfIntensities(Settled):
    """Takes log2."""

    step: str = "logarithm"
    rule: str = "takes log2"
    why: ClassVar[str] = (
        "amounts differ by factors: on logarithms a doubling is one and the same step, and correlation is about steps"
    )

    def fit(self, table: StepTable, context: FitContext) -> LogOfIntensities:  # noqa: ARG002
        """Return the step itself: there is nothing to learn."""
        return self

    def transform(self, table: StepTable) -> tuple[StepTable, StepAccount]:
        """Return log2 of the values."""
        return table.with_values(np.log2(table.values)), StepAccount(self.step, self.rule)


@dataclass(frozen=True)
class LogWithZeros(Settled):
    """Takes log2 after adding half of each feature's smallest positive training value."""

    step: str = "logarithm"
    rule: str = "takes log2 of the value plus half of the feature's smallest value above zero"
    why: ClassVar[str] = "zeros are amounts here, as the settings say, and zero has no logarithm"
    keys: ClassVar[tuple[str, ...]] = ("zeros",)

    def fit(self, table: StepTable, context: FitContext) -> FittedLogWithZeros:  # noqa: ARG002
        """Return the step with what is added; nothing where a feature has no zero."""
        values = table.values
        smallest, _ = column_range(np.where(values > 0, values, np.nan))
        return FittedLogWithZeros(self, smallest / 2.0)


@dataclass(frozen=True)
class FittedLogWithZeros:
    """What is added to each feature."""

    settings: LogWithZeros
    added: Matrix

    def transform(self, table: StepTable) -> tuple[StepTable, StepAccount]:
        """Return log2 of the values and what is added."""
        zeros = int((table.values == 0).sum())
        sentence = f"{self.settings.rule}; {zeros:,} of {table.values.size:,} values are zero"
        account = StepAccount(self.settings.step, sentence, {"zeros": zeros})
        return table.with_values(np.log2(table.values + self.added)), account
