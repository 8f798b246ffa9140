"""Values that are logarithms already: drift, median centring, gaps."""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import ClassVar

import numpy as np

from workbench.prepare.combining import CombineRuns
from workbench.prepare.gaps import low_gaps
from workbench.prepare.guards import Usual
from workbench.prepare.intensities import pool_steps
from workbench.prepare.steps import (
    ENOUGH_REFERENCE,
    FEWEST_FOR_SCALE,
    DropFlat,
    DropRarelySeen,
    DropUnusable,
    FitContext,
    Settled,
    Step,
    SwitchedOff,
    check_found,
    extremes,
    median_rows,
    reference_features,
)
from workbench.prepare.tables import Mask, Matrix, StepAccount, StepTable
from workbench.settings.prepare_schema import LogPreparation


def log_steps(settings: LogPreparation) -> tuple[Step, ...]:
    """Return the steps for logarithms, in order."""
    centred = settings.centring == "median"
    return (
        DropUnusable(),
        *pool_steps(settings, logged=True),
        DropRarelySeen(settings.seen_share),
        MedianCentring() if centred else SwitchedOff("median centring", "centring"),
        CombineRuns(),
        low_gaps(settings.gaps),
        DropFlat(),
    )


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
    rule: str = "shifts each sample so that all have the same median"
    why: ClassVar[str] = (
        "how much of a sample was loaded moves all of its logarithms by the same amount, which is no biology"
    )
    keys: ClassVar[tuple[str, ...]] = ("centring",)

    def fit(self, table: StepTable, context: FitContext) -> FittedCentring:  # noqa: ARG002
        """Return the step with its features and the typical median."""
        seen = (~np.isnan(table.values)).sum(axis=0)
        used, cut = reference_features(seen, self.enough, self.fewest)
        medians = median_rows(table.values[:, used], ~np.isnan(table.values[:, used]))
        typical = float(np.median(medians[~np.isnan(medians)])) if used.any() else 0.0
        usual = Usual(0.0, np.inf)
        fitted = FittedCentring(self, used, typical, cut, len(table.samples), table.row_word, usual)
        return replace(fitted, usual=Usual.of(fitted.shifts(table)))


@dataclass(frozen=True)
class FittedCentring:
    """Shifts to the training samples' typical median."""

    settings: MedianCentring
    used: Mask
    typical: float
    cut: int
    n_training: int
    row_word: str
    usual: Usual

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
        cautions = self.usual.cautions("median", shifts, samples)
        return StepAccount(self.settings.step, sentence, numbers, cautions=cautions)
