"""Counts of reads: filter, size factors, logarithm.

The size factor of a sample is the median, over features, of the ratio of its count to the feature's
geometric mean over the training samples:

    s_j = median_i  k_ij / (prod_v k_iv)^(1/m)

(Anders & Huber 2010, Genome Biology 11:R106, equation 5). The geometric means are the reference; a new
sample is scaled against them and changes nothing in them.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from workbench.errors import InputError
from workbench.prepare.combining import CombineRuns
from workbench.prepare.gaps import FillGaps
from workbench.prepare.steps import (
    ENOUGH_REFERENCE,
    FEWEST_FOR_SCALE,
    FEWEST_SAMPLES,
    DropFlat,
    DropUnusable,
    FitContext,
    KeepFeatures,
    Settled,
    Step,
    check_found,
    extremes,
    keep_features,
    median_rows,
    reference_features,
)
from workbench.prepare.tables import Mask, Matrix, MeasuredTable, StepAccount, StepTable, some

ANDERS_HUBER = "Anders & Huber 2010, Genome Biology 11:R106"
SMALLEST_COUNT = 10
SHARE_WITHOUT_GROUPS = 0.2
PRIOR_COUNT = 3.0


def count_steps() -> tuple[Step, ...]:
    """Return the steps for counts, in order."""
    return (
        CombineRuns("sum"),
        DropUnusable(),
        CountFilter(),
        SizeFactors(),
        LogOfCounts(),
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
    empty = np.flatnonzero((table.values > 0).sum(axis=1) == 0)
    if empty.size and table.features:
        names = [table.samples[row] for row in empty]
        raise InputError(
            f"{len(names)} of {len(table.samples)} samples have no count above 0: {some(names)}; "
            "exclude them, with the reason"
        )


def check_count_cells(table: MeasuredTable) -> None:
    """Refuse negative counts.

    Raises
    ------
    InputError
        Naming the first negative cell.
    """
    negative = table.values < 0
    if negative.any():
        raise InputError(
            f"{int(negative.sum())} counts are negative, the first at {table.first_cell(negative)}; "
            "counts are 0 or more: declare the values as `log` or `continuous` if that is what they are"
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

    @property
    def rule(self) -> str:
        """What the step does, in one line."""
        return (
            f"count of {self.smallest_count} or more in fewer samples than the smallest group has "
            f"({self.share:.0%} of the samples without groups)"
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


def geometric_means(counts: Matrix) -> Matrix:
    """Return each feature's geometric mean over its positive counts (NaN without any).

    >>> geometric_means(np.array([[2.0, 0.0], [8.0, 5.0]])).round(6).tolist()
    [4.0, 5.0]
    """
    positive = counts > 0
    logs = np.log(counts, where=positive, out=np.zeros_like(counts))
    seen = positive.sum(axis=0)
    means: Matrix = np.divide(logs.sum(axis=0), seen, where=seen > 0, out=np.full(counts.shape[1], np.nan))
    return np.exp(means)


def median_of_ratios(counts: Matrix, reference: Matrix, *, positive_only: bool = False) -> Matrix:
    """Return the size factor of each sample against a reference.

    A zero count is a ratio of zero and takes part in the median, unless ``positive_only``, or unless
    the median itself would be zero: then the positive counts alone decide.

    Parameters
    ----------
    counts : ndarray of shape (n_samples, n_features)
        Counts; NaN takes no part.
    reference : ndarray of shape (n_features,)
        From :func:`geometric_means` of the training samples.
    positive_only : bool, default False
        Leave zero counts out.

    Returns
    -------
    ndarray of shape (n_samples,)
        Size factors, NaN for a sample without any positive count.

    References
    ----------
    Anders & Huber 2010, Genome Biology 11:R106, equation 5.

    Examples
    --------
    A sample sequenced four times as deeply as another, the reference half way between them:

    >>> counts = np.array([[1.0, 3.0, 5.0], [4.0, 12.0, 20.0]])
    >>> median_of_ratios(counts, geometric_means(counts)).round(6).tolist()
    [0.5, 2.0]
    """
    positive = counts > 0
    ratios = counts / reference
    medians = median_rows(ratios, positive if positive_only else ~np.isnan(counts))
    emptied = medians == 0
    medians[emptied] = median_rows(ratios[emptied], positive[emptied])
    return medians


@dataclass(frozen=True)
class SizeFactors(Settled):
    """Divides each sample's counts by its size factor.

    The reference is made from the features without a zero in the training samples. Where fewer than
    ``enough`` features lack zeros, it is made from positive counts only, of the features that are
    positive in the most samples. Fewer than ``fewest`` features: no size factors, and the account says so.
    """

    enough: int = ENOUGH_REFERENCE
    fewest: int = FEWEST_FOR_SCALE
    step: str = "size factors"
    rule: str = "counts divided by the sample's median ratio to the features' geometric means"

    def fit(self, table: StepTable, context: FitContext) -> FittedSizeFactors:  # noqa: ARG002
        """Return the step with its reference."""
        positive = (table.values > 0).sum(axis=0)
        used, cut = reference_features(positive, self.enough, self.fewest)
        complete = int((positive == len(table.samples)).sum())
        reference = geometric_means(table.values[:, used])
        return FittedSizeFactors(self, used, reference, complete, cut, len(table.samples))


@dataclass(frozen=True)
class FittedSizeFactors:
    """Size factors against the training reference."""

    settings: SizeFactors
    used: Mask
    reference: Matrix
    complete: int
    cut: int
    n_training: int

    @property
    def positive_only(self) -> bool:
        """Whether the reference had to be made from features with zeros."""
        return self.cut < self.n_training

    def factors(self, table: StepTable) -> Matrix:
        """Return the size factor of each sample, 1 where there is no reference.

        Raises
        ------
        InputError
            When a sample has no positive count in any feature of the reference.
        """
        if not self.used.any():
            return np.ones(len(table.samples))
        factors = median_of_ratios(
            table.values[:, self.used], self.reference, positive_only=self.positive_only
        )
        return check_found("size factor", factors, table, int(self.used.sum()))

    def transform(self, table: StepTable) -> tuple[StepTable, StepAccount]:
        """Return counts divided by size factors."""
        factors = self.factors(table)
        return table.divided(factors), self._account(factors, table.samples)

    def _account(self, factors: Matrix, samples: tuple[str, ...]) -> StepAccount:
        numbers: dict[str, float | int | str] = {
            "reference_features": int(self.used.sum()),
            "features_without_zeros": self.complete,
        }
        numbers |= extremes("factor", factors, samples)
        return StepAccount(self.settings.step, self._sentence(), numbers, reference=ANDERS_HUBER)

    def _sentence(self) -> str:
        used = int(self.used.sum())
        if not used:
            return f"no size factors: fewer than {self.settings.fewest} features; counts taken as they are"
        if not self.positive_only:
            return f"counts divided by size factors: median of ratios over {used:,} features without zeros"
        return (
            f"only {self.complete} features lack zeros (at least {self.settings.enough} wanted): "
            f"size factors by median of ratios from positive counts only, over the {used:,} features "
            f"positive in at least {self.cut} of {self.n_training} samples"
        )


@dataclass(frozen=True)
class LogOfCounts(Settled):
    """Takes log2 after adding a prior count in proportion to the library size.

    With size factor s_j the prior of sample j is c s_j, so that log2((k_ij + c s_j) / s_j)
    = log2(k_ij / s_j + c): a count of zero becomes the same value in every sample, however deep.
    (Prior counts of 0.5 to 5: common practice.)
    """

    prior: float = PRIOR_COUNT
    step: str = "logarithm"

    @property
    def rule(self) -> str:
        """What the step does, in one line."""
        return f"log2 with a prior count of {self.prior:g} in proportion to library size"

    def fit(self, table: StepTable, context: FitContext) -> LogOfCounts:  # noqa: ARG002
        """Return the step itself: there is nothing to learn."""
        return self

    def transform(self, table: StepTable) -> tuple[StepTable, StepAccount]:
        """Return log2 of scaled counts plus the prior."""
        account = StepAccount(self.step, self.rule, {"prior_count": self.prior})
        return table.with_values(np.log2(table.values + self.prior)), account
