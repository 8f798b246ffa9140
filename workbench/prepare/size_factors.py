"""Size factors of counts by the median of ratios.

The size factor of a sample is the median, over features, of the ratio of its count to the feature's
geometric mean over the training samples:

    s_j = median_i  k_ij / (prod_v k_iv)^(1/m)

(Anders & Huber 2010, Genome Biology 11:R106, equation 5). The geometric means are the reference; a new
sample is scaled against them and changes nothing in them.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass, replace
from typing import ClassVar

import numpy as np

from workbench.prepare.guards import Usual
from workbench.prepare.steps import (
    ENOUGH_REFERENCE,
    FEWEST_FOR_SCALE,
    FitContext,
    Settled,
    check_found,
    extremes,
    median_rows,
    reference_features,
)
from workbench.prepare.tables import Mask, Matrix, StepAccount, StepTable

ROWS_AT_A_TIME = 32
ANDERS_HUBER = "Anders & Huber 2010, Genome Biology 11:R106"


def geometric_means(counts: Matrix) -> Matrix:
    """Return each feature's geometric mean over its positive counts (NaN without any).

    >>> geometric_means(np.array([[2.0, 0.0], [8.0, 5.0]])).round(6).tolist()
    [4.0, 5.0]
    """
    sums, seen = np.zeros(counts.shape[1]), np.zeros(counts.shape[1])
    for rows in _row_parts(len(counts)):
        part = counts[rows]
        positive = part > 0
        sums += np.log(part, where=positive, out=np.zeros_like(part)).sum(axis=0)
        seen += positive.sum(axis=0)
    means: Matrix = np.divide(sums, seen, where=seen > 0, out=np.full(counts.shape[1], np.nan))
    return np.exp(means)


def _row_parts(n: int) -> Iterator[slice]:
    """Yield the rows a few at a time: a copy of a large table would cost more than the figures that it gives."""
    for start in range(0, n, ROWS_AT_A_TIME):
        yield slice(start, start + ROWS_AT_A_TIME)


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
    parts = [_medians_of_ratios(counts[rows], reference, positive_only) for rows in _row_parts(len(counts))]
    return np.concatenate(parts) if parts else np.empty(0)


def _medians_of_ratios(counts: Matrix, reference: Matrix, positive_only: bool) -> Matrix:
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
    rule: str = (
        "divides the counts of each sample by its size factor: how deeply it was read, as the median over features of "
        "its count against the feature's usual one (the geometric mean over samples)"
    )
    why: ClassVar[str] = (
        "samples are sequenced to unequal depth; a median over features is not moved by the few that truly change"
    )
    keys: ClassVar[tuple[str, ...]] = ("normalisation",)

    def fit(self, table: StepTable, context: FitContext) -> FittedSizeFactors:  # noqa: ARG002
        """Return the step with its reference."""
        positive = (table.values > 0).sum(axis=0)
        used, cut = reference_features(positive, self.enough, self.fewest)
        complete = int((positive == len(table.samples)).sum())
        reference = geometric_means(table.values[:, used])
        fitted = FittedSizeFactors(
            self, used, reference, complete, cut, len(table.samples), Usual(0.0, np.inf)
        )
        return replace(fitted, usual=Usual.of(np.log2(fitted.factors(table))))


@dataclass(frozen=True)
class FittedSizeFactors:
    """Size factors against the training reference."""

    settings: SizeFactors
    used: Mask
    reference: Matrix
    complete: int
    cut: int
    n_training: int
    usual: Usual

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
        cautions = self.usual.cautions("size factor", np.log2(factors), samples)
        return StepAccount(
            self.settings.step, self._sentence(), numbers, reference=ANDERS_HUBER, cautions=cautions
        )

    def _sentence(self) -> str:
        used = int(self.used.sum())
        if not used:
            return f"no size factors: fewer than {self.settings.fewest} features; counts taken as they are"
        if not self.positive_only:
            return f"size factors read off {used:,} features that have a count above 0 in every sample"
        return (
            f"only {self.complete} features have a count above 0 in every sample ({self.settings.enough} wanted): "
            f"size factors read off positive counts only, of the {used:,} features that at least {self.cut} of "
            f"{self.n_training} samples have"
        )
