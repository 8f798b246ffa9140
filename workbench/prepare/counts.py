"""Counts of reads: filter, size factors, logarithm."""

from __future__ import annotations

from dataclasses import dataclass
from typing import ClassVar

import numpy as np

from workbench.intake.faults import counted
from workbench.prepare.cells import OFF_BACKGROUND, check_not_empty, check_not_negative
from workbench.prepare.combining import CombineRuns
from workbench.prepare.gaps import FillGaps
from workbench.prepare.read_scales import TrimmedMeans, UpperQuartile
from workbench.prepare.refusal import VALUES, PrepareRefusal
from workbench.prepare.size_factors import SizeFactors
from workbench.prepare.steps import (
    FEWEST_SAMPLES,
    DropFlat,
    DropUnusable,
    FitContext,
    KeepFeatures,
    Settled,
    Step,
    SwitchedOff,
    keep_features,
)
from workbench.prepare.tables import MeasuredTable, StepAccount, StepTable
from workbench.prepare.words import percent
from workbench.settings.prepare_schema import CountsPreparation

SMALLEST_COUNT = 10
SHARE_WITHOUT_GROUPS = 0.2
PRIOR_COUNT = 3.0


def count_steps(settings: CountsPreparation) -> tuple[Step, ...]:
    """Return the steps for counts, in order."""
    scales: dict[str, Step] = {
        "median_of_ratios": SizeFactors(),
        "upper_quartile": UpperQuartile(),
        "trimmed_mean": TrimmedMeans(),
        "none": SwitchedOff("size factors", "normalisation"),
    }
    return (
        CombineRuns("sum"),
        DropUnusable(),
        CountFilter(settings.smallest_count, settings.smallest_share),
        scales[settings.normalisation],
        LogOfCounts(settings.prior_count),
        FillGaps(censored=False),
        DropFlat(),
    )


def check_counts(table: MeasuredTable) -> None:
    """Refuse negative counts and samples without a single read.

    Raises
    ------
    InputError
        Naming the first negative cell, or the empty samples.
    """
    check_count_cells(table)
    check_not_empty(table, "count above 0")


def check_count_cells(table: MeasuredTable) -> None:
    """Refuse negative counts and parts of counts.

    Raises
    ------
    InputError
        Naming the first negative cell.
    """
    check_not_negative(
        table, "count", "counts", "counts are 0 or more, logarithms and readings may be less", OFF_BACKGROUND
    )
    part = table.values != np.rint(table.values)
    part &= ~np.isnan(table.values)
    if part.any():
        raise PrepareRefusal(
            f"{counted(int(part.sum()), 'count is', 'counts are')} not whole, the first at {table.first_cell(part)}",
            key=VALUES,
            fitting=("log", "intensities", "proportions"),
            advice="round estimated counts to whole numbers",
        )


@dataclass(frozen=True)
class CountFilter(Settled):
    """Drops features that too few samples show clearly.

    Kept are features with a count of ``smallest_count`` or more in at least as many samples as the
    smallest group has (without groups: 20 % of the samples), and in no fewer than two samples.
    """

    smallest_count: int = SMALLEST_COUNT
    share: float = SHARE_WITHOUT_GROUPS
    step: str = "count filter"
    why: ClassVar[str] = (
        "a few reads are mostly counting noise, and each feature makes the test over all pairs stricter for the rest"
    )
    keys: ClassVar[tuple[str, ...]] = ("smallest_count", "smallest_share")

    @property
    def rule(self) -> str:
        """What the step does, in one line."""
        return (
            f"keeps features with a count of {self.smallest_count} or more in as many samples as the smallest group "
            f"has (in {percent(self.share)} of the samples where there are no groups)"
        )

    def fit(self, table: StepTable, context: FitContext) -> KeepFeatures:
        """Return the step; numbers of samples are rounded up."""
        n = len(table.samples)
        size = context.smallest_group
        wanted = int(np.ceil(self.share * n - 1e-9)) if size is None else size
        needed = max(wanted, min(FEWEST_SAMPLES, n))
        clear = (table.values >= self.smallest_count).sum(axis=0)
        keep = clear >= needed
        reasons = {
            table.features[
                i
            ]: f"count of {self.smallest_count} or more in {clear[i]} of {n} samples; {needed} needed"
            for i in np.flatnonzero(~keep)
        }
        rule = f"count of {self.smallest_count} or more in fewer than {needed} of {n} samples"
        return keep_features(self.step, rule, table, keep, reasons)


@dataclass(frozen=True)
class LogOfCounts(Settled):
    """Takes log2 after adding a prior count in proportion to the library size.

    With size factor s_j the prior of sample j is c s_j, so that log2((k_ij + c s_j) / s_j)
    = log2(k_ij / s_j + c): a count of zero becomes the same value in every sample, however deep.
    (Prior counts of 0.5 to 5: common practice.)
    """

    prior: float = PRIOR_COUNT
    step: str = "logarithm"
    why: ClassVar[str] = (
        "counts differ by factors: on logarithms a doubling is one and the same step, and correlation is about steps"
    )
    keys: ClassVar[tuple[str, ...]] = ("prior_count",)

    @property
    def rule(self) -> str:
        """What the step does, in one line."""
        return f"takes log2 of the scaled count plus {self.prior:g}, which keeps small counts from being spread out"

    def fit(self, table: StepTable, context: FitContext) -> LogOfCounts:  # noqa: ARG002
        """Return the step itself: there is nothing to learn."""
        return self

    def transform(self, table: StepTable) -> tuple[StepTable, StepAccount]:
        """Return log2 of scaled counts plus the prior."""
        account = StepAccount(self.step, self.rule, {"prior_count": self.prior})
        logs = table.values + self.prior
        return table.with_values(np.log2(logs, out=logs)), account
