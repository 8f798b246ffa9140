"""Parts of a whole: zeros, then logarithms of ratios to the sample's geometric mean.

A sequencer gives a fixed number of reads to whatever is there, so that counts of microbes say how large a part each
is of its sample, not how much there is of it. What does not depend on the whole are ratios of parts.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import ClassVar

import numpy as np

from workbench.prepare.cells import check_not_empty, check_not_negative
from workbench.prepare.combining import CombineRuns
from workbench.prepare.counts import check_count_cells
from workbench.prepare.gaps import FillGaps
from workbench.prepare.refusal import without_value
from workbench.prepare.steps import (
    FEWEST_SAMPLES,
    DropFlat,
    DropUnusable,
    FitContext,
    KeepFeatures,
    Settled,
    Step,
    keep_features,
)
from workbench.prepare.tables import Matrix, MeasuredTable, StepAccount, StepTable
from workbench.prepare.words import percent
from workbench.settings.prepare_schema import CompositionPreparation

PREVALENCE = 0.1
ZERO_SHARE = 0.65
MOST_REPLACED = 0.5
AITCHISON = "Aitchison 1986, The Statistical Analysis of Compositional Data"
MARTIN_FERNANDEZ = "Martin-Fernandez, Barcelo-Vidal & Pawlowsky-Glahn 2003, Mathematical Geology 35:253"


def count_composition_steps(settings: CompositionPreparation) -> tuple[Step, ...]:
    """Return the steps for counts of microbes, in order."""
    return _steps(settings, CombineRuns("sum"))


def composition_steps(settings: CompositionPreparation) -> tuple[Step, ...]:
    """Return the steps for proportions, in order."""
    return _steps(settings, CombineRuns("mean"))


def _steps(settings: CompositionPreparation, combine: Step) -> tuple[Step, ...]:
    centred: dict[str, Step] = {"centred": CentredLogRatios(), "none": LogOfShares()}
    return (
        combine,
        DropUnusable(),
        Prevalence(settings.prevalence),
        ReplaceZeros(settings.zero_share),
        centred[settings.log_ratio],
        FillGaps(censored=False),
        DropFlat(),
    )


def check_composition_counts(table: MeasuredTable) -> None:
    """Refuse what is no count, and samples without a read."""
    check_count_cells(table)
    check_not_empty(table, "part above 0")


def check_proportions(table: MeasuredTable) -> None:
    """Refuse negative parts and samples without any.

    Raises
    ------
    InputError
        Naming the first negative cell, or the empty samples.
    """
    check_proportion_cells(table)
    check_not_empty(table, "part above 0")


def check_proportion_cells(table: MeasuredTable) -> None:
    """Refuse negative parts.

    Raises
    ------
    InputError
        Naming the first negative cell.
    """
    rule = "parts of a whole are 0 or more, log-ratios may be less"
    check_not_negative(table, "proportion", "proportions", rule)


@dataclass(frozen=True)
class Prevalence(Settled):
    """Keeps features that at least ``share`` of the samples have (above zero), and no fewer than two samples."""

    share: float = PREVALENCE
    step: str = "prevalence"
    why: ClassVar[str] = "where nearly every value is a zero that has to be replaced, ratios would be made up"
    paper: ClassVar[str] = "common practice"
    keys: ClassVar[tuple[str, ...]] = ("prevalence",)

    @property
    def rule(self) -> str:
        """What the step does, in one line."""
        return f"keeps features that at least {percent(self.share)} of the samples have"

    def fit(self, table: StepTable, context: FitContext) -> KeepFeatures:  # noqa: ARG002
        """Return the step; the number of samples is rounded up."""
        n = len(table.samples)
        needed = max(int(np.ceil(self.share * n - 1e-9)), min(FEWEST_SAMPLES, n))
        seen = (table.values > 0).sum(axis=0)
        keep = seen >= needed
        reasons = {
            table.features[i]: f"above zero in {seen[i]} of {n} samples; {needed} needed"
            for i in np.flatnonzero(~keep)
        }
        rule = f"above zero in fewer than {needed} of {n} samples"
        return keep_features(self.step, rule, table, keep, reasons)


def replace_zeros(parts: Matrix, limit: float) -> Matrix:
    """Return compositions without zeros, by multiplicative replacement.

    With parts x_k that sum to 1, Z of them zero, each zero becomes the limit d, and

        r_k = x_k (1 - Z d)   where x_k > 0

    so that ratios of parts that are not zero stay as they were and the sum stays 1. Where Z d would exceed one half,
    d is one half over Z in that sample.

    Parameters
    ----------
    parts : ndarray of shape (n_samples, n_features)
        Closed to 1 over what is not NaN.
    limit : float
        What a zero becomes, above 0.

    References
    ----------
    Martin-Fernandez, Barcelo-Vidal & Pawlowsky-Glahn 2003, Mathematical Geology 35:253-278.

    Examples
    --------
    >>> replace_zeros(np.array([[0.2, 0.4, 0.4, 0.0]]), 0.0625).tolist()
    [[0.1875, 0.375, 0.375, 0.0625]]
    """
    zero = parts == 0
    count = zero.sum(axis=1, keepdims=True)
    small = np.minimum(limit, MOST_REPLACED / np.maximum(count, 1))
    replaced: Matrix = np.where(zero, small, parts * (1.0 - count * small))
    return replaced


def closed(parts: Matrix) -> Matrix:
    """Return parts divided by their sample's sum; missing ones aside.

    >>> closed(np.array([[1.0, 3.0], [2.0, np.nan]])).tolist()
    [[0.25, 0.75], [1.0, nan]]
    """
    totals = np.nansum(parts, axis=1, keepdims=True)
    shares: Matrix = np.divide(parts, totals, where=totals > 0, out=np.full(parts.shape, np.nan))
    return shares


def centred_log_ratios(parts: Matrix) -> Matrix:
    """Return natural logarithms less their mean in each sample, missing parts aside.

        clr(x)_k = ln x_k - (1 / p) sum_j ln x_j

    References
    ----------
    Aitchison 1986, The Statistical Analysis of Compositional Data (Chapman & Hall).

    Examples
    --------
    They sum to zero, and do not depend on the total:

    >>> parts = np.array([[1.0, 2.0, 4.0]])
    >>> bool(np.allclose(centred_log_ratios(parts), centred_log_ratios(10 * parts)))
    True
    >>> round(abs(float(centred_log_ratios(parts).sum())), 12)
    0.0
    """
    logs = np.log(parts)
    seen = np.maximum((~np.isnan(logs)).sum(axis=1, keepdims=True), 1)
    centred: Matrix = logs - np.nansum(logs, axis=1, keepdims=True) / seen
    return centred


@dataclass(frozen=True)
class ReplaceZeros(Settled):
    """Closes each sample to 1 and replaces its zeros.

    The detection limit is the median, over training samples, of the smallest share above zero (one read of a
    typical sample); a zero becomes ``share`` of it, the same in every sample: a limit of each sample's own would
    write its depth into all features that it lacks.
    """

    share: float = ZERO_SHARE
    step: str = "zeros"
    why: ClassVar[str] = "a zero has no logarithm; it stands for less than could be seen"
    paper: ClassVar[str] = MARTIN_FERNANDEZ
    keys: ClassVar[tuple[str, ...]] = ("zero_share",)

    @property
    def rule(self) -> str:
        """What the step does, in one line."""
        return f"brings each sample to a sum of 1 and sets each zero to {percent(self.share)} of the detection limit"

    def fit(self, table: StepTable, context: FitContext) -> FittedZeros:  # noqa: ARG002
        """Return the step with the detection limit of the training samples."""
        parts = closed(table.values)
        smallest = np.min(np.where(parts > 0, parts, np.inf), axis=1, initial=np.inf)
        smallest = smallest[np.isfinite(smallest)]
        limit = float(np.median(smallest)) if smallest.size else 1.0
        return FittedZeros(self, limit)


@dataclass(frozen=True)
class FittedZeros:
    """The detection limit, as a share of a sample."""

    settings: ReplaceZeros
    limit: float

    def transform(self, table: StepTable) -> tuple[StepTable, StepAccount]:
        """Return closed parts without zeros.

        Raises
        ------
        InputError
            When a sample has none of the features that are left.
        """
        parts = closed(table.values)
        lost = [table.samples[row] for row in np.flatnonzero(~(parts > 0).any(axis=1))]
        if lost:
            raise without_value(
                f"value in the {len(table.features):,} features that are left", lost, len(table.samples)
            )
        zeros = int((parts == 0).sum())
        replaced = replace_zeros(parts, self.settings.share * self.limit)
        sentence = (
            f"samples brought to a sum of 1; {zeros:,} zeros ({percent(zeros / max(parts.size, 1))} of the values) "
            f"replaced by {percent(self.settings.share)} of the detection limit, {self.limit:.3g}"
        )
        numbers: dict[str, float | int | str] = {
            "zeros": zeros,
            "values": parts.size,
            "detection_limit": self.limit,
        }
        return table.with_values(replaced), StepAccount(
            self.settings.step, sentence, numbers, reference=MARTIN_FERNANDEZ
        )


@dataclass(frozen=True)
class CentredLogRatios(Settled):
    """Takes logarithms less their mean over the sample."""

    step: str = "log-ratios"
    rule: str = "takes centred log-ratios: natural logarithms less their mean over the sample"
    why: ClassVar[str] = (
        "when one part grows, all others shrink: shares correlate without any biology, ratios do not"
    )
    paper: ClassVar[str] = AITCHISON
    keys: ClassVar[tuple[str, ...]] = ("log_ratio",)

    def fit(self, table: StepTable, context: FitContext) -> CentredLogRatios:  # noqa: ARG002
        """Return the step itself: there is nothing to learn."""
        return self

    def transform(self, table: StepTable) -> tuple[StepTable, StepAccount]:
        """Return centred log-ratios."""
        return table.with_values(centred_log_ratios(table.values)), StepAccount(
            self.step, self.rule, reference=AITCHISON
        )


@dataclass(frozen=True)
class LogOfShares(Settled):
    """Takes logarithms of the shares, not centred."""

    step: str = "logarithm"
    rule: str = "takes natural logarithms of the shares, not centred"
    why: ClassVar[str] = "the settings ask for shares; mind that they correlate by adding up to a whole"
    keys: ClassVar[tuple[str, ...]] = ("log_ratio",)

    def fit(self, table: StepTable, context: FitContext) -> LogOfShares:  # noqa: ARG002
        """Return the step itself: there is nothing to learn."""
        return self

    def transform(self, table: StepTable) -> tuple[StepTable, StepAccount]:
        """Return logarithms."""
        return table.with_values(np.log(table.values)), StepAccount(self.step, self.rule)
