"""The evidence that gaps stand for small amounts.

An instrument that cannot see small amounts leaves gaps in weak features more often than in strong ones. Gaps
that come by chance do not know how strong a feature is.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from scipy.special import bdtrc, stdtr
from scipy.stats import rankdata

from workbench.prepare.tables import Mask, Matrix

FEWEST_FEATURES = 20
RATE_RATIO = 2.0
EVIDENCE_LEVEL = 0.01
FEATURE_LEVEL = 0.05


@dataclass(frozen=True)
class Censoring:
    """What the training samples say about gaps and abundance.

    Attributes
    ----------
    evident : bool
        Whether missingness falls with abundance.
    censored : bool ndarray of shape (n_features,)
        Features some of whose gaps are taken for left-censored.
    low_rate, high_rate : float
        Share of gaps in the third of weakest and of strongest features.
    random_rate : float
        Share of values lost by chance: that of the strongest third, half a gap added.
    rank_correlation : float
        Spearman correlation, over features, of mean value and number of gaps (0 when undefined).
    """

    evident: bool
    censored: Mask
    low_rate: float
    high_rate: float
    random_rate: float
    rank_correlation: float


def no_censoring(n_features: int) -> Censoring:
    """Return the statement that no gap is left-censored."""
    return Censoring(False, np.zeros(n_features, dtype=bool), 0.0, 0.0, 0.0, 0.0)


def find_censoring(values: Matrix) -> Censoring:
    """Return the evidence for left-censored gaps, and the features concerned.

    Evident means all of: at least 20 features; gaps at least twice as frequent in the weakest third of the
    features as in the strongest; one-sided p of the rank correlation under 0.01. A feature is censored when,
    further, it is not in the strongest third and has more gaps than the rate of the strongest third explains
    (binomial p under 0.05).

    Parameters
    ----------
    values : ndarray of shape (n_samples, n_features)
        Logarithms with NaN for gaps, at least one value per feature.
    """
    n, p = values.shape
    gaps = np.isnan(values).sum(axis=0)
    if p < FEWEST_FEATURES or not gaps.any():
        return no_censoring(p)
    strength = rankdata(np.nansum(values, axis=0) / (n - gaps))
    weak, strong = strength <= p / 3, strength > 2 * p / 3
    low_rate, high_rate = float(gaps[weak].mean() / n), float(gaps[strong].mean() / n)
    correlation = float(np.corrcoef(strength, rankdata(gaps))[0, 1]) if np.ptp(gaps) else 0.0
    evident = low_rate >= RATE_RATIO * high_rate and _falls(correlation, p)
    random_rate = float((gaps[strong].sum() + 0.5) / (n * strong.sum() + 1))
    beyond_chance = bdtrc(np.maximum(gaps - 1, 0), n, random_rate) < FEATURE_LEVEL
    censored = evident & beyond_chance & (gaps > 0) & ~strong
    return Censoring(evident, censored, low_rate, high_rate, random_rate, correlation)


def _falls(correlation: float, p: int) -> bool:
    """Return whether a rank correlation over p features is negative beyond chance."""
    unexplained = max(1.0 - correlation**2, 1e-12)
    return bool(stdtr(p - 2, correlation * np.sqrt((p - 2) / unexplained)) < EVIDENCE_LEVEL)
