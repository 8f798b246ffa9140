"""Size factors of counts by the upper quartile, and by the trimmed mean of M.

Each is learnt from the training samples as a reference; a new sample is scaled against it and changes nothing
in it. Factors are relative to the training samples' typical one.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import ClassVar

import numpy as np

from workbench.prepare.guards import Usual
from workbench.prepare.steps import (
    FEWEST_FOR_SCALE,
    FitContext,
    Settled,
    check_found,
    extremes,
)
from workbench.prepare.tables import Mask, Matrix, StepAccount, StepTable

BULLARD = "Bullard et al. 2010, BMC Bioinformatics 11:94"
ROBINSON_OSHLACK = "Robinson & Oshlack 2010, Genome Biology 11:R25"
UPPER = 0.75
TRIM_M = 0.3
TRIM_A = 0.05


def upper_quartiles(counts: Matrix) -> Matrix:
    """Return each sample's 75 % quantile over its features, NaN where that is zero.

    References
    ----------
    Bullard, Purdom, Hansen & Dudoit 2010, BMC Bioinformatics 11:94.

    Examples
    --------
    >>> upper_quartiles(np.array([[0.0, 2.0, 4.0, 8.0, 100.0]])).tolist()
    [8.0]
    """
    if not counts.size:
        return np.full(len(counts), np.nan)
    whole = not np.isnan(counts).any()
    figures = (np.quantile if whole else np.nanquantile)(counts, UPPER, axis=1)
    return np.where(figures > 0, figures, np.nan)


def trimmed_mean_of_m(counts: Matrix, total: float, reference: Matrix, reference_total: float) -> float:
    """Return the normalisation factor of one sample against a reference sample.

    With k counts and N totals, over features positive in both:

        M = log2(k / N) - log2(k_r / N_r) ,   A = (log2(k / N) + log2(k_r / N_r)) / 2
        log2 factor = sum w M / sum w ,   1 / w = (N - k) / (N k) + (N_r - k_r) / (N_r k_r)

    the sums over features neither among the 30 % lowest or highest M nor among the 5 % lowest or highest A.

    Parameters
    ----------
    counts, reference : ndarrays of shape (n_features,)
        NaN takes no part.
    total, reference_total : float
        Library sizes N and N_r.

    Returns
    -------
    float
        1 where no feature is left.

    References
    ----------
    Robinson & Oshlack 2010, Genome Biology 11:R25.

    Examples
    --------
    Half of the reads of the second sample are of one new feature; the others are as they were:

    >>> one = np.arange(10.0, 110.0)
    >>> other = np.append(one, one.sum())
    >>> trimmed_mean_of_m(other, other.sum(), np.append(one, 0.0), one.sum())
    0.5
    """
    both = (counts > 0) & (reference > 0)
    k, r = counts[both], reference[both]
    high, low = np.log2(k / total), np.log2(r / reference_total)
    kept = _untrimmed(high - low, TRIM_M) & _untrimmed((high + low) / 2, TRIM_A)
    if not kept.any():
        return 1.0
    variance = ((total - k) / (total * k) + (reference_total - r) / (reference_total * r))[kept]
    weights = 1.0 / np.maximum(variance, np.finfo(float).tiny)
    return float(2.0 ** (np.sum(weights * (high - low)[kept]) / np.sum(weights)))


def _untrimmed(values: Matrix, share: float) -> Mask:
    """Return what is left when a share of the values is cut off at either end, by rank (ties in order)."""
    n = len(values)
    cut = int(np.floor(share * n))
    ranks = np.empty(n, dtype=np.intp)
    ranks[np.argsort(values, kind="stable")] = np.arange(n)
    kept: Mask = (ranks >= cut) & (ranks < n - cut)
    return kept


@dataclass(frozen=True)
class UpperQuartile(Settled):
    """Divides each sample's counts by their upper quartile, over the features positive in any training sample."""

    fewest: int = FEWEST_FOR_SCALE
    step: str = "size factors"
    rule: str = (
        "divides the counts of each sample by its upper quartile, which a quarter of its features exceed"
    )
    why: ClassVar[str] = (
        "samples are sequenced to unequal depth; the upper quartile is not moved by the few largest"
    )
    keys: ClassVar[tuple[str, ...]] = ("normalisation",)

    def fit(self, table: StepTable, context: FitContext) -> FittedUpperQuartile:  # noqa: ARG002
        """Return the step with the training samples' typical quartile."""
        used: Mask = np.any(table.values > 0, axis=0)
        if used.sum() < self.fewest:
            used = np.zeros_like(used)
        figures = upper_quartiles(table.values[:, used])
        typical = _geometric(figures)
        return FittedUpperQuartile(self, used, typical, Usual.of(_logs(figures / typical)))


@dataclass(frozen=True)
class FittedUpperQuartile:
    """Upper quartiles relative to the training samples' geometric mean."""

    settings: UpperQuartile
    used: Mask
    typical: float
    usual: Usual

    def factors(self, table: StepTable) -> Matrix:
        """Return the size factor of each sample, 1 where there are too few features."""
        if not self.used.any():
            return np.ones(len(table.samples))
        figures = upper_quartiles(table.values[:, self.used]) / self.typical
        return check_found("size factor", figures, table, int(self.used.sum()))

    def transform(self, table: StepTable) -> tuple[StepTable, StepAccount]:
        """Return counts divided by size factors."""
        factors = self.factors(table)
        used = int(self.used.sum())
        sentence = f"counts divided by the sample's upper quartile over {used:,} features"
        account = _account(self.settings, factors, table.samples, used, sentence, BULLARD, self.usual)
        return table.divided(factors), account


@dataclass(frozen=True)
class TrimmedMeans(Settled):
    """Divides each sample's counts by its effective library size: total times the trimmed mean of M.

    The reference is the training sample whose upper quartile, relative to its total, is nearest to the mean of
    these. Totals are over the features that are left.
    """

    fewest: int = FEWEST_FOR_SCALE
    step: str = "size factors"
    rule: str = (
        "divides the counts of each sample by its total, corrected by the trimmed mean of M: the typical log ratio to "
        "a reference sample, the most extreme features left out"
    )
    why: ClassVar[str] = (
        "a few features that take many reads push all others down; their ratios are trimmed away"
    )
    keys: ClassVar[tuple[str, ...]] = ("normalisation",)

    def fit(self, table: StepTable, context: FitContext) -> FittedTrimmedMeans:  # noqa: ARG002
        """Return the step with its reference sample."""
        counts = table.values
        totals = np.nansum(counts, axis=1)
        if counts.shape[1] < self.fewest:
            return FittedTrimmedMeans(self, np.empty(0), 1.0, 1.0, "", Usual.of(np.empty(0)))
        upper = upper_quartiles(counts) / totals
        row = int(np.nanargmin(np.abs(upper - np.nanmean(upper))))
        start = FittedTrimmedMeans(
            self, counts[row], float(totals[row]), 1.0, table.samples[row], Usual(0.0, np.inf)
        )
        raw = start.factors(table)
        typical = _geometric(raw)
        usual = Usual.of(_logs(raw / typical))
        return FittedTrimmedMeans(self, counts[row], float(totals[row]), typical, table.samples[row], usual)


@dataclass(frozen=True)
class FittedTrimmedMeans:
    """Effective library sizes relative to the training samples' geometric mean."""

    settings: TrimmedMeans
    reference: Matrix
    reference_total: float
    typical: float
    reference_sample: str
    usual: Usual

    def factors(self, table: StepTable) -> Matrix:
        """Return the size factor of each sample, 1 where there are too few features."""
        if not self.reference.size:
            return np.ones(len(table.samples))
        totals = np.nansum(table.values, axis=1)
        totals = check_found("size factor", np.where(totals > 0, totals, np.nan), table, self.reference.size)
        trimmed = [
            trimmed_mean_of_m(row, float(total), self.reference, self.reference_total)
            for row, total in zip(table.values, totals, strict=True)
        ]
        factors: Matrix = totals * np.array(trimmed) / self.typical
        return factors

    def transform(self, table: StepTable) -> tuple[StepTable, StepAccount]:
        """Return counts divided by size factors."""
        factors, used = self.factors(table), self.reference.size
        sentence = (
            f"counts divided by library size times the trimmed mean of M against sample '{self.reference_sample}', "
            f"over {used:,} features"
        )
        account = _account(
            self.settings, factors, table.samples, used, sentence, ROBINSON_OSHLACK, self.usual
        )
        return table.divided(factors), account


def _account(
    settings: UpperQuartile | TrimmedMeans,
    factors: Matrix,
    samples: tuple[str, ...],
    used: int,
    sentence: str,
    paper: str,
    usual: Usual,
) -> StepAccount:
    numbers: dict[str, float | int | str] = {
        "reference_features": used,
        **extremes("factor", factors, samples),
    }
    if not used:
        sentence = f"no size factors: fewer than {settings.fewest} features; counts taken as they are"
    cautions = usual.cautions("size factor", _logs(factors), samples)
    return StepAccount(settings.step, sentence, numbers, reference=paper, cautions=cautions)


def _geometric(figures: Matrix) -> float:
    positive = figures[figures > 0]
    return float(np.exp(np.log(positive).mean())) if positive.size else 1.0


def _logs(factors: Matrix) -> Matrix:
    """Return log2 of what is positive (NaN and zero left out would shift places: they become 0)."""
    usable = factors > 0
    return np.log2(factors, where=usable, out=np.zeros_like(factors))
