"""Gaps that stand for small amounts: the evidence for them, and draws from the low tail.

An instrument that cannot see small amounts leaves gaps in weak features more often than in strong ones.
Where the table shows that, the gaps of a weak feature with more gaps than strong ones have are
left-censored; its values are taken for the upper part of a normal distribution (on the log scale), fitted
by regression of the ordered values on normal quantiles, and gaps are drawn from the part below the limit.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from scipy.special import bdtrc, ndtr, ndtri, stdtr
from scipy.stats import rankdata

from workbench.prepare.tables import Mask, Matrix

FEWEST_FEATURES = 20
RATE_RATIO = 2.0
EVIDENCE_LEVEL = 0.01
FEATURE_LEVEL = 0.05
POOLED_WEIGHT = 4.0


@dataclass(frozen=True)
class Censoring:
    """What the training samples say about gaps and abundance.

    Attributes
    ----------
    evident : bool
        Whether missingness falls with abundance.
    censored : bool ndarray of shape (n_features,)
        Features whose gaps are taken for left-censored.
    low_rate, high_rate : float
        Share of gaps in the third of weakest and of strongest features.
    rank_correlation : float
        Spearman correlation, over features, of mean value and number of gaps (0 when undefined).
    """

    evident: bool
    censored: Mask
    low_rate: float
    high_rate: float
    rank_correlation: float


def find_censoring(values: Matrix) -> Censoring:
    """Return the evidence for left-censored gaps, and the features concerned.

    Evident means all of: at least 20 features; gaps at least twice as frequent in the weakest third of
    the features as in the strongest; one-sided p of the rank correlation under 0.01. A feature is
    censored when, further, it is not in the strongest third and has more gaps than the rate of the
    strongest third explains (binomial p under 0.05).

    Parameters
    ----------
    values : ndarray of shape (n_samples, n_features)
        Logarithms with NaN for gaps, at least one value per feature.
    """
    n, p = values.shape
    gaps = np.isnan(values).sum(axis=0)
    if p < FEWEST_FEATURES or not gaps.any():
        rate = float(gaps.mean() / n) if p else 0.0
        return Censoring(False, np.zeros(p, dtype=bool), rate, rate, 0.0)
    strength = rankdata(np.nansum(values, axis=0) / (n - gaps))
    weak, strong = strength <= p / 3, strength > 2 * p / 3
    low_rate, high_rate = float(gaps[weak].mean() / n), float(gaps[strong].mean() / n)
    correlation = float(np.corrcoef(strength, rankdata(gaps))[0, 1]) if np.ptp(gaps) else 0.0
    evident = low_rate >= RATE_RATIO * high_rate and _falls(correlation, p)
    chance = (gaps[strong].sum() + 0.5) / (n * strong.sum() + 1)
    excess = bdtrc(np.maximum(gaps - 1, 0), n, chance) < FEATURE_LEVEL
    return Censoring(evident, evident & excess & (gaps > 0) & ~strong, low_rate, high_rate, correlation)


def _falls(correlation: float, p: int) -> bool:
    """Return whether a rank correlation over p features is negative beyond chance."""
    unexplained = max(1.0 - correlation**2, 1e-12)
    return bool(stdtr(p - 2, correlation * np.sqrt((p - 2) / unexplained)) < EVIDENCE_LEVEL)


@dataclass(frozen=True)
class LowTails:
    """Normal distributions of censored features and the limits under which gaps are drawn.

    Attributes
    ----------
    mean, sd, limit : ndarrays of shape (n_features,)
        On the scale of the values.
    """

    mean: Matrix
    sd: Matrix
    limit: Matrix

    def draw(self, uniforms: Matrix) -> Matrix:
        """Return draws below the limit: the quantiles ``uniforms`` of the truncated normal.

        Parameters
        ----------
        uniforms : ndarray of shape (n_samples, n_features)
            Numbers in (0, 1).
        """
        below = ndtr((self.limit - self.mean) / self.sd)
        return self.mean + self.sd * ndtri(uniforms * below)


def fit_low_tails(values: Matrix) -> LowTails:
    """Return the low tails of censored features.

    The r-th smallest of m values, when a share g of the samples are gaps, stands at the probability
    g + (1 - g)(r - 1/2)/m; regression of the values on the normal quantiles of these gives mean and sd.
    The sd is drawn towards the median one of all features, which counts like four further values. The
    limit is the fitted quantile g, or the lowest value seen where that is lower.

    Parameters
    ----------
    values : ndarray of shape (n_samples, n_features)
        Logarithms with NaN for gaps; at least two values and one gap per feature.
    """
    n = len(values)
    ordered = np.sort(values, axis=0)
    seen = n - np.isnan(values).sum(axis=0)
    gap_share = 1.0 - seen / n
    ranks = np.arange(1, n + 1)[:, None]
    used = ranks <= seen
    quantiles = ndtri(np.where(used, gap_share + (1 - gap_share) * (ranks - 0.5) / seen, 0.5))
    heights = np.where(used, ordered, 0.0)
    quantile_mean, height_mean = (quantiles * used).sum(axis=0) / seen, heights.sum(axis=0) / seen
    spread = np.where(used, quantiles - quantile_mean, 0.0)
    slope = (spread * heights).sum(axis=0) / np.maximum((spread**2).sum(axis=0), 1e-12)
    pooled = np.median(slope[slope > 0]) if np.any(slope > 0) else 1.0
    sd = ((seen - 1) * slope + POOLED_WEIGHT * pooled) / (seen - 1 + POOLED_WEIGHT)
    mean = height_mean - sd * quantile_mean
    return LowTails(mean, sd, np.minimum(mean + sd * ndtri(gap_share), ordered[0]))
