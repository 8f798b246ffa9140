"""What a sceptic asks of a chosen pair.

Its rank correlation, its weakest value when any one sample is left out, and its correlation without the cells
that were filled in.
Only chosen pairs are looked at, a chunk at a time, so that nothing of size p x q is ever held.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.stats import rankdata

from workbench.engine.nuisance import Nuisance

FloatArray = NDArray[np.float64]
IndexArray = NDArray[np.intp]

CHUNK = 4096
LEAST_FREEDOM = 3


@dataclass(frozen=True, eq=False)
class EdgeEvidence:
    """Figures of chosen pairs, each of shape (n_pairs,).

    Attributes
    ----------
    spearman
        Spearman's correlation with the nuisance removed from the ranks.
    without_one
        The correlation of least absolute value among those that leave out one sample.
    observed
        Pearson's correlation on the samples in which neither end was imputed; NaN when fewer than
        three degrees of freedom are left.
    imputed_share
        Share of the samples in which one end or both were imputed.
    """

    spearman: FloatArray
    without_one: FloatArray
    observed: FloatArray
    imputed_share: FloatArray


def edge_evidence(
    x: FloatArray,
    y: FloatArray,
    i: IndexArray,
    j: IndexArray,
    *,
    nuisance: FloatArray | None = None,
    x_imputed: NDArray[np.bool_] | None = None,
    y_imputed: NDArray[np.bool_] | None = None,
) -> EdgeEvidence:
    """Return the evidence for the pairs ``(x[:, i[k]], y[:, j[k]])``.

    Parameters
    ----------
    x, y : ndarray of shape (n_samples, p) and (n_samples, q)
        Prepared values of the same samples.
    i, j : ndarray of int of shape (n_pairs,)
        Columns of ``x`` and of ``y``.
    nuisance : ndarray of shape (n_samples, c), optional
        Columns to be removed, the intercept not among them.
    x_imputed, y_imputed : ndarray of bool, optional
        Masks of the cells that were filled in.

    Notes
    -----
    With residuals ``e``, ``f`` and leverages ``h`` of the nuisance, leaving out sample ``t`` lowers the sum of
    products ``e'f`` by ``e_t f_t / (1 - h_t)``: the refitted correlation needs no refit (Cook & Weisberg
    1982, Residuals and Influence in Regression, section 2.2).

    Examples
    --------
    >>> x = np.array([[0.0], [1.0], [2.0], [3.0], [30.0]])
    >>> y = np.array([[1.0], [0.0], [1.0], [0.0], [30.0]])
    >>> pair = np.array([0])
    >>> edge_evidence(x, y, pair, pair).without_one.round(2)
    array([-0.45])
    """
    removed = Nuisance.of(nuisance, x.shape[0])
    ends_x, i = np.unique(i, return_inverse=True)
    ends_y, j = np.unique(j, return_inverse=True)
    x, y = x[:, ends_x], y[:, ends_y]
    gaps_x = np.zeros(x.shape, dtype=bool) if x_imputed is None else x_imputed[:, ends_x]
    gaps_y = np.zeros(y.shape, dtype=bool) if y_imputed is None else y_imputed[:, ends_y]
    spearman = _correlations(removed.residuals(_ranks(x)), removed.residuals(_ranks(y)), i, j)
    without_one = _without_one(removed, removed.residuals(x), removed.residuals(y), i, j)
    observed, share = _observed(x, y, i, j, nuisance, gaps_x, gaps_y)
    return EdgeEvidence(spearman, without_one, observed, share)


def _ranks(x: FloatArray) -> FloatArray:
    ranks: FloatArray = rankdata(x, axis=0).astype(np.float64)
    return ranks


def _ratio(products: FloatArray, squares: FloatArray) -> FloatArray:
    with np.errstate(invalid="ignore", divide="ignore"):
        ratio: FloatArray = np.clip(products / np.sqrt(squares), -1.0, 1.0)
    ratio[squares <= 0] = np.nan
    return ratio


def _correlations(e: FloatArray, f: FloatArray, i: IndexArray, j: IndexArray) -> FloatArray:
    squares = (e**2).sum(axis=0)[i] * (f**2).sum(axis=0)[j]
    products = np.empty(i.size)
    for start in range(0, i.size, CHUNK):
        part = slice(start, start + CHUNK)
        products[part] = np.einsum("ts,ts->s", e[:, i[part]], f[:, j[part]])
    return _ratio(products, squares)


def _without_one(removed: Nuisance, e: FloatArray, f: FloatArray, i: IndexArray, j: IndexArray) -> FloatArray:
    free = 1.0 - (removed.basis**2).sum(axis=1)
    # A sample that the nuisance fits by itself has no residual: leaving it out changes nothing.
    weight = np.where(free > 1e-10, 1.0 / np.maximum(free, 1e-10), 0.0)[:, None]
    weakest = np.empty(i.size)
    for start in range(0, i.size, CHUNK):
        part = slice(start, start + CHUNK)
        a, b = e[:, i[part]], f[:, j[part]]
        products = (a * b).sum(axis=0) - weight * a * b
        left = _ratio(products, _left(a, weight) * _left(b, weight))
        size = np.where(np.isnan(left), 0.0, np.abs(left))
        weakest[part] = np.where(np.isnan(left), 0.0, left)[size.argmin(axis=0), np.arange(size.shape[1])]
    return weakest


def _left(e: FloatArray, weight: FloatArray) -> FloatArray:
    """Return the sums of squares without each sample; rounding alone (under 1e-12 of the whole) is nothing."""
    whole = (e**2).sum(axis=0)
    left = whole - weight * e**2
    return np.where(left > 1e-12 * whole, left, 0.0)


def _observed(
    x: FloatArray,
    y: FloatArray,
    i: IndexArray,
    j: IndexArray,
    nuisance: FloatArray | None,
    gaps_x: NDArray[np.bool_],
    gaps_y: NDArray[np.bool_],
) -> tuple[FloatArray, FloatArray]:
    seen = np.empty(i.size)
    share = np.empty(i.size)
    patterns: dict[bytes, Nuisance | None] = {}
    for k in range(i.size):
        gaps = gaps_x[:, i[k]] | gaps_y[:, j[k]]
        share[k] = gaps.mean()
        key = gaps.tobytes()
        if key not in patterns:
            patterns[key] = _enough(nuisance, ~gaps)
        removed = patterns[key]
        seen[k] = np.nan if removed is None else _pearson(removed, x[~gaps, i[k]], y[~gaps, j[k]])
    return seen, share


def _enough(nuisance: FloatArray | None, kept: NDArray[np.bool_]) -> Nuisance | None:
    n = int(kept.sum())
    if n < LEAST_FREEDOM + 2:
        return None
    removed = Nuisance.of(None if nuisance is None else nuisance[kept], n)
    return removed if n - removed.rank - 1 >= LEAST_FREEDOM else None


def _pearson(removed: Nuisance, x: FloatArray, y: FloatArray) -> float:
    e, f = removed.residuals(x), removed.residuals(y)
    return float(_ratio(np.array([e @ f]), np.array([(e @ e) * (f @ f)]))[0])
