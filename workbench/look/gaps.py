"""Where values are missing, and how values are spread in each sample before and after preparation."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.stats import rankdata

from workbench.look.view import BlockView

FloatArray = NDArray[np.float64]

MOST_BINS = 60
QUANTILES = (0.05, 0.25, 0.5, 0.75, 0.95)
ON_LOG_SCALE = ("counts", "intensities", "proportions")


@dataclass(frozen=True, eq=False)
class GapMap:
    """Missing values of a block as it was delivered.

    Attributes
    ----------
    share : float
        Missing share of all cells.
    by_sample : ndarray of shape (n_samples,)
    by_feature, abundance : ndarray of shape (n_measured,)
        Missing share of each feature, and its median where it has values (log10 for counts, intensities and
        proportions; NaN where it has none).
    bins : ndarray of shape (n_samples, n_bins)
        Missing share of each sample in bins of features, from the least to the most abundant; features
        without any value come first.
    bin_abundance : ndarray of shape (n_bins,)
        Median abundance in each bin.
    trend : float
        Rank correlation of missing share with abundance; NaN when nothing or everything is missing.
    scale : str
        What abundance is: ``log10 measured value`` or ``measured value``.
    """

    share: float
    by_sample: FloatArray
    by_feature: FloatArray
    abundance: FloatArray
    bins: FloatArray
    bin_abundance: FloatArray
    trend: float
    scale: str


@dataclass(frozen=True, eq=False)
class Distributions:
    """Quantiles (5, 25, 50, 75, 95 %) of every sample's values, shape (n_samples, 5), before and after."""

    measured: FloatArray | None
    prepared: FloatArray
    scale: str


def gap_map(view: BlockView) -> GapMap | None:
    """Missing values of the measured block, by sample, feature and abundance; None without measured values."""
    if view.measured is None:
        return None
    missing = np.isnan(view.measured)
    values, scale = on_reading_scale(view.measured, view.values)
    abundance = _medians(values.T)
    by_feature = missing.mean(axis=0)
    order = np.argsort(np.where(np.isnan(abundance), -np.inf, abundance), kind="stable")
    parts = np.array_split(order, min(MOST_BINS, order.size))
    return GapMap(
        float(missing.mean()),
        missing.mean(axis=1),
        by_feature,
        abundance,
        np.column_stack([missing[:, part].mean(axis=1) for part in parts]),
        np.array([_medians(abundance[part][None, :])[0] for part in parts]),
        _rank_correlation(by_feature, abundance),
        scale,
    )


def distributions(view: BlockView) -> Distributions:
    """Spread of every sample's values before and after preparation."""
    prepared = np.quantile(view.prepared, QUANTILES, axis=1).T
    if view.measured is None:
        return Distributions(None, prepared, "")
    values, scale = on_reading_scale(view.measured, view.values)
    rows = [row[~np.isnan(row)] for row in values]
    measured = np.array(
        [np.quantile(row, QUANTILES) if row.size else np.full(len(QUANTILES), np.nan) for row in rows]
    )
    return Distributions(measured, prepared, scale)


def on_reading_scale(measured: FloatArray, kind: str) -> tuple[FloatArray, str]:
    """Measured values on the scale on which they are read: log10 where they span orders of magnitude.

    Counts get 1 added; other values that are not positive have no logarithm and become missing.
    """
    if kind not in ON_LOG_SCALE:
        return measured, "measured value"
    if kind == "counts":
        return np.log10(measured + 1.0), "log10(count + 1)"
    positive = np.where(measured > 0.0, measured, np.nan)
    return np.log10(positive), "log10 measured value"


def _medians(rows: FloatArray) -> FloatArray:
    """Median of the values of each row, NaN for a row without any."""
    held = ~np.isnan(rows).all(axis=1)
    medians = np.full(rows.shape[0], np.nan)
    if held.any():
        medians[held] = np.nanmedian(rows[held], axis=1)
    return medians


def _rank_correlation(one: FloatArray, other: FloatArray) -> float:
    """Spearman correlation of the places where both have values; NaN when one of them is constant."""
    held = ~(np.isnan(one) | np.isnan(other))
    if held.sum() < 3 or np.ptp(one[held]) == 0.0 or np.ptp(other[held]) == 0.0:
        return float("nan")
    return float(np.corrcoef(rankdata(one[held]), rankdata(other[held]))[0, 1])
