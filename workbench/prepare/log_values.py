"""Values that are logarithms already: a look at the scale, median centring, gaps."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from workbench.prepare.combining import CombineRuns
from workbench.prepare.gaps import FillGaps
from workbench.prepare.steps import (
    ENOUGH_REFERENCE,
    FEWEST_FOR_SCALE,
    DropFlat,
    DropRarelySeen,
    DropUnusable,
    FitContext,
    Settled,
    Step,
    check_found,
    column_range,
    extremes,
    median_rows,
    reference_features,
)
from workbench.prepare.tables import Mask, Matrix, StepAccount, StepTable

LARGEST_LOG = 100.0


def log_steps() -> tuple[Step, ...]:
    """Return the steps for logarithms, in order."""
    return (
        DropUnusable(),
        LookAtScale(),
        DropRarelySeen(),
        MedianCentring(),
        CombineRuns(),
        FillGaps(censored=True),
        DropFlat(),
    )


@dataclass(frozen=True)
class LookAtScale(Settled):
    """Says so when the values do not look like logarithms; changes nothing.

    They do not when a value is beyond 100 in size (2^100 is more than any instrument counts), or when
    all values are whole numbers of 0 and above (counts).
    """

    largest: float = LARGEST_LOG
    step: str = "scale"
    rule: str = "a look at whether the values are logarithms"

    def fit(self, table: StepTable, context: FitContext) -> SeenScale:  # noqa: ARG002
        """Return the account of the training values."""
        low, high = column_range(table.values)
        smallest, largest = float(np.min(low, initial=np.inf)), float(np.max(high, initial=-np.inf))
        numbers: dict[str, float | int | str] = {"smallest": smallest, "largest": largest}
        return SeenScale(StepAccount(self.step, self._sentence(table.values, smallest, largest), numbers))

    def _sentence(self, values: Matrix, smallest: float, largest: float) -> str:
        span = f"values from {smallest:g} to {largest:g}"
        if max(-smallest, largest) > self.largest:
            return (
                f"caution: {span} do not look like logarithms; if they are raw, declare the block's values "
                "as `intensities` or `counts`"
            )
        if smallest >= 0 and not np.any(np.mod(values[~np.isnan(values)], 1)):
            return (
                f"caution: {span}, all whole numbers, look like counts; if so, declare the block's values "
                "as `counts`"
            )
        return f"{span}, taken for logarithms"


@dataclass(frozen=True)
class SeenScale:
    """The account of the training values' scale."""

    account: StepAccount

    def transform(self, table: StepTable) -> tuple[StepTable, StepAccount]:
        """Return the table as it is."""
        return table, self.account


@dataclass(frozen=True)
class MedianCentring(Settled):
    """Shifts each sample so that its median is the training samples' typical one.

    The median is taken over the features seen in the most training samples (see ``most_seen``), so
    that a sample with many gaps among its low features is not shifted by them. Fewer than ``fewest``
    features: no centring, and the account says so.
    """

    enough: int = ENOUGH_REFERENCE
    fewest: int = FEWEST_FOR_SCALE
    step: str = "median centring"
    rule: str = "each sample shifted to the same median"

    def fit(self, table: StepTable, context: FitContext) -> FittedCentring:  # noqa: ARG002
        """Return the step with its features and the typical median."""
        seen = (~np.isnan(table.values)).sum(axis=0)
        used, cut = reference_features(seen, self.enough, self.fewest)
        medians = median_rows(table.values[:, used], ~np.isnan(table.values[:, used]))
        typical = float(np.median(medians[~np.isnan(medians)])) if used.any() else 0.0
        return FittedCentring(self, used, typical, cut, len(table.samples), table.row_word)


@dataclass(frozen=True)
class FittedCentring:
    """Shifts to the training samples' typical median."""

    settings: MedianCentring
    used: Mask
    typical: float
    cut: int
    n_training: int
    row_word: str

    def shifts(self, table: StepTable) -> Matrix:
        """Return what is taken from each sample, 0 where there are too few features.

        Raises
        ------
        InputError
            When a sample has none of the features that centring rests on.
        """
        if not self.used.any():
            return np.zeros(len(table.samples))
        values = table.values[:, self.used]
        medians = median_rows(values, ~np.isnan(values))
        return check_found("median", medians, table, int(self.used.sum())) - self.typical

    def transform(self, table: StepTable) -> tuple[StepTable, StepAccount]:
        """Return the shifted table."""
        shifts = self.shifts(table)
        return table.shifted(shifts), self._account(shifts, table.samples)

    def _account(self, shifts: Matrix, samples: tuple[str, ...]) -> StepAccount:
        used = int(self.used.sum())
        numbers: dict[str, float | int | str] = {"features": used, "typical_median": self.typical}
        numbers |= extremes("shift", shifts, samples)
        if not used:
            sentence = f"not centred: fewer than {self.settings.fewest} features; values taken as they are"
        else:
            sentence = (
                f"each sample shifted to a median of {self.typical:.4g} over {used:,} features seen in "
                f"at least {self.cut} of {self.n_training} {self.row_word}"
            )
        return StepAccount(self.settings.step, sentence, numbers)
