"""The low tail of features whose gaps are left-censored: what lies there, expected or drawn.

On the log scale a feature's values are normal; a value is lost when it lies under the feature's detection
limit, or, whatever its size, by chance. The limit belongs to the instrument's scale: a sample that was
diluted, and scaled up for that, loses values that others keep. Filling its gaps as if the limit were the same
for all samples would write the dilution back into every weak feature. Mean and sd are those of a censored
normal sample (Tobin 1958, Econometrica 26:24-36), by expectation and maximisation (Dempster, Laird & Rubin
1977, JRSS B 39:1-38).
"""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray
from scipy.special import log_ndtr, ndtr, ndtri, ndtri_exp

from workbench.prepare.tables import Matrix

ROUNDS = 20
POOLED_WEIGHT = 4.0
SMALLEST_SD = 1e-6
LIMIT_STEPS = 6


@dataclass(frozen=True)
class LowTails:
    """Censored features: their distributions and detection limits.

    Attributes
    ----------
    mean, sd : ndarrays of shape (n_features,)
        Of the prepared values (log2), gaps included.
    limit : ndarray of shape (n_features,)
        Detection limit on the instrument's scale: in a sample with scale t, values under limit - t are lost.
    random_rate : float
        Share of values lost by chance.
    """

    mean: Matrix
    sd: Matrix
    limit: Matrix
    random_rate: float

    def heights(self, scale: Matrix) -> Matrix:
        """Return each cell's limit in standard deviations from the mean, (n_samples, n_features).

        Parameters
        ----------
        scale : ndarray of shape (n_samples,)
            What preparation has taken from the sample's logarithms (log2 of its dilution).
        """
        height: Matrix = (self.limit - scale[:, None] - self.mean) / self.sd
        return height

    def censored_chances(self, scale: Matrix) -> Matrix:
        """Return each cell's probability that a gap there is left-censored: F / (F + c (1 - F)).

        F is the normal probability of a value under the cell's limit, c the share lost by chance.
        """
        return self.chance(ndtr(self.heights(scale)))

    def chance(self, below: Matrix) -> Matrix:
        """Return F / (F + c (1 - F)) for the probabilities F."""
        chance: Matrix = below / np.maximum(below + self.random_rate * (1.0 - below), np.finfo(float).tiny)
        return chance

    def draw(self, uniforms: Matrix, scale: Matrix) -> Matrix:
        """Return values under the cells' limits: the quantiles ``uniforms`` of the truncated normals.

        Parameters
        ----------
        uniforms : ndarray of shape (n_samples, n_features)
            Numbers in (0, 1).
        scale : ndarray of shape (n_samples,)
            As in :meth:`heights`.

        Examples
        --------
        >>> tails = LowTails(np.array([10.0]), np.array([1.0]), np.array([9.0]), 0.0)
        >>> bool((tails.draw(np.array([[0.01], [0.99]]), np.array([0.0, 0.5])) < [[9.0], [8.5]]).all())
        True
        """
        drawn: Matrix = self.mean + self.sd * ndtri_exp(np.log(uniforms) + log_ndtr(self.heights(scale)))
        return drawn

    def expected(self, scale: Matrix) -> Matrix:
        """Return the values to be expected under the cells' limits, (n_samples, n_features).

        With h the height of the limit, phi and Phi density and distribution of a standard normal variable:

            E[x | x < limit] = mean - sd phi(h) / Phi(h)

        Examples
        --------
        >>> tails = LowTails(np.array([10.0]), np.array([1.0]), np.array([10.0]), 0.0)
        >>> tails.expected(np.array([0.0])).round(4).tolist()  # 10 less the square root of 2 / pi
        [[9.2021]]
        """
        expected: Matrix = self.mean - self.sd * hazard(self.heights(scale))
        return expected


def hazard(height: Matrix) -> Matrix:
    """Return phi(h) / Phi(h) of a standard normal variable, also far out."""
    ratio: Matrix = np.exp(-0.5 * height**2 - log_ndtr(height)) / np.sqrt(2.0 * np.pi)
    return ratio


def fit_low_tails(values: Matrix, scale: Matrix, random_rate: float) -> LowTails:
    """Return the low tails of censored features.

    Starting from the mean and sd of the values seen, 20 rounds of: the limit that loses as many values as
    there are gaps beyond chance; for each gap the expected value and variance under its limit, weighted by
    the chance that it is censored; new mean and variance. The variance is drawn to the squared median sd of
    all features, which counts like four further samples. In the rounds the samples' scales are taken for
    normal; the final limit is exact.

    Parameters
    ----------
    values : ndarray of shape (n_samples, n_features)
        Logarithms with NaN for gaps; at least one value per feature.
    scale : ndarray of shape (n_samples,)
        What preparation has taken from each sample's logarithms.
    random_rate : float
        Share of values lost by chance, under 1.
    """
    n, seen = len(values), _Seen.of(values)
    lost = (1.0 - seen.count / n - random_rate) / (1.0 - random_rate)
    quantile = ndtri(np.clip(lost, 0.5 / n, 1.0 - 0.5 / n))
    sd = _pooled_sd(seen.squares / seen.count, n)
    tails = LowTails(seen.mean, sd, seen.mean, random_rate)
    for _ in range(ROUNDS):
        limit = tails.mean + scale.mean() + quantile * np.sqrt(tails.sd**2 + scale.var())
        tails = _with_moments(replace(tails, limit=limit), seen, scale)
    for _ in range(LIMIT_STEPS):
        tails = _with_limit(tails, scale, quantile)
    return tails


@dataclass(frozen=True)
class _Seen:
    """Moments of the values seen of each feature, and where the gaps are."""

    n: int
    count: Matrix
    mean: Matrix
    squares: Matrix
    rows: NDArray[np.intp]
    columns: NDArray[np.intp]

    @classmethod
    def of(cls, values: Matrix) -> _Seen:
        gaps = np.isnan(values)
        count = (~gaps).sum(axis=0).astype(np.float64)
        mean = np.where(gaps, 0.0, values).sum(axis=0) / count
        squares = np.where(gaps, 0.0, (values - mean) ** 2).sum(axis=0)
        rows, columns = np.nonzero(gaps)
        return cls(len(values), count, mean, squares, rows, columns)

    def sums(self, weights: Matrix) -> Matrix:
        """Return the sum over each feature's gaps."""
        return np.bincount(self.columns, weights, minlength=self.count.size).astype(np.float64)


def _pooled_sd(variance: Matrix, n: int) -> Matrix:
    if not variance.size:
        return np.sqrt(variance)
    typical = float(np.median(np.sqrt(variance)))
    sd: Matrix = np.sqrt((n * variance + POOLED_WEIGHT * typical**2) / (n + POOLED_WEIGHT))
    return np.maximum(sd, SMALLEST_SD)


def _with_moments(tails: LowTails, seen: _Seen, scale: Matrix) -> LowTails:
    """Return mean and sd after one round; moments of a normal variable that is known to be under a limit."""
    here = seen.columns
    height = (tails.limit[here] - scale[seen.rows] - tails.mean[here]) / tails.sd[here]
    ratio = hazard(height)
    expected = tails.mean[here] - tails.sd[here] * ratio
    variance = tails.sd[here] ** 2 * np.clip(1.0 - height * ratio - ratio**2, 0.0, 1.0)
    weight = tails.chance(ndtr(height))
    total = seen.count + seen.sums(weight)
    mean = (seen.count * seen.mean + seen.sums(weight * expected)) / total
    within = seen.squares + seen.count * (seen.mean - mean) ** 2
    spread = within + seen.sums(weight * ((expected - mean[here]) ** 2 + variance))
    return replace(tails, mean=mean, sd=_pooled_sd(spread / total, seen.n))


def _with_limit(tails: LowTails, scale: Matrix, quantile: Matrix) -> LowTails:
    """Return the limits one step nearer, on normal quantiles, to the wanted number of lost values."""
    lost = np.clip(ndtr(tails.heights(scale)).mean(axis=0), 1e-9, 1.0 - 1e-9)
    spread = np.sqrt(tails.sd**2 + scale.var())
    return replace(tails, limit=tails.limit - (ndtri(lost) - quantile) * spread)
